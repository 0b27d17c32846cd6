"""A closed box of the body: a layer, a rectangle of a face, a part of the inside, or all of it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from service.core.errors import OutsideBody
from service.core.faces import AXES, Face, axes_along, axis_of
from service.core.maps import Rectangle
from service.core.problem import Body

Corner = tuple[float, float, float]


@dataclass(frozen=True)
class Region:
    """Opposite corners of it, infinite where it goes on along an endless axis; alike along an axis it is flat along."""

    low: Corner
    high: Corner

    @classmethod
    def whole(cls, body: Body) -> Region:
        """The closed body."""
        return cls(body.begins, body.size)

    @classmethod
    def between(cls, body: Body, low: Sequence[float], high: Sequence[float]) -> Region:
        """The box between two corners. One that begins on an interface, and is not flat, begins above it.

        Raises OutsideBody for one that is not in the body.
        """
        for axis, (begin, end) in enumerate(zip(low, high, strict=True)):
            if not body.begins[axis] <= begin <= end <= body.size[axis] or (begin == end and math.isinf(begin)):
                raise OutsideBody(
                    f"The box reaches from {begin:g} to {end:g} along {AXES[axis]}; it has to lie between "
                    f"{body.begins[axis]:g} and {body.size[axis]:g}.",
                    ("box", AXES[axis]),
                )
        bottom = low[2]
        if bottom < high[2] and bottom in body.interfaces:
            bottom = math.nextafter(bottom, math.inf)
        return cls((low[0], low[1], bottom), (high[0], high[1], high[2]))

    @classmethod
    def on_face(cls, body: Body, face: Face, where: Rectangle) -> Region:
        """A rectangle of a face."""
        low, high = [body.end_of(face)] * 3, [body.end_of(face)] * 3
        first, second = axes_along(face)
        low[first], high[first], low[second], high[second] = where.p_low, where.p_high, where.q_low, where.q_high
        return cls((low[0], low[1], low[2]), (high[0], high[1], high[2]))

    def flattened(self, axis: int, place: float) -> Region:
        """Its section at a place of an axis."""
        low, high = list(self.low), list(self.high)
        low[axis] = high[axis] = place
        return Region((low[0], low[1], low[2]), (high[0], high[1], high[2]))

    def section(self, axis: int) -> Rectangle:
        """Its section square to an axis."""
        (p_low, p_high), (q_low, q_high) = (self.along(other) for other in axes_along(axis))
        return Rectangle(p_low, p_high, q_low, q_high)

    def lies_on(self, body: Body, face: Face) -> bool:
        """Whether all of it is on a face."""
        return self.along(axis_of(face)) == (body.end_of(face), body.end_of(face))

    def along(self, axis: int) -> tuple[float, float]:
        """From where to where it reaches along an axis."""
        return self.low[axis], self.high[axis]

    def touches(self, axis: int, place: float) -> bool:
        """Whether a plane square to an axis has a part of it."""
        return self.low[axis] <= place <= self.high[axis]

    @property
    def is_flat(self) -> bool:
        """Whether it has no extent along some axis."""
        return any(low == high for low, high in zip(self.low, self.high, strict=True))

    def is_whole(self, body: Body, axis: int) -> bool:
        """Whether it reaches from end to end of the body along an axis."""
        return self.along(axis) == (body.begins[axis], body.size[axis])
