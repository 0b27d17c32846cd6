"""Formulas of whole columns of numbers in the place of a solver, for analyses that ask for thousands of cases."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

from service.analysis.evaluations import Evaluations, Failure, FloatArray

FAILURE = Failure("not_physical", "That is no body.")


class Counted:
    """Evaluates formulas of one array a number, each value with the same bound, and counts what it is asked.

    fails: for which cases there are no results, of the same arrays.
    """

    def __init__(
        self, formulas: Sequence[Callable[..., Any]], bound: float = 1e-13, fails: Callable[..., Any] | None = None
    ) -> None:
        self.formulas, self.bound, self.fails = formulas, bound, fails
        self.waves: list[int] = []

    def __call__(self, cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        """The values of all formulas in each case."""
        self.waves.append(len(cases))
        numbers = cases.T
        failed = np.zeros(len(cases), dtype=bool) if self.fails is None else np.asarray(self.fails(*numbers))
        values = np.full((len(cases), len(self.formulas)), np.nan)
        with np.errstate(invalid="ignore"):
            for place, formula in enumerate(self.formulas):
                values[:, place] = np.where(failed, np.nan, formula(*numbers))
        bounds = np.where(np.isnan(values) & failed[:, None], np.nan, self.bound)
        return Evaluations(values, bounds, {int(row): FAILURE for row in np.flatnonzero(failed)})

    @property
    def n_cases(self) -> int:
        """How many cases it was asked."""
        return sum(self.waves)
