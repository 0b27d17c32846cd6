"""Total flow through faces, parts of faces and planes, and the balance: the question read, and its answer."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from service import cost
from service.core import Balance, Solution, Total
from service.core.faces import AXES, Face, axes_along
from service.core.mixed import MixedSolution
from service.core.mixed_pads import PadAnswer
from service.models import evaluate as models
from service.settings import Settings
from service.translation import answers
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.fields import describe_part, rectangle_shown
from service.translation.mixed_pads import (
    USUAL_OF_FLOWS,
    flow_of,
    flow_tolerance,
    mixed_pad,
    pad_answers,
    potential_of,
)
from service.translation.places import FacePart, PlaceReader, PlanePart
from service.translation.problem import ReadProblem
from service.units import Kind, UnitSystem


@dataclass(frozen=True)
class TotalsWanted:
    """A question about totals in the solver's numbers. gap: width left out along jumps, or None."""

    faces: tuple[Face, ...]
    parts: tuple[FacePart, ...]
    planes: tuple[PlanePart, ...]
    gap: float | None
    tolerance: float


def read_totals(
    question: models.FluxTotalsQuestion, problem: ReadProblem, solution: Solution, settings: Settings
) -> TotalsWanted:
    """The question in the solver's numbers. Raises RequestRefused with a sentence for each field at fault."""
    collector = Collector(problem.units)
    ask = question.evaluate
    count = len(ask.patches) + len(ask.planes)
    cost.check_count(collector, ("evaluate",), "patches and planes", count, settings.totals)
    collector.raise_if_any()

    reader = PlaceReader(collector, settings, problem)
    faces = problem.body.present_faces
    if ask.faces is not None:
        for index, face in enumerate(ask.faces):
            reader.is_present(face, ("evaluate", "faces", index))
        faces = tuple(face for face in ask.faces)
    parts = [reader.face_part(part, ("evaluate", "patches", index)) for index, part in enumerate(ask.patches)]
    planes = [reader.plane(plane, ("evaluate", "planes", index)) for index, plane in enumerate(ask.planes)]
    gap = None
    if ask.edge_gap is not None:
        gap = collector.read_positive(Kind.LENGTH, ask.edge_gap, ("evaluate", "edge_gap"), "The edge gap")
    tolerance = answers.read_tolerance(collector, question.accuracy, solution)
    if question.accuracy is None and isinstance(solution, MixedSolution):
        # The usual accuracy is that of fields.
        tolerance = USUAL_OF_FLOWS * (solution.span or 1.0)
    collector.raise_if_any()
    return TotalsWanted(
        tuple(dict.fromkeys(faces)),
        tuple(part for part in parts if part is not None),
        tuple(plane for plane in planes if plane is not None),
        gap,
        tolerance,
    )


def answer_totals(
    problem: ReadProblem, solution: Solution, wanted: TotalsWanted, keep_going: KeepGoing
) -> dict[str, Any]:
    """The answer to a question about totals."""
    units = problem.units
    warnings = answers.problem_warnings(problem, solution)
    solution.prepare(tolerance=wanted.tolerance, keep_going=keep_going)

    tolerance, gap = wanted.tolerance, wanted.gap
    mixed = pad_answers(solution, tolerance)
    of_flows = flow_tolerance(units, solution, mixed, tolerance)
    bounds: list[float] = []

    def checked(answer: dict[str, Any], where: str) -> dict[str, Any]:
        """An answer whose bounds are noted."""
        gapped = answer.get("with_gap")
        for part, at in ((answer, where), (gapped, f"{where}/with_gap")):
            bound = None if part is None else part["error_bound"]
            if bound is not None:
                bounds.append(bound)
                if of_flows is not None:
                    warnings.extend(answers.missed_accuracy(bound, of_flows, units.declared[Kind.FLOW], at))
        return answer

    def shown(total: Total, word: str, where: str) -> dict[str, Any]:
        keep_going()
        if total.value is None:
            warnings.append(_unbounded_warning(total, where))
        return checked(_total(units, total, word), where)

    balance = solution.balance(gap=gap, tolerance=tolerance)
    faces = {face: shown(balance.inflow[face], "inflow", f"#/faces/{face}") for face in wanted.faces}
    patches = [
        describe_part(part)
        | (
            shown(
                solution.face_total(part.face, part.where, gap=gap, tolerance=tolerance),
                "inflow",
                f"#/patches/{index}",
            )
            if (passed := mixed_pad(mixed, part)) is None
            else checked(_pad(units, passed), f"#/patches/{index}")
        )
        for index, part in enumerate(wanted.parts)
    ]
    planes = [
        _plane_described(plane)
        | shown(
            solution.plane_total(plane.axis, plane.position, plane.where, gap=gap, tolerance=tolerance),
            "flow",
            f"#/planes/{index}",
        )
        for index, plane in enumerate(wanted.planes)
    ]
    keep_going()
    return {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": answers.units_shown(units),
        "certificate": answers.certificate(
            problem,
            solution,
            answers.place_inside(problem),
            tolerance,
            [float(pad.potential.error_bound) for pad in mixed.values()],
        )
        | {"flow_error_bound": max(bounds, default=0.0), "flow_accuracy_asked": of_flows},
        "warnings": warnings,
        "faces": faces,
        "patches": patches,
        "planes": planes,
        "balance": _balance(units, balance),
    }


