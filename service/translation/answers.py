"""What every answer carries: the problem's id, the units, the certificate and warnings."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.core import Solution
from service.core.conditions import Film, Held
from service.core.faces import AXES
from service.models import evaluate as models
from service.refusals import Path
from service.translation.collector import Collector
from service.translation.problem import ReadProblem
from service.units import Kind, UnitSystem

FloatArray = NDArray[np.float64]
KeepGoing = Callable[[], None]
Warning_ = dict[str, str]

# A potential is poorly known where its bound is more than this part of the span.
POORLY_KNOWN = 0.1

# What rounding leaves of a coordinate that a search brings to zero, in parts of the lengths it works with. Places meant
# by a client are further from zero: answers hold from a billionth of a side on.
ROUNDING = 1e-14


def read_tolerance(collector: Collector, accuracy: models.Accuracy | None, solution: Solution) -> float:
    """Largest error allowed, in the declared unit of the potential."""
    if accuracy is not None and accuracy.absolute is not None:
        path: Path = ("accuracy", "absolute")
        return collector.read_positive(Kind.POTENTIAL_DIFFERENCE, accuracy.absolute, path, "The accuracy")
    relative = solution.usual_accuracy
    if accuracy is not None:
        assert accuracy.relative is not None
        relative = accuracy.relative
    # A body whose data are all alike has no span; any number will then do.
    return relative * (solution.span or 1.0)


def units_shown(units: UnitSystem) -> dict[str, str]:
    """The unit of each kind of quantity in the answer; that of resistances stands where there are some."""
    return {kind.value: units.declared[kind] for kind in Kind if kind is not Kind.RESISTANCE}


def certificate(
    problem: ReadProblem,
    solution: Solution,
    places: FloatArray,
    tolerance: float,
    bounds: Sequence[float] = (),
) -> dict[str, Any]:
    """Evidence for the answer.

    places: some or all places of the answer, shape (n_places, 3); a place inside the body where there is
    none. bounds: error bounds of the potentials in the answer, the largest of which is stated; that of the
    potential at the places where there is none.
    """
    if not len(places):
        places = place_inside(problem)
    if not bounds:
        bounds = [solution.field_at(places, tolerance=tolerance).potential_bound]
    found = solution.certificate(places, float(max(bounds)), tolerance=tolerance)
    iteration: dict[str, Any] = {}
    if found.residual is not None and found.iterations:
        residual = problem.units.write(Kind.FLUX, found.residual)
        iteration["iteration"] = {"steps": found.iterations, "residual": residual}
    return {
        "error_bound": found.error_bound,
        "accuracy_asked": tolerance,
        "agreement": found.agreement,
        "agreement_bound": found.check_bound,
        "checked_places": found.checked_places,
        "terms": {
            "time_nodes": found.time_nodes,
            "products": found.products,
            "series_terms": found.series_terms,
        },
        **iteration,
        "method": found.method,
    }


def place_inside(problem: ReadProblem) -> FloatArray:
    """The middle of the body; along an axis without end as far from its end as the body is wide; shape (1, 3)."""
    extents = problem.extents
    widest = max((extent.high for extent in extents if math.isfinite(extent.high)), default=1.0)
    middles = [
        0.0 if extent.is_infinite else 0.5 * (extent.high if math.isfinite(extent.high) else widest)
        for extent in extents
    ]
    return np.array([middles])


def warning(code: str, message: str, where: str) -> Warning_:
    """One remark.

    where: a JSON pointer into the answer, or into the problem where it begins with #/problem.
    """
    return {"code": code, "message": message, "where": where}


def missed_accuracy(bound: float, tolerance: float, unit: str, where: str) -> list[Warning_]:
    """A remark on a number whose bound is wider than the accuracy asked for. unit: of both."""
    if bound <= tolerance:
        return []
    message = (
        f"The bound of this number is {bound:.2g} {unit}, wider than the accuracy asked for, {tolerance:.2g} {unit}."
    )
    return [warning("accuracy-not-reached", message, where)]


def poorly_known(solution: Solution, bounds: Sequence[float], unit: str) -> list[Warning_]:
    """A remark on potentials whose largest bound is a considerable part of the span. unit: of both."""
    largest = max(bounds, default=0.0)
    if not 0.0 < POORLY_KNOWN * solution.span < largest:
        return []
    message = (
        f"The largest bound of a potential is {largest:.2g} {unit}, more than a tenth of the range of potentials, "
        f"{solution.span:.2g} {unit}."
    )
    return [warning("potential-poorly-known", message, "#/certificate/error_bound")]


def problem_warnings(problem: ReadProblem, solution: Solution) -> list[Warning_]:
    """Remarks that hold for every answer about the problem."""
    warnings = []
    body = problem.body
    if solution.depends_on_far_level and body.far_level is None:
        unit = problem.units.declared[Kind.POTENTIAL]
        warnings.append(
            warning(
                "far-level-assumed",
                f"No face fixes the potential far away; it is taken as 0 {unit}, and the flows of pads depend on it. "
                "Give it as `far_level`.",
                "#/problem/body",
            )
        )
    if solution.level_pinned and body.far_level is None:
        warnings.append(
            warning(
                "level-pinned",
                "No face fixes the level of the potential; it is chosen so that the mean over the body, or "
                "the value far along a semi-infinite one, is zero. Differences and fluxes do not depend on "
                "it.",
                "#/problem/faces",
            )
        )
    for face, count in problem.filled.items():
        condition = problem.body.faces[face]
        datum = "value" if isinstance(condition, Held) else "ambient" if isinstance(condition, Film) else "inflow"
        readings = "reading was" if count == 1 else "readings were"
        warnings.append(
            warning(
                "readings-filled",
                f"{count} missing {readings} filled from the neighbours. Error bounds hold for the filled table.",
                f"#/problem/faces/{face}/{datum}",
            )
        )
    return warnings


def vector(units: UnitSystem, flux: FloatArray) -> dict[str, FloatArray]:
    """Components of a flux density along the axes, in the declared unit. flux: shape (3, ...)."""
    return {axis: units.write_array(Kind.FLUX, flux[index]) for index, axis in enumerate(AXES)}


def place(problem: ReadProblem, position: Sequence[float]) -> list[float | None]:
    """Coordinates of a place that was searched for; null for one that is infinitely far.

    One that is zero but for rounding is zero.
    """
    rounding = ROUNDING * _widest(problem, position)
    return [number_or_none(0.0 if abs(coordinate) <= rounding else coordinate) for coordinate in position]


def _widest(problem: ReadProblem, position: Sequence[float]) -> float:
    """The largest finite length that a place was found from."""
    lengths = [*position, *(extent.high for extent in problem.extents)]
    for patches in problem.patches.values():
        for patch in patches:
            lengths += [patch.where.p_low, patch.where.p_high, patch.where.q_low, patch.where.q_high]
    return max((abs(length) for length in lengths if math.isfinite(length)), default=0.0)


def number_or_none(value: float) -> float | None:
    """A number of an answer; None for one that is not finite."""
    return float(value) if np.isfinite(value) else None
