"""A body with mixed faces as an ordinary body, and the rectangles whose condition differs from that body's.

The ordinary body, the *base*, carries all over a mixed face the least film coefficient found on it, none where a part
is insulated or has a given inflow. A rectangle with more than that, a *spot*, lets in an excess q over what its face
would let in there, and with G the base's Green's function

    u = u_base + G q,     u + q / (h - h_base) = level

on each spot, h infinite on a held one. The base's ambient on a spot is the spot's own level, so that equal coefficients
leave nothing to solve. Whatever the coefficients, G and 1 / (h - h_base) are positive.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from service.core.conditions import Condition, Film, FilmPad, FluxPad, Held, HeldPad, Inflow, Insulated, Mixed, MixedPad
from service.core.errors import NotPhysical
from service.core.faces import Face, axes_along, axis_of, is_high
from service.core.maps import FaceMap, Patch, Rectangle
from service.core.problem import Body
from service.core.split import scale_of

# Held values that differ by less than this part of their size are the same: they were given in decimal.
SAME = 1e-12


@dataclass(frozen=True)
class Spot:
    """A rectangle of a mixed face with more film than its base.

    level: what it is held at, or its ambient; None where its total flow is given instead. excess: coefficient beyond
    the base's, infinite if held. pad: which pad of its face it is, None for a piece of the background.
    """

    face: Face
    where: Rectangle
    level: float | None
    excess: float
    pad: int | None

    @property
    def is_held(self) -> bool:
        """Whether it has one potential all over."""
        return self.excess == math.inf

    @property
    def area(self) -> float:
        """Its area."""
        return (self.where.p_high - self.where.p_low) * (self.where.q_high - self.where.q_low)


@dataclass(frozen=True)
class Base:
    """body: with ordinary conditions only. axis: the one its mixed faces are square to. faces: those.

    coefficients: least coefficient of each mixed face.
    """

    body: Body
    axis: int
    faces: tuple[Face, ...]
    coefficients: dict[Face, float]
    spots: tuple[Spot, ...]

    @property
    def factors(self) -> dict[bool, float]:
        """For each mixed face, by whether it is the high one, potential per flow over what its line answers."""
        return {
            is_high(face): 1 / self.coefficients[face] if self.coefficients[face] else scale_of(self.body, self.axis)
            for face in self.faces
        }


def mixed_faces(body: Body) -> tuple[Face, ...]:
    """The faces with several conditions at once."""
    return tuple(face for face in body.present_faces if isinstance(body.faces[face], Mixed))


def pads_of(body: Body, face: Face) -> tuple[MixedPad, ...]:
    """The pads of a face, none if it is not mixed."""
    condition = body.faces[face]
    return condition.pads if isinstance(condition, Mixed) else ()


def base_of(body: Body) -> Base:
    """The base of a body with mixed faces. Raises NotPhysical for what is not solved beside them."""
    faces = mixed_faces(body)
    _check_solvable(body, faces)
    _check_contacts(body, faces)
    conditions: dict[Face, Condition] = dict(body.faces)
    coefficients: dict[Face, float] = {}
    spots: list[Spot] = []
    for face in faces:
        condition = body.faces[face]
        assert isinstance(condition, Mixed)
        coefficients[face] = _least_coefficient(condition)
        spots += _spots(body, face, condition, coefficients[face])
        conditions[face] = _base_condition(body, face, condition, coefficients[face])
    return Base(with_faces(body, conditions), axis_of(faces[0]), faces, coefficients, tuple(spots))


def with_faces(body: Body, faces: dict[Face, Condition]) -> Body:
    """The same body with other conditions."""
    return replace(body, faces=faces)


def _least_coefficient(mixed: Mixed) -> float:
    if not isinstance(mixed.background, Film) or any(isinstance(pad, FluxPad) for pad in mixed.pads):
        return 0.0
    films = [pad.coefficient for pad in mixed.pads if isinstance(pad, FilmPad)]
    return min([mixed.background.coefficient, *films])


def _base_condition(body: Body, face: Face, mixed: Mixed, least: float) -> Condition:
    if least > 0.0:
        assert isinstance(mixed.background, Film)
        usual = mixed.background.ambient.usual
        patches = [Patch(pad.where, _level_of(pad, usual)) for pad in mixed.pads]
    else:
        usual = mixed.background.inflow.usual if isinstance(mixed.background, Inflow) else 0.0
        patches = [Patch(pad.where, pad.inflow if isinstance(pad, FluxPad) else 0.0) for pad in mixed.pads]
    first, second = axes_along(face)
    extent, begins = (body.size[first], body.size[second]), (body.begins[first], body.begins[second])
    data = FaceMap.patches(extent, usual, patches, begins=begins)
    if least > 0.0:
        return Film(least, FaceMap.uniform(usual) if data.is_uniform else data)
    return Insulated() if data.is_uniform and usual == 0.0 else Inflow(data)


def _level_of(pad: MixedPad, usual: float) -> float:
    """What the ambient before a pad is in the base: its own level where it has one."""
    level = pad.ambient if isinstance(pad, FilmPad) else pad.value if isinstance(pad, HeldPad) else None
    return usual if level is None else level


def _spots(body: Body, face: Face, mixed: Mixed, least: float) -> list[Spot]:
    spots = []
    for index, pad in enumerate(mixed.pads):
        if isinstance(pad, HeldPad):
            spots.append(Spot(face, pad.where, pad.value, math.inf, index))
        elif isinstance(pad, FilmPad) and pad.coefficient > least:
            spots.append(Spot(face, pad.where, pad.ambient, pad.coefficient - least, index))
    if isinstance(mixed.background, Film) and mixed.background.coefficient > least:
        rest = _background(body, face, [pad.where for pad in mixed.pads])
        ambient = mixed.background.ambient.usual
        spots += [Spot(face, where, ambient, mixed.background.coefficient - least, None) for where in rest]
    return spots


def _background(body: Body, face: Face, pads: Sequence[Rectangle]) -> list[Rectangle]:
    """A face less its pads, cut into rectangles: strips along the second axis between the pads' edges on the first."""
    first, second = axes_along(face)
    if math.isinf(body.size[first]) or math.isinf(body.size[second]):
        raise NotPhysical(
            f"The background of {face} is a film without end, and a pad on it has less film than it; give the pad at "
            "least its coefficient.",
            ("faces", face),
        )
    cuts = np.unique([0.0, body.size[first], *(p for pad in pads for p in (pad.p_low, pad.p_high))])
    open_strips: dict[tuple[float, float], float] = {}
    found = []
    for low, high in pairwise(cuts):
        taken = sorted((pad.q_low, pad.q_high) for pad in pads if pad.p_low <= low and high <= pad.p_high)
        ends = [0.0, *(q for pair in taken for q in pair), body.size[second]]
        strips = {(ends[i], ends[i + 1]) for i in range(0, len(ends), 2) if ends[i] < ends[i + 1]}
        ended = set(open_strips) - strips
        found += [Rectangle(open_strips.pop(strip), float(low), *strip) for strip in ended]
        open_strips |= {strip: float(low) for strip in strips - set(open_strips)}
    found += [Rectangle(start, body.size[first], *strip) for strip, start in open_strips.items()]
    return sorted(found, key=lambda where: (where.p_low, where.q_low))


