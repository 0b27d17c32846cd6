"""Limits that have to hold all over a tolerance zone, as an evaluation of the one number that is sized.

Looked at are the nominal case, all corners of the zone and the ends of each tolerance alone. A result that is monotone
along each tolerance is worst at a corner; one that is not may be worse between, which is not looked at.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import product

import numpy as np

from service.analysis.evaluations import Evaluate, Evaluations, Failure, FloatArray
from service.analysis.limits import Limit, bounds_of, margins

# All corners of more are too many to be computed at every place.
MOST_TOLERANCES = 5


@dataclass(frozen=True)
class Zone:
    """How far numbers may be off.

    nominal: of the numbers beside the sized one, shape (n_numbers,). plus, minus: of the sized number and then of
    these, at least 0, shape (1 + n_numbers,).
    """

    nominal: FloatArray
    plus: FloatArray
    minus: FloatArray

    def offsets(self) -> FloatArray:
        """What is looked at around each place, shape (n_looks, 1 + n_numbers): the nominal case first."""
        ends = [sorted({-minus, 0.0, plus}) for plus, minus in zip(self.plus, self.minus, strict=True)]
        corners = product(*((-minus, plus) for plus, minus in zip(self.plus, self.minus, strict=True)))
        alone = [
            np.where(np.arange(len(ends)) == index, end, 0.0) for index, each in enumerate(ends) for end in each if end
        ]
        looks = [np.zeros(len(ends)), *alone, *map(np.array, corners)]
        return np.array(list(dict.fromkeys(tuple((look + 0.0).tolist()) for look in looks)))


def looks_at_a_place(zone: Zone) -> int:
    """How many cases each value of the sized number takes."""
    return len(zone.offsets())


class WorstInZone:
    """Evaluates values of the sized number: of each limit the value that holds it worst in the zone.

    Its results are those values, one a limit, with bounds that their margins keep; `limits` are on them. A place fails
    where a case around it does.
    """

    def __init__(self, evaluate: Evaluate, limits: Sequence[Limit], zone: Zone, names: Sequence[str]) -> None:
        """names: of the sized number and of those beside it, for reasons why cases fail."""
        self._evaluate = evaluate
        self._asked = limits
        self._nominal = zone.nominal
        self._offsets = zone.offsets()
        self._names = names
        self._worst: dict[float, list[int]] = {}
        self.limits = [replace(limit, result=index) for index, limit in enumerate(limits)]

    def __call__(self, cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        """Results of values of the sized number, shape (n_places, 1)."""
        looks = self._looks(cases[:, 0])
        count, each = looks.shape[:2]
        found = self._evaluate(looks.reshape(count * each, -1), accuracy=accuracy)
        values = found.values.reshape(count, each, -1)[:, :, [limit.result for limit in self._asked]]
        margin = margins(self._asked, found.values).reshape(count, each, -1)
        bound = bounds_of(self._asked, found.bounds).reshape(count, each, -1)
        failures = self._failures(found, looks)
        worst = np.argmin(np.where(np.isnan(margin), np.inf, margin), axis=1)
        least = np.take_along_axis(margin, worst[:, None], axis=1)[:, 0]
        # The true least margin lies between the least of all lower ends and the least of all upper ends.
        off = np.maximum(least - (margin - bound).min(axis=1), (margin + bound).min(axis=1) - least)
        worst_values = np.take_along_axis(values, worst[:, None], axis=1)[:, 0].copy()
        broken = np.isnan(margin).any(axis=(1, 2))
        worst_values[broken], off[broken] = np.nan, np.nan
        for number, places in zip(cases[:, 0], worst, strict=True):
            self._worst[float(number)] = places.tolist()
        return Evaluations(worst_values, off, failures)

    def worst_case(self, number: float, limit: int) -> FloatArray:
        """All numbers, shape (1 + n_numbers,), of the case that holds a limit worst around a place computed before."""
        case: FloatArray = self._looks(np.array([number]))[0, self._worst[number][limit]]
        return case

    def _looks(self, places: FloatArray) -> FloatArray:
        """Cases around places, shape (n_places, n_looks, 1 + n_numbers)."""
        middles = np.column_stack([places, np.tile(self._nominal, (len(places), 1))])
        return middles[:, None] + self._offsets

    def _failures(self, found: Evaluations, looks: FloatArray) -> dict[int, Failure]:
        """The first reason of each place, with the numbers it is about."""
        failures: dict[int, Failure] = {}
        for index in sorted(found.failures):
            place, look = divmod(index, looks.shape[1])
            failure = found.failures[index]
            case = ", ".join(
                f"{name} = {value:.6g}" for name, value in zip(self._names, looks[place, look], strict=True)
            )
            failures.setdefault(place, Failure(failure.code, f"With {case}: {failure.message}"))
        return failures
