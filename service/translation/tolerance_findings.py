"""What was found about tolerances: verdicts on limits, and what to be aware of."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from service.analysis.derivatives import Derivatives
from service.analysis.evaluations import Failure, FloatArray
from service.analysis.limits import Held, Limit, bounds_of, margins, verdict
from service.analysis.propagation import Propagation
from service.analysis.stack_up import StackUp
from service.analysis.worst_case import PARTS, Alone, Extreme, Zone
from service.translation.answers import Warning_, warning
from service.translation.limits import all_held
from service.translation.numbers import NumberInfo
from service.translation.result_reading import ResultInfo

# A result is said to bend where it departs from first order by more than this part of what first order adds up to, or
# was computed this much beyond it.
BENT, BEYOND = 0.1, 0.01


@dataclass(frozen=True)
class Verdicts:
    """How limits fare between a low and a high end of their results; margins and bounds of shape (n_limits,)."""

    margins: FloatArray
    bounds: FloatArray
    verdicts: tuple[Held, ...]


@dataclass(frozen=True)
class Found:
    """All that was found, in the words of the analyses. lowest, highest: of all cases computed in the zone."""

    infos: Sequence[NumberInfo]
    results: Sequence[ResultInfo]
    limits: Sequence[Limit]
    zone: Zone
    slopes: Derivatives
    stacked: StackUp
    alone: Alone
    lowest: Extreme
    highest: Extreme
    failures: Mapping[str, tuple[int, Failure]]
    spread: Propagation | None

    @cached_property
    def bend(self) -> FloatArray:
        """By how much each result departs from first order, shape (n_results,)."""
        total: FloatArray = self.alone.bend.sum(axis=1)
        return total

    @cached_property
    def worst(self) -> Verdicts:
        """By what was computed."""
        low, high = self.lowest, self.highest
        return self._between(low.values, low.bounds, high.values, high.bounds)

    @cached_property
    def held(self) -> tuple[Held, ...]:
        """Whether each limit holds at worst; no limit surely does while a case in the zone has no result."""
        return tuple("undecided" if self.failures and word == "yes" else word for word in self.worst.verdicts)

    @cached_property
    def first_order(self) -> Verdicts:
        """By tolerances added up to first order."""
        error = self.stacked.slope_error + self.bend
        return self._between(self.stacked.worst_low, error, self.stacked.worst_high, error)

    @cached_property
    def squares(self) -> Verdicts:
        """By the root sum of squares."""
        error, half = self.stacked.slope_error + self.bend, self.stacked.root_sum_square
        return self._between(self.stacked.middle - half, error, self.stacked.middle + half, error)

    def _between(self, low: FloatArray, low_bound: FloatArray, high: FloatArray, high_bound: FloatArray) -> Verdicts:
        ends = [
            (margins(self.limits, values), bounds_of(self.limits, bounds))
            for values, bounds in ((low, low_bound), (high, high_bound))
        ]
        (low_margin, low_error), (high_margin, high_error) = ends
        words = [[verdict(float(m), float(b)) for m, b in zip(margin, bound, strict=True)] for margin, bound in ends]
        return Verdicts(
            np.minimum(low_margin, high_margin),
            np.where(low_margin <= high_margin, low_error, high_error),
            tuple(all_held(both) for both in zip(*words, strict=True)),
        )


def warnings_of(found: Found) -> list[Warning_]:
    """What to be aware of."""
    remarks = _of_failures(found)
    for result in range(len(found.results)):
        remarks += _of_shape(found, result)
        if found.spread is not None:
            remarks += _of_samples(found, found.spread, result)
    for index in range(len(found.limits)):
        remarks += [*_of_verdicts(found, index), *_of_worst(found, index), *_of_squares(found, index)]
    return remarks


def _of_failures(found: Found) -> list[Warning_]:
    remarks = []
    for number, info in enumerate(found.infos):
        # Half-way only where the end itself has results.
        for side, places, end in (("lower", (0, 1), found.zone.low), ("upper", (3, 2), found.zone.high)):
            failed = [place for place in places if (place, number) in found.alone.failures]
            if not failed:
                continue
            value = found.zone.places(PARTS[failed[0]])[number]
            where = f"{'at' if value == end[number] else 'half-way to'} the {side} end of its tolerance zone"
            detail = (
                f'With "{info.name}" {where}, {_said(value, info.measure.unit)}, there is no result: '
                f"{found.alone.failures[failed[0], number].message} Make the tolerance narrower if the number cannot "
                "be there; while a case within the zones has no result, no limit is said to hold."
            )
            remarks.append(warning("zone-without-result", detail, f"#/numbers/{number}"))
    if found.failures and not remarks:
        count = sum(number for number, _ in found.failures.values())
        example = next(iter(found.failures.values()))[1]
        detail = (
            f"Cases within the tolerance zones with several numbers away from their nominal values gave no result, "
            f"{count} in all, such as: {example.message} No limit is said to hold while there are any."
        )
        remarks.append(warning("zone-without-result", detail, "#/failures"))
    return remarks


def _of_shape(found: Found, result: int) -> list[Warning_]:
    info, stacked = found.results[result], found.stacked
    nominal, first_low, first_high = (
        float(part[result]) for part in (stacked.nominal, stacked.worst_low, stacked.worst_high)
    )
    side, error = max(nominal - first_low, first_high - nominal), stacked.slope_error[result]
    beyond = max(
        first_low - found.lowest.values[result] - found.lowest.bounds[result],
        found.highest.values[result] - first_high - found.highest.bounds[result],
    )
    where = f"#/stack_ups/{result}"
    if found.bend[result] > max(error, BENT * side) or beyond > max(error, BEYOND * side):
        detail = (
            f'"{info.name}" bends within the tolerance zones: as computed it goes {_ends(found, result)}, to first '
            f"order from {_said(first_low)} to {_said(first_high, info.measure.unit)}. Go by what is computed; the "
            "root sum square and the standard deviation are of first order too, samples are not."
        )
        return [warning("bends", detail, where)]
    span = found.highest.values[result] - found.lowest.values[result]
    is_still = span <= found.highest.bounds[result] + found.lowest.bounds[result]
    if is_still and np.all(np.isnan(stacked.variance_shares[result])):
        detail = (
            f'"{info.name}" does not vary beyond its error bound with any of these numbers; shares and indices of it '
            "would be noise and are left out."
        )
        return [warning("does-not-vary", detail, where)]
    return []


def _of_samples(found: Found, spread: Propagation, result: int) -> list[Warning_]:
    info, bound = found.results[result], spread.bounds[result]
    lowest, highest = spread.lowest[result], spread.highest[result]
    is_beyond = lowest < found.lowest.values[result] - bound or highest > found.highest.values[result] + bound
    if not is_beyond:
        return []
    detail = (
        f'Samples of "{info.name}" go from {_said(lowest)} to {_said(highest, info.measure.unit)}, beyond the worst '
        f"within the zones, {_ends(found, result)}: distributions reach beyond their zones."
    )
    return [warning("samples-beyond", detail, f"#/propagation/results/{result}")]


def _of_verdicts(found: Found, index: int) -> list[Warning_]:
    first_order, held = found.first_order.margins[index], found.held[index]
    if not ((held == "no" and first_order >= 0) or (held == "yes" and first_order < 0)):
        return []
    name, unit = _limited(found, index)
    words = ("holds", "is missed") if first_order >= 0 else ("is missed", "holds")
    detail = (
        f'To first order the limit on "{name}" {words[0]} by {_said(abs(first_order), unit)}; as computed it '
        f"{words[1]} by {_said(abs(found.worst.margins[index]), unit)} at worst. Go by what is computed."
    )
    return [warning("verdicts-differ", detail, _at(index))]


def _of_worst(found: Found, index: int) -> list[Warning_]:
    if found.worst.verdicts[index] != "undecided":
        return []
    name, unit = _limited(found, index)
    margin, bound = found.worst.margins[index], found.worst.bounds[index]
    if math.isfinite(margin) and math.isfinite(bound):
        why = (
            f"the margin, {_said(margin, unit)}, is within its error bound, {_said(bound, unit)}. Take both for equal "
            "and accept that or not, move the limit by more than the bound, or ask for more `accuracy`."
        )
    else:
        why = "the worst case has no value with a finite error bound."
    return [warning("undecided", f'Whether the limit on "{name}" holds at worst is not decided: {why}', _at(index))]


def _of_squares(found: Found, index: int) -> list[Warning_]:
    margin, error = found.squares.margins[index], found.squares.bounds[index]
    if found.squares.verdicts[index] != "undecided" or not math.isfinite(margin):
        return []
    name, unit = _limited(found, index)
    detail = (
        f'Whether the limit on "{name}" holds by the root sum square is not decided: the margin, '
        f"{_said(margin, unit)}, is within what first order may be off, {_said(error, unit)}. Ask for `samples` to see "
        "how often it holds."
    )
    return [warning("undecided", detail, _at(index))]


def _limited(found: Found, index: int) -> tuple[str, str]:
    """The name of the result of a limit, and the unit of its margins."""
    info = found.results[found.limits[index].result]
    return info.name, info.measure.step.unit


def _at(index: int) -> str:
    return f"#/limits/{index}"


def _ends(found: Found, result: int) -> str:
    unit = found.results[result].measure.unit
    return f"from {_said(found.lowest.values[result])} to {_said(found.highest.values[result], unit)}"


def _said(value: float, unit: str = "") -> str:
    """A number for a sentence."""
    number = f"{value:.6g}" if math.isfinite(value) else "an unknown value"
    return f"{number} {unit}" if unit not in ("", "1") else number
