"""A line at short times, an endless one at all times: the free solution and one image in each end there is.

A profile is known by its breaks: at each knot a jump J of the value and a jump S of the slope. Started from such a
profile, the heat equation u_t = u_xx moves away from it only by smooth steps and kinks that spread from the breaks,

    u(x, t) = f(x) + sum over breaks of [ -J sgn(d) g_0(|d|) + S g_1(|d|) ],   d = x - x_break

    g_n(d) = (2 sqrt t)^n i^n erfc(d / 2 sqrt t) / 2        (repeated integrals of erfc; -g_n' = g_(n-1))

and an end answers each of them with its image at the distance s = x + x_break (or mirrored),

    rho_n(s) = g_n(s) - K_n(s),      K_0 = exp(H s + H^2 t) erfc(s / 2 sqrt t + H sqrt t),   -K_n' = K_(n-1)

where K = 0 for a held end and K_n = 2 g_n for an insulated one. The departure u - f keeps its own digits however
small it is, which the flux on a held face needs. Sources: Carslaw and Jaeger 1959, sections 2.2, 14.2 and appendix II.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfc, erfcx

from service.core.lines.line import PRIMITIVE, Breaks, Line, Order, WallDrive, breaks_of, wall_distance
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]

SQRT_PI = math.sqrt(math.pi)

# Up to this t / l^2 the second image is below exp(-1 / (4 * 0.006)) = 8e-19 of the first. See modes for later times.
LATEST = 0.006

# A piece of a profile is summed from its inside once it is narrower than sqrt(t) by this factor; its two breaks then
# cancel to a sixtieth.
NARROW = 16.0

# With more pieces than this none is summed from its inside: neighbouring readings differ little, and their breaks
# cancel little.
MOST_PIECES = 12

# All that changes along an endless line is seen as so many point sources once sqrt(t) is NARROW times as wide. What
# their moments leave out is below 2 (1 / (4 NARROW))^10 / 10! of the derivative of order 10 in width: 1e-22.
AFAR_POINTS = 10

# Points of the quadrature over an interval no wider than sqrt(t): exact to rounding for a Gauss function that wide.
SMOOTH_POINTS = 12

# A front has arrived within this many sqrt(t): beyond it exp(-w^2) is below 1e-19.
ARRIVAL = 13.2

# Below this H sqrt(t) the differences that define K_1 and K_2 cancel, by 1 / (2 eta) once and twice, and their power
# series is short: so many terms, the next being below 1e-17.
SMALL_FILM = {1: 0.02, 2: 0.1}
SERIES_TERMS = {1: 9, 2: 13}

# Beyond this argument 1 / sqrt(pi) - y erfcx(y) cancels, and its asymptotic series is at rounding with 13 terms.
LARGE_ARGUMENT = 10.0


def free(order: int, distance: FloatArray, root_time: FloatArray) -> FloatArray:
    """g_n for n = -2 to 2 at distances >= 0; root_time is sqrt(t), both of shape (n,)."""
    w = distance / (2 * root_time)
    if order == 0:
        return np.asarray(0.5 * erfc(w))
    gauss = np.exp(-w * w)
    if order == -1:
        return gauss / (2 * SQRT_PI * root_time)
    if order == -2:
        return w * gauss / (2 * SQRT_PI * root_time**2)
    if order == 1:
        return root_time * (gauss / SQRT_PI - w * erfc(w))
    return 0.5 * root_time**2 * ((1 + 2 * w * w) * erfc(w) - 2 / SQRT_PI * w * gauss)


def derivative_of_erfcx(y: FloatArray, erfcx_of_y: FloatArray) -> FloatArray:
    """-erfcx'(y) / 2 = 1 / sqrt(pi) - y erfcx(y), for y >= 0, to 2e-14 of itself."""
    plain = 1 / SQRT_PI - y * erfcx_of_y
    large = y > LARGE_ARGUMENT
    if not large.any():
        return plain
    square = 1.0 / (2.0 * y[large] ** 2)
    series = np.ones_like(square)
    for k in range(13, 0, -1):
        series = 1.0 - (2 * k + 1) * square * series
    plain[large] = square * series / SQRT_PI
    return plain


