"""Rise of pads per unit flow and the equivalent network: the question read, and its answer."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service import cost
from service.core import Solution, solve
from service.core.influence import Influence, check_pads, environment, influence, peaks, with_flow_into
from service.core.influence import Pad as FedPad
from service.core.maps import Rectangle
from service.core.network import Network, network
from service.core.problem import Held, axes_along
from service.core.solution import USUAL_ACCURACY
from service.models import pads as models
from service.models.evaluate import FacePart as FacePartModel
from service.refusals import Path
from service.settings import Settings
from service.translation import answers
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.pads import Pad, all_pads
from service.translation.places import PlaceReader
from service.translation.problem import ReadProblem
from service.translation.resistance_forms import count_negative
from service.units import Kind, UnitSystem

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class ResistancesWanted:
    """A question about resistances in the solver's numbers. tolerance: of a rise per unit flow."""

    pads: tuple[Pad, ...]
    peaks: bool
    tolerance: float


def read_resistances(
    question: models.ResistancesQuestion, problem: ReadProblem, solution: Solution, settings: Settings
) -> ResistancesWanted:
    """The question in the solver's numbers. Raises RequestRefused with a sentence for each field at fault."""
    collector = Collector(problem.units)
    ask = question.evaluate
    count = len(ask.pads or ())
    cost.check_count(collector, ("evaluate", "pads"), "pads", count, settings.pads)
    collector.raise_if_any()
    if ask.pads is None:
        pads = all_pads(collector, problem, ("evaluate",))
        cost.check_count(collector, ("evaluate",), "pads", len(pads), settings.pads)
    else:
        reader = PlaceReader(collector, settings, problem)
        read = (_pad(reader, problem, part, ("evaluate", "pads", index)) for index, part in enumerate(ask.pads))
        pads = [pad for pad in read if pad is not None]
    absolute = None
    accuracy = question.accuracy
    if accuracy is not None and accuracy.absolute is not None:
        kind, path = Kind.POTENTIAL_DIFFERENCE, ("accuracy", "absolute")
        absolute = collector.read_positive(kind, accuracy.absolute, path, "The accuracy")
    collector.raise_if_any()
    check_pads(problem.body, [_fed(pad) for pad in pads])
    tolerance = _tolerance(problem, pads, absolute, USUAL_ACCURACY if accuracy is None else accuracy.relative)
    return ResistancesWanted(tuple(pads), ask.peaks, tolerance)


def _pad(reader: PlaceReader, problem: ReadProblem, asked: FacePartModel, path: Path) -> Pad | None:
    """A rectangle into which a flow can go; None where none can, which is then noted."""
    part = reader.face_part(asked, path)
    if part is None:
        return None
    if isinstance(problem.body.faces[part.face], Held):
        detail = f"The face {part.face} is held; no flow can be given to a part of it."
        reader.collector.add((*path, "face"), detail, "held")
        return None
    if part.where is None or math.isinf(part.where.area):
        first, second = (problem.extents[axis] for axis in axes_along(part.face))
        whole = Rectangle(first.low, first.high, second.low, second.high)
        if part.where is not None or math.isinf(whole.area):
            detail = "A pad has to be finite; give an interval along each of the face's axes."
            reader.collector.add(path, detail, "endless")
            return None
        return Pad(part, whole)
    return Pad(part, part.where)


def _tolerance(problem: ReadProblem, pads: list[Pad], absolute: float | None, relative: float | None) -> float:
    """Largest error allowed of a rise per unit flow.

    absolute: of the rise for one declared unit of flow; or relative: to the span of the field that a flow into the
    largest pad alone raises, which is the least of all pads.
    """
    if absolute is not None:
        return absolute / _resistance_unit(problem.units)
    assert relative is not None
    largest = max(pads, key=lambda pad: pad.where.area)
    return relative * solve(with_flow_into(environment(problem.body), _fed(largest), 1.0)).span


def check_cost(wanted: ResistancesWanted, solution: Solution, settings: Settings, bytes_a_number: int) -> None:
    """Raise TooCostly when the answer would pass a limit: the number of pads bounds the work."""
    matrices = 6 if wanted.peaks else 4
    cost.check_answer(matrices * len(wanted.pads) ** 2 * bytes_a_number, settings.answer_bytes)


def answer_resistances(
    problem: ReadProblem, solution: Solution, wanted: ResistancesWanted, keep_going: KeepGoing
) -> dict[str, Any]:
    """The answer to a question about resistances, with numpy arrays for its matrices."""
    fed = [_fed(pad) for pad in wanted.pads]
    found = influence(problem.body, fed, tolerance=wanted.tolerance, keep_going=keep_going)
    keep_going()
    unit = _resistance_unit(problem.units)
    answer: dict[str, Any] = {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": _units(problem.units),
        "certificate": _certificate(found, wanted.tolerance, unit),
        "warnings": _warnings(found, wanted.tolerance, problem.units),
        "pads": [pad.described() for pad in wanted.pads],
        "mean": {"value": unit * found.mean, "error_bound": unit * found.bound},
    }
    if wanted.peaks:
        highest, bound = peaks(problem.body, fed, tolerance=wanted.tolerance, keep_going=keep_going)
        answer["peak"] = {"value": unit * highest, "error_bound": unit * bound}
    resistors = network(found.mean, found.bound)
    if resistors is None:
        message = "The pads are too much alike for the accuracy asked for: their matrix has no inverse with a bound."
        answer["warnings"].append(answers.warning("network-not-determined", message, "#/network"))
    return answer | {"network": None if resistors is None else _network(resistors, unit)}


def _fed(pad: Pad) -> FedPad:
    return FedPad(pad.face, pad.where, pad.part.name)


def _resistance_unit(units: UnitSystem) -> float:
    """A resistance of one in the solver's units, in the declared ones."""
    return 1.0 / units.write(Kind.FLOW, 1.0)


def _units(units: UnitSystem) -> dict[str, str]:
    potential, flow = units.declared[Kind.POTENTIAL_DIFFERENCE], units.declared[Kind.FLOW]
    return answers.units_shown(units) | {
        "resistance": f"{potential}/{_in_brackets(flow)}",
        "conductance": f"{flow}/{_in_brackets(potential)}",
    }


def _in_brackets(unit: str) -> str:
    return f"({unit})" if any(sign in unit for sign in "/* ") else unit


def _certificate(found: Influence, tolerance: float, unit: float) -> dict[str, Any]:
    return {
        "error_bound": unit * float(found.bound.max()),
        "accuracy_asked": unit * tolerance,
        "agreement": unit * found.agreement,
        "agreement_bound": unit * found.agreement_bound,
        "checked_entries": found.checked,
        "method": "one time integral for all pairs of pads on parallel faces; the general integral as the check",
    }


def _warnings(found: Influence, tolerance: float, units: UnitSystem) -> list[answers.Warning_]:
    largest = float(found.bound.max())
    if largest <= tolerance:
        return []
    unit, name = _resistance_unit(units), _units(units)["resistance"]
    message = (
        f"The largest bound of a rise is {unit * largest:.2g} {name}, wider than the accuracy asked for, "
        f"{unit * tolerance:.2g} {name}."
    )
    return [answers.warning("accuracy-not-reached", message, "#/mean/error_bound")]


def _network(resistors: Network, unit: float) -> dict[str, Any]:
    return {
        "between": resistors.between / unit,
        "between_error_bound": resistors.between_bound / unit,
        "to_environment": resistors.to_environment / unit,
        "to_environment_error_bound": resistors.to_environment_bound / unit,
        "negative": count_negative(resistors.between, resistors.to_environment),
    }
