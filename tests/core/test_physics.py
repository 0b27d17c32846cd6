"""What physics demands of any field, on random bodies of the whole range.

Each tolerance is the bound that the answers themselves carry: a claim fails when two answers that physics
makes equal differ by more than both bounds allow. ROUNDING stands for what the comparison itself rounds.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from service.core import NoSteadyState, Rectangle, Solution, solve
from service.core.faces import Face
from tests.core.reference.cases import Case, Cells, Wall, walls
from tests.core.reference.random_cases import Place, hard_places, random_case
from tests.core.reference.transformations import (
    change_data,
    data_range,
    mirror,
    numbers_of,
    shrink,
    stretch,
    triple,
    value_on,
)
from tests.core.reference.trilinear import KINDS, PLACES, trilinear_case, trilinear_field

ACCURACY = 1e-9
ROUNDING = 1e-14

SEEDS = st.integers(min_value=1000, max_value=10**6)
BODIES = settings(max_examples=25, deadline=None, derandomize=True)


def answer(case: Case, places: list[Place], with_flux: bool = False) -> tuple[Solution, NDArray[np.float64], float]:
    """Solution, potentials at places and their bound."""
    solution = solve(case.body())
    found = solution.field_at(np.array(places), tolerance=ACCURACY * scale(solution), with_flux=with_flux)
    return solution, found.potential, found.potential_bound


def scale(solution: Solution) -> float:
    """The span of the data, or one for a body all at one level."""
    return solution.span or 1.0


@BODIES
@given(SEEDS)
def test_conditions_of_the_faces_are_met(seed: int) -> None:
    case = random_case(seed)
    solution = solve(case.body())
    inside = hard_places(case, seed)["inside"]
    for face in case.faces:
        axis, high = "xyz".index(face[0]), face.endswith("high")
        place = list(inside)
        place[axis] = case.size[axis] if high else 0.0
        found = solution.field_at(np.array([place]), tolerance=ACCURACY * scale(solution), with_flux=True)
        assert found.flux is not None
        assert found.flux_bound is not None
        wall = case.walls[face]
        wanted = value_on(wall.data, [c for other, c in enumerate(place) if other != axis])
        potential, inflow = float(found.potential[0]), float(found.flux[axis, 0]) * (-1 if high else 1)
        level = ROUNDING * max(abs(potential), abs(wanted), solution.span)
        if wall.kind == "D":
            assert abs(potential - wanted) <= found.potential_bound + level
        elif wall.kind == "N":
            assert abs(inflow - wanted) <= found.flux_bound[0] + ROUNDING * abs(wanted)
        else:
            given_by_film = wall.coefficient * (wanted - potential)
            slack = wall.coefficient * (found.potential_bound + level)
            assert abs(inflow - given_by_film) <= found.flux_bound[0] + slack


@BODIES
@given(SEEDS)
def test_no_value_leaves_the_range_of_the_data_without_generation(seed: int) -> None:
    case = random_case(seed)
    given_levels = [0.0]
    made = {}
    for face, wall in case.walls.items():
        made[face] = wall if wall.kind != "N" else Wall("N")
        given_levels += numbers_of(made[face].data)
    case = replace(case, walls=made, sources=())
    _, values, bound = answer(case, list(hard_places(random_case(seed), seed).values()))
    assert values.max() <= max(given_levels) + bound
    assert values.min() >= min(given_levels) - bound


@BODIES
@given(SEEDS)
def test_extremes_bracket_every_value(seed: int) -> None:
    case = random_case(seed)
    solution, values, bound = answer(case, list(hard_places(case, seed).values()))
    extremes = solution.extremes(tolerance=ACCURACY * scale(solution))
    assert values.max() <= extremes.hottest.value + extremes.hottest.error_bound + bound
    assert values.min() >= extremes.coldest.value - extremes.coldest.error_bound - bound
    if not case.sources:
        assert "face" in extremes.hottest.where
        assert "face" in extremes.coldest.where


def test_hottest_place_of_a_generating_cube_is_its_centre() -> None:
    cold = dict.fromkeys(("x_low", "x_high", "y_low", "y_high", "z_low", "z_high"), Wall("D"))
    case = Case((1.0, 1.0, 1.0), (1.0, 1.0, 1.0), walls(**cold), (((0.0, 0.0, 0.0), (1.0, 1.0, 1.0), 1.0),))
    hottest = solve(case.body()).extremes(tolerance=1e-10).hottest
    # Value: classical constant; the place is known to the square root of the value's accuracy.
    assert hottest.value == pytest.approx(0.0562128298294354, abs=1e-10)
    assert hottest.position == pytest.approx((0.5, 0.5, 0.5), abs=1e-4)
    assert hottest.where == "inside"


def test_small_warm_patch_does_not_overshoot() -> None:
    """A truncated series would show 1.09 here (the constant of Wilbraham and Gibbs)."""
    cold = dict.fromkeys(("x_low", "x_high", "y_low", "y_high", "z_high"), Wall("D"))
    patch = Cells(0.0, ((39.5, 40.5, 39.5, 40.5, 1.0),))
    case = Case((80.0, 80.0, 80.0), (1.0, 1.0, 1.0), walls(**cold, z_low=Wall("D", patch)))
    places = [(39.5 + offset, 40.0, z) for offset in (1e-6, 1e-3, 0.02, 0.1) for z in (0.0, 1e-6, 1e-3, 0.01)]
    _, values, bound = answer(case, places)
    assert values.max() <= 1 + bound
    assert values.min() >= -bound


@BODIES
@given(SEEDS)
def test_books_close(seed: int) -> None:
    case = random_case(seed)
    solution = solve(case.body())
    balance = solution.balance(tolerance=ACCURACY * scale(solution))
    if balance.closed is None:
        assert math.isinf(case.size[2])
        return
    assert balance.residual is not None
    assert balance.error_bound is not None
    assert balance.closed
    assert abs(balance.residual) <= balance.error_bound
    # The bound says something: it is small beside what flows.
    moved = abs(balance.generation) + sum(abs(total.value or 0.0) for total in balance.inflow.values())
    unbounded = any(total.value is None for total in balance.inflow.values())
    assert unbounded or balance.error_bound <= 1e-6 * max(moved, flow_scale(solution, case))


def flow_scale(solution: Solution, case: Case) -> float:
    """Span times the largest conductance of the body from face to face."""
    lengths = [length if math.isfinite(length) else max(case.size[:2]) for length in case.size]
    volume = math.prod(lengths)
    return solution.span * max(k * volume / length**2 for k, length in zip(case.conductivity, lengths, strict=True))


@BODIES
@given(SEEDS, st.integers(min_value=0, max_value=1))
def test_mirrored_body_has_the_mirrored_field(seed: int, axis: int) -> None:
    case = random_case(seed)
    places = [place for name, place in hard_places(case, seed).items() if name != "close to a jump line"]
    turned = [triple([*p[:axis], case.size[axis] - p[axis], *p[axis + 1 :]]) for p in places]
    solution, values, bound = answer(case, places)
    _, other, other_bound = answer(mirror(case, axis), turned)
    # Turning rounds the places by an ulp of the side, which matters next to a face in proportion to nearness.
    slack = 1e-9 * scale(solution)
    assert np.abs(values - other).max() <= bound + other_bound + slack


@BODIES
@given(SEEDS)
def test_fields_of_two_sets_of_data_add_up(seed: int) -> None:
    case = random_case(seed)
    places = list(hard_places(case, seed).values())
    added = {face: 0.0 if wall.kind == "N" else 0.25 * (i + 1) for i, (face, wall) in enumerate(case.walls.items())}
    other = replace(case, walls={f: replace(w, data=added[f]) for f, w in case.walls.items()}, sources=())
    both = {f: replace(w, data=change_data(w.data, 1.0, added[f])) for f, w in case.walls.items()}
    total = replace(case, walls=both)
    answers = [answer(each, places) for each in (case, other, total)]
    difference = np.abs(answers[0][1] + answers[1][1] - answers[2][1]).max()
    rounding = ROUNDING * (data_range(total) + data_range(case) + max(scale(each[0]) for each in answers))
    assert difference <= sum(each[2] for each in answers) + rounding


@BODIES
@given(SEEDS)
def test_stretched_axes_give_the_same_field(seed: int) -> None:
    """Lengths over sqrt(k), flows and film coefficients over sqrt(k) of their axis: an isotropic body, same
    field.

    Powers of two keep the stretched numbers exact (Carslaw and Jaeger 1959, section 1.20).
    """
    case = random_case(seed)
    factors = [2.0 ** round(math.log2(math.sqrt(k))) for k in case.conductivity]
    places = list(hard_places(case, seed).values())
    solution, values, bound = answer(case, places)
    _, other, other_bound = answer(stretch(case, factors), [shrink(place, factors) for place in places])
    assert np.abs(values - other).max() <= bound + other_bound + ROUNDING * scale(solution)


@BODIES
@given(SEEDS)
def test_both_representations_agree_within_their_bounds(seed: int) -> None:
    case = random_case(seed)
    solution = solve(case.body())
    places = np.array(list(hard_places(case, seed).values()))
    tolerance = ACCURACY * scale(solution)
    found = solution.field_at(places, tolerance=tolerance, with_flux=False)
    certificate = solution.certificate(places, found.potential_bound, tolerance=tolerance)
    if certificate.agreement is None:
        return
    assert certificate.check_bound is not None
    assert certificate.checked_places > 0
    assert certificate.agreement <= certificate.error_bound + certificate.check_bound


def test_the_series_checks_most_bodies() -> None:
    """Without this the test above could pass by never comparing anything."""
    checked = 0
    for seed in range(40):
        case = random_case(seed)
        solution = solve(case.body())
        places = np.array([hard_places(case, seed)["inside"]])
        tolerance = ACCURACY * scale(solution)
        checked += solution.certificate(places, tolerance, tolerance=tolerance).agreement is not None
    assert checked >= 20


PADS: dict[str, tuple[Face, tuple[float, float, float, float], Face, tuple[float, float, float, float]]] = {
    "side by side": ("z_low", (0.1, 0.4, 0.2, 0.5), "z_low", (0.6, 0.9, 0.1, 0.7)),
    "opposite": ("z_low", (0.1, 0.4, 0.2, 0.5), "z_high", (0.3, 0.9, 0.1, 0.7)),
    "round the corner": ("z_low", (0.1, 0.4, 0.2, 0.5), "x_high", (0.2, 0.7, 0.05, 0.25)),
}


@pytest.mark.parametrize("name", PADS)
def test_rise_of_one_pad_by_another_is_mutual(name: str) -> None:
    first_face, first, second_face, second = PADS[name]
    rises = []
    for driven, pad, read, where in (
        (first_face, first, second_face, second),
        (second_face, second, first_face, first),
    ):
        area = (pad[1] - pad[0]) * (pad[3] - pad[2])
        given_walls = {
            "y_high": Wall("R", 0.0, 3.0),
            "y_low": Wall("D"),
            driven: Wall("N", Cells(0.0, ((*pad, 1 / area),))),
        }
        case = Case((1.0, 0.8, 0.3), (1.0, 2.0, 0.5), walls(**given_walls))
        mean = solve(case.body()).mean(read, Rectangle(*where), tolerance=1e-10)
        assert mean.error_bound < 1e-9
        rises.append(mean)
    assert abs(rises[0].value - rises[1].value) <= rises[0].error_bound + rises[1].error_bound + ROUNDING
    assert abs(rises[0].value) > 1e-3


@pytest.mark.parametrize("place", PLACES, ids=str)
@pytest.mark.parametrize("kinds", KINDS)
def test_trilinear_field_is_reproduced_within_its_bounds(kinds: str, place: Place) -> None:
    case = trilinear_case(kinds)
    solution = solve(case.body())
    # Close to a corner the fluxes of single faces are of the order of span / 7e-9 and cancel.
    found = solution.field_at(np.array([place]), tolerance=1e-9 * solution.span, with_flux=True)
    exact, exact_flux = trilinear_field(case, place)
    assert abs(found.potential[0] - exact) <= found.potential_bound + ROUNDING * solution.span
    assert found.flux is not None
    assert found.flux_bound is not None
    assert np.abs(found.flux[:, 0] - exact_flux).max() <= found.flux_bound[0] + ROUNDING * solution.span
    assert found.potential_bound <= 1e-9 * solution.span


def test_two_dimensional_part_is_exactly_flat() -> None:
    case = Case(
        (0.6, 1.0, 0.37),
        (52.0, 52.0, 52.0),
        walls(y_low=Wall("D", 100.0), x_high=Wall("R", 0.0, 750.0), y_high=Wall("R", 0.0, 750.0)),
    )
    heights = (0.0, 1e-7, 0.1, 0.2, 0.37)
    found = solve(case.body()).field_at(np.array([(0.3, 0.2, z) for z in heights]), tolerance=1e-7, with_flux=True)
    assert found.flux is not None
    assert (found.flux[2] == 0.0).all()
    assert np.ptp(found.potential) <= ROUNDING * 100


def test_unbalanced_insulated_body_has_no_steady_state() -> None:
    case = Case((1.0, 2.0, 0.5), (1.0, 1.0, 1.0), walls(z_low=Wall("N", 3.0), x_low=Wall("N", -1.0)))
    with pytest.raises(NoSteadyState) as caught:
        solve(case.body())
    # 3 on an area of 2, less 1 on an area of 1.
    assert caught.value.imbalance == pytest.approx(5.0, rel=1e-14)


def test_balanced_insulated_body_has_mean_zero_and_says_so() -> None:
    pads = {"z_low": Wall("N", Cells(0.0, ((0.0, 0.5, 0.0, 0.5, 4.0),))), "z_high": Wall("N", -1.0)}
    case = Case((1.0, 1.0, 0.5), (1.0, 2.0, 0.5), walls(**pads))
    solution = solve(case.body())
    assert solution.level_pinned
    # The mean over x and y is a straight line in z, so that the mean of its ends is that of the body.
    ends: tuple[Face, Face] = ("z_low", "z_high")
    mean = [solution.mean(face, tolerance=1e-10).value for face in ends]
    assert sum(mean) == pytest.approx(0.0, abs=1e-10)
    assert mean[0] - mean[1] == pytest.approx(1.0 * 0.5 / 0.5, rel=1e-9)


def test_flow_through_parallel_planes_is_the_same_between_insulated_sides() -> None:
    pads = {"z_low": Wall("R", Cells(1.0, ((0.2, 0.5, 0.1, 0.5, 4.0),)), 2.0), "z_high": Wall("D", 0.5)}
    case = Case((1.0, 1.0, 0.5), (1.0, 2.0, 0.5), walls(**pads))
    solution = solve(case.body())
    totals = [solution.plane_total(2, z, tolerance=1e-10) for z in (0.0, 1e-6, 0.25, 0.5)]
    for total in totals:
        assert total.value is not None
        assert total.error_bound is not None
        assert totals[0].value is not None
        assert totals[0].error_bound is not None
        assert abs(total.value - totals[0].value) <= total.error_bound + totals[0].error_bound + ROUNDING


def test_parts_of_a_face_add_up_to_the_face() -> None:
    case = Case(
        (1.0, 1.0, 0.5),
        (1.0, 2.0, 0.5),
        walls(z_low=Wall("R", Cells(1.0, ((0.2, 0.5, 0.1, 0.5, 4.0),)), 2.0), x_low=Wall("R", 0.5, 3.0)),
    )
    solution = solve(case.body())
    parts = [Rectangle(0.0, 0.3, 0.0, 1.0), Rectangle(0.3, 1.0, 0.0, 0.4), Rectangle(0.3, 1.0, 0.4, 1.0)]
    totals = [solution.face_total("z_low", part, tolerance=1e-11) for part in parts]
    whole = solution.face_total("z_low", tolerance=1e-11)
    assert whole.value is not None
    assert whole.error_bound is not None
    bounds = whole.error_bound + sum(total.error_bound or 0.0 for total in totals)
    assert abs(sum(total.value or math.inf for total in totals) - whole.value) <= bounds + ROUNDING
