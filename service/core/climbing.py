"""Peaks of a field, followed from the places of a grid on finer and finer ones."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import maximum_filter

from service.core import field
from service.core.endless import neighbourhood
from service.core.field import Grid, Setting
from service.core.peak_model import Index, between, line_through
from service.core.problem import Body

FloatArray = NDArray[np.float64]

# Starts that are followed from each grid at the most, and peaks that are looked at more closely to choose those.
STARTS, MOST_PEAKS = 8, 128

# Accuracy of the first grid, in parts of the span; of a finer one, in parts of what may lie between its places.
FIRST_ACCURACY = 1e-6
ACCURACY_OF_GAP = 1e-3

# Places of each finer grid in parts of its half width, and by how much the next one is narrower.
FINER = np.linspace(-1.0, 1.0, 5)
NARROWING = 4.0

# How many times the rise of the model of a small grid above its highest value is allowed for a peak between.
PEAK_SAFETY = 4.0

# A grid whose highest value is on its edge is moved there, wider each time, so often before it is made finer all the
# same.
MOST_MOVES, WIDENING = 8, 1.5

# A variation along an axis is none below this part of the tolerance.
ALIKE = 1e-3

# Places nearer to each other than this part of their coordinates are the two sides of an interface.
TWINS = 1e-13

# A grid narrower than this part of the body ends the search.
SMALLEST_WIDTH = 1e-9


@dataclass(frozen=True)
class Place:
    """An extreme of the field.

    position: infinite along an axis far along which the value is only approached. value: of the potential there.
    error_bound: of that value, and of how far the peak it belongs to may exceed it.
    where: "inside", or the faces the place is on, such as "face z_low".
    """

    position: tuple[float, float, float]
    value: float
    error_bound: float
    where: str


@dataclass(frozen=True)
class Search:
    """What a search asks of the field.

    tolerance: of the values, and as much again of what lies between the places of the last grid.
    """

    setting: Setting
    tolerance: float
    keep_going: field.KeepGoing | None

    @property
    def accuracy(self) -> float:
        """That of the values on first grids."""
        return max(self.tolerance, FIRST_ACCURACY * self.setting.span)

    def field(self, axes: list[FloatArray], accuracy: float) -> field.Field:
        """The field on the tensor product of three axes."""
        grid = Grid(axes[0], axes[1], axes[2])
        return field.on_grid(self.setting, grid, tolerance=accuracy, with_flux=False, keep_going=self.keep_going)


@dataclass(frozen=True)
class Start:
    """A place to climb from. value, slack: signed, and by how much the peak may exceed it. widths: half widths of the
    first grid around it. limits: where the climb has to stay, for each axis.
    """

    place: tuple[float, float, float]
    value: float
    slack: float
    widths: tuple[float, float, float]
    limits: tuple[tuple[float, float], ...]


def from_grid(search: Search, axes: list[FloatArray], values: FloatArray, sign: float) -> list[Start]:
    """The highest peaks of a grid. Those that its accuracy cannot tell apart are told apart first."""
    limits = tuple((float(axis[0]), float(axis[-1])) for axis in axes)
    peaks = _peaks(values, 2 * search.accuracy)
    places = np.array([[axis[index] for axis, index in zip(axes, at, strict=True)] for at in peaks])
    exact = sign * field.at_points(search.setting, places, tolerance=search.tolerance, with_flux=False).potential
    starts = []
    order = np.argsort(-exact, kind="stable")
    for number in order[~_beside_higher(np.array(peaks), exact, 2 * search.tolerance)[order]][:STARTS]:
        at, place = peaks[number], places[number]
        x, y, z = (
            max(float(axis[min(index + 1, axis.size - 1)]) - here, here - float(axis[max(index - 1, 0)]))
            for axis, index, here in zip(axes, at, place, strict=True)
        )
        slack = 2 * _steps(axes, values, at)
        start = (float(place[0]), float(place[1]), float(place[2]))
        starts.append(Start(start, float(exact[number]), slack, (x, y, z), limits))
    return starts


def _beside_higher(peaks: NDArray[np.intp], exact: FloatArray, alike: float) -> NDArray[np.bool_]:
    """Which peaks turn out to have a neighbour among them that is higher. peaks: shape (n, 3)."""
    beside = (np.abs(peaks[:, None] - peaks) <= 1).all(axis=2)
    return np.asarray((beside & (exact > exact[:, None] + alike)).any(axis=1))


def climb(search: Search, start: Start, sign: float) -> Place:
    """Follow one peak on finer and finer grids until what lies between their places is below the tolerance."""
    body, accuracy = search.setting.body, search.accuracy
    place, widths, limits = list(start.place), list(start.widths), _within_layer(body, start)
    smallest = SMALLEST_WIDTH * max(_reach(search.setting, axis) for axis in range(3))
    moves = 0
    while True:
        local = [_around(at, width, *limit) for at, width, limit in zip(place, widths, limits, strict=True)]
        answer = search.field(local, accuracy)
        values = sign * answer.potential
        top = _top(local, values, place, answer.potential_bound)
        model = between(local, values, top, limits, ALIKE * search.tolerance)
        gap = PEAK_SAFETY * model.rise + float(values.max() - values[top])
        found = tuple(float(axis[index]) for axis, index in zip(local, top, strict=True))
        if model.goes_on and moves < MOST_MOVES:
            place, widths, moves = list(found), [WIDENING * width for width in widths], moves + 1
            continue
        done = (gap <= search.tolerance and not model.goes_on) or max(widths) <= smallest
        if done and accuracy <= search.tolerance:
            at = (found[0], found[1], found[2])
            return Place(at, sign * float(values[top]), answer.potential_bound + gap, name_of_place(body, at))
        accuracy = search.tolerance if done else max(search.tolerance, ACCURACY_OF_GAP * gap)
        place = list(found) if done else model.place
        widths = widths if done else [width / NARROWING for width in widths]


def _around(at: float, width: float, low: float, high: float) -> FloatArray:
    """Places around one along an axis, or on the inner side of an end."""
    if at in (low, high):
        steps = 0.5 * width * (FINER - FINER[0])
        return np.unique(np.clip(at + (steps if at == low else -steps), low, high))
    return np.unique(np.clip(at + width * FINER, low, high))


def _top(local: list[FloatArray], values: FloatArray, middle: list[float], bound: float) -> Index:
    """The highest value of a grid; that in its middle where the bound of the values cannot tell it from that."""
    at = [int(np.argmin(np.abs(axis - place))) for axis, place in zip(local, middle, strict=True)]
    if values.max() - values[at[0], at[1], at[2]] > bound:
        at = [int(index) for index in np.unravel_index(int(values.argmax()), values.shape)]
    return at[0], at[1], at[2]


def _within_layer(body: Body, start: Start) -> tuple[tuple[float, float], ...]:
    """Where a climb has to stay: in the layer it starts in, at whose ends the field steps or turns."""
    *across, (low, high) = start.limits
    if body.layers and low < high:
        borders = np.array([low, *(z for z in body.interfaces if low < z < high), high])
        layer = int(np.clip(np.searchsorted(borders, start.place[2]), 1, borders.size - 1))
        # A border belongs to the layer below it.
        low = low if layer == 1 else math.nextafter(float(borders[layer - 1]), math.inf)
        high = float(borders[layer])
    return (*across, (low, high))


def _peaks(values: FloatArray, alike: float) -> list[Index]:
    """Places of a first grid that are not below any neighbour by what its accuracy can tell, the highest first."""
    rounded = np.round(values / alike) * alike if alike > 0 else values
    peaks = np.argwhere(rounded >= maximum_filter(rounded, size=3, mode="nearest"))
    # On a plateau those that look highest, though by less than the accuracy.
    order = np.argsort([-values[tuple(peak)] for peak in peaks], kind="stable")
    return [(int(i), int(j), int(k)) for i, j, k in peaks[order[:MOST_PEAKS]]]


def _steps(axes: list[FloatArray], values: FloatArray, at: Index) -> float:
    """Sum over the axes of the smaller step from a peak to its neighbours, which a smooth peak cannot exceed.

    The other side of an interface is no neighbour.
    """
    total = 0.0
    for axis, places in enumerate(axes):
        line, here = line_through(values, at, axis), at[axis]
        twin = TWINS * float(np.abs(places).max())
        near = [
            abs(float(line[here] - line[other]))
            for other in (here - 1, here + 1)
            if 0 <= other < line.size and abs(places[other] - places[here]) > twin
        ]
        total += min(near, default=0.0)
    return total


def _reach(setting: Setting, axis: int) -> float:
    """How far the neighbourhood of the data reaches along an axis."""
    low, high = neighbourhood(setting.lines, axis)
    return high - low


def name_of_place(body: Body, place: tuple[float, float, float]) -> str:
    """The faces a place is on, such as "face z_low", or "inside"."""
    names = []
    for axis, value in enumerate(place):
        face = body.face_at(axis, value)
        if face is not None:
            names.append(face)
    return "face " + "/".join(names) if names else "inside"
