"""Limits: margins, and what the error leaves undecided."""

from __future__ import annotations

import numpy as np
import pytest

from service.analysis.limits import Limit, bounds_of, margins, surely_held, surely_passed, verdict


def test_margin_is_that_of_the_nearer_side() -> None:
    limits = [Limit(0, at_most=60.0), Limit(0, at_least=5.0), Limit(1, at_most=4.0, at_least=1.0)]
    found = margins(limits, np.array([[50.0, 3.5], [70.0, 0.0]]))
    np.testing.assert_array_equal(found, [[10.0, 45.0, 0.5], [-10.0, 65.0, -1.0]])
    np.testing.assert_array_equal(bounds_of(limits, np.array([1e-6, 1e-3])), [1e-6, 1e-6, 1e-3])


@pytest.mark.parametrize(
    ("margin", "bound", "held"),
    [(1.0, 0.5, "yes"), (0.5, 0.5, "yes"), (0.4, 0.5, "undecided"), (-0.5, 0.5, "undecided"), (-0.6, 0.5, "no"),
     (0.0, 0.0, "yes"), (5.0, np.inf, "undecided"), (-5.0, np.inf, "undecided")],
)  # fmt: skip
def test_a_margin_within_the_error_decides_nothing(margin: float, bound: float, held: str) -> None:
    assert verdict(margin, bound) == held


def test_a_case_without_results_neither_holds_nor_fails() -> None:
    nothing = np.array([np.nan])
    assert not surely_held(nothing, nothing).any()
    assert not surely_passed(nothing, nothing).any()
