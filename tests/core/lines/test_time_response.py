"""A line's two forms in time meet to rounding, whatever its ends and whatever drives it."""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.core.lines import images
from service.core.lines.line import PRIMITIVE, SLOPE, VALUE, Drive, Line, Order, WallDrive
from service.core.lines.places import Places
from service.core.lines.time_response import respond
from service.core.profiles import Profiles

ENDS = (0.0, 1e-6, 0.3, 50.0, 1e9, math.inf)
STEPS_AND_RAMPS = Profiles(
    np.array([0.0, 0.3, 1.1, 2.0]),
    np.array([[1.0, 2.0], [0.0, 1.0], [0.5, 3.0]]),
    np.array([[1.0, 0.0], [0.3, 1.0], [0.5, -1.0]]),
)
DRIVES: dict[str, Drive] = {"profiles": STEPS_AND_RAMPS, "low end": WallDrive(False), "high end": WallDrive(True)}
COORDINATES = np.array([0.0, 1e-6, 0.1, 0.3, 0.7, 1.1, 1.5, 2.0 - 1e-7, 2.0])


def asked(order: Order) -> Places:
    if order == PRIMITIVE:
        return Places(COORDINATES[:-1], PRIMITIVE, COORDINATES[1:])
    return Places(COORDINATES, order)


@pytest.mark.parametrize("order", [VALUE, SLOPE, PRIMITIVE], ids=["values", "slopes", "integrals"])
@pytest.mark.parametrize("name", DRIVES)
@pytest.mark.parametrize("high", ENDS)
@pytest.mark.parametrize("low", ENDS)
def test_images_and_modes_agree_where_one_hands_over_to_the_other(
    low: float, high: float, name: str, order: Order
) -> None:
    line = Line(2.0, 0.7, low, high)
    switch = images.LATEST * line.extent**2
    # One time on either side of the switch, so close that the answer itself does not change.
    times = switch * np.array([1.0 - 1e-15, 1.0 + 1e-15])
    early, late = np.moveaxis(respond(line, DRIVES[name], asked(order), times).total, 1, 0)
    # 3e-13 of the largest answer: sums of 30 modes with wave numbers up to 30 pi / l.
    np.testing.assert_allclose(early, late, rtol=0, atol=3e-13 * float(np.abs(late).max()) + 1e-14)


@pytest.mark.parametrize("low", ENDS)
def test_departure_and_initial_profile_make_up_the_answer(low: float) -> None:
    line = Line(2.0, 0.7, low, math.inf)
    answer = respond(line, STEPS_AND_RAMPS, asked(VALUE), np.geomspace(1e-12, 1.0, 40))
    np.testing.assert_allclose(answer.total, answer.departure + answer.initial[:, None, :], rtol=0, atol=1e-15)


def test_departure_keeps_its_digits_where_it_is_far_below_rounding() -> None:
    line = Line(2.0, 1.0, math.inf, math.inf)
    even = Profiles(np.array([0.0, math.inf]), np.ones((1, 1)), np.ones((1, 1)))
    place, time = 0.5, 0.0025
    departure = respond(line, even, Places(np.array([place]), VALUE), np.array([time])).departure[0, 0, 0]
    # -erfc(0.5 / (2 * 0.05)) = -erfc(5), to ten digits from Abramowitz and Stegun, table 7.3 (from memory)
    assert departure == pytest.approx(-1.5374597944e-12, rel=1e-9)


def test_even_profile_between_insulated_ends_does_not_change_at_all() -> None:
    line = Line(3.0, 1.3, 0.0, 0.0)
    even = Profiles(np.array([0.0, math.inf]), np.full((1, 1), 7.0), np.full((1, 1), 7.0))
    times = np.geomspace(1e-9, 1e3, 30)
    places = Places(np.linspace(0.0, 3.0, 5), VALUE)
    assert (respond(line, even, places, times).total == 7.0).all()
    assert (respond(line, even, Places(places.low, SLOPE), times).total == 0.0).all()


