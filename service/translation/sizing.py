"""Where one number makes limits hold: the question read, and its answer."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from service.analysis.evaluations import Evaluate
from service.analysis.limits import Limit
from service.analysis.samples import Range
from service.analysis.sizing import (
    Edge,
    Interval,
    Invalid,
    Nearest,
    Sizing,
    Solutions,
    Touch,
    Tried,
    usual_cases,
    where_equal,
    where_limits_hold,
)
from service.models import sizing as models
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.collector import Collector
from service.translation.measures import read_measured
from service.translation.numbers import NumberInfo, read_number


def read_sizing(question: models.SizingQuestion, prepared: Prepared) -> Analysis:
    """The question in the units of its number and results. Raises RequestRefused."""
    collector = prepared.collector()
    asked = question.number
    read = read_number(collector, asked, prepared.document, prepared.problem.units, ("number",))
    limits = prepared.limits(collector, question.limits or ())
    target = _read_target(collector, question.target, prepared) if question.target is not None else None
    collector.raise_if_any()
    assert read is not None
    info, number_target = read
    scan = _read_range(collector, asked, info)
    sizes = [
        read_measured(collector, info.measure, size, ("sizes", index)) for index, size in enumerate(question.sizes)
    ]
    collector.raise_if_any()

    def run(evaluate: Evaluate) -> dict[str, Any]:
        if target is not None:
            found = where_equal(evaluate, scan, target.result, target.at_least)
            return {"sizing": _Shown(info, scan, [target], prepared, is_target=True).solutions(found)}
        units = [prepared.results.infos[limit.result].measure.difference_unit for limit in limits]
        held = where_limits_hold(evaluate, scan, limits, units, sizes)
        return {"sizing": _Shown(info, scan, limits, prepared, is_target=False).sizing(held)}

    plan = prepared.plan((info,), (number_target,))
    return Analysis(prepared, plan, usual_cases(scan, len(sizes)), run)


def _read_target(collector: Collector, target: models.Target, prepared: Prepared) -> Limit:
    """A value to be met, as a limit whose margin is the result less that value."""
    number = prepared.result(collector, target.result, ("target", "result"))
    measure = prepared.results.infos[number].measure
    return Limit(number, at_least=read_measured(collector, measure, target.equals, ("target", "equals")))


def _read_range(collector: Collector, asked: models.SizedNumber, info: NumberInfo) -> Range:
    low, high = (
        read_measured(collector, info.measure, end, ("number", name))
        for end, name in ((asked.low, "low"), (asked.high, "high"))
    )
    if low >= high:
        collector.add(("number", "high"), "`high` has to be greater than `low`.", "order")
    if asked.spread == "logarithmic" and low <= 0.0:
        detail = "Values with equal ratios need ends above zero; raise `low`, or spread them evenly."
        collector.add(("number", "low"), detail, "not-positive")
    return Range(low, high, asked.count, asked.spread == "logarithmic")


class _Shown:
    """What was found, in the words of the answer."""

    def __init__(
        self, info: NumberInfo, scan: Range, limits: Sequence[Limit], prepared: Prepared, *, is_target: bool
    ) -> None:
        self._info, self._scan = info, scan
        self._names = [prepared.results.infos[limit.result].name for limit in limits]
        self._is_target = is_target

    def sizing(self, found: Sizing) -> dict[str, Any]:
        """Where limits hold."""
        return {
            **self._number(),
            "holds": found.holds,
            "intervals": [self._interval(interval) for interval in found.intervals],
            "solutions": [],
            **self._common(found),
            "sizes": self._sizes(found.tried) if found.tried else None,
            **_effort(found),
        }

    def solutions(self, found: Solutions) -> dict[str, Any]:
        """Where a result has its value."""
        return {
            **self._number(),
            "holds": None,
            "intervals": [],
            "solutions": [self._edge(crossing) for crossing in found.crossings],
            **self._common(found),
            "sizes": None,
            **_effort(found),
        }

    def _number(self) -> dict[str, Any]:
        return {
            "number": {
                "name": self._info.name,
                "unit": self._info.measure.unit,
                "low": self._scan.low,
                "high": self._scan.high,
                "as_it_stands": self._info.nominal,
            }
        }

    def _common(self, found: Sizing | Solutions) -> dict[str, Any]:
        return {
            "touches": [{**self._worst(touch), "low": touch.low, "high": touch.high} for touch in found.touches],
            "nearest": None if found.nearest is None else self._worst(found.nearest),
            "invalid": [_invalid(part) for part in found.invalid],
        }

    def _of(self, limit: int | None) -> dict[str, Any]:
        return {
            "limit": None if self._is_target else limit,
            "result": None if limit is None else self._names[limit],
        }

    def _interval(self, interval: Interval) -> dict[str, Any]:
        return {"low": self._edge(interval.low), "high": self._edge(interval.high)}

    def _edge(self, edge: Edge) -> dict[str, Any]:
        return {
            "kind": edge.kind,
            "value": edge.number,
            "error_bound": edge.error_bound,
            **self._of(edge.limit),
            "slope": edge.slope,
            "slope_error_estimate": edge.slope_error,
        }

    def _worst(self, at: Touch | Nearest | Tried) -> dict[str, Any]:
        return {"value": at.number, **self._of(at.limit), "margin": at.margin, "error_bound": at.error_bound}

    def _sizes(self, tried: Sequence[Tried]) -> dict[str, Any]:
        good = [size.number for size in tried if size.held == "yes"]
        return {
            "each": [self._size(size) for size in tried],
            "least": min(good, default=None),
            "greatest": max(good, default=None),
        }

    def _size(self, size: Tried) -> dict[str, Any]:
        failure = size.failure
        why = {} if failure is None else {"code": failure.code, "message": failure.message}
        return {**self._worst(size), "held": size.held, **why}


def _invalid(part: Invalid) -> dict[str, Any]:
    return {
        "low": part.low,
        "high": part.high,
        "error_bound": part.error_bound,
        "code": part.failure.code,
        "message": part.failure.message,
    }


def _effort(found: Sizing | Solutions) -> dict[str, Any]:
    return {"spacing": found.spacing, "case_count": found.cases}


CALL = AnalysisCall("sizing", models.SizingQuestion, read_sizing)
