"""Rise of pads per unit flow and the equivalent network: the question read, and its answer."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from service import cost
from service.core import Solution
from service.core.conditions import Held
from service.core.faces import axes_along, axis_of
from service.core.maps import Rectangle
from service.core.network import Network
from service.core.solution import USUAL_ACCURACY
from service.models import pads as models
from service.models.evaluate import FacePart as FacePartModel
from service.refusals import Path
from service.settings import Settings
from service.translation import answers
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.fed_resistances import check_fed, fed_resistances, span_of_rises
from service.translation.held_resistances import are_held, held_resistances
from service.translation.mixed_pads import USUAL_OF_FLOWS
from service.translation.pads import Pad, all_pads
from service.translation.places import PlaceReader
from service.translation.problem import ReadProblem
from service.translation.resistance_forms import count_negative
from service.translation.resistance_parts import Resistances, Rises
from service.unit_text import inverse_of
from service.units import Kind, UnitSystem

# Multiplications of one entry between faces that are not parallel, and of one search for a peak, as measured.
ONE_BY_ONE, SEARCH = 5e6, 4e7


@dataclass(frozen=True)
class ResistancesWanted:
    """A question about resistances in the solver's numbers.

    are_held: whether the pads are held ones of mixed faces. tolerance: of a rise per unit flow; of held pads that of
    their conductances, as part of the largest.
    """

    pads: tuple[Pad, ...]
    peaks: bool
    are_held: bool
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
    held, pads = are_held(collector, problem, pads, is_named=ask.pads is not None)
    absolute = None
    accuracy = question.accuracy
    if accuracy is not None and accuracy.absolute is not None:
        kind, path = Kind.POTENTIAL_DIFFERENCE, ("accuracy", "absolute")
        absolute = collector.read_positive(kind, accuracy.absolute, path, "The accuracy")
        if held:
            detail = "For held pads give the accuracy as `relative`, a part of the largest conductance."
            collector.add(path, detail, "one-of")
    collector.raise_if_any()
    relative = None if accuracy is None else accuracy.relative
    if held:
        return ResistancesWanted(tuple(pads), ask.peaks, True, relative or USUAL_OF_FLOWS)
    check_fed(problem, pads)
    if absolute is not None:
        # Of the rise for a flow of one in its declared unit.
        tolerance = absolute / problem.units.read(Kind.FLOW, 1.0)
    else:
        tolerance = (relative or USUAL_ACCURACY) * span_of_rises(problem, pads)
    return ResistancesWanted(tuple(pads), ask.peaks, False, tolerance)


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


def check_cost(wanted: ResistancesWanted, solution: Solution, settings: Settings, bytes_a_number: int) -> None:
    """Raise TooCostly when the work or the answer would pass a limit."""
    matrices = 8 if wanted.peaks else 6
    cost.check_answer(matrices * len(wanted.pads) ** 2 * bytes_a_number, settings.answer_bytes)
    if not wanted.are_held:
        searches = len(wanted.pads) ** 2 if wanted.peaks else 0
        work = ONE_BY_ONE * _pairs_askew(wanted.pads) + SEARCH * searches
        cost.check_pairs(work, settings.cost_multiplications)


def _pairs_askew(pads: Sequence[Pad]) -> int:
    """Pairs of pads on faces square to different axes, each of which takes an integral of its own."""
    counts = Counter(axis_of(pad.face) for pad in pads)
    return (len(pads) ** 2 - sum(count**2 for count in counts.values())) // 2


def answer_resistances(
    problem: ReadProblem, solution: Solution, wanted: ResistancesWanted, keep_going: KeepGoing
) -> dict[str, Any]:
    """The answer to a question about resistances, with numpy arrays for its matrices."""
    compute = held_resistances if wanted.are_held else fed_resistances
    found = compute(problem, wanted.pads, wanted.tolerance, wanted.peaks, keep_going)
    unit = _resistance_unit(problem.units)
    known, asked = found.mean, wanted.tolerance
    if known is None or wanted.are_held:
        # Held pads are asked for to a part of their conductances, and so of the resistances between them; a single
        # one has that to the environment.
        known = found.pairs if known is None or len(wanted.pads) > 1 else known
        asked *= float(known.value.max())
    answer: dict[str, Any] = {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": _units(problem.units),
        "certificate": _certificate(found, known, asked, unit),
        "warnings": _warnings(found, known, asked, problem.units),
        "pads": [pad.described() for pad in wanted.pads],
        "mean": _rises(found.mean, unit),
    }
    if wanted.peaks:
        answer["peak"] = _rises(found.peak, unit)
    return answer | {
        "pairs": _rises(found.pairs, unit),
        "network": None if found.network is None else _network(found.network, unit),
    }


def _rises(rises: Rises | None, unit: float) -> dict[str, Any] | None:
    return None if rises is None else {"value": unit * rises.value, "error_bound": unit * rises.bound}


def _resistance_unit(units: UnitSystem) -> float:
    """A resistance of one in the solver's units, in the declared ones."""
    return units.write(Kind.RESISTANCE, 1.0)


def _units(units: UnitSystem) -> dict[str, str]:
    resistance = units.declared[Kind.RESISTANCE]
    return answers.units_shown(units) | {"resistance": resistance, "conductance": inverse_of(resistance)}


def _certificate(found: Resistances, known: Rises, asked: float, unit: float) -> dict[str, Any]:
    return {
        "error_bound": unit * float(known.bound.max()),
        "accuracy_asked": unit * asked,
        "agreement": None if found.agreement is None else unit * found.agreement,
        "agreement_bound": None if found.agreement_bound is None else unit * found.agreement_bound,
        "checked_entries": found.checked,
        "method": found.method,
    }


def _warnings(found: Resistances, known: Rises, asked: float, units: UnitSystem) -> list[answers.Warning_]:
    warnings = []
    largest = float(known.bound.max())
    if largest > asked:
        unit, name = _resistance_unit(units), units.declared[Kind.RESISTANCE]
        message = (
            f"The largest bound of a resistance is {unit * largest:.2g} {name}, wider than the accuracy asked for, "
            f"{unit * asked:.2g} {name}."
        )
        warnings.append(answers.warning("accuracy-not-reached", message, "#/certificate/error_bound"))
    if found.network is None:
        message = "The pads are too much alike for the accuracy asked for: their matrix has no inverse with a bound."
        warnings.append(answers.warning("network-not-determined", message, "#/network"))
    if found.mean is None:
        message = (
            "There are no rises above an environment, since nothing but the pads takes up a flow. Resistances between "
            "two pads are in `pairs`."
        )
        warnings.append(answers.warning("no-environment", message, "#/mean"))
    return warnings


def _network(resistors: Network, unit: float) -> dict[str, Any]:
    return {
        "between": resistors.between / unit,
        "between_error_bound": resistors.between_bound / unit,
        "to_environment": resistors.to_environment / unit,
        "to_environment_error_bound": resistors.to_environment_bound / unit,
        "negative": count_negative(resistors.between, resistors.to_environment),
    }
