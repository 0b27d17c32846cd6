"""Pads that a flow is fed into: when there is an answer to that, and the body at rest that it is fed into."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

from service.core import time_range
from service.core.conditions import Condition, Film, FilmPad, FluxPad, Held, Inflow, Insulated, Mixed, MixedPad
from service.core.errors import NoSteadyState, NotPhysical
from service.core.faces import Face, axes_along
from service.core.lines.line import Line
from service.core.maps import FaceMap, Patch, Rectangle
from service.core.problem import Body
from service.core.split import lines_of


@dataclass(frozen=True)
class Pad:
    """A rectangle of a face. where: in the face's axes in the order x, y, z. name: what to call it, or None."""

    face: Face
    where: Rectangle
    name: str | None = None


def environment(body: Body) -> Body:
    """The body with every held value and ambient at zero and nothing given or generated."""
    zero = FaceMap.uniform(0.0)

    def background_at_rest(condition: Inflow | Film | Insulated) -> Film | Insulated:
        return Film(condition.coefficient, zero) if isinstance(condition, Film) else Insulated()

    def at_rest(condition: Condition) -> Condition:
        if isinstance(condition, Held):
            return Held(zero)
        if isinstance(condition, Mixed):
            return Mixed(background_at_rest(condition.background), tuple(pad_at_rest(pad) for pad in condition.pads))
        return background_at_rest(condition)

    def pad_at_rest(pad: MixedPad) -> MixedPad:
        if isinstance(pad, FluxPad):
            return replace(pad, inflow=0.0)
        if isinstance(pad, FilmPad):
            return replace(pad, ambient=0.0)
        return replace(pad, value=None if pad.value is None else 0.0, flow=None if pad.flow is None else 0.0)

    faces = {face: at_rest(condition) for face, condition in body.faces.items()}
    return replace(
        body,
        faces=faces,
        far_level=None,
        sources=(),
        layers=tuple(replace(layer, generation=0.0) for layer in body.layers),
    )


def with_flow_into(body: Body, pad: Pad, flow: float) -> Body:
    """A body at rest with a flow into one pad. On a film face a warmer ambient before the pad drives as much."""
    condition, (first, second) = body.faces[pad.face], axes_along(pad.face)
    density = flow / pad.where.area
    amount = density / condition.coefficient if isinstance(condition, Film) else density
    begins = body.begins[first], body.begins[second]
    driven = FaceMap.patches((body.size[first], body.size[second]), 0.0, [Patch(pad.where, amount)], begins=begins)
    drive = Film(condition.coefficient, driven) if isinstance(condition, Film) else Inflow(driven)
    return replace(body, faces={**body.faces, pad.face: drive})


def check_pads(body: Body, pads: Sequence[Pad]) -> None:
    """Raise NotPhysical or NoSteadyState for pads that have no influence matrix."""
    if body.varies:
        raise NotPhysical(
            "Rises are in proportion to flows only where the conductivity does not vary with the potential and no face "
            "radiates; leave the law or the emissivity out, or ask for the field itself.",
            ("law",) if body.law is not None else ("faces",),
        )
    lines = lines_of(body)
    for index, pad in enumerate(pads):
        if pad.face not in body.present_faces:
            raise NotPhysical(f"The body has no face {pad.face}.", ("pads", index, "face"))
        if isinstance(body.faces[pad.face], Mixed):
            raise NotPhysical(
                f"The face {pad.face} is mixed; ask for the resistances of its own pads, or put pads on other faces.",
                ("pads", index, "face"),
            )
        if isinstance(body.faces[pad.face], Held):
            raise NotPhysical(
                f"The face {pad.face} is held: a flow into it raises nothing; put pads on faces that are not.",
                ("pads", index, "face"),
            )
        first, second = axes_along(pad.face)
        where = pad.where
        fits = (
            body.begins[first] <= where.p_low < where.p_high <= body.size[first]
            and body.begins[second] <= where.q_low < where.q_high <= body.size[second]
            and math.isfinite(where.area)
        )
        if not fits:
            raise NotPhysical(
                f"Pad {index} reaches from ({where.p_low:g}, {where.q_low:g}) to ({where.p_high:g}, {where.q_high:g}); "
                f"it has to have a positive finite extent and lie in the face {pad.face}.",
                ("pads", index),
            )
    if pads and not body.has_mixed_face and (time_range.is_undying(lines) or not _comes_to_rest(lines)):
        raise NoSteadyState(
            "A flow of {amount} into a pad has no way out of this body: no face is held or has a film, so that its "
            "rise has no end.",
            1.0,
            ("faces",),
        )


def _comes_to_rest(lines: Sequence[Line]) -> bool:
    """Whether a flow into a body that decays as a power of time raises it to a steady level: three open axes do."""
    return time_range.has_decay(lines) or sum(line.is_endless for line in lines) == 3
