"""What readings say about what is not known: the question read, and its answer."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from service.analysis.calibration import STARTS, calibrate, most_cases
from service.analysis.evaluations import Evaluate
from service.analysis.readings import Readings, Shared
from service.analysis.search import NothingSeen
from service.analysis.unknowns import Prior, Unknown
from service.models import calibration as models
from service.refusals import Issue, Path, RequestRefused
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.calibration_answer import Asked, shown
from service.translation.collector import Collector
from service.translation.measures import read_measured
from service.translation.numbers import NumberInfo
from service.translation.result_units import Measure
from service.translation.unknown_map import read_unknown_map

# Starts beside a map, which makes up for much of what another start would find.
STARTS_BESIDE_MAP = 2

# Least standard uncertainty, in parts of its reading: values have sixteen digits, and differences of them fewer.
LEAST_SPREAD = 1e-13

# A range that is this many times as high as low is looked at by factors.
WIDE = 10.0


def read_calibration(question: models.CalibrationQuestion, prepared: Prepared) -> Analysis:
    """The question in the units of its numbers and results. Raises RequestRefused."""
    collector = prepared.collector()
    infos, targets = prepared.numbers(collector, question.unknowns, ("unknowns",))
    readings = _read_readings(collector, question, prepared)
    collector.raise_if_any()
    unknowns = tuple(
        _read_unknown(collector, asked, info, ("unknowns", index))
        for index, (asked, info) in enumerate(zip(question.unknowns, infos, strict=True))
    )
    wanted = question.smooth_map
    smooth = None if wanted is None else read_unknown_map(collector, wanted, targets, question.readings, prepared)
    _check_enough(collector, question)
    collector.raise_if_any()
    starts = question.starts or (STARTS if smooth is None else STARTS_BESIDE_MAP)
    asked = Asked(question, prepared, infos, smooth)

    def run(evaluate: Evaluate) -> dict[str, Any]:
        try:
            found = calibrate(
                evaluate,
                [unknown for unknown in unknowns if unknown is not None],
                readings,
                smooth=None if smooth is None else smooth.smooth,
                starts=starts,
                seed=question.seed,
                is_scaled=question.uncertainties == "relative",
                profile=question.profile_intervals,
            )
        except NothingSeen as error:
            why = "" if error.failure is None else f" {error.failure.message}"
            raise RequestRefused((Issue(("unknowns",), f"No start has results.{why}", "no-results"),)) from None
        return shown(found, asked)

    all_infos, all_targets = (infos, targets) if smooth is None else (infos + smooth.infos, targets + smooth.targets)
    count = most_cases(
        len(infos), None if smooth is None else smooth.smooth, starts=starts, profile=question.profile_intervals
    )
    return Analysis(prepared, prepared.plan(all_infos, all_targets), count, run)


def _read_unknown(collector: Collector, asked: models.UnknownNumber, info: NumberInfo, path: Path) -> Unknown | None:
    """A number with its range; None, and noted, where that is none."""
    noted = len(collector.issues)
    low, high = (
        read_measured(collector, info.measure, end, (*path, key))
        for end, key in ((asked.low, "low"), (asked.high, "high"))
    )
    if low >= high:
        collector.add((*path, "high"), "`high` has to be greater than `low`.", "order")
    spacing = asked.spacing or ("logarithmic" if low > 0 and high >= WIDE * low else "linear")
    if asked.spacing == "logarithmic" and low <= 0:
        collector.add((*path, "low"), "Logarithmic spacing needs a `low` greater than zero.", "not-positive")
    prior = None
    if asked.known_before is not None:
        here = (*path, "known_before")
        prior = Prior(
            read_measured(collector, info.measure, asked.known_before.value, (*here, "value")),
            _read_uncertainty(collector, info.measure, asked.known_before.standard_uncertainty, here),
        )
    if len(collector.issues) > noted:
        return None
    start = min(max(info.nominal, low), high)
    return Unknown(info.name, low, high, start, spacing == "logarithmic", prior)


def _read_readings(collector: Collector, question: models.CalibrationQuestion, prepared: Prepared) -> Readings:
    """Readings in the units of their results."""
    columns, values, spreads = [], [], []
    for index, reading in enumerate(question.readings):
        here: Path = ("readings", index)
        column = prepared.result(collector, reading.result, (*here, "result"))
        measure = prepared.results.infos[column].measure
        columns.append(column)
        values.append(read_measured(collector, measure, reading.value, (*here, "value")))
        spreads.append(_read_uncertainty(collector, measure, reading.standard_uncertainty, here))
    shared = [
        _read_shared(collector, asked, columns, prepared, ("shared_errors", index))
        for index, asked in enumerate(question.shared_errors)
    ]
    _check_weights(collector, values, spreads)
    return Readings(np.array(columns, dtype=np.intp), np.array(values), np.array(spreads), tuple(shared))


def _check_weights(collector: Collector, values: Sequence[float], spreads: Sequence[float]) -> None:
    """A reading is not certain to more digits than numbers have."""
    for index, (value, spread) in enumerate(zip(values, spreads, strict=True)):
        if 0 < spread < LEAST_SPREAD * abs(value):
            detail = (
                f"Beside a reading of {value:.4g} an uncertainty of {spread:.2g} is less than what computing with it "
                f"rounds to. It has to be at least {LEAST_SPREAD:g} of the reading."
            )
            collector.add(("readings", index, "standard_uncertainty"), detail, "too-small")


def _read_shared(
    collector: Collector, asked: models.SharedError, columns: Sequence[int], prepared: Prepared, path: Path
) -> Shared:
    """An error of all readings of some results."""
    results = [prepared.result(collector, name, (*path, "results", index)) for index, name in enumerate(asked.results)]
    measures = [prepared.results.infos[result].measure for result in results]
    for index, measure in enumerate(measures):
        if measure != measures[0]:
            detail = f"The first result is in {measures[0].unit}, this one in {measure.unit}; an error is of one unit."
            collector.add((*path, "results", index), detail, "unit")
        if results[index] not in columns:
            collector.add((*path, "results", index), "This result has no reading.", "no-reading")
    members = [row for row, column in enumerate(columns) if column in results]
    return Shared(
        np.array(members, dtype=np.intp),
        _read_uncertainty(collector, measures[0], asked.standard_uncertainty, path),
    )


def _read_uncertainty(collector: Collector, measure: Measure, given: float | str, path: Path) -> float:
    """A standard uncertainty in the unit of differences."""
    here = (*path, "standard_uncertainty")
    spread = read_measured(collector, measure.step, given, here)
    if spread <= 0:
        collector.add(here, "A standard uncertainty has to be greater than zero.", "not-positive")
    return spread


def _check_enough(collector: Collector, question: models.CalibrationQuestion) -> None:
    known = sum(unknown.known_before is not None for unknown in question.unknowns)
    if question.uncertainties == "relative" and len(question.readings) + known <= len(question.unknowns):
        detail = (
            "Uncertainties are scaled by what readings leave over, for which there have to be more readings than "
            "unknowns. Add readings, or give uncertainties."
        )
        collector.add(("uncertainties",), detail, "too-few")


CALL = AnalysisCall("calibration", models.CalibrationQuestion, read_calibration)
