"""The influence matrix of pads against the general integral, sum rules, networks by hand and what physics demands."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import pairwise

import numpy as np
import pytest
from numpy.typing import NDArray

from service.core import (
    Body,
    Condition,
    Face,
    FaceMap,
    Film,
    Inflow,
    Layer,
    NoSteadyState,
    NotPhysical,
    Pad,
    Rectangle,
    influence,
    peaks,
    solve,
)
from service.core.fed_pads import environment, with_flow_into
from service.core.network import network
from tests.core.bodies import INSULATED, all_insulated, film, held

FloatArray = NDArray[np.float64]

SECTION = (1.0, 0.8)
SIZE = (1.0, 0.8, 0.30002)

# A skin of 20 um on a joint over a plate, lengths in millimetres.
PLATE = (
    Layer(0.2, (3.0, 3.0, 3.0)),
    Layer(0.1, (0.4, 0.4, 0.2), 40.0),
    Layer(2e-5, (20.0, 20.0, 20.0)),
)

BODIES: dict[str, Body] = {
    "skin of 20 um over a film": Body.stack(SECTION, PLATE, all_insulated(z_low=film(5.0, 7.0))),
    "held side and film top": Body.stack(
        SECTION, PLATE, all_insulated(x_low=held(3.0), z_low=film(0.1, 1.0), z_high=Film(2.0, FaceMap.uniform(9.0)))
    ),
    "block of one material": Body(
        SIZE, (2.0, 0.5, 1.0), all_insulated(y_high=film(2.0, 1.0), z_low=Inflow(FaceMap.uniform(4.0)))
    ),
}

PADS = (
    # Two that touch, a sliver 1 : 1000, one in a corner, one on the bottom and one beside an edge of it.
    Pad("z_high", Rectangle(0.2, 0.4, 0.3, 0.5)),
    Pad("z_high", Rectangle(0.4, 0.6, 0.3, 0.5)),
    Pad("z_high", Rectangle(0.1, 0.9, 0.6, 0.6008)),
    Pad("z_high", Rectangle(0.0, 0.05, 0.0, 0.1)),
    Pad("z_low", Rectangle(0.3, 0.5, 0.2, 0.7)),
    Pad("z_low", Rectangle(0.999, 1.0, 0.1, 0.7)),
)

TOLERANCE = 1e-8


@pytest.mark.parametrize("name", BODIES)
def test_every_entry_is_the_mean_that_a_single_load_makes(name: str) -> None:
    body = BODIES[name]
    found = influence(body, PADS, tolerance=TOLERANCE)
    assert (found.mean == found.mean.T).all()
    assert found.bound.max() <= 1e-8 * float(np.diag(found.mean).min())
    for j, column in enumerate(PADS):
        driven = solve(with_flow_into(environment(body), column, 1.0))
        for i, row in enumerate(PADS):
            single = driven.mean(row.face, row.where, tolerance=TOLERANCE)
            assert abs(single.value - found.mean[i, j]) <= single.error_bound + found.bound[i, j]
            assert single.error_bound <= 1e-7 * found.mean[j, j]


def test_pads_on_faces_square_to_each_other() -> None:
    """A pad on a side of a block sees those on top as they see it."""
    sides = Pad("x_high", Rectangle(0.1, 0.5, 0.05, 0.2)), Pad("x_low", Rectangle(0.0, 0.3, 0.0, 0.1))
    pads = (PADS[0], PADS[4], *sides)
    body = BODIES["block of one material"]
    found = influence(body, pads, tolerance=TOLERANCE)
    assert (found.mean == found.mean.T).all()
    for j, column in enumerate(pads):
        driven = solve(with_flow_into(environment(body), column, 1.0))
        for i, row in enumerate(pads):
            single = driven.mean(row.face, row.where, tolerance=TOLERANCE)
            assert abs(single.value - found.mean[i, j]) <= single.error_bound + found.bound[i, j]


@pytest.mark.parametrize("name", BODIES)
def test_entries_are_positive_and_dissipate(name: str) -> None:
    """A flow in raises every place (maximum principle); q M q is the power that the flows q dissipate."""
    found = influence(BODIES[name], PADS, tolerance=TOLERANCE)
    assert (found.mean > 0).all()
    scale = np.sqrt(np.diag(found.mean))
    assert float(np.linalg.eigvalsh(found.mean / np.outer(scale, scale)).min()) > 1e-6
    # A pad sees itself most.
    assert (np.diag(found.mean)[None, :] >= found.mean).all()


def test_matrix_says_how_well_it_agrees_with_the_general_integral() -> None:
    found = influence(BODIES["skin of 20 um over a film"], PADS, tolerance=TOLERANCE)
    assert found.checked >= 6
    assert found.agreement <= found.agreement_bound
    assert found.agreement_bound <= 1e-6 * float(np.diag(found.mean).min())


TILES: dict[str, tuple[Sequence[float], Sequence[float]]] = {
    "thirds and halves": ((0.0, 0.3, 0.6, 1.0), (0.0, 0.5, 0.8)),
    "slivers among them": ((0.0, 0.0004, 0.5, 0.5001, 1.0), (0.0, 0.7999, 0.8)),
}


def tiles(name: str, face: Face = "z_high") -> tuple[Pad, ...]:
    x, y = TILES[name]
    return tuple(
        Pad(face, Rectangle(left, right, front, back)) for left, right in pairwise(x) for front, back in pairwise(y)
    )


@pytest.mark.parametrize("face", ["z_high", "z_low"])
@pytest.mark.parametrize("name", TILES)
def test_pads_that_tile_a_face_reproduce_the_uniform_load(name: str, face: Face) -> None:
    """Flows in proportion to the areas make a density of one: between insulated sides the rise is straight through."""
    pads = tiles(name, face)
    found = influence(BODIES["skin of 20 um over a film"], pads, tolerance=TOLERANCE)
    areas = np.array([pad.where.area for pad in pads])
    below = 1 / 5.0
    straight = below + 0.2 / 3.0 + 1 / 40.0 + 0.1 / 0.2 + 2e-5 / 20.0
    wanted = straight if face == "z_high" else below
    assert np.abs(found.mean @ areas - wanted).max() <= 1e-11 * wanted + (found.bound @ areas).max()
    # A bound refers to the smallest pad, here a ten-millionth of the face.
    assert (found.bound @ areas).max() <= 1e-4 * wanted


def test_tiles_reproduce_the_uniform_load_of_a_body_with_a_held_side() -> None:
    body = BODIES["held side and film top"]
    pads = tiles("thirds and halves")
    found = influence(body, pads, tolerance=TOLERANCE)
    areas = np.array([pad.where.area for pad in pads])
    whole = Pad("z_high", Rectangle(0.0, 1.0, 0.0, 0.8))
    uniform = solve(with_flow_into(environment(body), whole, float(areas.sum())))
    for rise, bound, pad in zip(found.mean @ areas, found.bound @ areas, pads, strict=True):
        wanted = uniform.mean("z_high", pad.where, tolerance=TOLERANCE)
        assert abs(rise - wanted.value) <= bound + wanted.error_bound


def test_means_of_a_pad_are_those_of_its_parts() -> None:
    """A pad and its two parts: means weighted with their areas, for its own load and another's."""
    whole, other = Rectangle(0.2, 0.5, 0.1, 0.4), Rectangle(0.7, 0.8, 0.2, 0.3)
    parts = Rectangle(0.2, 0.2001, 0.1, 0.4), Rectangle(0.2001, 0.5, 0.1, 0.4)
    pads = [Pad("z_high", where) for where in (whole, *parts, other)]
    found = influence(BODIES["skin of 20 um over a film"], pads, tolerance=TOLERANCE)
    shares = np.array([part.area for part in parts]) / whole.area
    split = np.array([shares @ found.mean[1:3, 3], shares @ found.mean[1:3, 1:3] @ shares])
    slack = np.array([found.bound[:, 3].max(), found.bound[:3, :3].max()])
    assert (np.abs(split - [found.mean[0, 3], found.mean[0, 0]]) <= 2 * slack).all()


