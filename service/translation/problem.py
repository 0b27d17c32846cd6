"""A problem as a client writes it to the solver's body, with what questions about it need to know."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, cast

from pydantic_core import to_json

from service.core import errors
from service.core.problem import (
    AXES,
    Body,
    BoxSource,
    Condition,
    Face,
    Film,
    Held,
    Inflow,
    Insulated,
)
from service.models import problem as models
from service.models.faces import FaceCondition, Faces, FilmFace, FluxFace, HeldFace
from service.refusals import Issue, Path, RequestRefused
from service.settings import Settings
from service.translation.collector import UNREAD, Collector
from service.translation.face_maps import FaceContents, FaceReader, NamedPatch
from service.units import Kind, UnitSystem, declare


@dataclass(frozen=True)
class ReadProblem:
    """A problem ready for the solver.

    body: in the solver's units. units: to read questions and write answers. patches: of each face, in their
    order. filled: how many missing readings were filled on each face.
    """

    problem_id: str
    potential: str
    units: UnitSystem
    body: Body
    patches: Mapping[Face, tuple[NamedPatch, ...]] = field(default_factory=dict)
    filled: Mapping[Face, int] = field(default_factory=dict)


def canonical(problem: models.Problem) -> bytes:
    """The one JSON text of a problem: keys sorted, nothing that was left out, numbers as doubles."""
    content = problem.model_dump(mode="json", exclude_none=True)
    return to_json(_sorted(content))


def problem_id_of(canonical_text: bytes) -> str:
    """Content digest of a problem: SHA-256 of its canonical text, in hexadecimal."""
    return hashlib.sha256(canonical_text).hexdigest()


def _sorted(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _sorted(value[key]) for key in sorted(value)}
    return [_sorted(entry) for entry in value] if isinstance(value, list) else value


def read_problem(problem: models.Problem, settings: Settings, prefix: Path = ()) -> ReadProblem:
    """The solver's body of a problem. Raises RequestRefused with a sentence for each field that cannot be
    used.

    prefix: path of the problem in the request body.
    """
    given = {Kind(name): unit for name, unit in problem.units.model_dump(exclude_none=True).items()}
    units, refused_units = declare(problem.potential, given)
    collector = Collector(units, prefix)
    for kind, detail in refused_units.items():
        collector.add(("units", kind.value), detail, "unit")

    size = _size(collector, problem.body.size)
    conductivity = _conductivity(collector, problem.body)
    conditions, contents = _faces(collector, settings, problem, size)
    sources = _sources(collector, settings, problem.sources, size)
    collector.raise_if_any()
    try:
        body = Body(size, conductivity, conditions, sources)
    except errors.NotPhysical as error:
        issue = Issue(prefix + path_in_request(error, problem), error.message, "not-physical")
        raise RequestRefused((issue,)) from None
    return ReadProblem(
        problem_id_of(canonical(problem)),
        problem.potential,
        units,
        body,
        {face: read.patches for face, read in contents.items()},
        {face: read.filled for face, read in contents.items() if read.filled},
    )


def _size(collector: Collector, size: models.Size) -> tuple[float, float, float]:
    lengths = []
    for axis, value in zip(AXES, (size.x, size.y, size.z), strict=True):
        path: Path = ("body", "size", axis)
        if value == "semi-infinite":
            if axis != "z":
                collector.add(path, "Only z can be semi-infinite; turn the body so that its long axis is z.", "size")
            lengths.append(math.inf if axis == "z" else UNREAD)
        else:
            lengths.append(collector.read_positive(Kind.LENGTH, value, path, f"The size along {axis}"))
    return lengths[0], lengths[1], lengths[2]


def _conductivity(collector: Collector, body: models.Body) -> tuple[float, float, float]:
    path: Path = ("body", "conductivity")
    along = body.conductivity
    if isinstance(along, models.AxisConductivities):
        kx, ky, kz = (
            collector.read_positive(Kind.CONDUCTIVITY, value, (*path, axis), f"The conductivity along {axis}")
            for axis, value in zip(AXES, (along.x, along.y, along.z), strict=True)
        )
        return kx, ky, kz
    value = collector.read_positive(Kind.CONDUCTIVITY, along, path, "The conductivity")
    return value, value, value


def _faces(
    collector: Collector, settings: Settings, problem: models.Problem, size: tuple[float, float, float]
) -> tuple[dict[Face, Condition], dict[Face, FaceContents]]:
    conditions: dict[Face, Condition] = {}
    contents: dict[Face, FaceContents | None] = {}
    is_endless = size[2] == math.inf
    if is_endless and problem.faces.z_high is not None:
        detail = "A semi-infinite body has no face z_high; leave it out."
        collector.add(("faces", "z_high"), detail, "no-such-face")
    if not is_endless and problem.faces.z_high is None:
        collector.add(("faces", "z_high"), "This field is required.", "missing")
    for name in Faces.model_fields:
        face = cast(Face, name)
        condition: FaceCondition | None = getattr(problem.faces, face)
        if condition is None or (is_endless and face == "z_high"):
            continue
        reader = FaceReader(collector, settings, face, size)
        read = _condition(collector, reader, condition, ("faces", face))
        if read is not None:
            conditions[face], contents[face] = read
    return conditions, {face: read for face, read in contents.items() if read is not None}


def _condition(
    collector: Collector, reader: FaceReader, condition: FaceCondition, path: Path
) -> tuple[Condition, FaceContents | None] | None:
    """The solver's condition and the contents of its map; None when something was wrong and was noted."""
    match condition:
        case HeldFace():
            read = reader.read(Kind.POTENTIAL, condition.value, (*path, "value"))
            return None if read is None else (Held(read.face_map), read)
        case FluxFace():
            read = reader.read(Kind.FLUX, condition.inflow, (*path, "inflow"))
            return None if read is None else (Inflow(read.face_map), read)
        case FilmFace():
            what = "The film coefficient"
            coefficient = collector.read_positive(
                Kind.FILM_COEFFICIENT, condition.coefficient, (*path, "coefficient"), what
            )
            read = reader.read(Kind.POTENTIAL, condition.ambient, (*path, "ambient"))
            return None if read is None else (Film(coefficient, read.face_map), read)
        case _:
            return Insulated(), None


def _sources(
    collector: Collector, settings: Settings, sources: list[models.Source], size: tuple[float, float, float]
) -> tuple[BoxSource, ...]:
    if len(sources) > settings.sources:
        detail = f"There are {len(sources)} sources; at most {settings.sources} are allowed."
        collector.add(("sources",), detail, "too-many")
        return ()
    boxes = []
    for index, source in enumerate(sources):
        path: Path = ("sources", index)
        ends = [
            (0.0, length) if interval is None else collector.read_interval(interval, length, (*path, axis))
            for axis, interval, length in zip(AXES, (source.x, source.y, source.z), size, strict=True)
        ]
        density = collector.read(Kind.DENSITY, source.density, (*path, "density"))
        boxes.append(BoxSource((ends[0][0], ends[1][0], ends[2][0]), (ends[0][1], ends[1][1], ends[2][1]), density))
    return tuple(boxes)


def path_in_request(error: errors.CoreError, problem: models.Problem) -> Path:
    """The part of the body that the solver names, as the client's document calls it."""
    path = error.field
    if path[:1] == ("conductivity",) and not isinstance(problem.body.conductivity, models.AxisConductivities):
        path = ("conductivity",)
    return ("body", *path) if path[:1] in (("size",), ("conductivity",)) else path
