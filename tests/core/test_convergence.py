"""What a person sees of how an answer converges."""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.core import Body, FaceMap, Held, Patch, Rectangle, solve
from tests.core.bodies import BODIES, all_insulated, film

BAR = BODIES["square bar, end held"]


def test_error_of_the_cut_series_stays_below_its_tail_bound() -> None:
    solution = solve(BAR)
    (found,) = solution.convergence(np.array([[0.4, 0.3, 0.05]]), tolerance=1e-11)
    for step in found.series:
        assert step.tail_bound is not None
        # 1e-11: the converged value's own bound, below which an error cannot be told.
        assert step.error <= step.tail_bound + 1e-11
    errors = [step.error for step in found.series]
    assert errors[0] > 1e-2
    assert errors[-1] < 1e-8


def test_series_has_no_tail_bound_on_the_driven_face() -> None:
    (found,) = solve(BAR).convergence(np.array([[0.4, 0.3, 0.0]]), tolerance=1e-9)
    assert [step.tail_bound for step in found.series] == [None] * len(found.series)
    assert found.terms_needed is None
    # The time form has the given value there at once.
    assert found.value == pytest.approx(1.0, abs=1e-9)


def test_terms_needed_is_the_first_number_whose_tail_bound_will_do() -> None:
    solution = solve(BAR)
    (found,) = solution.convergence(np.array([[0.4, 0.3, 0.5]]), tolerance=1e-9)
    assert found.terms_needed is not None
    (tighter,) = solution.convergence(np.array([[0.4, 0.3, 0.5]]), tolerance=1e-10)
    assert tighter.terms_needed is not None
    assert tighter.terms_needed > found.terms_needed


@pytest.mark.parametrize("name", BODIES)
def test_time_form_error_falls_with_its_nodes_and_stays_below_its_bound(name: str) -> None:
    body = BODIES[name]
    lengths = [length if math.isfinite(length) else 2.0 for length in body.size]
    solution = solve(body)
    (found,) = solution.convergence(np.array([[0.3, 0.4, 0.45]]) * lengths, tolerance=1e-10 * solution.span)
    nodes = [step.nodes for step in found.time_form]
    assert nodes == sorted(nodes)
    assert found.time_form[-1].error < 1e-8 * solution.span
    for step in found.time_form:
        assert step.error <= step.error_bound + found.error_bound


def test_tenfold_tighter_tolerance_costs_a_few_nodes() -> None:
    (found,) = solve(BAR).convergence(np.array([[0.5, 0.5, 0.2]]), tolerance=1e-6)
    assert 1.0 <= found.cost_ratio_tenfold < 1.5


@pytest.mark.parametrize("terms", [16, 64, 256])
def test_cut_series_overshoots_a_jump_by_the_wilbraham_gibbs_constant(terms: int) -> None:
    # (2 / pi) Si(pi) = 1.178979744472167 in each direction; a corner of two jumps takes the product (Wilbraham 1848,
    # Gibbs 1899). An odd sine series of `terms` modes has its first maximum within a few per mille of the limit.
    (found,) = solve(BAR).overshoot(terms)
    assert found.face == "z_low"
    assert 1.0 + found.overshoot == pytest.approx(1.178979744472167**2, rel=6e-3)


def test_no_overshoot_where_the_data_do_not_jump() -> None:
    overshoots = {found.face: found.overshoot for found in solve(BODIES["closed body, balanced"]).overshoot(32)}
    assert overshoots["x_low"] == pytest.approx(0.0, abs=1e-12)
    assert overshoots["y_high"] > 0.08


@pytest.mark.parametrize("ambient", [0.0, 20.0, -100.0])
def test_overshoot_is_a_part_of_the_jump_whatever_the_level(ambient: float) -> None:
    half = Held(FaceMap.patches((1.0, 1.0), 0.0, [Patch(Rectangle(0.0, 0.5, 0.0, 1.0), 1.0)]))
    body = Body((1.0, 1.0, 1.0), (1.0, 1.0, 1.0), all_insulated(z_low=film(5.0, ambient), z_high=half))
    overshoots = {found.face: found.overshoot for found in solve(body).overshoot(128)}
    # (2 / pi) Si(pi) / 2 - 1 / 2 of the jump (Wilbraham, Gibbs)
    assert overshoots["z_high"] == pytest.approx(0.0894898722, rel=2e-2)


def test_tail_bound_near_the_driven_face_is_never_beyond_the_data() -> None:
    (found,) = solve(BAR).convergence(np.array([[0.4, 0.3, 1e-3]]), tolerance=1e-9)
    assert all(step.tail_bound is not None and step.tail_bound < 3.0 for step in found.series)
