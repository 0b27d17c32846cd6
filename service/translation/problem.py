"""A problem as a client writes it to the solver's body, with what questions about it need to know."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

from pydantic_core import to_json

from service.core import errors
from service.core.conditions import Condition
from service.core.faces import AXES, FACES, Face, axis_of, is_high
from service.core.problem import Body, BoxSource
from service.models import problem as models
from service.models.faces import FaceCondition
from service.refusals import Issue, Path, RequestRefused
from service.settings import Settings
from service.translation.body import Material, path_of_layer, read_material
from service.translation.collector import Collector
from service.translation.conditions import ConditionReader
from service.translation.extent import AxisExtent, Extents
from service.translation.face_maps import FaceContents, NamedPatch
from service.units import Kind, UnitSystem, declare


@dataclass(frozen=True)
class ReadProblem:
    """A problem ready for the solver.

    given: as the client wrote it. body: in the solver's units. units: to read questions and write answers. extents: of
    its three axes. patches: of each face, in their order. filled: how many missing readings were filled on each face.
    """

    problem_id: str
    given: models.Problem
    potential: str
    units: UnitSystem
    body: Body
    extents: Extents
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

    material = read_material(collector, settings, problem.body)
    conditions, contents = _faces(collector, settings, problem, material)
    sources = _sources(collector, settings, problem.sources, material.extents)
    far = problem.body.far_level
    far_level = None if far is None else collector.read(Kind.POTENTIAL, far, ("body", "far_level"))
    collector.raise_if_any()
    try:
        body = replace(_body(material, conditions, sources), far_level=far_level)
    except errors.NotPhysical as error:
        issue = Issue(prefix + path_in_request(error, problem), error.message, "not-physical")
        raise RequestRefused((issue,)) from None
    return ReadProblem(
        problem_id_of(canonical(problem)),
        problem,
        problem.potential,
        units,
        body,
        material.extents,
        {face: read.patches for face, read in contents.items()},
        {face: read.filled for face, read in contents.items() if read.filled},
    )


def _body(material: Material, conditions: Mapping[Face, Condition], sources: tuple[BoxSource, ...]) -> Body:
    x, y, z = material.extents
    infinite = (x.is_infinite, y.is_infinite, z.is_infinite)
    if material.layers:
        stack = Body.stack((x.high, y.high), material.layers, conditions, sources, infinite)
        return replace(stack, law=material.law)
    size = (x.high, y.high, z.high)
    return Body(size, material.conductivity, conditions, sources, infinite=infinite, law=material.law)


def _faces(
    collector: Collector, settings: Settings, problem: models.Problem, material: Material
) -> tuple[dict[Face, Condition], dict[Face, FaceContents]]:
    conditions: dict[Face, Condition] = {}
    contents: dict[Face, FaceContents] = {}
    for face in FACES:
        condition: FaceCondition | None = getattr(problem.faces, face)
        extent = material.extents[axis_of(face)]
        if math.isinf(extent.high if is_high(face) else extent.low):
            if condition is not None:
                detail = f"{endless_in_words(extent, face)} has no face {face}; leave it out."
                collector.add(("faces", face), detail, "no-such-face")
        elif condition is None:
            collector.add(("faces", face), "This field is required.", "missing")
        else:
            reader = ConditionReader(collector, settings, face, material)
            read = reader.read(condition, ("faces", face))
            if read is not None:
                conditions[face], known = read
                if known is not None:
                    contents[face] = known
    return conditions, contents


def endless_in_words(extent: AxisExtent, face: Face) -> str:
    """The body a face is missing from, to begin a sentence with."""
    return f"A body that is {'infinite' if extent.is_infinite else 'semi-infinite'} along {face[0]}"


def _sources(
    collector: Collector, settings: Settings, sources: list[models.Source], extents: Extents
) -> tuple[BoxSource, ...]:
    if len(sources) > settings.sources:
        detail = f"There are {len(sources)} sources; at most {settings.sources} are allowed."
        collector.add(("sources",), detail, "too-many")
        return ()
    boxes = []
    for index, source in enumerate(sources):
        path: Path = ("sources", index)
        ends = [
            (extent.low, extent.high) if interval is None else collector.read_interval(interval, extent, (*path, axis))
            for axis, interval, extent in zip(AXES, (source.x, source.y, source.z), extents, strict=True)
        ]
        density = collector.read(Kind.DENSITY, source.density, (*path, "density"))
        boxes.append(BoxSource((ends[0][0], ends[1][0], ends[2][0]), (ends[0][1], ends[1][1], ends[2][1]), density))
    return tuple(boxes)


def path_in_request(error: errors.CoreError, problem: models.Problem) -> Path:
    """The part of the body that the solver names, as the client's document calls it."""
    path = error.field
    if path[:1] == ("layers",):
        return path_of_layer(path[1:], problem.body)
    if path[:1] == ("law",):
        return ("body", "conductivity_law", *path[1:])
    if path[:1] == ("conductivity",) and not isinstance(problem.body.conductivity, models.AxisConductivities):
        path = ("conductivity",)
    return ("body", *path) if path[:1] in (("size",), ("conductivity",), ("far_level",)) else path
