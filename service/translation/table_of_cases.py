"""Results of a table of cases: the question read, and its answer in columns."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from service.analysis.evaluations import Evaluate, Failure
from service.analysis.limits import bounds_of, margins, surely_held, surely_passed
from service.models import cases as models
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.case_rows import read_cases
from service.translation.limits import limit_shown


def read_table(question: models.CasesQuestion, prepared: Prepared) -> Analysis:
    """The question with its cases written out. Raises RequestRefused and TooCostly."""
    collector = prepared.collector()
    infos, targets = prepared.numbers(collector, question.numbers)
    limits = prepared.limits(collector, question.limits)
    collector.raise_if_any()
    cases = read_cases(collector, question.cases, infos, prepared.settings)
    collector.raise_if_any()

    def run(evaluate: Evaluate) -> dict[str, Any]:
        found = evaluate(cases)
        margin, bound = margins(limits, found.values), bounds_of(limits, found.bounds)
        held = np.full(margin.shape, "undecided", dtype=object)
        held[surely_held(margin, bound)] = "yes"
        held[surely_passed(margin, bound)] = "no"
        held[np.isnan(margin)] = None
        return {
            "case_count": len(cases),
            "numbers": [
                {"name": info.name, "unit": info.measure.unit, "values": cases[:, index]}
                for index, info in enumerate(infos)
            ],
            "columns": [
                {
                    "name": info.name,
                    "unit": info.measure.unit,
                    "values": found.values[:, index],
                    "error_bounds": found.bounds[:, index],
                }
                for index, info in enumerate(prepared.results.infos)
            ],
            "limits": [
                {
                    **limit_shown(asked, limit, prepared),
                    "margins": margin[:, index],
                    "error_bounds": bound[:, index],
                    "held": held[:, index].tolist(),
                }
                for index, (asked, limit) in enumerate(zip(question.limits, limits, strict=True))
            ],
            "failures": failures_shown(found.failures),
        }

    return Analysis(prepared, prepared.plan(infos, targets), len(cases), run)


def failures_shown(failures: Mapping[int, Failure]) -> list[dict[str, Any]]:
    """Failed cases in their order."""
    return [
        {"case": case, "code": failure.code, "message": failure.message} for case, failure in sorted(failures.items())
    ]


CALL = AnalysisCall("cases", models.CasesQuestion, read_table)