def film_part(order: int, distance: FloatArray, root_time: FloatArray, film: float) -> FloatArray:
    """K_n for n = -2 to 2 of an end with film H > 0, finite."""
    w = distance / (2 * root_time)
    eta = film * root_time
    if order == 0:
        return np.asarray(np.exp(-w * w) * erfcx(w + eta))
    if order == -1:
        y = w + eta
        scaled = erfcx(y)
        # exp(-w^2) / sqrt(pi t) - H K_0, written without the difference
        return np.exp(-w * w) / root_time * (derivative_of_erfcx(y, scaled) + w * scaled)
    if order == -2:
        return w * np.exp(-w * w) / (SQRT_PI * root_time**2) - film * film_part(-1, distance, root_time, film)
    below = film_part(order - 1, distance, root_time, film)
    values = (2 * free(order - 1, distance, root_time) - below) / film
    small = eta < SMALL_FILM[order]
    values[small] = _small_film(order, distance[small], root_time[small], film)
    return values


def _small_film(order: int, distance: FloatArray, root_time: FloatArray, film: float) -> FloatArray:
    """K_n = 2 sum over k of (-H)^k g_(n+k), which follows from K_n = 2 g_n - H K_(n+1)."""
    before, this = free(order - 1, distance, root_time), free(order, distance, root_time)
    total, factor = 2 * this, 2.0
    for k in range(1, SERIES_TERMS[order]):
        n = order + k
        # n g_n = 2 t g_(n-2) - d g_(n-1)
        before, this = this, (2 * root_time**2 * before - distance * this) / n
        factor *= -film
        total = total + factor * this
    return total


def end_part(order: int, distance: FloatArray, root_time: FloatArray, film: float) -> FloatArray:
    """K_n of any end: 0 if held, 2 g_n if insulated."""
    if film == math.inf:
        return np.zeros_like(distance)
    if film == 0.0:
        return 2 * free(order, distance, root_time)
    return film_part(order, distance, root_time, film)


def reflected(order: int, distance: FloatArray, root_time: FloatArray, film: float) -> FloatArray:
    """rho_n = g_n - K_n for n = -2 to 2: what an end adds at the mirrored distance."""
    return free(order, distance, root_time) - end_part(order, distance, root_time, film)


def with_its_image(order: int, distance: FloatArray, root_time: FloatArray, film: float) -> FloatArray:
    """g_n + rho_n: a jump on the end itself together with its image; exactly 0 on an insulated end."""
    if film == 0.0:
        return np.zeros_like(distance)
    if film == math.inf:
        return 2 * free(order, distance, root_time)
    # 2 g_n - K_n = H K_(n+1), which keeps its digits next to an end that is nearly insulated.
    return film * film_part(order + 1, distance, root_time, film)


