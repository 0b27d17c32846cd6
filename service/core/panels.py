"""Panels on rectangles of a face, and the mean potential of each for a unit of flow into each other.

The flow into a rectangle whose condition differs from that of its face is spread evenly over each panel of a tensor
grid. Next to the rectangle's border the density goes as r^(-1/2), next to a corner as r^(-0.70) (Morrison and Lewis,
SIAM J. Appl. Math. 31, 1976), so that panels are graded as a power of their number: with even panels totals would gain
little from more of them, with these their error falls as the cube of the panels' number. Means over panels of the time
form need no more than means of intervals on intervals:

    K = factor integral over t of X(t) (x) Y(t) Z(t)

with X, Y from `lines.pairs` and Z the answer of the third line at its driven end. At early times X and Y are straight
in sqrt(t), so that all nodes of the rule before the first are added up as four more terms.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core import time_range
from service.core.lines.kernels import ARRIVAL
from service.core.lines.line import VALUE, Line, WallDrive
from service.core.lines.pairs import Intervals, pair_means
from service.core.lines.places import Places
from service.core.lines.time_response import respond
from service.core.maps import Rectangle
from service.core.stopping import go_on

FloatArray = NDArray[np.float64]

# Panels widen from a border as this power of their number. The border adds n^(-GRADING) to the error of a total, the
# inside n^(-3) and more the steeper the grading; at 5 the border no longer shows.
GRADING = 5.0

# Step of the rule in ln t, whose error is 3e-11 of the integral of absolute values.
STEP = 0.3

# Next to a side with a film a mean leaves its straight line in sqrt(t) by terms of this order, which are left out.
NEXT_TO_FILM = 1e-4

# The early nodes are added up until their share is below exp(-EARLY).
EARLY = 40.0

# Where no mode decays the range ends at so many squares of all distances. What follows is added up as the power it
# falls with, t^(-1/2) at the least; the next term is lower by the ratio of the squares.
AFAR = 1e9


# Pairs of sets of intervals whose means are kept; each takes some 10 MB at the most.
MOST_KEPT = 64

# What is added where flows have to balance, in parts of the most negative entry.
FAR_LEVEL = 2.0


def graded(low: float, high: float, count: int, *, at_low: bool, at_high: bool) -> FloatArray:
    """Edges of panels from low to high, shape (count + 1,), narrowing towards the ends named; count is even.

    Those for half as many panels are every other one of them.
    """
    share = np.arange(count + 1) / count
    if at_low and at_high:
        half = 0.5 * (2 * share[: count // 2 + 1]) ** GRADING
        edges = np.concatenate([low + (high - low) * half, (high - (high - low) * half)[-2::-1]])
    elif at_low:
        edges = low + (high - low) * share**GRADING
    elif at_high:
        edges = high - (high - low) * share[::-1] ** GRADING
    else:
        edges = low + (high - low) * share
    edges[0], edges[-1] = low, high
    return np.asarray(edges)


@dataclass(frozen=True, eq=False)
class Panels:
    """A tensor grid of panels on a rectangle of a face.

    first, second: edges along the face's axes in the caller's unit. high: whether the face is at the high end of its
    axis. A panel's index is i n_second + j.
    """

    first: FloatArray
    second: FloatArray
    high: bool

    @property
    def shape(self) -> tuple[int, int]:
        """How many panels along each axis."""
        return self.first.size - 1, self.second.size - 1

    @property
    def count(self) -> int:
        """How many panels."""
        return self.shape[0] * self.shape[1]

    @property
    def where(self) -> Rectangle:
        """The rectangle they cover."""
        return Rectangle(*(float(end) for end in (self.first[0], self.first[-1], self.second[0], self.second[-1])))

    @cached_property
    def along_first(self) -> Intervals:
        """The panels' intervals along the first axis."""
        return Intervals(self.first[:-1], self.first[1:])

    @cached_property
    def along_second(self) -> Intervals:
        """The panels' intervals along the second axis."""
        return Intervals(self.second[:-1], self.second[1:])

    @cached_property
    def areas(self) -> FloatArray:
        """Area of each panel, shape (count,), in the caller's unit."""
        return np.outer(np.diff(self.first), np.diff(self.second)).ravel()

    def halved(self) -> Panels:
        """Half as many panels along each axis."""
        return Panels(self.first[::2], self.second[::2], self.high)

    @cached_property
    def shares(self) -> FloatArray:
        """What part of its panel of the halved grid each of these is, shape (count,)."""
        first, second = (np.diff(edges) / np.repeat(np.diff(edges[::2]), 2) for edges in (self.first, self.second))
        return np.outer(first, second).ravel()


@dataclass(frozen=True, eq=False)
class Kernel:
    """Nodes in time, and what the line square to the face answers at them.

    times: shape (n_times,). weights: for each pair of driven and read end, (high driven, high read), shape (n_times,).
    early: sums over all earlier nodes of the weights times t^0, t^(1/2) and t, shape (3,).
    level: what to take off the product of the two means along the face, shape (n_times,), where it does not decay.
    """

    times: FloatArray
    weights: dict[tuple[bool, bool], FloatArray]
    early: dict[tuple[bool, bool], FloatArray]
    level: FloatArray


