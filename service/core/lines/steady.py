"""Steady one-dimensional answers where exponentials have no say: the limit gamma = 0 of the Laplace domain."""

from __future__ import annotations

import math
from collections.abc import Iterator
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from service.core.lines.line import PRIMITIVE, Line, Order, WallDrive, wall_distance
from service.core.lines.places import Places
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]


def half_line_wall(s: FloatArray, film: float, order: Order) -> FloatArray:
    """A half-line at rest takes the held value or the ambient; under an inflow it falls in a straight line."""
    if film == 0.0:
        return (-0.5 * s * s, -np.ones_like(s), -s)[(1, -1, 0).index(order)]
    return (s, np.zeros_like(s), np.ones_like(s))[(1, -1, 0).index(order)]


def closed_line_wall(line: Line, drive: WallDrive, coordinates: FloatArray, order: Order) -> FloatArray:
    """(l - s)^2 / 2l - l / 6: an inflow at one end taken out evenly all along, with mean zero."""
    d, length = wall_distance(line, coordinates, high=not drive.high), line.extent
    towards = 1.0 if drive.high else -1.0
    if order == 0:
        return d * d / (2 * length) - length / 6
    if order == -1:
        return towards * d / length
    return towards * (d**3 / (6 * length) - d * length / 6)


def half_line_profile(line: Line, profiles: Profiles, places: Places) -> FloatArray:
    """The steady answer of an endless line to generation on a bounded part of it.

    Green's function is min(x, x') + 1 / H, or -max(x, x') with an insulated end, or -|x - x'| / 2 without ends; with
    the last two a constant is left open. What the profiles come to far away is left out.
    """
    columns = np.zeros((places.low.size, profiles.n_profiles))
    for start, stop, left, slope in _bounded_pieces(line, profiles):
        if places.high is None:
            even, rising = _half_line_piece(line, places.low * line.scale, start, stop, places.order)
        else:
            upper = _half_line_piece(line, places.high * line.scale, start, stop, PRIMITIVE)
            lower = _half_line_piece(line, places.low * line.scale, start, stop, PRIMITIVE)
            even, rising = upper[0] - lower[0], upper[1] - lower[1]
        columns += even[:, None] * left + rising[:, None] * slope
    return columns


def _bounded_pieces(line: Line, profiles: Profiles) -> Iterator[tuple[float, float, FloatArray, FloatArray]]:
    """Pieces with their scaled ends, the profiles at the lower one and their slopes, less what they are far along.

    Generation that has no end has to cancel between the drives of a body, so that each may go without it; on a line
    without ends it is taken off on either side of 0.
    """
    finite = profiles.knots[np.isfinite(profiles.knots)]
    cuts = finite if line.has_low_end else np.unique([0.0, *finite])
    for low, high in pairwise(cuts):
        piece = int(np.searchsorted(profiles.knots, 0.5 * (low + high))) - 1
        slope, far = profiles.slopes[piece], profiles.left[0 if high <= 0.0 else -1]
        left = (
            profiles.left[piece]
            if np.isinf(profiles.knots[piece])
            else profiles.left[piece] + slope * (low - profiles.knots[piece])
        )
        yield float(low * line.scale), float(high * line.scale), left - far, slope / line.scale


def _half_line_piece(
    line: Line, x: FloatArray, start: float, stop: float, order: Order
) -> tuple[FloatArray, FloatArray]:
    """Answer to 1 and to (x' - start) on one piece: polynomials in x, by moments of the piece to the right of x."""
    width = stop - start
    whole = (width, width**2 / 2)
    first_moment = (start * whole[0] + whole[1], start * whole[1] + width**3 / 3)
    answers = []
    for n in range(2):
        # Beyond[k] is the k-fold integral from x to infinity of the piece's generation, k = 1, 2, 3.
        beyond = [_beyond(x, start, width, n, k) for k in (1, 2, 3)]
        # U = integral of min(x, x') f = first moment - twofold integral beyond x
        level = whole[n] / line.film_low if 0 < line.film_low < math.inf else 0.0
        constant = first_moment[n] + level
        if not line.has_low_end:
            # -|x - x'| / 2 = min(x, x') - (x + x') / 2
            half = 0.5 * first_moment[n]
            value, slope = half - beyond[1] - 0.5 * whole[n] * x, beyond[0] - 0.5 * whole[n]
            primitive = half * x + beyond[2] - 0.25 * whole[n] * x * x
        elif line.film_low == 0.0:
            # -max(x, x') = min(x, x') - x - x'
            value, slope, primitive = -beyond[1] - whole[n] * x, beyond[0] - whole[n], beyond[2] - whole[n] * x * x / 2
        else:
            value, slope = constant - beyond[1], beyond[0]
            primitive = constant * x + beyond[2]
        answers.append({0: value, -1: slope, 1: primitive}[order])
    return answers[0], answers[1]


def _beyond(x: FloatArray, start: float, width: float, power: int, fold: int) -> FloatArray:
    """The k-fold integral from x upwards of (x' - start)^power on [start, start + width], zero elsewhere."""
    y = np.clip(x - start, 0.0, width)
    rest = width - y
    # Inside the piece: integral of (x' - y)^(k-1) / (k-1)! times x'^power from y to width.
    inside = rest**fold / math.factorial(fold)
    if power == 1:
        inside = y * inside + rest ** (fold + 1) * fold / math.factorial(fold + 1)
    # Left of the piece the moments are taken about x.
    before = np.maximum(start - x, 0.0)
    total = inside
    for shift in range(1, fold):
        lower = width ** (fold - shift) / math.factorial(fold - shift)
        if power == 1:
            lower = width ** (fold - shift + 1) * (fold - shift) / math.factorial(fold - shift + 1)
        total = total + np.where(before > 0, before**shift / math.factorial(shift) * lower, 0.0)
    return total