def test_mean_over_a_sliver_at_the_edge_is_the_potential_there() -> None:
    """The load is a strip round the corner; over 1e-10 of a length next to it the potential hardly changes."""
    size = (58.85, 6.157, 2.1e-3)
    body = Body(size, (1.0, 1.0, 1.0), all_insulated(x_high=film(52.71, 0.0)))
    driven = solve(with_flow_into(body, Pad("x_high", Rectangle(0.0, size[1], size[2] - 2e-7, size[2])), 1.0))
    mean = driven.mean("z_high", Rectangle(size[0] - 2.0**-33, size[0], 0.0, size[1]), tolerance=1e-9)
    at_edge = driven.field_at(np.array([[size[0], 3.0, size[2]]]), tolerance=1e-6)
    # Its rise falls by half over 1e-5.
    assert mean.value == pytest.approx(at_edge.potential[0], abs=1e-4)


def test_network_of_a_body_in_which_flow_goes_straight_is_known() -> None:
    """Top and bottom wholly covered: the resistance of the layers between them, and of the film to the environment."""
    body = BODIES["skin of 20 um over a film"]
    pads = [Pad(face, Rectangle(0.0, 1.0, 0.0, 0.8)) for face in ("z_low", "z_high")]
    found = influence(body, pads, tolerance=TOLERANCE)
    resistors = network(found.mean, found.bound)
    assert resistors is not None
    area = 0.8
    through = area / (0.2 / 3.0 + 1 / 40.0 + 0.1 / 0.2 + 2e-5 / 20.0)
    assert resistors.between[0, 1] == pytest.approx(through, rel=1e-9)
    # The top has no way out but through the layers.
    assert resistors.to_environment == pytest.approx([5.0 * area, 0.0], abs=1e-9)
    assert abs(resistors.to_environment[1]) <= resistors.to_environment_bound[1]


