"""Unknown numbers from readings: against published examples, closed forms, another solver and planted values."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest
from scipy.optimize import least_squares
from scipy.stats import norm

from service.analysis.calibrated import Calibration
from service.analysis.calibration import TooFewReadings, calibrate, most_cases
from service.analysis.evaluations import Evaluations, Failure, FloatArray
from service.analysis.readings import Readings, Root, Shared
from service.analysis.search import NothingSeen
from service.analysis.unknowns import Prior, Unknown
from tests.analysis.heated_face import Counted

NORMAL = norm.ppf(0.975)


def readings_of(values: FloatArray, spread: float | FloatArray, shared: tuple[Shared, ...] = ()) -> Readings:
    count = len(values)
    return Readings(np.arange(count), np.asarray(values, float), np.full(count, spread) if np.isscalar(spread)
                    else np.asarray(spread), shared)  # fmt: skip


# A pin fin: a bar of length 0.1 with a film of coefficient h all around, perimeter over area 40 per length, far end
# insulated. Excess cosh(m (L - x)) / cosh(m L), m^2 = 40 h / k; the flow per area into its base is k m tanh(m L) (base
# - ambient).
FIN_PLACES = np.array([0.01, 0.02, 0.03, 0.05, 0.08])
FIN_TRUE = np.array([80.0, 45.0, 180.0])


def fin(case: FloatArray) -> FloatArray:
    h, k, base = case
    m = np.sqrt(40 * h / k)
    excess = (base - 20) * np.cosh(m * (0.1 - FIN_PLACES)) / np.cosh(0.1 * m)
    return np.append(20 + excess, k * m * np.tanh(0.1 * m) * (base - 20))


FIN_SPREAD = np.append(np.full(5, 0.5), 0.02 * fin(FIN_TRUE)[-1])


def fin_unknowns(*, logarithmic: bool = True, prior: Prior | None = None) -> list[Unknown]:
    return [
        Unknown("film", 5, 2000, 100, logarithmic),
        Unknown("conductivity", 1, 400, 20, logarithmic, prior),
        Unknown("base", 50, 300, 100),
    ]


def fin_trial(seed: int, *, profile: bool = False) -> Calibration:
    noise = np.random.default_rng(seed).standard_normal(6)
    readings = readings_of(fin(FIN_TRUE) + FIN_SPREAD * noise, FIN_SPREAD)
    return calibrate(Counted(fin), fin_unknowns(), readings, profile=profile)


# NIST Statistical Reference Datasets, nonlinear regression, Misra1a: data and certified values, from memory.
MISRA_Y = [10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.40, 75.47, 81.78]
MISRA_X = np.array([77.6, 114.9, 141.1, 190.8, 239.9, 289.0, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760.0])


@pytest.mark.parametrize("logarithmic", [False, True])
def test_misra1a_comes_out_as_certified(logarithmic: bool) -> None:
    unknowns = [Unknown("b1", 10, 2000, 500, logarithmic), Unknown("b2", 1e-5, 1e-2, 1e-4, logarithmic)]
    found = calibrate(
        Counted(lambda b: b[0] * (1 - np.exp(-b[1] * MISRA_X))),
        unknowns,
        readings_of(np.array(MISRA_Y), 1.0),
        is_scaled=True,
    )
    certified = [2.3894212918e02, 5.5015643181e-04]
    spreads = [2.7070075241e00, 7.2668688436e-06]
    # The search stops a ten-thousandth of a standard uncertainty away.
    for estimate, value, spread in zip(found.estimates, certified, spreads, strict=True):
        assert abs(estimate.value - value) < 2e-4 * spread
        assert estimate.standard_uncertainty == pytest.approx(spread, rel=1e-5)
    assert found.chi_squared == pytest.approx(1.2455138894e-01, rel=1e-7)
    assert found.scaled_by == pytest.approx(1.0187876330e-01, rel=1e-7)
    assert found.probability is None


# Guide to the expression of uncertainty in measurement (JCGM 100:2008), example H.3: corrections of a thermometer.
H3_READ = [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
H3_CORRECTION = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]


def test_the_thermometer_of_the_gum_comes_out_as_published() -> None:
    at = np.append(H3_READ, 30.0) - 20
    evaluate = Counted(lambda y: y[0] + y[1] * at)
    unknowns = [Unknown("y1", -1, 1, 0), Unknown("y2", -1, 1, 0)]
    found = calibrate(evaluate, unknowns, readings_of(np.array(H3_CORRECTION), 1.0), is_scaled=True)
    first, second = found.estimates
    assert (round(first.value, 4), round(first.standard_uncertainty, 4)) == (-0.1712, 0.0029)
    assert (round(second.value, 5), round(second.standard_uncertainty, 5)) == (0.00218, 0.00067)
    assert round(found.correlation[0, 1], 3) == -0.930
    assert round(found.scaled_by, 4) == 0.0035
    # The correction at 30 degrees is predicted with its uncertainty through the covariance.
    assert (round(found.values[-1], 4), round(found.standard_uncertainties[-1], 4)) == (-0.1494, 0.0041)


def test_a_linear_problem_takes_two_waves() -> None:
    slopes = np.random.default_rng(5).normal(size=(8, 3))
    evaluate = Counted(lambda p: slopes @ p + 1)
    unknowns = [Unknown(name, -10, 10, 1) for name in "abc"]
    found = calibrate(evaluate, unknowns, readings_of(slopes @ [1.0, 2.0, 3.0] + 1, 0.1))
    assert found.linear
    assert evaluate.waves == [10, 1]
    assert [estimate.value for estimate in found.estimates] == pytest.approx([1, 2, 3], abs=1e-9)
    expected = np.sqrt(np.diag(np.linalg.inv(slopes.T @ slopes))) * 0.1
    assert [estimate.standard_uncertainty for estimate in found.estimates] == pytest.approx(expected, rel=1e-7)


def test_the_minimum_and_the_covariance_are_those_of_another_solver() -> None:
    y = fin(FIN_TRUE) + FIN_SPREAD * np.random.default_rng(42).standard_normal(6)
    found = calibrate(Counted(fin), fin_unknowns(logarithmic=False), readings_of(y, FIN_SPREAD))
    other = least_squares(lambda p: (fin(p) - y) / FIN_SPREAD, FIN_TRUE, x_scale=FIN_TRUE, jac="3-point", xtol=1e-15,
                          ftol=1e-15, gtol=1e-15)  # fmt: skip
    covariance = np.linalg.inv(other.jac.T @ other.jac)
    spreads = np.sqrt(np.diag(covariance))
    for estimate, value, spread in zip(found.estimates, other.x, spreads, strict=True):
        assert abs(estimate.value - value) < 3e-4 * spread
        assert estimate.standard_uncertainty == pytest.approx(spread, rel=1e-3)
    np.testing.assert_allclose(found.correlation, covariance / np.outer(spreads, spreads), atol=1e-4)
    assert found.chi_squared == pytest.approx(2 * other.cost, rel=1e-6)


def test_planted_numbers_lie_in_their_intervals_in_95_of_100_trials() -> None:
    trials = [fin_trial(seed) for seed in range(100)]
    assert all(trial.settled for trial in trials)
    for k, true in enumerate(FIN_TRUE):
        hits = sum(trial.estimates[k].low <= true <= trial.estimates[k].high for trial in trials)
        # Of 100 trials at 95 % fewer than 90 or more than 99 come once in fifty.
        assert 90 <= hits <= 99
    assert 88 <= sum(trial.consistent == "yes" for trial in trials) <= 99
    assert not any(trial.together for trial in trials)
    assert max(trial.cases for trial in trials) <= most_cases(3)


def test_intervals_that_follow_the_sum_of_squares_are_those_of_a_single_unknown() -> None:
    # One reading of exp(-a): the interval ends where the result is 1.96 standard uncertainties off.
    evaluate = Counted(lambda p: np.exp(-p))
    found = calibrate(evaluate, [Unknown("a", 0.0, 20.0, 1.0)], readings_of(np.array([0.1]), 0.03), profile=True)
    (estimate,) = found.estimates
    assert estimate.value == pytest.approx(np.log(10), abs=1e-5)
    assert estimate.is_bent
    assert estimate.profile == pytest.approx((-np.log(0.1 + 0.03 * NORMAL), -np.log(0.1 - 0.03 * NORMAL)), rel=5e-3)
    assert evaluate.cases <= most_cases(1, profile=True)


def test_profiles_of_several_unknowns_are_where_the_least_sum_of_squares_has_risen() -> None:
    found = fin_trial(3, profile=True)
    noise = np.random.default_rng(3).standard_normal(6)
    y = fin(FIN_TRUE) + FIN_SPREAD * noise

    def least(film: float) -> float:
        residuals = lambda p: (fin(np.array([film, *p])) - y) / FIN_SPREAD  # noqa: E731
        return 2 * float(least_squares(residuals, FIN_TRUE[1:], x_scale=FIN_TRUE[1:]).cost)

    ends = found.estimates[0].profile
    assert ends is not None
    for end in ends:
        assert least(end) - found.chi_squared == pytest.approx(NORMAL**2, rel=0.05)


def test_a_profile_of_a_linear_problem_is_its_interval() -> None:
    found = calibrate(
        Counted(lambda p: 2 * p), [Unknown("a", -9, 9, 0)], readings_of(np.array([3.0]), 0.5), profile=True
    )
    (estimate,) = found.estimates
    assert estimate.profile == pytest.approx((1.5 - 0.25 * NORMAL, 1.5 + 0.25 * NORMAL))
    assert (estimate.low, estimate.high) == pytest.approx(estimate.profile)


@pytest.mark.parametrize("logarithmic", [False, True])
@pytest.mark.parametrize("spread", [0.5, 1e-4])
def test_a_ratio_that_alone_matters_is_named_and_known(spread: float, logarithmic: bool) -> None:
    # Temperatures along a fin know the film and the conductivity by their ratio only.
    evaluate = Counted(fin)
    found = calibrate(evaluate, fin_unknowns(logarithmic=logarithmic), readings_of(fin(FIN_TRUE)[:5], spread))
    film, conductivity, base = found.estimates
    assert not film.told
    assert not conductivity.told
    assert np.isinf([film.standard_uncertainty, conductivity.standard_uncertainty]).all()
    assert (film.low, film.high) == (5, 2000)
    assert base.told
    assert np.isfinite(base.standard_uncertainty)
    (group,) = found.together
    assert (group.members, group.form, group.factors) == ((0, 1), "product", (1.0, -1.0))
    assert group.value == pytest.approx(80 / 45, rel=spread)
    # What depends on the ratio is known, the heat into the fin is not.
    assert np.isfinite(found.standard_uncertainties[:5]).all()
    assert np.isinf(found.standard_uncertainties[5])
    assert found.degrees_of_freedom == 3
    assert np.isnan(found.correlation[0, 1])


def test_the_ratio_is_known_as_well_as_if_it_were_the_unknown() -> None:
    found = calibrate(Counted(fin), fin_unknowns(), readings_of(fin(FIN_TRUE)[:5], 0.5))
    alone = calibrate(
        Counted(lambda p: fin(np.array([45 * p[0], 45.0, p[1]]))[:5]),
        [Unknown("ratio", 0.1, 30, 1.0, True), Unknown("base", 50, 300, 100)],
        readings_of(fin(FIN_TRUE)[:5], 0.5),
    )
    assert found.together[0].standard_uncertainty == pytest.approx(alone.estimates[0].standard_uncertainty, rel=1e-3)


def test_a_sum_that_alone_matters_is_named() -> None:
    evaluate = Counted(lambda p: np.array([p[0] + p[1], 2 * (p[0] + p[1]), p[2]]))
    unknowns = [Unknown("a", -50, 50, 1), Unknown("b", -50, 50, 2), Unknown("c", -50, 50, 3)]
    found = calibrate(evaluate, unknowns, readings_of(np.array([3.0, 6.0, 1.0]), 0.1))
    (group,) = found.together
    assert (group.members, group.form, group.factors) == ((0, 1), "sum", (1.0, 1.0))
    assert (group.value, group.standard_uncertainty) == pytest.approx((3.0, 0.1 / np.sqrt(5)), rel=1e-3)
    assert [estimate.told for estimate in found.estimates] == [False, False, True]


@pytest.mark.parametrize("logarithmic", [False, True])
def test_resistances_in_series_are_told_by_their_sum_wherever_the_search_ended(logarithmic: bool) -> None:
    # One reading of a wall with a film: 20 + q (0.045 / k + 1 / h); any power of h times k is right at one place only.
    evaluate = Counted(lambda p: np.array([20 + 3000 * (0.045 / p[0] + 1 / p[1])]))
    unknowns = [Unknown("k", 0.3, 5, 1.2, logarithmic), Unknown("h", 5, 100, 25, logarithmic)]
    found = calibrate(evaluate, unknowns, readings_of(np.array([210.0]), 1.0))
    (group,) = found.together
    assert (group.members, group.form) == ((0, 1), "reciprocals")
    assert group.factors == pytest.approx((1.0, 1 / 0.045), rel=1e-3)
    for k in (0.9, 1.5, 4.0):
        h = 1 / (190 / 3000 - 0.045 / k)
        away = group.factors[0] / k + group.factors[1] / h - group.value
        assert abs(away) < 0.1 * group.standard_uncertainty
    assert group.held is not None
    assert group.held.throughout
    assert np.ptp(group.held.numbers, axis=0).min() > 3
    np.testing.assert_allclose(evaluate(group.held.numbers).values, 210, atol=0.3)
    assert evaluate.cases <= most_cases(2)


def test_a_combination_of_no_form_is_said_to_hold_near_the_solution_only() -> None:
    evaluate = Counted(lambda p: np.array([np.exp(p[0]) + p[1] ** 2]))
    unknowns = [Unknown("a", 0.1, 3, 1.5), Unknown("b", 0.1, 4, 2)]
    found = calibrate(evaluate, unknowns, readings_of(np.array([9.0]), 0.05))
    (group,) = found.together
    held = group.held
    assert held is not None
    assert not held.throughout
    assert held.holds.any()
    # Where it does not hold the reading is met all the same, by values with another combination.
    np.testing.assert_allclose(np.exp(held.numbers[:, 0]) + held.numbers[:, 1] ** 2, 9.0, atol=0.1)
    off = np.abs(held.values - group.value) / group.standard_uncertainty
    assert off[held.holds].max() <= 2.5
    assert off.max() > 10


def test_a_valley_that_leads_to_zero_is_followed_as_well() -> None:
    evaluate = Counted(lambda p: np.array([np.exp(p[0] + p[1])]))
    unknowns = [Unknown("a", -5, 5, 1), Unknown("b", -5, 5, 1.2)]
    (group,) = calibrate(evaluate, unknowns, readings_of(np.exp([2.0]), 0.01), starts=1).together
    assert (group.form, group.factors) == ("sum", (1.0, 1.0))
    assert group.held is not None
    assert group.held.throughout
    assert group.held.numbers.min() < 0


def test_three_that_are_known_to_a_factor_are_told_by_two_ratios() -> None:
    depths = np.array([0.045, 0.025, 0.005])
    evaluate = Counted(lambda p: 20 + p[2] * (depths / p[0] + 1 / p[1]))
    unknowns = [Unknown("k", 0.3, 5, 1.2, True), Unknown("h", 5, 100, 25, True), Unknown("q", 500, 20000, 3000, True)]
    read = 20 + 3000 * (depths / 1.5 + 1 / 30) + np.array([0.5, -0.8, 0.3])
    found = calibrate(evaluate, unknowns, readings_of(read, 1.0))
    assert [(group.form, group.factors) for group in found.together] == [("product", (1.0, -1.0))] * 2
    assert {name for group in found.together for name in group.members} == {0, 1, 2}
    # Of a straight line, a + b depth, a and b are the ratios upside down.
    columns = np.column_stack((depths, np.ones(3)))
    line = np.linalg.lstsq(columns, read - 20)[0]
    expected = {(0, 2): 1 / line[0], (1, 2): 1 / line[1], (0, 1): line[1] / line[0]}
    for group in found.together:
        assert group.value == pytest.approx(expected[group.members[0], group.members[1]], rel=1e-4)
        assert group.held is not None
        assert group.held.throughout


@pytest.mark.parametrize("start", [0.0, 1.0])
def test_where_all_is_linear_only_sums_are_told(start: float) -> None:
    # At equal values the product of two, to first order, is as good as their sum.
    evaluate = Counted(lambda p: np.array([p[0] + p[1], p[0] + p[1]]))
    unknowns = [Unknown(name, 0, 10, start) for name in "ab"]
    found = calibrate(evaluate, unknowns, readings_of(np.array([2.35, 2.45]), 0.05))
    (group,) = found.together
    assert (group.form, group.factors) == ("sum", (1.0, 1.0))
    assert (group.value, group.standard_uncertainty) == pytest.approx((2.4, 0.05 / np.sqrt(2)), rel=1e-3)
    assert group.held is not None
    assert group.held.throughout
    assert evaluate.waves == [8, 1]


def test_an_unknown_nothing_depends_on_is_not_told_alone() -> None:
    evaluate = Counted(lambda p: np.array([p[0], np.exp(p[0])]))
    unknowns = [Unknown("a", 0, 2, 0.5), Unknown("idle", 1, 9, 3)]
    found = calibrate(evaluate, unknowns, readings_of(np.array([1.0, math.e]), 0.01))
    assert [estimate.told for estimate in found.estimates] == [True, False]
    assert (found.estimates[1].low, found.estimates[1].high) == (1, 9)
    assert found.together == ()


def test_a_prior_value_lets_a_ratio_be_taken_apart() -> None:
    readings = readings_of(fin(FIN_TRUE)[:5], 0.5)
    found = calibrate(Counted(fin), fin_unknowns(prior=Prior(45, 2)), readings)
    film, conductivity, _ = found.estimates
    assert film.told
    assert (conductivity.value, conductivity.standard_uncertainty) == pytest.approx((45, 2), rel=1e-2)
    # Nothing about the conductivity comes from the readings.
    assert conductivity.shares.sum() < 1e-6
    assert found.degrees_of_freedom == 3


def test_a_prior_value_weighs_as_a_reading() -> None:
    found = calibrate(Counted(lambda p: p), [Unknown("a", -9, 9, 0, prior=Prior(1.0, 0.3))],
                      readings_of(np.array([2.0]), 0.4))  # fmt: skip
    weights = np.array([0.3, 0.4]) ** -2.0
    (estimate,) = found.estimates
    assert estimate.value == pytest.approx((weights @ [1.0, 2.0]) / weights.sum())
    assert estimate.standard_uncertainty == pytest.approx(weights.sum() ** -0.5)
    assert estimate.shares == pytest.approx(weights[1] / weights.sum())
    assert found.degrees_of_freedom == 1
    assert found.chi_squared == pytest.approx(1.0 / (0.3**2 + 0.4**2))


def test_a_shared_error_does_not_average_out() -> None:
    shared = Shared(np.arange(4), 0.3)
    found = calibrate(Counted(lambda p: np.repeat(p, 4)), [Unknown("level", 0, 50, 10)],
                      readings_of(np.array([20.1, 19.9, 20.2, 19.8]), 0.2, (shared,)))  # fmt: skip
    (estimate,) = found.estimates
    assert estimate.standard_uncertainty == pytest.approx(np.sqrt(0.2**2 / 4 + 0.3**2))
    assert estimate.shares.sum() + estimate.shared.sum() == pytest.approx(1.0)
    assert estimate.shared[0] == pytest.approx(0.3**2 / (0.2**2 / 4 + 0.3**2))
    # It cannot be seen in how readings differ either.
    assert found.chi_squared == pytest.approx(sum(np.array([0.1, 0.1, 0.2, 0.2]) ** 2) / 0.2**2)


@pytest.mark.parametrize("seed", range(12))
def test_shared_errors_of_any_size_weigh_as_their_covariance(seed: int) -> None:
    random = np.random.default_rng(seed)
    count = int(random.integers(2, 6))
    own = 10.0 ** random.uniform(-60, 60) * random.uniform(0.1, 10, count)
    members = [np.sort(random.choice(count, size, replace=False)) for size in random.integers(1, count + 1, 2)]
    shared = [Shared(one, float(own.mean() * 10.0 ** random.uniform(-60, 60))) for one in members]
    root = Root(Readings(np.arange(count), np.zeros(count), own, tuple(shared)))
    with mpmath.workdps(300):
        covariance = mpmath.diag([mpmath.mpf(one) ** 2 for one in own.tolist()])
        for error in shared:
            row = mpmath.matrix(np.isin(np.arange(count), error.members).astype(float).tolist())
            covariance += row * row.T * mpmath.mpf(error.standard_uncertainty) ** 2
        errors = mpmath.matrix((own * random.standard_normal(count)).tolist())
        weighed = mpmath.inverse(covariance) * errors
        squares = float((errors.T * weighed)[0])
        expected = np.array([float(one * mpmath.mpf(size)) for one, size in zip(weighed, own.tolist(), strict=True)])
    whitened = root.whiten(np.array([float(one) for one in errors]))
    assert float(whitened @ whitened) == pytest.approx(squares, rel=1e-9, abs=1e-12)
    np.testing.assert_allclose(root.whiten_back(whitened) * own, expected, rtol=1e-9, atol=1e-12)


def test_a_huge_shared_error_leaves_differences_of_readings() -> None:
    evaluate = Counted(lambda p: np.array([p[0], p[0] + p[1], p[0] + 2 * p[1]]))
    shared = (Shared(np.arange(3), 1e30),)
    found = calibrate(evaluate, [Unknown("level", -100, 100, 0), Unknown("slope", -9, 9, 0)],
                      readings_of(np.array([20.0, 21.0, 22.2]), 0.1, shared))  # fmt: skip
    level, slope = found.estimates
    assert not level.told
    assert slope.value == pytest.approx(1.1, abs=1e-9)
    assert slope.standard_uncertainty == pytest.approx(0.1 / np.sqrt(2), rel=1e-6)
    assert found.chi_squared == pytest.approx(0.2**2 / 6 / 0.1**2, rel=1e-6)


@pytest.mark.parametrize("reading", [1e4, 1e9, 1e12])
def test_readings_beyond_anything_drive_an_unknown_to_its_end(reading: float) -> None:
    evaluate = Counted(lambda p: p[0] ** np.array([1.0, 1.5, 2.0]))
    for side, end, value in ((1, "high", 7.0), (-1, "low", 0.5)):
        found = calibrate(evaluate, [Unknown("a", 0.5, 7, 2)], readings_of(np.full(3, side * reading), 0.8))
        (estimate,) = found.estimates
        assert estimate.at == end
        assert estimate.value == pytest.approx(value, rel=1e-9)
        assert found.consistent == "no"


def test_one_result_may_be_read_several_times() -> None:
    readings = Readings(np.array([1, 1, 1]), np.array([2.0, 2.2, 2.4]), np.full(3, 0.1))
    found = calibrate(Counted(lambda p: np.array([7.0, p[0]])), [Unknown("a", 0, 9, 1)], readings)
    assert found.estimates[0].value == pytest.approx(2.2)
    assert found.values[0] == 7.0
    assert found.standard_uncertainties[0] == 0.0


def test_readings_that_contradict_the_body_are_said_to() -> None:
    y = fin(FIN_TRUE) + FIN_SPREAD * np.array([6.0, -6.0, 6.0, -6.0, 6.0, 0.0])
    found = calibrate(Counted(fin), fin_unknowns(), readings_of(y, FIN_SPREAD))
    assert found.consistent == "no"
    assert found.probability is not None
    assert found.probability < 1e-6


def test_one_wrong_reading_is_named() -> None:
    slopes = np.column_stack((np.ones(12), np.arange(12)))
    y = slopes @ np.array([1.0, 2.0]) + 0.1 * np.random.default_rng(1).standard_normal(12)
    y[4] += 0.8
    found = calibrate(
        Counted(lambda p: slopes @ p), [Unknown("a", -9, 9, 0), Unknown("b", -9, 9, 0)], readings_of(y, 0.1)
    )
    assert found.outliers == (4,)
    hat = slopes @ np.linalg.inv(slopes.T @ slopes) @ slopes.T
    np.testing.assert_allclose(found.leverages, np.diag(hat), atol=1e-9)
    np.testing.assert_allclose(found.normalised, found.left / (0.1 * np.sqrt(1 - np.diag(hat))), rtol=1e-7)


def test_as_many_readings_as_unknowns_leave_nothing_to_test() -> None:
    found = calibrate(Counted(lambda p: p), [Unknown("a", 0, 9, 1), Unknown("b", 0, 9, 1)],
                      readings_of(np.array([2.0, 3.0]), 0.1))  # fmt: skip
    assert found.degrees_of_freedom == 0
    assert found.probability is None
    assert found.consistent is None
    assert found.leverages == pytest.approx([1, 1])
    assert np.isnan(found.normalised).all()


def test_fewer_readings_than_unknowns_tell_a_combination() -> None:
    found = calibrate(Counted(lambda p: np.array([p[0] * p[1]])), [Unknown("a", 1, 9, 2), Unknown("b", 1, 9, 2)],
                      readings_of(np.array([12.0]), 0.1))  # fmt: skip
    assert found.degrees_of_freedom == 0
    assert not any(estimate.told for estimate in found.estimates)
    (group,) = found.together
    assert (group.form, group.factors) == ("product", (1.0, 1.0))
    assert (group.value, group.standard_uncertainty) == pytest.approx((12.0, 0.1), rel=1e-3)


def test_nothing_left_over_cannot_scale_uncertainties() -> None:
    with pytest.raises(TooFewReadings):
        calibrate(Counted(lambda p: p), [Unknown("a", 0, 9, 1)], readings_of(np.array([2.0]), 0.1), is_scaled=True)


def test_readings_that_are_met_exactly_leave_no_uncertainty_to_scale() -> None:
    evaluate = Counted(lambda p: np.exp(p[0] * np.array([0.5, 1.0, 1.5])))
    readings = readings_of(np.exp([0.5, 1.0, 1.5]), 0.1)
    found = calibrate(evaluate, [Unknown("a", 0, 3, 0.5)], readings, is_scaled=True, profile=True)
    assert found.settled
    assert found.estimates[0].value == pytest.approx(1.0, abs=1e-9)
    assert found.estimates[0].standard_uncertainty < 1e-9


def test_an_unknown_at_its_bound_is_said_to_be() -> None:
    found = calibrate(Counted(lambda p: np.array([p[0], p[0] ** 2])), [Unknown("a", 0, 1, 0.5)],
                      readings_of(np.array([1.5, 2.0]), 0.1))  # fmt: skip
    (estimate,) = found.estimates
    assert (estimate.at, estimate.value, estimate.high) == ("high", 1.0, 1.0)


def test_another_minimum_that_meets_the_readings_is_told_of() -> None:
    # A symmetric dependence: two places mirror each other.
    evaluate = Counted(lambda p: np.array([(p[0] - 5) ** 2, np.cos(p[0] - 5)]))
    found = calibrate(evaluate, [Unknown("a", 0, 10, 4)], readings_of(np.array([4.0, np.cos(2.0)]), 0.05))
    values = sorted([found.estimates[0].value, *(rival.numbers[0] for rival in found.rivals)])
    assert values == pytest.approx([3.0, 7.0], abs=1e-4)


def test_a_worse_minimum_is_left_for_the_best() -> None:
    # A frequency from a wave: from the given start alone the search ends beside it.
    times = np.linspace(0, 3, 20)
    evaluate = Counted(lambda p: np.cos(p[0] * times))
    readings = readings_of(np.cos(5.0 * times), 0.1)
    alone = calibrate(evaluate, [Unknown("frequency", 0.5, 9.5, 1.5)], readings, starts=1)
    found = calibrate(evaluate, [Unknown("frequency", 0.5, 9.5, 1.5)], readings, starts=8)
    assert alone.chi_squared > 100
    assert found.estimates[0].value == pytest.approx(5.0, abs=1e-3)
    assert found.minima > 1
    assert found.rivals == ()


def test_an_alias_that_meets_readings_as_well_is_found_from_nearly_all_starts() -> None:
    # A wave read at even times is the same with 2 pi / step more: nothing tells 4 from 18.66.
    times = np.linspace(0, 3, 8)
    alias = 4 + 2 * np.pi / times[1]
    told = 0
    for seed in range(20):
        noise = 0.1 * np.random.default_rng(seed).standard_normal(8)
        found = calibrate(Counted(lambda a: np.sin(a[0] * times)), [Unknown("a", 0, 20, 1)],
                          readings_of(np.sin(4 * times) + noise, 0.1), seed=seed)  # fmt: skip
        values = [found.estimates[0].value, *(rival.numbers[0] for rival in found.rivals)]
        told += all(np.abs(np.array(values) - true).min() < 0.3 for true in (4.0, alias))
    assert told >= 16


@pytest.mark.parametrize("bound", [1e-9, 1e-5, 1e-4])
def test_values_of_eased_accuracy_tell_what_exact_ones_do(bound: float) -> None:
    times = np.linspace(0, 1, 10)
    read = np.exp(-2 * times) + 0.05 * np.random.default_rng(0).standard_normal(10)

    def evaluate(cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        values = np.array([a * np.exp(-b * times) for a, b in cases])
        return Evaluations(values + bound * np.cos(1e9 * values), np.full(values.shape, bound), {})

    unknowns = [Unknown("a", 0.01, 10, 3), Unknown("b", 0.01, 10, 5)]
    found = calibrate(evaluate, unknowns, readings_of(read, 0.05))
    spreads = [estimate.standard_uncertainty for estimate in found.estimates]
    assert spreads == pytest.approx([0.03962, 0.1370], rel=5e-3)
    assert found.degrees_of_freedom == 8
    assert found.together == ()


def test_cases_that_fail_are_gone_around() -> None:
    def evaluate(cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        values = np.array([[np.exp(p[0]), p[0] ** 2] if p[0] > 0.3 else [np.nan, np.nan] for p in cases])
        failures = {int(row): Failure("no", "None.") for row in np.flatnonzero(np.isnan(values[:, 0]))}
        return Evaluations(values, 1e-12 * np.abs(values), failures)

    found = calibrate(evaluate, [Unknown("a", 0, 3, 0.1)], readings_of(np.array([math.e, 1.0]), 0.1))
    assert found.estimates[0].value == pytest.approx(1.0, abs=1e-4)

    def nothing(cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        return Evaluations(
            np.full((len(cases), 2), np.nan), np.full((len(cases), 2), np.nan), {0: Failure("no", "None.")}
        )

    with pytest.raises(NothingSeen) as raised:
        calibrate(nothing, [Unknown("a", 0, 3, 0.1)], readings_of(np.array([math.e, 1.0]), 0.1))
    assert raised.value.failure == Failure("no", "None.")


def test_the_same_question_has_the_same_answer_and_the_same_waves() -> None:
    y = fin(FIN_TRUE) + 0.3
    once, again = Counted(fin), Counted(fin)
    first = calibrate(once, fin_unknowns(), readings_of(y, FIN_SPREAD), seed=7)
    second = calibrate(again, fin_unknowns(), readings_of(y, FIN_SPREAD), seed=7)
    assert once.waves == again.waves
    assert first.estimates[0].value == second.estimates[0].value
