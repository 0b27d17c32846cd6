"""Means of a line over intervals, started from a unit amount on other intervals: what pads and panels ask of it.

    E_ij(t) = 1 / (w_i w_j) integral over interval i, integral over interval j of G(x, x', t) dx' dx

with G the line's point source, so that E is symmetric. An interval wide against sqrt(t) is integrated by its two
ends: free of them -G is the second derivative of |d| / 2 + g_1(|d|) in x and x' (see `kernels` for g and its images in
the ends), whose first part adds up to the overlap of the two intervals exactly. A narrow one is averaged by Gauss
quadrature, since its ends would cancel. Once eigenfunctions are few they serve alone: E = C exp(-rates t) C^T.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.lines import kernels
from service.core.lines.line import Line
from service.core.lines.modes import modes_of

FloatArray = NDArray[np.float64]
Kernel = Callable[[FloatArray, FloatArray], FloatArray]

# From this sqrt(t) / extent on eigenfunctions serve, so many at the most; those left out are below exp(-MODES_CUT).
MODES_FROM = 1 / 96
MODES_CUT = 40.0
MODE_COUNT = math.ceil(math.sqrt(MODES_CUT) / MODES_FROM / math.pi) + 2

# An interval narrower than this part of sqrt(t) is averaged by Gauss quadrature; the ends of a wider one cancel to a
# twentieth each at the most.
NARROW = 0.2

# So many points are exact to 1e-14 of the source itself up to this width over sqrt(t): the error of n points is
# (n!)^4 / ((2 n + 1) (2 n)!^3) width^(2 n) times the derivative of order 2 n of exp(-x^2 / 4 t).
WIDEST = {1: 1e-7, 2: 2e-3, 3: 0.04, 4: 0.2, 5: math.inf}

_RULES = {count: np.polynomial.legendre.leggauss(count) for count in WIDEST}

# Times are taken in groups within this factor of each other in sqrt(t); five points are good up to NARROW times it.
GROUP = 2.0

# Kernel values that are held at once.
VALUES_AT_ONCE = 200_000


@dataclass(frozen=True, eq=False)
class Intervals:
    """Intervals of a line in the caller's unit, shape (n,) each, low < high; they may touch, overlap or coincide."""

    low: FloatArray
    high: FloatArray

    @classmethod
    def unique(cls, low: FloatArray, high: FloatArray) -> tuple[Intervals, NDArray[np.intp]]:
        """The different ones among intervals, and which of them each is, shape (n,)."""
        ends, which = np.unique(np.stack([low, high]), axis=1, return_inverse=True)
        return cls(ends[0], ends[1]), which.ravel()

    @property
    def widths(self) -> FloatArray:
        """Width of each."""
        return self.high - self.low


def pair_means(line: Line, rows: Intervals, columns: Intervals, times: FloatArray) -> FloatArray:
    """Mean over each interval of `rows` after a unit amount was put on each of `columns`, spread evenly.

    times: scaled length squared, increasing. Returns shape (n_rows, n_columns, n_times), per scaled length, with the
    times outermost in memory; symmetric where rows and columns are the same object. Its error is about 1e-13 of the
    mean of a narrowest interval over itself.
    """
    answer = np.empty((times.size, rows.low.size, columns.low.size))
    root_time = np.sqrt(times)
    late = times.size if line.is_endless else int(np.searchsorted(root_time, MODES_FROM * line.extent))
    start = 0
    while start < late:
        stop = min(int(np.searchsorted(root_time, GROUP * root_time[start], side="right")), late)
        _by_images(line, rows, columns, root_time[start:stop], answer[start:stop])
        start = stop
    if late < times.size:
        _by_modes(line, rows, columns, times[late:], answer[late:])
    if rows is columns:
        answer = 0.5 * (answer + answer.transpose(0, 2, 1))
    return answer.transpose(1, 2, 0)


def _by_modes(line: Line, rows: Intervals, columns: Intervals, times: FloatArray, answer: FloatArray) -> None:
    modes = modes_of(line, MODE_COUNT)
    first, second = (
        modes.over(some.low, some.high) / (some.widths * line.scale)[:, None] / np.sqrt(modes.norm)
        for some in (rows, columns)
    )
    for index, time in enumerate(times):
        # Rates counted from the slowest, whose decay is common to all.
        count = int(np.searchsorted((modes.rates - modes.rates[0]) * time, MODES_CUT))
        decayed = first[:, :count] * np.exp(-modes.rates[:count] * time)
        np.matmul(decayed, second[:, :count].T, out=answer[index])