def test_flow_that_leaves_by_the_film_is_all_that_is_put_in() -> None:
    """Between insulated sides the mean of the film's whole face is 1 / (film area) wherever the flow goes in."""
    pads = [*PADS, Pad("z_low", Rectangle(0.0, 1.0, 0.0, 0.8))]
    found = influence(BODIES["skin of 20 um over a film"], pads, tolerance=TOLERANCE)
    assert np.abs(found.mean[-1] - 1 / (5.0 * 0.8)).max() <= found.bound[-1].max() + 1e-14


@pytest.mark.parametrize("contact", [1e-9, 1e12])
def test_contact_joins_or_parts_the_pads_above_and_below(contact: float) -> None:
    layers = [Layer(0.2, (3.0, 3.0, 3.0)), Layer(0.1, (1.0, 1.0, 1.0), contact)]
    faces = all_insulated(x_low=held(0.0), z_low=film(5.0, 0.0))
    pads = [PADS[0], PADS[4]]
    found = influence(Body.stack(SECTION, layers, faces), pads, tolerance=TOLERANCE)
    if contact < 1:
        upper = Body((*SECTION, 0.1), (1.0, 1.0, 1.0), all_insulated(x_low=held(0.0)))
        alone = influence(upper, [pads[0]], tolerance=TOLERANCE)
        assert found.mean[0, 0] == pytest.approx(alone.mean[0, 0], rel=1e-8)
        assert abs(found.mean[0, 1]) <= 1e-9
    else:
        bonded = [layers[0], Layer(0.1, (1.0, 1.0, 1.0))]
        joined = influence(Body.stack(SECTION, bonded, faces), pads, tolerance=TOLERANCE)
        assert np.abs(found.mean - joined.mean).max() <= found.bound.max() + joined.bound.max() + 1e-12


def test_highest_rises_are_above_the_means_and_below_nothing_on_a_grid() -> None:
    body = BODIES["skin of 20 um over a film"]
    pads = PADS[:2]
    highest, bound = peaks(body, pads, tolerance=1e-6)
    means = influence(body, pads, tolerance=TOLERANCE).mean
    assert (highest + bound >= means).all()
    for j, column in enumerate(pads):
        driven = solve(with_flow_into(environment(body), column, 1.0))
        for i, row in enumerate(pads):
            where = row.where
            x, y = np.meshgrid(np.linspace(where.p_low, where.p_high, 9), np.linspace(where.q_low, where.q_high, 9))
            places = np.stack([x.ravel(), y.ravel(), np.full(81, body.size[2])], axis=1)
            values = driven.field_at(places, tolerance=1e-7).potential
            assert values.max() <= highest[i, j] + bound[i, j] + 1e-7
    # A pad's own highest place is its middle but for what the other parts of the body do.
    centre = np.array([(0.3, 0.4, body.size[2])])
    own = solve(with_flow_into(environment(body), pads[0], 1.0)).field_at(centre, tolerance=1e-7).potential[0]
    assert own <= highest[0, 0] + bound[0, 0] + 1e-7
    assert highest[0, 0] == pytest.approx(own, rel=1e-2)


def test_peak_on_a_wide_pad_beside_a_narrow_load_is_found() -> None:
    faces = all_insulated(y_high=film(126.0, 0.0), z_high=held(0.0))
    body = Body((0.877, 6.677, 0.0243), (1.0, 1.0, 1.0), faces)
    load = Pad("x_high", Rectangle(6.6763, 6.677, 0.017, 0.0243))
    wide = Pad("x_high", Rectangle(6.0, 6.677, 0.0114, 0.0138))
    highest, bound = peaks(body, (load, wide), tolerance=1e-3)
    driven = solve(with_flow_into(environment(body), load, 1.0))
    row = np.array([[0.877, y, 0.0138] for y in np.linspace(6.66, 6.677, 100)])
    found = driven.field_at(row, tolerance=1e-3)
    assert found.potential.max() <= highest[1, 0] + bound[1, 0] + found.potential_bound


