"""The highest and lowest potential in a box of a body: a layer, a part of a face, a part of the inside."""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.core import (
    Body,
    BoxSource,
    ConductivityLaw,
    FaceMap,
    Grid,
    Held,
    HeldPad,
    Inflow,
    Insulated,
    Layer,
    Mixed,
    OutsideBody,
    Patch,
    Place,
    Rectangle,
    Solution,
    solve,
)
from service.core.faces import Face, axes_along, axis_of
from tests.core.bodies import BODIES, ENDLESS, UNIT, all_held, all_insulated, film, held, pad, without_far_face

Corner = tuple[float, float, float]

# A wall from 1 at z = 0 to 3 at z = 1 that generates 10 per volume and conducts 2 along z, nothing leaves its sides:
# u = 1 + 2 z + 2.5 z (1 - z), highest at z = 0.9.
WALL = Body(
    UNIT, (1.0, 1.0, 2.0), all_insulated(z_low=held(1.0), z_high=held(3.0)), (BoxSource((0, 0, 0), UNIT, 10.0),)
)


def of_wall(z: float) -> float:
    return 1.0 + 2.0 * z + 2.5 * z * (1.0 - z)


@pytest.mark.parametrize(
    ("low", "high", "highest", "lowest"),
    [
        (0.0, 1.0, 0.9, 0.0),
        (0.5, 0.95, 0.9, 0.5),
        (0.2, 0.6, 0.6, 0.2),
        (0.92, 0.99, 0.92, 0.99),
        (0.7, 0.7, 0.7, 0.7),
    ],
)
def test_wall_that_generates_is_highest_where_its_slope_is_zero(
    low: float, high: float, highest: float, lowest: float
) -> None:
    solution, corners = solve(WALL), ((0.1, 0.0, low), (0.6, 1.0, high))
    for place, z in (
        (solution.highest_within(*corners, tolerance=1e-10), highest),
        (solution.lowest_within(*corners, tolerance=1e-10), lowest),
    ):
        assert abs(place.value - of_wall(z)) <= place.error_bound <= 1e-10
        assert place.position[2] == pytest.approx(z, abs=1e-5)
        assert 0.1 <= place.position[0] <= 0.6


def test_peak_just_above_an_interface_is_that_of_the_body_in_one_piece() -> None:
    # The wall of above in two layers that are bonded perfectly, a little below its peak.
    layers = [Layer(height, (1.0, 1.0, 2.0), generation=10.0) for height in (0.8993, 0.1007)]
    solution = solve(Body.stack((1.0, 1.0), layers, WALL.faces))
    hot = solution.highest_within((0.2, 0.2, 0.5), (0.2, 0.2, 1.0), tolerance=1e-9)
    assert abs(hot.value - of_wall(0.9)) <= hot.error_bound <= 2e-9
    assert hot.position[2] == pytest.approx(0.9, abs=1e-4)


@pytest.mark.parametrize(
    ("outflow", "coldest", "distance"),
    # The values by a fine look at the field alone; at 0.2 the coldest place is nearer than anything that is looked at.
    [(0.2, 0.0, 0.0), (1.0, -8.696e-8, 1.37e-7), (2.0, -4.479e-4, 3.45e-4), (5.0, -0.12451, 0.0386)],
)
def test_coldest_place_beside_a_held_edge_is_found_however_near(
    outflow: float, coldest: float, distance: float
) -> None:
    # Held at 0 on y_high and at 10 on y_low, z_high gives off a little: beside the edge the slope along z_high grows as
    # the logarithm of the distance, so that the coldest place is off the edge, and all the nearer the less flows off.
    faces = all_insulated(y_low=held(10.0), y_high=held(0.0), z_high=Inflow(FaceMap.uniform(-outflow)))
    solution = solve(Body((1.0, 1.0, 0.4), UNIT, faces))
    cold = solution.lowest_within((0.0, 0.0, 0.0), (1.0, 1.0, 0.4), tolerance=1e-9)
    away = np.geomspace(1e-9, 0.5, 400)
    beside = solution.field(Grid(np.array([0.5]), np.sort(1.0 - away), np.array([0.4])), tolerance=1e-10)
    assert beside.potential.min() >= cold.value - cold.error_bound - beside.potential_bound
    assert cold.value == pytest.approx(coldest, rel=1e-3, abs=1e-9)
    assert 1.0 - cold.position[1] == pytest.approx(distance, rel=0.3)


