"""Cases of one number, in order, and how well each holds its limits."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.analysis.evaluations import Evaluate, Failure, FloatArray
from service.analysis.limits import Limit, bounds_of, margins, surely_held, surely_passed
from service.analysis.scales import scales_of

NOT_FINITE = Failure("not-finite", "A result has no finite value, or none with a bound.")


class CasesUsedUp(Exception):
    """The next wave would take more cases than are allowed."""


@dataclass(frozen=True)
class Range:
    """Where one number is looked at: `count` places from `low` to `high`, evenly spread, or in their logarithm."""

    low: float
    high: float
    count: int = 33
    logarithmic: bool = False

    def places(self) -> FloatArray:
        """The places, in order; the ends are exact."""
        places = (np.geomspace if self.logarithmic else np.linspace)(self.low, self.high, self.count)
        places[0], places[-1] = self.low, self.high
        return places


class Samples:
    """All cases of a number that were looked at, in order.

    numbers: shape (n,). values: of the result each limit is about; margins, bounds: of each limit; all of shape (n,
    n_limits), NaN where a case failed. failures: by the number. scale: what makes margins of several units comparable,
    from the first cases. most_cases: no more than these are computed.
    """

    def __init__(
        self,
        evaluate: Evaluate,
        limits: Sequence[Limit],
        units: Sequence[str],
        first: FloatArray,
        most_cases: float = np.inf,
    ) -> None:
        self._evaluate = evaluate
        self._most_cases = most_cases
        self._limits = limits
        self._results = [limit.result for limit in limits]
        self.numbers = np.zeros(0)
        self.values = self.margins = self.bounds = np.zeros((0, len(limits)))
        self.failures: dict[float, Failure] = {}
        self.cases = 0
        self.look(first)
        self.scale = scales_of(self.margins, units)

    def look(self, numbers: FloatArray) -> None:
        """Compute the cases among these that are new, in one wave. Raises CasesUsedUp where they would be too many."""
        new = np.setdiff1d(numbers, self.numbers)
        if not new.size:
            return
        if self.cases + new.size > self._most_cases:
            raise CasesUsedUp
        found = self._evaluate(new[:, None])
        self.cases += new.size
        values, bounds = found.values[:, self._results].copy(), bounds_of(self._limits, found.bounds)
        usable = np.isfinite(values).all(axis=1) & np.isfinite(bounds).all(axis=1)
        values[~usable], bounds[~usable] = np.nan, np.nan
        for index in np.flatnonzero(~usable):
            self.failures[float(new[index])] = found.failures.get(int(index), NOT_FINITE)
        order = np.argsort(np.concatenate([self.numbers, new]))
        self.numbers = np.concatenate([self.numbers, new])[order]
        self.values = np.concatenate([self.values, values])[order]
        self.margins = np.concatenate([self.margins, margins(self._limits, found.values)])[order]
        self.margins[~self.usable] = np.nan
        self.bounds = np.concatenate([self.bounds, bounds])[order]

    def keep(self, low: float, high: float) -> None:
        """Forget what lies outside a range."""
        inside = (self.numbers >= low) & (self.numbers <= high)
        self.numbers, self.values = self.numbers[inside], self.values[inside]
        self.margins, self.bounds = self.margins[inside], self.bounds[inside]

    def at(self, numbers: FloatArray) -> NDArray[np.intp]:
        """Where numbers stand among the cases; they are looked at if they are new."""
        self.look(numbers)
        return np.searchsorted(self.numbers, numbers)

    def worst_at(self, numbers: FloatArray) -> FloatArray:
        """The least margins at numbers, which are looked at if they are new."""
        at = self.at(numbers)
        return self.worst[at]

    @property
    def usable(self) -> NDArray[np.bool_]:
        """Which cases did not fail."""
        return np.asarray(~np.isnan(self.values).any(axis=1))

    @property
    def worst(self) -> FloatArray:
        """The least margin of each case in parts of the scale, NaN where it failed."""
        return (self.margins / self.scale).min(axis=1)

    @property
    def worst_bounds(self) -> FloatArray:
        """What the least margins may be off by, in parts of the scale, NaN where a case failed."""
        return (self.bounds / self.scale).max(axis=1)

    @property
    def changes(self) -> NDArray[np.bool_]:
        """Which limits' results change with the number by more than their bounds."""
        usable = self.usable
        if usable.sum() < 2:
            return np.ones(len(self._limits), dtype=bool)
        return np.asarray(np.ptp(self.values[usable], axis=0) > 2.0 * self.bounds[usable].max(axis=0))

    @property
    def signs(self) -> NDArray[np.int_]:
        """1 where all limits hold for sure, -1 where one does not for sure, 0 where it is open or the case failed."""
        held = surely_held(self.margins, self.bounds).all(axis=1)
        passed = surely_passed(self.margins, self.bounds).any(axis=1)
        return held.astype(int) - passed.astype(int)

    def binding(self, index: int) -> int:
        """The limit with the least margin in a case that did not fail."""
        return int(np.argmin(self.margins[index] / self.scale))

    def stretches(self) -> list[tuple[int, int]]:
        """Runs of cases that did not fail: the first of each, and the last."""
        return runs(self.usable)


def runs(chosen: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """The first and the last of each run of neighbours that are chosen."""
    steps = np.flatnonzero(np.diff(np.concatenate([[False], chosen, [False]]).astype(int)))
    return [(int(first), int(after) - 1) for first, after in zip(steps[::2], steps[1::2], strict=True)]