def _check_solvable(body: Body, faces: tuple[Face, ...]) -> None:
    if not faces:
        raise NotPhysical("No face of the body is mixed.", ("faces",))
    if body.layers and axis_of(faces[0]) != 2:
        raise NotPhysical(
            f"The face {faces[0]} is a side of a stack and mixed; of a stack the bottom and the top can be mixed.",
            ("faces", faces[0]),
        )
    radiates = any(isinstance(condition, Film) and condition.radiation for condition in body.faces.values())
    backgrounds = [condition.background for condition in body.faces.values() if isinstance(condition, Mixed)]
    radiates = radiates or any(isinstance(background, Film) and background.radiation for background in backgrounds)
    if body.law is not None or radiates:
        raise NotPhysical(
            f"The face {faces[0]} is mixed; beside a mixed face the conductivity has to be constant and no face may "
            "radiate.",
            ("faces", faces[0]),
        )


def _check_contacts(body: Body, faces: tuple[Face, ...]) -> None:
    """Refuse held pads that touch something held at another potential along an edge: their flow has no bound."""
    for face in faces:
        held = [(index, pad) for index, pad in enumerate(pads_of(body, face)) if isinstance(pad, HeldPad)]
        for position, (index, pad) in enumerate(held):
            for other, second in held[:position]:
                if _share_an_edge(pad.where, second.where) and _differ(pad.value, second.value):
                    raise NotPhysical(
                        f"The held pads {other} and {index} of {face} touch along an edge and are not held at one "
                        "value; the flow between them has no bound. Leave a gap, or put a film on one of them.",
                        ("faces", face, "pads", index),
                    )
            for side, condition in _held_sides(body, face, pad.where):
                values = (condition.value.lowest, condition.value.highest)
                if any(_differ(pad.value, value) for value in values):
                    raise NotPhysical(
                        f"The held pad {index} of {face} touches the face {side}, which is not held at the same value "
                        "all over; the flow between them has no bound. Leave a gap, or put a film on the pad.",
                        ("faces", face, "pads", index),
                    )


def check_apart(body: Body, spots: Sequence[Spot]) -> None:
    """Refuse held spots that touch something else held along an edge, whatever at: the conductance has no bound."""
    for spot in spots:
        for index, pad in enumerate(pads_of(body, spot.face)):
            if index != spot.pad and isinstance(pad, HeldPad) and _share_an_edge(pad.where, spot.where):
                raise NotPhysical(
                    f"The held pads {spot.pad} and {index} of {spot.face} touch along an edge; the conductance between "
                    "them has no bound. Leave a gap, or put a film on one of them.",
                    ("faces", spot.face, "pads", index),
                )
        for side, _ in _held_sides(body, spot.face, spot.where):
            raise NotPhysical(
                f"The held pad {spot.pad} of {spot.face} touches the held face {side}; the conductance between them "
                "has no bound. Leave a gap, or put a film on the pad.",
                ("faces", spot.face, "pads", spot.pad or 0),
            )


def _held_sides(body: Body, face: Face, where: Rectangle) -> list[tuple[Face, Held]]:
    """The held faces that a rectangle of another face touches along an edge."""
    found = []
    for side in body.present_faces:
        condition = body.faces[side]
        if isinstance(condition, Held) and axis_of(side) != axis_of(face):
            along = axes_along(face).index(axis_of(side))
            ends = ((where.p_low, where.p_high), (where.q_low, where.q_high))[along]
            if body.end_of(side) in ends:
                found.append((side, condition))
    return found


def _share_an_edge(one: Rectangle, two: Rectangle) -> bool:
    across = {one.p_low, one.p_high} & {two.p_low, two.p_high}
    beside = {one.q_low, one.q_high} & {two.q_low, two.q_high}
    overlap_p = min(one.p_high, two.p_high) > max(one.p_low, two.p_low)
    overlap_q = min(one.q_high, two.q_high) > max(one.q_low, two.q_low)
    return bool((across and overlap_q) or (beside and overlap_p))


def _differ(one: float | None, two: float | None) -> bool:
    """Whether two held values differ; one that is not known does."""
    if one is None or two is None:
        return True
    return abs(one - two) > SAME * max(abs(one), abs(two))
