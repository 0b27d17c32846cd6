"""Results with names, computed: for one case, with a bound on each, as exactly as is asked for or can be promised.

Results that share their work are asked for together: places in one field, means over one face at once.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from functools import cached_property
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from service.core import Extremes, Field, Solution, Total
from service.core.bounded import Bounded
from service.core.errors import AccuracyNotReached, CoreError, Interrupted
from service.core.estimate import Estimate
from service.core.laws import Kirchhoff
from service.core.mixed import MixedSolution
from service.refusals import Issue, Path, RequestRefused
from service.translation.answers import KeepGoing
from service.translation.fields import search_estimate
from service.translation.mixed_pads import USUAL_OF_FLOWS, Answers, mixed_pad, pad_answers
from service.translation.problem import ReadProblem
from service.translation.reach import reach_estimates
from service.translation.result_reading import (
    AtPlace,
    Combined,
    ExtremeIn,
    FlowThrough,
    InflowOf,
    MeanOver,
    ReachOf,
    ReadResults,
    ResultInfo,
    read_results,
)
from service.units import Kind

__all__ = ["ReadResults", "ResultInfo", "ResultValues", "estimate_results", "evaluate_results", "read_results"]

FloatArray = NDArray[np.float64]
Answer = TypeVar("Answer")

# How often the accuracy of one result gives way to what can be promised.
EASED_AT_MOST = 3

# Rounding of a difference, a ratio or a change of units, in parts of the value.
ROUNDING = 4 * float(np.finfo(float).eps)


@dataclass(frozen=True, eq=False)
class ResultValues:
    """Results of one case in their units, shape (n_results,) each.

    bounds: how far off each may be, in the unit of its differences; infinite for a ratio whose divisor may be zero.
    places: where the highest or lowest potential was found, by the number of the result.
    """

    values: FloatArray
    bounds: FloatArray
    places: Mapping[int, tuple[float, float, float]] = field(default_factory=dict)


def evaluate_results(
    wanted: ReadResults,
    problem: ReadProblem,
    solution: Solution,
    *,
    relative: float | None,
    keep_going: KeepGoing,
) -> ResultValues:
    """All results of one case.

    relative: error wanted in parts of the span, the usual accuracy if None. Where it cannot be promised for a result
    the bound of that one says what was had.
    Raises RequestRefused for a result without a finite value, and what the solver raises, pointing at the result.
    """
    return _Evaluation(wanted, problem, solution, relative, keep_going).values()


def estimate_results(wanted: ReadResults, solution: Solution, *, relative: float | None) -> list[Estimate]:
    """What the results of one case cost, before any is computed. Means and totals are cheap."""
    tolerance = _tolerance(solution, relative)
    places = {asked.place: False for asked in wanted.wanted if isinstance(asked, AtPlace)}
    for asked in wanted.wanted:
        if isinstance(asked, AtPlace) and asked.quantity != "potential":
            places[asked.place] = True
    with_flux = sum(places.values())
    estimates = [
        solution.estimate_points(count, tolerance=tolerance, with_flux=flux)
        for count, flux in ((with_flux, True), (len(places) - with_flux, False))
        if count
    ]
    for asked in wanted.wanted:
        if isinstance(asked, ExtremeIn):
            estimates.append(search_estimate(solution, tolerance))
        elif isinstance(asked, ReachOf):
            estimates += reach_estimates(solution, 1, tolerance)
        elif isinstance(asked, MeanOver | InflowOf | FlowThrough):
            estimates.append(solution.estimate_points(1, tolerance=tolerance))
    return estimates


def _tolerance(solution: Solution, relative: float | None) -> float:
    """The error wanted, in the unit of the potential."""
    # A body whose data are all alike has no span; any number will then do.
    return (solution.usual_accuracy if relative is None else relative) * (solution.span or 1.0)


class _Evaluation:
    """One case while its results are computed."""

    def __init__(
        self,
        wanted: ReadResults,
        problem: ReadProblem,
        solution: Solution,
        relative: float | None,
        keep_going: KeepGoing,
    ) -> None:
        self.wanted = wanted
        self.units = problem.units
        self.body = solution.body
        self.solution = solution
        self.relative = relative
        self.keep_going = keep_going
        self.tolerance = _tolerance(solution, relative)
        self.found: list[Bounded | None] = [None] * len(wanted.wanted)
        self.places: dict[int, tuple[float, float, float]] = {}

    def values(self) -> ResultValues:
        """Everything, in the order it was asked for."""
        self._places()
        self._means()
        for index, asked in enumerate(self.wanted.wanted):
            if self.found[index] is None:
                self.keep_going()
                with self._about(index):
                    self.found[index] = self._by_itself(index, asked)
        numbers = [self._known(index) for index in range(len(self.found))]
        values = np.array([number.value for number in numbers])
        if not np.isfinite(values).all():
            raise FloatingPointError("a result is not finite")
        return ResultValues(values, np.array([number.error_bound for number in numbers]), self.places)

    def _known(self, index: int) -> Bounded:
        found = self.found[index]
        assert found is not None
        return found

    @contextmanager
    def _about(self, index: int) -> Iterator[None]:
        """Make an error of the solver point to a result."""
        try:
            yield
        except Interrupted:
            raise
        except CoreError as error:
            error.field = self._path(index)
            if isinstance(error, AccuracyNotReached):
                unit = self.units.declared[Kind.POTENTIAL_DIFFERENCE]
                error.message = error.SENTENCE.format(
                    asked=f"{error.asked:.3g} {unit}", bound=f"{error.bound:.3g} {unit}"
                )
            raise

    def _path(self, index: int) -> Path:
        return (*self.wanted.path, index)

    def _no_value(self, index: int, why: str) -> RequestRefused:
        """The refusal of a result without a finite value."""
        detail = f'The result "{self.wanted.infos[index].name}" has no finite value{why}'
        return RequestRefused((Issue(self._path(index), detail, "no-finite-value"),))

    def _eased(self, ask: Callable[[float], Answer], tolerance: float | None = None) -> Answer:
        """An answer to the accuracy wanted, or to one that can be promised."""
        tolerance = self.tolerance if tolerance is None else tolerance
        for _ in range(EASED_AT_MOST):
            try:
                return ask(tolerance)
            except AccuracyNotReached as error:
                tolerance *= error.bound / error.asked
        return ask(tolerance)

    def _by_itself(self, index: int, asked: object) -> Bounded:
        """A result that shares its work with no other."""
        match asked:
            case ExtremeIn():
                return self._extreme(index, asked)
            case InflowOf():
                return self._inflow(index, asked)
            case FlowThrough():
                plane = asked.plane
                total = self._eased(
                    lambda tolerance: self.solution.plane_total(
                        plane.axis, plane.position, plane.where, gap=asked.gap, tolerance=tolerance
                    )
                )
                return self._flow(index, total, asked.gap)
            case ReachOf():
                return self._reach(index, asked)
            case Combined():
                first, second = self._known(asked.first), self._known(asked.second)
                return self._ratio(index, first, second) if asked.is_ratio else _difference(first, second)
        raise TypeError(f"no way to compute {type(asked).__name__}")

    def _places(self) -> None:
        """The potential, the gradient and the flux at places, all in one field or two."""
        numbers = [index for index, asked in enumerate(self.wanted.wanted) if isinstance(asked, AtPlace)]
        need_flux = {self._asked(index).place for index in numbers if self._asked(index).quantity != "potential"}
        for with_flux in (False, True):
            some = [index for index in numbers if (self._asked(index).place in need_flux) == with_flux]
            # A common bound would be that of the worst place, and with mixed faces they differ by much.
            together = [] if isinstance(self.solution, MixedSolution) else some
            if together and not self._all_places(together, with_flux=with_flux):
                together = []
            for index in [] if together else some:
                with self._about(index):
                    self._eased(lambda tolerance: self._read_off([index], with_flux, tolerance))  # noqa: B023

    def _asked(self, index: int) -> AtPlace:
        asked = self.wanted.wanted[index]
        assert isinstance(asked, AtPlace)
        return asked

    def _all_places(self, numbers: Sequence[int], *, with_flux: bool) -> bool:
        """Whether all these results could be told at once to the accuracy wanted."""
        self.keep_going()
        try:
            self._read_off(numbers, with_flux, self.tolerance)
        except AccuracyNotReached:
            return False
        return True

    def _read_off(self, numbers: Sequence[int], with_flux: bool, tolerance: float) -> None:
        """Tell results at places from one field."""
        rows = {place: row for row, place in enumerate(dict.fromkeys(self._asked(index).place for index in numbers))}
        found = self.solution.field_at(
            np.array(list(rows)), tolerance=tolerance, with_flux=with_flux, keep_going=self.keep_going
        )
        for index in numbers:
            asked = self._asked(index)
            self.found[index] = self._at_place(index, asked, found, rows[asked.place])

    def _at_place(self, index: int, asked: AtPlace, found: Field, row: int) -> Bounded:
        potential = Bounded(float(found.potential[row]), found.potential_bound)
        if asked.quantity == "potential":
            return potential
        assert found.flux is not None
        assert found.flux_bound is not None
        vector, off = found.flux[:, row], float(found.flux_bound[row])
        if not np.isfinite(vector).all():
            why = ", because it lies on a line where the data of faces jump; choose a place beside it."
            raise self._no_value(index, why)
        axes = range(3) if asked.along is None else (asked.along,)
        parts = [Bounded(float(vector[axis]), off) for axis in axes]
        if asked.quantity == "gradient":
            parts = [self._slope(flux, axis, asked.place[2], potential) for flux, axis in zip(parts, axes, strict=True)]
        else:
            parts = [self._written(Kind.FLUX, part) for part in parts]
        if asked.along is not None:
            return parts[0]
        return Bounded(math.hypot(*(part.value for part in parts)), math.hypot(*(part.error_bound for part in parts)))

    def _slope(self, flux: Bounded, axis: int, z: float, potential: Bounded) -> Bounded:
        """The slope along an axis that drives a flux, by the conductivity of that place."""
        conductivity = float(self.body.conductivity_at(axis, np.array([z]))[0])
        value, off = -flux.value / conductivity, flux.error_bound / conductivity
        if self._law is None:
            return Bounded(value, off + ROUNDING * abs(value))
        factor = float(self._law.factor(np.array([potential.value]))[0])
        low, high = potential.value - potential.error_bound, potential.value + potential.error_bound
        least, most = self._law.factor_range(low, high)
        spread = max(1 / least - 1 / factor, 1 / factor - 1 / most)
        return Bounded(value / factor, off / least + abs(value) * (spread + ROUNDING / factor))

    @cached_property
    def _law(self) -> Kirchhoff | None:
        law = self.body.law
        return None if law is None else Kirchhoff(law, law.nodes[0])

    def _written(self, kind: Kind, number: Bounded) -> Bounded:
        """A number of the solver's in the declared unit."""
        value, off = self.units.write(kind, number.value), self.units.write(kind, number.error_bound)
        return Bounded(value, off + ROUNDING * abs(value))

    def _means(self) -> None:
        """Means over faces, those of one face at once; of pads of mixed faces as they are told of those."""
        by_face: dict[str, list[int]] = {}
        for index, asked in enumerate(self.wanted.wanted):
            if not isinstance(asked, MeanOver):
                continue
            passed = mixed_pad(self._pads, asked.part) if asked.part.patch is not None else None
            if passed is None:
                by_face.setdefault(asked.part.face, []).append(index)
            else:
                self.found[index] = passed.potential
        for numbers in by_face.values():
            self.keep_going()
            if not self._all_means(numbers):
                for index in numbers:
                    with self._about(index):
                        self._eased(lambda tolerance: self._read_means([index], tolerance))  # noqa: B023

    def _all_means(self, numbers: Sequence[int]) -> bool:
        """Whether the means over one face could be told at once to the accuracy wanted."""
        try:
            self._read_means(numbers, self.tolerance)
        except AccuracyNotReached:
            return False
        return True

    def _read_means(self, numbers: Sequence[int], tolerance: float) -> None:
        asked = [asked for index in numbers if isinstance(asked := self.wanted.wanted[index], MeanOver)]
        means = self.solution.means(asked[0].part.face, [each.where for each in asked], tolerance=tolerance)
        for index, mean in zip(numbers, means, strict=True):
            self.found[index] = mean

    @cached_property
    def _pads(self) -> Answers:
        """What passes through the pads of mixed faces; nothing where there are none."""
        return pad_answers(self.solution, self._flow_tolerance)

    @property
    def _flow_tolerance(self) -> float:
        """The accuracy of flows. The usual one of potentials is too coarse for them where faces are mixed."""
        if self.relative is None and isinstance(self.solution, MixedSolution):
            return USUAL_OF_FLOWS * (self.solution.span or 1.0)
        return self.tolerance

    def _extreme(self, index: int, asked: ExtremeIn) -> Bounded:
        if asked.box is None and self._wants_both:
            place = self._extremes.hottest if asked.sign > 0 else self._extremes.coldest
        else:
            low, high = asked.box or (self.body.begins, self.body.size)
            look = self.solution.highest_within if asked.sign > 0 else self.solution.lowest_within
            place = self._eased(lambda tolerance: look(low, high, tolerance=tolerance, keep_going=self.keep_going))
        self.places[index] = place.position
        return Bounded(float(place.value), float(place.error_bound))

    @cached_property
    def _wants_both(self) -> bool:
        """Whether both extremes of the whole body are wanted, which share their first grids."""
        return {-1.0, 1.0} <= {
            asked.sign for asked in self.wanted.wanted if isinstance(asked, ExtremeIn) and asked.box is None
        }

    @cached_property
    def _extremes(self) -> Extremes:
        return self._eased(lambda tolerance: self.solution.extremes(tolerance=tolerance, keep_going=self.keep_going))

    def _inflow(self, index: int, asked: InflowOf) -> Bounded:
        part = asked.part
        if isinstance(self.solution, MixedSolution):
            # Refined as far as its flows are wanted.
            passed = mixed_pad(self._pads, part)
            if passed is not None:
                return self._written(Kind.FLOW, passed.flow)
        total = self._eased(
            lambda tolerance: self.solution.face_total(part.face, part.where, gap=asked.gap, tolerance=tolerance),
            self._flow_tolerance,
        )
        return self._flow(index, total, asked.gap)

    def _flow(self, index: int, total: Total, gap: float | None) -> Bounded:
        """A total in the declared unit. Refused where it has no finite value."""
        if total.value is not None and total.error_bound is not None:
            return self._written(Kind.FLOW, Bounded(total.value, total.error_bound))
        lines = ", ".join(cause.line for cause in total.causes)
        if any(cause.kind.startswith("endless") for cause in total.causes):
            raise self._no_value(index, f", because it goes on without end: {lines}. Name a finite rectangle of it.")
        if gap is None:
            raise self._no_value(index, f", because held values jump at: {lines}. Give `edge_gap`.")
        if total.with_gap is None:
            raise self._no_value(index, f", because with the edge gap it still ends on a jump of held values: {lines}.")
        return self._written(Kind.FLOW, total.with_gap)

    def _reach(self, index: int, asked: ReachOf) -> Bounded:
        relative = self.tolerance / (self.solution.span or 1.0)
        found = self._eased(
            lambda tolerance: self.solution.reach(
                asked.face, [asked.fraction], tolerance=tolerance, keep_going=self.keep_going
            ),
            relative,
        ).worst[0]
        if found.distance is None or found.error_bound is None:
            left = "" if found.left is None else f"; on the far side {found.left:.3g} of it is left"
            raise self._no_value(index, f", because the disturbance never falls to {asked.fraction:g}{left}.")
        return Bounded(found.distance, found.error_bound)

    def _ratio(self, index: int, of: Bounded, over: Bounded) -> Bounded:
        """One number over another: |a / b - A / B| <= (|a| eb + |b| ea) / (|b| (|b| - eb))."""
        if over.value == 0.0:
            raise self._no_value(index, ", because what it is divided by is zero.")
        value, divisor = of.value / over.value, abs(over.value)
        if divisor <= over.error_bound:
            return Bounded(value, math.inf)
        off = (abs(value) * over.error_bound + of.error_bound) / (divisor - over.error_bound)
        return Bounded(value, off + ROUNDING * abs(value))


def _difference(of: Bounded, less: Bounded) -> Bounded:
    value = of.value - less.value
    return Bounded(value, of.error_bound + less.error_bound + ROUNDING * abs(value))
