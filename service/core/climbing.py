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

# How many times the rise of a parabola above the highest of its three points is allowed for a peak between them.
PEAK_SAFETY = 4.0

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
    for number in np.argsort(-exact, kind="stable")[:STARTS]:
        at, place = peaks[number], places[number]
        x, y, z = (
            max(float(axis[min(index + 1, axis.size - 1)]) - here, here - float(axis[max(index - 1, 0)]))
            for axis, index, here in zip(axes, at, place, strict=True)
        )
        slack = 2 * _steps(values, at)
        start = (float(place[0]), float(place[1]), float(place[2]))
        starts.append(Start(start, float(exact[number]), slack, (x, y, z), limits))
    return starts


def climb(search: Search, start: Start, sign: float) -> Place:
    """Follow one peak on finer and finer grids until what lies between their places is below the tolerance."""
    body, accuracy = search.setting.body, search.accuracy
    place, widths, limits = list(start.place), list(start.widths), _within_layer(body, start)
    smallest = SMALLEST_WIDTH * max(_reach(search.setting, axis) for axis in range(3))
    while True:
        local = [
            np.unique(np.clip(at + width * FINER, low, high))
            for at, width, (low, high) in zip(place, widths, limits, strict=True)
        ]
        answer = search.field(local, accuracy)
        values = sign * answer.potential
        top = np.unravel_index(int(values.argmax()), values.shape)
        index = (int(top[0]), int(top[1]), int(top[2]))
        place = [float(axis[i]) for axis, i in zip(local, index, strict=True)]
        vertices = [_vertex(local[axis], values, index, axis) for axis in range(3)]
        gap = PEAK_SAFETY * sum(rise for _, rise in vertices)
        done = gap <= search.tolerance or max(widths) <= smallest
        if done and accuracy <= search.tolerance:
            found = (place[0], place[1], place[2])
            return Place(found, sign * float(values[index]), answer.potential_bound + gap, name_of_place(body, found))
        accuracy = search.tolerance if done else max(search.tolerance, ACCURACY_OF_GAP * gap)
        if not done:
            place = [vertex for vertex, _ in vertices]
            widths = [width / NARROWING for width in widths]


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


def _vertex(places: FloatArray, values: FloatArray, top: tuple[int, int, int], axis: int) -> tuple[float, float]:
    """Top of the parabola through a grid's highest value and its neighbours along an axis, and its rise above it.

    At the end of the axis with the field falling from it, the end itself and 0.
    """
    line = _line_through(values, top, axis)
    here = top[axis]
    if places.size < 3:
        return float(places[here]), 0.0
    middle = min(max(here, 1), places.size - 2)
    x, y = places[middle - 1 : middle + 2], line[middle - 1 : middle + 2]
    left, right = (y[1] - y[0]) / (x[1] - x[0]), (y[2] - y[1]) / (x[2] - x[1])
    curvature = (right - left) / (x[2] - x[0])
    if curvature >= 0.0:
        return float(places[here]), 0.0
    vertex = 0.5 * (x[0] + x[1]) - 0.5 * left / curvature
    vertex = float(min(max(vertex, places[0]), places[-1]))
    rise = y[1] + (vertex - x[1]) * (left + curvature * (vertex - x[0])) - line[here]
    return vertex, max(float(rise), 0.0)


def _peaks(values: FloatArray, alike: float) -> list[tuple[int, int, int]]:
    """Places of a first grid that are not below any neighbour by what its accuracy can tell, the highest first."""
    rounded = np.round(values / alike) * alike if alike > 0 else values
    peaks = np.argwhere(rounded >= maximum_filter(rounded, size=3, mode="nearest"))
    # On a plateau those that look highest, though by less than the accuracy.
    order = np.argsort([-values[tuple(peak)] for peak in peaks], kind="stable")
    return [(int(i), int(j), int(k)) for i, j, k in peaks[order[:MOST_PEAKS]]]


def _steps(values: FloatArray, at: tuple[int, int, int]) -> float:
    """Sum over the axes of the smaller step from a peak to its neighbours, which a smooth peak cannot exceed."""
    total = 0.0
    for axis in range(3):
        line = _line_through(values, at, axis)
        here = at[axis]
        near = [abs(float(line[here] - line[other])) for other in (here - 1, here + 1) if 0 <= other < line.size]
        total += min(near, default=0.0)
    return total


def _line_through(values: FloatArray, at: tuple[int, int, int], axis: int) -> FloatArray:
    """Values along an axis through a place of a grid."""
    first, second = (at[other] for other in range(3) if other != axis)
    return np.asarray(np.moveaxis(values, axis, 0)[:, first, second])


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
