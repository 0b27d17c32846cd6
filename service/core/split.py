"""One problem as a sum of problems, each driven by a single face or by the sources.

Every part has the homogeneous conditions of the whole body, so that one set of lines serves all of them. A reference
level is taken off first; data equal to it drive nothing, and a body held at one value is at that value exactly.
"""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.conditions import Film, Held, Inflow, map_of
from service.core.faces import AXES, Face, axes_along, axis_of, is_high
from service.core.lines import laplace
from service.core.lines.line import PRIMITIVE, Drive, Line, WallDrive
from service.core.lines.places import Places
from service.core.lines.stack import StackLine
from service.core.maps import FaceMap
from service.core.problem import Body, BoxSource
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]

SOURCES = "sources"

UNIT = FaceMap.uniform(1.0).first

# The same along an axis without ends.
EVERYWHERE = Profiles(np.array([-math.inf, math.inf]), np.ones((1, 1)), np.ones((1, 1)))


@dataclass(frozen=True, eq=False)
class Part:
    """A part of the problem: for each axis what drives that line; the columns of profiles belong together.

    factor: the field is this times the product of the lines' answers. wall_axis: the axis whose end is driven, None
    for generation inside. cause: the face, or SOURCES. face_map: the data of the face, counted from the reference,
    or None.
    """

    drives: tuple[Drive, Drive, Drive]
    factor: float
    wall_axis: int | None
    cause: Face | str
    face_map: FaceMap | None

    @property
    def columns(self) -> int:
        """How many products of profiles the part is the sum of."""
        return max(drive.n_profiles for drive in self.drives if isinstance(drive, Profiles))

    @property
    def is_high(self) -> bool:
        """Whether the driven end is the high one."""
        return any(drive.high for drive in self.drives if isinstance(drive, WallDrive))

    def knots(self, axis: int) -> FloatArray:
        """Knots of the profiles along an axis; none along the driven one."""
        drive = self.drives[axis]
        return drive.knots if isinstance(drive, Profiles) else np.zeros(0)


def scale_of(body: Body, axis: int) -> float:
    """Scaled length per length of an axis: 1 / sqrt(conductivity), but 1 through a stack."""
    return 1.0 if body.layers and axis == 2 else 1 / math.sqrt(body.conductivity[axis])


def film_of(body: Body, face: Face) -> float:
    """H per scaled length of a face: 0 for a given inflow or insulation, infinite for a held value."""
    condition = body.faces.get(face)
    if isinstance(condition, Held):
        return math.inf
    if isinstance(condition, Film):
        return condition.coefficient * scale_of(body, axis_of(face))
    return 0.0


def lines_of(body: Body) -> tuple[Line, Line, Line]:
    """The three lines whose product the body is."""
    x, y, z = (
        Line(
            body.size[axis],
            scale_of(body, axis),
            film_of(body, f"{AXES[axis]}_low"),  # type: ignore[arg-type]
            film_of(body, f"{AXES[axis]}_high"),  # type: ignore[arg-type]
            body.begins[axis],
            _stretch_of_data(body, axis) if math.isinf(body.size[axis]) else (0.0, 0.0),
        )
        for axis in range(3)
    )
    return x, y, _stack_line(body) if body.layers else z


def _stack_line(body: Body) -> StackLine:
    layers = body.layers
    return StackLine.of(
        [layer.thickness for layer in layers],
        [layer.conductivity[2] for layer in layers],
        _capacities(body),
        [layer.contact_below for layer in layers[1:]],
        film_of(body, "z_low"),
        film_of(body, "z_high"),
    )


def _capacities(body: Body) -> list[float]:
    """What takes the place of the heat capacity in each layer: its kx over that of the first."""
    return [layer.conductivity[0] / body.conductivity[0] for layer in body.layers]


def _per_capacity(body: Body, profiles: Profiles) -> Profiles:
    """Profiles along z of flow that is taken up, as the potential they raise."""
    if not body.layers:
        return profiles
    knots = np.union1d(np.minimum(profiles.knots, body.size[2]), body.interfaces)
    middles = 0.5 * (knots[1:] + knots[:-1])
    values = profiles.at(middles) / np.array(_capacities(body))[body.layer_at(middles)][:, None]
    return Profiles(knots, values, values.copy())


