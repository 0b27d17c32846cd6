"""Results with names, read: what each asks of the solver, and in which unit it is told."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from service.core.faces import AXES, Face, axes_along, axis_of
from service.core.maps import Rectangle
from service.core.sections import whole_face
from service.models import evaluate as places
from service.models import results as models
from service.refusals import Path
from service.settings import Settings
from service.translation.collector import UNREAD, Collector
from service.translation.places import Corner, FacePart, PlaceReader, PlanePart
from service.translation.problem import ReadProblem
from service.translation.result_units import Measure, measures_of
from service.unit_text import UnitError
from service.units import Kind


@dataclass(frozen=True)
class ResultInfo:
    """What is known of a result before it is computed.

    name: the client's. kind: the word it was asked for with. measure: its unit, and that of its error bound.
    """

    name: str
    kind: str
    measure: Measure


@dataclass(frozen=True)
class AtPlace:
    """What is asked of the field at a place. along: the axis of a component, None for the size of the vector."""

    quantity: Literal["potential", "gradient", "flux"]
    place: Corner
    along: int | None = None


@dataclass(frozen=True)
class MeanOver:
    """The mean potential over a rectangle of a face. part: as it was named."""

    part: FacePart
    where: Rectangle


@dataclass(frozen=True)
class ExtremeIn:
    """The highest (sign 1) or lowest (sign -1) potential in a box, in the whole body where that is None."""

    sign: float
    box: tuple[Corner, Corner] | None


@dataclass(frozen=True)
class InflowOf:
    """The flow into the body through a part of a face. gap: width left out along jumps, or None."""

    part: FacePart
    gap: float | None


@dataclass(frozen=True)
class FlowThrough:
    """The flow through a plane along its axis. gap: as above."""

    plane: PlanePart
    gap: float | None


@dataclass(frozen=True)
class ReachOf:
    """How far what the data of a face drive reaches until it has fallen below a fraction."""

    face: Face
    fraction: float


@dataclass(frozen=True)
class Combined:
    """A difference or ratio of two results before it, by their numbers."""

    is_ratio: bool
    first: int
    second: int


Wanted = AtPlace | MeanOver | ExtremeIn | InflowOf | FlowThrough | ReachOf | Combined


@dataclass(frozen=True)
class ReadResults:
    """Results in the solver's numbers, in the order they were asked for.

    infos, wanted: of each. path: where the list of them stands in the request.
    """

    infos: tuple[ResultInfo, ...]
    wanted: tuple[Wanted, ...]
    path: Path


def read_results(
    collector: Collector,
    asked: Sequence[models.Result],
    problem: ReadProblem,
    settings: Settings,
    path: Path = ("results",),
) -> ReadResults:
    """The results in the solver's numbers. Every field at fault is noted in the collector, which then has to refuse."""
    reader = _ResultReader(collector, settings, problem)
    for index, result in enumerate(asked):
        reader.read(result, (*path, index))
    return ReadResults(tuple(reader.infos), tuple(reader.wanted), path)


# What stands for a result at fault; the request is refused before anyone computes it.
_AT_FAULT = AtPlace("potential", (UNREAD, UNREAD, UNREAD))


