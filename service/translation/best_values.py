"""Which values of a few numbers are best: the question read, and its answer."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from service.analysis.best_values import Best, BestValues, Goal, Start, best_values
from service.analysis.evaluations import Evaluate, FloatArray
from service.analysis.limits import Limit, verdict
from service.models import best_values as models
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.answers import Warning_, warning
from service.translation.apart import ApartReader, Rectangles
from service.translation.collector import Collector
from service.translation.limits import all_held, limit_shown
from service.translation.measures import read_measured
from service.translation.named_places import with_names
from service.translation.numbers import NumberInfo

LOCAL = (
    "The best values were found by local searches. They do as well as can be nearby, to the estimate given; no such "
    "search proves that nothing better lies elsewhere. More `starts` make that less likely."
)
NO_ROOM = "No place was found at which all rectangles are as far apart as they have to be."
UNDECIDED = "With these values it is not certain that all limits hold: the errors leave it open."
USED_UP = "Searches were stopped because no more cases were allowed; more `most_cases` may find better values."
NO_ESTIMATE = (
    "How much better it could be nearby is not known: a search stopped there without converging, or a result has a "
    "kink there, as one `highest` over several places has. Name such places one by one as results of the goal."
)
NO_INFLUENCE = "The numbers have no influence on the goal: in all cases it is the same to within the error bounds."
ALL_FAILED = "Every case failed; `failures` has the reasons."


@dataclass(frozen=True)
class _Wanted:
    """The question in the units of its numbers and results."""

    asked: models.BestValuesQuestion
    infos: tuple[NumberInfo, ...]
    ranges: tuple[tuple[float, float], ...]
    goal: Goal
    limits: tuple[Limit, ...]
    apart: tuple[Rectangles, ...]

    def clearances(self, cases: FloatArray) -> FloatArray:
        """Those of all lists of rectangles, one list after the other."""
        return np.concatenate([rectangles.clearances(cases) for rectangles in self.apart], axis=1)


def read_best_values(question: models.BestValuesQuestion, prepared: Prepared) -> Analysis:
    """The question in the units of its numbers and results. Raises RequestRefused."""
    collector = prepared.collector()
    infos, targets = prepared.numbers(collector, question.numbers)
    goal = _read_goal(collector, question.goal, prepared)
    limits = prepared.limits(collector, question.limits)
    apart = ApartReader(collector, prepared, targets).read(question.apart)
    collector.raise_if_any()
    ranges = tuple(
        _read_range(collector, number, info, index)
        for index, (number, info) in enumerate(zip(question.numbers, infos, strict=True))
    )
    collector.raise_if_any()
    wanted = _Wanted(question, infos, ranges, goal, limits, apart)

    def run(evaluate: Evaluate) -> dict[str, Any]:
        found = best_values(
            evaluate,
            ranges,
            goal,
            limits,
            [info.measure.difference_unit for info in prepared.results.infos],
            first=np.array([info.nominal for info in infos]),
            apart=wanted.clearances if apart else None,
            n_starts=question.starts,
            most_cases=question.most_cases,
            seed=question.seed,
        )
        outcome = _outcome(found, wanted, prepared)
        return {"best_values": outcome, "warnings": _remarks(found, outcome, wanted)}

    return Analysis(prepared, prepared.plan(infos, targets), question.most_cases, run)


def _read_goal(collector: Collector, goal: models.Goal, prepared: Prepared) -> Goal:
    """The results of the goal, all of one unit."""
    key = "minimise" if goal.minimise is not None else "maximise"
    names = goal.minimise if goal.minimise is not None else goal.maximise
    assert names is not None
    results = [prepared.result(collector, name, ("goal", key, index)) for index, name in enumerate(names)]
    infos = prepared.results.infos
    for index, result in enumerate(results):
        if infos[result].measure.unit != infos[results[0]].measure.unit:
            detail = f"The first result of the goal is in {infos[results[0]].measure.unit}, this one in "
            detail += f"{infos[result].measure.unit}; compare results of one unit."
            collector.add(("goal", key, index), detail, "unit")
    return Goal(tuple(results), "lowest" if key == "minimise" else "highest")


def _read_range(collector: Collector, number: models.VariedNumber, info: NumberInfo, index: int) -> tuple[float, float]:
    low, high = (
        read_measured(collector, info.measure, end, ("numbers", index, name))
        for end, name in ((number.low, "low"), (number.high, "high"))
    )
    if low >= high:
        collector.add(("numbers", index, "high"), "`high` has to be greater than `low`.", "order")
    return low, high


def _outcome(found: BestValues, wanted: _Wanted, prepared: Prepared) -> dict[str, Any]:
    reason = None
    if found.best is None:
        reason = ALL_FAILED if found.has_room else NO_ROOM
    return {
        "best": None if found.best is None else _best(found, found.best, wanted, prepared),
        "reason": reason,
        "searches": [_search(start) for start in found.starts],
        "same_goal_count": sum(start.same_goal for start in found.starts),
        "case_count": found.cases,
        "failed_count": found.failed,
        "failures": [
            {"code": failure.code, "message": with_names(failure.message, prepared.document)}
            for failure in found.failures.values()
        ],
        "complete": found.complete,
    }


def _best(found: BestValues, best: Best, wanted: _Wanted, prepared: Prepared) -> dict[str, Any]:
    held = [verdict(float(m), float(b)) for m, b in zip(best.margins, best.margin_bounds, strict=True)]
    return {
        "numbers": [
            {
                "name": info.name,
                "unit": info.measure.unit,
                "value": float(best.numbers[index]),
                "as_it_stands": info.nominal,
                "at_end": "low" if index in best.at_low else "high" if index in best.at_high else None,
            }
            for index, info in enumerate(wanted.infos)
        ],
        "results": prepared.results_shown(best.values, best.bounds),
        "goal": _goal(found, best, wanted, prepared, is_missed="no" in held),
        "all_held": all_held(held),
        "limits": [
            {
                **limit_shown(asked, limit, prepared),
                "held": held[index],
                "margin": float(best.margins[index]),
                "error_bound": float(best.margin_bounds[index]),
                "binds": index in best.binding,
                "holds_elsewhere": best.held_elsewhere[index],
            }
            for index, (asked, limit) in enumerate(zip(wanted.asked.limits, wanted.limits, strict=True))
        ],
        "apart": [_clearance(rectangles, best.numbers) for rectangles in wanted.apart],
    }


def _goal(found: BestValues, best: Best, wanted: _Wanted, prepared: Prepared, *, is_missed: bool) -> dict[str, Any]:
    infos = [prepared.results.infos[result] for result in wanted.goal.results]
    first, first_bound = found.at_first or (None, None)
    return {
        "unit": infos[0].measure.unit,
        "value": best.goal,
        "error_bound": best.goal_bound,
        "search_error_estimate": best.left,
        "leading": [infos[place].name for place in best.leading],
        "as_it_stands": first,
        "as_it_stands_error_bound": first_bound,
        "improvement": None if first is None or is_missed else wanted.goal.sign * (first - best.goal),
    }


def _clearance(rectangles: Rectangles, numbers: FloatArray) -> dict[str, Any]:
    clear = rectangles.clearances(numbers[None])[0]
    index = int(np.argmin(clear))
    return {
        "least_distance": float(clear[index]) + rectangles.gap,
        "gap": rectangles.gap,
        "beyond_gap": float(clear[index]),
        "between": rectangles.pair(index),
    }


def _remarks(found: BestValues, outcome: dict[str, Any], wanted: _Wanted) -> list[Warning_]:
    """What has to be said beside an outcome."""
    best = outcome["best"]
    if best is None:
        return [warning("no-best-values", outcome["reason"], "#/best_values/reason")]
    remarks = []
    if best["all_held"] == "no":
        remarks.append(warning("limits-missed", _missed(best["limits"], wanted), "#/best_values/best/all_held"))
    else:
        remarks.append(warning("local-search", LOCAL, "#/best_values"))
        if found.complete and best["goal"]["search_error_estimate"] is None:
            remarks.append(warning("no-estimate", NO_ESTIMATE, "#/best_values/best/goal/search_error_estimate"))
    if best["all_held"] == "undecided":
        remarks.append(warning("undecided", UNDECIDED, "#/best_values/best/all_held"))
    if not found.complete:
        remarks.append(warning("cases-used-up", USED_UP, "#/best_values/complete"))
    if not found.goal_changes:
        remarks.append(warning("no-influence", NO_INFLUENCE, "#/best_values/best/goal"))
    return remarks


def _missed(limits: list[dict[str, Any]], wanted: _Wanted) -> str:
    """Which limits cannot be had, and which exclude each other."""
    names = [
        f'"{asked.name}"' if asked.name is not None else f'limit {index} on "{asked.result}"'
        for index, asked in enumerate(wanted.asked.limits)
    ]
    missed = [index for index, limit in enumerate(limits) if limit["held"] != "yes"]
    alone = [names[index] for index in missed if limits[index]["holds_elsewhere"]]
    never = [names[index] for index in missed if not limits[index]["holds_elsewhere"]]
    sentence = f"No values were found with which all limits hold; these miss {_listed([names[i] for i in missed])} "
    sentence += "least. They are no improvement on anything that holds."
    if len(alone) > 1:
        sentence += f" Each of {_listed(alone)} holds in some case, but nowhere were they found to hold together."
    if never:
        sentence += f" In no case was {_listed(never, 'or')} found to hold."
    return f"{sentence} Local searches do not prove that there are none; more `starts` make that less likely."


def _listed(parts: list[str], word: str = "and") -> str:
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} {word} {parts[-1]}"


def _search(start: Start) -> dict[str, Any]:
    return {
        "first": start.first.tolist(),
        "first_goal": start.first_goal,
        "last": start.last.tolist(),
        "last_goal": start.last_goal,
        "ended": start.ended,
        "same_goal": start.same_goal,
        "same_numbers": start.same_numbers,
    }


CALL = AnalysisCall("best-values", models.BestValuesQuestion, read_best_values)
