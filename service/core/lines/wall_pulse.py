"""What a pulse at an end of a line sends into it at short times, and on a half-line at all times."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfc, erfcx

from service.core.lines.kernels import SMOOTH_POINTS, SQRT_PI, derivative_of_erfcx, where_arrived
from service.core.lines.line import PRIMITIVE, Line, Order, WallDrive, wall_distance

FloatArray = NDArray[np.float64]


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

    return where_arrived(kernel, distance[:, None], root_time)


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