@pytest.mark.parametrize("order", [VALUE, SLOPE], ids=["values", "slopes"])
@pytest.mark.parametrize("high", [0.0, 0.3, 50.0, math.inf])
@pytest.mark.parametrize("low", [0.0, 0.3, 50.0, math.inf])
def test_piece_far_narrower_than_the_line_keeps_its_digits(low: float, high: float, order: Order) -> None:
    line = Line(2.0, 0.7, low, high)
    width = 1e-7
    narrow = Profiles(
        np.array([0.0, 0.7, 0.7 + width, 2.0]), np.array([[0.0], [2.0], [0.0]]), np.array([[0.0], [2.0], [0.0]])
    )
    switch = images.LATEST * line.extent**2
    # Away from the piece; on it the answer is the profile less nearly all of it.
    places = Places(COORDINATES[COORDINATES != 0.7], order)
    early, late = np.moveaxis(respond(line, narrow, places, switch * np.array([1.0 - 1e-15, 1.0 + 1e-15])).total, 1, 0)
    # The answer itself is of the order of 1e-7; its digits are its own.
    assert 0 < np.abs(late).max() < 1e-5
    np.testing.assert_allclose(early, late, rtol=0, atol=1e-12 * float(np.abs(late).max()))


def test_narrow_piece_is_handed_over_from_its_breaks_to_its_inside_without_a_step() -> None:
    line = Line(2.0, 1.0, 0.3, math.inf)
    width = 1e-3
    narrow = Profiles(
        np.array([0.0, 0.7, 0.7 + width, 2.0]), np.array([[0.5], [1.0], [0.2]]), np.array([[0.4], [3.0], [0.2]])
    )
    time = (images.NARROW * width) ** 2
    for order in (VALUE, SLOPE):
        before, after = np.moveaxis(
            respond(line, narrow, asked(order), time * np.array([1 - 1e-14, 1 + 1e-14])).total, 1, 0
        )
        np.testing.assert_allclose(before, after, rtol=0, atol=3e-13 * float(np.abs(after).max()))


def test_mean_over_a_narrow_interval_agrees_with_the_value_in_its_middle() -> None:
    line = Line(2.0, 1.0, 0.3, math.inf)
    low, high = np.array([0.9]), np.array([0.9 + 1e-6])
    times = np.geomspace(1e-14, 1e-2, 25)
    mean = respond(line, STEPS_AND_RAMPS, Places(low, PRIMITIVE, high), times).total[0] / 1e-6
    middle = respond(line, STEPS_AND_RAMPS, Places(0.5 * (low + high), VALUE), times).total[0]
    # A smooth profile's mean over 1e-6 is its middle value to 1e-13.
    np.testing.assert_allclose(mean, middle, rtol=0, atol=1e-9)


@pytest.mark.parametrize("film", ENDS)
@pytest.mark.parametrize("high_end", [False, True])
def test_mean_over_a_narrow_interval_at_a_driven_end_keeps_its_digits(film: float, *, high_end: bool) -> None:
    line = Line(2.0, 1.0, 0.3, film) if high_end else Line(2.0, 1.0, film, 0.3)
    width, times = 2.0**-30, np.geomspace(1e-12, 1e-2, 15)
    ends = np.array([2.0 - width, 2.0]) if high_end else np.array([0.0, width])
    mean = respond(line, WallDrive(high_end), Places(ends[:1], PRIMITIVE, ends[1:]), times).total[0] / width
    middle = respond(line, WallDrive(high_end), Places(ends[:1] + 0.5 * width, VALUE), times).total[0]
    # From a kernel with a scale of sqrt(t), 1000 times the width and more, the mean differs by (1e-3)^2 / 24 and less.
    np.testing.assert_allclose(mean[1:], middle[1:], rtol=1e-7)
    np.testing.assert_allclose(mean[-5:], middle[-5:], rtol=2e-13)


def test_endless_line_with_only_its_last_piece_left_is_served() -> None:
    line = Line(math.inf, 1.0, 1e-3, 0.0)
    steps = Profiles(
        np.array([0.0, 3e-3, 4e-3, math.inf]), np.array([[1.0], [2.0], [1.5]]), np.array([[1.0], [2.0], [1.5]])
    )
    late = respond(line, steps, Places(np.array([0.0, 1.0]), VALUE), np.array([1e-4, 1.0, 1e4])).total
    # Long after, the line is at its far value but for what the narrow pieces hold and the film takes: 1.5 / 1e3 of it.
    assert np.isfinite(late).all()
    assert late[0, 1, 0] == pytest.approx(1.5, abs=5e-3)
