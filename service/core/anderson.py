"""Mixing of the last steps of a fixed-point iteration, which shortens it (Anderson, J. ACM 12, 1965)."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

# Steps that are mixed.
MIXED = 5

# How far a mixed step may lead, in steps that are not mixed.
FARTHEST = 10.0


class Mixing:
    """Mixes the last steps of a fixed-point iteration so that the change left is least."""

    def __init__(self) -> None:
        self._assumed: list[FloatArray] = []
        self._change: list[FloatArray] = []

    def forget(self) -> None:
        """Begin anew, as after a change of the map that is iterated."""
        self._assumed, self._change = [], []

    def next(self, assumed: FloatArray, found: FloatArray) -> FloatArray:
        """What to assume next, where `assumed` led to `found`."""
        change = found - assumed
        if self._change and np.abs(change).max() > 2 * np.abs(self._change[-1]).max():
            self.forget()
        self._assumed, self._change = [*self._assumed[-MIXED:], assumed], [*self._change[-MIXED:], change]
        if len(self._change) == 1:
            return found
        changes, steps = np.diff(self._change, axis=0).T, np.diff(self._assumed, axis=0).T
        shares = np.linalg.lstsq(changes, change, rcond=1e-10)[0]
        mixed = found - (steps + changes) @ shares
        # Steps that hardly differ are not drawn out to far away.
        return np.asarray(mixed if np.abs(mixed - found).max() <= FARTHEST * np.abs(change).max() else found)
