"""A line at short times: the free solution and one image in each end.

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

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfc, erfcx

from service.core.lines.line import Line, Order, WallDrive, breaks_of, wall_distance
from service.core.maps import Profiles

FloatArray = NDArray[np.float64]

SQRT_PI = math.sqrt(math.pi)

# Up to this t / l^2 the second image is below exp(-1 / (4 * 0.006)) = 8e-19 of the first. See modes for later times.
LATEST = 0.006

# Below this H sqrt(t) the differences that define K_1 and K_2 cancel, and their power series is short.
SMALL_FILM = 0.1
SERIES_TERMS = 13

# Beyond this argument 1 / sqrt(pi) - y erfcx(y) cancels, and its asymptotic series is at rounding with 13 terms.
LARGE_ARGUMENT = 10.0


def free(order: int, distance: FloatArray, root_time: FloatArray) -> FloatArray:
    """g_n for n = -1, 0, 1, 2 at distances >= 0; root_time is sqrt(t), of a shape that broadcasts."""
    w = distance / (2 * root_time)
    if order == 0:
        return np.asarray(0.5 * erfc(w))
    gauss = np.exp(-w * w)
    if order == -1:
        return gauss / (2 * SQRT_PI * root_time)
    if order == 1:
        return root_time * (gauss / SQRT_PI - w * erfc(w))
    return 0.5 * root_time**2 * ((1 + 2 * w * w) * erfc(w) - 2 / SQRT_PI * w * gauss)


def derivative_of_erfcx(y: FloatArray) -> FloatArray:
    """-erfcx'(y) / 2 = 1 / sqrt(pi) - y erfcx(y), for y >= 0, to 2e-14 of itself."""
    large = y > LARGE_ARGUMENT
    square = 1.0 / (2.0 * np.where(large, y, LARGE_ARGUMENT) ** 2)
    series = np.ones_like(square)
    for k in range(13, 0, -1):
        series = 1.0 - (2 * k + 1) * square * series
    moderate = np.where(large, 0.0, y)
    return np.where(large, square * series / SQRT_PI, 1 / SQRT_PI - moderate * erfcx(moderate))


def film_part(order: int, distance: FloatArray, root_time: FloatArray, film: float) -> FloatArray:
    """K_n for n = -1, 0, 1, 2 of an end with film H > 0, finite."""
    w = distance / (2 * root_time)
    eta = film * root_time
    if order == 0:
        return np.asarray(np.exp(-w * w) * erfcx(w + eta))
    if order == -1:
        y = w + eta
        # exp(-w^2) / sqrt(pi t) - H K_0, written without the difference
        return np.exp(-w * w) / root_time * (derivative_of_erfcx(y) + w * erfcx(y))
    below = film_part(order - 1, distance, root_time, film)
    by_difference = (2 * free(order - 1, distance, root_time) - below) / film
    if eta.min() >= SMALL_FILM:
        return by_difference
    return np.where(eta < SMALL_FILM, _small_film(order, distance, root_time, film), by_difference)


def _small_film(order: int, distance: FloatArray, root_time: FloatArray, film: float) -> FloatArray:
    """K_n = 2 sum over k of (-H)^k g_(n+k), which follows from K_n = 2 g_n - H K_(n+1)."""
    before, this = free(order - 1, distance, root_time), free(order, distance, root_time)
    total, factor = 2 * this, 2.0
    root_time = np.where(film * root_time < SMALL_FILM, root_time, 0.0)
    for k in range(1, SERIES_TERMS):
        n = order + k
        # n g_n = 2 t g_(n-2) - d g_(n-1)
        before, this = this, (2 * root_time**2 * before - distance * this) / n
        factor *= -film
        total = total + factor * this
    return total


def reflected(order: int, distance: FloatArray, root_time: FloatArray, film: float) -> FloatArray:
    """rho_n for n = -1, 0, 1, 2: what an end adds at the mirrored distance."""
    if film == math.inf:
        return free(order, distance, root_time)
    if film == 0.0:
        return -free(order, distance, root_time)
    return free(order, distance, root_time) - film_part(order, distance, root_time, film)


