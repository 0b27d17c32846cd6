"""Limits all over a tolerance zone against closed forms."""

from __future__ import annotations

import numpy as np
import pytest

from service.analysis.evaluations import Evaluations, FloatArray
from service.analysis.limits import Limit, margins
from service.analysis.samples import Range
from service.analysis.sizing import where_limits_hold
from service.analysis.zone import WorstInZone, Zone, looks_at_a_place
from tests.analysis.functions import BAD, Functions


def zone(nominal: list[float], plus: list[float], minus: list[float]) -> Zone:
    return Zone(np.array(nominal), np.array(plus), np.array(minus))


# Surface of a wall of thickness d with conductivity k and a film h, 800 degC behind and 25 in front.
def surface(case: FloatArray) -> float:
    d, k, h = case
    return float(25 + 775 / (1 + h * d / k))


def test_looks_are_the_nominal_case_all_corners_and_ends_alone() -> None:
    of_two = zone([5.0], [0.1, 2.0], [0.3, 1.0])
    expected = {(0, 0), (-0.3, 0), (0.1, 0), (0, -1), (0, 2), (-0.3, -1), (-0.3, 2), (0.1, -1), (0.1, 2)}
    offsets = of_two.offsets()
    assert offsets[0].tolist() == [0.0, 0.0]
    assert {tuple(look) for look in offsets.tolist()} == expected
    assert looks_at_a_place(of_two) == len(expected)
    # One number has no corners beside its ends, and what is not off on one side has none there.
    assert looks_at_a_place(zone([5.0], [0.0, 2.0], [0.0, 1.0])) == 3
    assert looks_at_a_place(zone([5.0, 1.0], [0.0, 2.0, 1.0], [0.0, 0.0, 0.0])) == 4
    assert looks_at_a_place(zone([0.0] * 5, [0.0] + [1.0] * 5, [0.0] + [1.0] * 5)) == 1 + 10 + 32


def test_a_wall_is_as_thick_as_the_worst_corner_needs() -> None:
    # Worst: the wall thin, k high, h low: 1 + (h - 1) (d - 0.02) / (k + 0.1) = 775 / 35.
    asked = Functions([surface])
    worst = WorstInZone(asked, [Limit(0, at_most=60.0)], zone([1.2, 9.0], [0.01, 0.1, 2.0], [0.02, 0.2, 1.0]), "dkh")
    found = where_limits_hold(worst, Range(0.1, 6.0), worst.limits, ["K"])
    (interval,) = found.intervals
    expected = 0.02 + 1.3 / 8 * (775 / 35 - 1)
    assert abs(interval.low.number - expected) <= interval.low.error_bound < 1e-9
    assert worst.worst_case(interval.low.number, 0) == pytest.approx([expected - 0.02, 1.3, 8.0])
    assert interval.low.slope == pytest.approx(-775 * (8 / 1.3) / (775 / 35) ** 2, rel=1e-4)
    assert len(asked.seen) == found.cases * 15


def test_margins_keep_their_bounds_however_corners_are_off() -> None:
    rng = np.random.default_rng(3)
    truth = rng.normal(size=(50, 9))
    bounds = 10.0 ** rng.uniform(-3, 0.5, size=(50, 9))
    seen = truth + bounds * rng.uniform(-1, 1, size=(50, 9))

    def evaluate(cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        return Evaluations(seen.reshape(-1, 1), bounds.reshape(-1, 1))

    limit = Limit(0, at_most=0.4, at_least=-0.7)
    worst = WorstInZone(evaluate, [limit], zone([5.0], [0.1, 2.0], [0.3, 1.0]), "xy")
    found = worst(np.arange(50.0)[:, None])
    true_margin = margins([limit], truth.reshape(-1, 1)).reshape(50, 9).min(axis=1)
    margin = margins(worst.limits, found.values)[:, 0]
    assert (np.abs(margin - true_margin) <= found.bounds[:, 0] * (1 + 1e-12)).all()
    assert (found.bounds[:, 0] < bounds.max(axis=1)).any()


def test_a_place_fails_where_a_corner_does_and_names_it() -> None:
    asked = Functions([surface], is_valid=lambda case: bool(case[0] > 0))
    worst = WorstInZone(asked, [Limit(0, at_most=60.0)], zone([1.2, 9.0], [0.1, 0.1, 0.0], [0.1, 0.0, 0.0]), "dkh")
    found = worst(np.array([[0.05], [1.0]]))
    assert np.isnan(found.values[0, 0])
    assert np.isfinite(found.values[1, 0])
    assert found.failures[0].code == BAD.code
    assert found.failures[0].message == "With d = -0.05, k = 1.2, h = 9: The case is not valid."
    assert 1 not in found.failures


def test_limits_on_different_results_have_corners_of_their_own() -> None:
    asked = Functions([lambda case: case[0] + case[1], lambda case: case[0] - case[1]])
    limits = [Limit(0, at_most=5.0), Limit(1, at_least=1.0)]
    worst = WorstInZone(asked, limits, zone([0.0], [0.0, 0.5], [0.0, 0.5]), "xy")
    found = where_limits_hold(worst, Range(0.0, 9.0), worst.limits, ["K", "K"])
    (interval,) = found.intervals
    assert [interval.low.number, interval.high.number] == pytest.approx([1.5, 4.5])
    assert worst.worst_case(interval.low.number, 1)[1] == worst.worst_case(interval.high.number, 0)[1] == 0.5
