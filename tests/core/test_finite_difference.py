"""The core against finite elements on two meshes, which estimate their own error.

The elements converge with the square of the mesh width, so the finer mesh is off by about a third of the
difference between both; the core has to lie within the whole difference.
"""

from __future__ import annotations

import numpy as np
import pytest

from service.core import solve
from tests.core.reference.cases import Case, Cells, Readings, Wall, walls
from tests.core.reference.finite_elements import solve_by_finite_elements

BUMP = Readings((0.0, 0.5, 1.0), (0.0, 0.5, 1.0), ((0.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 0.0)))
SLOPE = Readings((0.0, 1.0), (0.0, 1.0), ((20.0, 30.0), (25.0, 60.0)))
PAD = Cells(0.0, ((0.25, 0.75, 0.25, 0.5, 10.0),))

CASES = {
    "held bump among cold faces": Case(
        (1.0, 1.0, 1.0),
        (1.0, 1.0, 1.0),
        walls(x_low="D", x_high="D", y_low="D", y_high="D", z_low=Wall("D", BUMP), z_high="D"),
    ),
    "inflow pad over a film": Case(
        (1.0, 1.0, 1.0),
        (2.0, 2.0, 2.0),
        walls(z_low=Wall("N", PAD), z_high=Wall("R", 5.0, 3.0)),
    ),
    "films with mapped ambient and a held side": Case(
        (1.0, 1.0, 1.0),
        (1.0, 1.0, 1.0),
        walls(x_low=Wall("D", 20.0), y_high=Wall("R", SLOPE, 4.0), z_high=Wall("R", SLOPE, 0.5)),
    ),
    "box source between cold sides": Case(
        (1.0, 1.0, 1.0),
        (1.0, 1.0, 1.0),
        walls(x_low="D", x_high="D", z_low=Wall("R", 0.0, 2.0)),
        (((0.25, 0.0, 0.25), (0.75, 0.5, 0.5), 8.0),),
    ),
    "orthotropic body with every kind of face": Case(
        (1.0, 1.0, 1.0),
        (4.0, 1.0, 0.5),
        walls(
            x_low="D",
            x_high=Wall("R", 1.0, 2.0),
            y_low=Wall("N", 1.5),
            z_low=Wall("N", PAD),
            z_high=Wall("R", 0.0, 3.0),
        ),
        (((0.0, 0.0, 0.0), (1.0, 1.0, 1.0), 1.0),),
    ),
    "flat orthotropic plate": Case(
        (4.0, 2.0, 0.25),
        (1.0, 2.0, 0.125),
        walls(z_low=Wall("N", Cells(0.0, ((1.0, 2.0, 0.5, 1.0, 3.0),))), z_high=Wall("R", 0.0, 1.0), x_high="D"),
    ),
}

COARSE, FINE = (8, 8, 8), (16, 16, 16)
# Fractions of the sides; all are nodes of both meshes.
PLACES = np.array([(0.5, 0.5, 0.5), (0.25, 0.5, 0.125), (0.75, 0.25, 0.75), (0.5, 0.375, 0.0), (1.0, 0.75, 0.5)])


@pytest.mark.parametrize("name", CASES)
def test_core_lies_within_the_error_of_finite_elements(name: str) -> None:
    case = CASES[name]
    places = PLACES * np.array(case.size)
    coarse, fine = (solve_by_finite_elements(case, cells)(places) for cells in (COARSE, FINE))
    own_error = float(np.abs(fine - coarse).max())
    range_of_values = float(np.ptp(fine))
    # The comparison says something: the elements know their answer to a few percent of its range.
    assert 0 < own_error < 0.05 * range_of_values
    solution = solve(case.body())
    found = solution.field_at(places, tolerance=1e-9 * solution.span, with_flux=False).potential
    assert np.abs(found - fine).max() <= own_error