def test_uniform_square_on_a_great_cold_block_is_that_on_a_half_space() -> None:
    """Mean rise 0.4732010044 q sqrt(A) / k (classical, ten digits in the published cases), less what the block lacks:

    at 200 widths that is of the order of a two-hundredth.
    """
    found = []
    for side in (100.0, 200.0, 400.0):
        body = Body((side, side, side), (1.0, 1.0, 1.0), all_insulated(z_low=held(0.0), x_low=held(0.0)))
        middle = side / 2
        pad = Pad("z_high", Rectangle(middle - 0.5, middle + 0.5, middle - 0.5, middle + 0.5))
        found.append(influence(body, [pad], tolerance=1e-9).mean[0, 0])
    # The block lacks c1 / side + c3 / side^3 + ...
    first = [2 * found[1] - found[0], 2 * found[2] - found[1]]
    assert (8 * first[1] - first[0]) / 7 == pytest.approx(0.4732010044093393, abs=1e-9)


def test_pads_on_an_endless_plate_are_those_in_the_middle_of_a_wide_one() -> None:
    """A rise falls by a factor e in half a length or less here, so that edges 16 away are nothing."""
    spots = ((-0.125, 0.125, -0.25, 0.125), (0.25, 0.5, 0.125, 0.25), (-0.5, -0.5 + 2.0**-10, -0.25, 0.25))
    faces: dict[Face, Condition] = {"z_low": film(5.0, 0.0), "z_high": INSULATED}
    plate = Body.stack((math.inf, math.inf), PLATE, faces, infinite=(True, True, False))
    endless = influence(plate, [Pad("z_high", Rectangle(*spot)) for spot in spots], tolerance=TOLERANCE)
    # Sides and shifts are powers of two, so that the pads are the same to the last digit.
    shifted = [Pad("z_high", Rectangle(*(end + 16.0 for end in spot))) for spot in spots]
    wide = influence(Body.stack((32.0, 32.0), PLATE, all_insulated(**faces)), shifted, tolerance=TOLERANCE)
    assert (np.abs(endless.mean - wide.mean) <= endless.bound + wide.bound).all()
    # Between pads nothing cancels.
    apart = ~np.eye(len(spots), dtype=bool)
    assert np.abs(endless.mean - wide.mean)[apart].max() <= 1e-14
    assert endless.bound.max() <= 1e-8 * float(np.diag(endless.mean).min())


def test_a_pad_that_moved_has_the_same_matrix_as_all_at_once() -> None:
    body = BODIES["held side and film top"]
    before = influence(body, PADS, tolerance=TOLERANCE)
    moved = (PADS[0], Pad("z_high", Rectangle(0.42, 0.62, 0.3, 0.5)), *PADS[:1:-1])
    step = influence(body, moved, tolerance=TOLERANCE, earlier=before)
    whole = influence(body, moved, tolerance=TOLERANCE)
    assert (np.abs(step.mean - whole.mean) <= step.bound + whole.bound).all()
    # Only what the pad takes part in is had anew.
    assert step.mean[0, 2] == before.mean[0, 5]


REFUSED: dict[str, tuple[Body, Pad, type[Exception]]] = {
    "on a held face": (BODIES["held side and film top"], Pad("x_low", Rectangle(0.1, 0.2, 0.1, 0.2)), NotPhysical),
    "beyond the face": (BODIES["block of one material"], Pad("z_high", Rectangle(0.5, 1.1, 0.1, 0.2)), NotPhysical),
    "without extent": (BODIES["block of one material"], Pad("z_high", Rectangle(0.5, 0.5, 0.1, 0.2)), NotPhysical),
    "no way out": (
        Body(SIZE, (1.0, 1.0, 1.0), all_insulated()),
        Pad("z_high", Rectangle(0.1, 0.2, 0.1, 0.2)),
        NoSteadyState,
    ),
}


@pytest.mark.parametrize("name", REFUSED)
def test_pads_without_an_influence_are_refused(name: str) -> None:
    body, pad, error = REFUSED[name]
    with pytest.raises(error):
        influence(body, [pad], tolerance=TOLERANCE)


def test_pads_far_beyond_the_reach_of_each_other_scale_within_their_bounds() -> None:
    """Another unit of length puts other nodes of the rule: 27 decay lengths apart they tell what the rule leaves."""
    found = []
    for unit in (1.0, 2.0**20):
        faces = all_insulated(x_low=held(0.0), y_low=film(2.57 / unit, 0.0), z_low=film(3.9e-3 / unit, 0.0))
        body = Body((1.115 * unit, 1.115 * unit, 1.139e-5 * unit), (1.0, 1.0, 1.0), faces)
        corners = ((1.0, 1.115, 0.0, 1e-4), (0.044, 0.0441, 1.1149, 1.115))
        pads = [Pad("z_low", Rectangle(*(unit * place for place in corner))) for corner in corners]
        matrix = influence(body, pads, tolerance=1e-6 / unit)
        found.append((unit * matrix.mean[0, 1], unit * matrix.bound[0, 1]))
    (one, one_bound), (other, other_bound) = found
    assert 0.0 < abs(one - other) <= one_bound + other_bound
    assert one_bound < 0.1 * one
