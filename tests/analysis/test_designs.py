"""Designs: which cases are computed."""

from __future__ import annotations

from typing import get_args

import numpy as np
import pytest

from service.analysis.designs import Method, count_of_combinations, every_combination, filling


def test_every_combination_is_there_once_with_the_last_number_fastest() -> None:
    cases = every_combination([np.array([1.0, 2.0]), np.array([10.0, 20.0, 30.0])])
    assert cases.tolist() == [[1, 10], [1, 20], [1, 30], [2, 10], [2, 20], [2, 30]]
    assert count_of_combinations([2, 3]) == len(cases)


@pytest.mark.parametrize("method", get_args(Method))
def test_samples_lie_in_the_box_and_are_the_same_for_the_same_seed(method: Method) -> None:
    low, high = np.array([-1.0, 5.0, 100.0]), np.array([1.0, 5.5, 300.0])
    cases = filling(method, 50, low, high, seed=3)
    assert cases.shape == (50, 3)
    assert ((cases >= low) & (cases <= high)).all()
    np.testing.assert_array_equal(cases, filling(method, 50, low, high, seed=3))
    assert (cases != filling(method, 50, low, high, seed=4)).any()


def test_latin_hypercube_has_one_sample_in_each_part_of_each_range() -> None:
    cases = filling("latin_hypercube", 40, np.zeros(4), np.full(4, 40.0), seed=1)
    for column in cases.T:
        assert sorted(np.floor(column)) == list(range(40))


def test_sobol_samples_are_more_even_than_random_ones() -> None:
    # Mean of x^2 + y^2 over the unit square is 2/3.
    errors = {
        method: abs(np.mean(np.sum(filling(method, 1024, np.zeros(2), np.ones(2), seed=2) ** 2, axis=1)) - 2 / 3)
        for method in get_args(Method)
    }
    assert errors["sobol"] < 1e-4 < errors["random"]
