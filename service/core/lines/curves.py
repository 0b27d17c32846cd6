"""Curved profiles on a line at short times: what their breaks and their pieces send out, with one image in each end.

A profile of polynomial pieces is known by the jumps J_n of its derivatives of every order n at its knots. The heat
equation takes it to

    u(x, t) = f + t f'' + t^2 / 2! f'''' + ... + sum over knots of J_n (-sgn d)^(n + 1) g_n(|d|),   d = x - x_knot

with g_n as in `kernels`, and an end answers with the images it gives there. While a piece is wide against sqrt t this
keeps the digits of the departure u - f. Once it is narrow its breaks cancel, and it is summed from its inside, as
point sources at the places of Gauss's rule.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from service.core.lines.images import from_points
from service.core.lines.kernels import ARRIVAL, film_part, free
from service.core.lines.line import SLOPE, VALUE, Line, Order, wall_distance
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]

# A piece is summed from its inside once it is narrower than sqrt(t) by this factor: until then its breaks cancel to a
# few roundings. It is put into the class of the next smaller power of two, so that classes change at few times.
NARROW = 0.2

# Points of Gauss's rule on a piece as wide as 2 sqrt(t) / NARROW: exact to rounding.
INNER_POINTS = 28

# Functions of a film are had from above below this H sqrt(t), from below beyond it; from above they begin so many
# orders higher, where the first term left out is below rounding.
FROM_ABOVE, ORDERS_ABOVE = 1.0, 40

# So many values of a kernel are held at once.
VALUES_AT_ONCE = 100_000


def departure(
    line: Line, profiles: Profiles, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    """u - f (order 0), its slope (-1) or antiderivative (1) for curved profiles, (n_points, n_times, n_profiles)."""
    result = np.empty((coordinates.size, root_time.size, profiles.n_profiles))
    narrow_from = NARROW * line.scale * np.exp2(np.floor(np.log2(profiles.widths)))
    starts = np.unique(np.searchsorted(root_time, np.append(narrow_from, 0.0)))
    for start, stop in zip(starts, [*starts[1:], root_time.size], strict=True):
        if start == stop:
            continue
        times, narrow = root_time[start:stop], narrow_from <= root_time[start]
        sources = INNER_POINTS * max(int(narrow.sum()), 1) + narrow.size
        run = max(VALUES_AT_ONCE // (sources * times.size), 1)
        for first in range(0, coordinates.size, run):
            places = slice(first, first + run)
            result[places, start:stop] = _departure(line, profiles, narrow, coordinates[places], times, order)
    return result


def _departure(
    line: Line,
    profiles: Profiles,
    narrow: NDArray[np.bool_],
    coordinates: FloatArray,
    root_time: FloatArray,
    order: Order,
) -> FloatArray:
    total = np.zeros((coordinates.size, root_time.size, profiles.n_profiles))
    if not narrow.all():
        total += _from_breaks(line, profiles.only(~narrow), coordinates, root_time, order)
    if narrow.any():
        nodes, weights = np.polynomial.legendre.leggauss(INNER_POINTS)
        pieces = np.flatnonzero(narrow)[:, None]
        half = 0.5 * profiles.widths[pieces]
        at = profiles.knots[pieces] + half * (1.0 + nodes)
        amounts = (half * line.scale * weights)[:, :, None] * profiles.on_piece(
            pieces, np.broadcast_to(nodes, at.shape)
        )
        total += from_points(line, at.ravel(), amounts.reshape(at.size, -1), coordinates, root_time, order)
        total -= _itself(line, profiles.only(narrow), coordinates, order)[:, None, :]
    return total


def _itself(line: Line, profiles: Profiles, coordinates: FloatArray, order: Order) -> FloatArray:
    """Profiles, their slopes or their antiderivatives at places, per scaled length."""
    if order == VALUE:
        return profiles.at(coordinates)
    if order == SLOPE:
        return profiles.slope_at(coordinates) / line.scale
    return profiles.integrals(np.zeros_like(coordinates), coordinates) * line.scale


def _from_breaks(
    line: Line, profiles: Profiles, coordinates: FloatArray, root_time: FloatArray, order: Order
) -> FloatArray:
    total = np.zeros((coordinates.size, root_time.size, profiles.n_profiles))
    assert profiles.bends is not None
    degree = profiles.bends.shape[0] + 1
    derivatives = [profiles, *(profiles.derivative(n) for n in range(1, degree + 1))]
    for k in range(1, degree // 2 + 1):
        share = _itself(line, derivatives[2 * k], coordinates, order) / line.scale ** (2 * k)
        total += share[:, None, :] * (root_time ** (2 * k) / math.factorial(k))[:, None]
    nothing = np.zeros((1, profiles.n_profiles))
    jumps = [
        (np.vstack([these.left, nothing]) - np.vstack([nothing, these.right])) / line.scale**n
        for n, these in enumerate(derivatives)
    ]
    for end in (0, -1):
        total += _from_end(line, coordinates, root_time, [jump[end] for jump in jumps], order, high=end == -1)
    if profiles.knots.size > 2:
        inner = [jump[1:-1] for jump in jumps]
        total += _from_inside(line, profiles.knots[1:-1], coordinates, root_time, inner, order)
    return total


def _from_end(
    line: Line, coordinates: FloatArray, root_time: FloatArray, jumps: list[FloatArray], order: Order, *, high: bool
) -> FloatArray:
    """What the jumps on an end send out, together with their own images: g_n + rho_n if n is even, K_n if odd."""
    film = line.film_high if high else line.film_low
    distance = wall_distance(line, coordinates, high=high)[:, None]
    inward = -1.0 if high else 1.0
    kernels = _Kernels(distance, root_time, film, len(jumps) + 1)
    total = np.zeros((coordinates.size, root_time.size, jumps[0].size))
    for n, jump in enumerate(jumps):
        if not jump.any():
            continue
        if n % 2 == 0:
            sign, values = -inward if order == VALUE else 1.0, kernels.with_image(n + order)
        else:
            sign, values = 1.0 if order == VALUE else -inward, kernels.end_part(n + order)
        total += (sign * values)[:, 0, :, None] * jump
    return total


def _from_inside(
    line: Line, knots: FloatArray, coordinates: FloatArray, root_time: FloatArray, jumps: list[FloatArray], order: Order
) -> FloatArray:
    """What jumps inside the line send out, and their images in both ends."""
    difference = (coordinates[:, None] - knots) * line.scale
    # On a knot the mean of both sides is meant.
    side = np.sign(difference)[:, :, None]
    free_part = _Kernels(np.abs(difference), root_time, math.inf, len(jumps))
    low = _Kernels(
        wall_distance(line, coordinates, high=False)[:, None] + knots * line.scale, root_time, line.film_low, len(jumps)
    )
    high = _Kernels(
        wall_distance(line, coordinates, high=True)[:, None] + (line.length - knots) * line.scale,
        root_time,
        line.film_high,
        len(jumps),
    )
    total = np.zeros((coordinates.size, root_time.size, jumps[0].shape[1]))
    for n, jump in enumerate(jumps):
        if not jump.any():
            continue
        direct, parity = free_part.free(n + order), -1.0 if n % 2 else 1.0
        if order == VALUE:
            direct = direct if n % 2 else -side * direct
        elif order == SLOPE:
            direct = -side * direct if n % 2 else direct
        elif n % 2:
            # The antiderivative runs on continuously through the knot.
            direct = side * (root_time ** (n + 1) / (2 * math.gamma((n + 3) / 2)) - direct)
        values = direct + (-1.0 if order == VALUE else 1.0) * low.reflected(n + order)
        values += parity * high.reflected(n + order)
        total += values.transpose(0, 2, 1) @ jump
    return total


class _Kernels:
    """g_n and K_n of an end for n from -1 up to some order, at distances (n_points, n_breaks) and times."""

    def __init__(self, distance: FloatArray, root_time: FloatArray, film: float, highest: int) -> None:
        self._shape = (*distance.shape, root_time.size)
        self._film = film
        self._arrived = np.flatnonzero(distance[:, :, None] < ARRIVAL * root_time)
        at, when = np.divmod(self._arrived, root_time.size)
        far, root = distance.ravel()[at], root_time[when]
        self._free = _free_orders(far, root, highest)
        self._end = _film_orders(far, root, film, self._free) if 0.0 < film < math.inf else []

    def free(self, n: int) -> FloatArray:
        """g_n."""
        return self._filled(self._free[n + 1])

    def end_part(self, n: int) -> FloatArray:
        """K_n: 0 of a held end, 2 g_n of an insulated one."""
        if self._film == math.inf:
            return np.zeros(self._shape)
        return 2 * self.free(n) if self._film == 0.0 else self._filled(self._end[n + 1])

    def reflected(self, n: int) -> FloatArray:
        """rho_n = g_n - K_n."""
        if self._film == math.inf:
            return self.free(n)
        return -self.free(n) if self._film == 0.0 else self._filled(self._free[n + 1] - self._end[n + 1])

    def with_image(self, n: int) -> FloatArray:
        """g_n + rho_n = H K_(n+1); exactly 0 of an insulated end."""
        if self._film == math.inf:
            return 2 * self.free(n)
        return np.zeros(self._shape) if self._film == 0.0 else self._filled(self._film * self._end[n + 2])

    def _filled(self, values: FloatArray) -> FloatArray:
        whole = np.zeros(math.prod(self._shape))
        whole[self._arrived] = values
        return whole.reshape(self._shape)


def _free_orders(distance: FloatArray, root_time: FloatArray, highest: int) -> list[FloatArray]:
    """g_n for n = -1 to `highest`, by n g_n = 2 t g_(n-2) - d g_(n-1)."""
    found = [free(-1, distance, root_time), free(0, distance, root_time)]
    twice = 2 * root_time**2
    for n in range(1, highest + 1):
        found.append((twice * found[-2] - distance * found[-1]) / n)
    return found


def _film_orders(
    distance: FloatArray, root_time: FloatArray, film: float, free_orders: list[FloatArray]
) -> list[FloatArray]:
    """K_n of an end with film H for the same n, by K_n = 2 g_n - H K_(n+1) in the direction in which that is stable."""
    found = [film_part(-1, distance, root_time, film), film_part(0, distance, root_time, film)]
    for n in range(1, len(free_orders) - 1):
        found.append((2 * free_orders[n] - found[-1]) / film)
    small = film * root_time < FROM_ABOVE
    if small.any():
        highest = len(free_orders) - 2
        above = _free_orders(distance[small], root_time[small], highest + ORDERS_ABOVE)
        value = 2 * above[-1]
        for n in range(highest + ORDERS_ABOVE - 1, 0, -1):
            value = 2 * above[n + 1] - film * value
            if n <= highest:
                found[n + 1][small] = value
    return found
