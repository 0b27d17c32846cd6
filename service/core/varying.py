"""The solution of a body whose conductivity varies with the potential, or one of whose faces radiates.

The body is solved in theta (`kirchhoff`), its film faces iterated as far as the accuracy asked for needs
(`film_iteration`), and answers are put back into the potential with their bounds. Flux and totals are the same in both.
"""

from __future__ import annotations

import math
import threading
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from service.core import balance, certificate, convergence, estimate, extremes, totals, varying_mean, varying_totals
from service.core import field as fields
from service.core.balance import Balance
from service.core.bounded import Bounded, Total
from service.core.certificate import Certificate
from service.core.climbing import Place
from service.core.conditions import Film, Held, map_of
from service.core.convergence import Convergence, Overshoot
from service.core.errors import AccuracyNotReached, NotPhysical
from service.core.estimate import Estimate
from service.core.extremes import Extremes
from service.core.faces import Face, axis_of, is_high
from service.core.field import Field, Grid, KeepGoing, Setting
from service.core.film_faces import first_faces
from service.core.film_iteration import Iterated, iterate
from service.core.kirchhoff import transform
from service.core.maps import Rectangle
from service.core.problem import Body
from service.core.region import Region
from service.core.sections import checked_rectangle
from service.core.solution import Solution
from service.core.solvability import check_steady_state
from service.core.varying_answers import potential_convergence, potential_field, potential_place
from service.core.varying_limits import (
    absolute_zero,
    check_above_absolute_zero,
    check_data,
    check_reached,
    check_supported,
    has_flows,
    is_close,
)

FloatArray = NDArray[np.float64]

# Accuracy of the field that tells the range of the potential, in parts of that range.
FIRST_ACCURACY = 1e-3

# By how much less exact that may be where it has to.
EASIER = (1.0, 10.0, 100.0)

# Shares of an accuracy, in theta: of the iteration and of the linear field.
ITERATION, FIELD = 0.45, 0.45

# An accuracy is offered in place of one that cannot be met with so much room that it will be met when asked for.
OFFERED = 1.25

# The usual accuracy where a film face is iterated along which the potential varies by more than a part of its size, or
# held data are off by more than that.
USUAL_ITERATED, EVEN = 1e-4, 1e-9

# Steps that a tenfold accuracy takes, about, and by how much the places along each axis of a face grow meanwhile.
STEPS, GROWTH = 10, 3