def departure(
    line: Line, profiles: Profiles, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    """u - f (order 0), its slope (-1) or antiderivative (1), shape (n_points, n_times, n_profiles)."""
    knots, jumps, slope_jumps = breaks_of(line, profiles)
    total = _from_breaks(line, knots, jumps, slope_jumps, coordinates, root_time, order)
    inner = slice(None) if line.is_endless else slice(0, -1)
    low = (wall_distance(line, coordinates, high=False)[:, None] + knots[inner] * line.scale)[:, :, None]
    sign = -1.0 if order == 0 else 1.0
    total += sign * _contract(lambda n: reflected(n, low, root_time, line.film_low), jumps[inner], order)
    total += sign * _contract(lambda n: reflected(n, low, root_time, line.film_low), slope_jumps[inner], order + 1)
    if not line.is_endless:
        high = wall_distance(line, coordinates, high=True)[:, None] + (line.length - knots[1:]) * line.scale
        high = high[:, :, None]
        total += _contract(lambda n: reflected(n, high, root_time, line.film_high), jumps[1:], order)
        total -= _contract(lambda n: reflected(n, high, root_time, line.film_high), slope_jumps[1:], order + 1)
    return total


def _contract(kernel: Callable[[int], FloatArray], weights: FloatArray, order: int) -> FloatArray | float:
    """Sum over breaks of kernel times weight; nothing is computed for weights that are all zero."""
    if not weights.any():
        return 0.0
    return np.einsum("pbt,br->ptr", kernel(order), weights)


def _from_breaks(
    line: Line,
    knots: FloatArray,
    jumps: FloatArray,
    slope_jumps: FloatArray,
    coordinates: FloatArray,
    root_time: FloatArray,
    order: Order,
) -> FloatArray:
    difference = (coordinates[:, None] - knots) * line.scale
    side = np.sign(difference)
    # On an end the inside is meant, on a jump inside the line the mean of both sides.
    side[:, 0] = 1.0
    if not line.is_endless:
        side[:, -1] = -1.0
    distance, side = np.abs(difference)[:, :, None], side[:, :, None]
    total = np.zeros((coordinates.size, root_time.size, jumps.shape[1]))
    if order == 0:
        total += _contract(lambda n: -side * free(n, distance, root_time), jumps, 0)
        total += _contract(lambda n: free(n, distance, root_time), slope_jumps, 1)
    elif order == -1:
        total += _contract(lambda n: free(n, distance, root_time), jumps, -1)
        total += _contract(lambda n: -side * free(n, distance, root_time), slope_jumps, 0)
    else:
        at_break = 0.5 * root_time**2
        total += _contract(lambda n: free(n, distance, root_time), jumps, 1)
        total += _contract(lambda n: side * (at_break - free(n, distance, root_time)), slope_jumps, 2)
    return total


def wall_kernel(
    line: Line, drive: WallDrive, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    """Response to a unit pulse of an end's data, shape (n_points, n_times, 1).

    Held: s / (2 sqrt(pi) t^(3/2)) exp(-s^2 / 4t). Film: H K_(-1). Insulated: exp(-s^2 / 4t) / sqrt(pi t).
    The image in the far end is below exp(-1 / (4 LATEST)) for the times this serves.
    """
    s = wall_distance(line, coordinates, high=drive.high)[:, None]
    film = line.film_high if drive.high else line.film_low
    w = s / (2 * root_time)
    if film == math.inf:
        kernel = _held_kernel(w, root_time, order)
    elif film == 0.0:
        kernel = _insulated_kernel(w, root_time, order)
    else:
        kernel = _film_kernel(w, root_time, film, order)
    # Away from the high end is towards the low one.
    return (kernel if order == 0 or not drive.high else -kernel)[:, :, None]


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
    y = w + film * root_time
    gauss = np.exp(-w * w)
    if order == 0:
        return film * gauss / root_time * (derivative_of_erfcx(y) + w * erfcx(y))
    if order == -1:
        eta = film * root_time
        return film * gauss / root_time**2 * ((eta - w) * derivative_of_erfcx(y) - w * w * erfcx(y))
    return -film * gauss * erfcx(y)
