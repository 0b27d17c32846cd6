"""Derivatives, against closed forms and differences of 40 digits."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import mpmath
import numpy as np
import pytest

from service.analysis.derivatives import Derivatives, NominalFailed, derivatives, first_radii, most_cases
from service.analysis.evaluations import FloatArray
from service.analysis.interpolants import TARGET
from tests.analysis.formulas import Counted

# Thickness or length in m, conductivity in W/(m K), film coefficient in W/(m^2 K), flux in W/m^2 or excess in K.
NOMINAL = np.array([0.04, 95.0, 850.0, 1500.0])


def wall(length: Any, conductivity: Any, coefficient: Any, flux: Any) -> Any:
    """Temperature of the heated face of a plane wall over an ambient of 20."""
    return 20 + flux * (length / conductivity + 1 / coefficient)


def fin(functions: Any) -> Callable[..., Any]:
    """Tip of a fin of 3 mm half thickness, insulated there: 1 / cosh(m L)."""
    return lambda length, conductivity, coefficient, excess: (
        excess / functions.cosh(functions.sqrt(coefficient / (conductivity * 0.003)) * length)
    )


def sphere(functions: Any) -> Callable[..., Any]:
    """Middle of a sphere in which a decaying substance diffuses: phi / sinh(phi), phi = R sqrt(h / k)."""
    return lambda radius, conductivity, rate, level: (
        level
        * radius
        * functions.sqrt(rate / conductivity)
        / functions.sinh(radius * functions.sqrt(rate / conductivity))
    )


CLOSED_FORMS = [
    pytest.param(wall, wall, id="plane wall"),
    pytest.param(fin(np), fin(mpmath), id="fin"),
    pytest.param(sphere(np), sphere(mpmath), id="sphere"),
]


def by_differences(function: Callable[..., Any], order: int = 1) -> FloatArray:
    nominal = [mpmath.mpf(float(number)) for number in NOMINAL]
    with mpmath.workdps(40):
        orders = np.eye(4, dtype=int) * order
        return np.array([float(mpmath.diff(function, tuple(nominal), tuple(map(int, row)))) for row in orders])


def of(evaluate: Counted, nominal: FloatArray = NOMINAL, step: float = 1.0) -> Derivatives:
    return derivatives(evaluate, nominal, first_radii(nominal, np.full(len(nominal), step)))


@pytest.mark.parametrize(("function", "precise"), CLOSED_FORMS)
def test_derivatives_are_exact_to_what_is_said(function: Any, precise: Any) -> None:
    evaluate = Counted([function])
    found = of(evaluate)
    expected = by_differences(precise)
    assert np.all(np.abs(found.first[0] - expected) <= found.first_error[0])
    # 1e-6 is what is promised and a tenth of it is aimed at.
    assert np.all(found.first_error[0] <= 2 * TARGET * np.abs(expected))
    assert np.all(found.smooth)
    assert found.n_cases == evaluate.n_cases <= 1 + 4 * 10


@pytest.mark.parametrize(("function", "precise"), CLOSED_FORMS)
def test_second_derivatives_are_exact_to_what_is_said(function: Any, precise: Any) -> None:
    found = of(Counted([function]))
    expected = by_differences(precise, 2)
    assert np.all(np.abs(found.second[0] - expected) <= found.second_error[0])
    # Differences of 40 digits leave 1e-51 of a second derivative that is zero.
    bent = np.abs(expected) > 1e-40
    assert np.all(found.second_error[0][bent] <= 1e-2 * np.abs(expected[bent]))


def test_numbers_a_result_is_affine_in_are_recognised_and_take_six_cases() -> None:
    evaluate = Counted([wall])
    found = of(evaluate)
    assert found.affine.tolist() == [[True, False, False, True]]
    np.testing.assert_allclose(found.first[0, 3], 0.04 / 95 + 1 / 850, rtol=1e-12)
    assert of(Counted([lambda load: 20 + 0.3 * load]), np.array([500.0])).n_cases == 1 + 4 + 2


def test_all_numbers_share_waves() -> None:
    evaluate = Counted([wall, fin(np), sphere(np)])
    of(evaluate)
    # Four points and two probes of each of four numbers.
    assert evaluate.waves[0] == 1 + 4 * (4 + 2)
    assert len(evaluate.waves) <= 3


def test_values_that_are_less_sure_make_the_interval_wider_and_the_error_larger() -> None:
    sure, unsure = of(Counted([wall], 1e-12)), of(Counted([wall], 1e-7))
    assert np.all(unsure.radii > sure.radii)
    assert np.all(unsure.first_error > sure.first_error)


@pytest.mark.parametrize("sign", [-1.0, 1.0])
@pytest.mark.parametrize("bound", [1e-9, 1e-6])
def test_error_covers_values_anywhere_within_their_bounds(bound: float, sign: float) -> None:
    """The values are off by their whole bound, so as to tilt the result the most."""
    exact = of(Counted([fin(np)])).first[0, 0]

    def tilted(length: FloatArray, *others: FloatArray) -> FloatArray:
        return fin(np)(length, *others) + sign * bound * np.sign(length - NOMINAL[0])

    found = of(Counted([tilted], bound))
    assert 0 < abs(found.first[0, 0] - exact) <= found.first_error[0, 0]


@pytest.mark.parametrize("length", [0.001, 0.04, 1.0, 20.0])
def test_steep_and_flat_decay(length: float) -> None:
    """exp(-40 L): from hardly a decay to e^-800, which is zero."""
    found = of(Counted([lambda x: 100 * np.exp(-40 * x)], 1e-12), np.array([length]))
    expected = -4000 * np.exp(-40 * length)
    assert abs(found.first[0, 0] - expected) <= found.first_error[0, 0]
    # Values that are off by 1e-12, over a radius of a 64th of the length, times the sum of the weights.
    assert found.first_error[0, 0] <= max(1e-6 * abs(expected), 4 * 1e-12 * 64 / length)


def test_many_kinks_share_the_cases_there_are() -> None:
    """Twenty pads of one level: whichever is raised is hottest. No more cases than were said, and none told wrong."""
    evaluate = Counted([lambda *levels: np.max(levels, axis=0), lambda *levels: np.sum(levels, axis=0)])
    found = of(evaluate, np.full(20, 60.0))
    assert found.n_cases == evaluate.n_cases <= most_cases(20) == 1 + 10 * 20 + 48
    assert not found.smooth[0].any()
    assert np.all(found.first[0] - found.first_error[0] <= 0.5)
    assert np.all(found.first[0] + found.first_error[0] >= 0.5)
    np.testing.assert_allclose(found.first[1], 1, rtol=1e-9)
    assert found.smooth[1].all()


def test_kink_is_flagged_and_told_from_both_sides() -> None:
    """Two places compete for the hottest: one grows with the number, the other falls."""
    evaluate = Counted([lambda x: np.maximum(50 + 3 * (x - 2) + (x - 2) ** 2, 50 - 1 * (x - 2)), lambda x: x**3])
    found = of(evaluate, np.array([2.0]))
    assert found.smooth.tolist() == [[False], [True]]
    np.testing.assert_allclose([found.below[0, 0], found.above[0, 0]], [-1, 3], rtol=1e-7)
    assert found.first[0, 0] - found.first_error[0, 0] <= -1
    assert found.first[0, 0] + found.first_error[0, 0] >= 3
    assert np.isnan(found.second[0, 0])
    np.testing.assert_allclose(found.first[1, 0], 12, rtol=1e-7)
    assert found.n_cases <= most_cases(1)


@pytest.mark.parametrize("away", [-0.02, -1e-3, 1e-3, 0.02])
def test_kink_beside_the_nominal_is_kept_out(away: float) -> None:
    found = of(Counted([lambda x: np.maximum(3 * (x - 2 - away), -(x - 2 - away)) + x**2]), np.array([2.0]))
    assert found.smooth[0, 0]
    expected = 4 + (3 if away < 0 else -1)
    assert abs(found.first[0, 0] - expected) <= found.first_error[0, 0] <= 1e-6 * expected


def test_corner_of_infinite_slope_is_not_called_smooth() -> None:
    found = of(Counted([lambda x: np.sqrt(np.abs(x - 2))]), np.array([2.0]))
    assert not found.smooth[0, 0]


@pytest.mark.parametrize(("sign", "side"), [(1.0, "below"), (-1.0, "above")])
def test_number_at_its_limit_is_varied_from_the_other_side(sign: float, side: str) -> None:
    found = of(Counted([fin(np)], fails=lambda length, *_: sign * (length - 0.04) > 0))
    assert found.sides == (side, "both", "both", "both")
    expected = by_differences(fin(mpmath))[0]
    assert abs(found.first[0, 0] - expected) <= found.first_error[0, 0] <= 1e-6 * abs(expected)


def test_number_between_close_limits_is_varied_within_them() -> None:
    found = of(Counted([fin(np)], fails=lambda length, *_: np.abs(length - 0.04) > 1e-4))
    assert found.sides[0] == "both"
    expected = by_differences(fin(mpmath))[0]
    assert abs(found.first[0, 0] - expected) <= found.first_error[0, 0] <= 1e-6 * abs(expected)


def test_number_that_cannot_be_varied_says_why() -> None:
    found = of(Counted([fin(np)], fails=lambda length, *_: length != 0.04))
    assert found.failures[0].code == "not_physical"
    assert np.isnan(found.first[0, 0])
    assert np.all(np.isfinite(found.first[0, 1:]))


def test_nominal_case_without_results_is_an_error() -> None:
    with pytest.raises(NominalFailed, match="That is no body"):
        of(Counted([fin(np)], fails=lambda length, *_: length == 0.04))


def test_nominal_of_zero_is_varied_by_the_step() -> None:
    """A pad shifted from its place."""
    found = of(Counted([lambda shift: np.exp(3 * shift)]), np.array([0.0]), step=0.05)
    assert abs(found.first[0, 0] - 3) <= found.first_error[0, 0] <= 3e-6


def test_result_without_a_finite_bound_has_a_derivative_and_no_finite_error() -> None:
    found = of(Counted([fin(np)], bound=np.inf))
    np.testing.assert_allclose(found.first[0], by_differences(fin(mpmath)), rtol=1e-6)
    assert np.all(np.isinf(found.first_error))


def test_result_without_a_value_has_no_derivative() -> None:
    found = of(Counted([lambda *numbers: np.full(len(numbers[0]), np.inf), fin(np)]))
    assert np.all(np.isnan(found.first[0]))
    np.testing.assert_allclose(found.first[1], by_differences(fin(mpmath)), rtol=1e-6)


@pytest.mark.parametrize("seed", range(12))
def test_errors_hold_for_random_smooth_functions(seed: int) -> None:
    """Sums of decays, waves and poles of random places; the poles may be as near as a tenth of the number."""
    source = np.random.default_rng(seed)
    rate, wave, far = source.uniform(0.1, 30), source.uniform(0.1, 30), source.choice([-1, 1]) * source.uniform(0.1, 3)
    weights = source.normal(size=3)

    def function(x: Any, functions: Any = np) -> Any:
        a, b, c = (float(weight) for weight in weights)
        return a * functions.exp(-rate * x) + b * functions.sin(wave * x) + c / (x - 1 - far)

    found = of(Counted([function]), np.array([1.0]))
    with mpmath.workdps(40):
        expected = float(mpmath.diff(lambda x: function(x, mpmath), 1))
    assert abs(found.first[0, 0] - expected) <= found.first_error[0, 0] <= 1e-6 * abs(expected)


# Results with detail of a width about 1, with the slope at 1: a step, a step on a slope, a wiggle, a step beside.
DETAILS = [
    pytest.param(lambda x, w: np.tanh((x - 1) / w), lambda w: 1 / w, id="step"),
    pytest.param(lambda x, w: x + w * np.arctan((x - 1) / w), lambda w: 2.0, id="step on a slope"),
    pytest.param(lambda x, w: (x - 1) * np.exp(-(((x - 1) / w) ** 2)), lambda w: 1.0, id="wiggle"),
    pytest.param(lambda x, w: np.tanh((x - 1) / w + 0.7), lambda w: 1 / np.cosh(0.7) ** 2 / w, id="step beside"),
]


@pytest.mark.parametrize("width", [1e-2, 1e-3, 1e-4, 1e-5, 1e-6, 1e-7, 1e-8])
@pytest.mark.parametrize(("formula", "slope"), DETAILS)
def test_detail_far_finer_than_the_number_is_not_missed(formula: Any, slope: Any, width: float) -> None:
    """Layers of microns in stacks of decimetres: looks of a 64th of the number leave no trace of them."""
    found = of(Counted([lambda x: formula(x, width)], 1e-12), np.array([1.0]))
    assert abs(found.first[0, 0] - slope(width)) <= found.first_error[0, 0]
    # Down to a hundred thousandth it is found, and not only owned up to.
    if width >= 1e-5:
        assert found.first_error[0, 0] <= 1e-4 * slope(width)
        assert found.smooth[0, 0]
    assert found.n_cases <= most_cases(1)


def test_detail_of_one_result_costs_the_others_nothing() -> None:
    evaluate = Counted([lambda x: x + 1e-4 * np.arctan((x - 1) / 1e-4), lambda x: x**3], 1e-12)
    found = of(evaluate, np.array([1.0]))
    np.testing.assert_allclose(found.first[:, 0], [2, 3], rtol=1e-6)
    assert found.first_error[1, 0] <= 2 * TARGET * 3


@pytest.mark.parametrize("radius", [1e60, 1e10, 1e-14, 1e-60])
def test_absurd_first_radii_are_mended(radius: float) -> None:
    """1 / (1 + x / 300) at 300 falls by 1 / 1200, whatever step somebody asks for."""
    evaluate = Counted([lambda x: 1 / (1 + x / 300)])
    found = derivatives(evaluate, np.array([300.0]), np.array([radius]))
    assert abs(found.first[0, 0] + 1 / 1200) <= found.first_error[0, 0] <= 1e-3 / 1200


def test_step_of_a_number_at_zero_that_is_far_too_wide() -> None:
    found = of(Counted([lambda x: np.tanh(x / 0.1)]), np.array([0.0]), step=1e3)
    assert abs(found.first[0, 0] - 10) <= found.first_error[0, 0] <= 1e-6 * 10
