"""The worst of results within tolerance zones, of functions whose worst is known."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from service.analysis.derivatives import derivatives, first_radii
from service.analysis.evaluations import Evaluations, FloatArray
from service.analysis.worst_case import FEW, Alone, Watched, Zone, look, most_cases_of_worst
from tests.analysis.formulas import Counted

Formula = Callable[..., Any]


def looked(
    formulas: list[Formula],
    nominal: list[float],
    plus: list[float],
    minus: list[float] | None = None,
    fails: Formula | None = None,
) -> tuple[Watched, Alone]:
    """All that is looked at around nominal numbers, derivatives first."""
    evaluate = Counted(formulas, fails=fails)
    zone = Zone(*(np.array(part, dtype=float) for part in (nominal, plus, plus if minus is None else minus)))
    watched = Watched(evaluate, zone)
    slopes = derivatives(watched, zone.nominal, first_radii(zone.nominal, np.ones(len(nominal))))
    alone = look(watched, zone, slopes)
    assert watched.n_cases == evaluate.n_cases <= slopes.n_cases + most_cases_of_worst(len(formulas), len(nominal))
    return watched, alone


def extremes(watched: Watched) -> list[float]:
    """Lowest and highest of each result, one after the other."""
    ends = np.array([watched.lowest.values, watched.highest.values]).T
    return [float(end) for end in ends.ravel()]


def test_linear_result_is_worst_at_corners() -> None:
    """Housing 50 +0.3 / -0.1, block 20 +0.05 / -0.15, shim 9 +0.02 / -0.02: a gap of 0.78 to 1.62."""
    watched, alone = looked(
        [lambda housing, block, shim: housing - 2 * block - shim], [50, 20, 9], [0.3, 0.05, 0.02], [0.1, 0.15, 0.02]
    )
    np.testing.assert_allclose(extremes(watched), [0.78, 1.62], rtol=1e-12)
    np.testing.assert_allclose(watched.highest.numbers, [[50.3, 19.85, 8.98]])
    np.testing.assert_allclose(watched.lowest.numbers, [[49.9, 20.05, 9.02]])
    np.testing.assert_allclose(alone.bend, 0, atol=1e-12)


def test_nominal_at_the_bottom_of_a_bowl() -> None:
    """A part in the middle of a plate: the slope is nothing, and both ends of its place are worse by 2.88."""
    watched, alone = looked([lambda place, film: 48 + 0.005 * place**2 + (3000 - film) / 1000], [0, 3000], [24, 150])
    np.testing.assert_allclose(extremes(watched), [48 - 0.15, 48 + 2.88 + 0.15])
    assert np.abs(watched.highest.numbers[0, 0]) == 24
    assert watched.highest.numbers[0, 1] == 2850
    np.testing.assert_array_equal(watched.lowest.numbers[0], [0, 3150])
    np.testing.assert_allclose(alone.bend, [[2.88, 0]], atol=1e-9)


def test_the_end_that_first_order_takes_for_the_better_one() -> None:
    """Two places beside the bottom of a bowl: the far end is the worst, against the slope."""
    watched, _ = looked([lambda x: (x - 3) ** 2], [4], [2], [9])
    np.testing.assert_allclose(extremes(watched), [0, 64], atol=1e-3)
    assert watched.highest.numbers[0, 0] == -5
    assert watched.lowest.values[0] < 0.01


@pytest.mark.parametrize("crest", [0.2, 0.45, 0.7, -0.6])
def test_crest_inside_the_zone(crest: float) -> None:
    """A hot spot that passes a probe: highest inside, where no end of the zone shows it."""
    watched, _ = looked([lambda x, y: y / (1 + (x - crest) ** 2)], [0, 10], [1, 1])
    found = float(watched.highest.values[0])
    assert 11 * (1 - 1e-2) < found <= 11
    assert found > 11 / (1 + min(abs(1 - crest), abs(1 + crest)) ** 2)
    assert watched.highest.numbers[0, 1] == 11


def test_numbers_that_matter_only_together() -> None:
    """x y about nothing: no slope, no bend, no change alone; corners give it away, few numbers or many."""
    for n_numbers in (2, FEW + 2):
        watched, _ = looked([lambda *x: x[0] * x[-1]], [0] * n_numbers, [1] * n_numbers)
        np.testing.assert_allclose(extremes(watched), [-1, 1])


def bilinear(seed: int, n_numbers: int) -> tuple[Formula, FloatArray]:
    """A function of slopes and products, and its values at all corners of [-1, 1]."""
    source = np.random.default_rng(seed)
    slopes = source.normal(size=n_numbers)
    pairs = np.triu(source.normal(size=(n_numbers, n_numbers)), 1) * 0.15

    def formula(*x: FloatArray) -> FloatArray:
        numbers = np.array(x)
        value: FloatArray = slopes @ numbers + np.einsum("ij,ik,jk->k", pairs, numbers, numbers)
        return value

    corners = np.array(np.meshgrid(*[[-1.0, 1.0]] * n_numbers)).reshape(n_numbers, -1)
    return formula, formula(*corners)


@pytest.mark.parametrize("seed", range(5))
def test_few_numbers_are_computed_at_all_corners(seed: int) -> None:
    """A function of products is worst at a corner, whichever it is."""
    formula, corners = bilinear(seed, FEW)
    watched, _ = looked([formula], [0] * FEW, [1] * FEW)
    np.testing.assert_allclose(extremes(watched), [corners.min(), corners.max()])


@pytest.mark.parametrize("seed", range(5))
def test_many_numbers_come_near_the_worst_corner(seed: int) -> None:
    """Fewer than 60 cases, of 256 corners, find one of the worst fiftieth although numbers act together."""
    formula, corners = bilinear(seed, 8)
    watched, _ = looked([formula], [0] * 8, [1] * 8)
    low, high = extremes(watched)
    assert np.mean(corners > high + 1e-9) < 0.02
    assert np.mean(corners < low - 1e-9) < 0.02


def test_lowest_is_never_above_highest() -> None:
    """Random functions that bend strongly, from nominal values anywhere."""
    source = np.random.default_rng(4)
    for _ in range(20):
        a, b, c, x = source.normal(size=4)
        watched, alone = looked([lambda p, q, a=a, b=b, c=c: a * p + b * p**2 * q + np.sin(c * q)], [x, 1], [2, 0.7])
        low, high = extremes(watched)
        assert low <= np.nanmin(alone.values)
        assert high >= np.nanmax(alone.values)


def test_kink_at_the_nominal() -> None:
    """The hottest of two places rises whichever way the number goes."""
    watched, alone = looked([lambda x: np.maximum(3 * (x - 2), 2 - x)], [2], [0.1], [0.5])
    np.testing.assert_allclose(extremes(watched), [0, 0.5], atol=1e-12)
    np.testing.assert_allclose(alone.bend, 0, atol=1e-6)


def test_zone_that_leaves_what_is_possible() -> None:
    """Cases without results are counted, named by the number and the end, and the rest is the worst of what is left."""
    watched, alone = looked([lambda x, y: x + y], [2, 5], [1, 1], fails=lambda x, y: x > 2.7)
    assert set(alone.failures) == {(3, 0)}
    ((count, failure),) = watched.failures.values()
    # The end itself, and two corners.
    assert (count, failure.message) == (3, "That is no body.")
    np.testing.assert_allclose(extremes(watched), [5, 8.5])


def test_samples_count_where_they_lie_in_the_zone() -> None:
    """A narrow peak that nothing else sees; a case outside of the zone changes nothing."""
    watched, _ = looked([lambda x: np.exp(-(((x - 0.83) / 0.01) ** 2))], [0.5], [0.5])
    assert watched.highest.values[0] < 1e-6
    watched(np.array([[0.825], [1.2], [0.83], [0.84]]))
    assert (watched.highest.values[0], watched.highest.numbers[0, 0]) == (1, 0.83)


def test_bounds_cover_cases_that_may_be_worse() -> None:
    """0.999 give or take 0.1 may be worse than 1 give or take 0.01: the worst is 1, and may be 1.099."""

    def evaluate(cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        return Evaluations(cases.copy(), np.where(cases < 1, 0.1, 0.01))

    watched = Watched(evaluate, Zone(np.array([0.5]), np.array([0.5]), np.array([0.5])))
    watched(np.array([[0.999], [1.0]]))
    np.testing.assert_allclose([watched.highest.values[0], watched.highest.bounds[0]], [1, 0.099])


def test_result_without_a_finite_value_has_no_worst() -> None:
    watched, _ = looked([lambda x: np.full_like(x, np.inf), lambda x: x], [1], [0.5])
    assert not np.isfinite(watched.highest.values[0])
    np.testing.assert_allclose([watched.lowest.values[1], watched.highest.values[1]], [0.5, 1.5])
