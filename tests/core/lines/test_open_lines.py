"""Lines without ends, and endless lines at times long against all that changes along them."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import erfc

from service.core.lines import afar, laplace
from service.core.lines.line import PRIMITIVE, SLOPE, VALUE, Line, Order
from service.core.lines.places import Places
from service.core.lines.time_response import respond
from service.core.profiles import Profiles

LINES = {
    "without ends": Line(math.inf, 0.7, 0.0, 0.0, -math.inf),
    "insulated end": Line(math.inf, 0.7, 0.0, 0.0),
    "weak film": Line(math.inf, 0.7, 1e-6, 0.0),
    "film": Line(math.inf, 0.7, 2.0, 0.0),
    "held end": Line(math.inf, 0.7, math.inf, 0.0),
}
COORDINATES = np.array([0.0, 1e-6, 0.3, 0.7, 1.1, 1.5, 2.0, 40.0])


def profiles_on(line: Line, *, far: float) -> Profiles:
    """Steps and ramps between 0.2 and 2, beyond which the second of two profiles goes on at a level."""
    knots, left, right = (
        [0.2, 0.3, 1.1, 2.0],
        [[1.0, 2.0], [0.0, 1.0], [0.5, 3.0]],
        [[1.0, 0.0], [0.3, 1.0], [0.5, -1.0]],
    )
    first = [[0.0, -far]] if line.begins else [[0.0, 3.0]]
    return Profiles(
        np.array([line.begins, *knots, math.inf]),
        np.array([*first, *left, [0.0, far]]),
        np.array([*first, *right, [0.0, far]]),
    )


def asked(order: Order) -> Places:
    if order == PRIMITIVE:
        # Not so wide that antiderivatives serve, whose rounding grows with t.
        return Places(COORDINATES[1:-2], PRIMITIVE, COORDINATES[2:-1])
    return Places(COORDINATES, order)


@pytest.mark.parametrize("order", [VALUE, SLOPE, PRIMITIVE], ids=["values", "slopes", "integrals"])
@pytest.mark.parametrize("far", [0.0, 1.5])
@pytest.mark.parametrize("name", LINES)
def test_breaks_and_point_sources_agree_where_one_hands_over_to_the_other(name: str, far: float, order: Order) -> None:
    line = LINES[name]
    drive = profiles_on(line, far=far)
    seen = afar.seen_from_afar(line, drive)
    assert seen is not None
    times = seen.root_time**2 * np.array([1.0 - 4e-16, 1.0 + 4e-16])
    early, late = np.moveaxis(respond(line, drive, asked(order), times).total, 1, 0)
    # The breaks cancel: what is left of steps of 3 is exact to their rounding.
    np.testing.assert_allclose(early, late, rtol=0, atol=4e-15)


@pytest.mark.parametrize("name", ["without ends", "insulated end"])
def test_nothing_is_lost_along_a_line_that_loses_nothing(name: str) -> None:
    line = LINES[name]
    drive = profiles_on(line, far=0.0)
    whole = Places(np.array([line.begins]), PRIMITIVE, np.array([math.inf]))
    answer = respond(line, drive, whole, np.geomspace(1e-8, 1e20, 30)).total[0]
    amounts = drive.integrals(whole.low, np.array([math.inf]))[0] * line.scale
    np.testing.assert_allclose(answer, np.broadcast_to(amounts, answer.shape), rtol=0, atol=1e-14)


def test_step_on_a_line_without_ends_spreads_as_the_error_function() -> None:
    line = LINES["without ends"]
    step = Profiles(np.array([-math.inf, 0.4, math.inf]), np.array([[-1.0], [3.0]]), np.array([[-1.0], [3.0]]))
    times = np.geomspace(1e-6, 1e12, 25)
    found = respond(line, step, Places(np.array([-2.0, 0.4, 7.0]), VALUE), times).total[:, :, 0]
    distance = 0.7 * (np.array([-2.0, 0.4, 7.0]) - 0.4)
    expected = -1.0 + 2.0 * erfc(-distance[:, None] / (2 * np.sqrt(times)))
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-15 * 4)


def test_long_after_its_start_a_piece_is_a_point_with_an_image() -> None:
    line = LINES["held end"]
    drive = Profiles(np.array([0.0, 1.0, 2.0, math.inf]), np.eye(3)[:, 1:2], np.eye(3)[:, 1:2])
    place, time = 3.0, 1e16
    found = respond(line, drive, Places(np.array([place]), VALUE), np.array([time])).total[0, 0, 0]
    # x x' / (2 sqrt(pi) t^(3/2)) with x' the middle of the piece, and its scaled width.
    expected = 0.7**3 * place * 1.5 / (2 * math.sqrt(math.pi) * time**1.5)
    assert found == pytest.approx(expected, rel=1e-13)


def test_transform_on_a_line_without_ends_in_closed_form() -> None:
    line = LINES["without ends"]
    box = Profiles(np.array([-math.inf, -1.0, 2.0, math.inf]), np.eye(3)[:, 1:2], np.eye(3)[:, 1:2])
    places, gamma = np.array([-3.0, 0.5, 2.0]), np.array([1e-3, 0.8, 30.0])
    found = laplace.transform(line, box, Places(places, VALUE), gamma)[:, :, 0]

    def half(distance: float, g: float) -> float:
        """Integral of exp(-g s) / 2 g from 0 to a distance to either side."""
        return math.copysign(-math.expm1(-g * abs(distance)) / (2 * g * g), distance)

    expected = [[half(0.7 * (2.0 - x), g) + half(0.7 * (x + 1.0), g) for g in gamma] for x in places]
    np.testing.assert_allclose(found, expected, rtol=1e-12, atol=1e-20)


def test_steady_answer_on_a_line_without_ends_falls_alike_to_both_sides() -> None:
    line = LINES["without ends"]
    # A unit amount at 5, and as much drawn at 1: -|x - x'| / 2 each.
    width = 2.0**-10
    knots = [-math.inf, 1 - width, 1 + width, 5 - width, 5 + width, math.inf]
    level = np.array([0.0, -1.0, 0.0, 1.0, 0.0])[:, None] / (2 * width * 0.7)
    places = np.array([-50.0, 2.0, 60.0])
    found = laplace.transform(line, Profiles(np.array(knots), level, level.copy()), Places(places, VALUE), np.zeros(1))
    expected = 0.7 * (np.abs(places - 1.0) - np.abs(places - 5.0)) / 2
    # Moments about 0 of amounts far from it cancel.
    np.testing.assert_allclose(found[:, 0, 0], expected, rtol=0, atol=1e-12)