# Three layers under a flow of 6 per area from the top, held at 0 below, with contacts between them: the potential rises
# by 6 R over each resistance R. The middle one generates 4 in all as well, which leaves below: its own rise is that of
# a flow that grows from 6 to 10, highest on its upper side.
LAYERS = (
    Layer(0.5, (1.0, 1.0, 2.0)),
    Layer(0.25, (3.0, 3.0, 1.0), contact_below=5.0, generation=16.0),
    Layer(1.0, (2.0, 2.0, 8.0), contact_below=20.0),
)
STACK = Body.stack((1.0, 2.0), LAYERS, all_insulated(z_low=held(0.0), z_high=Inflow(FaceMap.uniform(6.0))))
BELOW_FIRST = 10.0 * 0.5 / 2.0
ABOVE_FIRST = BELOW_FIRST + 10.0 / 5.0
BELOW_SECOND = ABOVE_FIRST + (6.0 * 0.25 + 0.5 * 16.0 * 0.25**2) / 1.0
ABOVE_SECOND = BELOW_SECOND + 6.0 / 20.0
TOP = ABOVE_SECOND + 6.0 / 8.0


@pytest.mark.parametrize(
    ("low", "high", "lowest", "highest"),
    [
        (0.0, 0.5, 0.0, BELOW_FIRST),
        (0.5, 0.75, ABOVE_FIRST, BELOW_SECOND),
        (0.75, 1.75, ABOVE_SECOND, TOP),
        (0.5, 0.5, BELOW_FIRST, BELOW_FIRST),
        (0.25, 1.75, 0.5 * BELOW_FIRST, TOP),
    ],
)
def test_layer_has_its_own_side_of_interfaces(low: float, high: float, lowest: float, highest: float) -> None:
    solution, corners = solve(STACK), ((0.0, 0.0, low), (1.0, 2.0, high))
    cold, hot = (
        look(*corners, tolerance=1e-9 * solution.span) for look in (solution.lowest_within, solution.highest_within)
    )
    assert abs(cold.value - lowest) <= cold.error_bound + 1e-13
    assert abs(hot.value - highest) <= hot.error_bound + 1e-13
    assert hot.error_bound <= 1e-9 * solution.span


def box_of(body: Body, generator: np.random.Generator) -> tuple[Corner, Corner]:
    """A box of a body that may be flat, and may reach to its ends."""
    low, high = [], []
    for begin, length in zip(body.begins, body.size, strict=True):
        end = min(length, 3.0)
        first, second = sorted(generator.uniform(max(begin, -3.0), end, 2))
        kind = generator.integers(0, 4)
        low.append(first if kind != 1 else begin)
        high.append(first if kind == 2 else second if kind != 3 else length)
    return (low[0], low[1], low[2]), (high[0], high[1], high[2])


def dense_values(solution: Solution, low: Corner, high: Corner, tolerance: float) -> np.ndarray:
    """The potential on a grid through a box, as far as 10 along an endless axis."""
    ends = ((max(first, -10.0), min(second, 10.0)) for first, second in zip(low, high, strict=True))
    axes = [np.unique(np.linspace(first, second, 24)) for first, second in ends]
    return solution.field(Grid(*axes), tolerance=tolerance).potential


@pytest.mark.parametrize("name", BODIES)
def test_no_place_of_a_dense_grid_exceeds_the_extremes_of_a_box(name: str) -> None:
    solution, generator = solve(BODIES[name]), np.random.default_rng(5)
    tolerance = 1e-7 * solution.span
    for _ in range(3):
        low, high = box_of(solution.body, generator)
        values = dense_values(solution, low, high, tolerance)
        hot = solution.highest_within(low, high, tolerance=tolerance)
        cold = solution.lowest_within(low, high, tolerance=tolerance)
        assert values.max() <= hot.value + hot.error_bound + tolerance
        assert values.min() >= cold.value - cold.error_bound - tolerance
        for place in (hot, cold):
            if np.isfinite(place.position).all():
                assert all(np.array(low) <= place.position)
                assert all(place.position <= np.array(high))
                found = solution.field_at(np.array([place.position]), tolerance=tolerance)
                assert abs(found.potential[0] - place.value) <= found.potential_bound + place.error_bound


