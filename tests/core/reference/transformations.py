"""Changes of a case that physics gives an answer to: turned end for end, stretched, other data."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from service.core.faces import FACES, Face
from tests.core.reference.cases import Case, Cells, Data, Readings, Wall
from tests.core.reference.random_cases import Place


def opposite(face: Face) -> Face:
    """The face at the other end of the same axis."""
    return FACES[FACES.index(face) ^ 1]


def data_range(case: Case) -> float:
    """Largest size of any number given on a face that is a potential."""
    return max(
        (abs(v) for wall in case.walls.values() if wall.kind != "N" for v in numbers_of(wall.data)),
        default=0.0,
    )


def numbers_of(data: Data) -> list[float]:
    """Every number of a map."""
    if isinstance(data, Cells):
        return [data.background, *(patch[4] for patch in data.patches)]
    if isinstance(data, Readings):
        return [value for row in data.table for value in row]
    return [data]


def change_data(data: Data, factor: float, more: float) -> Data:
    """The same map with every number multiplied and then raised."""
    if isinstance(data, Cells):
        patches = tuple((a, b, c, d, factor * v + more) for a, b, c, d, v in data.patches)
        return Cells(factor * data.background + more, patches)
    if isinstance(data, Readings):
        table = tuple(tuple(factor * v + more for v in row) for row in data.table)
        return Readings(data.first, data.second, table)
    return factor * data + more


def scale_data(data: Data, factor: float) -> Data:
    """The same map with every number multiplied."""
    return change_data(data, factor, 0.0)


def value_on(data: Data, place: Sequence[float]) -> float:
    """Data of a face at one place of it, by hand."""
    if isinstance(data, Cells):
        inside = [v for a, b, c, d, v in data.patches if a < place[0] < b and c < place[1] < d]
        return inside[0] if inside else data.background
    if isinstance(data, Readings):
        rows = [float(np.interp(place[1], data.second, row)) for row in data.table]
        return float(np.interp(place[0], data.first, rows))
    return data


def mirror(case: Case, axis: int) -> Case:
    """The body turned end for end along one axis."""
    length = case.size[axis]
    made: dict[Face, Wall] = {}
    for face, wall in case.walls.items():
        across = [other for other in range(3) if other != "xyz".index(face[0])]
        data = _mirror_data(wall.data, across.index(axis), length) if axis in across else wall.data
        made[opposite(face) if axis not in across else face] = replace(wall, data=data)
    sources: list[tuple[Place, Place, float]] = []
    for low, high, density in case.sources:
        new_low, new_high = list(low), list(high)
        new_low[axis], new_high[axis] = length - high[axis], length - low[axis]
        sources.append((triple(new_low), triple(new_high), density))
    return replace(case, walls=made, sources=tuple(sources))


def _mirror_data(data: Data, which: int, length: float) -> Data:
    if isinstance(data, Cells):
        patches = []
        for a, b, c, d, v in data.patches:
            turned = (length - b, length - a, c, d, v) if which == 0 else (a, b, length - d, length - c, v)
            patches.append(turned)
        return Cells(data.background, tuple(patches))
    if isinstance(data, Readings):
        axes = [data.first, data.second]
        axes[which] = tuple(length - place for place in reversed(axes[which]))
        table = np.flip(np.array(data.table), axis=which)
        return Readings(axes[0], axes[1], tuple(tuple(float(v) for v in row) for row in table))
    return data


def stretch(case: Case, factors: Sequence[float]) -> Case:
    """Lengths along each axis divided by its factor, conductivities by its square."""
    made: dict[Face, Wall] = {}
    for face, wall in case.walls.items():
        axis = "xyz".index(face[0])
        first, second = (factors[other] for other in range(3) if other != axis)
        # Flows and film coefficients go with the square root of the conductivity across their face.
        across = factors[axis] if wall.kind == "N" else 1.0
        data = _stretch_data(scale_data(wall.data, 1.0 / across), first, second)
        made[face] = Wall(wall.kind, data, wall.coefficient / factors[axis])
    sources = tuple((shrink(low, factors), shrink(high, factors), density) for low, high, density in case.sources)
    conductivity = shrink(shrink(case.conductivity, factors), factors)
    return Case(shrink(case.size, factors), conductivity, made, sources)


def _stretch_data(data: Data, first: float, second: float) -> Data:
    if isinstance(data, Cells):
        patches = ((a / first, b / first, c / second, d / second, v) for a, b, c, d, v in data.patches)
        return Cells(data.background, tuple(patches))
    if isinstance(data, Readings):
        return Readings(tuple(p / first for p in data.first), tuple(q / second for q in data.second), data.table)
    return data


def shrink(place: Sequence[float], factors: Sequence[float]) -> Place:
    """Each coordinate divided by the factor of its axis."""
    return triple([c / factor for c, factor in zip(place, factors, strict=True)])


def triple(values: Sequence[float]) -> Place:
    """Three numbers as a place."""
    x, y, z = values
    return x, y, z
