"""From where to where a body reaches along an axis, and the coordinates a client names there."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class AxisExtent:
    """The places of one axis: from 0 to a length, from 0 without end, or without any end.

    low, high: NaN where the size could not be read. interfaces: heights of the interfaces of a stack.
    rounding: how far a height added up from thicknesses may be from the same height written in decimal.
    """

    low: float
    high: float
    interfaces: tuple[float, ...] = ()
    rounding: float = 0.0

    @classmethod
    def of_stack(cls, thicknesses: Sequence[float]) -> AxisExtent:
        """The z axis of a stack, which begins at 0."""
        *interfaces, top = (math.fsum(thicknesses[:count]) for count in range(1, len(thicknesses) + 1))
        # Each thickness was rounded when it was read, and so was the height.
        return cls(0.0, top, tuple(interfaces), (len(thicknesses) + 2) * float(np.spacing(top)))

    @property
    def is_infinite(self) -> bool:
        """Whether the body has no end at all along the axis."""
        return math.isinf(self.low)

    def settle(self, place: float) -> float:
        """A coordinate; the height of an interface or of the top itself where it is that height but for rounding."""
        if self.rounding and math.isfinite(place):
            nearest = min((*self.interfaces, self.high), key=lambda height: abs(height - place))
            if abs(nearest - place) <= self.rounding:
                return nearest
        return place


Extents = tuple[AxisExtent, AxisExtent, AxisExtent]
