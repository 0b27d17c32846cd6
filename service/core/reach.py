"""How far the disturbance of a face reaches into the body.

The disturbance of a face is the field that its own data drive, counted from the level that most other faces share, with
the homogeneous conditions of all of them: the part of the whole field that would go if the face were quiet. It has no
extreme inside, nor on sides that are held at zero, lose to an ambient of zero or are insulated (maximum principle), so
that its largest size on a section never grows with the distance from the face. The distance at which it falls below a
fraction is thus one number, found by bracketing, and a value above the fraction at a smaller distance and below it at a
larger one prove how far that number may be off.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from service.core import extremes, field
from service.core.conditions import Held, map_of
from service.core.decay_rates import DecayRate, decay_rates
from service.core.endless import neighbourhood
from service.core.errors import NotPhysical
from service.core.faces import Face, axes_along, axis_of, is_high
from service.core.field import KeepGoing, Setting
from service.core.lone_face import disturbed, level_of_others
from service.core.profiles import Profiles
from service.core.span import span_of
from service.core.split import lines_of, parts_of
from service.core.time_range import has_decay, is_undying, widest

FloatArray = NDArray[np.float64]

# Distances of the first look, from this part of the farthest on, and places along each axis of the section.
NEAREST, DISTANCES, SECTION_PLACES = 1e-6, 60, 13

# Accuracy of the first look, in parts of the largest size.
FIRST_LOOK = 1e-5

# Along an endless axis the look is taken so many widths far at first, and at the most where nothing decays
# exponentially.
FAR_AT_FIRST, FAR_AT_MOST = 16.0, 1e9

# Rounds of finding the worst place and the distance there, which converge quadratically, and the accuracy of the place
# in parts of the size that is wanted; then steps of Newton's method to the accuracy asked for.
MOST_ROUNDS, PLACE, MOST_CORRECTIONS = 12, 1e-5, 6

# The highest and the lowest potential of a section are both followed where neither is larger by so much.
ALIKE = 0.8

# A fraction is told from what is near it if the accuracy is this part of it.
FINER = 1e-3

# A proof is tried with bounds wider by this factor from one try to the next.
WIDER, MOST_TRIES = 3.0, 30


@dataclass(frozen=True)
class Reached:
    """Where the disturbance has fallen below a fraction of its largest size on the face.

    distance: from the face, along its axis; error_bound: of that. at: the place (x, y, z) that falls below last.
    Where it never falls below all three are None, and left is what is left of it at the far end, in parts of its
    largest size.
    """

    fraction: float
    distance: float | None
    error_bound: float | None
    at: tuple[float, float, float] | None
    left: float | None = None


@dataclass(frozen=True)
class Reach:
    """How far the disturbance of a face reaches.

    reference: the level its data are counted from. largest, largest_bound: its largest size on the face.
    worst: over the whole section. on_axis: in its middle, empty where it has none, being endless.
    rates: decay rates along the axis of the face, the slowest first; empty where the section has no separate modes.
    """

    reference: float
    largest: float
    largest_bound: float
    worst: tuple[Reached, ...]
    on_axis: tuple[Reached, ...]
    rates: tuple[DecayRate, ...]


def reach(
    setting: Setting,
    face: Face,
    fractions: Sequence[float],
    *,
    unit: bool,
    modes: int,
    tolerance: float,
    keep_going: KeepGoing | None = None,
) -> Reach:
    """How far the data of a face reach, or with `unit` a change of them by the same all over the face.

    fractions: of the largest size on the face, each between 0 and 1. modes: how many decay rates are listed.
    tolerance: in parts of the largest size on the face; finer where a fraction asks for it.
    Raises NotPhysical where the face has no disturbance of its own.
    """
    tolerance = min(tolerance, FINER * min(fractions))
    disturbance = _Disturbance(setting, face, unit, tolerance, keep_going)
    worst = tuple(disturbance.over_the_section(fraction) for fraction in fractions)
    middle = disturbance.middle
    on_axis = () if middle is None else tuple(disturbance.on_the_axis(fraction, middle) for fraction in fractions)
    rates = decay_rates(setting, axis_of(face), modes)
    return Reach(disturbance.reference, disturbance.largest, disturbance.largest_bound, worst, on_axis, rates)


class _Disturbance:
    """The field of one face alone, by distance from it."""

    def __init__(
        self, setting: Setting, face: Face, unit: bool, tolerance: float, keep_going: KeepGoing | None
    ) -> None:
        self.reference = level_of_others(setting.body, face)
        body = disturbed(setting.body, face, self.reference, unit=unit)
        lines, parts = lines_of(body), parts_of(body, 0.0)
        if not parts:
            raise NotPhysical(
                f"The face {face} disturbs nothing: its data are at the level of the others. Ask for the reach of a "
                "uniform change of them.",
                ("face",),
            )
        self.setting = Setting(body, lines, parts, 0.0, span_of(body, lines, parts))
        self.keep_going = keep_going
        self.axis = axis_of(face)
        self.end = body.end_of(face)
        self.inward = -1.0 if is_high(face) else 1.0
        self.length = body.size[self.axis]
        data = map_of(body.faces[face])
        assert data is not None
        self.signs = tuple(sign for sign, most in ((1.0, data.highest), (-1.0, -data.lowest)) if most > 0.0)
        self.section = [self._section_places(axis) for axis in axes_along(self.axis)]
        if isinstance(body.faces[face], Held):
            self.largest, self.largest_bound = max(abs(data.lowest), abs(data.highest)), data.error
        else:
            # The size on the face is not among the data; the accuracy it is asked to refers to what is found first.
            rough = float(np.abs(self._on_section(np.zeros(1), FIRST_LOOK * self.setting.span)).max())
            _, self.largest, self.largest_bound = self._worst(0.0, tolerance * rough)
        self.tolerance = tolerance * self.largest

    def over_the_section(self, fraction: float) -> Reached:
        """Where the largest size over a section falls below a fraction of that on the face."""
        wanted = fraction * self.largest
        distances, sizes = self._first_look(wanted)
        above = np.flatnonzero(sizes >= wanted)
        at, value, bound = self._worst(float(distances[-1]), self.tolerance)
        if value + bound >= wanted:
            return Reached(fraction, None, None, None, value / self.largest)
        near, far = float(distances[above[-1]]) if above.size else 0.0, float(distances[-1])
        step = self._step_at(near, far, lambda place: self._worst(place, self.tolerance)[1:], wanted)
        if step is not None:
            return Reached(fraction, step, 0.0, self._place(at, step))
        guess = float(distances[min(above[-1] + 1, distances.size - 1)]) if above.size else float(distances[1])
        rough = max(PLACE * wanted, self.tolerance)
        for _ in range(MOST_ROUNDS):
            place, _, _ = self._worst(guess, rough)
            found = self._crossing(place, wanted, near, far)
            if abs(found - guess) <= rough / self._slope(place, found):
                break
            # The place that is worst at a distance is above the fraction at no larger one than the section is.
            guess = near = found
        distance = found
        for _ in range(MOST_CORRECTIONS):
            place, value, bound = self._worst(distance, self.tolerance)
            slope = self._slope(place, distance)
            distance = min(max(distance + (value - wanted) / slope, 0.0), far)
            if abs(value - wanted) <= bound:
                break
        room = (bound + fraction * self.largest_bound) / slope
        return Reached(fraction, distance, self._proved(place, distance, fraction, room), self._place(place, distance))

    def on_the_axis(self, fraction: float, middle: tuple[float, float, float]) -> Reached:
        """Where the size in the middle of the section falls below a fraction of the largest size on the face."""
        wanted = fraction * self.largest
        distances, _ = self._first_look(wanted)
        sizes, bound = self._along(middle, distances)
        if sizes[-1] + bound >= wanted:
            return Reached(fraction, None, None, None, float(sizes[-1]) / self.largest)
        above = np.flatnonzero(sizes >= wanted)
        if above.size:
            near, far = float(distances[above[-1]]), float(distances[above[-1] + 1])
        else:
            # It may rise behind the face, and above what is wanted between the places looked at.
            top, value, _ = self._largest_in([np.array([middle[axis]]) for axis in axes_along(self.axis)], distances)
            if value < wanted:
                return Reached(fraction, 0.0, 0.0, self._place(middle, 0.0))
            near, far = abs(top[self.axis] - self.end), float(distances[-1])

        def size(distance: float) -> tuple[float, float]:
            found, bound = self._along(middle, np.array([distance]))
            return float(found[0]), bound

        step = self._step_at(near, far, size, wanted)
        if step is not None:
            return Reached(fraction, step, 0.0, self._place(middle, step))
        found = self._crossing(middle, wanted, near, far)
        _, bound = self._along(middle, np.array([found]))
        room = 2.0 * (bound + fraction * self.largest_bound) / self._slope(middle, found)
        return Reached(fraction, found, room, self._place(middle, found))

    def _step_at(
        self, near: float, far: float, size: Callable[[float], tuple[float, float]], wanted: float
    ) -> float | None:
        """The distance of a contact between two layers in whose step a size passes what is wanted."""
        if self.axis != 2:
            return None
        for interface in self.setting.body.interfaces:
            sides = abs(interface - self.end), abs(math.nextafter(interface, math.inf) - self.end)
            before, beyond = min(sides), max(sides)
            if near <= before and beyond <= far:
                (above, above_bound), (below, below_bound) = size(before), size(beyond)
                if above - above_bound >= wanted > below + below_bound:
                    return before
        return None

    def _first_look(self, wanted: float) -> tuple[FloatArray, FloatArray]:
        """Distances out to where the size has fallen below what is wanted if it ever does, and sizes on the section."""
        limit = self.length
        far = limit
        if math.isinf(limit):
            width = widest(self.setting.lines) / self.setting.lines[self.axis].scale
            decays = has_decay(self.setting.lines) or is_undying(self.setting.lines)
            limit = field.far_along(self.setting, self.axis) if decays else FAR_AT_MOST * width
            far = min(FAR_AT_FIRST * width, limit)
        accuracy = FIRST_LOOK * self.largest
        while far < limit and self._on_section(np.array([far]), min(accuracy, 0.1 * wanted)).max() >= 0.5 * wanted:
            far = min(4.0 * far, limit)
        distances = np.concatenate([[0.0], far * np.geomspace(NEAREST, 1.0, DISTANCES)])
        return distances, self._on_section(distances, min(accuracy, 0.1 * wanted))

    def _on_section(self, distances: FloatArray, tolerance: float) -> FloatArray:
        """The largest size on a grid over the section at each distance."""
        order = np.argsort(self.inward * distances, kind="stable")
        axes = self._axes(self.section, self._coordinates(distances)[order])
        values = np.abs(self._field(axes, tolerance).potential)
        sizes = np.moveaxis(values, self.axis, 0).reshape(distances.size, -1).max(axis=1)
        found = np.empty_like(sizes)
        found[order] = sizes
        return found

    def _worst(self, distance: float, tolerance: float) -> tuple[tuple[float, float, float], float, float]:
        """The place of a section where the disturbance is largest, its size there, and what it may be off by."""
        return self._largest_in(self.section, np.array([distance]), tolerance)

    def _largest_in(
        self, section: Sequence[FloatArray], distances: FloatArray, tolerance: float | None = None
    ) -> tuple[tuple[float, float, float], float, float]:
        """The same of all sections within some distances, over a part of the section."""
        accuracy = self.tolerance if tolerance is None else tolerance
        axes = list(self._axes(section, np.sort(self._coordinates(distances))))
        signs = self.signs
        if len(signs) > 1:
            rough = self._field(axes, FIRST_LOOK * self.setting.span).potential
            sizes = {sign: float((sign * rough).max()) for sign in signs}
            signs = tuple(sign for sign in signs if sizes[sign] >= ALIKE * max(sizes.values()))
        peaks = [extremes.highest_among(self.setting, axes, accuracy, self.keep_going, sign) for sign in signs]
        best = max(peaks, key=lambda peak: abs(peak.value))
        return best.position, abs(best.value), max(peak.error_bound for peak in peaks)

    def _along(self, place: tuple[float, float, float], distances: FloatArray) -> tuple[FloatArray, float]:
        """Sizes at distances behind a place of the section, and their bound."""
        points = np.tile(np.array(place), (distances.size, 1))
        points[:, self.axis] = self._coordinates(distances)
        found = field.at_points(
            self.setting, points, tolerance=self.tolerance, with_flux=False, keep_going=self.keep_going
        )
        return np.abs(found.potential), found.potential_bound

    def _crossing(self, place: tuple[float, float, float], wanted: float, near: float, far: float) -> float:
        """Where the size behind a place falls to what is wanted, between two distances."""

        def excess(distance: float) -> float:
            sizes, _ = self._along(place, np.array([distance]))
            return float(sizes[0]) - wanted

        if excess(near) <= 0.0:
            return near
        return float(brentq(excess, near, far, xtol=1e-15 * far, rtol=1e-13))

    def _slope(self, place: tuple[float, float, float], distance: float) -> float:
        """How fast the size falls with distance behind a place."""
        step = 1e-3 * max(distance, NEAREST * self._width())
        sizes, _ = self._along(place, np.array([max(distance - step, 0.0), min(distance + step, self.length)]))
        ends = max(distance - step, 0.0), min(distance + step, self.length)
        return max(float(sizes[0] - sizes[1]), self.tolerance) / (ends[1] - ends[0])

    def _proved(self, place: tuple[float, float, float], distance: float, fraction: float, room: float) -> float:
        """A bound on the error of a distance: before it the disturbance is above the fraction, beyond it below."""
        wanted, off = fraction * self.largest, fraction * self.largest_bound
        for _ in range(MOST_TRIES):
            before, beyond = max(distance - room, 0.0), min(distance + room, self.length)
            sizes, bound = self._along(place, np.array([before]))
            above = before == 0.0 or float(sizes[0]) - bound > wanted + off
            _, value, bound = self._worst(beyond, self.tolerance)
            if above and value + bound < wanted - off:
                return room
            room *= WIDER
        return max(distance, self.length - distance)

    def _field(self, axes: Sequence[FloatArray], tolerance: float) -> field.Field:
        grid = field.Grid(axes[0], axes[1], axes[2])
        return field.on_grid(self.setting, grid, tolerance=tolerance, with_flux=False, keep_going=self.keep_going)

    def _axes(self, section: Sequence[FloatArray], along: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        axes = dict(zip(axes_along(self.axis), section, strict=True)) | {self.axis: along}
        return axes[0], axes[1], axes[2]

    def _coordinates(self, distances: FloatArray) -> FloatArray:
        return np.clip(self.end + self.inward * distances, self.setting.body.begins[self.axis], self.length)

    def _section_places(self, axis: int) -> FloatArray:
        """Places across: an even spread with its ends, and the middles of the patches and readings of the face.

        Along an endless axis also far away, where the field is the same all along.
        """
        low, high = neighbourhood(self.setting.lines, axis)
        places = [np.linspace(low, high, SECTION_PLACES)]
        body = self.setting.body
        places += [np.array([field.far_along(self.setting, axis)])] if math.isinf(body.size[axis]) else []
        places += [np.array([field.far_along(self.setting, axis, high=False)])] if body.infinite[axis] else []
        for part in self.setting.parts:
            drive = part.drives[axis]
            if not isinstance(drive, Profiles) or drive.is_curved:
                continue
            knots = drive.knots[np.isfinite(drive.knots)]
            middles = 0.5 * (knots[1:] + knots[:-1])
            places.append(middles[np.linspace(0, middles.size - 1, min(middles.size, SECTION_PLACES)).astype(int)])
        return np.unique(np.concatenate(places))

    @property
    def middle(self) -> tuple[float, float, float] | None:
        """The middle of the section; of an endless one the middle of what is disturbed, None if that is everything."""
        middle = [0.0, 0.0, 0.0]
        for axis in axes_along(self.axis):
            low, high = self.setting.lines[axis].stretch
            if low == high:
                return None
            middle[axis] = 0.5 * (low + high)
        middle[self.axis] = self.end
        return middle[0], middle[1], middle[2]

    def _width(self) -> float:
        return self.length if math.isfinite(self.length) else widest(self.setting.lines)

    def _place(self, place: tuple[float, float, float], distance: float) -> tuple[float, float, float]:
        moved = list(place)
        moved[self.axis] = float(self._coordinates(np.array([distance]))[0])
        return moved[0], moved[1], moved[2]
