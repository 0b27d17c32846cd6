"""A face map from a formula: curved pieces on a grid that is refined until the error is known to be small.

On each cell the formula is replaced by the polynomial through its values at Chebyshev's points. Along one axis that is
off by no more than

    max |f^(8)| / 8! (h / 2)^8 / 2^6

(the remainder of interpolation at the extrema of a Chebyshev polynomial; h the length of the piece), and along the
second by the same times LEBESGUE. The eighth derivatives are bounded over each whole cell by interval arithmetic on
Taylor coefficients (`jets`), so that nothing between the points looked at can be missed. Where they are not bounded
the range of the formula over the cell bounds the error instead. Pieces are halved until both agree with the goal.
Kinks of abs, min and max that lie along an axis are found by bisection and get a knot.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from service.core.errors import NotPhysical
from service.core.formula import Formula, Node
from service.core.jets import Jet
from service.core.maps import FaceMap, Peak
from service.core.profiles import DEGREE, chebyshev_places

FloatArray = NDArray[np.float64]

# The error aimed at, in parts of the range of the formula, and the one beyond which a formula is refused. In between,
# at kinks that run askew or at infinite slopes, the map is as good as its error says.
GOAL, WORST = 1e-12, 1e-4

# Pieces along an axis at the beginning and at the most, and the least length of one in parts of the axis.
FIRST_PIECES, MOST_PIECES, SHORTEST = 4, 64, 1e-9

# Largest sum of the sizes of the basic polynomials through Chebyshev's points.
LEBESGUE = 2.21

# Rounding in a value of the formula, relative to the largest; ten operations or so.
ROUNDING = 2e-15

# A polynomial of degree 8 that is bounded by 1 from -1 to 1 has slopes of at most 64 there (Markov 1889).
MARKOV = float((DEGREE + 1) ** 2)

# Places at which kinks and values that are not finite are looked for.
LOOKED_AT = 129

# Boxes that are kept, levels to which they are halved, and parts of the range at which the search for the highest and
# lowest value ends.
MOST_BOXES, MOST_LEVELS, PEAK = 4_000, 60, 1e-13


def of_formula(
    extent: tuple[float, float],
    formula: Formula,
    factor: float = 1.0,
    *,
    begins: tuple[float, float] = (0.0, 0.0),
) -> FaceMap:
    """The map of a formula over a face.

    extent: lengths of the face along its two axes; along an infinite one the formula must not vary.
    factor: what a value of the formula is multiplied by.
    begins: where the axes begin: 0, or -infinity along one without ends.
    Raises NotPhysical where the formula is not finite on the face, or jumps or turns too sharply to be represented.
    """
    varies = (formula.names[0] in formula.root.names, formula.names[1] in formula.root.names)
    for name, length, changes in zip(formula.names, extent, varies, strict=True):
        if changes and math.isinf(length):
            raise NotPhysical(
                f"The formula varies along {name}, where the face has no end; use patches or readings there."
            )
    ends = [1.0 if math.isinf(length) else length for length in extent]
    looked = [
        np.linspace(0.0, end, LOOKED_AT) if along else np.zeros(1) for end, along in zip(ends, varies, strict=True)
    ]
    _check_finite(formula, looked[0], looked[1])
    values = factor * formula.at(looked[0], looked[1])
    if not any(varies):
        return FaceMap.uniform(float(values[0, 0]))
    return _Maker(formula, factor, extent, begins, varies, values).map()


@dataclass(frozen=True, eq=False)
class _Cells:
    """What is known of each cell: interpolation errors along both axes, and the error in all, (n_first, n_second)."""

    along_first: FloatArray
    along_second: FloatArray
    error: FloatArray


class _Maker:
    """Refines the grid of one formula, and puts the map together."""

    def __init__(
        self,
        formula: Formula,
        factor: float,
        extent: tuple[float, float],
        begins: tuple[float, float],
        varies: tuple[bool, bool],
        values: FloatArray,
    ) -> None:
        self.formula = formula
        self.factor = factor
        self.extent = extent
        self.begins = begins
        self.varies = varies
        self.range = float(values.max() - values.min())
        self.size = float(np.abs(values).max())
        self.rounding = ROUNDING * self.size
        self.goal = max(GOAL * self.range, self.rounding)
        self.usual = float(values.min())

    def map(self) -> FaceMap:
        """The map, its error and its peaks."""
        knots, kinks = [], []
        axes = zip(self.formula.names, self.begins, self.extent, self.varies, strict=True)
        for name, start, length, along in axes:
            found = _kinks(self.formula, name, length) if along else ()
            marks = np.array([start, *found, length])
            kinks.append(found)
            knots.append(_split(marks, np.full(marks.size - 1, FIRST_PIECES)) if along else marks)
        cells = self._cells(knots)
        while True:
            finer = [self._finer(axis, knots, cells) if self.varies[axis] else knots[axis] for axis in (0, 1)]
            if all(new.size == old.size for new, old in zip(finer, knots, strict=True)):
                break
            knots = finer
            cells = self._cells(knots)
        places = [
            chebyshev_places(own) if along else np.zeros(1) for own, along in zip(knots, self.varies, strict=True)
        ]
        _check_finite(self.formula, places[0], places[1])
        table = self.factor * self.formula.at(places[0], places[1])
        table = np.repeat(table, 1 if self.varies[0] else 2, axis=0)
        table = np.repeat(table, 1 if self.varies[1] else 2, axis=1)
        plain = FaceMap(
            knots[0],
            knots[1],
            table,
            True,
            self.extent,
            self.usual,
            self.begins,
            curved=self.varies,
            kinks=(kinks[0], kinks[1]),
        )
        error = self._checked_error(cells, knots, plain, places)
        lowest, highest = (_peak(self, knots, sign) for sign in (-1.0, 1.0))
        slope_error = self._slope_error(cells, knots, error)
        return replace(plain, error=error, slope_error=slope_error, peaks=(lowest, highest))

    def jet(
        self,
        axis: int | None,
        boxes: tuple[FloatArray, FloatArray, FloatArray, FloatArray],
        order: int,
        part: Node | None = None,
    ) -> Jet:
        """Taylor coefficients along an axis over boxes (first low, first high, second low, second high).

        part: of the formula, all of it if left out.
        """
        names, roots = self.formula.names, self.formula.root if part is None else part
        with np.errstate(all="ignore"):
            jets = {
                names[0]: Jet.box(boxes[0], boxes[1], order, varies=axis == 0),
                names[1]: Jet.box(boxes[2], boxes[3], order, varies=axis == 1),
            }
            return roots.of_jets(jets, order)

    def _cells(self, knots: list[FloatArray]) -> _Cells:
        first, second = (own if along else np.zeros(2) for own, along in zip(knots, self.varies, strict=True))
        boxes = (first[:-1, None], first[1:, None], second[None, :-1], second[None, 1:])
        shape = (first.size - 1, second.size - 1)
        with np.errstate(all="ignore"):
            value = self.jet(None, boxes, 0).value
            # The polynomial stays within LEBESGUE^2 times the formula's own distance from the middle of its range.
            width = np.nan_to_num(value.high - value.low, nan=math.inf, posinf=math.inf)
            by_range = 0.5 * (1 + LEBESGUE**2) * abs(self.factor) * np.broadcast_to(width, shape)
            along = []
            for axis, own in enumerate((first, second)):
                if not self.varies[axis]:
                    along.append(np.zeros(shape))
                    continue
                largest = self.jet(axis, boxes, DEGREE + 1)[DEGREE + 1].size
                half = 0.5 * np.diff(own)
                half = half[:, None] if axis == 0 else half[None, :]
                along.append(
                    abs(self.factor) * np.broadcast_to(largest * half ** (DEGREE + 1) / 2 ** (DEGREE - 1), shape)
                )
        both = along[0] + LEBESGUE * along[1]
        return _Cells(along[0], along[1], np.fmin(np.nan_to_num(both, nan=math.inf), by_range))

    def _finer(self, axis: int, knots: list[FloatArray], cells: _Cells) -> FloatArray:
        """The knots of an axis with those pieces halved whose share of the error is too large."""
        own = cells.along_first if axis == 0 else LEBESGUE * cells.along_second
        too_large = (cells.error > self.goal) & ~(own <= 0.5 * self.goal)
        split = too_large.any(axis=1 - axis) & (np.diff(knots[axis]) > 2 * SHORTEST * knots[axis][-1])
        room = MOST_PIECES - (knots[axis].size - 1)
        if room <= 0:
            return knots[axis]
        if int(split.sum()) > room:
            worst = np.where(split, np.where(too_large, cells.error, 0.0).max(axis=1 - axis), -1.0)
            split = np.zeros_like(split)
            split[np.argsort(-worst, kind="stable")[:room]] = True
        return _split(knots[axis], np.where(split, 2, 1))

    def _checked_error(self, cells: _Cells, knots: list[FloatArray], plain: FaceMap, places: list[FloatArray]) -> float:
        """The error of the map in all. Refuses a formula that is not represented well enough."""
        i, j = np.unravel_index(int(cells.error.argmax()), cells.error.shape)
        largest = float(cells.error[i, j])
        if not largest <= max(WORST * self.range, self.rounding):
            where = ", ".join(
                f"{name} = {0.5 * (own[at] + own[at + 1]):g}"
                for name, own, at, along in zip(self.formula.names, knots, (i, j), self.varies, strict=True)
                if along
            )
            steep = self._steep_in(knots, int(i), int(j))
            if steep is not None:
                value, words = steep
                raise NotPhysical(
                    f"The slope of {words} of the expression is infinite where its argument comes to {value:g}, as it "
                    f"does near {where}; no curved pieces follow that to the accuracy of answers. Give the data as "
                    "readings, closer together towards there."
                )
            raise NotPhysical(
                f"The formula jumps, turns too sharply or is not finite near {where}; kinks may only run along an "
                "axis. Use patches for a jump and readings for the rest."
            )
        # The products of profiles are that of the table but for what the decomposition left out.
        rows = [own if along else np.array([0.0]) for own, along in zip(places, self.varies, strict=True)]
        left_out = float(np.abs(plain.at(rows[0], rows[1]) - self.factor * self.formula.at(rows[0], rows[1])).max())
        return largest + LEBESGUE**2 * (2 * left_out + self.rounding)

    def _steep_in(self, knots: list[FloatArray], i: int, j: int) -> tuple[float, str] | None:
        """The value at which a function of the formula has an infinite slope in a cell, and which; None if none has."""
        first, second = (own if along else np.zeros(2) for own, along in zip(knots, self.varies, strict=True))
        i, j = (at if along else 0 for at, along in zip((i, j), self.varies, strict=True))
        ends = (first[i], first[i + 1], second[j], second[j + 1])
        boxes = [np.array(end) for end in ends]
        for steep, argument in self.formula.root.steep_parts():
            of_it = self.jet(None, (boxes[0], boxes[1], boxes[2], boxes[3]), 0, argument).value
            for value in steep.values:
                if of_it.low - SHORTEST <= value <= of_it.high + SHORTEST:
                    return value, f"{steep.name} at character {steep.character}"
        return None

    def _slope_error(self, cells: _Cells, knots: list[FloatArray], error: float) -> float:
        """The remainder is close to a polynomial of the next degree, whose slopes are bounded by its size."""
        rest = error - float(cells.error.max())
        return max(
            float((MARKOV * 2 / np.diff(own) * (cells.error.max(axis=1 - axis) + rest)).max())
            for axis, own in enumerate(knots)
            if self.varies[axis]
        )


def _check_finite(formula: Formula, first: FloatArray, second: FloatArray) -> None:
    wrong = ~np.isfinite(formula.at(first, second))
    if wrong.any():
        i, j = np.unravel_index(int(wrong.argmax()), wrong.shape)
        raise NotPhysical(
            f"The formula has no finite value at {formula.names[0]} = {first[i]:g}, {formula.names[1]} = {second[j]:g}."
        )


def _split(knots: FloatArray, parts: NDArray[np.intp]) -> FloatArray:
    """Knots with each piece cut into so many parts."""
    found = [
        low + (high - low) * np.arange(count) / count for low, high, count in zip(knots, knots[1:], parts, strict=False)
    ]
    return np.append(np.concatenate(found), knots[-1])


def _kinks(formula: Formula, name: str, length: float) -> tuple[float, ...]:
    """Inner places along an axis where abs, min or max of something that varies along it alone turn over."""
    found: list[float] = []
    at = np.linspace(0.0, length, LOOKED_AT)
    for switch in formula.root.switches():
        if switch.names != {name}:
            continue
        signs = np.sign(_along(switch, name, at))
        found.extend(float(place) for place in at[1:-1][signs[1:-1] == 0])
        turns = np.flatnonzero(signs[:-1] * signs[1:] < 0)
        found.extend(_bisected(switch, name, float(at[index]), float(at[index + 1])) for index in turns)
    shortest = SHORTEST * length
    apart: list[float] = []
    for place in sorted(found):
        if shortest < place < length - shortest and (not apart or place - apart[-1] > shortest):
            apart.append(place)
    return tuple(apart)


def _along(switch: Node, name: str, at: FloatArray) -> FloatArray:
    with np.errstate(all="ignore"):
        return np.nan_to_num(np.broadcast_to(switch.of_numbers({name: at}), at.shape))


def _bisected(switch: Node, name: str, low: float, high: float) -> float:
    """A change of sign to the last digit; the round number where it is exactly zero, if it comes upon one."""
    sign = float(_along(switch, name, np.array([low]))[0]) > 0
    while True:
        middle = 0.5 * (low + high)
        if middle in (low, high):
            return high
        value = float(_along(switch, name, np.array([middle]))[0])
        if value == 0.0:
            return middle
        low, high = (middle, high) if (value > 0) == sign else (low, middle)


def _peak(maker: _Maker, knots: list[FloatArray], sign: float) -> Peak:
    """The highest (lowest) value of the formula, by halving the boxes that may still hold it.

    What the boxes that are left may hold beyond the highest value seen is the slack. A box is bounded by its range, and
    by its middle and its slopes, whichever is less.
    """
    first, second = (own if along else np.zeros(2) for own, along in zip(knots, maker.varies, strict=True))
    p, q = np.meshgrid(np.arange(first.size - 1), np.arange(second.size - 1), indexing="ij")
    boxes = np.array([first[p].ravel(), first[p + 1].ravel(), second[q].ravel(), second[q + 1].ravel()])
    factor, best, place, most = sign * maker.factor, -math.inf, (0.0, 0.0), math.inf
    for _ in range(MOST_LEVELS):
        middle = 0.5 * (boxes[0::2] + boxes[1::2])
        for corner in (middle, boxes[0::2], boxes[1::2], boxes[[0, 3]], boxes[[1, 2]]):
            values = factor * _values(maker.formula, corner)
            index = int(np.nanargmax(values))
            if values[index] > best:
                best, place = float(values[index]), (float(corner[0, index]), float(corner[1, index]))
        bound = _bound(maker, boxes, middle, factor)
        most = max(float(bound.max()), best)
        boxes = boxes[:, bound > best + PEAK * maker.range]
        if boxes.shape[1] == 0 or most - best <= PEAK * maker.range or 4 * boxes.shape[1] > MOST_BOXES:
            break
        for low in (0, 2):
            if maker.varies[low // 2]:
                cut = 0.5 * (boxes[low] + boxes[low + 1])
                lower, upper = boxes.copy(), boxes.copy()
                lower[low + 1], upper[low] = cut, cut
                boxes = np.concatenate([lower, upper], axis=1)
    slack = max(most - best, 0.0) + maker.rounding
    return Peak(sign * best, place[0], place[1], slack)


def _bound(maker: _Maker, boxes: FloatArray, middle: FloatArray, factor: float) -> FloatArray:
    """What the formula times the factor does not exceed in each box."""
    columns = (boxes[0], boxes[1], boxes[2], boxes[3])
    with np.errstate(all="ignore"):
        value = maker.jet(None, columns, 0).value
        by_range = np.broadcast_to(factor * (value.high if factor > 0 else value.low), middle.shape[1:])
        by_slopes = factor * _values(maker.formula, middle)
        for axis in (0, 1):
            if maker.varies[axis]:
                half = 0.5 * (boxes[2 * axis + 1] - boxes[2 * axis])
                by_slopes = by_slopes + abs(factor) * maker.jet(axis, columns, 1)[1].size * half
        return np.fmin(np.nan_to_num(by_range, nan=math.inf, posinf=math.inf), by_slopes)


def _values(formula: Formula, at: FloatArray) -> FloatArray:
    """Values at places side by side, at: shape (2, n)."""
    with np.errstate(all="ignore"):
        values = formula.root.of_numbers({formula.names[0]: at[0], formula.names[1]: at[1]})
    return np.broadcast_to(values, at.shape[1:])
