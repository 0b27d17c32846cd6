"""Totals that have no bound, and totals that do although every part of the problem alone does not."""

from __future__ import annotations

import math

import pytest

from service.core import Body, FaceMap, Held, Inflow, Patch, Rectangle, solve
from tests.core.bodies import BODIES, UNIT, all_held, all_insulated, film, held, pad

BAR = BODIES["square bar, end held"]
LINEAR = FaceMap.readings((1.0, 1.0), [0.0, 1.0], [0.0, 1.0], [[0.0, 0.0], [1.0, 1.0]])


def test_end_of_a_bar_meets_its_sides_in_a_jump_and_has_no_total() -> None:
    total = solve(BAR).face_total("z_low", tolerance=1e-9)
    assert total.value is None
    assert total.error_bound is None
    assert {cause.line for cause in total.causes} == {
        "edge z_low/x_low",
        "edge z_low/x_high",
        "edge z_low/y_low",
        "edge z_low/y_high",
    }
    for cause in total.causes:
        # (2 / pi) k J for each edge of length 1 (elementary local solution u = 2 J theta / pi)
        assert cause.coefficient == pytest.approx(2 / math.pi, rel=1e-12)
        assert cause.largest_jump == 1.0


def test_total_with_a_gap_grows_by_the_coefficient_for_each_factor_e() -> None:
    solution = solve(BAR)
    wide, narrow = (solution.face_total("z_low", gap=gap, tolerance=1e-10).with_gap for gap in (1e-5, 1e-5 / math.e))
    assert wide is not None
    assert narrow is not None
    # Four edges of 2 / pi; the rest vanishes with the gap, of the order of the gap's share of the side.
    assert narrow.value - wide.value == pytest.approx(8 / math.pi, abs=2e-4)


def test_gap_on_the_end_and_plane_at_that_height_have_the_same_finite_part() -> None:
    # Flow through the plane z = delta of the unit bar: (8 / pi) ln(1 / delta) - 3.60102386304096 + o(1)
    solution = solve(BAR)
    delta = 1e-6
    expected = 8 / math.pi * math.log(1 / delta) - 3.60102386304096
    assert solution.plane_total(2, delta, tolerance=1e-10).value == pytest.approx(expected, abs=3e-5)
    with_gap = solution.face_total("z_low", gap=delta, tolerance=1e-10).with_gap
    assert with_gap is not None
    assert with_gap.value == pytest.approx(expected, abs=3e-5)


@pytest.mark.parametrize("conductivity", [(1.0, 1.0, 1.0), (1.0, 2.0, 3.0)], ids=["isotropic", "orthotropic"])
def test_held_faces_that_agree_on_their_edges_have_plain_totals(conductivity: tuple[float, float, float]) -> None:
    # u = x: every face is held, every part of the problem alone jumps at the edges, the whole does not.
    linear = Held(LINEAR)
    faces = all_held(x_high=held(1.0), y_low=linear, y_high=linear, z_low=linear, z_high=linear)
    solution = solve(Body(UNIT, conductivity, faces))
    totals = solution.balance(tolerance=1e-10).inflow
    for face, expected in {"x_low": -1.0, "x_high": 1.0}.items():
        assert totals[face].value == pytest.approx(expected * conductivity[0], abs=1e-9)  # type: ignore[index]
    for face in ("y_low", "y_high", "z_low", "z_high"):
        assert totals[face].value == pytest.approx(0.0, abs=1e-9)  # type: ignore[index]


def test_patch_of_a_held_face_has_no_total_but_the_face_has() -> None:
    body = Body(UNIT, UNIT, all_held(z_low=Held(pad(1.0, 1.0, 1.0))))
    solution = solve(body)
    patch = solution.face_total("z_low", Rectangle(0.2, 0.6, 0.3, 0.7), gap=1e-3, tolerance=1e-9)
    assert patch.value is None
    assert {cause.kind for cause in patch.causes} == {"jump_line"}
    for cause in patch.causes:
        assert cause.coefficient == pytest.approx(0.4 / math.pi, rel=1e-12)
    assert patch.with_gap is not None
    face = solution.face_total("z_low", tolerance=1e-9)
    assert face.value is not None
    assert face.causes == ()


