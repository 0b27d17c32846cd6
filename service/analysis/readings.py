"""Readings of results with their uncertainties, and what a place leaves over of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.analysis.evaluations import FloatArray
from service.analysis.fitting import Rows
from service.analysis.looks import Look
from service.analysis.unknowns import Coordinates, Unknown

IntArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Shared:
    """An error some readings have in common, as by one reference: its standard uncertainty. members: places, (n,)."""

    members: IntArray
    standard_uncertainty: float


@dataclass(frozen=True, eq=False)
class Readings:
    """What was read.

    columns: which result each reading is of, shape (n_readings,); one result may be read several times. values,
    standard_uncertainties: shape (n_readings,), in the unit of the result, the latter > 0.
    """

    columns: IntArray
    values: FloatArray
    standard_uncertainties: FloatArray
    shared: tuple[Shared, ...] = ()

    def variances(self) -> FloatArray:
        """Of the readings, what they share included, shape (n_readings,)."""
        variances = self.standard_uncertainties**2
        for shared in self.shared:
            variances[shared.members] += shared.standard_uncertainty**2
        return variances


# What is left of numbers that cancel, in parts of them.
ROUNDING = 1e-14


class Root:
    """T of the covariance V = T T^T of readings, as a product that shared errors of any size leave exact.

    With the own uncertainties D, V = D (1 + b_1 b_1^T + ...) D, and each error in turn gives a symmetric factor
    (1 + b b^T)^(1/2): along b it is sqrt(1 + b^2) and 1 across. The covariance itself is never formed: in it the own
    part is lost beside a large shared one.
    """

    def __init__(self, readings: Readings) -> None:
        self._own = readings.standard_uncertainties
        self._factors: list[tuple[FloatArray, float]] = []
        # The largest first: what rounds of it does not count beside what it takes away.
        for along in sorted(map(self._weighed, readings.shared), key=np.linalg.norm, reverse=True):
            sizes = np.abs(along)
            for direction, size in self._factors:
                sizes = np.maximum(sizes, np.abs(direction * (direction @ along)))
                along = _lessened(along, direction, size, ROUNDING * sizes)
            length = float(np.linalg.norm(along))
            if length > 0:
                self._factors.append((along / length, float(np.hypot(1.0, length))))

    def _weighed(self, shared: Shared) -> FloatArray:
        along = np.zeros(len(self._own))
        along[shared.members] = shared.standard_uncertainty / self._own[shared.members]
        return along

    def whiten(self, columns: FloatArray) -> FloatArray:
        """T^-1 times columns, shape (n_readings, ...)."""
        found = (columns.T / self._own).T
        for direction, size in self._factors:
            found = _lessened(found, direction, size)
        return found

    def whiten_back(self, columns: FloatArray) -> FloatArray:
        """T^-T times columns, shape (n_readings, ...)."""
        found = columns
        for direction, size in reversed(self._factors):
            found = _lessened(found, direction, size)
        return (found.T / self._own).T


def _lessened(
    columns: FloatArray, direction: FloatArray, size: float, rounding: FloatArray | float = 0.0
) -> FloatArray:
    """Columns with what lies along a unit vector divided by size. rounding: what counts as nothing left across it."""
    part = direction @ columns
    along = np.multiply.outer(direction, part)
    across = columns - along
    return np.where(np.abs(across) > rounding, across, 0.0) + along / size


class Weighing:
    """What a place leaves over of readings and prior values, in uncorrelated standard uncertainties.

    Rows are the readings, less each other as their covariance V = T T^T demands, T^-1 (f - y), and then the unknowns of
    which something is known beforehand.
    """

    def __init__(self, readings: Readings, unknowns: Sequence[Unknown], coordinates: Coordinates) -> None:
        self.readings = readings
        self._root = Root(readings)
        self._coordinates = coordinates
        known = [(k, unknown.prior) for k, unknown in enumerate(unknowns) if unknown.prior is not None]
        self._places = np.array([k for k, _ in known], dtype=np.intp)
        self._values = np.array([prior.value for _, prior in known])
        self._spreads = np.array([prior.standard_uncertainty for _, prior in known])

    @property
    def count(self) -> int:
        """How many rows there are."""
        return len(self.readings.values) + len(self._places)

    def whiten(self, columns: FloatArray) -> FloatArray:
        """T^-1 times columns, shape (n_readings, ...)."""
        return self._root.whiten(columns)

    def follow(self, gain: FloatArray) -> FloatArray:
        """How something follows the readings themselves, shape (n, n_readings), from how it follows the rows."""
        return self._root.whiten_back(gain[:, : len(self.readings.values)].T).T

    def rows(self, look: Look) -> Rows:
        """What is left over, shape (n_rows,), and its slopes, shape (n_rows, size)."""
        columns = self.readings.columns
        left = self.whiten(look.values[columns] - self.readings.values)
        slopes = self.whiten(look.slopes[columns])
        numbers = self._coordinates.numbers(look.place)[self._places]
        rates = np.zeros((len(self._places), len(look.place)))
        rates[np.arange(len(self._places)), self._places] = self._coordinates.rates(look.place)[self._places]
        return (
            np.concatenate((left, (numbers - self._values) / self._spreads)),
            np.vstack((slopes, rates / self._spreads[:, None])),
        )

    def doubts(self, look: Look) -> float:
        """About by how much the slopes of the rows are off altogether, at most; what is shared lessens it."""
        own = self.readings.standard_uncertainties
        return float(np.linalg.norm(look.doubts[self.readings.columns] / own[:, None]))
