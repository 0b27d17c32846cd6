"""Test bodies in plain data: the core's body and the reference's are both made from the same numbers.

A case keeps the raw table of a map, so that the reference does not see the core's own factorisation of it.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

from service.core import (
    FACES,
    Body,
    BoxSource,
    Face,
    FaceMap,
    Film,
    Held,
    Inflow,
    Insulated,
    Layer,
    Patch,
    Rectangle,
)


@dataclass(frozen=True)
class Cells:
    """Constant patches over a background: tuples (p_low, p_high, q_low, q_high, value)."""

    background: float
    patches: tuple[tuple[float, float, float, float, float], ...]


@dataclass(frozen=True)
class Readings:
    """Bilinear between a table on two axes that reach from edge to edge."""

    first: tuple[float, ...]
    second: tuple[float, ...]
    table: tuple[tuple[float, ...], ...]


Data = float | Cells | Readings


@dataclass(frozen=True)
class Wall:
    """One face: kind "D" held, "N" inflow, "R" film with a coefficient; data as a number or a map."""

    kind: str
    data: Data = 0.0
    coefficient: float = 0.0


@dataclass(frozen=True)
class Case:
    """A body; the last size may be infinite; sources are tuples (low, high, density)."""

    size: tuple[float, float, float]
    conductivity: tuple[float, float, float]
    walls: Mapping[Face, Wall]
    sources: tuple[tuple[tuple[float, float, float], tuple[float, float, float], float], ...] = field(default=())

    @property
    def faces(self) -> tuple[Face, ...]:
        """Faces of the body."""
        return FACES if math.isfinite(self.size[2]) else FACES[:5]

    def extent(self, face: Face) -> tuple[float, float]:
        """Lengths of a face along its two axes in the order x, y, z."""
        lengths = [length for axis, length in zip("xyz", self.size, strict=True) if axis != face[0]]
        return lengths[0], lengths[1]

    def body(self) -> Body:
        """The same body for the core."""
        conditions = {face: _condition(self.walls[face], self.extent(face)) for face in self.faces}
        boxes = tuple(BoxSource(low, high, density) for low, high, density in self.sources)
        return Body(self.size, self.conductivity, conditions, boxes)


@dataclass(frozen=True)
class Stack:
    """A stack of layers (thickness, (kx, ky, kz), contact below, generation) from z_low up."""

    section: tuple[float, float]
    layers: tuple[tuple[float, tuple[float, float, float], float, float], ...]
    walls: Mapping[Face, Wall]

    def body(self) -> Body:
        """The same body for the core."""
        height = math.fsum(layer[0] for layer in self.layers)
        lengths = (*self.section, height)
        conditions: dict[Face, Held | Inflow | Film | Insulated] = {}
        for face in FACES:
            p, q = (length for axis, length in zip("xyz", lengths, strict=True) if axis != face[0])
            conditions[face] = _condition(self.walls[face], (p, q))
        return Body.stack(self.section, [Layer(*layer) for layer in self.layers], conditions)


def _condition(wall: Wall, extent: tuple[float, float]) -> Held | Inflow | Film | Insulated:
    if wall.kind == "N" and wall.data == 0.0:
        return Insulated()
    data = _face_map(wall.data, extent)
    if wall.kind == "D":
        return Held(data)
    return Inflow(data) if wall.kind == "N" else Film(wall.coefficient, data)


def _face_map(data: Data, extent: tuple[float, float]) -> FaceMap:
    if isinstance(data, Cells):
        patches = [Patch(Rectangle(*patch[:4]), patch[4]) for patch in data.patches]
        return FaceMap.patches(extent, data.background, patches)
    if isinstance(data, Readings):
        return FaceMap.readings(extent, data.first, data.second, data.table)
    return FaceMap.uniform(data)


def walls(**given: Wall | str) -> dict[Face, Wall]:
    """Walls by face; a bare "D" or "N" has zero data; what is not named is insulated."""
    everything: dict[Face, Wall] = {}
    for face in FACES:
        wall = given.get(face, "N")
        everything[face] = Wall(wall) if isinstance(wall, str) else wall
    return everything
