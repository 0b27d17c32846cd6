"""A heated face in closed form: a block with a map of inflow on top, insulated sides and a cold bottom.

u(x, y, z) = sum over m, n of q_mn / k cos(m pi x / a) cos(n pi y / b) sinh(g (d - z)) / (g cosh(g d)) with
g^2 = (m pi / a)^2 + (n pi / b)^2 (separation of variables; d - z in place of the fraction for m = n = 0).
"""

from __future__ import annotations

from functools import cache

import numpy as np

from service.analysis.evaluations import Evaluations, FloatArray

SIZES = (40.0, 60.0)
DEPTH = 30.0
TERMS = 30

FIRST, SECOND = np.linspace(0, SIZES[0], 6), np.linspace(0, SIZES[1], 7)


@cache
def responses(probe_depth: float, per_side: int, upto: float = 1.0) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Rise at probes per unit of each entry of a map at FIRST and SECOND with conductivity 1, and the probes' places.

    per_side: probes along each axis. upto: part of the first axis that has probes.
    """
    at_first = np.linspace(0.1, 0.9 * upto, per_side) * SIZES[0]
    at_second = np.linspace(0.1, 0.9, per_side) * SIZES[1]
    x, y = (axis.ravel() for axis in np.meshgrid(at_first, at_second, indexing="ij"))
    m = np.arange(TERMS)
    waves = np.hypot(*np.meshgrid(np.pi * m / SIZES[0], np.pi * m / SIZES[1], indexing="ij"))
    waves[0, 0] = 1.0
    decay = np.sinh(waves * (DEPTH - probe_depth)) / (waves * np.cosh(waves * DEPTH))
    decay[0, 0] = DEPTH - probe_depth
    hats = [_cosines_of_hats(axis, size) for axis, size in ((FIRST, SIZES[0]), (SECOND, SIZES[1]))]
    at = [np.cos(np.pi * np.outer(place, m) / size) for place, size in ((x, SIZES[0]), (y, SIZES[1]))]
    table = np.einsum("pm,mn,pn,im,jn->pij", at[0], decay, at[1], hats[0], hats[1], optimize=True)
    return table.reshape(len(x), -1), x, y


def _cosines_of_hats(axis: FloatArray, size: float) -> FloatArray:
    """Cosine coefficients of the functions that are 1 at one place, 0 at all others and linear between."""
    fine = np.linspace(0, size, 1201)
    hats = np.array([np.interp(fine, axis, one) for one in np.eye(len(axis))])
    waves = np.cos(np.pi * np.outer(np.arange(TERMS), fine) / size)
    products = np.trapezoid(hats[:, None] * waves, fine, axis=2)
    return products * np.where(np.arange(TERMS) == 0, 1, 2) / size


class Counted:
    """An `Evaluate` of a function of one case, which counts its waves and cases."""

    def __init__(self, function, relative_error: float = 1e-12) -> None:  # type: ignore[no-untyped-def]
        self._function = function
        self._relative_error = relative_error
        self.waves: list[int] = []

    @property
    def cases(self) -> int:
        return sum(self.waves)

    def __call__(self, cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        self.waves.append(len(cases))
        values = np.array([self._function(case) for case in cases])
        return Evaluations(values, self._relative_error * np.abs(values))
