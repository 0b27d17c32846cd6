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

from service.core import certificate, convergence, estimate, extremes, totals, varying_mean
from service.core import field as fields
from service.core.certificate import Certificate
from service.core.climbing import Place
from service.core.conditions import Film, Held, Inflow, Insulated, map_of
from service.core.convergence import Convergence, NodeStep, Overshoot, SeriesStep
from service.core.errors import AccuracyNotReached, NotPhysical, OutsideLaw
from service.core.estimate import Estimate
from service.core.extremes import Extremes
from service.core.faces import Face, axes_along, axis_of, is_high
from service.core.field import Field, Grid, KeepGoing, Setting
from service.core.film_faces import first_faces
from service.core.film_iteration import Iterated, below_absolute_zero, iterate
from service.core.flow_error import FlowError
from service.core.kirchhoff import Transformed, transform
from service.core.laws import LARGEST_FACTOR, SMALLEST_FACTOR, ConductivityLaw, Kirchhoff
from service.core.maps import Rectangle
from service.core.problem import Body
from service.core.region import Region
from service.core.solution import Solution
from service.core.solvability import check_steady_state, generation, level_is_pinned, map_integral
from service.core.totals import Balance, Bounded, Total
from service.core.unbounded import UnboundedCause, unbounded_lines, unbounded_plane_lines

FloatArray = NDArray[np.float64]

# Accuracy of the field that tells the range of the potential, in parts of that range.
FIRST_ACCURACY = 1e-3

# By how much less exact that may be where it has to.
EASIER = (1.0, 10.0, 100.0)

# Shares of an accuracy, in theta: of the iteration and of the linear field.
ITERATION, FIELD = 0.45, 0.45

# An accuracy is offered in place of one that cannot be met with so much room that it will be met when asked for.
OFFERED = 1.25

# Rounding of theta's inverse, relative to the potential.
STORED = 2e-15

# The usual accuracy where a film face is iterated along which the potential varies by more than a part of its size, or
# held data are off by more than that.
USUAL_ITERATED, EVEN = 1e-4, 1e-9

# Steps that a tenfold accuracy takes, about, and by how much the places along each axis of a face grow meanwhile.
STEPS, GROWTH = 10, 3