def _stretch_of_data(body: Body, axis: int) -> tuple[float, float]:
    """From where to where what drives a body changes along an endless axis, its end included."""
    marks = [mark for source in body.generating for mark in (source.low[axis], source.high[axis])]
    for face, condition in body.faces.items():
        face_map = map_of(condition)
        if face_map is not None and axis in axes_along(face):
            marks.extend(face_map.first_knots if axes_along(face)[0] == axis else face_map.second_knots)
    there = [float(mark) for mark in marks if math.isfinite(mark)]
    if not body.infinite[axis]:
        there.append(0.0)
    return (min(there), max(there)) if there else (0.0, 0.0)


def reference_level(body: Body) -> float:
    """The level everything is counted from: the one that leaves most faces undriven.

    Faces without end count first: what they come to far away drives flows without end.
    """
    levels: Counter[float] = Counter()
    for face in body.present_faces:
        condition = body.faces[face]
        if isinstance(condition, Held | Film):
            face_map = map_of(condition)
            assert face_map is not None
            endless = any(math.isinf(body.size[axis]) for axis in axes_along(face))
            levels[face_map.usual] += 10 if endless else 1
    return levels.most_common(1)[0][0] if levels else body.far_level or 0.0


def parts_of(body: Body, reference: float) -> tuple[Part, ...]:
    """The driven faces and the sources of a body, leaving out what drives nothing."""
    parts = [part for face in body.present_faces if (part := _face_part(body, face, reference)) is not None]
    if body.generating:
        parts.append(Part(_source_profiles(body, body.generating), 1.0, None, SOURCES, None))
    return tuple(parts)


def level_of_mean(lines: Sequence[Line], parts: Sequence[Part]) -> float:
    """The level from which a closed stack has the mean zero over its volume.

    Its parts are counted from their mean weighted by c, which is what does not change in time.
    """
    z = lines[2]
    whole = Places(np.zeros(1), PRIMITIVE, np.array([z.length]))
    total = 0.0
    for part in parts:
        across = lines[0].mean(part.drives[0]) * lines[1].mean(part.drives[1])
        along = laplace.transform(z, part.drives[2], whole, np.zeros(1))[0, 0] / z.length
        total += part.factor * float((across * along).sum())
    return -total


def _face_part(body: Body, face: Face, reference: float) -> Part | None:
    condition = body.faces[face]
    face_map = map_of(condition)
    if face_map is None:
        return None
    axis = axis_of(face)
    factor = 1.0
    if isinstance(condition, Inflow):
        factor = scale_of(body, axis)
    else:
        face_map = face_map.minus(reference)
    if face_map.is_uniform and face_map.lowest == 0.0:
        return None
    first, second = axes_along(face)
    drives: list[Drive] = [WallDrive(is_high(face))] * 3
    drives[first], drives[second] = face_map.first, face_map.second
    if face_map.is_uniform:
        # One unit profile for all uniform faces, so that their lines' answers are shared.
        drives[first], drives[second] = (EVERYWHERE if body.infinite[axis] else UNIT for axis in (first, second))
        factor *= face_map.lowest
    if isinstance(condition, Inflow) and isinstance(drives[2], Profiles):
        drives[2] = _per_capacity(body, drives[2])
    return Part((drives[0], drives[1], drives[2]), factor, axis, face, face_map)


def _source_profiles(body: Body, sources: Sequence[BoxSource]) -> tuple[Profiles, Profiles, Profiles]:
    """Indicator profiles of all boxes on common knots, one column a box; the densities go with the x profiles."""
    profiles = []
    for axis in range(3):
        low = np.array([source.low[axis] for source in sources])
        high = np.array([source.high[axis] for source in sources])
        knots = np.unique(np.concatenate([[body.begins[axis], body.size[axis]], low, high]))
        inside = (knots[:-1, None] >= low) & (knots[1:, None] <= high)
        values = inside.astype(float)
        if axis == 0:
            values = values * np.array([source.density for source in sources])
        profiles.append(Profiles(knots, values, values.copy()))
    return profiles[0], profiles[1], _per_capacity(body, profiles[2])
