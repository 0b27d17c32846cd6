"""A line of layers in high-precision arithmetic: the two-point problem in the Laplace domain as one linear system.

In each layer Z = p exp(-q (z - bottom)) + m exp(-q (top - z)) + f / s, q^2 = c s / k, with f what the layer holds at
time zero. Two conditions at each border and one at each end make a system of twice as many equations as there are
layers, which is solved as it stands. Answers in time are its inversion by mpmath's own method.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from tests.core.reference.kernels import ONE, ZERO, Number, arithmetic

# Digits that mpmath's method of Talbot works to.
DIGITS_IN_TIME = 20


@dataclass(frozen=True)
class LayeredLine:
    """Layers from 0 up, each with thickness, conductivity and capacity, and the contacts between them.

    Ends: infinite film if held, 0 if insulated or with a given inflow.
    """

    thickness: Sequence[float]
    conductivity: Sequence[float]
    capacity: Sequence[float]
    contacts: Sequence[float]
    film_low: float
    film_high: float

    def heights(self) -> list[Number]:
        """Heights of all borders, the ends included."""
        heights = [ZERO]
        for thickness in self.thickness:
            heights.append(heights[-1] + arithmetic.mpf(thickness))
        return heights


@dataclass(frozen=True)
class Drive:
    """What drives a line: "low" or "high" for the data of an end, or what each layer holds at time zero."""

    end: str = ""
    held: Sequence[float] = ()


@dataclass(frozen=True)
class Layer:
    """The answer in one layer."""

    bottom: Number
    top: Number
    conductivity: Number
    q: Number
    rest: Number
    p: Number
    m: Number

    def value(self, z: Number) -> Number:
        """Z at a height."""
        return self._up(z) + self._down(z) + self.rest

    def slope(self, z: Number) -> Number:
        """k Z' at a height."""
        return self.conductivity * self.q * (self._down(z) - self._up(z))

    def integral(self, low: Number, high: Number) -> Number:
        """Integral of Z between two heights of the layer."""
        gained = (self._up(low) - self._up(high) + self._down(high) - self._down(low)) / self.q
        return gained + self.rest * (high - low)

    def _up(self, z: Number) -> Number:
        return self.p * arithmetic.exp(-self.q * (z - self.bottom))

    def _down(self, z: Number) -> Number:
        return self.m * arithmetic.exp(-self.q * (self.top - z))


@dataclass(frozen=True)
class Answer:
    """The answer of the whole line at one s. A border belongs to the layer below it."""

    layers: Sequence[Layer]

    def value(self, z: float) -> Number:
        """Z at a height."""
        return self._layer(z).value(arithmetic.mpf(z))

    def slope(self, z: float) -> Number:
        """k Z' at a height."""
        return self._layer(z).slope(arithmetic.mpf(z))

    def integral(self, low: float, high: float) -> Number:
        """Integral of Z between two heights."""
        total = ZERO
        for layer in self.layers:
            start, stop = max(arithmetic.mpf(low), layer.bottom), min(arithmetic.mpf(high), layer.top)
            if start < stop:
                total += layer.integral(start, stop)
        return total

    def _layer(self, z: float) -> Layer:
        return next((layer for layer in self.layers if z <= layer.top), self.layers[-1])


def solve_line(line: LayeredLine, drive: Drive, s: Number) -> Answer:
    """The two-point problem at one s, real or complex."""
    a = arithmetic
    n, heights = len(line.thickness), line.heights()
    k = [a.mpf(value) for value in line.conductivity]
    q = [a.sqrt(a.mpf(line.capacity[j]) * s / k[j]) for j in range(n)]
    rest = [a.mpf(held) / s for held in (drive.held or [0.0] * n)]
    fade = [a.exp(-q[j] * (heights[j + 1] - heights[j])) for j in range(n)]
    matrix, right = a.matrix(2 * n), a.matrix(2 * n, 1)

    def at(j: int, *, top: bool) -> tuple[tuple[Number, Number], tuple[Number, Number]]:
        """What p and m of a layer make of Z and of k Z' on its border."""
        up, down = (fade[j], ONE) if top else (ONE, fade[j])
        return (up, down), (-k[j] * q[j] * up, k[j] * q[j] * down)

    def end(row: int, j: int, film: float, *, top: bool) -> None:
        """outwards k Z' + film (Z - given) = 0, or Z = given, or inwards k Z' = given."""
        value, slope = at(j, top=top)
        sign, given = (1 if top else -1), ONE if drive.end == ("high" if top else "low") else ZERO
        for column in (0, 1):
            if a.isinf(a.mpf(film)):
                matrix[row, 2 * j + column] = value[column]
            else:
                matrix[row, 2 * j + column] = sign * slope[column] + a.mpf(film) * value[column]
        if a.isinf(a.mpf(film)):
            right[row] = given - rest[j]
        else:
            right[row] = (a.mpf(film) if film else ONE) * given - a.mpf(film) * rest[j]

    end(0, 0, line.film_low, top=False)
    for j in range(n - 1):
        (below, flow_below), (above, flow_above) = at(j, top=True), at(j + 1, top=False)
        resistance = 1 / a.mpf(line.contacts[j])
        for column in (0, 1):
            matrix[2 * j + 1, 2 * j + column] = flow_below[column]
            matrix[2 * j + 1, 2 * j + 2 + column] = -flow_above[column]
            # The step upwards over the contact is flow / conductance.
            matrix[2 * j + 2, 2 * j + column] = below[column] + resistance * flow_below[column]
            matrix[2 * j + 2, 2 * j + 2 + column] = -above[column]
        right[2 * j + 2] = rest[j + 1] - rest[j]
    end(2 * n - 1, n - 1, line.film_high, top=True)
    found = a.lu_solve(matrix, right)
    return Answer(
        [Layer(heights[j], heights[j + 1], k[j], q[j], rest[j], found[2 * j], found[2 * j + 1]) for j in range(n)]
    )


def in_time(line: LayeredLine, drive: Drive, read: Callable[[Answer], Sequence[Number]], time: float) -> list[Number]:
    """What is read from the answer at a time after the start, each number by mpmath's inversion of its transform."""
    kept: dict[Number, Sequence[Number]] = {}

    def transform(s: Number, index: int) -> Number:
        if s not in kept:
            kept[s] = read(solve_line(line, drive, s))
        return kept[s][index]

    count = len(read(solve_line(line, drive, ONE)))
    return [
        arithmetic.invertlaplace(lambda s, i=index: transform(s, i), time, method="talbot", degree=2 * DIGITS_IN_TIME)
        for index in range(count)
    ]