class VaryingSolution(Solution):
    """A body with its field in theta, iterated further as accuracies are asked for."""

    def __init__(self, body: Body, keep_going: KeepGoing | None = None) -> None:
        _check_supported(body)
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
        return self._put_back(found, iterated, places)

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
        return self._put_back(found, iterated, places)

    def extremes(self, *, tolerance: float, keep_going: KeepGoing | None = None) -> Extremes:
        """The hottest and the coldest place of the closed body: those of theta, which increases with the potential."""
        iterated = self._within(tolerance, keep_going)
        with _In(self, tolerance, FIELD):
            found = extremes.find(iterated.setting, FIELD * self._in_theta(tolerance), keep_going)
        return Extremes(self._place(found.hottest, iterated), self._place(found.coldest, iterated))

    def peak(
        self, face: Face, rectangle: Rectangle | None = None, *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The highest potential on a face or a rectangle of it."""
        iterated = self._within(tolerance, keep_going)
        where = totals.checked_rectangle(self._body, axis_of(face), rectangle)
        with _In(self, tolerance, FIELD):
            theta = FIELD * self._in_theta(tolerance)
            found = extremes.highest_on(iterated.setting, face, where, theta, keep_going)
        return self._place(found, iterated)

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
        return self._place(found, iterated)

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
            answers.append(self._converged(found, iterated))
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
        where = totals.checked_rectangle(self._body, axis_of(face), rectangle)
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
        where = totals.checked_rectangle(self._body, axis_of(face), rectangle)
        theta = FIELD * self._in_theta(tolerance)
        total = totals.face_total(iterated.setting, face, where, gap, theta)
        if any(cause.kind == "endless" for cause in total.causes) and _fades(self._body, face):
            # What the iteration leaves over far along a face goes on without end; the flow itself does not.
            total = totals.face_total(iterated.setting, face, self._with_ends(face, where), gap, theta)
        causes = unbounded_lines(self._body, face, where) if isinstance(self._body.faces[face], Held) else []
        return _widened(total, FlowError(self._data, iterated).face_total(face, where), [cause for cause, _ in causes])

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
        where = totals.checked_rectangle(self._body, axis, rectangle)
        total = totals.plane_total(iterated.setting, axis, position, where, gap, FIELD * self._in_theta(tolerance))
        causes = unbounded_plane_lines(self._body, axis, position, where)
        return _widened(
            total, FlowError(self._data, iterated).plane_total(axis, position, where), [cause for cause, _ in causes]
        )

    def balance(self, *, gap: float | None = None, tolerance: float) -> Balance:
        """Inflow of every face, generation, and what is left over of the field in theta, which is exactly balanced."""
        iterated = self._within(tolerance, None)
        found = totals.balance(iterated.setting, FIELD * self._in_theta(tolerance), gap)
        inflow = {face: self.face_total(face, gap=gap, tolerance=tolerance) for face in found.inflow}
        return replace(found, inflow=inflow)

    def _with_ends(self, face: Face, where: Rectangle) -> Rectangle:
        """The part of a rectangle on which anything flows."""
        setting = self._iterated.setting
        first, second = axes_along(face)
        return Rectangle(
            fields.far_along(setting, first, high=False) if where.p_low == -math.inf else where.p_low,
            fields.far_along(setting, first) if where.p_high == math.inf else where.p_high,
            fields.far_along(setting, second, high=False) if where.q_low == -math.inf else where.q_low,
            fields.far_along(setting, second) if where.q_high == math.inf else where.q_high,
        )

    def _find_range(self, keep_going: KeepGoing | None) -> None:
        """Iterate until the range of the potential in the body is known; refuse a body that leaves its law's."""
        law = self._data.kirchhoff.law
        maps = [map_of(condition) for condition in self._body.faces.values() if isinstance(condition, Held | Film)]
        levels = [level for face_map in maps if face_map is not None for level in (face_map.lowest, face_map.highest)]
        low, high = min(levels), max(levels)
        self._check_held(law)
        _check_factors(self._data.kirchhoff, low, high)
        self._check_above_absolute_zero(low)
        _check_radiation(self._data)
        theta = self._data.kirchhoff.theta(np.array([low, high]))
        driven = _has_flows(self._body)
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
            hottest, coldest = self._place(found.hottest, self._iterated), self._place(found.coldest, self._iterated)
            low, high = coldest.value - coldest.error_bound, hottest.value + hottest.error_bound
            reached = self._data.kirchhoff.theta(np.array([min([low, *levels]), max([high, *levels])]))
            span = float(reached[1] - reached[0])
            if scale <= 10 * span and not _is_close(max(law.low, self._absolute_zero), law.high, coldest, hottest):
                self._check_above_absolute_zero(coldest.value)
                self._check_reached(law, coldest, hottest)
                break
            # A coarse start, or an extreme so near the end of the law that its bound reaches across.
            scale, accuracy = (span, accuracy) if scale > 10 * span else (scale, accuracy / 100)
        self._least_factor = self._data.kirchhoff.factor_range(max(low, law.low), min(high, law.high))[0]
        self._span = max(high, *levels) - min(low, *levels)

    @property
    def _absolute_zero(self) -> float:
        """The potential that is absolute zero where a face radiates; -infinity where none does."""
        zeros = [law.radiation.zero for law in self._data.laws.values() if law.radiation is not None]
        return -zeros[0] if zeros else -math.inf

    def _check_above_absolute_zero(self, coldest: float) -> None:
        for face, law in self._data.laws.items():
            if law.radiation is not None and coldest + law.radiation.zero <= 0.0:
                raise below_absolute_zero(face, coldest)

    def _check_held(self, law: ConductivityLaw) -> None:
        for face in self._body.present_faces:
            condition = self._body.faces[face]
            if isinstance(condition, Held) and not (
                law.low <= condition.value.lowest and condition.value.highest <= law.high
            ):
                raise OutsideLaw(
                    f"The face {face} is held at {_from_to(condition.value.lowest, condition.value.highest)}; the "
                    f"conductivity law holds {_range_of(law)}.",
                    ("faces", face),
                )

    def _check_reached(self, law: ConductivityLaw, coldest: Place, hottest: Place) -> None:
        for place, end, beyond, reach in (
            (hottest, law.high, hottest.value - law.high, "up"),
            (coldest, law.low, law.low - coldest.value, "down"),
        ):
            if beyond > max(place.error_bound, STORED * abs(place.value)):
                at = ", ".join(f"{coordinate:g}" for coordinate in place.position)
                raise OutsideLaw(
                    f"The potential reaches about {place.value:.6g} at ({at}), {_on(place.where)}, where the "
                    f"conductivity law ends at {end:g}; it has to hold {reach} to {place.value:.6g} or further. That "
                    "value is what the last factor, carried on, would lead to.",
                    ("law",),
                )

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

    def _put_back(self, found: Field, iterated: Iterated, places: Sequence[FloatArray]) -> Field:
        kirchhoff = self._data.kirchhoff
        potential = kirchhoff.potential(found.potential)
        off = kirchhoff.potential_bound(found.potential, found.potential_bound + iterated.error)
        size = abs(self.reference) + float(np.abs(potential).max(initial=0.0))
        bound = float(off.max(initial=0.0)) + STORED * size
        flux_bound = found.flux_bound
        if flux_bound is not None:
            flux_bound = flux_bound + FlowError(self._data, iterated).flux(places, flux_bound.shape)
        return replace(found, potential=potential, potential_bound=bound, flux_bound=flux_bound)

    def _place(self, found: Place, iterated: Iterated) -> Place:
        """A place of theta in the potential; one that the data give outright is not off by the iteration."""
        theta = np.array([found.value])
        value = float(self._data.kirchhoff.potential(theta)[0])
        off = found.error_bound + iterated.error if found.error_bound > 0.0 else 0.0
        bound = float(self._data.kirchhoff.potential_bound(theta, off)[0])
        return replace(found, value=value, error_bound=bound + STORED * (abs(value) + abs(self.reference)))

    def _converged(self, found: Convergence, iterated: Iterated) -> Convergence:
        """How an answer converges, in the potential: what is left by a step divided by the least factor."""
        per = 1 / self._least_factor

        def potential(theta: float) -> float:
            return float(self._data.kirchhoff.potential(np.array([theta]))[0])

        def off(theta: float) -> float:
            return float(self._data.kirchhoff.potential_bound(np.array([found.value]), theta)[0])

        return replace(
            found,
            value=potential(found.value),
            error_bound=off(found.error_bound + iterated.error),
            series=tuple(
                SeriesStep(
                    step.terms,
                    potential(step.value),
                    step.error * per,
                    None if step.tail_bound is None else step.tail_bound * per,
                )
                for step in found.series
            ),
            time_form=tuple(
                NodeStep(step.nodes, potential(step.value), step.error * per, step.error_bound * per)
                for step in found.time_form
            ),
            agreement=None if found.agreement is None else off(found.agreement),
            agreement_bound=None if found.agreement_bound is None else off(found.agreement_bound),
        )

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


def _check_supported(body: Body) -> None:
    """Raise NotPhysical for what a varying conductivity or radiation cannot be combined with."""
    if body.layers:
        raise NotPhysical(
            "A stack of layers is solved with conductivities that do not vary with the potential and without "
            "radiation; give each layer the conductivity at its own mean potential instead.",
            ("law",) if body.law is not None else ("faces",),
        )
    for face, condition in body.faces.items():
        if not isinstance(condition, Held | Inflow | Film | Insulated):
            raise NotPhysical(
                f"The face {face} has several conditions at once, which are solved with a conductivity that does not "
                "vary with the potential and without radiation; give the conductivity at the mean potential instead.",
                ("faces", face),
            )
    if all(math.isinf(length) for length in body.size) and any(isinstance(c, Film) for c in body.faces.values()):
        raise NotPhysical(
            "A film on a body that ends along no axis is solved with a conductivity that does not vary with the "
            "potential and without radiation; give the body a finite size along one axis.",
            ("size",),
        )
    if level_is_pinned(body):
        raise NotPhysical(
            "No face fixes the level of the potential, on which a varying conductivity depends; hold a face or give "
            "it a film.",
            ("faces",),
        )


def _is_close(low: float, high: float, coldest: Place, hottest: Place) -> bool:
    """Whether it takes better bounds to tell if the field leaves a range."""
    distances = ((abs(hottest.value - high), hottest), (abs(low - coldest.value), coldest))
    return any(STORED * abs(place.value) < distance <= place.error_bound for distance, place in distances)


def _check_factors(kirchhoff: Kirchhoff, low: float, high: float) -> None:
    """Raise NotPhysical where the factor of the law at the data of the faces is no number to compute with."""
    # Outside the law's range its last factor goes on.
    least, most = kirchhoff.factor_range(low, high)
    if not SMALLEST_FACTOR <= least <= most <= LARGEST_FACTOR:
        raise NotPhysical(
            f"The factor of the conductivity law goes from {least:g} to {most:g} at the values given on the faces; it "
            f"has to lie between {SMALLEST_FACTOR:g} and {LARGEST_FACTOR:g} there.",
            ("law",),
        )


def _check_radiation(data: Transformed) -> None:
    """Raise NotPhysical where more is taken out than radiation, the only way in, gives a body at absolute zero."""
    body = data.body
    only_radiation = all(law.radiation is not None and law.coefficient == 0.0 for law in data.laws.values())
    is_held = any(isinstance(condition, Held) for condition in body.faces.values())
    if is_held or not only_radiation or not all(math.isfinite(length) for length in body.size):
        return
    taken, given = -generation(body), 0.0
    for face, condition in body.faces.items():
        first, second = (body.size[axis] for axis in axes_along(face))
        if isinstance(condition, Inflow):
            taken -= map_integral(condition.inflow, (0.0, 0.0), (first, second))[0]
        if face in data.laws:
            radiation = data.laws[face].radiation
            assert radiation is not None
            least = float(data.laws[face].given_off(np.array([-radiation.zero]))[0])
            given += map_integral(data.given[face], (0.0, 0.0), (first, second))[0] - least * first * second
    if taken >= given:
        raise NotPhysical(
            f"The body loses {taken / given:.3g} times what radiation from its surroundings could bring in even at "
            "absolute zero; there is no steady state. Take out less, or give a face a film coefficient.",
            ("faces", next(iter(data.laws))),
        )


def _has_flows(body: Body) -> bool:
    """Whether an inflow or a source may take the potential out of the range of held values and ambients."""
    inflow = any(isinstance(condition, Inflow) and condition.inflow.table.any() for condition in body.faces.values())
    return inflow or any(source.density != 0.0 for source in body.sources)


def _fades(body: Body, face: Face) -> bool:
    """Whether the flow through an endless face comes to nothing: all data far along it are at one level."""
    levels: set[float] = set()
    for axis in axes_along(face):
        if math.isfinite(body.size[axis]):
            continue
        if any(source.density != 0.0 and math.isinf(source.high[axis] - source.low[axis]) for source in body.sources):
            return False
        for other, condition in body.faces.items():
            face_map = map_of(condition)
            if face_map is None or axis not in axes_along(other):
                continue
            along = np.moveaxis(face_map.table, axes_along(other).index(axis), 0)
            ends = along[-1:] if body.begins[axis] == 0.0 else along[[0, -1]]
            levels |= {float(value) for value in np.unique(ends)} if isinstance(condition, Held | Film) else set()
            if isinstance(condition, Inflow) and ends.any():
                return False
    return len(levels) <= 1


def _widened(total: Total, off: float, as_given: Sequence[UnboundedCause]) -> Total:
    """A total with a wider bound, and the jumps that make it unbounded in the potential instead of theta."""
    jumps = {cause.line: cause.largest_jump for cause in as_given}
    causes = tuple(replace(cause, largest_jump=jumps.get(cause.line, cause.largest_jump)) for cause in total.causes)
    with_gap = total.with_gap
    if with_gap is not None:
        with_gap = Bounded(with_gap.value, with_gap.error_bound + off)
    bound = None if total.error_bound is None else total.error_bound + off
    return Total(total.value, bound, causes, with_gap)


def _on(where: str) -> str:
    return "inside" if where == "inside" else f"on {where}"


def _from_to(low: float, high: float) -> str:
    return f"{low:.6g}" if low == high else f"{low:.6g} to {high:.6g}"


def _range_of(law: ConductivityLaw) -> str:
    if math.isinf(law.low):
        return f"below {law.high:.6g}"
    return f"above {law.low:.6g}" if math.isinf(law.high) else f"from {law.low:.6g} to {law.high:.6g}"
