"""The highest and the lowest potential in a box of the body: a layer, a rectangle of a face, a part of the inside."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core import extremes
from service.core.errors import OutsideBody
from service.core.extremes import Place
from service.core.faces import AXES
from service.core.field import KeepGoing, Setting
from service.core.problem import Body

FloatArray = NDArray[np.float64]
Corner = tuple[float, float, float]


def highest(
    setting: Setting,
    low: Sequence[float],
    high: Sequence[float],
    tolerance: float,
    keep_going: KeepGoing | None,
    sign: float = 1.0,
) -> Place:
    """The highest (for sign -1 the lowest) potential in a closed box. Raises OutsideBody."""
    low, high = checked_box(setting.body, low, high)
    axes = [extremes.places_within(setting, axis, low[axis], high[axis]) for axis in range(3)]
    return extremes.highest_among(setting, axes, tolerance, keep_going, sign)


def checked_box(body: Body, low: Sequence[float], high: Sequence[float]) -> tuple[Corner, Corner]:
    """The corners of a box in the closed body; one that begins on an interface, and is not flat, begins above it."""
    for axis, (begin, end) in enumerate(zip(low, high, strict=True)):
        if not body.begins[axis] <= begin <= end <= body.size[axis] or (math.isinf(begin) and begin == end):
            raise OutsideBody(
                f"The box reaches from {begin:g} to {end:g} along {AXES[axis]}; it has to lie between "
                f"{body.begins[axis]:g} and {body.size[axis]:g}.",
                ("box", AXES[axis]),
            )
    bottom = low[2]
    if bottom < high[2] and bottom in body.interfaces:
        bottom = math.nextafter(bottom, math.inf)
    return (low[0], low[1], bottom), (high[0], high[1], high[2])
