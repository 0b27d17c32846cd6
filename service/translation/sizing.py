"""Where one number makes limits hold: the question read."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from service.analysis.evaluations import Evaluate
from service.analysis.limits import Limit
from service.analysis.samples import Range
from service.analysis.sizing import SEARCHED, fewest_cases, where_equal, where_limits_hold
from service.analysis.zone import WorstInZone, Zone, looks_at_a_place
from service.models import sizing as models
from service.models.tolerances import TolerancedNumber
from service.refusals import Path
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.collector import Collector
from service.translation.measures import read_measured
from service.translation.numbers import NumberInfo, NumberTarget, read_number
from service.translation.sizing_answer import Asked, shown_sizing, shown_solutions
from service.translation.spreads import Spread, read_spread


def read_sizing(question: models.SizingQuestion, prepared: Prepared) -> Analysis:
    """The question in the units of its number and results. Raises RequestRefused."""
    collector = prepared.collector()
    asked = question.number
    read = read_number(collector, asked, prepared.document, prepared.problem.units, ("number",))
    limits = prepared.limits(collector, question.limits or ())
    target = _read_target(collector, question.target, prepared) if question.target is not None else None
    infos, targets = prepared.numbers(collector, question.tolerances, ("tolerances",))
    collector.raise_if_any()
    assert read is not None
    info, number_target = read
    scan = _read_range(collector, asked, info)
    sizes = [
        read_measured(collector, info.measure, size, ("sizes", index)) for index, size in enumerate(question.sizes)
    ]
    numbers = _Numbers(question, (info, *infos), (number_target, *targets))
    zone = numbers.zone(collector) if question.tolerances or asked.is_off else None
    collector.raise_if_any()

    looks = 1 if zone is None else looks_at_a_place(zone)
    fewest = fewest_cases(scan, len(sizes))
    if question.most_cases is not None and question.most_cases < fewest * looks:
        detail = f"The places looked at first take {fewest * looks} cases; allow more, or lower `count`."
        collector.add(("most_cases",), detail, "too-few")
        collector.raise_if_any()
    most_cases = question.most_cases or (fewest + SEARCHED) * looks
    told = Asked(prepared, numbers.infos, scan, tuple(limits) if target is None else (target,), question, zone, looks)

    def run(evaluate: Evaluate) -> dict[str, Any]:
        most = most_cases // looks
        if target is not None:
            solutions = where_equal(
                evaluate, scan, target.result, target.at_least, as_it_stands=info.nominal, most_cases=most
            )
            return shown_solutions(solutions, told)
        units = [prepared.results.infos[limit.result].measure.difference_unit for limit in limits]
        worst = None if zone is None else WorstInZone(evaluate, limits, zone, [each.name for each in numbers.infos])
        held = where_limits_hold(
            evaluate if worst is None else worst,
            scan,
            limits if worst is None else worst.limits,
            units,
            sizes,
            as_it_stands=info.nominal,
            most_cases=most,
        )
        return shown_sizing(held, told, worst)

    return Analysis(prepared, prepared.plan(numbers.infos, numbers.targets), most_cases, run)


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


@dataclass(frozen=True)
class _Numbers:
    """The number that is sized and those that may be off, in this order."""

    question: models.SizingQuestion
    infos: tuple[NumberInfo, ...]
    targets: tuple[NumberTarget, ...]

    def zone(self, collector: Collector) -> Zone:
        """How far all of them may be off. Notes what is at fault."""
        sized = self.question.number
        if len(self.question.tolerances) + sized.is_off > models.MOST_TOLERANCES:
            detail = f"At most {models.MOST_TOLERANCES} tolerances can be had, with that of the number itself: each "
            detail += "more doubles the corners. Keep those that matter; /v1/tolerances ranks them."
            collector.add(("tolerances",), detail, "too-many")
        self._check_apart(collector)
        spreads = [_spread(collector, sized, self.infos[0], ("number",)) if sized.is_off else None]
        for index, (each, info) in enumerate(zip(self.question.tolerances, self.infos[1:], strict=True)):
            spreads.append(_spread(collector, each, info, ("tolerances", index)))
        return Zone(
            np.array([info.nominal for info in self.infos[1:]]),
            np.array([0.0 if spread is None else spread.plus for spread in spreads]),
            np.array([0.0 if spread is None else spread.minus for spread in spreads]),
        )

    def _check_apart(self, collector: Collector) -> None:
        """Note tolerances that are of the number that is sized."""
        taken = {leaf.path for leaf in self.targets[0].leaves}
        for index, (info, target) in enumerate(zip(self.infos[1:], self.targets[1:], strict=True)):
            if info.name == self.infos[0].name:
                collector.add(("tolerances", index, "name"), "Another number has this name already.", "name")
            if any(leaf.path in taken for leaf in target.leaves):
                detail = f'"{self.infos[0].name}" changes the same place; give its own tolerance as `plus_minus` there.'
                collector.add(("tolerances", index, target.way), detail, "changed-twice")


def _spread(
    collector: Collector, asked: models.ToleranceOfNumber | models.SizedNumber, info: NumberInfo, path: Path
) -> Spread | None:
    """The tolerance of a number, read as the call about tolerances reads it."""
    fields = asked.model_dump(exclude_none=True, include=set(models.ToleranceOfNumber.model_fields))
    return read_spread(collector, TolerancedNumber.model_validate(fields), info, path)


CALL = AnalysisCall("sizing", models.SizingQuestion, read_sizing)