@dataclass(frozen=True, eq=False)
class _Readings:
    """How some intervals are read: at places `base + shift` with weights, shape (n, points).

    The base is a given end, so that differences of bases are exact. which: of the intervals these are.
    by_ends: whether an antiderivative is read at the two ends.
    """

    which: NDArray[np.intp]
    base: FloatArray
    shift: FloatArray
    weights: FloatArray
    by_ends: bool

    def part(self, chosen: slice) -> _Readings:
        """Some of them."""
        return _Readings(self.which[chosen], self.base[chosen], self.shift[chosen], self.weights[chosen], self.by_ends)


def _readings(intervals: Intervals, scale: float, root_time: FloatArray) -> list[_Readings]:
    """How intervals are read at times within GROUP of each other: in classes of as many points each."""
    widths = intervals.widths
    points = np.searchsorted(list(WIDEST.values()), widths * scale / root_time[0]) + 1
    points[widths * scale >= NARROW * root_time[-1]] = 0
    found = []
    for count in np.unique(points):
        which = np.flatnonzero(points == count)
        low, high, width = intervals.low[which, None], intervals.high[which, None], widths[which, None]
        if count == 0:
            base, shift = np.concatenate([low, high], axis=1), np.zeros((which.size, 2))
            weights = np.array([-1.0, 1.0]) / (width * scale)
        else:
            nodes, shares = _RULES[int(count)]
            base = np.where(nodes < 0, low, high)
            shift = 0.5 * width * np.where(nodes < 0, 1.0 + nodes, nodes - 1.0)
            weights = np.broadcast_to(0.5 * shares, base.shape)
        found.append(_Readings(which, base, shift, weights, bool(count == 0)))
    return found


def _by_images(line: Line, rows: Intervals, columns: Intervals, root_time: FloatArray, answer: FloatArray) -> None:
    second = _readings(columns, line.scale, root_time)
    for first in _readings(rows, line.scale, root_time):
        for other in second:
            run = max(VALUES_AT_ONCE // (first.base.shape[1] * other.base.size * root_time.size), 1)
            for begin in range(0, first.which.size, run):
                some = first.part(slice(begin, begin + run))
                block = _block(line, some, other, root_time)
                if some.by_ends and other.by_ends:
                    low = np.maximum(rows.low[some.which, None], columns.low[other.which])
                    high = np.minimum(rows.high[some.which, None], columns.high[other.which])
                    overlap = np.maximum(high - low, 0.0) / rows.widths[some.which, None] / columns.widths[other.which]
                    block += overlap / line.scale
                answer[:, some.which[:, None], other.which] = block


def _block(line: Line, first: _Readings, second: _Readings, root_time: FloatArray) -> FloatArray:
    """Means of one class over another without the overlap of wide ones, shape (n_times, n_first, n_second)."""
    order = first.by_ends + second.by_ends - 1
    difference = (np.add.outer(first.base, -second.base) + np.add.outer(first.shift, -second.shift)) * line.scale
    values = _arrived(lambda d, t: kernels.free(order, d, t), np.abs(difference), root_time)
    if order == 1:
        np.negative(values, out=values)
    elif order == 0:
        # The antiderivative in the place of the interval read by its ends; in the second it looks the other way.
        values = (0.5 - values) * np.sign(difference if first.by_ends else -difference)
    # The image is -rho_(-1); of its antiderivatives the one in a single place changes its sign at the low end.
    if line.has_low_end:
        at_low = np.add.outer(first.base + first.shift, second.base + second.shift) * line.scale
        image = _arrived(lambda s, t: kernels.reflected(order, s, t, line.film_low), at_low, root_time)
        values += image if order == 0 else -image
    if not line.is_endless:
        at_high = np.add.outer((line.length - first.base) - first.shift, (line.length - second.base) - second.shift)
        values -= _arrived(lambda s, t: kernels.reflected(order, s, t, line.film_high), at_high * line.scale, root_time)
    return np.asarray(np.einsum("tipj,ip->tij", np.einsum("tipjq,jq->tipj", values, second.weights), first.weights))


def _arrived(kernel: Kernel, distance: FloatArray, root_time: FloatArray) -> FloatArray:
    """Kernel at distances and times, 0 where no front has arrived by the last, shape (n_times, *distance.shape)."""
    values = np.zeros((root_time.size, distance.size))
    flat = distance.ravel()
    near = np.flatnonzero(flat < kernels.ARRIVAL * root_time[-1])
    if near.size:
        at = np.tile(flat[near], root_time.size)
        values[:, near] = kernel(at, np.repeat(root_time, near.size)).reshape(root_time.size, -1)
    return values.reshape(root_time.size, *distance.shape)
