"""Pads and their potentials: the question read, and its answer."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service import cost
from service.core import Bounded, Place, Solution
from service.core.conditions import HeldPad, Inflow, Mixed
from service.core.faces import Face, axes_along, axis_of
from service.core.maps import Rectangle
from service.models import pads as models
from service.refusals import Path
from service.settings import Settings
from service.translation import answers
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.fields import describe_part
from service.translation.mixed_pads import flow_of, flow_tolerance, mixed_pad, pad_answers
from service.translation.places import FacePart, PlaceReader
from service.translation.problem import ReadProblem
from service.units import Kind, UnitSystem

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Pad:
    """A rectangle of a face that answers are about."""

    part: FacePart
    where: Rectangle

    @property
    def face(self) -> Face:
        """Its face."""
        return self.part.face

    def described(self) -> dict[str, Any]:
        """Name, face, number and rectangle, as far as it has them, and its area."""
        return describe_part(self.part) | {"area": self.where.area}

    def centre(self, problem: ReadProblem) -> tuple[float, float, float]:
        """The middle of the pad."""
        place = [0.0, 0.0, 0.0]
        first, second = axes_along(self.face)
        place[axis_of(self.face)] = problem.body.end_of(self.face)
        place[first] = 0.5 * (self.where.p_low + self.where.p_high)
        place[second] = 0.5 * (self.where.q_low + self.where.q_high)
        return place[0], place[1], place[2]


def pads_of_face(problem: ReadProblem, face: Face) -> list[Pad]:
    """The pads of a face, none where it has another condition or no patches."""
    if not isinstance(problem.body.faces[face], Inflow | Mixed):
        return []
    return [
        Pad(FacePart(patch.name, face, index, patch.where), patch.where)
        for index, patch in enumerate(problem.patches.get(face, ()))
        if math.isfinite(patch.where.area)
    ]


def all_pads(collector: Collector, problem: ReadProblem, path: Path) -> list[Pad]:
    """Every pad of the problem; noted where there is none."""
    pads = [pad for face in problem.body.present_faces for pad in pads_of_face(problem, face)]
    if not pads:
        collector.add(path, _no_pads("The problem"), "no-pads")
    return pads


@dataclass(frozen=True)
class PadsWanted:
    """A question about pads in the solver's numbers."""

    pads: tuple[Pad, ...]
    tolerance: float


def read_pads(
    question: models.PadsQuestion, problem: ReadProblem, solution: Solution, settings: Settings
) -> PadsWanted:
    """The question in the solver's numbers. Raises RequestRefused with a sentence for each field at fault."""
    collector = Collector(problem.units)
    ask = question.evaluate
    reader = PlaceReader(collector, settings, problem)
    pads: list[Pad] = []
    if ask.faces is None and ask.pads is None:
        pads = all_pads(collector, problem, ("evaluate",))
    for index, face in enumerate(ask.faces or ()):
        path: Path = ("evaluate", "faces", index)
        if reader.is_present(face, path):
            found = pads_of_face(problem, face)
            pads += found
            if not found:
                collector.add(path, _no_pads(f"The face {face}"), "no-pads")
    for index, reference in enumerate(ask.pads or ()):
        pad = _pad(reader, problem, reference, ("evaluate", "pads", index))
        if pad is not None:
            pads.append(pad)
    cost.check_count(collector, ("evaluate",), "pads", len(pads), settings.pads)
    tolerance = answers.read_tolerance(collector, question.accuracy, solution)
    collector.raise_if_any()
    return PadsWanted(tuple(pads), tolerance)


def _no_pads(subject: str) -> str:
    return f"{subject} has no pads: these are the patches of a face with a given flow and the pads of a mixed face."


def _pad(reader: PlaceReader, problem: ReadProblem, reference: models.PadReference, path: Path) -> Pad | None:
    """The pad a question names; None when there is none, which is then noted."""
    if not reader.is_present(reference.face, (*path, "face")):
        return None
    pads = pads_of_face(problem, reference.face)
    for pad in pads:
        if reference.patch in (pad.part.patch, pad.part.name):
            return pad
    if pads:
        detail = f"There is no such pad; the face {reference.face} has the pads 0 to {len(pads) - 1}."
        reader.collector.add((*path, "patch"), detail, "no-such-patch")
    else:
        reader.collector.add((*path, "face"), _no_pads(f"The face {reference.face}"), "no-pads")
    return None


def check_cost(wanted: PadsWanted, solution: Solution, settings: Settings, bytes_a_number: int) -> None:
    """Raise TooCostly when the middles of the pads would pass a limit; the time limit bounds means and peaks."""
    cost.check_work([solution.estimate_points(len(wanted.pads), tolerance=wanted.tolerance)], settings)


