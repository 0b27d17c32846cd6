"""Smooth maps from readings: the prior against its own definition, averages against direct formulas, planted maps."""

from __future__ import annotations

import numpy as np
import pytest

from service.analysis.calibrated import Calibration
from service.analysis.calibration import calibrate, most_cases
from service.analysis.evaluations import FloatArray
from service.analysis.readings import Readings
from service.analysis.smoothing import WIDEST, Smoothing, SmoothMap, roughness
from service.analysis.unknowns import Prior, Unknown
from tests.analysis.heated_face import FIRST, SECOND, SIZES, Counted, responses

TYPICAL = 5e4
CONDUCTIVITY = 45.0

AT_FIRST, AT_SECOND = np.meshgrid(FIRST / SIZES[0], SECOND / SIZES[1], indexing="ij")

MAPS = {
    "bump": np.exp(-((AT_FIRST - 0.4) ** 2 + (AT_SECOND - 0.5) ** 2) / 0.2),
    "slope": 0.3 + 0.5 * AT_FIRST + 0.2 * AT_SECOND,
    "wave": 0.5 + 0.4 * np.cos(np.pi * AT_FIRST) * np.cos(np.pi * AT_SECOND),
    "saddle": 0.5 + (AT_FIRST - 0.5) * (AT_SECOND - 0.5),
    "side": np.exp(-AT_FIRST / 0.4),
}


def load(start: float = 0.0, **options: float | bool) -> SmoothMap:
    return SmoothMap("load", FIRST, SECOND, np.full(AT_FIRST.shape, start), TYPICAL, **options)  # type: ignore[arg-type]


def readings_of(values: FloatArray, spread: float) -> Readings:
    return Readings(np.arange(len(values)), values, np.full(len(values), spread))


def map_trial(true: FloatArray, seed: int, *, per_side: int = 5, upto: float = 1.0, spread: float = 0.1) -> Calibration:
    """A map seen by probes 3 mm below the face, rises in kelvin of some 20."""
    response, _, _ = responses(3.0, per_side, upto)
    rises = response * 1e-3 / CONDUCTIVITY
    noise = spread * np.random.default_rng(seed).standard_normal(len(rises))
    return calibrate(Counted(lambda q: 30 + rises @ q), [], readings_of(30 + rises @ true.ravel() + noise, spread),
                     smooth=load())  # fmt: skip


# --- the prior ---


def uneven(count: int) -> FloatArray:
    steps = 1 + 0.3 * np.sin(np.arange(count - 1))
    return np.concatenate(([0.0], np.cumsum(steps))) / steps.sum()


def test_planes_cost_nothing_and_bends_what_their_energy_is() -> None:
    first, second = 2 * uneven(24), 3 * uneven(28)
    rows = roughness(first, second)
    x, y = (axis.ravel() for axis in np.meshgrid(first, second, indexing="ij"))
    assert np.abs(rows @ (1 + 2 * x - 3 * y)).max() < 1e-9 * np.linalg.norm(rows @ (x * y))
    # Integrals of u_xx^2 + 2 u_xy^2 + u_yy^2 over the face of area 6: 4 * 6 less half a cell at either end, where there
    # is no second difference, 2 * 6, and that of cos(x) cos(y).
    costs = [float(((rows @ u) ** 2).sum()) for u in (x**2, x * y, np.cos(x) * np.cos(y))]
    waves = sum(2 * np.prod([a / 2 + sign * np.sin(2 * a) / 4 for a in (2, 3)]) for sign in (1, -1))
    ends = (first[1] - first[0] + first[-1] - first[-2]) / 2
    assert costs[0] / costs[1] == pytest.approx(4 * (2 - ends) * 3 / 12, rel=1e-9)
    assert costs[2] / costs[1] == pytest.approx(waves / 12, rel=0.05)


def test_maps_of_the_prior_depart_from_planes_by_the_departure() -> None:
    rows = roughness(FIRST, SECOND)
    covariance = np.linalg.pinv(rows.T @ rows, rcond=1e-12)
    drawn = np.random.default_rng(0).multivariate_normal(np.zeros(len(covariance)), covariance, 400)
    assert np.sqrt((drawn**2).mean()) == pytest.approx(1.0, rel=0.05)


@pytest.mark.parametrize("shape", [(2, 2), (2, 5), (3, 2)])
def test_small_tables_have_a_prior_too(shape: tuple[int, int]) -> None:
    rows = roughness(*(np.linspace(0, 1, count) for count in shape))
    assert np.linalg.matrix_rank(rows) == shape[0] * shape[1] - 3


def test_extreme_proportions_keep_planes_free() -> None:
    rows = roughness(np.linspace(0, 1e-3, 5), np.linspace(0, 10.0, 6))
    x, y = (axis.ravel() for axis in np.meshgrid(np.linspace(0, 1, 5), np.linspace(0, 1, 6), indexing="ij"))
    assert np.linalg.norm(rows @ (1 + x + y)) < 1e-6 * np.linalg.norm(rows @ y**2)


# --- averages ---


