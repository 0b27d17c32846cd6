"""Derivatives of the potential of random bodies hold against differences of values of more than twenty digits."""

from __future__ import annotations

from dataclasses import dataclass, replace

import mpmath
import numpy as np
import pytest

from service.analysis.derivatives import derivatives, first_radii
from service.analysis.evaluations import Evaluations, FloatArray
from service.core import AccuracyNotReached, solve
from tests.core.reference.cases import Case
from tests.core.reference.high_precision import HighPrecision
from tests.core.reference.random_cases import hard_places, random_case

# Step of the central differences, in parts of the number; it leaves about its square.
STEP = 1e-6


@dataclass(frozen=True)
class Variations:
    """A body whose conductivity along x, and all film coefficients by one factor, are varied; read off at a place."""

    case: Case
    place: tuple[float, float, float]

    def with_numbers(self, numbers: FloatArray) -> Case:
        conductivity, films = map(float, numbers)
        return replace(
            self.case,
            conductivity=(conductivity, *self.case.conductivity[1:]),
            walls={
                face: replace(wall, coefficient=wall.coefficient * films) if wall.kind == "R" else wall
                for face, wall in self.case.walls.items()
            },
        )

    def __call__(self, cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        found = np.array([self._value(numbers, accuracy or 1e-9) for numbers in cases])
        return Evaluations(found[:, :1], found[:, 1:])

    def _value(self, numbers: FloatArray, accuracy: float) -> tuple[float, float]:
        solution = solve(self.with_numbers(numbers).body())
        tolerance = accuracy * solution.span
        while True:
            try:
                field = solution.field_at(np.array([self.place]), tolerance=tolerance)
            except AccuracyNotReached as error:
                tolerance = error.bound
            else:
                return float(field.potential[0]), field.potential_bound


@pytest.mark.parametrize("seed", [0, 10, 12, 16])
def test_derivatives_of_random_bodies(seed: int) -> None:
    case = random_case(seed)
    places = list(hard_places(case, seed).values())
    body = Variations(case, places[seed % len(places)])
    nominal = np.array([case.conductivity[0], 1.0])
    found = derivatives(body, nominal, first_radii(nominal, np.ones(2)))
    for number, value in enumerate(nominal):
        ends = np.array([nominal, nominal])
        ends[:, number] = value * (1 - STEP), value * (1 + STEP)
        low, high = (HighPrecision(body.with_numbers(numbers)).potential(body.place) for numbers in ends)
        expected = float((high - low) / (mpmath.mpf(ends[1, number]) - mpmath.mpf(ends[0, number])))
        assert abs(found.first[0, number] - expected) <= found.first_error[0, number] <= 1e-6 * abs(expected)
