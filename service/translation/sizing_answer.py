"""Where one number makes limits hold: the answer, and what has to be said beside it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from service.analysis.edges import Edge
from service.analysis.limits import Limit
from service.analysis.samples import Range
from service.analysis.sizing import Invalid, Missed, Nearest, Sizing, Solutions, Touch, Tried
from service.analysis.zone import WorstInZone, Zone
from service.models.sizing import SizingQuestion
from service.translation.analysis import Prepared
from service.translation.answers import Warning_, warning
from service.translation.named_places import with_names
from service.translation.numbers import NumberInfo

_WHERE = "#/sizing"


@dataclass(frozen=True)
class Asked:
    """The question, read. infos: of the sized number and those that may be off. limits: or the value to be met.

    looks: cases each place takes.
    """

    prepared: Prepared
    infos: tuple[NumberInfo, ...]
    scan: Range
    limits: tuple[Limit, ...]
    question: SizingQuestion
    zone: Zone | None
    looks: int


def shown_sizing(found: Sizing, asked: Asked, worst: WorstInZone | None) -> dict[str, Any]:
    """Where limits hold."""
    shown = _Shown(asked, worst)
    sizing = {
        **shown.number(),
        "holds": found.holds,
        "intervals": [
            {"low": shown.edge(interval.low), "high": shown.edge(interval.high)} for interval in found.intervals
        ],
        "solutions": [],
        **shown.common(found),
        "sizes": shown.sizes(found.tried) if found.tried else None,
        **shown.effort(found),
    }
    return {"sizing": sizing, "warnings": _Remarks(asked).of_sizing(found)}


def shown_solutions(found: Solutions, asked: Asked) -> dict[str, Any]:
    """Where a result has its value."""
    shown = _Shown(asked, None)
    sizing = {
        **shown.number(),
        "holds": None,
        "intervals": [],
        "solutions": [{**shown.edge(crossing), "kind": "target"} for crossing in found.crossings],
        **shown.common(found),
        "sizes": None,
        **shown.effort(found),
    }
    return {"sizing": sizing, "warnings": _Remarks(asked).of_solutions(found)}


class _Shown:
    """What was found, in the words of the answer."""

    def __init__(self, asked: Asked, worst: WorstInZone | None) -> None:
        self._asked = asked
        self._info = asked.infos[0]
        self._worst_in_zone = worst

    def number(self) -> dict[str, Any]:
        return {
            "number": {
                "name": self._info.name,
                "unit": self._info.measure.unit,
                "low": self._asked.scan.low,
                "high": self._asked.scan.high,
                "as_it_stands": self._info.nominal,
            }
        }

    def common(self, found: Sizing | Solutions) -> dict[str, Any]:
        return {
            "touches": [{**self._worst(touch), "low": touch.low, "high": touch.high} for touch in found.touches],
            "nearest": None if found.nearest is None else self._nearest(found.nearest),
            "invalid": [self._invalid(part) for part in found.invalid],
        }

    def effort(self, found: Sizing | Solutions) -> dict[str, Any]:
        places = self._asked.scan.places()
        is_even = not self._asked.scan.logarithmic
        return {
            **({} if self._asked.zone is None else {"tolerances": self._tolerances(self._asked.zone)}),
            "spacing": float(np.diff(places).max()) if is_even else None,
            "spacing_ratio": None if is_even else float((places[1:] / places[:-1]).max()),
            "case_count": found.cases * self._asked.looks,
            "complete": found.complete,
        }

    def edge(self, edge: Edge) -> dict[str, Any]:
        return {
            "kind": edge.kind,
            "value": edge.number,
            "error_bound": edge.error_bound,
            **self._of(edge.limit),
            "slope": edge.slope,
            "slope_error_estimate": edge.slope_error,
            **self._corner(edge.number, edge.limit),
        }

    def sizes(self, tried: Sequence[Tried]) -> dict[str, Any]:
        good = [size.number for size in tried if size.held == "yes"]
        return {
            "each": [self._size(size) for size in tried],
            "least": min(good, default=None),
            "greatest": max(good, default=None),
        }

    def _of(self, limit: int | None) -> dict[str, Any]:
        asked = self._asked
        name = None if limit is None else asked.prepared.results.infos[asked.limits[limit].result].name
        if asked.question.target is not None or limit is None:
            return {"limit": None, "name": None, "result": name}
        return {"limit": limit, "name": (asked.question.limits or [])[limit].name, "result": name}

    def _corner(self, number: float, limit: int | None) -> dict[str, Any]:
        if self._worst_in_zone is None or limit is None:
            return {}
        values = self._worst_in_zone.worst_case(number, limit)
        corner = [
            {"number": info.name, "unit": info.measure.unit, "value": float(value)}
            for info, value in zip(self._asked.infos, values, strict=True)
        ]
        return {"corner": corner}

    def _worst(self, at: Touch | Nearest | Tried) -> dict[str, Any]:
        return {
            "value": at.number,
            **self._of(at.limit),
            "margin": at.margin,
            "error_bound": at.error_bound,
            **self._corner(at.number, at.limit),
        }

    def _nearest(self, at: Nearest) -> dict[str, Any]:
        missed = () if self._asked.question.target is not None else at.missed
        return {**self._worst(at), "missed": [self._missed(limit) for limit in missed]}

    def _missed(self, missed: Missed) -> dict[str, Any]:
        return {
            **self._of(missed.limit),
            "margin": missed.margin,
            "error_bound": missed.error_bound,
            "holds_elsewhere": missed.held_elsewhere,
        }

    def _size(self, size: Tried) -> dict[str, Any]:
        failure = size.failure
        why = {}
        if failure is not None:
            why = {"code": failure.code, "message": with_names(failure.message, self._asked.prepared.document)}
        return {**self._worst(size), "held": size.held, **why}

    def _invalid(self, part: Invalid) -> dict[str, Any]:
        return {
            "low": part.low,
            "high": part.high,
            "error_bound": part.error_bound,
            "code": part.failure.code,
            "message": with_names(part.failure.message, self._asked.prepared.document),
        }

    def _tolerances(self, zone: Zone) -> list[dict[str, Any]]:
        nominals = [None, *zone.nominal.tolist()]
        return [
            {"number": info.name, "unit": info.measure.unit, "nominal": nominal, "plus": plus, "minus": minus}
            for info, nominal, plus, minus in zip(
                self._asked.infos, nominals, zone.plus.tolist(), zone.minus.tolist(), strict=True
            )
        ]


class _Remarks:
    """What has to be said beside an answer."""

    def __init__(self, asked: Asked) -> None:
        self._asked = asked
        self._info = asked.infos[0]

    def of_sizing(self, found: Sizing) -> list[Warning_]:
        remarks = []
        if found.holds == "nowhere":
            remarks.append(warning("nowhere", self._nowhere(found), f"{_WHERE}/holds"))
        if found.holds == "undecided":
            sentence = "Nowhere is it certain that all limits hold: where the worst is met, the errors leave it open."
            remarks.append(warning("undecided", sentence, f"{_WHERE}/touches"))
        if found.tried and not any(size.held == "yes" for size in found.tried):
            sentence = "None of the sizes holds all limits for certain."
            remarks.append(warning("no-size-holds", sentence, f"{_WHERE}/sizes"))
        return [*remarks, *self._of_search(found)]

    def of_solutions(self, found: Solutions) -> list[Warning_]:
        remarks = []
        if not found.crossings:
            if found.nearest is None:
                sentence = "No value of the number in this range has a result; `invalid` has the reasons."
            elif found.touches:
                sentence = "Nowhere does the result pass through its value for certain; it meets it within the errors."
            else:
                sentence = f"The result was found nowhere to have its value. It comes nearest at {self._at(found)}."
            remarks.append(warning("nowhere", sentence, f"{_WHERE}/solutions"))
        return [*remarks, *self._of_search(found)]

    def _nowhere(self, found: Sizing) -> str:
        nearest = found.nearest
        if nearest is None:
            return "No value of the number in this range has results; `invalid` has the reasons."
        sentence = f"No value of the number was found with which all limits hold. Nearest to it is {self._at(found)}, "
        sentence += f"where {_listed([self._missed(limit) for limit in nearest.missed])}."
        alone = [self._limit(limit.limit) for limit in nearest.missed if limit.held_elsewhere]
        never = [self._limit(limit.limit) for limit in nearest.missed if not limit.held_elsewhere]
        if len(alone) > 1:
            sentence += f" They exclude each other: each of {_listed(alone)} holds somewhere in the range, but nowhere "
            sentence += "were they found to hold together."
        if never:
            sentence += f" Nowhere in the range was {_listed(never, 'or')} found to hold."
        return sentence

    def _of_search(self, found: Sizing | Solutions) -> list[Warning_]:
        """What no answer of a search can leave unsaid."""
        remarks = []
        if not found.complete:
            sentence = "The search was stopped because no more cases were allowed: edges are told as far as they are "
            sentence += "known, and others may be missed. Raise `most_cases`."
            remarks.append(warning("cases-used-up", sentence, f"{_WHERE}/complete"))
        if found.unchanged:
            results = self._asked.prepared.results.infos
            names = dict.fromkeys(f'"{results[self._asked.limits[limit].result].name}"' for limit in found.unchanged)
            sentence = f'"{self._info.name}" has no influence on {_listed(list(names), "or")}: over the range nothing '
            sentence += "changes by more than the error bounds."
            remarks.append(warning("no-influence", sentence, f"{_WHERE}/number"))
        if self._asked.zone is not None:
            sentence = f"At each place {self._asked.looks} cases are computed: the nominal one, the corners of the "
            sentence += "tolerance zone and the ends of each tolerance alone. A result that does not rise or fall all "
            sentence += "along each tolerance may be worse between them."
            remarks.append(warning("corners-only", sentence, f"{_WHERE}/tolerances"))
        return [*remarks, self._looked_at()]

    def _looked_at(self) -> Warning_:
        places = self._asked.scan.places()
        if self._asked.scan.logarithmic:
            apart, where = f"each {(places[1:] / places[:-1]).max():.4g} times the one before", "spacing_ratio"
        else:
            apart, where = f"{self._with_unit(float(np.diff(places).max()), 4)} apart", "spacing"
        sentence = f"Cases were computed at {places.size} places first, {apart}. Whatever shows at these was followed; "
        sentence += "an interval, or a gap in one, that is narrower and does not show can be missed. A larger `count` "
        sentence += "looks closer."
        return warning("looked-at-places", sentence, f"{_WHERE}/{where}")

    def _at(self, found: Sizing | Solutions) -> str:
        assert found.nearest is not None
        return f"{self._info.name} = {self._with_unit(found.nearest.number)}"

    def _missed(self, missed: Missed) -> str:
        unit = self._asked.prepared.results.infos[self._asked.limits[missed.limit].result].measure.difference_unit
        if abs(missed.margin) <= missed.error_bound:
            return f"{self._limit(missed.limit)} is met to within its error bound"
        return f"{self._limit(missed.limit)} is missed by {_quantity(-missed.margin, unit)}"

    def _limit(self, limit: int) -> str:
        name = (self._asked.question.limits or [])[limit].name
        result = self._asked.prepared.results.infos[self._asked.limits[limit].result].name
        return f'"{name}"' if name is not None else f'limit {limit} on "{result}"'

    def _with_unit(self, value: float, digits: int = 6) -> str:
        return _quantity(value, self._info.measure.unit, digits)


def _quantity(value: float, unit: str, digits: int = 6) -> str:
    return f"{value:.{digits}g}" + ("" if unit == "1" else f" {unit}")


def _listed(parts: Sequence[str], word: str = "and") -> str:
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} {word} {parts[-1]}"
