"""Numbers that are not known, and the coordinates in which they are looked for.

A coordinate runs from 0 to 1 over the range of its unknown, evenly in the number or in its logarithm, so that steps,
singular values and correlations of unlike numbers compare. The entries of a map follow, in parts of their typical size
and without ends.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from service.analysis.evaluations import FloatArray


@dataclass(frozen=True)
class Prior:
    """What is known of a number apart from the readings: a value with its standard uncertainty, in its unit."""

    value: float
    standard_uncertainty: float


@dataclass(frozen=True)
class Unknown:
    """A number to be found between low and high, looked for from start.

    logarithmic: for a number greater than zero of which not even the size is known: it is looked for evenly in its
    logarithm, where its distribution is taken to be normal, so that its interval is one of factors.
    """

    name: str
    low: float
    high: float
    start: float
    logarithmic: bool = False
    prior: Prior | None = None

    def __post_init__(self) -> None:
        if not self.low < self.high or not self.low <= self.start <= self.high:
            raise ValueError(f"{self.name}: low < high and low <= start <= high are wanted.")
        if self.logarithmic and not self.low > 0:
            raise ValueError(f"{self.name}: a logarithm needs low > 0.")


class Coordinates:
    """From numbers, as an `Evaluate` takes them, to coordinates and back.

    entries: how many entries of a map follow the unknowns. typical: their typical size.
    low, high: ends of the coordinates, shape (size,).
    """

    def __init__(self, unknowns: Sequence[Unknown], entries: int = 0, typical: float = 1.0) -> None:
        self.count = len(unknowns)
        self.size = self.count + entries
        self.low = np.concatenate((np.zeros(self.count), np.full(entries, -np.inf)))
        self.high = np.concatenate((np.ones(self.count), np.full(entries, np.inf)))
        self._log = np.array([u.logarithmic for u in unknowns] + [False] * entries, dtype=bool)
        self._offset = np.array([u.low for u in unknowns] + [0.0] * entries)
        wide = [math.log(u.high / u.low) if u.logarithmic else u.high - u.low for u in unknowns]
        # An end of a range is its number to the last digit.
        self._top = np.array([u.high for u in unknowns] + [np.inf] * entries)
        self._wide = np.array(wide + [typical] * entries)
        # A number that keeps one sign is a matter of proportions: its steps are parts of itself.
        self._has_sign = np.array([u.low >= 0 or u.high <= 0 for u in unknowns] + [False] * entries, dtype=bool)

    def numbers(self, places: FloatArray) -> FloatArray:
        """Numbers at places, shape (..., size)."""
        plain = self._offset + self._wide * places
        with np.errstate(over="ignore"):
            found = np.where(self._log, self._offset * np.exp(np.where(self._log, self._wide * places, 0.0)), plain)
        return np.where(places == self.high, self._top, found)

    def places(self, numbers: FloatArray) -> FloatArray:
        """Places of numbers, shape (..., size)."""
        ratio = np.where(self._log, numbers, 1.0) / np.where(self._log, self._offset, 1.0)
        found = np.where(self._log, np.log(ratio), numbers - self._offset) / self._wide
        return np.clip(found, self.low, self.high)

    def rates(self, places: FloatArray) -> FloatArray:
        """Change of each number with its coordinate, shape (..., size)."""
        return np.where(self._log, self.numbers(places), 1.0) * self._wide

    def steps(self, places: FloatArray, part: float) -> FloatArray:
        """Steps of the coordinates that change each number by a part of itself.

        Of its range where it may have either sign, and by no less than a hundredth of that part anyhow, so that a
        number near zero has a step.
        """
        numbers = self.numbers(places)
        share = np.clip(np.abs(numbers) / self._wide, 0.01, 1.0)
        return part * np.where(self._log, 1.0 / self._wide, np.where(self._has_sign, share, 1.0))
