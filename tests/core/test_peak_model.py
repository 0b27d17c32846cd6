"""What may lie between the places of a small grid around its highest value."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import minimize

from service.core.climbing import PEAK_SAFETY
from service.core.peak_model import Index, between

FloatArray = NDArray[np.float64]
ANYWHERE = ((-np.inf, np.inf),) * 3
CUBE = ((-1.0, 1.0),) * 3


def top_of(values: FloatArray) -> Index:
    first, second, third = (int(index) for index in np.unravel_index(int(values.argmax()), values.shape))
    return first, second, third


def on_grid(function: Callable[[FloatArray], FloatArray], axes: list[FloatArray]) -> FloatArray:
    x, y, z = np.meshgrid(*axes, indexing="ij")
    return np.asarray(function(np.stack([x, y, z])))


@pytest.mark.parametrize("correlation", [0.0, 0.5, 0.9, 0.99])
def test_quadratic_is_had_exactly_also_along_a_slanting_ridge(correlation: float) -> None:
    def ridge(at: FloatArray) -> FloatArray:
        x, y, z = at[0] - 0.11, at[1] + 0.07, at[2] - 0.02
        return np.asarray(5.0 - x**2 - y**2 + 2.0 * correlation * x * y - 0.5 * z**2)

    axes = [np.linspace(-1.0, 1.0, 5)] * 3
    values = on_grid(ridge, axes)
    found = between(axes, values, top_of(values), ANYWHERE, 0.0)
    assert not found.goes_on
    assert found.place == pytest.approx([0.11, -0.07, 0.02], abs=1e-12)
    assert PEAK_SAFETY * found.rise >= 5.0 - values.max() - 1e-14


def test_peaks_of_smooth_functions_do_not_exceed_what_is_said() -> None:
    generator = np.random.default_rng(8)
    seen = 0
    for _ in range(120):
        waves, phases = generator.uniform(-2.0, 2.0, (5, 3)), generator.uniform(0.0, 6.3, 5)
        sizes = generator.uniform(0.2, 1.0, 5)

        def smooth(
            at: FloatArray, waves: FloatArray = waves, phases: FloatArray = phases, sizes: FloatArray = sizes
        ) -> FloatArray:
            inner = np.tensordot(waves, at, axes=1) + phases.reshape(-1, *([1] * (at.ndim - 1)))
            return np.asarray(np.tensordot(sizes, np.sin(inner), axes=1))

        peak = minimize(lambda at, smooth=smooth: -float(smooth(at)), np.zeros(3), tol=1e-14).x
        axes = list(peak[:, None] + generator.uniform(-0.1, 0.1, (3, 1)) + np.linspace(-0.4, 0.4, 5))
        values = on_grid(smooth, axes)
        found = between(axes, values, top_of(values), ANYWHERE, 0.0)
        if not found.goes_on:
            seen += 1
            assert PEAK_SAFETY * found.rise >= float(smooth(peak)) - values.max() - 1e-12
    assert seen > 40


def test_end_of_the_region_with_the_field_falling_from_it_is_the_peak() -> None:
    axes = [np.linspace(0.0, 0.1, 5), np.array([0.3]), np.linspace(0.9, 1.0, 5)]
    values = on_grid(lambda at: np.exp(-at[0]) + at[2], axes)
    found = between(axes, values, top_of(values), ((0.0, 1.0), (0.3, 0.3), (0.0, 1.0)), 0.0)
    assert (found.place, found.rise, found.goes_on) == ([0.0, 0.3, 1.0], 0.0, False)


def test_peak_just_inside_an_end_is_expected() -> None:
    axes = [np.linspace(0.0, 0.4, 5), np.array([0.0]), np.array([0.0])]
    values = on_grid(lambda at: 1.0 - (at[0] - 0.03) ** 2, axes)
    found = between(axes, values, top_of(values), ((0.0, 1.0), (0.0, 0.0), (0.0, 0.0)), 0.0)
    assert found.place[0] == pytest.approx(0.03)
    assert found.rise == pytest.approx(0.03**2)


def test_highest_value_on_the_edge_of_the_grid_is_no_peak_where_the_region_goes_on() -> None:
    axes = [np.linspace(-0.1, 0.1, 5)] * 3
    values = on_grid(lambda at: at[0] - at[1] ** 2 - at[2] ** 2, axes)
    assert between(axes, values, top_of(values), CUBE, 0.0).goes_on
    assert not between(axes, values, top_of(values), ((-1.0, 0.1), *CUBE[1:]), 0.0).goes_on


def test_where_nothing_varies_nothing_lies_between() -> None:
    axes = [np.linspace(-0.1, 0.1, 5)] * 3
    found = between(axes, np.full((5, 5, 5), 7.0), (2, 2, 2), CUBE, 1e-12)
    assert (found.place, found.rise, found.goes_on) == ([0.0, 0.0, 0.0], 0.0, False)