def test_endless_side_is_unbounded_by_its_length_and_says_how_much_per_length() -> None:
    bar = Body(
        (1.0, 1.0, math.inf),
        UNIT,
        {
            face: condition
            for face, condition in all_insulated(x_low=held(1.0), x_high=held(0.0)).items()
            if face != "z_high"
        },
    )
    total = solve(bar).face_total("x_low", tolerance=1e-9)
    assert total.value is None
    assert [cause.kind for cause in total.causes] == ["endless"]
    # One-dimensional flow k (1 - 0) / 1 per area, one wide
    assert total.causes[0].coefficient == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize("name", BODIES)
def test_books_close(name: str) -> None:
    solution = solve(BODIES[name])
    balance = solution.balance(tolerance=1e-9 * solution.span)
    endless = any(cause.kind == "endless" for total in balance.inflow.values() for cause in total.causes)
    assert balance.closed is (None if endless else True)
    if not endless:
        assert balance.residual is not None
        assert balance.error_bound is not None
        assert abs(balance.residual) <= balance.error_bound
        flows = [abs(total.value) for total in balance.inflow.values() if total.value is not None]
        assert balance.error_bound <= 1e-7 * max([*flows, abs(balance.generation), solution.span])


def test_inner_plane_through_a_jump_of_a_held_face_has_no_total() -> None:
    half = Held(FaceMap.patches((2.0, 1.0), 2.0, [Patch(Rectangle(0.0, 1.0, 0.0, 1.0), 6.0)]))
    solution = solve(Body((2.0, 1.0, 1.0), (3.0, 1.0, 3.0), all_insulated(z_high=half)))
    total = solution.plane_total(0, 1.0, gap=1e-4, tolerance=1e-9)
    assert total.value is None
    (cause,) = total.causes
    # From 6 to 2 along x: k J / pi for each factor e (elementary local solution u = J theta / pi)
    assert cause.coefficient == pytest.approx(3.0 * 4.0 / math.pi, rel=1e-12)
    assert cause.largest_jump == pytest.approx(4.0, rel=1e-12)
    narrower = solution.plane_total(0, 1.0, gap=1e-4 / math.e, tolerance=1e-9)
    assert total.with_gap is not None
    assert narrower.with_gap is not None
    assert narrower.with_gap.value - total.with_gap.value == pytest.approx(cause.coefficient, rel=1e-6)
    # A part of the plane that stops short of the face, and a plane beside the jump, have plain totals.
    assert solution.plane_total(0, 1.0, Rectangle(0.0, 1.0, 0.0, 0.9), tolerance=1e-9).value is not None
    assert solution.plane_total(0, 1.001, tolerance=1e-9).value is not None


def test_largest_jump_is_the_one_at_the_end_of_an_edge() -> None:
    rising = FaceMap.readings((2.0, 1.0), [0.0, 2.0], [0.0, 1.0], [[0.0, 0.0], [1.0, 1.0]])
    body = Body((2.0, 2.0, 1.0), UNIT, all_insulated(x_low=Held(rising), z_high=held(0.0)))
    causes = solve(body).face_total("x_low", tolerance=1e-9).causes
    assert [cause.largest_jump for cause in causes] == [pytest.approx(1.0, rel=1e-9)]


def test_gap_that_ends_just_on_another_jump_has_no_flow_either() -> None:
    patch = FaceMap.patches((1.0, 1.0), 0.2, [Patch(Rectangle(0.3, 0.6, 0.2, 0.7), 1.0)])
    solution = solve(Body(UNIT, UNIT, all_held(z_low=Held(patch), x_high=held(0.0))))
    assert solution.face_total("z_low", gap=0.2, tolerance=1e-9).with_gap is None
    assert solution.face_total("z_low", gap=0.21, tolerance=1e-9).with_gap is not None


def test_bound_covers_the_rounding_of_inflows_that_cancel_behind_a_thin_film() -> None:
    # The mean of the film face is its ambient exactly, since the inflows cancel; 1 / h magnifies their rounding.
    opposed = FaceMap.patches(
        (1.0, 1.0), 0.0, [Patch(Rectangle(0.1, 0.4, 0.2, 0.9), 1.0), Patch(Rectangle(0.55, 0.85, 0.1, 0.8), -1.0)]
    )
    solution = solve(Body(UNIT, UNIT, all_insulated(x_low=film(1e-9, 20.0), z_low=Inflow(opposed))))
    mean = solution.mean("x_low", tolerance=1e-9)
    assert abs(mean.value - 20.0) <= mean.error_bound
