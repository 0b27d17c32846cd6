"""The eigenfunction series against the time form: two independent ways to the same number."""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.core import Body, solve
from service.core.certificate import by_series
from tests.core.bodies import BODIES

PLACES = np.random.default_rng(7).uniform(0.05, 0.95, size=(12, 3))


def places_in(body: Body) -> np.ndarray:
    lengths = [length if math.isfinite(length) else 2.0 * body.size[0] for length in body.size]
    return PLACES * lengths


@pytest.mark.parametrize("name", BODIES)
def test_series_and_time_form_agree_within_both_bounds(name: str) -> None:
    solution = solve(BODIES[name])
    points = places_in(BODIES[name])
    answer = solution.field_at(points, tolerance=1e-11 * solution.span)
    compared = 0
    for point, value in zip(points, answer.potential, strict=True):
        check = by_series(solution._setting, point)
        if check is not None:
            compared += 1
            assert abs(check.value - value) <= check.bound + answer.potential_bound
            assert check.bound <= 1e-9 * solution.span
    assert compared >= 6, "the series has to be within reach at most of these places"


@pytest.mark.parametrize("name", BODIES)
def test_certificate_compares_both_forms_at_places_of_the_answer(name: str) -> None:
    solution = solve(BODIES[name])
    certificate = solution.certificate(places_in(BODIES[name]), 1e-9, tolerance=1e-9 * solution.span)
    assert certificate.checked_places > 0
    assert certificate.agreement is not None
    assert certificate.check_bound is not None
    assert certificate.agreement <= certificate.check_bound
    assert certificate.series_terms > 0
    assert certificate.time_nodes > 0


def test_no_agreement_is_claimed_where_nothing_was_compared() -> None:
    solution = solve(BODIES["square bar, end held"])
    # Right next to the driven end the series is out of reach; then places inside the body are compared instead.
    certificate = solution.certificate(np.array([[0.5, 0.5, 1e-9]]), 1e-9, tolerance=1e-9)
    assert certificate.checked_places == 2
    assert by_series(solution._setting, np.array([0.5, 0.5, 1e-9])) is None
