"""Flows and means of parts add up to those of the whole."""

from __future__ import annotations

import numpy as np
import pytest

from service.core import Body, Rectangle, solve
from tests.core.bodies import BODIES, UNIT, all_held, all_insulated, film, held

# The two lines along a section of this cube are one and the same, and so are the uniform data along them.
CUBE = BODIES["cube, one face held"]


@pytest.mark.parametrize("split", [0.1, 0.3, 0.77])
@pytest.mark.parametrize("along", [0, 1], ids=["first axis", "second axis"])
def test_flows_through_two_parts_of_a_section_add_up(split: float, along: int) -> None:
    solution = solve(CUBE)
    parts = [(0.0, split), (split, 1.0)]
    rectangles = [Rectangle(*part, 0.0, 1.0) if along == 0 else Rectangle(0.0, 1.0, *part) for part in parts]
    flows = [solution.plane_total(2, 0.5, rectangle, tolerance=1e-11).value for rectangle in rectangles]
    whole = solution.plane_total(2, 0.5, tolerance=1e-11).value
    assert None not in flows
    assert whole is not None
    assert sum(flows) == pytest.approx(whole, abs=1e-10)  # type: ignore[arg-type]
    assert min(flows) < 0.9 * whole  # type: ignore[type-var, operator]


def test_means_of_two_parts_of_a_face_average_to_the_mean_of_the_face() -> None:
    solution = solve(Body(UNIT, UNIT, all_insulated(x_low=held(1.0), x_high=film(1.0, 0.0), z_high=film(2.0, 0.0))))
    narrow, wide = (
        solution.mean("z_high", Rectangle(0.0, 1.0, low, high), tolerance=1e-11).value
        for low, high in ((0.0, 0.25), (0.25, 1.0))
    )
    assert 0.25 * narrow + 0.75 * wide == pytest.approx(solution.mean("z_high", tolerance=1e-11).value, abs=1e-10)
    near, far = (
        solution.mean("z_high", Rectangle(low, high, 0.0, 1.0), tolerance=1e-11).value
        for low, high in ((0.0, 0.25), (0.25, 1.0))
    )
    assert 0.25 * near + 0.75 * far == pytest.approx(solution.mean("z_high", tolerance=1e-11).value, abs=1e-10)
    assert near > far


def test_flow_through_a_rectangle_is_the_integral_of_the_flux_over_it() -> None:
    solution = solve(Body(UNIT, (1.0, 1.0, 2.0), all_held(z_low=held(1.0))))
    nodes, weights = np.polynomial.legendre.leggauss(20)
    x, y = 0.1 + 0.2 * (nodes + 1) / 2, 0.4 + 0.5 * (nodes + 1) / 2
    points = np.array([[a, b, 0.3] for a in x for b in y])
    flux = solution.field_at(points, tolerance=1e-11, with_flux=True).flux
    assert flux is not None
    expected = float(np.einsum("i,j,ij->", weights * 0.1, weights * 0.25, flux[2].reshape(20, 20)))
    found = solution.plane_total(2, 0.3, Rectangle(0.1, 0.3, 0.4, 0.9), tolerance=1e-11).value
    assert found == pytest.approx(expected, abs=1e-11)


@pytest.mark.parametrize("face", ["z_low", "z_high", "x_low"])
def test_plane_on_a_face_has_the_flow_of_the_face(face: str) -> None:
    solution = solve(Body(UNIT, UNIT, all_insulated(x_low=film(1.0, 0.0), z_low=held(1.0), z_high=film(3.0, 0.0))))
    inflow = solution.face_total(face, tolerance=1e-10).value  # type: ignore[arg-type]
    position = 1.0 if face.endswith("high") else 0.0
    along_axis = solution.plane_total("xyz".index(face[0]), position, tolerance=1e-10).value
    assert inflow is not None
    assert along_axis == pytest.approx(-inflow if face.endswith("high") else inflow, abs=1e-12)


@pytest.mark.parametrize("distance", [1e-300, 1e-100, 1e-40, 1e-12])
def test_place_no_distance_from_a_held_face_has_its_value(distance: float) -> None:
    found = solve(CUBE).field_at(np.array([[0.5, 0.5, distance], [distance, 0.5, 0.5]]), tolerance=1e-10)
    np.testing.assert_allclose(found.potential, [1.0, 0.0], rtol=0, atol=1e-9)