def test_of_one_departure_the_average_is_the_normal_posterior() -> None:
    smooth = load(departure=0.3 * TYPICAL)
    response, _, _ = responses(3.0, 4)
    slopes = response * 1e-3 / CONDUCTIVITY * TYPICAL / 0.1
    left = np.random.default_rng(2).standard_normal(len(slopes)) * 30
    place = np.random.default_rng(3).standard_normal((slopes.shape[1],))
    found = Smoothing(smooth, 0).average(place, left, slopes)
    rows = roughness(FIRST, SECOND) / 0.3
    information = slopes.T @ slopes + rows.T @ rows + np.eye(len(place)) / WIDEST**2
    np.testing.assert_allclose(found.covariance, np.linalg.inv(information), atol=1e-8)
    expected = np.linalg.solve(information, slopes.T @ (slopes @ place - left))
    np.testing.assert_allclose(place + found.step, expected, atol=1e-6)
    assert found.departure == pytest.approx(0.3)


def test_departures_weigh_by_how_likely_they_make_the_readings() -> None:
    response, _, _ = responses(3.0, 3)
    slopes = response * 1e-3 / CONDUCTIVITY * TYPICAL / 0.1
    seen = slopes @ MAPS["wave"].ravel() + np.random.default_rng(4).standard_normal(len(slopes))
    smoothing = Smoothing(load(), 0)
    departures = load().departures
    rows = roughness(FIRST, SECOND)
    # The density of the readings directly: their covariance is that of the maps seen through the slopes, and noise.
    densities = []
    for departure in departures:
        prior = np.linalg.inv(rows.T @ rows / departure**2 + np.eye(slopes.shape[1]) / WIDEST**2)
        spread = slopes @ prior @ slopes.T + np.eye(len(seen))
        densities.append(-0.5 * (np.linalg.slogdet(spread)[1] + seen @ np.linalg.solve(spread, seen)))
    weights = np.exp(np.array(densities) - max(densities)) * departures * np.exp(-0.5 * departures**2)
    found = smoothing.average(np.zeros(slopes.shape[1]), -seen, slopes)
    assert found.departure == pytest.approx(float(weights @ departures / weights.sum()), rel=1e-3)


# --- maps that were planted ---


@pytest.mark.parametrize("name", MAPS)
def test_planted_maps_lie_in_their_intervals(name: str) -> None:
    true = TYPICAL * MAPS[name]
    trials = [map_trial(true, seed) for seed in range(40)]
    inside = np.array([(t.smooth.low <= true) & (true <= t.smooth.high) for t in trials if t.smooth is not None])
    assert inside.shape == (40, 6, 7)
    assert inside.mean() >= 0.9
    # And they are worth something: narrower than the map is high.
    assert trials[0].smooth is not None
    assert np.median(trials[0].smooth.standard_uncertainties) < 0.15 * TYPICAL


def test_maps_drawn_from_the_prior_lie_in_their_intervals_as_often_as_stated() -> None:
    rows = roughness(FIRST, SECOND)
    covariance = np.linalg.pinv(rows.T @ rows, rcond=1e-12)
    random = np.random.default_rng(11)
    inside = []
    for seed in range(60):
        departure = abs(random.standard_normal())
        bend = random.multivariate_normal(np.zeros(len(covariance)), covariance).reshape(AT_FIRST.shape)
        plane = random.standard_normal(3) @ [np.ones_like(bend).ravel(), AT_FIRST.ravel(), AT_SECOND.ravel()]
        true = TYPICAL * (departure * bend + plane.reshape(bend.shape))
        found = map_trial(true, seed, per_side=4, spread=0.3).smooth
        assert found is not None
        inside.append((found.low <= true) & (true <= found.high))
    assert np.mean(inside) == pytest.approx(0.95, abs=0.025)


def test_a_linear_map_takes_two_waves() -> None:
    response, _, _ = responses(3.0, 5)
    evaluate = Counted(lambda q: response @ q * 1e-6)
    found = calibrate(evaluate, [], readings_of(response @ np.full(42, 0.05), 0.1), smooth=load(affine=True))
    assert found.linear
    assert evaluate.waves == [46, 1]
    assert found.cases == 47 <= most_cases(0, load(affine=True))


def test_a_plane_is_found_as_one_however_few_the_probes() -> None:
    true = TYPICAL * MAPS["slope"]
    found = map_trial(true, 1, per_side=3, spread=0.01)
    assert found.smooth is not None
    assert found.smooth.departure < 0.02 * TYPICAL
    np.testing.assert_allclose(found.smooth.values, true, atol=0.02 * TYPICAL)


def test_where_there_are_no_probes_the_map_is_said_to_be_open() -> None:
    everywhere = map_trial(TYPICAL * MAPS["wave"], 1).smooth
    one_half = map_trial(TYPICAL * MAPS["wave"], 1, upto=0.5).smooth
    assert everywhere is not None
    assert one_half is not None
    assert not everywhere.resolution.open.any()
    assert one_half.resolution.open[-1].all()
    assert not one_half.resolution.open[0.5 * SIZES[0] > FIRST].any()
    # Between probes 8 by 12 apart nothing smaller than that is seen.
    assert 8 < np.median(everywhere.resolution.lengths) < 16
    assert one_half.standard_uncertainties[-1].min() > 2 * one_half.standard_uncertainties[1].max()


