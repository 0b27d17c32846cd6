"""Curved profiles on a line: short times against the sum of very many modes, early departures against derivatives."""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.core.lines.line import PRIMITIVE, SLOPE, VALUE, Line, Order
from service.core.lines.modes import eigen_integrals, modes_of
from service.core.lines.places import Places
from service.core.lines.time_response import respond
from service.core.profiles import Profiles, chebyshev_places

ENDS = [(math.inf, math.inf), (0.0, 0.0), (3.0, 0.0), (1e3, math.inf), (1e-6, 50.0), (0.3, 1e5)]
EVEN = np.linspace(0.0, 2.0, 11)
GRADED = 2.0 * np.array([0.0, 0.1, 0.2, 0.35, 0.4, 0.5, 0.65, 0.7, 0.7001, 0.71, 0.8, 1.0])
TIMES = np.array([8e-4, 2e-3, 4e-3, 1.2e-2, 2.3e-2])
PLACES = np.array([0.0, 2e-6, 0.1, 0.6, 1.0, 1.4, 1.9, 2.0 - 2e-9, 2.0])
INTERVALS = (np.array([0.0, 0.0, 0.4, 0.6, 1.38]), np.array([2.0, 0.2, 0.42, 0.600002, 1.42]))


def profiles(knots: np.ndarray) -> Profiles:
    """A bell with a slope, a wave, and a kink at a knot."""
    x = chebyshev_places(knots)
    return Profiles.through(
        knots, np.stack([np.exp(-(((x - 0.8) / 0.4) ** 2)) + 0.15 * x, np.cos(1.5 * x), np.abs(x - 1.4)], 1)
    )


@pytest.mark.parametrize("films", ENDS)
@pytest.mark.parametrize("knots", [EVEN, GRADED], ids=["even", "graded"])
@pytest.mark.parametrize("order", [VALUE, SLOPE, PRIMITIVE])
def test_short_times_agree_with_many_modes(films: tuple[float, float], knots: np.ndarray, order: Order) -> None:
    line, given = Line(2.0, 1.0, *films), profiles(knots)
    places = Places(*((INTERVALS[0], PRIMITIVE, INTERVALS[1]) if order == PRIMITIVE else (PLACES, order)))
    modes = modes_of(line, 1500)
    shapes = modes.over(*INTERVALS) if order == PRIMITIVE else modes.at(PLACES, order)
    # exp(-(1500 pi / 2)^2 8e-4) is zero: the sum is complete.
    decay = np.exp(-np.outer(modes.rates, TIMES))
    expected = np.einsum("pm,mt,mr->ptr", shapes, decay, eigen_integrals(line, given, 1500))
    scale = np.sqrt(TIMES)[None, :, None] if order == SLOPE else 1.0
    np.testing.assert_array_less(np.abs(respond(line, given, places, TIMES).total - expected) * scale, 2e-14)


def test_early_departure_keeps_its_digits() -> None:
    # u - f = t f'' + ..., f = cos(3 x / 2), far from the ends
    times = np.array([1e-14, 1e-10, 1e-7])
    line, places = Line(2.0, 1.0, math.inf, 2.0), Places(np.array([0.5, 1.1]), VALUE)
    departure = respond(line, profiles(EVEN), places, times).departure[:, :, 1]
    expected = np.cos(1.5 * places.low)[:, None] * np.expm1(-2.25 * times)
    np.testing.assert_allclose(departure, expected, rtol=1e-4)


def test_eigen_integrals_of_curved_pieces_are_those_of_fine_quadrature() -> None:
    line, given = Line(2.0, 0.7, 0.4, 9.0), profiles(EVEN)
    modes = modes_of(line, 40)
    nodes, weights = np.polynomial.legendre.leggauss(60)
    at = (EVEN[:-1, None] + 0.1 * (1 + nodes)).ravel()
    measure = np.tile(0.1 * weights, EVEN.size - 1) * line.scale
    expected = (modes.at(at, VALUE) * measure[:, None]).T @ given.at(at) / modes.norm[:, None]
    # Phases up to 40 pi carry a rounding of 1.4e-14.
    np.testing.assert_allclose(eigen_integrals(line, given, 40), expected, rtol=0, atol=2e-14)
