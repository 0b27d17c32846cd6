"""Rectangular pads on half-spaces, quarter-spaces and eighth-spaces in closed form, to thirty digits by mpmath.

With a unit inflow on x1 < x < x2, y1 < y < y2 of the plane z = 0 of an isotropic half-space of conductivity 1

    u = 1 / (2 pi) sum over corners of +-F(x - x_i, y - y_j, z)
    F = X asinh(Y / sqrt(X^2 + z^2)) + Y asinh(X / sqrt(Y^2 + z^2)) - z atan(X Y / (z sqrt(X^2 + Y^2 + z^2)))

(Love, Phil. Trans. A 228, 1929, section 5, the logarithmic potential of a rectangle; Carslaw and Jaeger 1959, section
10.5, on the surface). With unit held pads in a plane held at 0, u is the solid angle of the pads over 2 pi, -du/dz of
the same field. Ends of half-lines add mirror images, with the opposite sign where they are held.
"""

from __future__ import annotations

import random
from dataclasses import dataclass
from itertools import product
from typing import Any

from mpmath import mp, mpf

from service.core import AXES, Body, Condition, Face, FaceMap, Held, Inflow, Insulated, Patch, Rectangle

Place = tuple[float, float, float]
INFINITY = float("inf")

DIGITS = 40

# What the axes along the plane of the pads may be.
AXES_ALONG = ("infinite", "insulated", "held")


@dataclass(frozen=True)
class OpenPad:
    """A pad of unit inflow, or held at 1, on z = 0 of a body without far faces.

    along: what the x and y axes are: "infinite", or half-lines with an "insulated" or "held" end.
    """

    conductivity: tuple[float, float, float]
    along: tuple[str, str]
    where: Rectangle
    is_held: bool

    def body(self) -> Body:
        """The core's body."""
        infinite = (self.along[0] == "infinite", self.along[1] == "infinite", False)
        begins = (-INFINITY if infinite[0] else 0.0, -INFINITY if infinite[1] else 0.0)
        pad = FaceMap.patches((INFINITY, INFINITY), 0.0, [Patch(self.where, 1.0)], begins=begins)
        faces: dict[Face, Condition] = {"z_low": Held(pad) if self.is_held else Inflow(pad)}
        ends: dict[str, Condition] = {"insulated": Insulated(), "held": Held(FaceMap.uniform(0.0))}
        for axis, kind in zip(AXES[:2], self.along, strict=True):
            if kind != "infinite":
                faces[f"{axis}_low"] = ends[kind]  # type: ignore[index]
        return Body((INFINITY,) * 3, self.conductivity, faces, infinite=infinite)

    def potential_and_flux(self, place: Place) -> tuple[mpf, tuple[mpf, mpf, mpf]]:
        """Exact values; the flux not on the border of the pad, nor on z = 0 beside a held pad's."""
        with mp.workdps(DIGITS):
            k = [mpf(value) for value in self.conductivity]
            scale = [1 / mp.sqrt(value) for value in k]
            x, y, z = (mpf(value) * factor for value, factor in zip(place, scale, strict=True))
            total, slopes = mpf(0), [mpf(0)] * 3
            for sign, (p, q) in self._corners():
                value, gradient = _corner(x - p * scale[0], y - q * scale[1], z, self.is_held)
                total += sign * value
                slopes = [slope + sign * part for slope, part in zip(slopes, gradient, strict=True)]
            strength = 1 / (2 * mp.pi) if self.is_held else scale[2] / (2 * mp.pi)
            fluxes = [-mp.sqrt(value) * strength * slope for value, slope in zip(k, slopes, strict=True)]
            return strength * total, (fluxes[0], fluxes[1], fluxes[2])

    def _corners(self) -> list[tuple[int, tuple[mpf, mpf]]]:
        """Corners of the pad and of its images with their signs."""
        where = self.where
        along = []
        for kind, low, high in zip(self.along, (where.p_low, where.q_low), (where.p_high, where.q_high), strict=True):
            marks = [(1, mpf(low)), (-1, mpf(high))]
            image = {"infinite": 0, "insulated": 1, "held": -1}[kind]
            # The image reaches from -high to -low.
            marks += [(image, -mpf(high)), (-image, -mpf(low))] if image else []
            along.append(marks)
        return [(a * b, (p, q)) for (a, p), (b, q) in product(*along)]


def _corner(x: Any, y: Any, z: Any, is_held: bool) -> tuple[Any, tuple[Any, Any, Any]]:
    """F and its slopes, or the solid angle of a quadrant's corner and its slopes."""
    r = mp.sqrt(x * x + y * y + z * z)
    if not is_held:
        first, second = _asinh_ratio(y, x, z), _asinh_ratio(x, y, z)
        angle = _angle(x, y, z, r)
        return x * first + y * second - z * angle, (first, second, -angle)
    angle = _angle(x, y, z, r)
    slopes = (
        y * z / ((x * x + z * z) * r),
        x * z / ((y * y + z * z) * r),
        -x * y * (x * x + y * y + 2 * z * z) / ((x * x + z * z) * (y * y + z * z) * r),
    )
    return angle, slopes


def _asinh_ratio(a: Any, b: Any, z: Any) -> Any:
    """asinh(a / sqrt(b^2 + z^2)); what it grows like at a corner itself is multiplied by nothing there."""
    across = mp.sqrt(b * b + z * z)
    return mp.asinh(a / across) if across else mpf(0)


def _angle(x: Any, y: Any, z: Any, r: Any) -> Any:
    return mp.atan(x * y / (z * r)) if z else mp.pi / 2 * mp.sign(x * y)


def random_pad(seed: int) -> OpenPad:
    """A pad of any shape in a body of any kind."""
    rng = random.Random(seed)
    conductivity = tuple(10.0 ** rng.uniform(-2, 2) for _ in range(3))
    along = (rng.choice(AXES_ALONG), rng.choice(AXES_ALONG))
    ends = []
    for kind in along:
        width = 10.0 ** rng.uniform(-3, 1)
        low = rng.choice([0.0, 10.0 ** rng.uniform(-3, 1)])
        low = low if kind != "infinite" else rng.choice([-0.5 * width, rng.uniform(-5, 5)])
        ends.extend([low, low + width])
    return OpenPad(
        (conductivity[0], conductivity[1], conductivity[2]), along, Rectangle(*ends), is_held=rng.random() < 0.5
    )


def places_of(pad: OpenPad, seed: int) -> dict[str, Place]:
    """Places where a pad is hard, near and far, off its border."""
    rng = random.Random(seed)
    where = pad.where
    middle = (0.5 * (where.p_low + where.p_high), 0.5 * (where.q_low + where.q_high))
    wide, high = where.p_high - where.p_low, where.q_high - where.q_low
    return {
        "on the pad": (where.p_low + 0.3 * wide, where.q_low + 0.8 * high, 0.0),
        "just inside its border": (where.p_low + 2.0**-20 * wide, middle[1], 0.0),
        "just beside it": (where.p_high + 2.0**-20 * wide, middle[1], 0.0),
        "just below it": (middle[0], middle[1], 1e-6),
        "below its corner": (where.p_high, where.q_high, 0.1 * min(wide, high)),
        "in the body": (middle[0] + rng.random() * wide, middle[1] + rng.random() * high, rng.random()),
        "far away": (middle[0] + 1e3, middle[1] + 30.0, 200.0),
        "very far away": (middle[0] + 1e6, middle[1], 1e5),
    }