def keeps_level(lines: Sequence[Line]) -> bool:
    """Whether flows that do not balance raise the potential without end: no finite line loses anything, nor do the ends
    of endless ones, and at the most two are endless.
    """
    open_ended = [line for line in lines if line.is_endless]
    loses = any(line.film_low > 0.0 if line.is_endless else not line.keeps_its_mean for line in lines)
    return not loses and len(open_ended) <= 2


@dataclass(frozen=True)
class _Scales:
    """Scaled lengths of panels along a face: the least distance between edges, and from edges to sides; the largest
    distance; the largest film at a side that panels touch.
    """

    least: float
    reach: float
    film: float


def _scales(lines: Sequence[Line], grids: Sequence[Panels]) -> _Scales:
    least, reach, film = math.inf, 0.0, 0.0
    for index, line in enumerate(lines):
        edges = np.unique(np.concatenate([grid.second if index else grid.first for grid in grids]))
        low, high = ([0.0] if line.has_low_end else []), ([] if line.is_endless else [line.length])
        least = min(least, float(np.diff(np.unique([*edges, *low, *high])).min()) * line.scale)
        reach = max(reach, float(np.ptp([*edges, *low])) * line.scale)
        touched = [line.film_low] * (edges[0] in low) + [line.film_high] * (edges[-1] in high)
        film = max([film, *(found for found in touched if found < math.inf)])
    return _Scales(least, reach, film)


def _kernel(lines: Sequence[Line], axis: int, factors: dict[bool, float], scales: _Scales) -> Kernel:
    """The kernel of a body with panels on faces square to an axis.

    factors: for each of the ends in use, what its line's answer is multiplied with to be potential per flow.
    """
    wall, along = lines[axis], [line for other, line in enumerate(lines) if other != axis]
    first = scales.least / ARRIVAL
    if scales.film > 0.0:
        first = NEXT_TO_FILM * min(first, NEXT_TO_FILM / scales.film)
    power = _power(wall, along)
    if power is None:
        last = time_range.CUT * time_range.settling_time(lines)
    else:
        depths = [1 / line.film_low for line in lines if line.is_endless and 0.0 < line.film_low < math.inf]
        last = AFAR * max([scales.reach, *depths, *(line.extent for line in lines if not line.is_endless)]) ** 2
    begin, end = math.floor(2 * math.log(first) / STEP), math.ceil(math.log(last) / STEP)
    times = np.exp(STEP * np.arange(begin, end + 1))
    earlier = np.exp(STEP * np.arange(begin - math.ceil(2 * EARLY / STEP), begin))
    rule = STEP * times
    if power is not None:
        rule[-1] /= -math.expm1(-power * STEP)
    weights, early = {}, {}
    ends = Places(np.array([wall.length if high else 0.0 for high in factors]), VALUE)
    for driven, factor in factors.items():
        answers = factor * respond(wall, WallDrive(driven), ends, np.concatenate([earlier, times])).total[:, :, 0]
        for read, answer in zip(factors, answers, strict=True):
            before = STEP * earlier * answer[: earlier.size]
            weights[driven, read] = rule * answer[earlier.size :]
            early[driven, read] = np.array([before @ earlier**half for half in (0.0, 0.5, 1.0)])
    return Kernel(times, weights, early, _level(lines, along, times))


def _power(wall: Line, along: Sequence[Line]) -> float | None:
    """The power of 1 / t that the integrand falls with in ln t at the end, None where modes decay.

    Each endless line gives 1/2, or 3/2 where its end is held or has a film. What keeps its level is taken off, which
    leaves one more, or modes where no line along the face is endless.
    """
    lines = (wall, *along)
    open_ended = [line for line in lines if line.is_endless]
    if not open_ended or any(not (line.is_endless or line.keeps_its_mean) for line in lines):
        return None
    if keeps_level(lines):
        return len(open_ended) / 2 if any(line.is_endless for line in along) else None
    return sum(1.5 if line.film_low > 0.0 else 0.5 for line in open_ended) - 1.0


def _level(lines: Sequence[Line], along: Sequence[Line], times: FloatArray) -> FloatArray:
    """What the product of the means along the face comes to where it does not decay, let in after the settling time."""
    if not keeps_level(lines):
        return np.zeros_like(times)
    spread = np.ones_like(times)
    for line in along:
        ends = 1.0 if line.has_low_end else 2.0
        spread = spread / (ends * np.sqrt(math.pi * times) if line.is_endless else line.extent)
    release = time_range.settling_time(lines)
    return spread * -(np.expm1(-times / release) ** 3)


