"""Sizing of one number against closed forms: intervals, their edges, and what is said where there is none."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest
from scipy.optimize import brentq

from service.analysis import edges
from service.analysis.edges import Edge
from service.analysis.limits import Limit
from service.analysis.samples import Range
from service.analysis.sizing import Sizing, where_equal, where_limits_hold
from tests.analysis.functions import BAD, Functions, of_one


def sized(
    function: Callable[[float], float],
    limit: Limit,
    scan: Range,
    *,
    bound: float = 1e-10,
    noise: float = 0.0,
    is_valid: Callable[[float], bool] = lambda number: True,
) -> Sizing:
    """Where one function holds one limit."""
    asked = Functions([of_one(function)], bound=bound, noise=noise, is_valid=lambda case: is_valid(float(case[0])))
    found = where_limits_hold(asked, scan, [limit], ["K"])
    assert found.cases == sum(asked.waves) == len({float(case[0]) for case in asked.seen})
    return found


def is_at(edge: Edge, expected: float, *, within: float = 1e-9) -> bool:
    """Whether an edge is where it should be to its bound, and to rounding as the function has no error here."""
    assert edge.kind == "limit"
    assert 0 < edge.error_bound < within * abs(expected)
    return abs(edge.number - expected) <= min(edge.error_bound, 1e-13 * abs(expected))


def test_thickness_of_a_wall_with_a_film_for_a_surface_temperature() -> None:
    # 800 degC behind d of 1.2 W/(m K), a film of 9 W/(m^2 K) to 25 degC: 1 / (1 + h d / k) of the difference is left.
    found = sized(lambda d: 25 + 775 / (1 + 9 * d / 1.2), Limit(0, at_most=60.0), Range(0.01, 5.0))
    (interval,) = found.intervals
    assert found.holds == "somewhere"
    assert is_at(interval.low, 1.2 / 9 * (775 / 35 - 1))
    assert interval.low.limit == 0
    assert interval.low.slope == pytest.approx(-775 * 7.5 / (775 / 35) ** 2, rel=1e-5)
    assert interval.low.slope is not None
    assert interval.low.error_bound == pytest.approx(1.5e-10 / abs(interval.low.slope), rel=1e-3)
    assert interval.high == Edge("range", 5.0)
    assert (found.touches, found.nearest, found.invalid) == ((), None, ())


def test_largest_thickness_of_a_wall_that_generates_over_five_decades() -> None:
    # Both faces held: the middle is g d^2 / (8 k) above them.
    found = sized(lambda d: 2e6 * d**2 / (8 * 0.4), Limit(0, at_most=30.0), Range(1e-5, 1.0, logarithmic=True))
    (interval,) = found.intervals
    assert is_at(interval.high, math.sqrt(30 * 8 * 0.4 / 2e6))


def test_side_of_a_square_bar_for_a_decay_length() -> None:
    # Held sides: gamma = pi sqrt 2 / a.
    found = where_equal(Functions([of_one(lambda a: a / (math.pi * math.sqrt(2)))]), Range(1.0, 200.0), 0, 12.5)
    (crossing,) = found.crossings
    assert is_at(crossing, 12.5 * math.pi * math.sqrt(2))


def test_length_of_a_fin_between_an_end_and_a_flow() -> None:
    # Tip insulated: the tip has 1 / cosh(m L) of the root's excess, the flow is tanh(m L) of that of an endless fin.
    m = 25.0
    asked = Functions([of_one(lambda x: 80 / math.cosh(m * x)), of_one(lambda x: 40 * math.tanh(m * x))])
    limits = [Limit(0, at_most=20.0), Limit(1, at_least=30.0, at_most=39.9)]
    found = where_limits_hold(asked, Range(0.001, 0.4), limits, ["K", "W"], [0.05, 0.1, 0.12, 0.2])
    (interval,) = found.intervals
    assert is_at(interval.low, math.acosh(4.0) / m)
    assert is_at(interval.high, math.atanh(39.9 / 40) / m)
    assert (interval.low.limit, interval.high.limit) == (0, 1)
    assert [(size.held, size.limit) for size in found.tried] == [("no", 0), ("yes", 1), ("yes", 1), ("no", 1)]
    assert found.tried[3].margin == pytest.approx(39.9 - 40 * math.tanh(5.0))


def test_all_of_the_range_holds() -> None:
    found = sized(lambda x: x, Limit(0, at_most=7.0), Range(1.0, 5.0))
    assert found.holds == "everywhere"
    assert [(interval.low, interval.high) for interval in found.intervals] == [(Edge("range", 1.0), Edge("range", 5.0))]


@pytest.mark.parametrize("place", [1.0, 2.345, 5.0])
def test_where_nothing_holds_the_nearest_is_told(place: float) -> None:
    found = sized(lambda x: 3 + (x - place) ** 2, Limit(0, at_most=2.0), Range(1.0, 5.0))
    assert (found.holds, found.intervals) == ("nowhere", ())
    assert found.nearest is not None
    assert found.nearest.number == pytest.approx(place, abs=1e-7)
    assert found.nearest.margin == pytest.approx(-1.0, abs=1e-13)


def test_nearest_of_two_limits_that_exclude_each_other_is_where_both_are_missed_alike() -> None:
    asked = Functions([of_one(lambda x: x), of_one(lambda x: 10 / x)])
    found = where_limits_hold(asked, Range(0.5, 9.0), [Limit(0, at_most=2.0), Limit(1, at_most=4.0)], ["K", "K"])
    # x - 2 = 10 / x - 4
    expected = -1 + math.sqrt(11)
    assert found.nearest is not None
    assert found.nearest.number == pytest.approx(expected, rel=1e-7)
    assert found.nearest.margin == pytest.approx(2 - expected, rel=1e-7)


@pytest.mark.parametrize("half", [0.02, 3e-3, 1e-4])
@pytest.mark.parametrize("side", [1.0, -1.0])
def test_two_solutions_closer_than_the_scan_are_found(half: float, side: float) -> None:
    # A parabola shows on the scan however little of it is beyond the limit.
    place = 2.2034
    found = sized(lambda x: side * ((x - place) ** 2 - half**2), Limit(0, at_most=0.0), Range(0.0, 5.0), bound=1e-12)
    edges = [edge for interval in found.intervals for edge in (interval.low, interval.high) if edge.kind == "limit"]
    assert len(edges) == 2
    for edge, expected in zip(edges, (place - half, place + half), strict=True):
        assert abs(edge.number - expected) <= edge.error_bound < 1e-8
    assert len(found.intervals) == (1 if side > 0 else 2)
    # No search goes on once it is decided what it is for.
    assert found.cases < (80 if half > 1e-3 else 110)


@pytest.mark.parametrize("place", [0.03, 4.97])
def test_two_solutions_within_the_first_or_last_step_are_found(place: float) -> None:
    found = sized(lambda x: (x - place) ** 2 - 1e-4, Limit(0, at_most=0.0), Range(0.0, 5.0))
    (interval,) = found.intervals
    assert is_at(interval.low, place - 0.01, within=1e-6)
    assert is_at(interval.high, place + 0.01, within=1e-6)


@pytest.mark.parametrize(("level", "holds"), [(1.0, "somewhere"), (-1.0, "undecided")])
def test_a_limit_that_is_touched_is_left_open(level: float, holds: str) -> None:
    found = sized(math.cos, Limit(0, at_most=1.0) if level > 0 else Limit(0, at_most=-1.0), Range(0.5, 9.0))
    (touch,) = found.touches
    expected = 2 * math.pi if level > 0 else math.pi
    assert found.holds == holds
    assert touch.number == pytest.approx(expected, abs=1.5e-5)
    assert abs(touch.margin) <= touch.error_bound == 1e-10
    # Outside it is decided: 1 - cos x = 1e-10 at 1.4e-5.
    assert expected - 6e-5 < touch.low < expected - 1.41e-5
    assert expected + 1.41e-5 < touch.high < expected + 6e-5
    assert len(found.intervals) == (1 if level > 0 else 0)


def test_a_touch_without_error_is_a_solution_of_no_width() -> None:
    found = sized(lambda x: (x - 1.03) ** 2, Limit(0, at_most=0.0), Range(0.0, 3.0), bound=0.0)
    (interval,) = found.intervals
    assert interval.low.number == interval.high.number == pytest.approx(1.03, abs=1e-8)


def test_an_edge_without_error_is_told_to_rounding() -> None:
    found = sized(lambda x: x**3, Limit(0, at_most=5.0), Range(0.0, 3.0), bound=0.0)
    (interval,) = found.intervals
    # The cube root of 5 is no number of the machine: the edge lies between it and a neighbour.
    assert abs(interval.high.number - 5 ** (1 / 3)) <= interval.high.error_bound
    assert 0 < interval.high.error_bound < 1e-14


def test_a_result_that_is_the_limit_everywhere_is_left_open() -> None:
    found = sized(lambda x: 5.0, Limit(0, at_most=5.0), Range(1.0, 3.0), noise=1.0)
    assert (found.holds, found.intervals) == ("undecided", ())
    assert [(touch.low, touch.high) for touch in found.touches] == [(1.0, 3.0)]


def test_cases_that_fail_split_the_range() -> None:
    def is_valid(x: float) -> bool:
        return not 1.0 < x < 1.234 and x < 2.9

    found = sized(lambda x: math.sin(6 * x), Limit(0, at_most=0.5), Range(0.1, 3.0), is_valid=is_valid)
    first, second, third = found.intervals
    assert is_at(first.low, 5 * math.pi / 36)
    assert first.high.kind == third.high.kind == "invalid"
    assert 0 <= 1.0 - first.high.number <= first.high.error_bound < 1e-6
    assert is_at(second.low, 17 * math.pi / 36)
    assert is_at(second.high, 25 * math.pi / 36)
    assert is_at(third.low, 29 * math.pi / 36)
    assert [invalid.failure for invalid in found.invalid] == [BAD, BAD]
    assert found.invalid[0].low == pytest.approx(1.0, abs=1e-6)
    assert found.invalid[0].high == pytest.approx(1.234, abs=1e-6)
    assert found.invalid[1].low == pytest.approx(2.9, abs=1e-6)
    assert found.invalid[1].high == 3.0


def test_cases_that_fail_beside_an_edge_leave_it_between_those_that_do_not() -> None:
    found = sized(lambda x: x, Limit(0, at_most=2.0), Range(0.1, 3.0), is_valid=lambda x: abs(x - 2.0) > 1e-3)
    (interval,) = found.intervals
    assert interval.high.kind == "invalid"
    assert interval.high.number == pytest.approx(1.999, abs=1e-6)


def test_an_edge_among_cases_that_go_on_failing_is_told_as_near_as_can_be(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(edges, "PASSES", 1)
    # Fails between the edge and the first step of the search that closes it in.
    found = sized(lambda x: x**3, Limit(0, at_most=8.0), Range(0.0, 3.1), is_valid=lambda x: not 1.97 < x < 1.9995)
    last = found.intervals[-1].high
    assert last.kind == "limit"
    assert 0 <= 2.0 - last.number <= last.error_bound < 0.1


def test_where_every_case_fails_there_is_a_reason_and_nothing_else() -> None:
    found = sized(lambda x: x, Limit(0, at_most=2.0), Range(0.1, 3.0), is_valid=lambda x: False)
    assert (found.holds, found.intervals, found.touches, found.nearest) == ("nowhere", (), (), None)
    assert [(invalid.low, invalid.high, invalid.failure) for invalid in found.invalid] == [(0.1, 3.0, BAD)]


def test_a_result_without_a_finite_value_counts_as_a_case_that_fails() -> None:
    found = sized(lambda x: math.inf if x < 1 else x, Limit(0, at_most=2.0), Range(0.1, 3.0))
    assert [invalid.failure.code for invalid in found.invalid] == ["not-finite"]
    assert found.intervals[0].low.kind == "invalid"


def test_a_size_of_the_list_may_lie_outside_the_range_or_fail() -> None:
    asked = Functions([of_one(lambda x: x)], is_valid=lambda case: bool(case[0] < 10))
    found = where_limits_hold(asked, Range(0.0, 3.0), [Limit(0, at_most=2.0)], ["K"], [-1.0, 2.0, 5.0, 20.0])
    assert [size.held for size in found.tried] == ["yes", "undecided", "no", None]
    assert found.tried[3].failure == BAD
    assert found.intervals[0].low == Edge("range", 0.0)


@pytest.mark.parametrize("seed", range(20))
def test_wavy_functions_with_noise_against_a_dense_look(seed: int) -> None:
    # Waves of at most a twelfth of the range, with errors up to the bound: the scan is fine enough to miss none.
    generator = np.random.default_rng(seed)
    sizes, phases, rates = generator.normal(size=5), generator.uniform(0, 7, 5), generator.uniform(0, 12, 5)

    def wavy(x: float) -> float:
        return float((sizes * np.sin(rates * x + phases)).sum())

    found = sized(wavy, Limit(0, at_most=0.3), Range(0.0, 2 * math.pi), bound=1e-8, noise=0.99)
    places = np.linspace(0, 2 * math.pi, 4001)
    values = np.array([wavy(float(x)) - 0.3 for x in places])
    steps = np.flatnonzero(np.sign(values[1:]) != np.sign(values[:-1]))
    expected = [brentq(lambda x: wavy(x) - 0.3, places[step], places[step + 1], xtol=1e-15) for step in steps]
    edges = [edge for interval in found.intervals for edge in (interval.low, interval.high) if edge.kind == "limit"]
    assert len(edges) == len(expected)
    for edge, place in zip(edges, expected, strict=True):
        assert abs(edge.number - place) <= edge.error_bound < 1e-5


def test_a_result_meets_a_value_from_either_side_and_says_how_near_it_comes() -> None:
    asked = Functions([of_one(math.cos)])
    scan = Range(0.5, 9.0)
    found = where_equal(asked, scan, 0, 0.0)
    for crossing, expected in zip(found.crossings, np.array([1, 3, 5]) * math.pi / 2, strict=True):
        assert is_at(crossing, expected)
    assert [round(crossing.slope or 0.0) for crossing in found.crossings] == [-1, 1, -1]
    for level in (1.5, -1.5):
        nearest = where_equal(asked, scan, 0, level).nearest
        assert nearest is not None
        assert nearest.number == pytest.approx(2 * math.pi if level > 0 else math.pi, abs=1e-6)
        assert nearest.margin == pytest.approx(-0.5 if level > 0 else 0.5)
    (touch,) = where_equal(asked, Range(0.5, 4.0), 0, -1.0).touches
    assert touch.number == pytest.approx(math.pi, abs=1.5e-5)


def test_searches_go_on_side_by_side() -> None:
    asked = Functions([of_one(lambda x: math.sin(6 * x))])
    where_limits_hold(asked, Range(0.1, 3.0), [Limit(0, at_most=0.5)], ["K"])
    one = Functions([of_one(lambda x: math.sin(6 * x))])
    where_limits_hold(one, Range(0.1, 0.3), [Limit(0, at_most=0.5)], ["K"])
    assert len(asked.waves) <= len(one.waves) + 8
    assert sum(asked.waves) < 33 + 6 * 18


def places_of(found: Sizing) -> list[tuple[float, float]]:
    return [(interval.low.number, interval.high.number) for interval in found.intervals]


@pytest.mark.parametrize("place", [1.4567, 1.7031, 1.9012])
@pytest.mark.parametrize("width", [3e-3, 1e-2])
def test_a_peak_between_places_is_followed_from_its_tails(place: float, width: float) -> None:
    # A Lorentz curve a tenth to a third of the spacing wide: its tails show on the scan, far from the limit.
    def peak(x: float) -> float:
        return 2 / (1 + ((x - place) / width) ** 2)

    scan = Range(1.0, 2.0)
    low, high = place - width, place + width
    above = sized(peak, Limit(0, at_least=1.0), scan, noise=1.0)
    assert above.holds == "somewhere"
    assert places_of(above) == [pytest.approx((low, high), abs=1e-9)]
    below = sized(peak, Limit(0, at_most=1.0), scan, noise=1.0)
    assert places_of(below) == [pytest.approx((1.0, low), abs=1e-9), pytest.approx((high, 2.0), abs=1e-9)]
    crossings = where_equal(Functions([of_one(peak)]), scan, 0, 1.0).crossings
    assert [crossing.number for crossing in crossings] == pytest.approx([low, high], abs=1e-9)
    assert max(above.cases, below.cases) < 33 + 60


def test_random_peaks_that_show_are_never_denied() -> None:
    rng = np.random.default_rng(0)
    for _ in range(60):
        width, place, height = 10 ** rng.uniform(-3.5, -1.8), rng.uniform(1.05, 1.95), rng.uniform(1.05, 3)

        def dip(x: float, at: tuple[float, float, float] = (width, place, height)) -> float:
            return 1 - at[2] * at[0] ** 2 / ((x - at[1]) ** 2 + at[0] ** 2)

        half = width * math.sqrt(height - 1)
        found = sized(dip, Limit(0, at_most=0.0), Range(1.0, 2.0))
        assert places_of(found) == [pytest.approx((place - half, place + half), abs=1e-8)]
        crossings = where_equal(Functions([of_one(dip)]), Range(1.0, 2.0), 0, 0.0).crossings
        assert [crossing.number for crossing in crossings] == pytest.approx([place - half, place + half], abs=1e-8)


def test_two_limits_that_hold_together_within_one_step_only_are_found() -> None:
    asked = Functions([of_one(lambda x: x), of_one(lambda x: 6.02 - x)])
    found = where_limits_hold(asked, Range(0.0, 7.3), [Limit(0, at_most=3.011), Limit(1, at_most=3.011)], ["K", "K"])
    assert places_of(found) == [pytest.approx((3.009, 3.011))]


def test_limits_that_exclude_each_other_are_both_missed_though_each_holds_elsewhere() -> None:
    asked = Functions([of_one(lambda x: x), of_one(lambda x: 9.0)])
    limits = [Limit(0, at_most=3.0), Limit(0, at_least=5.0), Limit(1, at_most=10.0)]
    nearest = where_limits_hold(asked, Range(0.0, 9.0), limits, ["K"] * 3).nearest
    assert nearest is not None
    assert nearest.number == pytest.approx(4.0, abs=1e-6)
    assert {missed.limit for missed in nearest.missed} == {0, 1}
    assert all(missed.held_elsewhere for missed in nearest.missed)


def test_noise_of_a_result_that_does_not_change_is_not_searched() -> None:
    asked = Functions([of_one(lambda x: 5.0), of_one(lambda x: x)], noise=1.0)
    limits = [Limit(0, at_most=4.0), Limit(1, at_most=9.0)]
    found = where_limits_hold(asked, Range(1.0, 3.0), limits, ["K", "K"], as_it_stands=2.2)
    assert (found.holds, found.unchanged) == ("nowhere", (0,))
    assert found.nearest is not None
    assert abs(found.nearest.number - 2.2) <= 2 / 32
    assert [(missed.limit, missed.held_elsewhere) for missed in found.nearest.missed] == [(0, False)]
    assert found.cases <= 33 + 2
    met = where_equal(Functions([of_one(lambda x: 5.0)], noise=1.0), Range(1.0, 3.0), 0, 5.0)
    assert met.unchanged == (0,)


@pytest.mark.parametrize("most", [33, 35, 40, 50, 60, 75, 90])
def test_no_more_cases_are_computed_than_allowed_and_bounds_still_hold(most: int) -> None:
    asked = Functions([of_one(lambda x: math.sin(6 * x))])
    found = where_limits_hold(asked, Range(0.1, 3.0), [Limit(0, at_most=0.5)], ["K"], most_cases=most)
    assert found.cases == len(asked.seen) <= most
    assert not found.complete
    expected = [math.pi * turn / 36 for turn in (5, 13, 17, 25, 29)]
    edges = [edge for interval in found.intervals for edge in (interval.low, interval.high) if edge.kind == "limit"]
    assert len(edges) == len(expected)
    for edge, place in zip(edges, expected, strict=True):
        assert abs(edge.number - place) <= edge.error_bound


def test_where_cases_begin_at_zero_the_end_is_told_to_a_part_of_the_spacing() -> None:
    found = sized(lambda x: x, Limit(0, at_most=2.0), Range(-5.0, 30.0), is_valid=lambda x: x > 0.0)
    (interval,) = found.intervals
    assert interval.low.kind == "invalid"
    assert 1e-12 < interval.low.number < 2e-6


def test_the_limit_that_ends_an_interval_is_the_one_passed_there_over_sixty_decades() -> None:
    # The second result changes by so much over the range that its margin is nothing beside that.
    asked = Functions([of_one(lambda x: 500 * 330 / x), of_one(lambda x: 1e5 / x)], bound=1e-9)
    limits = [Limit(0, at_most=500.0), Limit(1, at_least=140.0)]
    found = where_limits_hold(asked, Range(1e-30, 1e30, logarithmic=True), limits, ["K", "W"])
    (interval,) = found.intervals
    assert (interval.low.limit, interval.high.limit) == (0, 1)
    assert interval.low.number == pytest.approx(330.0)
    assert interval.low.slope == pytest.approx(-500 / 330, rel=0.2)
