"""The body in which one face alone is driven, and the level that its data are counted from."""

from __future__ import annotations

from dataclasses import replace

from service.core.conditions import Condition, Film, Held, Inflow, Insulated, map_of
from service.core.errors import NoSteadyState, NotPhysical
from service.core.faces import Face
from service.core.maps import FaceMap
from service.core.problem import Body
from service.core.solvability import check_steady_state
from service.core.split import reference_level


def level_of_others(body: Body, face: Face) -> float:
    """The level that most other faces share; where none has one that of the face itself."""
    others = {other: condition for other, condition in body.faces.items() if isinstance(condition, Held | Film)}
    own = others.pop(face, None)
    if not others:
        face_map = None if own is None else map_of(own)
        return 0.0 if face_map is None else face_map.usual
    return reference_level(replace(body, faces={**body.faces, face: Insulated()}))


def disturbed(body: Body, face: Face, reference: float, *, unit: bool) -> Body:
    """The body with nothing but the data of one face, counted from a level, or a unit of them."""
    if body.varies:
        raise NotPhysical(
            "Where the conductivity varies or a face radiates, a face has no disturbance of its own: what it does "
            "depends on all the others.",
            ("face",),
        )
    if body.has_mixed_face:
        raise NotPhysical("The reach of a face is not offered for a body that has mixed faces.", ("face",))
    faces = {other: _quiet(condition) for other, condition in body.faces.items()}
    faces[face] = _driven(body.faces[face], reference, unit=unit)
    layers = tuple(replace(layer, generation=0.0) for layer in body.layers)
    quiet = replace(body, faces=faces, sources=(), layers=layers)
    try:
        check_steady_state(quiet)
    except NoSteadyState:
        raise NotPhysical(
            f"Nothing takes up what the face {face} gives, so it alone has no steady field and reaches everywhere.",
            ("face",),
        ) from None
    return quiet


def _quiet(condition: Condition) -> Condition:
    zero = FaceMap.uniform(0.0)
    match condition:
        case Held():
            return Held(zero)
        case Film():
            return replace(condition, ambient=zero)
        case _:
            return Insulated()


def _driven(condition: Condition, reference: float, *, unit: bool) -> Condition:
    one = FaceMap.uniform(1.0)
    match condition:
        case Held():
            return Held(one if unit else condition.value.minus(reference))
        case Film():
            return replace(condition, ambient=one if unit else condition.ambient.minus(reference))
        case Inflow():
            return Inflow(one) if unit else condition
        case _:
            return Inflow(one) if unit else Insulated()
