"""Results of cases: what every analysis asks for, whoever computes it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Failure:
    """Why a case has no results. code: a short word for programs. message: a sentence."""

    code: str
    message: str


@dataclass(frozen=True)
class Evaluations:
    """Results of some cases.

    values, bounds: shape (n_cases, n_results), each value with how far off it may be; NaN in the whole row of a case
    that failed, and an infinite bound where a result has no finite one. failures: why, by the number of the case.
    """

    values: FloatArray
    bounds: FloatArray
    failures: Mapping[int, Failure] = field(default_factory=dict)

    def part(self, start: int, stop: int) -> Evaluations:
        """The results of the cases from start to before stop."""
        failures = {row - start: why for row, why in self.failures.items() if start <= row < stop}
        return Evaluations(self.values[start:stop], self.bounds[start:stop], failures)


class Evaluate(Protocol):
    """Computes a wave of cases."""

    def __call__(self, cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        """Results of cases, shape (n_cases, n_numbers).

        accuracy: error wanted in parts of the span of a case's data, the usual one if None. Where it cannot be promised
        it is eased, and the bounds say what was had.
        """
        ...
