"""The Laplace form of a line is the time integral of its answers, here by an independent sum over time."""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.core.lines import laplace
from service.core.lines.line import SLOPE, VALUE, Drive, Line, Order, WallDrive
from service.core.lines.places import Places
from service.core.lines.time_response import respond
from service.core.profiles import Profiles

FAR = 2.0
COORDINATES = np.array([1e-3, 0.1, 0.3, 0.7, 1.1, 1.5, 1.99])
STEP = 0.15


def profiles(line: Line) -> Profiles:
    end = math.inf if line.is_endless else FAR
    left = np.array([[1.0, 2.0], [0.0, 1.0], [0.5, 0.0]])
    right = np.array([[1.0, 0.0], [0.3, 1.0], [0.5, 0.0]])
    return Profiles(np.array([0.0, 0.3, 1.1, end]), left, right)


def summed_over_time(line: Line, drive: Drive, places: Places, gamma: float) -> np.ndarray:
    times = np.exp(np.arange(math.log(1e-28), math.log(60.0 / gamma**2), STEP))
    answer = respond(line, drive, places, times).total
    return np.asarray(np.einsum("nqr,q->nr", answer, STEP * times * np.exp(-(gamma**2) * times)))


@pytest.mark.parametrize("order", [VALUE, SLOPE], ids=["values", "slopes"])
@pytest.mark.parametrize("gamma", [0.3, 1.0, 7.0])
@pytest.mark.parametrize(
    ("high", "kind"),
    [(high, kind) for high in (0.0, 1e-3, 3.0, math.inf) for kind in ("profiles", "low end", "high end")]
    + [(None, "profiles"), (None, "low end")],
)
@pytest.mark.parametrize("low", [0.0, 0.3, math.inf])
def test_transform_is_the_integral_over_time(
    low: float, high: float | None, gamma: float, kind: str, order: Order
) -> None:
    line = Line(math.inf, 0.7, low, 0.0) if high is None else Line(FAR, 0.7, low, high)
    drive: Drive = profiles(line) if kind == "profiles" else WallDrive(kind == "high end")
    places = Places(COORDINATES, order)
    found = laplace.transform(line, drive, places, np.array([gamma]))[:, 0]
    expected = summed_over_time(line, drive, places, gamma)
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-12 * float(np.abs(expected).max()))


@pytest.mark.parametrize("gamma", [0.0, 0.01, 7.0, 300.0])
@pytest.mark.parametrize("high_end", [False, True])
def test_integral_over_a_narrow_interval_at_a_driven_end_keeps_its_digits(gamma: float, *, high_end: bool) -> None:
    line, width = Line(FAR, 0.7, 0.3, 50.0), 2.0**-30
    ends = np.array([FAR - width, FAR]) if high_end else np.array([0.0, width])
    drive = WallDrive(high_end)
    mean = laplace.transform(line, drive, Places(ends[:1], 1, ends[1:]), np.array([gamma])) / (width * line.scale)
    middle = laplace.transform(line, drive, Places(ends[:1] + 0.5 * width, VALUE), np.array([gamma]))
    # The answer is smooth on 1 / gamma and the line: its mean differs by (gamma width)^2 / 24, which is nothing.
    np.testing.assert_allclose(mean, middle, rtol=1e-14)


def test_line_that_loses_nothing_answers_with_mean_zero() -> None:
    line = Line(2.0, 1.0, 0.0, 0.0)
    whole = Places(np.array([0.0]), 1, np.array([2.0]))
    for drive in (WallDrive(False), WallDrive(True)):
        assert laplace.transform(line, drive, whole, np.zeros(1))[0, 0, 0] == pytest.approx(0.0, abs=1e-15)
    mean = laplace.transform(line, profiles(line), whole, np.zeros(1))[0, 0]
    np.testing.assert_allclose(mean, 0.0, atol=1e-14)


def test_half_line_at_rest_takes_the_held_value_or_the_ambient() -> None:
    for film in (0.5, math.inf):
        line = Line(math.inf, 1.0, film, 0.0)
        steady = laplace.transform(line, WallDrive(False), Places(COORDINATES, VALUE), np.zeros(1))
        assert (steady == 1.0).all()


def test_half_line_with_generation_on_a_stretch_follows_the_textbook_parabola() -> None:
    # u'' = -1 on [0, 1], u(0) = 0, bounded: u = x - x^2 / 2, then 1/2 (elementary)
    line = Line(math.inf, 1.0, math.inf, 0.0)
    stretch = Profiles(np.array([0.0, 1.0, math.inf]), np.array([[1.0], [0.0]]), np.array([[1.0], [0.0]]))
    x = np.array([0.0, 0.25, 1.0, 4.0])
    steady = laplace.transform(line, stretch, Places(x, VALUE), np.zeros(1))[:, 0, 0]
    np.testing.assert_allclose(steady, [0.0, 0.25 - 0.25**2 / 2, 0.5, 0.5], rtol=0, atol=1e-15)
