"""What a stack of layers has to do whatever it is made of."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from numpy.typing import NDArray

from service.core import (
    FACES,
    Body,
    BoxSource,
    Condition,
    Face,
    FaceMap,
    Film,
    Held,
    Inflow,
    Layer,
    Patch,
    Rectangle,
    Solution,
    solve,
)
from tests.core.bodies import INSULATED, all_insulated, film, held

FloatArray = NDArray[np.float64]

SECTION = (1.0, 0.8)
CONDUCTIVITY = (2.0, 0.7, 1.3)
PAD = Rectangle(0.2, 0.6, 0.3, 0.5)

# A homogeneous body may change by so much of its span when it is cut.
SAME = 1e-10


def on_pad(value: float, background: float = 0.0) -> FaceMap:
    return FaceMap.patches(SECTION, background, [Patch(PAD, value)])


def uniform_inflow(value: float) -> Inflow:
    return Inflow(FaceMap.uniform(value))


# Bodies of one material, 1.5 high: sides of every kind, any map on top and bottom, generation in a box.
WHOLE: dict[str, dict[Face, Condition]] = {
    "insulated sides": all_insulated(z_low=film(5.0, 0.2), z_high=Inflow(on_pad(3.0))),
    "held sides": all_insulated(x_low=held(1.0), x_high=held(0.3), y_high=held(-1.0), z_low=Held(on_pad(2.0, 1.0))),
    "film sides": all_insulated(
        x_low=film(3.0, 1.0), y_low=film(0.2, -1.0), y_high=film(50.0, 0.4), z_high=Film(2.0, on_pad(3.0, 0.5))
    ),
    "sides that take in a flow": all_insulated(
        x_high=uniform_inflow(0.7), y_low=uniform_inflow(-0.4), z_low=held(0.0), z_high=Inflow(on_pad(3.0))
    ),
}
BOX = BoxSource((0.1, 0.2, 0.4), (0.5, 0.8, 0.9), 4.0)

# Five layers, thin ones of 5 um among metres and some at the very ends.
CUTS = {
    "thick": (0.2, 0.5, 0.9, 1.2),
    "thin among thick": (0.5, 0.500005, 1.0, 1.000005),
    "thin ends": (5e-6, 0.4, 0.9, 1.499995),
}


def whole(name: str, box: bool = True) -> Body:
    return Body((*SECTION, 1.5), CONDUCTIVITY, WHOLE[name], (BOX,) if box else ())


def cut(body: Body, heights: Sequence[float], contact: float = math.inf) -> Body:
    """The same body as layers of one material."""
    borders = np.array([0.0, *heights, body.size[2]])
    layers = [
        Layer(float(thickness), body.conductivity, math.inf if index == 0 else contact)
        for index, thickness in enumerate(np.diff(borders))
    ]
    return Body.stack(SECTION, layers, body.faces, body.sources)


PLACES = np.array(
    [
        (0.3, 0.4, 0.0),
        (0.45, 0.35, 1.5),
        (0.0, 0.3, 0.7),
        (0.7, 0.8, 1.1),
        (0.2, 0.3, 1.4999),
        (0.9, 0.1, 0.3),
        (0.4, 0.45, 0.500002),
    ]
)


@pytest.mark.parametrize("cuts", CUTS)
@pytest.mark.parametrize("name", WHOLE)
def test_body_cut_into_five_layers_is_unchanged(name: str, cuts: str) -> None:
    body = whole(name)
    one, five = solve(body), solve(cut(body, CUTS[cuts]))
    check_same(one, five, PLACES)


def check_same(one: Solution, other: Solution, places: FloatArray) -> None:
    """Field, flux, means and totals, to SAME of what they are of the order of."""
    height = one.body.size[2]
    tolerance = SAME * one.span
    fields = [solution.field_at(places, tolerance=tolerance, with_flux=True) for solution in (one, other)]
    assert np.abs(fields[0].potential - fields[1].potential).max() <= SAME * one.span
    first, second = fields[0].flux, fields[1].flux
    assert first is not None
    assert second is not None
    strongest = float(np.abs(first).max())
    assert np.abs(first - second).max() <= SAME * strongest
    assert fields[1].flux_bound is not None
    assert float(fields[1].flux_bound.max()) <= 1e-7 * strongest
    for face in ("z_low", "z_high"):
        means = [solution.mean(face, PAD, tolerance=tolerance) for solution in (one, other)]
        assert abs(means[0].value - means[1].value) <= SAME * one.span
    where = {"x_high": Rectangle(0.1, 0.7, 0.2 * height, 0.8 * height), "z_low": PAD, "y_low": None}
    for face, rectangle in where.items():
        totals = [solution.face_total(face, rectangle, tolerance=tolerance) for solution in (one, other)]  # type: ignore[arg-type]
        if totals[0].value is None or totals[1].value is None:
            # The bottom and the sides are held at different values.
            assert [cause.line for cause in totals[0].causes] == [cause.line for cause in totals[1].causes]
            for before, after in zip(totals[0].causes, totals[1].causes, strict=True):
                assert after.coefficient == pytest.approx(before.coefficient, rel=SAME)
            continue
        assert abs(totals[0].value - totals[1].value) <= SAME * max(strongest, abs(totals[0].value))
        assert totals[1].error_bound is not None
        assert totals[1].error_bound <= 1e-7 * max(strongest, abs(totals[0].value))


def test_extremes_of_a_cut_body_are_those_of_the_whole() -> None:
    body = whole("insulated sides")
    found = [solve(each).extremes(tolerance=1e-9) for each in (body, cut(body, CUTS["thin among thick"]))]
    for one, other in ((found[0].hottest, found[1].hottest), (found[0].coldest, found[1].coldest)):
        assert abs(one.value - other.value) <= one.error_bound + other.error_bound
        assert one.where == other.where
        # The place is known to the square root of the value's accuracy.
        assert one.position == pytest.approx(other.position, abs=1e-3)


def test_coldest_place_just_under_a_poor_contact_is_found() -> None:
    layers = [
        Layer(1.4e-4, (477.0, 0.198, 477.0)),
        Layer(4.2e-4, (811.0, 811.0 * 0.198 / 477.0, 2.6e5), contact_below=1.8e9),
        Layer(0.1315, (1.278, 1.278 * 0.198 / 477.0, 415.0)),
        Layer(3.587, (750.0, 750.0 * 0.198 / 477.0, 750.0), contact_below=2.8e-3),
    ]
    sides: dict[str, Condition] = {"x_high": film(2e-3, 1.0), "y_low": uniform_inflow(-0.92), "y_high": held(0.67)}
    faces = all_insulated(**sides, z_low=held(-0.94), z_high=film(8.7e4, 0.27))
    body = Body.stack((135.0, 135.0), layers, faces)
    solved = solve(body)
    tolerance = 1e-6 * solved.span
    coldest = solved.extremes(tolerance=tolerance).coldest
    under = solved.field_at(np.array([[0.0, 0.0, body.interfaces[2]]]), tolerance=tolerance)
    assert coldest.value - coldest.error_bound <= under.potential[0] + under.potential_bound
    assert coldest.position[2] == body.interfaces[2]


@pytest.mark.parametrize("name", ["insulated sides", "held sides"])
def test_contacts_that_conduct_without_end_change_nothing(name: str) -> None:
    """1e12 times the conductance of the body: a step of 1e-12 of the span at the most."""
    body = whole(name)
    contact = 1e12 * CONDUCTIVITY[2] / 1.5
    check_same(solve(body), solve(cut(body, CUTS["thick"], contact)), PLACES)


def test_generation_of_layers_is_that_of_boxes() -> None:
    faces = WHOLE["film sides"]
    materials = [(0.3, (2.0, 1.0, 1.0)), (2e-5, (4.0, 2.0, 0.2)), (0.5, (0.4, 0.2, 3.0))]
    rates = (3.0, 1e4, -2.0)
    in_layers = Body.stack(
        SECTION, [Layer(t, k, generation=rate) for (t, k), rate in zip(materials, rates, strict=True)], faces
    )
    borders = [0.0, *in_layers.interfaces, in_layers.size[2]]
    boxes = tuple(
        BoxSource((0.0, 0.0, borders[index]), (*SECTION, borders[index + 1]), rate) for index, rate in enumerate(rates)
    )
    in_boxes = Body.stack(SECTION, [Layer(t, k) for t, k in materials], faces, boxes)
    check_same(solve(in_layers), solve(in_boxes), PLACES * np.array([1.0, 1.0, in_layers.size[2] / 1.5]))


LAYERS = (
    Layer(0.3, (2.0, 1.0, 1.0)),
    Layer(5e-6, (40.0, 20.0, 0.02), 7.0),
    Layer(0.05, (0.02, 0.01, 0.5), math.inf, 20.0),
    Layer(0.2, (3.0, 1.5, 3.0), 1e4),
)

MIXED: dict[str, Body] = {
    name: Body.stack(SECTION, LAYERS, faces, (BoxSource((0.1, 0.2, 0.1), (0.5, 0.8, 0.45), 4.0),))
    for name, faces in WHOLE.items()
}


@pytest.mark.parametrize("name", MIXED)
def test_upside_down_it_is_the_same(name: str) -> None:
    body = MIXED[name]
    places = PLACES * np.array([1.0, 1.0, body.size[2] / 1.5])
    solutions = solve(body), solve(upside_down(body))
    turned = places * np.array([1.0, 1.0, -1.0]) + np.array([0.0, 0.0, body.size[2]])
    tolerance = 1e-9 * solutions[0].span
    found = [
        solution.field_at(at, tolerance=tolerance, with_flux=True)
        for solution, at in zip(solutions, (places, turned), strict=True)
    ]
    # Turning rounds the heights by an ulp of the body.
    slack = 1e-12 * solutions[0].span
    bounds = found[0].potential_bound + found[1].potential_bound
    assert np.abs(found[0].potential - found[1].potential).max() <= bounds + slack
    one, other = found[0].flux, found[1].flux
    assert one is not None
    assert other is not None
    assert np.abs(one - other * np.array([[1.0], [1.0], [-1.0]])).max() <= 1e-9 * float(np.abs(one).max())


def upside_down(body: Body) -> Body:
    contacts = [math.inf, *(layer.contact_below for layer in body.layers[:0:-1])]
    layers = [replace(layer, contact_below=c) for layer, c in zip(body.layers[::-1], contacts, strict=True)]
    faces: dict[Face, Condition] = {**body.faces, "z_low": body.faces["z_high"], "z_high": body.faces["z_low"]}
    # A film on a side refers to what is beside the first layer.
    share = layers[0].conductivity[0] / body.layers[0].conductivity[0]
    for face in FACES[:4]:
        condition = faces[face]
        if isinstance(condition, Film):
            faces[face] = replace(condition, coefficient=condition.coefficient * share)
    height = body.size[2]
    sources = tuple(
        BoxSource((*box.low[:2], height - box.high[2]), (*box.high[:2], height - box.low[2]), box.density)
        for box in body.sources
    )
    return Body.stack(SECTION, layers, faces, sources)


@pytest.mark.parametrize("name", MIXED)
def test_flux_through_an_interface_goes_on_and_the_step_is_flux_over_contact(name: str) -> None:
    body = MIXED[name]
    solution = solve(body)
    across = ((0.4, 0.45), (0.2, 0.3), (0.0, 0.7), (0.95, 0.05))
    # Below each interface and on its upper side.
    sides = [(x, y, z) for height in body.interfaces for z in (height, np.nextafter(height, 9.0)) for x, y in across]
    found = solution.field_at(np.array(sides), tolerance=1e-9 * solution.span, with_flux=True)
    assert found.flux is not None
    assert found.flux_bound is not None
    shape = (len(body.interfaces), 2, len(across))
    potential, flux = found.potential.reshape(shape), found.flux.reshape(3, *shape)
    bound = found.flux_bound.reshape(shape).max(axis=1)
    # The flux on an edge of the pads' lines is of the order of the largest.
    rounding = 1e-11 * float(np.abs(found.flux).max())
    for index, (lower, upper) in enumerate(pairwise(body.layers)):
        (below, above), (under, over) = flux[2, index], potential[index]
        assert (np.abs(below - above) <= 2 * bound[index] + rounding).all()
        slack = 2 * found.potential_bound + bound[index] / upper.contact_below + 1e-12 * solution.span
        assert (np.abs(under - over - below / upper.contact_below) <= slack).all()
        if upper.contact_below == math.inf:
            # Along the interface each side conducts for itself.
            for axis in (0, 1):
                ratio = upper.conductivity[axis] / lower.conductivity[axis]
                off = np.abs(flux[axis, index, 1] - ratio * flux[axis, index, 0])
                assert (off <= (1 + ratio) * (bound[index] + rounding)).all()


@pytest.mark.parametrize("name", ["held sides", "film sides"])
def test_books_of_a_stack_close(name: str) -> None:
    solution = solve(MIXED[name])
    balance = solution.balance(tolerance=1e-9 * solution.span)
    assert balance.residual is not None
    assert balance.error_bound is not None
    assert balance.closed
    moved = abs(balance.generation) + sum(abs(total.value or 0.0) for total in balance.inflow.values())
    assert balance.error_bound <= 1e-6 * moved


def test_flow_goes_through_every_plane_between_insulated_sides() -> None:
    layers = [replace(layer, generation=0.0) for layer in LAYERS]
    solution = solve(Body.stack(SECTION, layers, WHOLE["insulated sides"]))
    for height in (1e-7, 0.15, 0.3, 0.300002, 0.31, 0.350005, 0.4):
        total = solution.plane_total(2, height, tolerance=1e-9)
        assert total.value is not None
        assert total.error_bound is not None
        # All of the pad's inflow, downwards.
        assert abs(total.value + 3.0 * PAD.area) <= total.error_bound + 1e-14


def test_a_source_that_cuts_a_layer_leaves_places_on_contacts_where_they_are() -> None:
    """Heights add up to another last digit from the parts of a layer; a place on top or on a contact has to stay."""
    thickness, k = (
        (0.14459540051783423, 0.012213731077624874, 246.49002151081527, 0.19573682877039314),
        (0.2, 8e-5, 4.2),
    )
    layers = [
        Layer(thickness[0], (k[0],) * 3),
        Layer(thickness[1], (0.03, 0.03, k[1]), contact_below=10.0),
        Layer(thickness[2], (k[2],) * 3, contact_below=1e-3),
        Layer(thickness[3], (0.05, 0.05, 1.4e-4), contact_below=1e-2),
    ]
    box = BoxSource((188.0, 3050.0, 69.73647367221355), (648.0, 5273.0, 182.05460395258564), 2e-7)
    body = Body.stack((838.0, 11963.0), layers, all_insulated(z_low=held(0.0), z_high=film(7.5, 1.0)), (box,))
    solved = solve(body)
    heights = np.array([*body.interfaces, body.size[2]])
    points = np.column_stack([np.full(8, 400.0), np.full(8, 4000.0), np.concatenate([heights, heights - 1e-9])])
    found = solved.field_at(points, tolerance=1e-9 * solved.span)
    # Over 1e-9 below them the potential changes by flux over conductivity, which is about 1e-2 at the most.
    np.testing.assert_allclose(found.potential[:4], found.potential[4:], rtol=0, atol=1e-8)


def test_flux_has_no_value_where_an_inflow_meets_bonded_layers_that_conduct_unlike() -> None:
    layers = [
        Layer(0.3, (1.0, 1.0, 1.0)),
        Layer(0.4, (5.0, 5.0, 1.0)),
        Layer(0.2, (5.0, 5.0, 2.0)),
        Layer(0.3, (2.0, 2.0, 2.0), contact_below=10.0),
    ]
    body = Body.stack(SECTION, layers, all_insulated(x_high=uniform_inflow(1.0), z_low=held(0.0)))
    solved = solve(body)
    unlike, alike, contact = body.interfaces
    points = np.array([[1.0, 0.4, z] for z in (unlike, alike, contact, 0.1)])
    flux = solved.field_at(points, tolerance=1e-9, with_flux=True).flux
    assert flux is not None
    np.testing.assert_array_equal(np.isnan(flux).all(axis=0), [True, False, False, False])
    # Square to the side it is the inflow itself, and beside the line the flow along it grows as ln r, by equal steps.
    np.testing.assert_allclose(flux[0, 1:], -1.0, rtol=1e-9)
    near = np.array([[1.0 - r, 0.4, unlike] for r in (1e-3, 1e-5, 1e-7)])
    across = solved.field_at(near, tolerance=1e-9, with_flux=True).flux
    assert across is not None
    first, second = np.diff(across[2])
    assert abs(first) > 0.1
    assert second == pytest.approx(first, rel=2e-2)


def test_very_poor_contact_makes_two_bodies() -> None:
    """With a contact of 1e-12 the layers answer as if each were alone with an insulated face."""
    faces = all_insulated(x_low=held(1.0), z_low=film(2.0, 0.0), z_high=Inflow(on_pad(3.0)))
    lower, upper = Layer(0.3, (2.0, 1.0, 1.0)), Layer(0.2, (1.0, 0.5, 4.0))
    both = solve(Body.stack(SECTION, [lower, replace(upper, contact_below=1e-12)], faces))
    alone = (
        solve(Body((*SECTION, 0.3), lower.conductivity, {**faces, "z_high": INSULATED})),
        solve(Body((*SECTION, 0.2), upper.conductivity, {**faces, "z_low": INSULATED})),
    )
    for solution, bottom in zip(alone, (0.0, 0.3), strict=True):
        heights = np.array([0.0, 0.05, 0.1999]) if bottom else np.array([0.0, 0.15, 0.3])
        places = np.array([(x, 0.4, z) for x in (0.0, 0.5, 1.0) for z in heights])
        shifted = places + np.array([0.0, 0.0, bottom])
        shifted[shifted[:, 2] == bottom, 2] = np.nextafter(bottom, 1.0)
        one = solution.field_at(places, tolerance=1e-10)
        found = both.field_at(shifted, tolerance=1e-10)
        assert np.abs(one.potential - found.potential).max() <= one.potential_bound + found.potential_bound + 1e-11


@pytest.mark.parametrize("contact", [0.5, 20.0])
def test_contact_is_a_layer_that_conducts_only_across(contact: float) -> None:
    """A layer 1e-6 thick with k / thickness = contact, its conduction along z_low's axes a 1e-12th of the others'."""
    faces = all_insulated(z_low=film(2.0, 0.0), z_high=Inflow(on_pad(3.0)))
    lower, upper = Layer(0.3, (2.0, 1.0, 1.0)), Layer(0.2, (1.0, 0.5, 4.0))
    thin = Layer(1e-6, (1e-6, 5e-7, 1e-6 * contact))
    by_contact = solve(Body.stack(SECTION, [lower, replace(upper, contact_below=contact)], faces))
    by_layer = solve(Body.stack(SECTION, [lower, thin, upper], faces))
    places = np.array([(x, y, z) for x, y in ((0.4, 0.4), (0.9, 0.1)) for z in (0.0, 0.2, 0.3, 0.35, 0.5)])
    lifted = places + np.where(places[:, 2:] > 0.3, [[0.0, 0.0, 1e-6]], 0.0)
    one, other = (
        solution.field_at(at, tolerance=1e-9).potential for solution, at in ((by_contact, places), (by_layer, lifted))
    )
    # What runs along the thin layer: thickness * kx is a 1e-12th of the others'.
    assert np.abs(one - other).max() <= 1e-9 * by_contact.span


def wall_by_hand(
    layers: Sequence[Layer], low: tuple[float, float], high: tuple[float, float], heights: Sequence[tuple[int, float]]
) -> list[float]:
    """A wall between two films (coefficient, ambient): potential at heights over the bottom of a layer.

    Resistances in a row with the generation of each layer as a parabola, k u'' = -g (elementary), in fractions: with a
    poor contact decimals would cancel.
    """

    def upwards(start: Fraction) -> list[tuple[Fraction, Fraction]]:
        """Potential and flow upwards at the bottom of each layer, from the potential just inside the low film."""
        u, flow = start, Fraction(low[0]) * (Fraction(low[1]) - start)
        states = []
        for layer in layers:
            u -= 0 if math.isinf(layer.contact_below) else flow / Fraction(layer.contact_below)
            states.append((u, flow))
            t, k, g = Fraction(layer.thickness), Fraction(layer.conductivity[2]), Fraction(layer.generation)
            u -= (flow * t + g * t * t / 2) / k
            flow += g * t
        return [*states, (u, flow)]

    def miss(start: Fraction) -> Fraction:
        u, flow = upwards(start)[-1]
        return flow - Fraction(high[0]) * (u - Fraction(high[1]))

    at_zero, at_one = miss(Fraction(0)), miss(Fraction(1))
    states = upwards(-at_zero / (at_one - at_zero))
    found = []
    for index, height in heights:
        (u, flow), z, layer = states[index], Fraction(height), layers[index]
        found.append(float(u - (flow * z + Fraction(layer.generation) * z * z / 2) / Fraction(layer.conductivity[2])))
    return found


WALLS: dict[str, tuple[Layer, ...]] = {
    "furnace wall of brick, board and steel": (
        Layer(0.25, (1.1, 1.1, 1.1)),
        Layer(0.08, (0.12, 0.12, 0.12), 200.0),
        Layer(0.006, (45.0, 45.0, 45.0), 50.0),
    ),
    "heated foil of 5 um between plates": (
        Layer(0.01, (0.2, 0.2, 0.2)),
        Layer(5e-6, (390.0, 390.0, 390.0), 1e4, 4e7),
        Layer(0.03, (15.0, 15.0, 15.0), 3e3, 1e3),
    ),
    "metres under a skin": (
        Layer(3.0, (1.5, 1.5, 1.5), math.inf, 2.0),
        Layer(1e-5, (0.3, 0.3, 0.3), 7.0),
        Layer(0.5, (200.0, 200.0, 200.0), 0.01, -1.0),
    ),
}


@pytest.mark.parametrize("name", WALLS)
def test_wall_is_resistances_in_a_row(name: str) -> None:
    layers = WALLS[name]
    body = Body.stack(SECTION, layers, all_insulated(z_low=film(25.0, 900.0), z_high=film(8.0, 20.0)))
    solution = solve(body)
    bottoms = [0.0, *body.interfaces]
    heights = [(index, share * layer.thickness) for index, layer in enumerate(layers) for share in (0.25, 1.0)]
    # The top of a layer belongs to it; its top height is the border itself.
    tops = [*body.interfaces, body.size[2]]
    places = np.array(
        [(0.3, 0.5, tops[index] if z == layers[index].thickness else bottoms[index] + z) for index, z in heights]
    )
    found = solution.field_at(places, tolerance=1e-10 * solution.span)
    wanted = wall_by_hand(layers, (25.0, 900.0), (8.0, 20.0), heights)
    # Heights within the thin layers round by an ulp of the whole.
    assert np.abs(found.potential - wanted).max() <= found.potential_bound + 1e-11 * solution.span


EXTREME: dict[str, Sequence[Layer]] = {
    "thicknesses 1 to 100000": [Layer(1.0, (1.0, 1.0, 1.0)), Layer(1e-5, (3.0, 3.0, 3.0), 1e3)],
    "conductivities 1 to 10000": [
        Layer(0.2, (400.0, 400.0, 400.0)),
        Layer(0.01, (0.04, 0.04, 0.04)),
        Layer(0.1, (400.0, 400.0, 400.0), 10.0),
    ],
    "thin and poor, thin and good": [
        Layer(1e-5, (0.02, 0.02, 0.02)),
        Layer(0.5, (2.0, 2.0, 2.0), 1e6),
        Layer(1e-5, (400.0, 400.0, 400.0), 1e-2),
    ],
}
SIDES: dict[str, Mapping[str, Condition]] = {
    "insulated": {},
    "cold film": {"x_low": film(1e-6, 0.0), "y_high": film(1e6, 0.0)},
    "held": {"x_high": held(0.0)},
}


@pytest.mark.parametrize("biot", [1e-6, 1.0, 1e6])
@pytest.mark.parametrize("sides", SIDES)
@pytest.mark.parametrize("name", EXTREME)
def test_values_stay_within_the_data_and_their_bounds_at_any_ratio(name: str, sides: str, biot: float) -> None:
    """Without generation no value leaves the range of held values and ambients (maximum principle)."""
    layers = EXTREME[name]
    faces = all_insulated(
        **SIDES[sides],
        z_low=film(biot * layers[0].conductivity[2], 0.0),
        z_high=Film(biot * layers[-1].conductivity[2], on_pad(1.0)),
    )
    solution = solve(Body.stack(SECTION, layers, faces))
    bottoms = [0.0, *solution.body.interfaces]
    places = np.array(
        [
            (x, y, bottom + share * layer.thickness)
            for layer, bottom in zip(layers, bottoms, strict=True)
            for share in (0.3, 0.9)
            for x, y in ((0.4, 0.4), (0.2, 0.35), (1.0, 0.0))
        ]
    )
    found = solution.field_at(places, tolerance=1e-8)
    assert found.potential_bound <= 1e-8
    assert found.potential.min() >= -found.potential_bound
    assert found.potential.max() <= 1 + found.potential_bound
    certificate = solution.certificate(places, found.potential_bound, tolerance=1e-8)
    if certificate.agreement is not None:
        assert certificate.check_bound is not None
        assert certificate.agreement <= certificate.check_bound


def test_edge_of_a_held_side_has_a_coefficient_for_each_layer() -> None:
    """Along the edge of two held sides 2 J sqrt(kx ky) / pi times the height of each layer, 2 J k / pi being that of
    one material (Carslaw and Jaeger 1959: u = 2 J theta / pi beside a corner); along the edge with the bottom
    2 J sqrt(kx kz) / pi of the first layer times the length of the edge.
    """
    layers = [Layer(0.3, (2.0, 1.0, 1.0)), Layer(0.05, (40.0, 20.0, 3.0), 7.0), Layer(0.2, (0.4, 0.2, 5.0))]
    faces = all_insulated(x_low=held(1.0), y_low=held(0.0), z_low=held(0.5), z_high=held(1.0))
    total = solve(Body.stack(SECTION, layers, faces)).face_total("x_low", tolerance=1e-9)
    assert total.value is None
    found = {cause.line: cause.coefficient for cause in total.causes}
    side = sum(layer.thickness * math.sqrt(layer.conductivity[0] * layer.conductivity[1]) for layer in layers)
    wanted = [2 / math.pi * side, 2 / math.pi * 0.5 * math.sqrt(2.0 * 1.0) * SECTION[1]]
    # The top is held at the same value, so that nothing grows there.
    assert sorted(found.values()) == pytest.approx(sorted(wanted), rel=1e-12)


def test_held_side_without_the_edge_grows_as_its_coefficient_says() -> None:
    """The total without a strip along the edge of two held sides, for two strips a factor e apart."""
    layers = [Layer(0.3, (2.0, 1.0, 1.0)), Layer(0.05, (40.0, 20.0, 3.0), 7.0), Layer(0.2, (0.4, 0.2, 5.0))]
    solution = solve(Body.stack(SECTION, layers, all_insulated(x_low=held(1.0), y_low=held(0.0))))
    gap = 1e-5
    values = []
    for strip in (gap, gap / math.e):
        total = solution.face_total("x_low", gap=strip, tolerance=1e-9)
        assert total.with_gap is not None
        values.append(total.with_gap.value)
    assert values[1] - values[0] == pytest.approx(total.causes[0].coefficient, rel=1e-6)


def test_closed_stack_that_is_balanced_has_mean_zero_over_its_volume() -> None:
    """Means over sections by hand: with m at the bottom, m + z^2 in the first layer (k u'' = 2 there), a step of
    0.6 / 5 at the contact, 0.6 z / 3 above it. The volume has the mean zero if m = -(0.009 + 0.021 + 0.001) / 0.4.
    """
    layers = [Layer(0.3, (2.0, 1.0, 1.0), generation=-2.0), Layer(0.1, (4.0, 2.0, 3.0), 5.0)]
    amount = 2.0 * 0.3 * SECTION[0] * SECTION[1] / PAD.area
    solution = solve(Body.stack(SECTION, layers, all_insulated(z_high=Inflow(on_pad(amount)))))
    assert solution.level_pinned
    for face, wanted in (("z_low", -0.0775), ("z_high", -0.0775 + 0.09 + 0.12 + 0.02)):
        mean = solution.mean(face, tolerance=1e-10)  # type: ignore[arg-type]
        assert abs(mean.value - wanted) <= mean.error_bound + 1e-15
        assert mean.error_bound <= 1e-9
