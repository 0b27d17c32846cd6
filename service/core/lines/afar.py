"""Profiles of an endless line once sqrt t is far wider than all that changes along them: a step and ten point sources.

The sources have the moments of what they stand for, each with its image in the end that a half-line has.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from service.core.lines.images import NARROW, from_breaks, from_points
from service.core.lines.kernels import SQRT_PI, film_part
from service.core.lines.line import PRIMITIVE, Line, Order
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]

# All that changes along an endless line is seen as so many point sources once sqrt(t) is NARROW times as wide. What
# their moments leave out is below 2 (1 / (4 NARROW))^10 / 10! of the derivative of order 10 in width: 1e-22.
AFAR_POINTS = 10


@dataclass(frozen=True, eq=False)
class Afar:
    """Profiles of an endless line as they are seen once sqrt(t) is at least `root_time`.

    step: what they are far along the line. at, amounts: point sources in place of the rest, (n,) and (n, n_profiles).
    width: scaled, of what the sources stand for.
    """

    step: Profiles
    at: FloatArray
    amounts: FloatArray
    width: float

    @property
    def root_time(self) -> float:
        """The sqrt t from which on this is exact to rounding."""
        return NARROW * self.width


@lru_cache(maxsize=512)
def seen_from_afar(line: Line, profiles: Profiles) -> Afar | None:
    """Profiles of an endless line as seen from afar; None if they are a step or the same all along."""
    far_low, far_high = profiles.left[:1], profiles.right[-1:]
    there = np.isfinite(profiles.widths)
    rises = there & (np.any(profiles.left != far_high, axis=1) | np.any(profiles.right != far_high, axis=1))
    if not rises.any():
        return None
    pieces = np.flatnonzero(rises)
    start, stop = profiles.knots[pieces[0]], profiles.knots[pieces[-1] + 1]
    if line.has_low_end or (far_low == far_high).all():
        step = Profiles(np.array([line.begins, math.inf]), far_high.copy(), far_high.copy())
    else:
        values = np.concatenate([far_low, far_high])
        step = Profiles(np.array([-math.inf, profiles.knots[1], math.inf]), values, values.copy())
        start = profiles.knots[1]
    nodes, weights = np.polynomial.legendre.leggauss(AFAR_POINTS)
    inner, shares = np.polynomial.legendre.leggauss(AFAR_POINTS // 2 + 1)
    middle, half = 0.5 * (start + stop), 0.5 * (stop - start)
    moments = np.zeros((AFAR_POINTS, profiles.n_profiles))
    for piece in pieces:
        low, high = profiles.knots[piece], profiles.knots[piece + 1]
        at = 0.5 * (low + high) + 0.5 * (high - low) * inner
        share = 0.5 * (1.0 + inner)[:, None]
        values = (1.0 - share) * profiles.left[piece] + share * profiles.right[piece] - far_high
        polynomials = np.polynomial.legendre.legvander((at - middle) / half, AFAR_POINTS - 1)
        moments += polynomials.T @ (0.5 * (high - low) * line.scale * shares[:, None] * values)
    # The polynomial that is 1 at a node and 0 at the others, in Legendre polynomials.
    basis = np.polynomial.legendre.legvander(nodes, AFAR_POINTS - 1) * (np.arange(AFAR_POINTS) + 0.5)
    amounts = weights[:, None] * (basis @ moments)
    return Afar(step, middle + half * nodes, amounts, float(2 * half * line.scale))


def from_afar(line: Line, seen: Afar, coordinates: FloatArray, root_time: FloatArray, order: Order) -> FloatArray:
    """u itself (order 0), its slope (-1), or its antiderivative (1) less that of the step, (n_points, n_times, r)."""
    if line.film_low > 0.0 and order != PRIMITIVE:
        total = _taken_up(line, seen, coordinates, root_time, order)
    else:
        total = from_points(line, seen.at, seen.amounts, coordinates, root_time, order)
    if seen.step.left.any():
        total += from_breaks(line, seen.step, coordinates, root_time, order)
        if order == 0:
            total += seen.step.at(coordinates)[:, None, :]
    return total


def _taken_up(line: Line, seen: Afar, coordinates: FloatArray, root_time: FloatArray, order: Order) -> FloatArray:
    """Point sources before an end that is held or has a film, each with its image before the two cancel.

    With a film the part K_(-1) of the image is a source itself, and adds to what a held end leaves.
    """
    x, source = coordinates[:, None, None] * line.scale, (seen.at * line.scale)[:, None]
    difference, distance = x - source, x + source
    point = np.exp(-((difference / (2 * root_time)) ** 2)) / (2 * SQRT_PI * root_time)
    taken = np.expm1(-x * source / root_time**2)
    if order == 0:
        kernel = -point * taken
    else:
        kernel = (2 * source * point * (1 + taken) + difference * point * taken) / (2 * root_time**2)
    if line.film_low < math.inf:
        returned = film_part(order - 1, distance, root_time, line.film_low)
        kernel = kernel + (returned if order == 0 else -returned)
    return np.asarray(kernel.transpose(0, 2, 1) @ seen.amounts)
