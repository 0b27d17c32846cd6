"""The error bound is a bound, and not a wide one: random bodies against values of more than twenty digits.

No value is further from the reference than its bound, and no bound is more than a thousand times the error
unless it is below 1e-9 of the span of the data (issue of a certificate: met to the accuracy asked for).
"""

from __future__ import annotations

import math
import os

import numpy as np
import pytest

from service.core import FACES, solve
from tests.core.reference.cases import Case, Cells, Wall, walls
from tests.core.reference.high_precision import HighPrecision
from tests.core.reference.random_cases import Place, hard_places, random_case

ACCURACY = 1e-9
WIDEST = 1000

# What the reference itself may be off, of the span and of span times k / distance (`test_reference.py`).
REFERENCE_ERROR = 1e-22

# BOUND_SEEDS=400 runs as many random bodies; the default keeps to about half a minute.
SEEDS = range(int(os.environ.get("BOUND_SEEDS", "12")))

PAD = Cells(0.0, ((0.25, 0.5, 0.25, 0.75, 2.0),))
DRAIN = Cells(0.0, ((0.5, 0.75, 0.25, 0.75, -2.0),))
TINY_FILMS = dict.fromkeys(FACES, Wall("R", 0.0, 1e-9))
SPECIAL_CASES: dict[str, tuple[Case, tuple[Place, ...]]] = {
    "balanced inflows of an insulated block": (
        Case((1.0, 1.0, 1.0), (1.0, 2.0, 0.5), walls(z_low=Wall("N", PAD), x_high=Wall("N", DRAIN))),
        ((0.3, 0.4, 0.0), (0.25 + 1e-8, 0.5, 0.0), (0.9, 0.1, 1e-6)),
    ),
    "balanced inflows of an insulated bar": (
        Case((1.0, 1.0, math.inf), (1.0, 2.0, 0.5), walls(z_low=Wall("N", PAD), x_high=Wall("N", DRAIN))),
        ((0.3, 0.4, 0.0), (0.9, 0.1, 1e-6), (0.2, 0.6, 3.0)),
    ),
    "pad on the held end of a bar with insulated sides": (
        Case((1.0, 1.0, math.inf), (1.0, 2.0, 0.5), walls(z_low=Wall("D", PAD))),
        ((0.3, 0.4, 1e-6), (0.25 + 1e-8, 0.5, 0.0), (0.2, 0.6, 3.0)),
    ),
    "generation drained by films of Biot number 1e-9": (
        Case((1.0, 1.0, 1.0), (1.0, 2.0, 0.5), TINY_FILMS, (((0.25, 0.25, 0.25), (0.5, 0.75, 1.0), 1.0),)),
        ((0.3, 0.4, 0.5), (0.9, 0.1, 0.0)),
    ),
    "one face driven, five films of Biot number 1e9": (
        Case(
            (1.0, 1.0, 1.0),
            (1.0, 2.0, 0.5),
            {**dict.fromkeys(FACES, Wall("R", 0.0, 1e9)), "z_low": Wall("R", PAD, 1e9)},
        ),
        ((0.3, 0.4, 0.0), (0.25 + 1e-8, 0.5, 1e-6), (0.5, 0.5, 0.5)),
    ),
    "levels of some hundreds and a span of one": (
        Case(
            (1.0, 1.0, math.inf),
            (1.0, 1.0, 1.0),
            walls(x_low=Wall("D", 300.0), x_high=Wall("R", 300.0, 2.0), z_low=Wall("D", 301.0)),
        ),
        ((0.3, 0.4, 1e-6), (0.5, 0.5, 0.5), (0.5, 0.5, 9.0)),
    ),
}


def scale_at(case: Case, place: Place) -> float:
    """What turns a difference of potential into a flux here: largest sqrt(k k_max) / distance over the axes.

    Distances are those to faces and to lines where data jump; a distance d along an axis with conductivity k
    counts d sqrt(k_j / k) along another.
    """
    largest = max(case.conductivity)
    scales = []
    for axis, (k, length, c) in enumerate(zip(case.conductivity, case.size, place, strict=True)):
        marks = (0.0, length, *jump_places(case, axis))
        distances = [length, *(abs(c - mark) for mark in marks if c != mark)]
        scales.append(math.sqrt(k * largest) / min(distances))
    return max(scales)


def jump_places(case: Case, axis: int) -> list[float]:
    """Coordinates along an axis at which a patch of any face begins or ends."""
    found: list[float] = []
    for face, wall in case.walls.items():
        across = [other for other in range(3) if other != "xyz".index(face[0])]
        if isinstance(wall.data, Cells) and axis in across:
            which = across.index(axis)
            found.extend(value for patch in wall.data.patches for value in patch[2 * which : 2 * which + 2])
    return found


def check_against_reference(case: Case, place: Place, name: str) -> None:
    """Value and flux at one place: neither further from the reference than its bound, nor the bound too
    wide.
    """
    solution = solve(case.body())
    potential, flux = HighPrecision(case).potential_and_flux(place)
    found = solution.field_at(np.array([place]), tolerance=ACCURACY * solution.span, with_flux=True)
    assert found.flux is not None
    assert found.flux_bound is not None
    scale = solution.span * scale_at(case, place)
    error = float(abs(potential - float(found.potential[0])))
    assert error <= found.potential_bound + REFERENCE_ERROR * solution.span, name
    assert found.potential_bound <= max(WIDEST * error, ACCURACY * solution.span), name
    flux_bound = float(found.flux_bound[0])
    flux_error = max(float(abs(a - float(b))) for a, b in zip(flux, found.flux[:, 0], strict=True))
    assert flux_error <= flux_bound + REFERENCE_ERROR * scale, name
    assert flux_bound <= max(WIDEST * flux_error, ACCURACY * scale), name


@pytest.mark.parametrize("seed", SEEDS)
def test_no_value_is_further_off_than_its_bound(seed: int) -> None:
    case = random_case(seed)
    for name, place in hard_places(case, seed).items():
        check_against_reference(case, place, name)


@pytest.mark.parametrize("name", SPECIAL_CASES)
def test_bound_holds_where_the_level_or_a_section_needs_care(name: str) -> None:
    case, places = SPECIAL_CASES[name]
    for place in places:
        check_against_reference(case, place, f"{name} at {place}")
