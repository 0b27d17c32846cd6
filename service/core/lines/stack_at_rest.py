"""The steady answer of a stack that loses nothing at its ends, to a drive less its mean, counted from its own mean.

    flow' = c (f - m),   Z' = -flow / k,   and across a contact Z falls by flow / conductance

with m the mean of what drives the line. In a layer the flow is a straight line and Z a parabola.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from service.core.lines.line import SLOPE, VALUE, Drive, WallDrive
from service.core.lines.stack import Pieces, StackLine

FloatArray = NDArray[np.float64]


def answer(line: StackLine, drive: Drive, pieces: Pieces, n_places: int) -> FloatArray:
    """The answer at pieces of places, shape (n_places, n_columns). line: divided at the knots of the drive."""
    k, c, thickness = (np.array(values)[:, None] for values in (line.conductivity, line.capacity, line.thickness))
    columns = 1 if isinstance(drive, WallDrive) else drive.n_profiles
    gained = np.zeros((thickness.size, columns)) if isinstance(drive, WallDrive) else line.held_by_layers(drive)
    gained = c * (gained - line.mean(drive))
    # Flow and field at the bottom of each layer, the field counted from the bottom of the first.
    flow, field = np.zeros((thickness.size, columns)), np.zeros((thickness.size, columns))
    flow[0] = 1.0 if isinstance(drive, WallDrive) and not drive.high else 0.0
    for j in range(1, thickness.size):
        below, d = flow[j - 1], thickness[j - 1]
        flow[j] = below + gained[j - 1] * d
        field[j] = field[j - 1] - (below * d + 0.5 * gained[j - 1] * d * d) / k[j - 1]
        contact = line.contacts[j - 1]
        if contact < math.inf:
            field[j] -= flow[j] / contact

    def up_to(j: int, z: float) -> FloatArray:
        """Integral of the field of layer j from its bottom."""
        return np.asarray(field[j] * z - (0.5 * flow[j] * z**2 + gained[j] * z**3 / 6) / k[j])

    whole = np.array([up_to(j, float(d)) for j, d in enumerate(line.thickness)])
    field -= (c * whole).sum(axis=0) / line.whole_capacity
    total = np.zeros((n_places, columns))
    for index, j, z, width in zip(pieces.index, pieces.layer, pieces.below, pieces.width, strict=True):
        if pieces.order == SLOPE:
            total[index] = -(flow[j] + gained[j] * z)
        elif pieces.order == VALUE:
            total[index] = field[j] - (flow[j] * z + 0.5 * gained[j] * z * z) / k[j]
        else:
            total[index] += up_to(j, z + width) - up_to(j, z)
    return total
