"""What spreads from a break on a line without ends, and what one end adds to it.

    g_n(d) = (2 sqrt t)^n i^n erfc(d / 2 sqrt t) / 2        (repeated integrals of erfc; -g_n' = g_(n-1))

An end answers g_n with its image at the distance s from the mirrored break,

    rho_n(s) = g_n(s) - K_n(s),      K_0 = exp(H s + H^2 t) erfc(s / 2 sqrt t + H sqrt t),   -K_n' = K_(n-1)

where K = 0 for a held end and K_n = 2 g_n for an insulated one. Sources: Carslaw and Jaeger 1959, sections 2.2, 14.2
and appendix II.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfc, erfcx

FloatArray = NDArray[np.float64]

SQRT_PI = math.sqrt(math.pi)

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


def where_arrived(
    kernel: Callable[[FloatArray, FloatArray], FloatArray], distance: FloatArray, root_time: FloatArray
) -> FloatArray:
    """A kernel at distances, shape (..., n_times) where they are (..., 1), computed only where a front has arrived."""
    arrived = np.flatnonzero(distance < ARRIVAL * root_time)
    values = np.zeros(distance.size * root_time.size)
    at, when = np.divmod(arrived, root_time.size)
    values[arrived] = kernel(distance.ravel()[at], root_time[when])
    return values.reshape(*distance.shape[:-1], root_time.size)