def departure(
    line: Line, profiles: Profiles, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    """u - f (order 0), its slope (-1) or antiderivative (1), shape (n_points, n_times, n_profiles).

    What a piece much narrower than sqrt t sends out is summed from its inside, since its two breaks nearly cancel.
    """
    overlap = int(np.searchsorted(root_time, narrow_from(line, profiles)))
    if order == PRIMITIVE or overlap == root_time.size:
        return _from_breaks(line, profiles, coordinates, root_time, order)
    piece, rest = narrowest_piece(profiles)
    late = departure(line, rest, coordinates, root_time[overlap:], order)
    late += _from_piece(line, piece, coordinates, root_time[overlap:], order)
    if order == 0:
        late -= (profiles.at(coordinates) - rest.at(coordinates))[:, None, :]
    else:
        late -= (profiles.slope_at(coordinates) - rest.slope_at(coordinates))[:, None, :] / line.scale
    early = _from_breaks(line, profiles, coordinates, root_time[:overlap], order)
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
        total += _from_breaks(line, seen.step, coordinates, root_time, order)
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


def _from_breaks(
    line: Line, profiles: Profiles, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
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
    values = _where_arrived(kernel, distance[:, :, None], root_time)
    if side is not None:
        values *= side[:, :, None]
    if weights.shape[0] == 1:
        return values[:, 0, :, None] * weights[0]
    return np.asarray(values.transpose(0, 2, 1) @ weights)


def _where_arrived(
    kernel: Callable[[FloatArray, FloatArray], FloatArray], distance: FloatArray, root_time: FloatArray
) -> FloatArray:
    arrived = np.flatnonzero(distance < ARRIVAL * root_time)
    values = np.zeros(distance.size * root_time.size)
    at, when = np.divmod(arrived, root_time.size)
    values[arrived] = kernel(distance.ravel()[at], root_time[when])
    return values.reshape(*distance.shape[:-1], root_time.size)


def wall_kernel(
    line: Line, drive: WallDrive, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    """Response to a unit pulse of an end's data, shape (n_points, n_times, 1).

    Held: s / (2 sqrt(pi) t^(3/2)) exp(-s^2 / 4t). Film: H K_(-1). Insulated: exp(-s^2 / 4t) / sqrt(pi t).
    The image in the far end is below exp(-1 / (4 LATEST)) for the times this serves.
    """
    values = _wall_values(line, drive, wall_distance(line, coordinates, high=drive.high), root_time, order)
    # Away from the high end is towards the low one.
    return (values if order == 0 or not drive.high else -values)[:, :, None]


def wall_integrals(
    line: Line, drive: WallDrive, low: FloatArray, high: FloatArray, root_time: FloatArray
) -> FloatArray:
    """The same response integrated over intervals, in scaled length, shape (n_intervals, n_times, 1).

    While an interval is wide against sqrt(t) by the antiderivative at its ends, then by quadrature over the smooth
    response: the two ends would cancel.
    """
    ends = (high, low) if drive.high else (low, high)
    near, far = (wall_distance(line, end, high=drive.high) for end in ends)
    total = _wall_values(line, drive, far, root_time, PRIMITIVE) - _wall_values(line, drive, near, root_time, PRIMITIVE)
    widths = (high - low) * line.scale
    narrow = np.flatnonzero(widths <= root_time[-1]) if root_time.size else np.zeros(0, dtype=int)
    if narrow.size:
        nodes, weights = np.polynomial.legendre.leggauss(SMOOTH_POINTS)
        half = 0.5 * widths[narrow, None]
        first = int(np.searchsorted(root_time, float(widths[narrow].min())))
        # In distances from the end, so that those next to it keep their digits.
        places = (near[narrow, None] + half * (1.0 + nodes)).ravel()
        values = _wall_values(line, drive, places, root_time[first:], 0).reshape(narrow.size, SMOOTH_POINTS, -1)
        smooth = np.einsum("npt,p->nt", values, weights) * half
        total[narrow, first:] = np.where(widths[narrow, None] <= root_time[first:], smooth, total[narrow, first:])
    return total[:, :, None]


def _wall_values(line: Line, drive: WallDrive, distance: FloatArray, root_time: FloatArray, order: Order) -> FloatArray:
    """Response to a pulse at distances from the end that is driven, shape (n_places, n_times)."""
    film = line.film_high if drive.high else line.film_low

    def kernel(distance: FloatArray, root: FloatArray) -> FloatArray:
        w = distance / (2 * root)
        if film == math.inf:
            return _held_kernel(w, root, order)
        return _insulated_kernel(w, root, order) if film == 0.0 else _film_kernel(w, root, film, order)

    return _where_arrived(kernel, distance[:, None], root_time)


def _held_kernel(w: FloatArray, root_time: FloatArray, order: Order) -> FloatArray:
    gauss = np.exp(-w * w) / SQRT_PI
    if order == 0:
        return w * gauss / root_time**2
    if order == -1:
        return (1 - 2 * w * w) * gauss / (2 * root_time**3)
    return -gauss / root_time


def _insulated_kernel(w: FloatArray, root_time: FloatArray, order: Order) -> FloatArray:
    gauss = np.exp(-w * w) / SQRT_PI
    if order == 0:
        return gauss / root_time
    if order == -1:
        return -w * gauss / root_time**2
    return -np.asarray(erfc(w))


def _film_kernel(w: FloatArray, root_time: FloatArray, film: float, order: Order) -> FloatArray:
    eta = film * root_time
    y = w + eta
    scaled = erfcx(y)
    gauss = film * np.exp(-w * w)
    if order == 0:
        return gauss / root_time * (derivative_of_erfcx(y, scaled) + w * scaled)
    if order == -1:
        return gauss / root_time**2 * ((eta - w) * derivative_of_erfcx(y, scaled) - w * w * scaled)
    return -gauss * scaled
