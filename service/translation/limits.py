"""Whether limits hold: the question read, and its answer."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np

from service.analysis.evaluations import Evaluate, FloatArray
from service.analysis.limits import Held, Limit, bounds_of, margins, verdict
from service.models import limits as models
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.answers import number_or_none

# Accuracy asked for, in parts of the span, where the usual one leaves a limit undecided.
FINEST = 1e-13


def read_limits(question: models.LimitsQuestion, prepared: Prepared) -> Analysis:
    """The question in the units of its results. Raises RequestRefused."""
    collector = prepared.collector()
    limits = prepared.limits(collector, question.limits)
    collector.raise_if_any()

    def run(evaluate: Evaluate) -> dict[str, Any]:
        margin, bound = margins(limits, prepared.nominal.values), bounds_of(limits, prepared.nominal.bounds)
        if "undecided" in _verdicts(margin, bound):
            finer = evaluate(np.zeros((1, 0)), accuracy=FINEST)
            if not finer.failures and np.all(finer.bounds <= prepared.nominal.bounds):
                margin, bound = margins(limits, finer.values[0]), bounds_of(limits, finer.bounds[0])
        held = _verdicts(margin, bound)
        answered = [
            {
                **limit_shown(asked, limit, prepared),
                "held": word,
                "margin": float(margin[index]),
                "error_bound": number_or_none(bound[index]),
            }
            for index, (asked, limit, word) in enumerate(zip(question.limits, limits, held, strict=True))
        ]
        return {"limits": answered, "all_held": all_held(held)}

    return Analysis(prepared, prepared.plan((), ()), 1, run)


def _verdicts(margin: FloatArray, bound: FloatArray) -> list[Held]:
    return [verdict(float(m), float(b)) for m, b in zip(margin, bound, strict=True)]


def limit_shown(asked: models.Limit, limit: Limit, prepared: Prepared) -> dict[str, Any]:
    """What a limit says, in the unit of its result."""
    return limit_in_words(asked.name, prepared.results.infos[limit.result].name, limit)


def limit_in_words(name: str | None, result: str, limit: Limit) -> dict[str, Any]:
    """What a limit says, in the unit of its result. name: its own, if it has one. result: that of its result."""
    return {
        **({"name": name} if name is not None else {}),
        "result": result,
        **({"at_most": limit.at_most} if math.isfinite(limit.at_most) else {}),
        **({"at_least": limit.at_least} if math.isfinite(limit.at_least) else {}),
    }


def all_held(held: Sequence[Held]) -> Held:
    """Whether all limits hold: no if one surely does not, yes if all surely do."""
    if "no" in held:
        return "no"
    return "undecided" if "undecided" in held else "yes"


CALL = AnalysisCall("limits", models.LimitsQuestion, read_limits)
