"""The error bound is a bound, and not a wide one: random bodies against values of more than twenty digits.

No value is further from the reference than its bound, and no bound is more than a thousand times the error unless it
is below 1e-9 of the span of the data (issue of a certificate: met to the accuracy asked for).
"""

from __future__ import annotations

import os

import numpy as np
import pytest

from service.core import solve
from tests.core.reference.cases import Case, Cells
from tests.core.reference.high_precision import HighPrecision, NoFiniteValue
from tests.core.reference.random_cases import Place, hard_places, random_case

ACCURACY = 1e-9
WIDEST = 1000

# STILLFIELD_BOUND_SEEDS=400 runs as many random bodies; the default keeps to about half a minute.
SEEDS = range(int(os.environ.get("STILLFIELD_BOUND_SEEDS", "24")))


def scale_at(case: Case, place: Place) -> float:
    """Largest k / distance, over faces and lines where data jump: what turns a difference of potential into a flux."""
    scales = [k / length for k, length in zip(case.conductivity, case.size, strict=True)]
    for axis, (k, length, c) in enumerate(zip(case.conductivity, case.size, place, strict=True)):
        distances = [abs(c - at) for at in (0.0, length, *jump_places(case, axis))]
        scales.extend(k / distance for distance in distances if distance > 0)
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


@pytest.mark.parametrize("seed", SEEDS)
def test_no_value_is_further_off_than_its_bound(seed: int) -> None:
    case = random_case(seed)
    solution = solve(case.body())
    reference = HighPrecision(case)
    for name, place in hard_places(case, seed).items():
        found = solution.field_at(np.array([place]), tolerance=ACCURACY * solution.span, with_flux=True)
        try:
            potential, flux = reference.potential_and_flux(place)
        except NoFiniteValue:
            pytest.fail(f"no reference at the place {name}")
        error = float(abs(potential - float(found.potential[0])))
        assert error <= found.potential_bound, name
        assert found.potential_bound <= max(WIDEST * error, ACCURACY * solution.span), name
        assert found.flux is not None
        assert found.flux_bound is not None
        bound = float(found.flux_bound[0])
        off = max(float(abs(a - float(b))) for a, b in zip(flux, found.flux[:, 0], strict=True))
        assert off <= bound, name
        assert bound <= max(WIDEST * off, ACCURACY * solution.span * scale_at(case, place)), name