def influence(lines: Sequence[Line], axis: int, factors: dict[bool, float], grids: Sequence[Panels]) -> FloatArray:
    """Mean potential of each panel for a unit of flow into each panel of all grids, shape (n, n), symmetric.

    Where flows have to balance it is short of a constant common to all entries.
    """
    one, two = (line for other, line in enumerate(lines) if other != axis)
    per_flow = {high: factor * one.scale * two.scale for high, factor in factors.items()}
    kernel = _kernel(lines, axis, per_flow, _scales((one, two), grids))
    first, second = _Means(one, kernel.times), _Means(two, kernel.times)
    starts = np.concatenate([[0], np.cumsum([grid.count for grid in grids])])
    matrix = np.empty((starts[-1], starts[-1]))
    for p, rows in enumerate(grids):
        here = slice(starts[p], starts[p + 1])
        matrix[here, here] = _within(first, second, kernel, rows)
        for q in range(p):
            go_on()
            there = slice(starts[q], starts[q + 1])
            matrix[here, there] = _between(first, second, kernel, rows, grids[q])
            matrix[there, here] = matrix[here, there].T
    if keeps_level(lines):
        # Far along an endless axis the constant left out is negative without bound; with this one the matrix is
        # positive definite.
        matrix += FAR_LEVEL * max(-float(matrix.min()), 0.0)
    return matrix


class _Means:
    """Means of edges' intervals on one line, kept for pads that share them: pads often stand in rows."""

    def __init__(self, line: Line, times: FloatArray) -> None:
        self._line, self._times = line, times
        self._kept: dict[tuple[bytes, bytes], tuple[FloatArray, list[FloatArray]]] = {}

    def of(self, rows: Intervals, columns: Intervals) -> tuple[FloatArray, list[FloatArray]]:
        """Means at the times, shape (n_times, n, m), and the two coefficients of their early straight line."""
        key = (rows.low.tobytes() + rows.high.tobytes(), columns.low.tobytes() + columns.high.tobytes())
        if key not in self._kept:
            if len(self._kept) >= MOST_KEPT:
                self._kept.clear()
            self._kept[key] = _means(self._line, rows, columns, self._times)
        return self._kept[key]


def _means(line: Line, rows: Intervals, columns: Intervals, times: FloatArray) -> tuple[FloatArray, list[FloatArray]]:
    means = np.moveaxis(pair_means(line, rows, columns, times), 2, 0)
    shared = np.minimum(rows.high[:, None], columns.high) - np.maximum(rows.low[:, None], columns.low)
    start = np.maximum(shared, 0.0) / rows.widths[:, None] / columns.widths / line.scale
    return means, [start, (means[0] - start) / math.sqrt(times[0])]


def _terms(
    first: tuple[FloatArray, list[FloatArray]],
    second: tuple[FloatArray, list[FloatArray]],
    kernel: Kernel,
    ends: tuple[bool, bool],
) -> tuple[FloatArray, FloatArray]:
    """Factors whose sum of products over the first axis is the integral, shape (n_terms, ...) each."""
    (one, early_one), (two, early_two) = first, second
    early = kernel.early[ends]
    extra_one = [early[a + b] * early_one[a] for a in (0, 1) for b in (0, 1)]
    extra_two = [early_two[b] for _ in (0, 1) for b in (0, 1)]
    left = [(kernel.weights[ends] * one.T).T, np.stack(extra_one)]
    right = [two, np.stack(extra_two)]
    if kernel.level.any():
        weight = -float(kernel.weights[ends] @ kernel.level)
        left.append(np.full((1, *one.shape[1:]), weight))
        right.append(np.ones((1, *two.shape[1:])))
    return np.concatenate(left), np.concatenate(right)


def _within(one: _Means, two: _Means, kernel: Kernel, grid: Panels) -> FloatArray:
    """Panels of one grid on each other: only half of the pairs along each axis differ."""
    n, m = grid.shape
    first, second = one.of(grid.along_first, grid.along_first), two.of(grid.along_second, grid.along_second)
    left, right = _terms(first, second, kernel, (grid.high, grid.high))
    (i, pair_i), (j, pair_j) = _pairs(n), _pairs(m)
    product = left[:, i[0], i[1]].T @ right[:, j[0], j[1]]
    return product[pair_i[:, None, :, None], pair_j[None, :, None, :]].reshape(n * m, n * m)


def _pairs(count: int) -> tuple[tuple[NDArray[np.intp], NDArray[np.intp]], NDArray[np.intp]]:
    """Unordered pairs of so many things, and which pair each ordered one is, shape (count, count)."""
    i, j = np.triu_indices(count)
    which = np.empty((count, count), dtype=np.intp)
    which[i, j] = which[j, i] = np.arange(i.size)
    return (i, j), which


def _between(one: _Means, two: _Means, kernel: Kernel, rows: Panels, columns: Panels) -> FloatArray:
    first, second = one.of(rows.along_first, columns.along_first), two.of(rows.along_second, columns.along_second)
    left, right = _terms(first, second, kernel, (columns.high, rows.high))
    (n, m), (r, s) = rows.shape, columns.shape
    product = left.reshape(-1, n * r).T @ right.reshape(-1, m * s)
    return product.reshape(n, r, m, s).transpose(0, 2, 1, 3).reshape(n * m, r * s)
