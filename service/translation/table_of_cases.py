"""Results of a table of cases: the question read, and its answer in columns."""

from __future__ import annotations

from typing import Any

from service.analysis.evaluations import Evaluate
from service.models import cases as models
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.case_columns import columns_of, columns_shown
from service.translation.case_rows import read_cases


def read_table(question: models.CasesQuestion, prepared: Prepared) -> Analysis:
    """The question with its cases written out. Raises RequestRefused and TooCostly."""
    collector = prepared.collector()
    infos, targets = prepared.numbers(collector, question.numbers)
    limits = prepared.limits(collector, question.limits)
    collector.raise_if_any()
    cases = read_cases(collector, question.cases, infos, prepared.settings)
    collector.raise_if_any()

    named = [(info.name, info.measure.unit) for info in infos]
    columns = columns_of(named, prepared, question.limits, limits)

    def run(evaluate: Evaluate) -> dict[str, Any]:
        return {"case_count": len(cases), **columns_shown(columns, cases, evaluate(cases))}

    return Analysis(prepared, prepared.plan(infos, targets), len(cases), run)


CALL = AnalysisCall("cases", models.CasesQuestion, read_table)
