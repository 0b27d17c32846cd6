"""What may lie between the places of a small grid around its highest value.

Along axes with places on both sides of that value a quadratic stands for the field, with its slopes wider by what the
third derivative does to differences; at an end of the region a parabola. Where there is no such model, as on a saddle,
a concave field cannot rise by more than its smaller step.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
Index = tuple[int, int, int]


@dataclass(frozen=True)
class Between:
    """What may lie between.

    place: where the model has its peak. rise: by how much the field may exceed the highest value, about.
    goes_on: whether that value is on the edge of the grid and the region goes on there.
    """

    place: list[float]
    rise: float
    goes_on: bool


def between(
    places: Sequence[FloatArray], values: FloatArray, top: Index, limits: Sequence[tuple[float, float]], alike: float
) -> Between:
    """The model of a grid with that highest value. alike: a variation along an axis that is none."""
    place = [float(axis[index]) for axis, index in zip(places, top, strict=True)]
    rise, inner, goes_on = 0.0, [], False
    for axis, (x, index, limit) in enumerate(zip(places, top, limits, strict=True)):
        line = line_through(values, top, axis)
        if np.ptp(line) <= alike:
            rise += float(line.max() - line[index])
        elif 0 < index < x.size - 1 and x.size > 3:
            inner.append(axis)
        else:
            is_at_limit = place[axis] in limit
            goes_on |= not is_at_limit and index in (0, x.size - 1)
            place[axis], more = _at_end(x, line, index) if is_at_limit else (place[axis], _smaller_step(line, index))
            rise += more
    if inner:
        peak, more = _quadratic(places, values, top, inner)
        for axis, at in zip(inner, peak, strict=True):
            place[axis] = at
        rise += more
    return Between(place, rise, goes_on)


def line_through(values: FloatArray, at: Index, axis: int) -> FloatArray:
    """Values along an axis through a place of a grid."""
    first, second = (at[other] for other in range(3) if other != axis)
    return np.asarray(np.moveaxis(values, axis, 0)[:, first, second])


def _smaller_step(line: FloatArray, here: int) -> float:
    """The smaller of the steps from a value to its neighbours along a line."""
    return float(min(abs(line[here] - line[other]) for other in (here - 1, here + 1) if 0 <= other < line.size))


def _at_end(x: FloatArray, line: FloatArray, index: int) -> tuple[float, float]:
    """Where a parabola from the highest value at an end of a line has its top, and how far above that value."""
    if x.size < 3 or 0 < index < x.size - 1:
        return float(x[index]), _smaller_step(line, index)
    way = 1 if index == 0 else -1
    t, v = np.abs(x - x[index])[::way], line[::way]
    first, second = (v[1] - v[0]) / t[1], (v[2] - v[1]) / (t[2] - t[1])
    bend = (second - first) / t[2]
    third = abs(_third(t[:4], v[:4])) if x.size > 3 else abs(bend) / t[2]
    slope, off = float(first - bend * t[1]), float(third * t[1] * t[2])
    if slope + off <= 0.0:
        return float(x[index]), 0.0
    if bend >= 0.0:
        return float(x[index]), _smaller_step(line, index)
    step = min(max(slope, 0.0) / (-2.0 * bend), t[1])
    return float(x[index] + way * step), (slope + off) ** 2 / (-4.0 * float(bend))


def _third(x: FloatArray, y: FloatArray) -> float:
    """The divided difference of four places, a sixth of the third derivative."""
    while y.size > 1:
        y = np.diff(y) / (x[x.size - y.size + 1 :] - x[: y.size - 1])
    return float(y[0])


def _quadratic(
    places: Sequence[FloatArray], values: FloatArray, top: Index, axes: Sequence[int]
) -> tuple[list[float], float]:
    """Where the quadratic along some axes has its peak, and how far above the highest value that may be."""
    lines = [line_through(values, top, axis) for axis in axes]
    here = np.array([places[axis][top[axis]] for axis in axes])
    steps = np.array([np.diff(places[axis])[top[axis] - 1 : top[axis] + 1] for axis in axes])
    slope, off = np.zeros(len(axes)), np.zeros(len(axes))
    bend = np.zeros((len(axes), len(axes)))
    for number, (axis, line, (below, above)) in enumerate(zip(axes, lines, steps, strict=True)):
        index, x = top[axis], places[axis]
        left, right = (line[index] - line[index - 1]) / below, (line[index + 1] - line[index]) / above
        slope[number] = (left * above + right * below) / (below + above)
        bend[number, number] = 2.0 * (right - left) / (below + above)
        fours = [slice(start, start + 4) for start in (index - 2, index - 1) if start >= 0 and start + 4 <= x.size]
        off[number] = below * above * max(abs(_third(x[four], line[four])) for four in fours)
    for one in range(len(axes)):
        for other in range(one):
            bend[one, other] = bend[other, one] = _twist(places, values, top, axes[one], axes[other])
    # In units of the larger step along each axis.
    unit = steps.max(axis=1)
    slope, off, bend = slope * unit, off * unit, bend * unit * unit[:, None]
    smaller = sum(_smaller_step(line, top[axis]) for axis, line in zip(axes, lines, strict=True))
    if np.linalg.eigvalsh(bend).max() >= 0.0:
        return here.tolist(), smaller
    inverse = np.linalg.inv(-bend)
    move, most = inverse @ slope, np.abs(slope) + off
    rise = 0.5 * float(most @ np.abs(inverse) @ most)
    if np.abs(move).max() > 1.0:
        rise = max(rise, smaller)
    return (here + np.clip(move, -1.0, 1.0) * unit).tolist(), rise


def _twist(places: Sequence[FloatArray], values: FloatArray, top: Index, one: int, other: int) -> float:
    """The mixed second derivative at a place of a grid, from the four corners around it."""
    corners = np.zeros((2, 2))
    for i in (0, 1):
        for j in (0, 1):
            at = list(top)
            at[one] += 2 * i - 1
            at[other] += 2 * j - 1
            corners[i, j] = values[at[0], at[1], at[2]]
    widths = [places[axis][top[axis] + 1] - places[axis][top[axis] - 1] for axis in (one, other)]
    return float((corners[1, 1] - corners[1, 0] - corners[0, 1] + corners[0, 0]) / (widths[0] * widths[1]))