def answer_pads(problem: ReadProblem, solution: Solution, wanted: PadsWanted, keep_going: KeepGoing) -> dict[str, Any]:
    """The answer to a question about pads."""
    tolerance = wanted.tolerance
    mixed = pad_answers(solution, tolerance)
    of_flows = flow_tolerance(problem.units, solution, mixed, tolerance)
    units = problem.units.declared
    centres = np.array([pad.centre(problem) for pad in wanted.pads])
    # The peaks first: they ask most of the accuracy, and say best which one can be promised.
    peaks = _peaks(solution, wanted, keep_going)
    in_middles = _in_middles(problem, solution, wanted, centres, keep_going)
    bounds = [float(place.error_bound) for place in in_middles]
    means = _means(solution, wanted, keep_going)
    found = []
    warnings = answers.problem_warnings(problem, solution)
    columns = zip(wanted.pads, in_middles, means, peaks, strict=True)
    for index, (pad, in_middle, mean, largest) in enumerate(columns):
        keep_going()
        passed = mixed_pad(mixed, pad.part)
        if passed is not None:
            mean = passed.potential
        bounds += [float(mean.error_bound), float(largest.error_bound)]
        for name, known in (("mean", mean), ("largest", largest)):
            unit, where = units[Kind.POTENTIAL_DIFFERENCE], f"#/pads/{index}/{name}"
            warnings += answers.missed_accuracy(float(known.error_bound), tolerance, unit, where)
        if passed is None:
            flow = _flow(problem.units, solution, pad, tolerance)
        else:
            of_pad, where = flow_of(problem.units, passed), f"#/pads/{index}/flow"
            assert of_flows is not None
            warnings += answers.missed_accuracy(of_pad["error_bound"], of_flows, units[Kind.FLOW], where)
            flow = {**of_pad}
        found.append(
            pad.described()
            | {
                "flow": flow,
                "mean": _bounded(mean),
                "largest": _at(problem, largest),
                "centre": _at(problem, in_middle),
            }
        )
    return {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": answers.units_shown(problem.units),
        "certificate": answers.certificate(problem, solution, centres, tolerance, bounds),
        "warnings": warnings + answers.poorly_known(solution, bounds, units[Kind.POTENTIAL_DIFFERENCE]),
        "pads": found,
    }


def _in_middles(
    problem: ReadProblem, solution: Solution, wanted: PadsWanted, centres: FloatArray, keep_going: KeepGoing
) -> list[Place]:
    """The potential in the middle of each pad: those of held pads are levels, known better than the field of others."""
    held = np.array([is_held(problem, pad) for pad in wanted.pads])
    potential, bound = np.zeros(len(centres)), np.zeros(len(centres))
    for some in (np.flatnonzero(~held), *np.flatnonzero(held)[:, None]):
        if some.size:
            found = solution.field_at(centres[some], tolerance=wanted.tolerance, keep_going=keep_going)
            potential[some], bound[some] = found.potential, found.potential_bound
    places = zip(centres, potential, bound, strict=True)
    return [Place((at[0], at[1], at[2]), float(value), float(off), "") for at, value, off in places]


def is_held(problem: ReadProblem, pad: Pad) -> bool:
    """Whether a pad is one of a mixed face that has one potential all over."""
    condition, patch = problem.body.faces[pad.face], pad.part.patch
    return isinstance(condition, Mixed) and patch is not None and isinstance(condition.pads[patch], HeldPad)


def _peaks(solution: Solution, wanted: PadsWanted, keep_going: KeepGoing) -> list[Place]:
    """The largest potential of each pad."""
    found = []
    for pad in wanted.pads:
        keep_going()
        found.append(solution.peak(pad.face, pad.where, tolerance=wanted.tolerance, keep_going=keep_going))
    return found


def _means(solution: Solution, wanted: PadsWanted, keep_going: KeepGoing) -> list[Bounded]:
    """Means over all pads, those of one face at once."""
    found: list[Bounded | None] = [None] * len(wanted.pads)
    for face in dict.fromkeys(pad.face for pad in wanted.pads):
        keep_going()
        there = [index for index, pad in enumerate(wanted.pads) if pad.face == face]
        rectangles = [wanted.pads[index].where for index in there]
        for index, mean in zip(there, solution.means(face, rectangles, tolerance=wanted.tolerance), strict=True):
            found[index] = mean
    return [mean for mean in found if mean is not None]


def _flow(units: UnitSystem, solution: Solution, pad: Pad, tolerance: float) -> dict[str, float | None]:
    total = solution.face_total(pad.face, pad.where, tolerance=tolerance)
    if total.value is None or total.error_bound is None:
        return {"value": None, "error_bound": None}
    return {
        "value": units.write(Kind.FLOW, float(total.value)),
        "error_bound": units.write(Kind.FLOW, float(total.error_bound)),
    }


def _bounded(number: Bounded) -> dict[str, float]:
    return {"value": float(number.value), "error_bound": float(number.error_bound)}


def _at(problem: ReadProblem, place: Place) -> dict[str, Any]:
    return {
        "value": float(place.value),
        "error_bound": float(place.error_bound),
        "at": answers.place(problem, place.position),
    }
