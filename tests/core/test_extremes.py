"""The hottest and coldest place of a body."""

from __future__ import annotations

import numpy as np
import pytest

from service.core import AccuracyNotReached, Body, BoxSource, FaceMap, Inflow, Layer, Patch, Rectangle, solve
from tests.core.bodies import BODIES, UNIT, all_held, all_insulated, film, held, pad, without_far_face


def test_held_extremes_are_exact() -> None:
    extremes = solve(BODIES["cube, one face held"]).extremes(tolerance=1e-9)
    assert (extremes.hottest.value, extremes.hottest.error_bound) == (1.0, 0.0)
    assert extremes.hottest.position[2] == 0.0
    assert (extremes.coldest.value, extremes.coldest.error_bound) == (0.0, 0.0)


def test_generation_puts_the_hottest_place_inside() -> None:
    # Cube with unit generation and zero faces: 0.0562128 at the centre (classical; ten digits by the reference)
    body = Body(UNIT, UNIT, all_held(), (BoxSource((0, 0, 0), UNIT, 1.0),))
    hottest = solve(body).extremes(tolerance=1e-11).hottest
    assert hottest.where == "inside"
    assert hottest.position == pytest.approx((0.5, 0.5, 0.5), abs=1e-4)
    assert hottest.value == pytest.approx(0.05621283, abs=1e-8)
    assert hottest.error_bound <= 1e-10


def test_hottest_place_of_a_film_cooled_body_is_under_its_pad() -> None:
    body = Body(UNIT, UNIT, all_insulated(z_high=Inflow(pad(1.0, 1.0, 5.0)), z_low=film(1.0, 20.0)))
    hottest = solve(body).extremes(tolerance=1e-9).hottest
    assert hottest.where == "face z_high"
    assert 0.2 < hottest.position[0] < 0.6
    assert 0.3 < hottest.position[1] < 0.7


def test_coldest_place_can_be_a_corner() -> None:
    body = Body(UNIT, UNIT, all_insulated(x_low=held(1.0), x_high=film(1.0, 0.0), y_high=film(2.0, 0.0)))
    coldest = solve(body).extremes(tolerance=1e-10).coldest
    assert coldest.position[:2] == (1.0, 1.0)
    assert coldest.value == pytest.approx(
        float(solve(body).field_at(np.array([[1.0, 1.0, 0.3]]), tolerance=1e-12).potential[0]), abs=1e-9
    )


@pytest.mark.parametrize("name", BODIES)
def test_no_place_of_a_fine_grid_exceeds_the_extremes(name: str) -> None:
    solution = solve(BODIES[name])
    extremes = solution.extremes(tolerance=1e-9 * solution.span)
    generator = np.random.default_rng(11)
    lengths = [length if np.isfinite(length) else 4.0 for length in solution.body.size]
    points = generator.uniform(0.0, 1.0, size=(2000, 3))
    # Half of them on a face, where extremes are.
    points[:1000, :][np.arange(1000), generator.integers(0, 3, 1000)] = generator.integers(0, 2, 1000)
    if not np.isfinite(solution.body.size[2]):
        points[:, 2] *= 0.999
    values = solution.field_at(points * lengths, tolerance=1e-7 * solution.span).potential
    slack = 1e-7 * solution.span
    assert values.max() <= extremes.hottest.value + extremes.hottest.error_bound + slack
    assert values.min() >= extremes.coldest.value - extremes.coldest.error_bound - slack


def test_uniform_body_has_one_value() -> None:
    extremes = solve(Body(UNIT, UNIT, all_held(5.0))).extremes(tolerance=1e-9)
    assert extremes.hottest.value == extremes.coldest.value == 5.0


def test_body_driven_by_inflow_alone_has_its_extremes_on_the_driven_faces() -> None:
    faces = all_insulated(x_low=Inflow(FaceMap.uniform(1.0)), x_high=Inflow(FaceMap.uniform(-1.0)))
    extremes = solve(Body(UNIT, UNIT, faces)).extremes(tolerance=1e-9)
    assert extremes.hottest.value == pytest.approx(0.5, abs=1e-9)
    assert extremes.coldest.value == pytest.approx(-0.5, abs=1e-9)


def test_value_only_approached_along_a_bar_is_said_to_be_far_along_it() -> None:
    faces = without_far_face(all_insulated(x_low=film(2.0, 10.0), z_low=Inflow(FaceMap.uniform(3.0))))
    coldest = solve(Body((1.0, 1.0, np.inf), UNIT, faces)).extremes(tolerance=1e-9).coldest
    assert coldest.position[2] == np.inf
    assert coldest.where.endswith("far along the bar")
    assert coldest.value == pytest.approx(10.0, abs=1e-8)


def test_hottest_of_many_small_pads_is_found_among_them() -> None:
    generator = np.random.default_rng(5)
    pads = []
    for i in range(14):
        for j in range(14):
            low = np.array([i, j]) / 14 + generator.uniform(0.005, 0.03, 2)
            high = low + generator.uniform(0.002, 0.02, 2)
            pads.append(Patch(Rectangle(low[0], high[0], low[1], high[1]), float(generator.uniform(10, 900))))
    face_map = FaceMap.patches((1.0, 1.0), 0.0, pads)
    solution = solve(Body(UNIT, UNIT, all_insulated(z_low=Inflow(face_map), z_high=held(0.0))))
    hottest = solution.extremes(tolerance=1e-8 * solution.span).hottest
    middles = np.array(
        [[(p.where.p_low + p.where.p_high) / 2, (p.where.q_low + p.where.q_high) / 2, 0.0] for p in pads]
    )
    values = solution.field_at(middles, tolerance=1e-8 * solution.span).potential
    assert hottest.value >= values.max() - hottest.error_bound - 1e-8 * solution.span


def test_the_accuracy_offered_in_place_of_one_out_of_reach_is_met() -> None:
    # A load on a layer that conducts a hundred times as well as the one behind it.
    pad = FaceMap.patches((40.0, 60.0), 0.0, [Patch(Rectangle(1, 2, 3, 4), 1.0)])
    layers = [Layer(5.0, (3.0, 3.0, 3.0)), Layer(5.0, (0.03, 0.03, 0.03))]
    solution = solve(Body.stack((40.0, 60.0), layers, all_insulated(z_low=Inflow(pad), z_high=held(4.0))))
    with pytest.raises(AccuracyNotReached) as refused:
        solution.extremes(tolerance=1e-11)
    found = solution.extremes(tolerance=refused.value.bound)
    assert max(found.hottest.error_bound, found.coldest.error_bound) <= refused.value.bound
