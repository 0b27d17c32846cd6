"""What can be known on a face: the conditions, and what makes one physical.

An inflow is positive into the body. Pads and maps lie in the face's own axes, in the order x, y, z.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from service.core.errors import NotPhysical
from service.core.faces import Face
from service.core.laws import Radiation
from service.core.maps import FaceMap, Rectangle


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


def map_of(condition: Condition) -> FaceMap | None:
    """The data of a face, or None for an insulated one; of a mixed face those of its background."""
    match condition:
        case Held(value=face_map) | Inflow(inflow=face_map) | Film(ambient=face_map):
            return face_map
        case Insulated():
            return None
        case Mixed(background=background):
            return map_of(background)


def fixes_level(condition: Condition) -> bool:
    """Whether a face tells the level of the potential wherever nothing else does: pads of a mixed face do not."""
    return isinstance(condition, Held | Film) or (
        isinstance(condition, Mixed) and isinstance(condition.background, Film)
    )


def check_film(film: Film, face: Face) -> None:
    """Raise NotPhysical for a film, or radiation beside it, that cannot be."""
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


def check_mixed(mixed: Mixed, face: Face, begins: tuple[float, float], ends: tuple[float, float]) -> None:
    """Raise NotPhysical for a background or pads that do not fit a face from where it begins to where it ends."""
    if isinstance(mixed.background, Film):
        check_film(mixed.background, face)
    background = map_of(mixed.background)
    if background is not None and not background.is_uniform:
        raise NotPhysical(
            f"The background of {face} varies; beside pads it has one value all over.",
            ("faces", face, "background"),
        )
    if not mixed.pads:
        raise NotPhysical(f"The mixed face {face} has no pads; it needs at least one.", ("faces", face, "pads"))
    for index, pad in enumerate(mixed.pads):
        where: tuple[str | int, ...] = ("faces", face, "pads", index)
        _check_pad(pad, f"Pad {index} of {face}", where)
        spot = pad.where
        inside = (
            begins[0] <= spot.p_low < spot.p_high <= ends[0]
            and begins[1] <= spot.q_low < spot.q_high <= ends[1]
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