@pytest.mark.parametrize("name", BODIES)
def test_whole_body_as_a_box_has_the_extremes_of_the_body(name: str) -> None:
    solution = solve(BODIES[name])
    tolerance = 1e-8 * solution.span
    known = solution.extremes(tolerance=tolerance)
    whole = solution.body.begins, solution.body.size
    assert solution.highest_within(*whole, tolerance=tolerance) == known.hottest
    assert solution.lowest_within(*whole, tolerance=tolerance) == known.coldest


def on_face(body: Body, face: Face, where: Rectangle) -> tuple[Corner, Corner]:
    """The corners of a rectangle of a face."""
    low, high = [body.end_of(face)] * 3, [body.end_of(face)] * 3
    first, second = axes_along(axis_of(face))
    low[first], high[first], low[second], high[second] = where.p_low, where.p_high, where.q_low, where.q_high
    return (low[0], low[1], low[2]), (high[0], high[1], high[2])


def test_part_of_a_held_face_is_as_its_data_say() -> None:
    # A patch of 50 from 0.2 to 0.6 along x and 0.6 to 1.4 along y on a background of 0, see `pad`.
    solution = solve(BODIES["every kind of face and two sources"])
    for where, highest, lowest in (
        (Rectangle(0.0, 1.0, 0.0, 2.0), 50.0, 0.0),
        (Rectangle(0.3, 0.5, 0.7, 1.2), 50.0, 50.0),
        (Rectangle(0.6, 1.0, 0.0, 2.0), 0.0, 0.0),
        (Rectangle(0.55, 0.9, 1.0, 2.0), 50.0, 0.0),
    ):
        corners = on_face(solution.body, "z_low", where)
        hot, cold = solution.highest_within(*corners, tolerance=1e-6), solution.lowest_within(*corners, tolerance=1e-6)
        assert (hot.value, hot.error_bound, cold.value, cold.error_bound) == (highest, 0.0, lowest, 0.0)
        assert where.p_low <= hot.position[0] <= where.p_high
        assert where.q_low <= hot.position[1] <= where.q_high


def test_part_of_a_face_of_readings_is_highest_where_its_border_cuts_them() -> None:
    # On x_high, y from 1 to 1.6 and z from 0 to 0.35 (half way to the second column): bilinear by hand. Rows of
    # `readings` stand at y = 0, 0.6 and 2, columns at z = 0, 0.35, 0.56 and 0.7.
    solution = solve(BODIES["every kind of face and two sources"])
    corners = on_face(solution.body, "x_high", Rectangle(1.0, 1.6, 0.1, 0.35))
    along_y = [(y - 0.6) / 1.4 for y in (1.0, 1.6)]
    columns = [(2 + 5 * part, 5 - 4 * part) for part in along_y]
    values = [low + (high - low) * z / 0.35 for low, high in columns for z in (0.1, 0.35)]
    hot, cold = solution.highest_within(*corners, tolerance=1e-6), solution.lowest_within(*corners, tolerance=1e-6)
    assert hot.value == pytest.approx(max(values), rel=1e-14)
    assert hot.error_bound == 0.0
    assert cold.value == pytest.approx(min(values), rel=1e-14)


