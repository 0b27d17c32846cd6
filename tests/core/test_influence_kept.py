"""Influence matrices are kept: a pad that moves costs one column, and data of the body none."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from service.core import Body, Condition, Face, FaceMap, Inflow, Pad, Rectangle, influence
from service.core.influence_kept import KEPT, kept_influence
from tests.core.bodies import all_insulated, film

BLOCK = Body((1.0, 0.8, 0.3), (2.0, 1.0, 0.5), all_insulated(z_low=film(4.0, 20.0)))
PADS = [Pad("z_high", Rectangle(0.1 * i, 0.1 * i + 0.08, 0.2, 0.5)) for i in range(6)]
MOVED = [*PADS[:5], Pad("z_high", Rectangle(0.7, 0.9, 0.6, 0.8))]


def test_a_matrix_with_one_pad_moved_is_the_one_computed_afresh() -> None:
    kept_influence(BLOCK, PADS, tolerance=1e-9)
    found = kept_influence(BLOCK, MOVED, tolerance=1e-9)
    afresh = influence(BLOCK, MOVED, tolerance=1e-9)
    assert np.abs(found.mean - afresh.mean).max() <= 1e-14 * afresh.mean.max()
    assert (np.abs(found.mean - afresh.mean) <= found.bound).all()


def test_other_data_of_the_same_body_find_the_matrix_kept() -> None:
    kept_influence(BLOCK, PADS, tolerance=1e-9)
    before = KEPT.hits
    loaded = {**BLOCK.faces, "z_high": Inflow(FaceMap.uniform(3.0)), "z_low": film(4.0, -7.0)}
    insulated_as_loaded = replace(BLOCK, faces={**BLOCK.faces, "z_high": Inflow(FaceMap.uniform(0.0))})
    kept_influence(insulated_as_loaded, PADS, tolerance=1e-9)
    kept_influence(replace(BLOCK, faces=loaded), PADS, tolerance=1e-9)
    assert KEPT.hits == before + 1


@pytest.mark.parametrize(("face", "condition"), [("z_low", film(5.0, 20.0)), ("x_low", film(4.0, 20.0))])
def test_another_film_makes_another_matrix(face: Face, condition: Condition) -> None:
    first = kept_influence(BLOCK, PADS, tolerance=1e-9)
    other = kept_influence(replace(BLOCK, faces={**BLOCK.faces, face: condition}), PADS, tolerance=1e-9)
    assert np.abs(first.mean - other.mean).max() > 1e-3 * first.mean.max()
