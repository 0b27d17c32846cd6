"""The engineer's problem: a rectangular body, what is known on its faces, what is generated inside.

    kx u_xx + ky u_yy + kz u_zz + g = 0   in   0 < x < a, 0 < y < b, 0 < z < c   (c finite or infinite)

Any consistent set of units will do: lengths in one unit, the potential in one, and flows per area, conductivities
and film coefficients in the units these imply. Nothing here or below converts a number. The service passes lengths
in the unit they were declared in, so that a distance such as 0.1 mm from an edge keeps all its digits.

Signs: an inflow is positive into the body; a flux component is positive along its axis.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from service.core.errors import NotPhysical
from service.core.maps import FaceMap

Face = Literal["x_low", "x_high", "y_low", "y_high", "z_low", "z_high"]
FACES: tuple[Face, ...] = ("x_low", "x_high", "y_low", "y_high", "z_low", "z_high")
AXES = ("x", "y", "z")


def axis_of(face: Face) -> int:
    """Index of the axis that a face is square to: 0, 1 or 2."""
    return AXES.index(face[0])


def is_high(face: Face) -> bool:
    """Whether the face is the one at the far end of its axis."""
    return face.endswith("high")


def axes_along(face_or_axis: Face | int) -> tuple[int, int]:
    """The two axes that lie in a face, or in a plane square to an axis, in the order x, y, z."""
    axis = face_or_axis if isinstance(face_or_axis, int) else axis_of(face_or_axis)
    return ((1, 2), (0, 2), (0, 1))[axis]


@dataclass(frozen=True)
class Held:
    """The potential on the face is given (a condition of the first kind, Dirichlet)."""

    value: FaceMap


@dataclass(frozen=True)
class Inflow:
    """The flow per area into the body is given (second kind, Neumann)."""

    inflow: FaceMap


@dataclass(frozen=True)
class Film:
    """The inflow per area is coefficient * (ambient - potential) (third kind, Robin). coefficient > 0."""

    coefficient: float
    ambient: FaceMap


@dataclass(frozen=True)
class Insulated:
    """Nothing flows through the face."""


Condition = Held | Inflow | Film | Insulated


@dataclass(frozen=True)
class BoxSource:
    """Generation per volume, uniform in an axis-aligned box inside the body.

    low, high: opposite corners, each (x, y, z). `high` may be infinite along z in a semi-infinite body only
    when the far field stays bounded, which `solve` checks.
    """

    low: tuple[float, float, float]
    high: tuple[float, float, float]
    density: float


@dataclass(frozen=True)
class Body:
    """A homogeneous rectangular body with its faces and sources.

    size: (a, b, c), each > 0; c may be math.inf: a bar that begins at z = 0 and has no far end.
    conductivity: (kx, ky, kz), each > 0 and finite.
    faces: one condition for every face; `z_high` is absent when c is infinite.
    sources: boxes of uniform generation, which may overlap and then add up.
    Raises NotPhysical where one of these does not hold, or a map or box does not fit the body.
    """

    size: tuple[float, float, float]
    conductivity: tuple[float, float, float]
    faces: Mapping[Face, Condition]
    sources: tuple[BoxSource, ...] = field(default=())

    def __post_init__(self) -> None:
        self._check_size_and_conductivity()
        self._check_faces()
        for index, source in enumerate(self.sources):
            self._check_source(index, source)

    @property
    def present_faces(self) -> tuple[Face, ...]:
        """The faces the body has: six, or five without z_high for a semi-infinite bar."""
        return FACES if math.isfinite(self.size[2]) else FACES[:5]

    def _check_size_and_conductivity(self) -> None:
        for axis, length in enumerate(self.size):
            endless_z = axis == 2 and length == math.inf
            if not (length > 0 and (math.isfinite(length) or endless_z)):
                raise NotPhysical(
                    f"The size along {AXES[axis]} is {length:g}; it has to be greater than zero and finite.",
                    ("size", AXES[axis]),
                )
        for axis, conductivity in enumerate(self.conductivity):
            if not (conductivity > 0 and math.isfinite(conductivity)):
                raise NotPhysical(
                    f"The conductivity along {AXES[axis]} is {conductivity:g}; it has to be greater than zero.",
                    ("conductivity", AXES[axis]),
                )

    def _check_faces(self) -> None:
        for face in self.present_faces:
            if face not in self.faces:
                raise NotPhysical(f"The face {face} has no condition; every face needs one.", ("faces", face))
        for face, condition in self.faces.items():
            if face not in self.present_faces:
                raise NotPhysical(f"A semi-infinite bar has no face {face}.", ("faces", face))
            if isinstance(condition, Film) and not (condition.coefficient > 0 and math.isfinite(condition.coefficient)):
                raise NotPhysical(
                    f"The film coefficient of {face} is {condition.coefficient:g}; it has to be greater than zero.",
                    ("faces", face, "coefficient"),
                )
            first, second = axes_along(face)
            face_map = map_of(condition)
            if face_map is not None:
                face_map.check_covers(self.size[first], self.size[second], face)

    def _check_source(self, index: int, source: BoxSource) -> None:
        where: tuple[str | int, ...] = ("sources", index)
        if not math.isfinite(source.density):
            raise NotPhysical(f"The density of source {index} is not a finite number.", (*where, "density"))
        for axis in range(3):
            low, high, length = source.low[axis], source.high[axis], self.size[axis]
            if not 0 <= low < high <= length:
                raise NotPhysical(
                    f"Source {index} reaches from {low:g} to {high:g} along {AXES[axis]}; it has to lie between "
                    f"0 and {length:g} and have a positive extent.",
                    (*where, AXES[axis]),
                )


def map_of(condition: Condition) -> FaceMap | None:
    """The data of a face, or None for an insulated one."""
    match condition:
        case Held(value=face_map) | Inflow(inflow=face_map) | Film(ambient=face_map):
            return face_map
        case Insulated():
            return None
