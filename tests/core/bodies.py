"""A handful of bodies of every kind that several tests ask different things of."""

from __future__ import annotations

import math

from service.core import (
    FACES,
    Body,
    BoxSource,
    Condition,
    Face,
    FaceMap,
    Film,
    Held,
    Inflow,
    Insulated,
    Patch,
    Rectangle,
)

INSULATED = Insulated()


def held(value: float) -> Held:
    """A face held at one value."""
    return Held(FaceMap.uniform(value))


def film(coefficient: float, ambient: float) -> Film:
    """A film face with one ambient."""
    return Film(coefficient, FaceMap.uniform(ambient))


def pad(p: float, q: float, value: float, background: float = 0.0) -> FaceMap:
    """A patch inside a face of p by q; along an endless axis from 0.5 to 1.2."""
    low, high = (0.3 * q, 0.7 * q) if math.isfinite(q) else (0.5, 1.2)
    return FaceMap.patches((p, q), background, [Patch(Rectangle(0.2 * p, 0.6 * p, low, high), value)])


def readings(p: float, q: float) -> FaceMap:
    """Readings on uneven axes."""
    table = [[1, 2, 3, 4], [2, 5, 1, 0], [7, 1, 1, 2]]
    return FaceMap.readings((p, q), [0, 0.3 * p, p], [0, 0.5 * q, 0.8 * q, q], table)


def all_held(value: float = 0.0, **others: Condition) -> dict[Face, Condition]:
    """Six faces held at one value but for those named."""
    faces: dict[Face, Condition] = {face: held(value) for face in FACES}
    return faces | others  # type: ignore[return-value]


def all_insulated(**others: Condition) -> dict[Face, Condition]:
    """Six insulated faces but for those named."""
    faces: dict[Face, Condition] = dict.fromkeys(FACES, INSULATED)
    return faces | others  # type: ignore[return-value]


def without_far_face(faces: dict[Face, Condition]) -> dict[Face, Condition]:
    """The faces of a bar."""
    return {face: condition for face, condition in faces.items() if face != "z_high"}


UNIT = (1.0, 1.0, 1.0)
ENDLESS = math.inf

BODIES: dict[str, Body] = {
    "cube, one face held": Body(UNIT, UNIT, all_held(z_low=held(1.0))),
    "square bar, end held": Body((1.0, 1.0, ENDLESS), UNIT, without_far_face(all_held(z_low=held(1.0)))),
    "bar driven from its sides": Body(
        (1.0, 1.5, ENDLESS),
        (1.0, 2.0, 1.0),
        {
            "x_low": Held(pad(1.5, ENDLESS, 50.0)),
            "x_high": film(3.0, 2.0),
            "y_low": INSULATED,
            "y_high": Inflow(pad(1.0, ENDLESS, 2.0)),
            "z_low": Held(readings(1.0, 1.5)),
        },
    ),
    "insulated bar, film end": Body(
        (1.0, 1.5, ENDLESS),
        (1.0, 2.0, 1.0),
        without_far_face(all_insulated(x_low=Inflow(pad(1.5, ENDLESS, 50.0)), z_low=Film(5.0, readings(1.0, 1.5)))),
    ),
    "insulated bar, balanced inflows without end": Body(
        (1.0, 1.0, ENDLESS),
        (1.0, 2.0, 1.0),
        without_far_face(all_insulated(x_low=Inflow(FaceMap.uniform(1.0)), x_high=Inflow(FaceMap.uniform(-1.0)))),
    ),
    "every kind of face and two sources": Body(
        (1.0, 2.0, 0.7),
        (1.0, 5.0, 0.3),
        {
            "x_low": film(2.0, 3.0),
            "x_high": Held(readings(2.0, 0.7)),
            "y_low": INSULATED,
            "y_high": Inflow(pad(1.0, 0.7, 50.0)),
            "z_low": Held(pad(1.0, 2.0, 50.0)),
            "z_high": Film(0.1, readings(1.0, 2.0)),
        },
        (BoxSource((0.1, 0.2, 0.3), (0.5, 1.0, 0.6), 10.0), BoxSource((0.0, 0.0, 0.0), (1.0, 2.0, 0.7), 3.0)),
    ),
    "closed body, balanced": Body(
        (1.0, 2.0, 0.7),
        (1.0, 5.0, 0.3),
        all_insulated(
            x_low=Inflow(FaceMap.uniform(3.0)),
            y_high=Inflow(FaceMap.patches((1.0, 0.7), 0.0, [Patch(Rectangle(0.0, 0.5, 0.0, 0.7), -12.0)])),
        ),
        (BoxSource((0.0, 0.0, 0.0), (1.0, 1.0, 0.7), -3.0), BoxSource((0.0, 1.0, 0.0), (1.0, 2.0, 0.7), 3.0)),
    ),
    "thin plate": Body(
        (1.0, 1.0, 1e-4),
        UNIT,
        {
            "x_low": held(1.0),
            "x_high": held(0.0),
            "y_low": film(1.0, 0.0),
            "y_high": INSULATED,
            "z_low": film(2.0, 3.0),
            "z_high": Inflow(pad(1.0, 1.0, 50.0)),
        },
    ),
    "block with a heated box inside": Body(
        (1.0, 2.0, 3.0), UNIT, all_held(), (BoxSource((0.2, 0.0, 0.5), (0.4, 2.0, 3.0), 1.0),)
    ),
}
