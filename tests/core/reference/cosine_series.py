"""A stack with insulated sides, inflow pads on top and a film below, by its double cosine series.

In layer i a mode goes as cosh and sinh of gamma_i z, gamma_i^2 = (kx alpha^2 + ky beta^2) / kz, and what it meets on
its way down is an impedance that is passed on from layer to layer, as in a ladder of lines. Here the conductivities in
plane may differ from layer to layer as they like. On the top the terms fall only as the square of their number.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
Pad = tuple[float, float, float, float]


@dataclass(frozen=True)
class CosineSeries:
    """layers: (thickness, (kx, ky, kz), contact below) from the film up. film: its coefficient, ambient zero."""

    section: tuple[float, float]
    layers: Sequence[tuple[float, tuple[float, float, float], float]]
    film: float
    terms: int

    def potential(self, pads: Sequence[tuple[Pad, float]], places: FloatArray) -> FloatArray:
        """Potential at places, shape (n, 3), for inflows per area on pads of the top; on a contact from above."""
        given = sum(density * self._strength(pad) for pad, density in pads)
        found = []
        for x, y, z in places:
            shape = np.outer(np.cos(self._waves(0) * x), np.cos(self._waves(1) * y))
            found.append(float((given * shape * self._response(z)).sum()))
        return np.array(found)

    def mean(self, pads: Sequence[tuple[Pad, float]], over: Pad) -> float:
        """Mean over a rectangle of the top."""
        given = sum(density * self._strength(pad) for pad, density in pads)
        area = (over[1] - over[0]) * (over[3] - over[2])
        height = math.fsum(layer[0] for layer in self.layers)
        return float((given * self._integral(over) * self._response(height)).sum()) / area

    def _waves(self, axis: int) -> FloatArray:
        return np.arange(float(self.terms)) * (math.pi / self.section[axis])

    def _integral(self, pad: Pad) -> FloatArray:
        parts = []
        for axis, (low, high) in enumerate((pad[:2], pad[2:])):
            waves = self._waves(axis)[1:]
            parts.append(np.concatenate([[high - low], (np.sin(waves * high) - np.sin(waves * low)) / waves]))
        return np.outer(*parts)

    def _strength(self, pad: Pad) -> FloatArray:
        """Inflow of each mode for a unit density on a pad."""
        twice = np.where(np.arange(self.terms) == 0, 1.0, 2.0)
        return self._integral(pad) * np.outer(twice, twice) / (self.section[0] * self.section[1])

    def _response(self, z: float) -> FloatArray:
        """The field of each mode at a height for a unit of its inflow on top."""
        alpha, beta = self._waves(0)[:, None], self._waves(1)[None, :]
        impedance = np.full((self.terms, self.terms), 1 / self.film)
        bottom = 0.0
        answer = np.zeros_like(impedance)
        for thickness, (kx, ky, kz), contact in self.layers:
            impedance = impedance + 1 / contact
            gamma = np.sqrt((kx * alpha**2 + ky * beta**2) / kz)
            # Field and flow down over those at the bottom of the layer, both times exp(-gamma height).
            up = min(max(z - bottom, 0.0), thickness)
            here = _field(impedance, gamma, kz, up)
            top, flow = _field(impedance, gamma, kz, thickness), _flow(impedance, gamma, kz, thickness)
            if z >= bottom:
                answer = here / flow * np.exp(-gamma * (thickness - up))
            else:
                answer = answer / flow * np.exp(-gamma * thickness)
            impedance = top / flow
            bottom += thickness
        return answer


def _field(impedance: FloatArray, gamma: FloatArray, kz: float, height: float) -> FloatArray:
    fade = np.exp(-2 * gamma * height)
    sinh = np.where(gamma > 0, (1 - fade) / (2 * np.where(gamma > 0, gamma, 1.0)), height)
    return 0.5 * (1 + fade) * impedance + sinh / kz


def _flow(impedance: FloatArray, gamma: FloatArray, kz: float, height: float) -> FloatArray:
    fade = np.exp(-2 * gamma * height)
    return 0.5 * (1 + fade) + impedance * kz * gamma * 0.5 * (1 - fade)
