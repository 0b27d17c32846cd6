"""The engineer's problem: a rectangular body, what is known on its faces, what is generated inside.

    kx u_xx + ky u_yy + kz u_zz + g = 0   in   0 < x < a, 0 < y < b, 0 < z < c

Each of a, b and c may be infinite, and an axis may also run from -infinity to infinity.

Any consistent set of units will do: lengths in one unit, the potential in one, and flows per area, conductivities
and film coefficients in the units these imply. Nothing here or below converts a number. The service passes lengths
in the unit they were declared in, so that a distance such as 0.1 mm from an edge keeps all its digits.

Signs: an inflow is positive into the body; a flux component is positive along its axis.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core.conditions import (
    Condition,
    Film,
    Held,
    Inflow,
    Mixed,
    check_film,
    check_mixed,
    fixes_level,
    map_of,
)
from service.core.errors import NotPhysical
from service.core.faces import AXES, FACES, Face, axes_along, axis_of, is_high
from service.core.laws import ConductivityLaw

# Ratios of conductivities given in decimal are the same if they differ by less than this.
SAME_RATIO = 1e-9


@dataclass(frozen=True)
class BoxSource:
    """Generation per volume, uniform in an axis-aligned box inside the body.

    low, high: opposite corners, each (x, y, z). They may be infinite along an endless axis if the field stays bounded
    there, which `solve` checks.
    """

    low: tuple[float, float, float]
    high: tuple[float, float, float]
    density: float


@dataclass(frozen=True)
class Layer:
    """A layer of a stack, which fills its whole section.

    thickness: > 0 and finite. conductivity: (kx, ky, kz), each > 0; ky / kx is the same in all layers of a stack.
    contact_below: contact conductance per area between this layer and the one below it, > 0; infinite where they
    are bonded perfectly. generation: per volume, uniform in the layer. name: what to call it, or None.
    """

    thickness: float
    conductivity: tuple[float, float, float]
    contact_below: float = math.inf
    generation: float = 0.0
    name: str | None = None


@dataclass(frozen=True)
class Body:
    """A rectangular body with its faces and sources: of one material, or a stack of layers along z.

    size: (a, b, c), each > 0; math.inf along an axis without a far end: semi-infinite, it begins at 0 and has only the
        low face, or without ends if `infinite` says so.
    conductivity: (kx, ky, kz), each > 0 and finite; that of the first layer in a stack.
    faces: one condition for every face the body has, see `present_faces`. The coefficient of a film on the side
    of a stack is that beside its first layer; beside the others it is in proportion to their kx.
    sources: boxes of uniform generation, which may overlap and then add up.
    layers: from z_low to z_high, empty for a body of one material. See `stack`.
    infinite: which axes have no ends: their size is infinite, their coordinates run from -infinity to infinity, and
        neither face is there.
    far_level: the potential far away along endless axes where no face fixes it; zero if None.
    law: a factor on the conductivity that varies with the potential, or None where it does not.
    Raises NotPhysical where one of these does not hold, or a map or box does not fit the body.
    """

    size: tuple[float, float, float]
    conductivity: tuple[float, float, float]
    faces: Mapping[Face, Condition]
    sources: tuple[BoxSource, ...] = field(default=())
    layers: tuple[Layer, ...] = field(default=())
    infinite: tuple[bool, bool, bool] = (False, False, False)
    law: ConductivityLaw | None = None
    far_level: float | None = None

    @classmethod
    def stack(
        cls,
        section: tuple[float, float],
        layers: Sequence[Layer],
        faces: Mapping[Face, Condition],
        sources: tuple[BoxSource, ...] = (),
        infinite: tuple[bool, bool, bool] = (False, False, False),
    ) -> Body:
        """A stack of layers along z, from z_low up, of a section (a, b)."""
        if not layers:
            raise NotPhysical("A stack needs at least one layer.", ("layers",))
        height = math.fsum(layer.thickness for layer in layers)
        return cls((*section, height), layers[0].conductivity, faces, sources, tuple(layers), infinite)

    @cached_property
    def interfaces(self) -> tuple[float, ...]:
        """Heights z of the interfaces between layers, from below, without the two faces."""
        heights = [math.fsum(layer.thickness for layer in self.layers[:n]) for n in range(1, len(self.layers))]
        return tuple(heights)

    @cached_property
    def generating(self) -> tuple[BoxSource, ...]:
        """The sources, and the layers that generate, leaving out what generates nothing."""
        borders = (0.0, *self.interfaces, self.size[2])
        low = tuple(-math.inf if endless else 0.0 for endless in self.infinite)
        layers = [
            BoxSource(
                (low[0], low[1], borders[index]), (self.size[0], self.size[1], borders[index + 1]), layer.generation
            )
            for index, layer in enumerate(self.layers)
        ]
        return tuple(source for source in (*self.sources, *layers) if source.density != 0.0)

    def layer_at(self, z: NDArray[np.float64]) -> NDArray[np.intp]:
        """Which layer each height is in; an interface belongs to the layer below it."""
        return np.searchsorted(self.interfaces, z, side="left")

    def conductivity_at(self, axis: int, z: NDArray[np.float64]) -> NDArray[np.float64]:
        """Conductivity along an axis at heights z, of the same shape."""
        if not self.layers:
            return np.full_like(z, self.conductivity[axis])
        return np.array([layer.conductivity[axis] for layer in self.layers])[self.layer_at(z)]

    def __post_init__(self) -> None:
        self._check_size_and_conductivity()
        self._check_layers()
        self._check_faces()
        self._check_far_level()
        for index, source in enumerate(self.sources):
            self._check_source(index, source)

    @property
    def varies(self) -> bool:
        """Whether the field is not in proportion to its data: the conductivity varies with it, or a face radiates."""
        films = (condition for condition in self.faces.values() if isinstance(condition, Film))
        return self.law is not None or any(film.radiation is not None for film in films)

    @property
    def has_mixed_face(self) -> bool:
        """Whether a face has several conditions."""
        return any(isinstance(condition, Mixed) for condition in self.faces.values())

    @property
    def present_faces(self) -> tuple[Face, ...]:
        """The faces the body has: both along a finite axis, the low one along a semi-infinite one, else none."""
        return tuple(face for face in FACES if math.isfinite(self.end_of(face)))

    @property
    def begins(self) -> tuple[float, float, float]:
        """Where the body begins along each axis: at 0, or at -infinity along an axis without ends."""
        x, y, z = (-math.inf if endless else 0.0 for endless in self.infinite)
        return x, y, z

    def end_of(self, face: Face) -> float:
        """The coordinate of a face along its axis; infinite if the body does not have it."""
        axis = axis_of(face)
        return self.size[axis] if is_high(face) else self.begins[axis]

    def face_at(self, axis: int, place: float) -> Face | None:
        """The face where an axis is at a place, None if there is none."""
        on_it = (face for face in self.present_faces if axis_of(face) == axis and self.end_of(face) == place)
        return next(on_it, None)

    def _check_size_and_conductivity(self) -> None:
        for axis, length in enumerate(self.size):
            if not length > 0:
                raise NotPhysical(
                    f"The size along {AXES[axis]} is {length:g}; it has to be greater than zero.",
                    ("size", AXES[axis]),
                )
            if self.infinite[axis] and math.isfinite(length):
                raise NotPhysical(
                    f"The body has no ends along {AXES[axis]}, and yet its size there is {length:g}.",
                    ("size", AXES[axis]),
                )
        for axis, conductivity in enumerate(self.conductivity):
            if not (conductivity > 0 and math.isfinite(conductivity)):
                raise NotPhysical(
                    f"The conductivity along {AXES[axis]} is {conductivity:g}; it has to be greater than zero.",
                    ("conductivity", AXES[axis]),
                )

    def _check_layers(self) -> None:
        for index, layer in enumerate(self.layers):
            where: tuple[str | int, ...] = ("layers", index)
            if not (layer.thickness > 0 and math.isfinite(layer.thickness)):
                raise NotPhysical(
                    f"The thickness of layer {index} is {layer.thickness:g}; it has to be greater than zero and "
                    "finite.",
                    (*where, "thickness"),
                )
            for axis, conductivity in enumerate(layer.conductivity):
                if not (conductivity > 0 and math.isfinite(conductivity)):
                    raise NotPhysical(
                        f"The conductivity of layer {index} along {AXES[axis]} is {conductivity:g}; it has to be "
                        "greater than zero.",
                        (*where, "conductivity", AXES[axis]),
                    )
            if not layer.contact_below > 0:
                raise NotPhysical(
                    f"The contact conductance below layer {index} is {layer.contact_below:g}; it has to be greater "
                    "than zero.",
                    (*where, "contact_below"),
                )
            if not math.isfinite(layer.generation):
                raise NotPhysical(f"The generation in layer {index} is not a finite number.", (*where, "generation"))
            (x, y, _), (first_x, first_y, _) = layer.conductivity, self.layers[0].conductivity
            if abs(y * first_x - x * first_y) > SAME_RATIO * x * first_y:
                raise NotPhysical(
                    f"Layer {index} conducts along y {y / x:g} times as well as along x, the first layer "
                    f"{first_y / first_x:g} times; that ratio has to be the same in all layers.",
                    (*where, "conductivity"),
                )
        for face in self.present_faces if self.layers else ():
            face_map = map_of(self.faces[face]) if face in self.faces else None
            if axis_of(face) != 2 and face_map is not None and not face_map.is_uniform:
                raise NotPhysical(
                    f"The face {face} is a side of a stack and has data that vary over it; on the sides of a stack one "
                    "value a face can be given, and any map on its bottom and top.",
                    ("faces", face),
                )
        if self.layers and self.layers[0].contact_below != math.inf:
            raise NotPhysical(
                "The first layer has nothing below it; describe what the stack stands on as a film on z_low.",
                ("layers", 0, "contact_below"),
            )

    def _check_faces(self) -> None:
        for face in self.present_faces:
            if face not in self.faces:
                raise NotPhysical(f"The face {face} has no condition; every face needs one.", ("faces", face))
        for face, condition in self.faces.items():
            if face not in self.present_faces:
                which = "without ends" if self.infinite[axis_of(face)] else "semi-infinite"
                raise NotPhysical(f"A body that is {which} along {face[0]} has no face {face}.", ("faces", face))
            first, second = axes_along(face)
            begins, ends = (self.begins[first], self.begins[second]), (self.size[first], self.size[second])
            if isinstance(condition, Film):
                check_film(condition, face)
            if isinstance(condition, Mixed):
                check_mixed(condition, face, begins, ends)
                self._check_mixed_faces_are_opposite(face)
            face_map = map_of(condition)
            if face_map is not None:
                face_map.check_covers(*ends, face, begins)
                if any(face_map.curved):
                    self._check_formula(face, condition)

    def _check_formula(self, face: Face, condition: Condition) -> None:
        """Where a formula is not offered: where inflows have to balance exactly."""
        if isinstance(condition, Inflow) and not any(
            isinstance(other, Held | Film | Mixed) for other in self.faces.values()
        ):
            raise NotPhysical(
                f"The formula on {face} gives an inflow where no face is held or has a film; inflows have to balance "
                "exactly then, so use patches or readings.",
                ("faces", face),
            )

    @property
    def leaves_far_level_open(self) -> bool:
        """Whether the body goes on without end and no face says what its potential comes to there."""
        endless = any(math.isinf(length) for length in self.size)
        return endless and not any(fixes_level(self.faces[face]) for face in self.present_faces)

    def _check_far_level(self) -> None:
        if self.far_level is None:
            return
        if not math.isfinite(self.far_level):
            raise NotPhysical("The level far away is not a finite number.", ("far_level",))
        fixed = [face for face in self.present_faces if fixes_level(self.faces[face])]
        if fixed:
            raise NotPhysical(
                f"The face {fixed[0]} fixes the level of the potential, far away as well; leave `far_level` out.",
                ("far_level",),
            )
        if all(math.isfinite(length) for length in self.size):
            raise NotPhysical("The body ends along every axis; it has no level far away.", ("far_level",))

    def _check_mixed_faces_are_opposite(self, face: Face) -> None:
        for other_face, condition in self.faces.items():
            if isinstance(condition, Mixed) and axis_of(other_face) != axis_of(face):
                raise NotPhysical(
                    f"The faces {face} and {other_face} are both mixed; mixed faces have to be square to one axis.",
                    ("faces", face),
                )

    def _check_source(self, index: int, source: BoxSource) -> None:
        where: tuple[str | int, ...] = ("sources", index)
        if not math.isfinite(source.density):
            raise NotPhysical(f"The density of source {index} is not a finite number.", (*where, "density"))
        for axis in range(3):
            low, high, begin, length = source.low[axis], source.high[axis], self.begins[axis], self.size[axis]
            if not begin <= low < high <= length:
                raise NotPhysical(
                    f"Source {index} reaches from {low:g} to {high:g} along {AXES[axis]}; it has to lie between "
                    f"{begin:g} and {length:g} and have a positive extent.",
                    (*where, AXES[axis]),
                )