class VaryingSolution(Solution):
    """A body with its field in theta, iterated further as accuracies are asked for."""

    def __init__(self, body: Body, keep_going: KeepGoing | None = None) -> None:
        check_supported(body)
        check_steady_state(body)
        self._body = body
        self._lock = threading.Lock()
        self._data = transform(body, keep_going)
        self._films = first_faces(self._data)
        self._steps = 0
        self._find_range(keep_going)
        varies = any(np.ptp(film.assumed) > EVEN * np.abs(film.assumed).max() for film in self._films)
        varies |= self._iterated.setting.map_error > EVEN * self._iterated.setting.span
        self._usual = USUAL_ITERATED if varies else super().usual_accuracy

    @property
    def _setting(self) -> Setting:  # type: ignore[override]
        """What the answers of a constant conductivity are computed from; there is no such thing here."""
        raise NotPhysical(
            "Convergence and reach are told only of bodies whose conductivity does not vary with the potential and "
            "whose faces do not radiate."
        )

    @property
    def body(self) -> Body:
        """The body as given."""
        return self._body

    @property
    def span(self) -> float:
        """Range of held values and ambients, or of the field where flows and generation raise it further."""
        return self._span

    @property
    def reference(self) -> float:
        """The level at which theta is zero."""
        return self._data.kirchhoff.reference

    @property
    def level_pinned(self) -> bool:
        """Never: the level of the potential matters, and a body that leaves it open is refused."""
        return False

    @property
    def usual_accuracy(self) -> float:
        """The accuracy that answers have unless another is asked for, in parts of the span."""
        return self._usual

    def prepare(self, *, tolerance: float, keep_going: KeepGoing | None = None) -> None:
        """Iterate as far as answers of an accuracy need."""
        self._within(tolerance, keep_going)

    def field(
        self, grid: Grid, *, tolerance: float, with_flux: bool = False, keep_going: KeepGoing | None = None
    ) -> Field:
        """Potential, and flux density if asked for, on a grid."""
        fields.check_inside(self._body, grid.axes)
        iterated = self._within(tolerance, keep_going)
        with _In(self, tolerance, FIELD):
            found = fields.on_grid(
                iterated.setting,
                grid,
                tolerance=FIELD * self._in_theta(tolerance),
                with_flux=with_flux,
                keep_going=keep_going,
            )
        places = np.meshgrid(*grid.axes, indexing="ij", sparse=True)
        return potential_field(self._data, iterated, found, places)

    def field_at(
        self, points: FloatArray, *, tolerance: float, with_flux: bool = False, keep_going: KeepGoing | None = None
    ) -> Field:
        """Potential, and flux density if asked for, at points, shape (n, 3)."""
        places = [points[:, 0], points[:, 1], points[:, 2]]
        fields.check_inside(self._body, places)
        iterated = self._within(tolerance, keep_going)
        with _In(self, tolerance, FIELD):
            found = fields.at_points(
                iterated.setting,
                points,
                tolerance=FIELD * self._in_theta(tolerance),
                with_flux=with_flux,
                keep_going=keep_going,
            )
        return potential_field(self._data, iterated, found, places)

    def extremes(self, *, tolerance: float, keep_going: KeepGoing | None = None) -> Extremes:
        """The hottest and the coldest place of the closed body: those of theta, which increases with the potential."""
        iterated = self._within(tolerance, keep_going)
        with _In(self, tolerance, FIELD):
            found = extremes.find(iterated.setting, FIELD * self._in_theta(tolerance), keep_going)
        return Extremes(
            potential_place(self._data, iterated, found.hottest), potential_place(self._data, iterated, found.coldest)
        )

    def peak(
        self, face: Face, rectangle: Rectangle | None = None, *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The highest potential on a face or a rectangle of it."""
        iterated = self._within(tolerance, keep_going)
        where = checked_rectangle(self._body, axis_of(face), rectangle)
        with _In(self, tolerance, FIELD):
            theta = FIELD * self._in_theta(tolerance)
            found = extremes.highest_on(iterated.setting, face, where, theta, keep_going)
        return potential_place(self._data, iterated, found)

    def highest_within(
        self, low: Sequence[float], high: Sequence[float], *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The highest potential in a closed box with these corners (x, y, z)."""
        return self._extreme_within(low, high, 1.0, tolerance, keep_going)

    def lowest_within(
        self, low: Sequence[float], high: Sequence[float], *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The lowest potential in a closed box with these corners (x, y, z)."""
        return self._extreme_within(low, high, -1.0, tolerance, keep_going)

    def _extreme_within(
        self, low: Sequence[float], high: Sequence[float], sign: float, tolerance: float, keep_going: KeepGoing | None
    ) -> Place:
        region = Region.between(self._body, low, high)
        iterated = self._within(tolerance, keep_going)
        with _In(self, tolerance, FIELD):
            theta = FIELD * self._in_theta(tolerance)
            found = extremes.extreme_within(iterated.setting, region, sign, theta, keep_going)
        return potential_place(self._data, iterated, found)

    def means(self, face: Face, rectangles: Sequence[Rectangle], *, tolerance: float) -> list[Bounded]:
        """Means of the potential over rectangles of a face."""
        return [self.mean(face, rectangle, tolerance=tolerance) for rectangle in rectangles]

    def certificate(self, points: FloatArray, error_bound: float, *, tolerance: float) -> Certificate:
        """What stands behind an answer with that bound; both representations are those of theta."""
        iterated = self._within(tolerance, None)
        with _In(self, tolerance, FIELD):
            found = certificate.certify(
                iterated.setting,
                points,
                error_bound,
                FIELD * self._in_theta(tolerance),
                self._data.kirchhoff.potential_bound,
            )
        return replace(
            found,
            iterations=self._steps,
            residual=max((bound.leftover for bound in iterated.films.values()), default=0.0),
        )

    def convergence(
        self, points: FloatArray, *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> list[Convergence]:
        """How the answers at points, shape (n, 3), converge once the films are iterated."""
        fields.check_inside(self._body, (points[:, 0], points[:, 1], points[:, 2]))
        iterated = self._within(tolerance, keep_going)
        answers = []
        for point in points:
            if keep_going is not None:
                keep_going()
            with _In(self, tolerance, FIELD):
                found = convergence.converge(iterated.setting, point, FIELD * self._in_theta(tolerance))
            answers.append(potential_convergence(self._data, iterated, found, self._least_factor))
        return answers

    def overshoot(self, terms: int) -> list[Overshoot]:
        """By how much a series of so many modes per axis overshoots the data of each driven face, in theta."""
        iterated = self._iterated
        return convergence.overshoots(replace(iterated.setting, parts=iterated.data_parts), terms)

    def estimate_grid(self, shape: tuple[int, int, int], *, tolerance: float, with_flux: bool = False) -> Estimate:
        """Cost of a field on a grid, with the steps of the iteration that are still to be taken."""
        theta = FIELD * self._in_theta(tolerance)
        found = estimate.on_grid(self._iterated.setting, shape, theta, with_flux)
        return self._with_iteration(found, tolerance)

    def estimate_points(self, count: int, *, tolerance: float, with_flux: bool = False) -> Estimate:
        """Cost of a field at points, with the steps of the iteration that are still to be taken."""
        theta = FIELD * self._in_theta(tolerance)
        found = estimate.at_points(self._iterated.setting, count, theta, with_flux)
        return self._with_iteration(found, tolerance)

    def mean(self, face: Face, rectangle: Rectangle | None = None, *, tolerance: float) -> Bounded:
        """Mean of the potential over a face or a rectangle of it."""
        iterated = self._within(tolerance, None)
        where = checked_rectangle(self._body, axis_of(face), rectangle)
        if not math.isfinite(where.area):
            raise NotPhysical(
                "The mean over a side without end is not defined; name a rectangle of it.", ("rectangle",)
            )
        with _In(self, tolerance, FIELD):
            theta = FIELD * self._in_theta(tolerance)
            return varying_mean.mean(self._data, iterated, face, where, theta, None)

    def face_total(
        self, face: Face, rectangle: Rectangle | None = None, *, gap: float | None = None, tolerance: float
    ) -> Total:
        """Flow into the body through a face or a rectangle of it; unbounded where held values meet in a jump."""
        iterated = self._within(tolerance, None)
        where = checked_rectangle(self._body, axis_of(face), rectangle)
        theta = FIELD * self._in_theta(tolerance)
        return varying_totals.face_total(self._data, iterated, face, where, gap, theta)

    def plane_total(
        self,
        axis: int,
        position: float,
        rectangle: Rectangle | None = None,
        *,
        gap: float | None = None,
        tolerance: float,
    ) -> Total:
        """Flow along an axis through a plane square to it or a rectangle of that plane; unbounded like a face."""
        for face in self._body.present_faces:
            if axis_of(face) == axis and self._body.end_of(face) == position:
                total = self.face_total(face, rectangle, gap=gap, tolerance=tolerance)
                return totals.negated(total) if is_high(face) else total
        iterated = self._within(tolerance, None)
        where = checked_rectangle(self._body, axis, rectangle)
        theta = FIELD * self._in_theta(tolerance)
        return varying_totals.plane_total(self._data, iterated, axis, position, where, gap, theta)

    def balance(self, *, gap: float | None = None, tolerance: float) -> Balance:
        """Inflow of every face, generation, and what is left over of the field in theta, which is exactly balanced."""
        iterated = self._within(tolerance, None)
        found = balance.balance(iterated.setting, FIELD * self._in_theta(tolerance), gap)
        inflow = {face: self.face_total(face, gap=gap, tolerance=tolerance) for face in found.inflow}
        return replace(found, inflow=inflow)

    def _find_range(self, keep_going: KeepGoing | None) -> None:
        """Iterate until the range of the potential in the body is known; refuse a body that leaves its law's."""
        law = self._data.kirchhoff.law
        maps = [map_of(condition) for condition in self._body.faces.values() if isinstance(condition, Held | Film)]
        levels = [level for face_map in maps if face_map is not None for level in (face_map.lowest, face_map.highest)]
        low, high = min(levels), max(levels)
        check_data(self._data, low, high)
        theta = self._data.kirchhoff.theta(np.array([low, high]))
        driven = has_flows(self._body)
        # Until the range is known: that of the data, or what flows raise where there is no other.
        scale, accuracy = float(theta[1] - theta[0]), FIRST_ACCURACY
        if driven:
            scale = max(scale, iterate(self._data, self._films, math.inf, keep_going).setting.span)
        while True:
            self._least_factor = self._data.kirchhoff.factor_range(low, high)[0]
            self._prepare_first(accuracy * scale if scale > 0 else math.inf, keep_going)
            if not driven and law.low <= low and high <= law.high:
                break
            found = extremes.find(self._iterated.setting, 10 * accuracy * scale, keep_going)
            hottest, coldest = (
                potential_place(self._data, self._iterated, found.hottest),
                potential_place(self._data, self._iterated, found.coldest),
            )
            low, high = coldest.value - coldest.error_bound, hottest.value + hottest.error_bound
            reached = self._data.kirchhoff.theta(np.array([min([low, *levels]), max([high, *levels])]))
            span = float(reached[1] - reached[0])
            if scale <= 10 * span and not is_close(max(law.low, absolute_zero(self._data)), law.high, coldest, hottest):
                check_above_absolute_zero(self._data, coldest.value)
                check_reached(law, coldest, hottest)
                break
            # A coarse start, or an extreme so near the end of the law that its bound reaches across.
            scale, accuracy = (span, accuracy) if scale > 10 * span else (scale, accuracy / 100)
        self._least_factor = self._data.kirchhoff.factor_range(max(low, law.low), min(high, law.high))[0]
        self._span = max(high, *levels) - min(low, *levels)

    def _prepare(self, wanted: float, keep_going: KeepGoing | None) -> None:
        """Iterate until theta is off by no more than wanted."""
        self._iterated = iterate(self._data, self._films, wanted, keep_going)
        self._steps += self._iterated.steps if self._films else 0

    def _prepare_first(self, wanted: float, keep_going: KeepGoing | None) -> None:
        """The same, or less exactly where that is all that can be had: the range alone is wanted."""
        for easier in EASIER:
            try:
                return self._prepare(easier * wanted, keep_going)
            except AccuracyNotReached as error:
                best = error.bound
        refusal = AccuracyNotReached(easier * wanted / self._least_factor, best / self._least_factor)
        refusal.field = ("faces",)
        raise refusal

    def _within(self, tolerance: float, keep_going: KeepGoing | None) -> Iterated:
        """The field in theta, iterated far enough for an accuracy of the potential."""
        wanted = ITERATION * self._in_theta(tolerance)
        with self._lock:
            if self._iterated.error > wanted:
                with _In(self, tolerance, ITERATION):
                    self._prepare(wanted, keep_going)
            return self._iterated

    def _in_theta(self, tolerance: float) -> float:
        """An accuracy of the potential that holds everywhere, in theta."""
        return tolerance * self._least_factor

    def _with_iteration(self, found: Estimate, tolerance: float) -> Estimate:
        """An estimate with the steps of the iteration from where it stands to an accuracy."""
        wanted = ITERATION * self._in_theta(tolerance)
        if not self._films or self._iterated.error <= wanted:
            return found
        tenfolds = math.log10(self._iterated.error / wanted)
        costs = []
        for film in self._films:
            first, second = (GROWTH * axis.samples.size for axis in film.axes)
            costs.append(estimate.on_grid(self._iterated.setting, (first, second, 1), wanted, False))
        work = STEPS * max(tenfolds, 1.0) * sum(cost.multiplications for cost in costs)
        return Estimate(found.multiplications + work, max(found.bytes, *(cost.bytes for cost in costs)))


class _In:
    """Turns an accuracy that was not reached in theta into one of the potential."""

    def __init__(self, solution: VaryingSolution, tolerance: float, share: float) -> None:
        self._solution, self._tolerance, self._share = solution, tolerance, share

    def __enter__(self) -> None:
        return None

    def __exit__(self, kind: object, error: object, trace: object) -> None:
        if isinstance(error, AccuracyNotReached):
            bound = OFFERED * error.bound / (self._share * self._solution._in_theta(1.0))
            raise AccuracyNotReached(self._tolerance, bound) from None