class _ResultReader:
    """Reads results one after the other, noting every field at fault."""

    def __init__(self, collector: Collector, settings: Settings, problem: ReadProblem) -> None:
        self.collector = collector
        self.problem = problem
        self.places = PlaceReader(collector, settings, problem)
        self.measures = measures_of(problem.units)
        self.infos: list[ResultInfo] = []
        self.wanted: list[Wanted] = []
        self.numbers: dict[str, int] = {}

    def read(self, result: models.Result, path: Path) -> None:
        """Read one result and remember it under its name."""
        if result.name in self.numbers:
            detail = f'Another result is called "{result.name}"; each name is used once.'
            self.collector.add((*path, "name"), detail, "duplicate-name")
        if isinstance(result, models.DifferenceResult | models.RatioResult):
            wanted, measure = self._combined(result, path)
        else:
            wanted, measure = self._by_itself(result, path), self.measures[result.result]
        self.numbers.setdefault(result.name, len(self.infos))
        self.infos.append(ResultInfo(result.name, result.result, measure))
        self.wanted.append(wanted)

    def _by_itself(self, result: models.Result, path: Path) -> Wanted:
        """A result that is not made of others."""
        match result:
            case models.PotentialResult():
                return AtPlace("potential", self._place(result.at, result.side, path))
            case models.GradientResult() | models.FluxResult():
                along = None if result.along is None else AXES.index(result.along)
                return AtPlace(result.result, self._place(result.at, result.side, path), along)
            case models.MeanResult():
                return self._mean(result, path)
            case models.HighestResult() | models.LowestResult():
                return self._extreme(result, path)
            case models.InflowResult():
                part, gap = self.places.face_part(result, path), self._gap(result.edge_gap, path)
                return _AT_FAULT if part is None else InflowOf(part, gap)
            case models.FlowResult():
                plane, gap = self.places.plane(result, path), self._gap(result.edge_gap, path)
                return _AT_FAULT if plane is None else FlowThrough(plane, gap)
            case models.ReachResult():
                return self._reach(result, path)
        raise TypeError(f"no reader for {type(result).__name__}")

    def _place(self, at: Sequence[float | str], side: places.Side | None, path: Path) -> Corner:
        """The place as the solver is asked for it; words stand for the sides of the body and its middle."""
        coordinates = [self._coordinate(value, axis, (*path, "at", axis)) for axis, value in enumerate(at)]
        point = places.Point.model_construct(name=None, at=coordinates, side=side)
        return self.places.point(point, path).place

    def _coordinate(self, value: float | str, axis: int, path: Path) -> float | str:
        if value not in ("low", "middle", "high"):
            return value
        extent = self.problem.extents[axis]
        ends = {"low": extent.low, "high": extent.high, "middle": 0.5 * (extent.low + extent.high)}
        place = ends[str(value)]
        if math.isfinite(place):
            return place
        if not math.isnan(place):
            which = "middle" if value == "middle" else f"{value} side"
            detail = f"The body has no {which} along {AXES[axis]}, where it does not end; give a length."
            self.collector.add(path, detail, "no-such-side")
        return UNREAD

    def _mean(self, result: models.MeanResult, path: Path) -> Wanted:
        part = self.places.face_part(result, path)
        if part is None:
            return _AT_FAULT
        if self.places.is_endless(part):
            detail = "The mean over an endless part is that of the far end; give a finite rectangle."
            self.collector.add(path, detail, "endless")
        return MeanOver(part, part.where or whole_face(self.problem.body, axis_of(part.face)))

    def _extreme(self, result: models.HighestResult | models.LowestResult, path: Path) -> Wanted:
        sign = 1.0 if isinstance(result, models.HighestResult) else -1.0
        if result.face is None and result.layer is None and result.box is None:
            return ExtremeIn(sign, None)
        box = self._region(result, path)
        return _AT_FAULT if box is None else ExtremeIn(sign, box)

    def _region(self, result: models.HighestResult | models.LowestResult, path: Path) -> tuple[Corner, Corner] | None:
        """The box a result is looked for in; None when there is none, which is then noted."""
        if result.box is not None:
            return self.places.box(result.box, (*path, "box"))
        body = self.problem.body
        low, high = list(body.begins), list(body.size)
        if result.face is not None:
            asked = places.FacePart.model_construct(
                face=result.face, patch=result.patch, x=result.x, y=result.y, z=result.z, name=None
            )
            part = self.places.face_part(asked, path)
            if part is None:
                return None
            axis, (first, second) = axis_of(part.face), axes_along(part.face)
            where = part.where or whole_face(body, axis)
            low[first], high[first], low[second], high[second] = where.p_low, where.p_high, where.q_low, where.q_high
            low[axis] = high[axis] = body.end_of(part.face)
        if result.layer is not None:
            index = self.places.layer(result.layer, (*path, "layer"))
            if index is None:
                return None
            low[2], high[2] = self.places.sides_of_layer(index)
        return (low[0], low[1], low[2]), (high[0], high[1], high[2])

    def _gap(self, gap: float | str | None, path: Path) -> float | None:
        if gap is None:
            return None
        return self.collector.read_positive(Kind.LENGTH, gap, (*path, "edge_gap"), "The edge gap")

    def _reach(self, result: models.ReachResult, path: Path) -> Wanted:
        self.places.is_present(result.face, (*path, "face"))
        body = self.problem.body
        if body.has_mixed_face:
            detail = (
                "How far a face reaches is told of bodies without mixed faces. Give each face one condition, or ask "
                "for the potential at places along a line from the face."
            )
            self.collector.add(path, detail, "mixed-faces")
        if body.varies:
            detail = (
                "How far a face reaches is told where the conductivity does not vary with the potential and no face "
                "radiates. Leave `conductivity_law` and `emissivity` out, or ask for the potential at places along a "
                "line from the face."
            )
            self.collector.add(path, detail, "varies")
        return ReachOf(result.face, result.fraction)

    def _combined(self, result: models.DifferenceResult | models.RatioResult, path: Path) -> tuple[Wanted, Measure]:
        """A difference or ratio of results that stand before it."""
        is_ratio = isinstance(result, models.RatioResult)
        other = "over" if isinstance(result, models.RatioResult) else "less"
        named = result.over if isinstance(result, models.RatioResult) else result.less
        first = self._earlier(result.of, (*path, "of"))
        second = self._earlier(named, (*path, other))
        if first is None or second is None:
            return _AT_FAULT, self.measures["potential"]
        of, by = self.infos[first].measure, self.infos[second].measure
        if not is_ratio:
            try:
                return Combined(False, first, second), of.less(by)
            except UnitError as error:
                self.collector.add((*path, "less"), str(error), "unit")
                return _AT_FAULT, of
        for measure, at in ((of, "of"), (by, "over")):
            if not measure.has_own_zero:
                detail = (
                    f"A level in {measure.unit} has no ratio to anything, since its zero is only agreed on; take a "
                    "difference of two levels."
                )
                self.collector.add((*path, at), detail, "unit")
        return Combined(True, first, second), of.over(by)

    def _earlier(self, name: str, path: Path) -> int | None:
        """The number of a result that stands before; None when there is none, which is then noted."""
        number = self.numbers.get(name)
        if number is None:
            detail = f'No result before this one is called "{name}".'
            self.collector.add(path, detail, "no-such-result")
        return number
