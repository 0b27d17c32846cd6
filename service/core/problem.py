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
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from service.core.errors import NotPhysical
from service.core.laws import ConductivityLaw, Radiation
from service.core.maps import FaceMap, Rectangle

Face = Literal["x_low", "x_high", "y_low", "y_high", "z_low", "z_high"]
FACES: tuple[Face, ...] = ("x_low", "x_high", "y_low", "y_high", "z_low", "z_high")
AXES = ("x", "y", "z")

# Ratios of conductivities given in decimal are the same if they differ by less than this.
SAME_RATIO = 1e-9


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
    """The inflow per area is coefficient * (ambient - potential) (third kind, Robin), and radiation if there is any.

    coefficient: > 0, or 0 beside radiation.
    """

    coefficient: float
    ambient: FaceMap
    radiation: Radiation | None = None


@dataclass(frozen=True)
class Insulated:
    """Nothing flows through the face."""


@dataclass(frozen=True)
class HeldPad:
    """A rectangle of a mixed face with one potential all over.

    value: that potential; or flow: the total flow into the body through it, its potential being unknown. One of the
    two. name: what to call it, or None.
    """

    where: Rectangle
    value: float | None = None
    flow: float | None = None
    name: str | None = None


@dataclass(frozen=True)
class FilmPad:
    """A rectangle of a mixed face behind a film with one ambient. coefficient > 0. name: what to call it, or None."""

    where: Rectangle
    coefficient: float
    ambient: float
    name: str | None = None


@dataclass(frozen=True)
class FluxPad:
    """A rectangle of a mixed face with a given inflow per area. name: what to call it, or None."""

    where: Rectangle
    inflow: float
    name: str | None = None


MixedPad = HeldPad | FilmPad | FluxPad


@dataclass(frozen=True)
class Mixed:
    """Several conditions on one face: pads of their own conditions on a background with uniform data.

    pads: they may touch but not overlap.
    """

    background: Inflow | Film | Insulated
    pads: tuple[MixedPad, ...]


Condition = Held | Inflow | Film | Insulated | Mixed


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
            if isinstance(condition, Film):
                _check_film(condition, face)
            if isinstance(condition, Mixed):
                self._check_mixed(face, condition)
            first, second = axes_along(face)
            face_map = map_of(condition)
            if face_map is not None:
                begins = (self.begins[first], self.begins[second])
                face_map.check_covers(self.size[first], self.size[second], face, begins)
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
        return endless and not any(_fixes_level(self.faces[face]) for face in self.present_faces)

    def _check_far_level(self) -> None:
        if self.far_level is None:
            return
        if not math.isfinite(self.far_level):
            raise NotPhysical("The level far away is not a finite number.", ("far_level",))
        fixed = [face for face in self.present_faces if _fixes_level(self.faces[face])]
        if fixed:
            raise NotPhysical(
                f"The face {fixed[0]} fixes the level of the potential, far away as well; leave `far_level` out.",
                ("far_level",),
            )
        if all(math.isfinite(length) for length in self.size):
            raise NotPhysical("The body ends along every axis; it has no level far away.", ("far_level",))

    def _check_mixed(self, face: Face, mixed: Mixed) -> None:
        if isinstance(mixed.background, Film):
            _check_film(mixed.background, face)
        background = map_of(mixed.background)
        if background is not None and not background.is_uniform:
            raise NotPhysical(
                f"The background of {face} varies; beside pads it has one value all over.",
                ("faces", face, "background"),
            )
        if not mixed.pads:
            raise NotPhysical(f"The mixed face {face} has no pads; it needs at least one.", ("faces", face, "pads"))
        first, second = axes_along(face)
        for index, pad in enumerate(mixed.pads):
            where: tuple[str | int, ...] = ("faces", face, "pads", index)
            _check_pad(pad, f"Pad {index} of {face}", where)
            spot = pad.where
            inside = (
                self.begins[first] <= spot.p_low < spot.p_high <= self.size[first]
                and self.begins[second] <= spot.q_low < spot.q_high <= self.size[second]
                and math.isfinite(spot.p_low + spot.p_high + spot.q_low + spot.q_high)
            )
            if not inside:
                raise NotPhysical(
                    f"Pad {index} of {face} reaches from ({spot.p_low:g}, {spot.q_low:g}) to ({spot.p_high:g}, "
                    f"{spot.q_high:g}); it has to have a positive, finite extent and lie in the face.",
                    where,
                )
            for other in range(index):
                if spot.overlaps(mixed.pads[other].where):
                    raise NotPhysical(f"Pads {other} and {index} of {face} overlap.", where)
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


def _fixes_level(condition: Condition) -> bool:
    """Whether a face tells the level of the potential wherever nothing else does: pads of a mixed face do not."""
    return isinstance(condition, Held | Film) or (
        isinstance(condition, Mixed) and isinstance(condition.background, Film)
    )


def _check_film(film: Film, face: Face) -> None:
    radiates = film.radiation is not None
    if not (film.coefficient > 0 or (radiates and film.coefficient == 0)) or math.isinf(film.coefficient):
        raise NotPhysical(
            f"The film coefficient of {face} is {film.coefficient:g}; it has to be greater than zero.",
            ("faces", face, "coefficient"),
        )
    if film.radiation is None:
        return
    if not (film.radiation.coefficient > 0 and math.isfinite(film.radiation.coefficient)):
        raise NotPhysical(f"The radiation of {face} has to be greater than zero and finite.", ("faces", face))
    if not film.ambient.lowest + film.radiation.zero > 0:
        raise NotPhysical(
            f"The ambient of {face} goes down to {film.ambient.lowest:g}, which is not above absolute zero.",
            ("faces", face, "ambient"),
        )


def _check_pad(pad: MixedPad, name: str, where: tuple[str | int, ...]) -> None:
    if isinstance(pad, FilmPad):
        if not (pad.coefficient > 0 and math.isfinite(pad.coefficient)):
            raise NotPhysical(
                f"The film coefficient of {name[0].lower()}{name[1:]} is {pad.coefficient:g}; it has to be greater "
                "than zero and finite.",
                (*where, "coefficient"),
            )
        if not math.isfinite(pad.ambient):
            raise NotPhysical(f"{name} has an ambient that is not a finite number.", (*where, "ambient"))
        return
    if isinstance(pad, FluxPad):
        if not math.isfinite(pad.inflow):
            raise NotPhysical(f"{name} has an inflow that is not a finite number.", (*where, "inflow"))
        return
    given = [number for number in (pad.value, pad.flow) if number is not None]
    if len(given) != 1 or not math.isfinite(given[0]):
        raise NotPhysical(f"{name} is held; it needs a finite value or a finite flow, one of the two.", where)


def map_of(condition: Condition) -> FaceMap | None:
    """The data of a face, or None for an insulated one; of a mixed face those of its background."""
    match condition:
        case Held(value=face_map) | Inflow(inflow=face_map) | Film(ambient=face_map):
            return face_map
        case Insulated():
            return None
        case Mixed(background=background):
            return map_of(background)
