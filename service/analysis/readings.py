"""Readings of results with their uncertainties, and what a place leaves over of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_triangular

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

    def covariance(self) -> FloatArray:
        """Of the readings, shape (n_readings, n_readings)."""
        covariance = np.diag(self.standard_uncertainties**2)
        for shared in self.shared:
            covariance[np.ix_(shared.members, shared.members)] += shared.standard_uncertainty**2
        return covariance


class Weighing:
    """What a place leaves over of readings and prior values, in uncorrelated standard uncertainties.

    Rows are the readings, less each other as their covariance V = T T^T demands, T^-1 (f - y), and then the unknowns of
    which something is known beforehand.
    """

    def __init__(self, readings: Readings, unknowns: Sequence[Unknown], coordinates: Coordinates) -> None:
        self.readings = readings
        self.covariance = readings.covariance()
        self._triangle = np.linalg.cholesky(self.covariance)
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
        return solve_triangular(self._triangle, columns, lower=True)

    def follow(self, gain: FloatArray) -> FloatArray:
        """How something follows the readings themselves, shape (n, n_readings), from how it follows the rows."""
        return solve_triangular(self._triangle, gain[:, : len(self.readings.values)].T, lower=True, trans="T").T

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
        """About by how much the slopes of the rows are off altogether."""
        return float(np.linalg.norm(look.doubts[self.readings.columns] / np.sqrt(np.diag(self.covariance))[:, None]))
