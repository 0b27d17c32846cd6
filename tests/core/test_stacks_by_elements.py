"""Stacks against finite elements on three meshes, extrapolated, which estimate their own error.

On meshes with half the width the error falls to a quarter. Two extrapolations from three meshes differ by more than
three times what the better one is off; the core has to lie within a third of that difference.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from service.core import Body, BoxSource, FaceMap, Film, Held, Inflow, Layer, Patch, Rectangle, solve
from service.core.faces import Face
from tests.core.bodies import INSULATED, all_insulated, film, held
from tests.core.reference.layered_elements import LayeredElements

PAD = Rectangle(0.2, 0.5, 0.3, 0.7)
SECTION = (1.0, 1.2)


def on_pad(value: float, background: float = 0.0) -> FaceMap:
    return FaceMap.patches(SECTION, background, [Patch(PAD, value)])


STACKS: dict[str, Body] = {
    "plate on a joint over a base": Body.stack(
        SECTION,
        [Layer(0.4, (1.0, 1.0, 1.0)), Layer(0.05, (0.05, 0.05, 0.05)), Layer(0.2, (20.0, 20.0, 20.0))],
        all_insulated(z_low=film(5.0, 0.0), z_high=Inflow(on_pad(3.0))),
    ),
    "contacts good and poor": Body.stack(
        SECTION,
        [Layer(0.3, (1.0, 2.0, 0.5)), Layer(0.2, (4.0, 8.0, 1.0), 2.0), Layer(0.1, (2.0, 4.0, 6.0), 200.0)],
        all_insulated(z_low=held(1.0), z_high=Inflow(on_pad(3.0, -0.2))),
    ),
    "held sides": Body.stack(
        SECTION,
        [Layer(0.3, (1.0, 1.0, 1.0)), Layer(0.2, (5.0, 5.0, 2.0), 3.0)],
        all_insulated(
            x_low=held(0.0), y_high=held(0.0), z_low=Inflow(FaceMap.uniform(0.5)), z_high=Inflow(on_pad(3.0))
        ),
    ),
    "films on the sides": Body.stack(
        SECTION,
        [Layer(0.3, (1.0, 0.5, 1.0)), Layer(0.1, (10.0, 5.0, 10.0)), Layer(0.2, (0.2, 0.1, 0.3), 1.0)],
        all_insulated(x_high=film(2.0, 1.0), y_low=film(0.5, -1.0), z_low=film(1.0, 0.0), z_high=Inflow(on_pad(1.0))),
    ),
    "generation in a layer and in a box": Body.stack(
        SECTION,
        [Layer(0.3, (1.0, 1.0, 1.0)), Layer(0.1, (3.0, 3.0, 3.0), 4.0, 5.0), Layer(0.2, (0.5, 0.5, 0.5))],
        all_insulated(z_low=film(3.0, 0.0), z_high=film(0.1, 2.0)),
        (BoxSource((0.2, 0.3, 0.45), (0.5, 0.7, 0.55), 20.0),),
    ),
    "a layer of 20 um on millimetres": Body.stack(
        SECTION,
        [Layer(0.6, (0.4, 0.4, 0.4)), Layer(0.02, (40.0, 40.0, 1.0), 50.0)],
        all_insulated(z_low=held(0.0), z_high=Inflow(on_pad(3.0))),
    ),
    "ambient of a film that is warmer over a pad, sides by a flow": Body.stack(
        SECTION,
        [Layer(0.2, (1.0, 1.0, 1.0)), Layer(0.3, (0.3, 0.3, 2.0), 10.0)],
        {
            "x_low": Inflow(FaceMap.uniform(1.0)),
            "x_high": INSULATED,
            "y_low": INSULATED,
            "y_high": INSULATED,
            "z_low": Held(FaceMap.readings(SECTION, [0.0, 1.0], [0.0, 1.2], [[0.0, 1.0], [1.0, 2.0]])),
            "z_high": Film(2.0, on_pad(1.0)),
        },
    ),
}

# Places that are nodes of all meshes, at half the height of each layer.
SHARES = ((0.35, 0.5, 0.5), (0.75, 0.15, 0.5), (0.1, 0.95, 0.5))

CELLS = (2, 4, 8)


@pytest.mark.parametrize("name", STACKS)
def test_core_lies_within_what_extrapolated_elements_leave_open(name: str) -> None:
    body = STACKS[name]
    borders = [0.0, *body.interfaces, body.size[2]]
    places = np.array([(x, y, low + z * (high - low)) for low, high in pairwise(borders) for x, y, z in SHARES])
    pads: list[Face] = [face for face in ("z_low", "z_high") if not isinstance(body.faces[face], Held)]
    solved = [LayeredElements(body, PAD, cells) for cells in CELLS]
    on_meshes = [np.array([*each.at(places), *(each.mean(face) for face in pads)]) for each in solved]
    first, second = ((4 * fine - coarse) / 3 for coarse, fine in pairwise(on_meshes))
    open_still = float(np.abs(second - first).max())
    # The comparison says something: the elements know their answer to half a hundredth of its range.
    assert 0 < open_still < 2e-2 * float(np.ptp(second))
    solution = solve(body)
    tolerance = 1e-9 * solution.span
    found = solution.field_at(places, tolerance=tolerance).potential
    means = [solution.mean(face, PAD, tolerance=tolerance).value for face in pads]
    # Each extrapolation is at least four times as good as the one before, so the second is off by a third of that.
    assert np.abs(np.array([*found, *means]) - second).max() <= open_still / 3
