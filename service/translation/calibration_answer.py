"""What readings say, in the words of the answer, with its warnings."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from service.analysis.calibrated import Calibration, Estimate, MapEstimate
from service.analysis.evaluations import FloatArray
from service.analysis.told_apart import Combination
from service.models import calibration as models
from service.translation.analysis import Prepared
from service.translation.answers import Warning_, number_or_none, warning
from service.translation.numbers import NumberInfo
from service.translation.unknown_map import UnknownMap

VERDICTS = {"yes": "consistent", "no": "contradiction", "too_well": "too_close", None: "untested"}

WHERE = "#/calibration"

# An error bound above this part of a standard uncertainty changes what readings say by more than a hundredth of it.
COARSE = 0.1


@dataclass(frozen=True)
class Asked:
    """The question in the words of the client. infos: of its unknowns."""

    question: models.CalibrationQuestion
    prepared: Prepared
    infos: tuple[NumberInfo, ...]
    smooth: UnknownMap | None


def shown(found: Calibration, asked: Asked) -> dict[str, Any]:
    """The own part of the answer."""
    together = [_together(group, found, asked) for group in found.together]
    outcome = {
        "unknowns": [
            _unknown(estimate, info, asked) for estimate, info in zip(found.estimates, asked.infos, strict=True)
        ],
        "correlation": [_numbers(row) for row in found.correlation],
        "known_together": together,
        "smooth_map": None if found.smooth is None else _map(found.smooth, asked),
        "readings": _readings(found, asked),
        "results": _results(found, asked),
        "consistency": _consistency(found, asked),
        "coverage_factor": found.coverage_factor,
        "other_solutions": [
            {"values": rival.numbers.tolist(), "chi_squared": rival.chi_squared} for rival in found.rivals
        ],
        "minima_count": found.minima,
        "linear": found.linear,
        "settled": found.settled,
        "case_count": found.cases,
    }
    return {"calibration": outcome, "warnings": _warnings(found, asked, outcome)}


def _numbers(row: FloatArray) -> list[float | None]:
    return [number_or_none(value) for value in row]


def _unknown(estimate: Estimate, info: NumberInfo, asked: Asked) -> dict[str, Any]:
    told = np.isfinite(estimate.standard_uncertainty)
    other = 1.0 - float(estimate.shares.sum() + estimate.shared.sum())
    ends = estimate.profile
    return {
        "name": info.name,
        "unit": info.measure.unit,
        "value": estimate.value,
        "unit_of_uncertainty": info.measure.step.unit,
        "standard_uncertainty": number_or_none(estimate.standard_uncertainty),
        "interval": {"low": estimate.low, "high": estimate.high},
        "profile_interval": None if ends is None else {"low": number_or_none(ends[0]), "high": number_or_none(ends[1])},
        "is_told": estimate.told,
        "at_end": estimate.at,
        "departure_from_linear": number_or_none(estimate.bent),
        "known_before_part": _part(other) if told else None,
        "shares": _numbers(estimate.shares) if told else [None] * len(estimate.shares),
        "shared_shares": [
            {"results": shared.results, "part": float(part)}
            for shared, part in zip(asked.question.shared_errors, estimate.shared, strict=True)
        ]
        if told
        else [],
    }


def _part(value: float) -> float:
    """A part of a whole; what rounding leaves of none is none."""
    return value if value > 1e-9 else 0.0


def _together(group: Combination, found: Calibration, asked: Asked) -> dict[str, Any]:
    names = [asked.infos[member].name for member in group.members]
    held = group.held
    return {
        "numbers": names,
        "form": group.form,
        "factors": list(group.factors),
        "expression": _expression(names, group),
        "value": group.value,
        "standard_uncertainty": number_or_none(group.standard_uncertainty),
        "are_told": all(found.estimates[member].told for member in group.members),
        "holds": "not_followed" if held is None else "throughout" if held.throughout else "near",
        "near": [found.estimates[member].value for member in group.members],
        "places": []
        if held is None
        else [
            {"values": numbers.tolist(), "combination": number_or_none(value), "holds": bool(holds)}
            for numbers, value, holds in zip(held.numbers, held.values, held.holds, strict=True)
        ],
    }


def _known_together(group: Combination, words: dict[str, Any]) -> str:
    """What is known of a group, and how far that holds, to go on with after a colon or "that"."""
    known = f"{words['expression']} is {group.value:.4g}, standard uncertainty {group.standard_uncertainty:.2g}"
    if words["holds"] == "throughout":
        return known
    near = _listed_plainly(
        [f"{name} = {value:.4g}" for name, value in zip(words["numbers"], words["near"], strict=True)]
    )
    known = f"near {near}, {known}"
    if group.held is None:
        return f"{known}. How far from there this holds was not followed"
    first = [words["near"][0], *group.held.numbers[group.held.holds, 0].tolist()]
    if len(first) == 1:
        return f"{known}. A little away from there it does not hold: `places` has other values that meet the readings"
    return (
        f"{known}. It holds with {words['numbers'][0]} from {min(first):.3g} to {max(first):.3g} only: `places` has "
        "other values that meet the readings"
    )


def _expression(names: list[str], group: Combination) -> str:
    """A combination as an engineer writes it."""
    text = ""
    for name, factor in zip(names, group.factors, strict=True):
        size = abs(factor)
        if group.form == "product":
            sign = " * " if factor > 0 else " / "
            term = name if size == 1 else f"{name}^{size:.3g}"
        else:
            sign = " + " if factor > 0 else " - "
            over = " / " if group.form == "reciprocals" else " * "
            term = name if size == 1 and group.form == "sum" else f"{size:.3g}{over}{name}"
        text = f"{text}{sign}{term}" if text else term
    return text


def _map(found: MapEstimate, asked: Asked) -> dict[str, Any]:
    assert asked.smooth is not None
    measure, resolution = asked.smooth.measure, found.resolution
    return {
        "name": found.name,
        "unit": measure.unit,
        "unit_of_uncertainty": measure.step.unit,
        "axes": dict(asked.smooth.axes),
        "table": found.values.tolist(),
        "standard_uncertainties": found.standard_uncertainties.tolist(),
        "low": found.low.tolist(),
        "high": found.high.tolist(),
        "resolved_lengths": [_numbers(row) for row in resolution.lengths],
        "open": resolution.open.tolist(),
        "open_count": int(resolution.open.sum()),
        "departure": found.departure,
        "told_numbers": resolution.degrees,
        "not_told_from": [asked.infos[number].name for number in found.confounded],
    }


def _readings(found: Calibration, asked: Asked) -> list[dict[str, Any]]:
    prepared = asked.prepared
    rows = []
    for index, reading in enumerate(asked.question.readings):
        column = prepared.index_of[reading.result]
        measure = prepared.results.infos[column].measure
        rows.append(
            {
                "result": reading.result,
                "unit": measure.unit,
                "value": measure.read(reading.value),
                "unit_of_uncertainty": measure.step.unit,
                "standard_uncertainty": measure.step.read(reading.standard_uncertainty),
                "computed": float(found.values[column]),
                "error_bound": number_or_none(found.bounds[column]),
                "left_over": float(found.left[index]),
                "normalised": number_or_none(found.normalised[index]),
                "leverage": float(found.leverages[index]),
                "is_outlier": index in found.outliers,
            }
        )
    return rows


def _results(found: Calibration, asked: Asked) -> list[dict[str, Any]]:
    shown = asked.prepared.results_shown(found.values, found.bounds)
    return [
        row
        | {
            "unit_of_uncertainty": info.measure.step.unit,
            "standard_uncertainty": number_or_none(found.standard_uncertainties[index]),
        }
        for index, (row, info) in enumerate(zip(shown, asked.prepared.results.infos, strict=True))
    ]


def _consistency(found: Calibration, asked: Asked) -> dict[str, Any]:
    return {
        "verdict": VERDICTS[found.consistent],
        "sentence": _agreement(found, asked),
        "chi_squared": found.chi_squared,
        "degrees_of_freedom": found.degrees_of_freedom,
        "probability": found.probability,
        "scaled_by": found.scaled_by,
    }


def _agreement(found: Calibration, asked: Asked) -> str:
    freedom = f"{found.degrees_of_freedom:.3g}"
    degrees = f"{freedom} degree{'' if freedom == '1' else 's'} of freedom"
    left = f"chi-squared is {found.chi_squared:.3g} with {degrees}"
    if asked.question.uncertainties == "relative":
        return f"The uncertainties were multiplied by {found.scaled_by:.3g} to agree with what the readings leave over."
    if found.consistent is None:
        return "There are no more readings than they determine, so that nothing shows whether they agree with the body."
    by_chance = f"which chance exceeds with probability {found.probability:.2g}"
    if found.consistent == "yes":
        return f"The readings agree with the body within their uncertainties: {left}, {by_chance}."
    if found.consistent == "no":
        return f"The readings differ from the body by more than their uncertainties let them: {left}, {by_chance}."
    return f"The readings agree with the body better than their uncertainties let expect: {left}, {by_chance}."


def _warnings(found: Calibration, asked: Asked, outcome: dict[str, Any]) -> list[Warning_]:
    remarks = [*_of_unknowns(found, asked, outcome["known_together"])]
    if found.smooth is not None:
        remarks += _of_map(found.smooth, outcome["smooth_map"])
    if not found.settled:
        detail = (
            "The search did not come to its end; the values are where it stopped. Narrow the ranges, or begin nearer."
        )
        remarks.append(warning("not-settled", detail, WHERE))
    if found.consistent in ("no", "too_well"):
        code = "contradiction" if found.consistent == "no" else "too-close"
        advice = (
            " Either something of the body is not as given, or the uncertainties are too small."
            if found.consistent == "no"
            else " The uncertainties look too large."
        )
        remarks.append(warning(code, outcome["consistency"]["sentence"] + advice, f"{WHERE}/consistency"))
    elif found.missed:
        detail = (
            f"Within the ranges the readings are not met: chi-squared is {found.chi_squared:.3g}. Either a range is "
            "too narrow, or something of the body is not as given."
        )
        remarks.append(warning("not-met", detail, f"{WHERE}/consistency"))
    for index in found.outliers:
        detail = (
            f'The reading of "{asked.question.readings[index].result}" is {abs(found.normalised[index]):.1f} standard '
            "uncertainties off what all others say."
        )
        remarks.append(warning("outlier", detail, f"{WHERE}/readings/{index}"))
    remarks += _of_bounds(found, asked)
    if found.rivals:
        detail = (
            f"The readings are met about as well by other values of the unknowns ({len(found.rivals)} more found); see "
            "`other_solutions`. Intervals are about the best alone."
        )
        remarks.append(warning("other-solutions", detail, f"{WHERE}/other_solutions"))
    return remarks


def _of_unknowns(found: Calibration, asked: Asked, together: list[dict[str, Any]]) -> list[Warning_]:
    remarks = []
    grouped: set[int] = set()
    for index, (group, words) in enumerate(zip(found.together, together, strict=True)):
        names = _listed([asked.infos[member].name for member in group.members])
        known = _known_together(group, words)
        if words["are_told"]:
            detail = f"The readings tell {names} much better together than apart: {known}."
        else:
            detail = (
                f"The readings cannot tell {names} apart. What they tell is that {known}. Give what is known of one of "
                "them as `known_before`, or add a reading that depends on them in another way."
            )
            grouped.update(group.members)
        remarks.append(warning("told-together", detail, f"{WHERE}/known_together/{index}"))
    for index, (estimate, info) in enumerate(zip(found.estimates, asked.infos, strict=True)):
        where = f"{WHERE}/unknowns/{index}"
        if not estimate.told and index not in grouped:
            detail = f'The readings say hardly more of "{info.name}" than that it is in its range.'
            remarks.append(warning("not-told", detail, where))
        elif estimate.at is not None and estimate.told:
            detail = (
                f'"{info.name}" lies on the {estimate.at} end of its range: the readings would have it beyond. Widen '
                "the range if it may be; its uncertainty is that of a solution without the range."
            )
            remarks.append(warning("at-end", detail, where))
        if estimate.is_bent:
            detail = (
                f'The results bend so much with "{info.name}" that its interval does not hold as stated; ask for '
                "`profile_intervals`."
            )
            if estimate.profile is not None:
                detail = f'The results bend much with "{info.name}"; take its `profile_interval`.'
            remarks.append(warning("bent", detail, where))
    return remarks


def _of_bounds(found: Calibration, asked: Asked) -> list[Warning_]:
    """A remark where results are not computed well enough for their readings."""
    coarse = [
        row["result"]
        for row in _readings(found, asked)
        if row["error_bound"] is None or row["error_bound"] > COARSE * row["standard_uncertainty"]
    ]
    if not coarse:
        return []
    names = _listed(list(dict.fromkeys(coarse)))
    detail = (
        f"The error bounds of {names} are no longer small beside the uncertainties of their readings, which leave them "
        "out. Ask for a finer `accuracy`."
    )
    return [warning("coarse", detail, f"{WHERE}/readings")]


def _of_map(found: MapEstimate, words: dict[str, Any]) -> list[Warning_]:
    remarks = []
    where = f"{WHERE}/smooth_map"
    if words["open_count"]:
        detail = (
            f"{words['open_count']} of {found.values.size} entries of the map are not determined by the readings: they "
            "go on smoothly from the others, as `open` shows."
        )
        remarks.append(warning("open-entries", detail, f"{where}/open"))
    if words["not_told_from"]:
        names = _listed(words["not_told_from"])
        detail = (
            f"The readings cannot tell {names} from the map: the one makes up for the other. Give what is known as "
            "`known_before`, or add a reading that depends on them in another way."
        )
        remarks.append(warning("not-told-from-map", detail, where))
    return remarks


def _listed(names: list[str]) -> str:
    return _listed_plainly([f'"{name}"' for name in names])


def _listed_plainly(words: list[str]) -> str:
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"
