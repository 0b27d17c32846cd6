"""Published figures as test data: each quantity with its source, printed precision and ten-digit value."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

from service.core import Face
from tests.core.reference.cases import Case, Cells, Data, Stack, Wall

KINDS = {"held": "D", "inflow": "N", "film": "R"}


@dataclass(frozen=True)
class Printed:
    """A figure as printed; `agrees` is false where the printed figure itself is off."""

    value: float
    text: str
    tolerance: float
    agrees: bool


@dataclass(frozen=True)
class Quantity:
    """One number of a published case.

    how: how the number is got from a solution, a key of `measures.MEASURES`; details: what that needs to
    know.
    value: independent value to ten digits or more, None where only a limit is stated.
    """

    case_id: str
    name: str
    source: str
    how: str
    details: Mapping[str, Any]
    case: Case | Stack | None
    printed: Printed | None
    value: float | None

    def __str__(self) -> str:
        return f"{self.case_id}: {self.name}"


@cache
def published_quantities() -> tuple[Quantity, ...]:
    """Everything in published.json."""
    document = json.loads(Path(__file__).with_name("published.json").read_text(encoding="utf-8"))
    return tuple(_quantity(case, quantity) for case in document["cases"] for quantity in case["quantities"])


def _quantity(case: Mapping[str, Any], quantity: Mapping[str, Any]) -> Quantity:
    printed = quantity.get("printed")
    value = quantity.get("value")
    return Quantity(
        case["id"],
        quantity["name"],
        case["source"],
        quantity["how"],
        quantity,
        _case(case["body"], quantity) if "body" in case else None,
        None if printed is None else Printed(printed["value"], printed["as"], printed["tolerance"], printed["agrees"]),
        None if value is None else float(value),
    )


def _case(body: Mapping[str, Any], quantity: Mapping[str, Any]) -> Case | Stack:
    """The case's body with the changes a quantity asks for: another size, faces held or insulated."""
    if "layers" in body:
        return _stack(body)
    size = [math.inf if s == "semi-infinite" else float(s) for s in quantity.get("size", body["size"])]
    walls: dict[Face, Wall] = {face: _wall(wall) for face, wall in body["faces"].items()}
    walls |= {face: Wall("D", float(value)) for face, value in quantity.get("held_at", {}).items()}
    walls |= {face: Wall("N") for face in quantity.get("insulated", ())}
    source = float(body["source"])
    whole = ((0.0, 0.0, 0.0), (size[0], size[1], size[2]), source)
    kx, ky, kz = map(float, body["conductivity"])
    return Case((size[0], size[1], size[2]), (kx, ky, kz), walls, (whole,) if source else ())


def _stack(body: Mapping[str, Any]) -> Stack:
    """A stack, its layers from z_low up."""
    layers = []
    for layer in body["layers"]:
        kx, ky, kz = map(float, layer["conductivity"])
        layers.append((float(layer["thickness"]), (kx, ky, kz), float(layer.get("contact_below", math.inf)), 0.0))
    a, b = map(float, body["section"])
    return Stack((a, b), tuple(layers), {face: _wall(wall) for face, wall in body["faces"].items()})


def _wall(wall: Mapping[str, Any]) -> Wall:
    return Wall(KINDS[wall["condition"]], _data(wall["data"]), float(wall.get("coefficient", 0.0)))


def _data(data: Any) -> Data:
    if isinstance(data, Mapping):
        patches = [(float(a), float(b), float(c), float(d), float(v)) for a, b, c, d, v in data["patches"]]
        return Cells(float(data["background"]), tuple(patches))
    return float(data)