def test_few_readings_tell_few_numbers_of_a_map() -> None:
    found = map_trial(TYPICAL * MAPS["bump"], 2, per_side=3)
    assert found.smooth is not None
    assert 3 < found.smooth.resolution.degrees < 9
    assert found.degrees_of_freedom == pytest.approx(9 - found.smooth.resolution.degrees, abs=1e-4)


# --- maps beside ordinary unknowns ---


def joint(prior: Prior | None, **options: float) -> tuple[Calibration, Counted]:
    """A map and the conductivity of the body under it, the far side at 30."""
    response, _, _ = responses(3.0, 5)
    true = TYPICAL * MAPS["bump"].ravel()
    evaluate = Counted(lambda p: 30 + response @ p[1:] * 1e-3 / p[0])
    noise = 0.1 * np.random.default_rng(3).standard_normal(len(response))
    readings = readings_of(30 + response @ true * 1e-3 / CONDUCTIVITY + noise, 0.1)
    unknown = Unknown("conductivity", 10, 200, 30, True, prior)
    return calibrate(evaluate, [unknown], readings, smooth=load(affine=True, **options), starts=2), evaluate


def test_a_map_and_a_conductivity_that_make_up_for_each_other_are_said_to() -> None:
    found, evaluate = joint(None)
    assert found.smooth is not None
    assert found.smooth.confounded == (0,)
    assert not found.estimates[0].told
    assert np.isinf(found.estimates[0].standard_uncertainty)
    assert evaluate.cases <= most_cases(1, load(affine=True), starts=2)


def test_what_is_known_of_a_conductivity_carries_over_to_the_map() -> None:
    found, _ = joint(Prior(CONDUCTIVITY, 2.0), departure=0.3 * TYPICAL)
    assert found.smooth is not None
    assert found.settled
    assert found.estimates[0].told
    true = TYPICAL * MAPS["bump"]
    assert ((found.smooth.low <= true) & (true <= found.smooth.high)).mean() >= 0.9
    sharp, _ = joint(Prior(CONDUCTIVITY, 1e-6), departure=0.3 * TYPICAL)
    assert sharp.smooth is not None
    wider = found.smooth.standard_uncertainties**2 - sharp.smooth.standard_uncertainties**2
    # The relative uncertainty of the conductivity is one of the map as well.
    high = found.smooth.values > 0.7 * TYPICAL
    np.testing.assert_allclose(np.sqrt(wider[high]), 2.0 / CONDUCTIVITY * found.smooth.values[high], rtol=0.05)


def test_a_far_side_is_told_from_a_map_by_probes_at_two_depths() -> None:
    near, _, _ = responses(3.0, 4)
    far, _, _ = responses(25.0, 4)
    response = np.vstack((near, far)) * 1e-3 / CONDUCTIVITY
    true = TYPICAL * MAPS["bump"].ravel()
    evaluate = Counted(lambda p: p[0] + response @ p[1:])
    y = 31.5 + response @ true + 0.1 * np.random.default_rng(8).standard_normal(len(response))
    found = calibrate(evaluate, [Unknown("far side", 0, 100, 50)], readings_of(y, 0.1), smooth=load())
    (estimate,) = found.estimates
    assert found.smooth is not None
    assert found.linear
    assert found.smooth.confounded == ()
    assert estimate.low <= 31.5 <= estimate.high
    assert estimate.standard_uncertainty < 0.5


def test_an_unknown_beside_a_map_stays_in_its_range() -> None:
    near, _, _ = responses(3.0, 4)
    far, _, _ = responses(25.0, 4)
    response = np.vstack((near, far)) * 1e-3 / CONDUCTIVITY
    y = 31.5 + response @ (TYPICAL * MAPS["bump"].ravel())
    evaluate = Counted(lambda p: p[0] + response @ p[1:])
    found = calibrate(evaluate, [Unknown("far side", 35, 100, 50)], readings_of(y, 0.1), smooth=load())
    assert found.estimates[0].value == 35
    assert found.estimates[0].at == "low"


def test_a_map_under_a_law_that_bends_is_found_by_iteration() -> None:
    # Readings of theta with u + 0.002 u^2 = theta: a conductivity that grows.
    response, _, _ = responses(3.0, 4)
    rises = response * 1e-3 / CONDUCTIVITY
    evaluate = Counted(lambda q: (np.sqrt(1 + 0.008 * np.maximum(rises @ q, -100)) - 1) / 0.004)
    true = TYPICAL * MAPS["wave"]
    y = (np.sqrt(1 + 0.008 * rises @ true.ravel()) - 1) / 0.004
    found = calibrate(evaluate, [], readings_of(y, 0.1), smooth=load(0.5 * TYPICAL))
    assert found.smooth is not None
    assert not found.linear
    assert found.settled
    assert ((found.smooth.low <= true) & (true <= found.smooth.high)).mean() >= 0.9
    assert found.cases <= most_cases(0, load())
