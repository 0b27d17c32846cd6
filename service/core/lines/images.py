"""A line at short times, an endless one at all times: the free solution and one image in each end there is.

A profile is known by its breaks: at each knot a jump J of the value and a jump S of the slope. Started from such a
profile, the heat equation u_t = u_xx moves away from it only by smooth steps and kinks that spread from the breaks,

    u(x, t) = f(x) + sum over breaks of [ -J sgn(d) g_0(|d|) + S g_1(|d|) ],   d = x - x_break

and an end answers each of them with its image at the distance x + x_break (or mirrored); see `kernels` for both. The
departure u - f keeps its own digits however small it is, which the flux on a held face needs.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from service.core.lines.kernels import end_part, free, reflected, where_arrived, with_its_image
from service.core.lines.line import PRIMITIVE, Breaks, Line, Order, breaks_of, wall_distance
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]

# Up to this t / l^2 the second image is below exp(-1 / (4 * 0.006)) = 8e-19 of the first. See modes for later times.
LATEST = 0.006

# A piece of a profile is summed from its inside once it is narrower than sqrt(t) by this factor; its two breaks then
# cancel to a sixtieth.
NARROW = 16.0

# With more pieces than this none is summed from its inside: neighbouring readings differ little, and their breaks
# cancel little.
MOST_PIECES = 12


def departure(
    line: Line, profiles: Profiles, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    """u - f (order 0), its slope (-1) or antiderivative (1), shape (n_points, n_times, n_profiles).

    What a piece much narrower than sqrt t sends out is summed from its inside, since its two breaks nearly cancel.
    """
    overlap = int(np.searchsorted(root_time, narrow_from(line, profiles)))
    if order == PRIMITIVE or overlap == root_time.size:
        return from_breaks(line, profiles, coordinates, root_time, order)
    piece, rest = narrowest_piece(profiles)
    late = departure(line, rest, coordinates, root_time[overlap:], order)
    late += _from_piece(line, piece, coordinates, root_time[overlap:], order)
    if order == 0:
        late -= (profiles.at(coordinates) - rest.at(coordinates))[:, None, :]
    else:
        late -= (profiles.slope_at(coordinates) - rest.slope_at(coordinates))[:, None, :] / line.scale
    early = from_breaks(line, profiles, coordinates, root_time[:overlap], order)
    return np.concatenate([early, late], axis=1)


def narrow_from(line: Line, profiles: Profiles) -> float:
    """The sqrt t from which on the narrowest piece is summed from its inside, infinite if none ever is."""
    if profiles.left.shape[0] > MOST_PIECES:
        return math.inf
    return NARROW * profiles.narrowest * line.scale


@lru_cache(maxsize=512)
def narrowest_piece(profiles: Profiles) -> tuple[Profiles, Profiles]:
    """The narrowest piece of profiles that is not zero, alone, and the profiles with zero in its place."""
    index = profiles.narrowest_index
    low, high = profiles.knots[index], profiles.knots[index + 1]
    piece = Profiles(np.array([low, high]), profiles.left[index : index + 1], profiles.right[index : index + 1])
    left, right = profiles.left.copy(), profiles.right.copy()
    left[index] = right[index] = 0.0
    return piece, Profiles(profiles.knots, left, right)


def _from_piece(
    line: Line, piece: Profiles, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    """What a piece narrow against sqrt t sends out: the point source and its images, by quadrature over the piece.

    The error of five points is below (1 / NARROW)^10.
    """
    nodes, weights = np.polynomial.legendre.leggauss(5)
    low, high = piece.knots
    at = 0.5 * (low + high) + 0.5 * (high - low) * nodes
    share = 0.5 * (1.0 + nodes)[:, None]
    values = (1.0 - share) * piece.left + share * piece.right
    amounts = (0.5 * (high - low) * line.scale * weights)[:, None] * values
    return from_points(line, at, amounts, coordinates, root_time, order)


def from_points(
    line: Line, at: FloatArray, amounts: FloatArray, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    """Point sources of amounts, shape (n_points, n_profiles), and their images."""
    difference = (coordinates[:, None] - at) * line.scale
    kernel: int = order - 1
    side = np.sign(difference)
    sign = -1.0 if order == 0 else 1.0
    total = _sum(lambda d, t: free(kernel, d, t), np.abs(difference), root_time, amounts, None if order == 0 else -side)
    if order == PRIMITIVE:
        # The antiderivative of a point source that is odd about it.
        total += 0.5 * (side @ amounts)[:, None, :]
    if line.has_low_end:
        from_low = wall_distance(line, coordinates, high=False)[:, None] + at * line.scale
        total += _sum(lambda d, t: reflected(kernel, d, t, line.film_low), from_low, root_time, sign * amounts)
    if not line.is_endless:
        from_high = wall_distance(line, coordinates, high=True)[:, None] + (line.length - at) * line.scale
        total += _sum(lambda d, t: reflected(kernel, d, t, line.film_high), from_high, root_time, -amounts)
    return np.asarray(total)


def from_breaks(
    line: Line, profiles: Profiles, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    """The departure, or its slope or antiderivative, from each break and its images."""
    breaks = breaks_of(line, profiles)
    first = 1 if line.has_low_end else 0
    last = breaks.knots.size if line.is_endless else breaks.knots.size - 1
    total = np.zeros((coordinates.size, root_time.size, profiles.n_profiles))
    if line.has_low_end:
        low = wall_distance(line, coordinates, high=False)[:, None]
        total += _from_end(low, root_time, line.film_low, breaks, 0, order)
    if not line.is_endless:
        high = wall_distance(line, coordinates, high=True)[:, None]
        total += _from_end(high, root_time, line.film_high, breaks, last, order)
    if last > first:
        total += _from_inside(line, breaks, slice(first, last), coordinates, root_time, order)
    return total


def _from_end(
    distance: FloatArray, root_time: FloatArray, film: float, breaks: Breaks, index: int, order: Order
) -> FloatArray | float:
    """What the break on an end sends out, together with its own image: J (g + rho) and S K."""
    inward = 1.0 if index == 0 else -1.0
    sign = -inward if order == 0 else 1.0
    end = slice(index, index + 1)
    total: FloatArray | float = 0.0
    if film > 0.0:
        total = _sum(lambda d, t: with_its_image(order, d, t, film), distance, root_time, sign * breaks.jumps[end])
    if not breaks.has_slopes:
        return total
    slope_jump = breaks.slope_jumps[end]
    if order == 0:
        return total + _sum(lambda d, t: end_part(1, d, t, film), distance, root_time, slope_jump)
    if order == -1:
        return total + _sum(lambda d, t: end_part(0, d, t, film), distance, root_time, -inward * slope_jump)
    # The antiderivative of K_1 from the end on.
    constant = 0.5 * root_time[:, None] ** 2 * (inward * slope_jump)
    return total + constant + _sum(lambda d, t: end_part(2, d, t, film), distance, root_time, -inward * slope_jump)


def _from_inside(
    line: Line, breaks: Breaks, inner: slice, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray | float:
    """What breaks inside the line send out, and their images in both ends."""
    knots, jumps, slope_jumps = breaks.knots[inner], breaks.jumps[inner], breaks.slope_jumps[inner]
    difference = (coordinates[:, None] - knots) * line.scale
    # On a jump the mean of both sides is meant.
    side, distance = np.sign(difference), np.abs(difference)
    jump_side, slope_side = (-side, None) if order == 0 else (None, -side)
    sign = -1.0 if order == 0 else 1.0
    total = _sum(lambda d, t: free(order, d, t), distance, root_time, jumps, jump_side)
    if breaks.has_slopes:
        total += _sum(lambda d, t: free(order + 1, d, t), distance, root_time, slope_jumps, slope_side)
        if order == 1:
            total += np.einsum("pb,t,br->ptr", side, 0.5 * root_time**2, slope_jumps)
    if line.has_low_end:
        low = wall_distance(line, coordinates, high=False)[:, None] + knots * line.scale
        total += _sum(lambda d, t: reflected(order, d, t, line.film_low), low, root_time, sign * jumps)
        if breaks.has_slopes:
            total += _sum(lambda d, t: reflected(order + 1, d, t, line.film_low), low, root_time, sign * slope_jumps)
    if line.is_endless:
        return total
    high = wall_distance(line, coordinates, high=True)[:, None] + (line.length - knots) * line.scale
    total += _sum(lambda d, t: reflected(order, d, t, line.film_high), high, root_time, jumps)
    if breaks.has_slopes:
        total += _sum(lambda d, t: reflected(order + 1, d, t, line.film_high), high, root_time, -slope_jumps)
    return total


def _sum(
    kernel: Callable[[FloatArray, FloatArray], FloatArray],
    distance: FloatArray,
    root_time: FloatArray,
    weights: FloatArray,
    side: FloatArray | None = None,
) -> FloatArray | float:
    """Sum over breaks of kernel times weight (times the side): distance (n_points, n_breaks) to (n_points, n_times, r).

    Computed only where a front has arrived.
    """
    values = where_arrived(kernel, distance[:, :, None], root_time)
    if side is not None:
        values *= side[:, :, None]
    if weights.shape[0] == 1:
        return values[:, 0, :, None] * weights[0]
    return np.asarray(values.transpose(0, 2, 1) @ weights)
