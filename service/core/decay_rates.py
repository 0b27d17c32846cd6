"""How fast a disturbance decays with the distance from a face, far from it.

What is left there is the slowest mode of the section, exp(-gamma s), with the decay rates of the modes from the
eigenvalues of the two lines across (Carslaw and Jaeger 1959, chapter VI): for a square bar of side a whose sides are
held the first is pi sqrt(2) / a.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from service.core.faces import axes_along
from service.core.field import Setting
from service.core.lines.modes import modes_of


@dataclass(frozen=True)
class DecayRate:
    """A mode of the section: its numbers along the two axes across, counted from 1, and its rate gamma per length."""

    numbers: tuple[int, int]
    rate: float

    @property
    def length(self) -> float | None:
        """1 / gamma; None of a mode that does not decay."""
        return 1 / self.rate if self.rate > 0 else None


def decay_rates(setting: Setting, axis: int, count: int) -> tuple[DecayRate, ...]:
    """The slowest decay rates along an axis per length of it; none where the section is endless or cut by layers."""
    first, second = axes_along(axis)
    across = [setting.lines[first], setting.lines[second]]
    if setting.body.layers or any(line.is_endless for line in across):
        return ()
    squares = [modes_of(line, count).rates for line in across]
    together = squares[0][:, None] + squares[1]
    found = []
    for index in np.argsort(together, axis=None, kind="stable")[:count]:
        i, j = np.unravel_index(int(index), together.shape)
        rate = math.sqrt(float(together[i, j])) * setting.lines[axis].scale
        found.append(DecayRate((int(i) + 1, int(j) + 1), rate))
    return tuple(found)
