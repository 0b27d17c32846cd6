"""What panels cannot know next to a pad's border: no bound for its flux, and little for its potential."""

from __future__ import annotations

import numpy as np
import pytest

from service.core import Body, Rectangle
from service.core.conditions import HeldPad, Mixed
from service.core.mixed import solve_mixed
from tests.core.bodies import INSULATED, all_insulated, film

PAD = Rectangle(0.2, 0.7, 0.3, 0.5)


@pytest.mark.parametrize("height", [1e-12, 1e-9, 1e-6])
def test_potential_just_off_a_border_is_told_as_well_as_elsewhere(height: float) -> None:
    faces = all_insulated(z_high=film(1.0, 0.0), z_low=Mixed(INSULATED, (HeldPad(PAD, 1.0),)))
    solution = solve_mixed(Body((1.0, 1.0, 0.5), (1.0, 1.0, 1.0), faces), accuracy=1e-4)
    points = np.array([[PAD.p_high, 0.4, height], [0.4, PAD.q_low, height], [PAD.p_high + height, 0.35, 0.0]])
    found = solution.field_at(points, tolerance=solution.usual_accuracy * solution.span)
    # So near to the pad the potential is its level, less about the root of the distance in parts of the pad.
    off = np.abs(found.potential - 1.0)
    assert (off <= found.potential_bound + 2.0 * np.sqrt(height / 0.2)).all()
