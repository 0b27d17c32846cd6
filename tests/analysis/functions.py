"""Functions of numbers in the place of a solver: what analyses ask for, with known answers."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from service.analysis.evaluations import Evaluations, Failure, FloatArray

Function = Callable[[FloatArray], FloatArray | float]
BAD = Failure("outside", "The case is not valid.")


class Functions:
    """Evaluates functions of all numbers, each with one bound, and counts what it was asked.

    functions: of a case, shape (n_numbers,). bound: of every value. noise: part of the bound by which values are off,
    alike for a case whenever it is asked for. is_valid: cases for which it is false fail.
    """

    def __init__(
        self,
        functions: Sequence[Function],
        *,
        bound: float = 1e-10,
        noise: float = 0.0,
        is_valid: Callable[[FloatArray], bool] = lambda case: True,
    ) -> None:
        self.functions = functions
        self.bound, self.noise = bound, noise
        self.is_valid = is_valid
        self.waves: list[int] = []
        self.seen: list[FloatArray] = []

    def __call__(self, cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        """The values of all functions in each case."""
        assert np.isfinite(cases).all()
        self.waves.append(len(cases))
        self.seen.extend(cases)
        values = np.full((len(cases), len(self.functions)), np.nan)
        failures = {}
        for index, case in enumerate(cases):
            if self.is_valid(case):
                off = self.noise * self.bound * np.sin(1e9 * case.sum())
                values[index] = [float(function(case)) + off for function in self.functions]
            else:
                failures[index] = BAD
        return Evaluations(values, np.where(np.isnan(values), np.nan, self.bound), failures)


def of_one(function: Callable[[float], float]) -> Function:
    """A function of the only number as one of a case."""
    return lambda case: function(float(case[0]))