def check_cost(wanted: TotalsWanted, solution: Solution, settings: Settings, bytes_a_number: int) -> None:
    """Raise TooCostly where getting ready takes too much; the number of totals is bounded, and each is cheap."""
    cost.check_work([solution.estimate_points(1, tolerance=wanted.tolerance)], settings)


def _total(units: UnitSystem, total: Total, word: str) -> dict[str, Any]:
    """A total in the declared unit; null with its causes where it is unbounded."""
    answer: dict[str, Any] = {word: None, "error_bound": None}
    if total.value is not None:
        answer[word] = units.write(Kind.FLOW, float(total.value))
        if total.error_bound is not None:
            answer["error_bound"] = units.write(Kind.FLOW, float(total.error_bound))
    if total.causes:
        answer["unbounded"] = [
            {
                "kind": cause.kind,
                "line": cause.line,
                "coefficient": units.write(Kind.FLOW, float(cause.coefficient)),
                "largest_jump": float(cause.largest_jump),
            }
            for cause in total.causes
        ]
    if total.with_gap is not None:
        answer["with_gap"] = {
            word: units.write(Kind.FLOW, float(total.with_gap.value)),
            "error_bound": units.write(Kind.FLOW, float(total.with_gap.error_bound)),
        }
    return answer


def _pad(units: UnitSystem, passed: PadAnswer) -> dict[str, Any]:
    """Flow and potential of a pad of a mixed face."""
    flow = flow_of(units, passed)
    return {"inflow": flow["value"], "error_bound": flow["error_bound"], "potential": potential_of(passed)}


def _unbounded_warning(total: Total, where: str) -> answers.Warning_:
    lines = ", ".join(cause.line for cause in total.causes)
    if any(cause.kind.startswith("endless") for cause in total.causes):
        advice = "It goes on without end; name a rectangle of it to get the flow through that."
    elif total.with_gap is not None:
        advice = "The flow through the rest, without the edge gap, is given beside it."
    else:
        advice = "Name an edge gap to get the flow through the rest."
    return answers.warning("unbounded-total", f"The total has no finite value, because of: {lines}. {advice}", where)


def _plane_described(plane: PlanePart) -> dict[str, Any]:
    described: dict[str, Any] = {} if plane.name is None else {"name": plane.name}
    described |= {"axis": AXES[plane.axis], "position": plane.position}
    if plane.where is not None:
        described["rectangle"] = rectangle_shown(plane.where, axes_along(plane.axis))
    return described


def _balance(units: UnitSystem, balance: Balance) -> dict[str, Any]:
    def flow(value: float | None) -> float | None:
        return None if value is None else answers.number_or_none(units.write(Kind.FLOW, float(value)))

    return {
        "closed": None if balance.closed is None else bool(balance.closed),
        "generation": flow(balance.generation),
        "carried_off": flow(None if balance.carried_off is None else balance.carried_off.value),
        "residual": flow(balance.residual),
        "error_bound": flow(balance.error_bound),
        "unbounded_faces": [face for face, total in balance.inflow.items() if total.value is None],
    }
