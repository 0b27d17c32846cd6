"""Best values against published optima, symmetric placings and what a search has to say of itself."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest

from service.analysis.best_values import BestValues, Goal, best_values
from service.analysis.evaluations import Evaluations, FloatArray
from service.analysis.limits import Limit
from service.analysis.rectangles import clearances
from tests.analysis.functions import BAD, Function, Functions

CB2: list[Function] = [
    lambda x: x[0] ** 2 + x[1] ** 4,
    lambda x: (2 - x[0]) ** 2 + (2 - x[1]) ** 2,
    lambda x: 2 * np.exp(x[1] - x[0]),
]
CB3: list[Function] = [lambda x: x[0] ** 4 + x[1] ** 2, CB2[1], CB2[2]]
DEM: list[Function] = [
    lambda x: 5 * x[0] + x[1],
    lambda x: -5 * x[0] + x[1],
    lambda x: x[0] ** 2 + x[1] ** 2 + 4 * x[1],
]
QL: list[Function] = [
    lambda x: x[0] ** 2 + x[1] ** 2,
    lambda x: x[0] ** 2 + x[1] ** 2 + 10 * (4 - 4 * x[0] - x[1]),
    lambda x: x[0] ** 2 + x[1] ** 2 + 10 * (6 - x[0] - 2 * x[1]),
]

ROSEN_SUZUKI: list[Function] = [
    lambda x: x[0] ** 2 + x[1] ** 2 + 2 * x[2] ** 2 + x[3] ** 2 - 5 * x[0] - 5 * x[1] - 21 * x[2] + 7 * x[3],
    lambda x: (x**2).sum() + x[0] - x[1] + x[2] - x[3],
    lambda x: x[0] ** 2 + 2 * x[1] ** 2 + x[2] ** 2 + 2 * x[3] ** 2 - x[0] - x[3],
    lambda x: 2 * x[0] ** 2 + x[1] ** 2 + x[2] ** 2 + 2 * x[0] - x[1] - x[3],
]
ROSEN_SUZUKI_LIMITS = [Limit(1, at_most=8.0), Limit(2, at_most=10.0), Limit(3, at_most=5.0)]

HS71: list[Function] = [
    lambda x: x[0] * x[3] * (x[0] + x[1] + x[2]) + x[2],
    lambda x: x.prod(),
    lambda x: (x**2).sum(),
]


def found(
    asked: Functions, ranges: list[tuple[float, float]], goal: Goal, limits: list[Limit] | None = None, **more: object
) -> BestValues:
    """Best values of functions, all of one unit, with what has to be true of every outcome."""
    outcome = best_values(asked, ranges, goal, limits or [], ["K"] * len(asked.functions), **more)  # type: ignore[arg-type]
    assert outcome.cases == sum(asked.waves) == len(asked.seen)
    low, high = np.array(ranges).T
    assert all(((case >= low) & (case <= high)).all() for case in asked.seen)
    return outcome


@pytest.mark.parametrize(
    ("functions", "half", "optimum", "at"),
    [
        # Luksan and Vlcek, Test problems for nonsmooth unconstrained and linearly constrained optimization, report
        # V-798 of the Institute of Computer Science, Prague, 2000, by their names there.
        pytest.param(CB2, 3.0, 1.9522245, (1.139113, 0.899501), id="CB2"),
        pytest.param(CB3, 3.0, 2.0, (1.0, 1.0), id="CB3"),
        pytest.param(DEM, 10.0, -3.0, (0.0, -3.0), id="DEM"),
        pytest.param(QL, 5.0, 7.2, (1.2, 2.4), id="QL"),
    ],
)
def test_the_largest_of_several_is_lowest(
    functions: list[Function], half: float, optimum: float, at: tuple[float, float]
) -> None:
    outcome = found(Functions(functions), [(-half, half)] * 2, Goal((0, 1, 2), "lowest"))
    best = outcome.best
    assert best is not None
    assert abs(best.goal - optimum) < 6e-8
    assert best.numbers == pytest.approx(at, abs=2e-6)
    assert best.goal == best.values.max()
    assert len(best.leading) >= 2
    assert [start.ended for start in outcome.starts] == ["converged"] * 4
    assert all(start.same_goal and start.same_numbers for start in outcome.starts)
    assert outcome.cases < 200


def test_limits_that_bend_are_held_for_sure_at_the_optimum() -> None:
    # Rosen and Suzuki 1965, problem 43 of Hock and Schittkowski, LNEMS 187, 1981: -44.
    asked = Functions(ROSEN_SUZUKI, bound=1e-8, noise=1.0)
    outcome = found(asked, [(-3.0, 3.0)] * 4, Goal((0,), "lowest"), ROSEN_SUZUKI_LIMITS)
    best = outcome.best
    assert best is not None
    assert -44 - 1e-8 <= best.goal <= -44 + 1e-6
    assert best.numbers == pytest.approx([0, 1, 2, -1], abs=1e-4)
    assert best.binding == (0, 2)
    assert (best.margins >= best.margin_bounds).all()
    assert best.margins[1] == pytest.approx(1.0, abs=1e-3)


def test_limits_are_aimed_at_from_inside_by_two_bounds() -> None:
    # The published multipliers are 1, 0 and 2: each bound inside costs as much. 100 on top makes the goal positive.
    functions: list[Function] = [lambda x: ROSEN_SUZUKI[0](x) + 100, *ROSEN_SUZUKI[1:]]
    outcome = found(Functions(functions, bound=1e-4), [(-3.0, 3.0)] * 4, Goal((0,), "lowest"), ROSEN_SUZUKI_LIMITS)
    best = outcome.best
    assert best is not None
    assert outcome.starts[0].last_goal == pytest.approx(56 + 2e-4 * (1 + 2), abs=2e-5)
    # What was seen on the way is as good if it holds by one.
    assert 56 + 1e-4 * (1 + 2) - 1e-6 <= best.goal <= outcome.starts[0].last_goal
    assert (best.margins >= 1e-4).all()


def test_a_limit_to_both_sides_and_a_number_at_the_end_of_its_range() -> None:
    # Problem 71 of Hock and Schittkowski 1981.
    limits = [Limit(1, at_least=25.0), Limit(2, at_most=40.0, at_least=40.0)]
    outcome = found(Functions(HS71, bound=1e-9), [(1.0, 5.0)] * 4, Goal((0,), "lowest"), limits)
    best = outcome.best
    assert best is not None
    assert best.goal == pytest.approx(17.0140173, abs=1e-7)
    assert best.numbers == pytest.approx([1.0, 4.7429994, 3.8211503, 1.3794082], abs=2e-5)
    assert (best.at_low, best.at_high, best.binding) == ((0,), (), (0, 1))


def test_the_least_of_several_is_highest() -> None:
    asked = Functions([lambda x: 5 - (x[0] - 1) ** 2, lambda x: 5 - (x[0] + 1) ** 2 + x[1]])
    best = found(asked, [(-2.0, 2.0), (-1.0, 0.5)], Goal((0, 1), "highest")).best
    assert best is not None
    # Both alike at x0 = 1/8, with x1 at its end.
    assert best.numbers == pytest.approx([0.125, 0.5], abs=1e-6)
    assert best.goal == best.values.min() == pytest.approx(5 - 0.875**2, abs=1e-7)
    assert (best.leading, best.at_high) == ((0, 1), (1,))


def test_errors_up_to_the_bound_do_not_mislead() -> None:
    outcome = found(Functions(CB2, bound=1e-7, noise=1.0), [(-3.0, 3.0)] * 2, Goal((0, 1, 2), "lowest"))
    assert outcome.best is not None
    assert abs(outcome.best.goal - 1.9522245) < 2e-6
    assert all(start.same_goal for start in outcome.starts)


def test_cases_that_fail_are_gone_around() -> None:
    asked = Functions(CB2, is_valid=lambda x: bool(x.sum() > 1.9))
    outcome = found(asked, [(-3.0, 3.0)] * 2, Goal((0, 1, 2), "lowest"))
    assert outcome.best is not None
    assert abs(outcome.best.goal - 1.9522245) < 6e-8
    assert outcome.failed == sum(not asked.is_valid(case) for case in asked.seen) > 0
    assert outcome.failures == {BAD.code: BAD}


def test_a_best_place_beside_cases_that_fail_is_come_near() -> None:
    asked = Functions([lambda x: (x[0] - 0.5) ** 2 + (x[1] - 0.3) ** 2], is_valid=lambda x: bool(x[0] >= 0.6))
    outcome = found(asked, [(0.0, 1.0)] * 2, Goal((0,), "lowest"))
    assert outcome.best is not None
    assert outcome.best.goal == pytest.approx(0.01, abs=1e-5)
    assert outcome.best.numbers == pytest.approx([0.6, 0.3], abs=1e-3)


def test_where_no_values_hold_the_limits_the_least_missing_is_told() -> None:
    asked = Functions([lambda x: x[0], lambda x: (x[0] - 1) ** 2 + x[1] ** 2])
    outcome = found(asked, [(-2.0, 2.0)] * 2, Goal((0,), "lowest"), [Limit(1, at_most=-0.5)])
    best = outcome.best
    assert best is not None
    assert best.numbers == pytest.approx([1.0, 0.0], abs=1e-3)
    assert best.margins[0] == pytest.approx(-0.5, abs=1e-6)
    assert best.binding == (0,)


def test_a_search_stops_at_the_cases_it_may_have() -> None:
    for most in (5, 40, 100):
        asked = Functions(CB2)
        outcome = found(asked, [(-3.0, 3.0)] * 2, Goal((0, 1, 2), "lowest"), most_cases=most)
        assert outcome.cases <= most
        assert not outcome.complete
        assert outcome.best is not None
        assert outcome.best.goal == min(max(float(f(case)) for f in CB2) for case in asked.seen)


def test_a_search_begins_at_the_numbers_as_they_stand_and_is_the_same_each_time() -> None:
    first, again = (Functions(CB2), Functions(CB2))
    outcome, other = (
        found(asked, [(-3.0, 3.0)] * 2, Goal((0, 1, 2), "lowest"), first=np.array([2.0, 2.0]), seed=7)
        for asked in (first, again)
    )
    np.testing.assert_array_equal(first.seen[0], [2.0, 2.0])
    assert outcome.at_first == (20.0, 1e-10)
    assert len(outcome.starts) == 5
    np.testing.assert_array_equal(np.array(first.seen), np.array(again.seen))
    assert first.waves == again.waves
    assert outcome.starts[0].last_goal == other.starts[0].last_goal


def test_nothing_is_estimated_where_a_result_has_a_kink_or_limits_leave_no_room() -> None:
    # The three of CB2 as one result: its tangents do not tell of the kinks.
    in_one = Functions([lambda x: max(float(f(x)) for f in CB2)])
    outcome = found(in_one, [(-3.0, 3.0)] * 2, Goal((0,), "lowest"))
    assert outcome.best is not None
    assert outcome.best.goal > 1.9522245 + 1e-6
    assert outcome.best.left is None
    apart = found(Functions(CB2), [(-3.0, 3.0)] * 2, Goal((0, 1, 2), "lowest")).best
    assert apart is not None
    assert apart.left is not None
    assert apart.goal - 1.9522245 <= apart.left < 1e-3
    # Between y = 0 and y = (1 - x)^3 there is less and less room towards x = 1.
    cusp: list[Function] = [lambda x: -x[0], lambda x: x[1] - (1 - x[0]) ** 3, lambda x: x[1]]
    limits = [Limit(1, at_most=0.0), Limit(2, at_least=0.0)]
    for seed in range(3):
        best = found(Functions(cusp), [(-2.0, 2.0)] * 2, Goal((0,), "lowest"), limits, seed=seed).best
        assert best is not None
        assert best.left is None or best.goal + 1 <= best.left


@pytest.mark.parametrize("seed", range(6))
def test_what_is_left_in_a_curved_valley_is_no_more_than_estimated(seed: int) -> None:
    # Rosenbrock, Computer Journal 3 (1960) 175: 0 at (1, 1).
    asked = Functions([lambda x: 100 * (x[1] - x[0] ** 2) ** 2 + (1 - x[0]) ** 2], bound=1e-9, noise=0.5)
    best = found(asked, [(-2.0, 2.0)] * 2, Goal((0,), "lowest"), seed=seed).best
    assert best is not None
    assert best.left is not None
    assert best.goal <= best.left < 0.01


def test_what_it_costs_to_keep_inside_of_a_limit_is_part_of_the_estimate() -> None:
    # The optimum -1 less what two bounds of 1e-3 inside of the limit cost at a slope of 5.
    asked = Functions([lambda x: -5 * x[0] + x[1] ** 2, lambda x: x[0] + 0.01 * x[1]], bound=1e-3)
    best = found(asked, [(-1.0, 1.0)] * 2, Goal((0,), "lowest"), [Limit(1, at_most=0.2)]).best
    assert best is not None
    assert best.goal > -1.0 + 4e-3
    assert best.left is not None
    assert best.goal + 1.0 <= best.left


def test_a_goal_that_no_number_changes_is_told() -> None:
    still = found(Functions([lambda x: 3.0], noise=1.0), [(-1.0, 1.0)], Goal((0,), "lowest"))
    assert (still.goal_changes, found(Functions(CB2), [(-3.0, 3.0)] * 2, Goal((0,), "lowest")).goal_changes) == (
        False,
        True,
    )


def test_several_valleys_are_told_apart() -> None:
    # Two equal wells and a shallow one.
    asked = Functions([lambda x: -np.exp(-8 * (abs(x[0]) - 1) ** 2) - 0.5 * np.exp(-30 * x[0] ** 2)])
    outcome = found(asked, [(-2.0, 2.0)], Goal((0,), "lowest"), n_starts=8)
    assert outcome.best is not None
    assert abs(outcome.best.numbers[0]) == pytest.approx(1.0, abs=1e-3)
    ends = {(round(abs(float(start.last[0]))), start.same_goal) for start in outcome.starts}
    assert ends == {(1, True), (0, False)}
    assert {start.same_numbers for start in outcome.starts if start.same_goal} == {True, False}


def test_every_case_failing_is_told() -> None:
    outcome = found(Functions(CB2, is_valid=lambda x: False), [(-3.0, 3.0)] * 2, Goal((0,), "lowest"))
    assert (outcome.best, outcome.starts, outcome.failures) == (None, (), {BAD.code: BAD})


# Placing of sources


def fin(m: float, width: float) -> Callable[..., Evaluations]:
    """Excess in the middle of each of two strips of heat on a fin of length 1 with insulated ends.

    cosh(m x) cosh(m (1 - y)) / (m sinh m) is the excess at x from a unit at y > x.
    """

    def unit(x: float, y: float) -> float:
        low, high = min(x, y), max(x, y)
        return math.cosh(m * low) * math.cosh(m * (1 - high)) / (m * math.sinh(m))

    def mean(x: float, y: float) -> float:
        places, weights = np.polynomial.legendre.leggauss(8)
        return float(sum(w / 2 * unit(x, y + width / 2 * p) for p, w in zip(places, weights, strict=True)))

    def evaluate(cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        values = np.array([[mean(a, a) + mean(a, b), mean(b, a) + mean(b, b)] for a, b in cases])
        return Evaluations(values, np.full(values.shape, 1e-10))

    return evaluate


def test_two_strips_share_a_fin_by_halves() -> None:
    # Mirrored in the middle each has one half to itself, and is coolest in the middle of that.
    outcome = best_values(fin(3.0, 0.1), [(0.05, 0.95)] * 2, Goal((0, 1), "lowest"), [], ["K", "K"])
    assert outcome.best is not None
    assert sorted(outcome.best.numbers) == pytest.approx([0.25, 0.75], abs=1e-4)


def plate(cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
    """Mean excess under each of six pads on a thin plate of 3 x 2 with insulated edges and a film: double cosines."""
    centres = cases.reshape(len(cases), -1, 2)
    numbers = np.arange(30)
    along_x, along_y = (
        np.cos(np.pi * numbers * centres[..., axis, None] / size) * np.sinc(numbers * PAD / 2 / size)
        for axis, size in enumerate(PLATE)
    )
    doubled = np.where(numbers == 0, 1, 2)
    rates = (np.pi * numbers / PLATE[0])[:, None] ** 2 + (np.pi * numbers / PLATE[1]) ** 2
    driven = np.einsum("cpm,cpn->cmn", along_x, along_y) * np.outer(doubled, doubled) / (1 + 0.2 * rates)
    values = np.einsum("cpm,cpn,cmn->cp", along_x, along_y, driven)
    return Evaluations(values, np.full(values.shape, 1e-9))


PLATE, PAD, GAP = (3.0, 2.0), 0.3, 0.05


def gaps(cases: FloatArray) -> FloatArray:
    centres = cases.reshape(len(cases), -1, 2)
    return clearances(np.stack([centres - PAD / 2, centres + PAD / 2], axis=-1), GAP)


@pytest.mark.parametrize("seed", [0, 3])
def test_six_pads_share_a_plate_by_squares(seed: int) -> None:
    # Mirrored in the edges of six equal squares each pad has one to itself.
    row = np.array([[0.3 + 0.4 * index, 0.3] for index in range(6)]).ravel()
    squares = np.array([[x, y] for x in (0.5, 1.5, 2.5) for y in (0.5, 1.5)]).ravel()
    outcome = best_values(
        plate,
        [(PAD / 2, 3.0 - PAD / 2), (PAD / 2, 2.0 - PAD / 2)] * 6,
        Goal(tuple(range(6)), "lowest"),
        [],
        ["K"] * 6,
        first=row,
        apart=gaps,
        seed=seed,
        n_starts=3,
    )
    best = outcome.best
    assert best is not None
    assert outcome.at_first is not None
    expected = plate(squares[None]).values.max()
    assert expected - 1e-9 <= best.goal <= expected * (1 + 1e-7) < 0.6 * outcome.at_first[0]
    assert sorted(best.numbers.reshape(-1, 2).round(2).tolist()) == squares.reshape(-1, 2).tolist()
    assert best.leading == tuple(range(6))
    assert sum(start.same_goal for start in outcome.starts) >= 2
    assert best.clearances.min() == pytest.approx(1 - PAD - GAP, abs=1e-2)


@pytest.mark.parametrize("seed", range(4))
def test_pads_that_attract_each_other_stop_at_the_gap(seed: int) -> None:
    # The two are best at one place, which only one can have: apart by the gap, across or along.
    asked = Functions([lambda x: ((x - 1.0) ** 2).sum()])

    def two(cases: FloatArray) -> FloatArray:
        centres = cases.reshape(len(cases), 2, 2)
        return clearances(np.stack([centres - 0.2, centres + 0.2], axis=-1), 0.1)

    outcome = best_values(asked, [(0.0, 3.0)] * 4, Goal((0,), "lowest"), [], ["K"], apart=two, seed=seed)
    assert outcome.best is not None
    # 0.5 between the centres: each 0.25 from the best place.
    assert outcome.best.goal == pytest.approx(2 * 0.25**2, abs=1e-8)
    assert outcome.best.clearances[0] < 1e-8
    assert (two(np.array(asked.seen)) >= 0.0).all()


def test_what_has_to_keep_apart_does_so_even_if_its_slopes_say_nothing() -> None:
    asked = Functions([lambda x: -x[0]])

    def walled(cases: FloatArray) -> FloatArray:
        return np.where(cases <= 0.5, 1.0, -1.0)

    outcome = best_values(asked, [(0.0, 1.0)], Goal((0,), "lowest"), [], ["K"], apart=walled)
    assert outcome.best is not None
    assert 0.49 < outcome.best.numbers[0] <= 0.5
    assert np.array(asked.seen).max() <= 0.5


def test_rectangles_without_room_are_told_before_any_case() -> None:
    asked = Functions([lambda x: x[0]])

    def crowded(cases: FloatArray) -> FloatArray:
        centres = cases.reshape(len(cases), 3, 1, 1) + np.zeros((1, 1, 2, 1))
        return clearances(np.concatenate([centres - 0.5, centres + 0.5], axis=-1), 0.2)

    outcome = best_values(asked, [(0.5, 2.0)] * 3, Goal((0,), "lowest"), [], ["K"], apart=crowded)
    assert (outcome.best, outcome.has_room, asked.waves) == (None, False, [])


def test_clearance_is_that_along_the_axis_of_the_widest_gap() -> None:
    rectangles = np.array([[[[0, 2], [0, 1]], [[5, 6], [0.5, 3]], [[1, 3], [0.5, 2]]]], dtype=float)
    np.testing.assert_array_equal(clearances(rectangles, 0.5), [[2.5, -1.0, 1.5]])