def test_held_face_is_the_highest_of_a_box_that_reaches_it() -> None:
    solution = solve(BODIES["cube, one face held"])
    hot = solution.highest_within((0.2, 0.2, 0.0), (0.8, 0.8, 0.5), tolerance=1e-9)
    assert (hot.value, hot.error_bound, hot.where) == (1.0, 0.0, "face z_low")
    # Nowhere on the far side of the box is it higher than in the middle of its near side (symmetry, monotone in z).
    inside = solution.highest_within((0.2, 0.2, 0.3), (0.8, 0.8, 0.5), tolerance=1e-11)
    middle = solution.field_at(np.array([[0.5, 0.5, 0.3]]), tolerance=1e-12)
    assert inside.where == "inside"
    assert inside.position == pytest.approx((0.5, 0.5, 0.3), abs=1e-4)
    assert inside.value == pytest.approx(middle.potential[0], abs=1e-11)


def test_plane_through_a_square_prism_that_generates_has_the_published_peak() -> None:
    # Torsion of a square bar: u'' + u'' = -1 on a unit square has 0.07367 in its middle, half of the 0.1474 of
    # Prandtl's stress function (Timoshenko and Goodier, Theory of Elasticity, chapter on torsion).
    faces = all_held(z_low=Insulated(), z_high=Insulated())
    solution = solve(Body(UNIT, UNIT, faces, (BoxSource((0, 0, 0), UNIT, 1.0),)))
    hot = solution.highest_within((0.0, 0.0, 0.25), (1.0, 1.0, 0.25), tolerance=1e-10)
    assert hot.value == pytest.approx(0.07367, abs=5e-6)
    assert hot.position == pytest.approx((0.5, 0.5, 0.25), abs=1e-3)


def test_box_just_under_many_small_pads_finds_the_strongest() -> None:
    # More pads along an axis than the first grid has places, and the strongest is none of those.
    generator = np.random.default_rng(3)
    count, lowest = 20, 0.198
    pads = [
        Patch(Rectangle((i + 0.3) / count, (i + 0.7) / count, (j + 0.3) / count, (j + 0.7) / count), value)
        for (i, j), value in zip(np.ndindex(count, count), generator.uniform(50.0, 100.0, count**2), strict=True)
        if (i + j) % 2
    ]
    faces = all_insulated(z_low=held(0.0), z_high=Inflow(FaceMap.patches((1.0, 1.0), 0.0, pads)))
    solution = solve(Body((1.0, 1.0, 0.2), UNIT, faces))
    hot = solution.highest_within((0.0, 0.0, 0.0), (1.0, 1.0, lowest), tolerance=1e-6 * solution.span)
    middles = (np.arange(count) + 0.5) / count
    under = solution.field(Grid(middles, middles, np.array([lowest])), tolerance=1e-6 * solution.span).potential
    assert hot.value + hot.error_bound >= under.max() - 1e-6 * solution.span
    assert hot.position[2] == lowest


def test_box_without_end_may_have_its_extreme_far_along() -> None:
    # Nothing leaves the sides of the bar, so that it comes to the mean of its end far along: 5, of a half at 10 and a
    # half at 0. The cool half rises towards that.
    end = FaceMap.patches((1.0, 1.0), 0.0, [Patch(Rectangle(0.0, 0.5, 0.0, 1.0), 10.0)])
    solution = solve(Body((1.0, 1.0, ENDLESS), UNIT, without_far_face(all_insulated(z_low=Held(end)))))
    low, high = (0.5, 0.0, 0.5), (1.0, 1.0, ENDLESS)
    hot, cold = solution.highest_within(low, high, tolerance=1e-9), solution.lowest_within(low, high, tolerance=1e-9)
    assert hot.value == pytest.approx(5.0, abs=1e-9)
    assert cold.position[0] == 1.0
    assert cold.position[2] == 0.5
    corner = solution.field_at(np.array([[1.0, 0.5, 0.5]]), tolerance=1e-10)
    assert abs(cold.value - corner.potential[0]) <= cold.error_bound + corner.potential_bound


def test_box_from_a_place_on_falls_with_the_distance() -> None:
    solution = solve(BODIES["square bar, end held"])
    hot = solution.highest_within((0.0, 0.0, 1.5), (1.0, 1.0, ENDLESS), tolerance=1e-10)
    at = solution.field_at(np.array([[0.5, 0.5, 1.5]]), tolerance=1e-12)
    assert hot.position == pytest.approx((0.5, 0.5, 1.5), abs=1e-3)
    assert abs(hot.value - at.potential[0]) <= hot.error_bound + at.potential_bound


def test_conductivity_that_varies_is_put_back_into_the_potential() -> None:
    # k = 1 + u between 0 and 3, one-dimensional: u + u^2 / 2 = 7.5 z, so u = -1 + sqrt(1 + 15 z).
    body = Body(UNIT, UNIT, all_insulated(z_low=held(0.0), z_high=held(3.0)), law=ConductivityLaw.linear(0.0, 1.0))
    solution = solve(body)
    hot = solution.highest_within((0.0, 0.0, 0.1), (1.0, 1.0, 0.4), tolerance=1e-9)
    cold = solution.lowest_within((0.0, 0.0, 0.1), (1.0, 1.0, 0.4), tolerance=1e-9)
    assert abs(hot.value - (math.sqrt(7.0) - 1.0)) <= hot.error_bound <= 1e-9
    assert abs(cold.value - (math.sqrt(2.5) - 1.0)) <= cold.error_bound <= 1e-9


# Two held pads on an insulated face, all else held at zero below.
PADS = Mixed(
    Insulated(),
    (HeldPad(Rectangle(0.1, 0.4, 0.2, 0.8), value=10.0), HeldPad(Rectangle(0.6, 0.9, 0.2, 0.8), value=4.0)),
)
MIXED = Body((1.0, 1.0, 0.3), UNIT, all_insulated(z_low=held(0.0), z_high=PADS))


def test_pads_of_a_mixed_face_are_the_highest_where_a_box_reaches_them() -> None:
    solution = solve(MIXED)
    for low, high, level in (
        ((0.0, 0.0, 0.0), (1.0, 1.0, 0.3), 10.0),
        ((0.65, 0.0, 0.3), (1.0, 1.0, 0.3), 4.0),
        ((0.65, 0.3, 0.3), (0.8, 0.7, 0.3), 4.0),
    ):
        place: Place = solution.highest_within(low, high, tolerance=1e-2)
        assert place.value == pytest.approx(level, abs=place.error_bound + 1e-12)
        assert place.error_bound <= 0.2


def test_box_under_the_pads_of_a_mixed_face_holds_its_bound() -> None:
    solution = solve(MIXED)
    low, high = (0.0, 0.0, 0.0), (1.0, 1.0, 0.25)
    hot, cold = solution.highest_within(low, high, tolerance=1e-2), solution.lowest_within(low, high, tolerance=1e-2)
    found = solution.field(Grid(*(np.linspace(0.0, 1.0, 15),) * 2, np.array([0.25])), tolerance=2e-2)
    assert found.potential.max() <= hot.value + hot.error_bound + found.potential_bound
    assert (cold.value, cold.error_bound) == (0.0, 0.0)


def test_box_outside_the_body_is_refused() -> None:
    with pytest.raises(OutsideBody, match=r"reaches from 0\.5 to 1\.5 along y; it has to lie between 0 and 1"):
        solve(WALL).highest_within((0.0, 0.5, 0.0), (1.0, 1.5, 1.0), tolerance=1e-6)
    with pytest.raises(OutsideBody, match=r"from 0\.7 to 0\.2 along x"):
        solve(WALL).lowest_within((0.7, 0.0, 0.0), (0.2, 1.0, 1.0), tolerance=1e-6)


def test_part_of_a_face_with_an_inflow_holds_its_bound() -> None:
    faces = all_insulated(z_high=Inflow(pad(1.0, 1.0, 5.0)), z_low=film(1.0, 20.0), x_low=film(2.0, 20.0))
    solution = solve(Body(UNIT, UNIT, faces))
    low, high = (0.0, 0.0, 1.0), (0.35, 1.0, 1.0)
    hot, cold = solution.highest_within(low, high, tolerance=1e-8), solution.lowest_within(low, high, tolerance=1e-8)
    values = dense_values(solution, low, high, 1e-9)
    assert values.max() <= hot.value + hot.error_bound + 1e-9
    assert values.min() >= cold.value - cold.error_bound - 1e-9
    assert hot.position[0] == 0.35
