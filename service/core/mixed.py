"""The solved problem of a body with several conditions on one face.

Totals are told by extrapolation from refinements, see `mixed_refinement`. A field errs by what its density errs nearby;
its bound is the change from half as many panels, or what that should be after the change before it.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from service.core import extremes, time_error
from service.core.certificate import Certificate
from service.core.conditions import FilmPad, FluxPad, HeldPad, MixedPad, map_of
from service.core.convergence import Convergence, Overshoot
from service.core.errors import AccuracyNotReached, NoSteadyState, NotPhysical
from service.core.estimate import Estimate
from service.core.extremes import Extremes, Place
from service.core.faces import Face, axes_along, axis_of
from service.core.field import OFFERED, Field, Grid, KeepGoing, Setting, check_inside
from service.core.maps import Rectangle
from service.core.mixed_base import Base, Spot, base_of, pads_of
from service.core.mixed_panels import Refined, given_total, needs_balance
from service.core.mixed_refinement import LEVELS, Ladder, Refinement, change_of, left_over
from service.core.panel_noise import noise
from service.core.panels import STEP
from service.core.problem import Body
from service.core.solution import Solution
from service.core.solvability import BALANCED, check_steady_state
from service.core.stopping import go_on, on_behalf_of
from service.core.totals import Balance, Bounded, Total

FloatArray = NDArray[np.float64]

# Most panels of all pads together: a matrix of 128 MiB, factorised in about a second.
MOST_PANELS = 4096

# Bounds of totals fall at the most with this power of the number of panels along an axis, those of fields with this.
ORDER_OF_TOTALS, ORDER_OF_FIELDS = 4.0, 2.0

# No flow is told better than this part of the worst: the error of one is a product with that of all.
LEAST_OF_WORST = 0.125

# A field is asked of each refinement with this part of the tolerance.
SHARE = 0.1

# At the corners of pads changes of the flux fall by less than 2 from one refinement to the next, so that the last one
# falls short of what is left; by 1.4 where it was looked for on held pads, by more on films.
FLUX_SAFETY = 3.0

# The accuracy of fields that is usual here, in parts of the span: next to the borders of pads finer panels gain little.
USUAL_MIXED = 5e-3

# Accuracy, in parts of the span, of means over pads that have their base's film.
MEAN_ACCURACY = 1e-10


@dataclass(frozen=True)
class PadAnswer:
    """What passes through a pad of a mixed face.

    face, index, name: which. flow: into the body through it. potential: of a held pad its level, given or found; of a
    film pad the mean over it.
    """

    face: Face
    index: int
    name: str | None
    flow: Bounded
    potential: Bounded


def solve_mixed(
    body: Body, *, accuracy: float = 1e-6, most_panels: int = MOST_PANELS, keep_going: KeepGoing | None = None
) -> MixedSolution:
    """Solve a body with mixed faces until the flows of its pads are known to an accuracy.

    accuracy: of the flows, in parts of the sum of their sizes, and of levels that are found, in parts of the span.
    most_panels: of all pads together. Where they do not suffice the bounds say what was reached.
    Raises NotPhysical and NoSteadyState.
    """
    _check_maps(body)
    base = base_of(body)
    _check_steady(body, base)
    with on_behalf_of(keep_going):
        solution = MixedSolution(Ladder(body, base, most_panels))
        solution.refine_flows(accuracy)
    return solution


def _check_maps(body: Body) -> None:
    """Raise NotPhysical for a formula: what stands for it moves the flows of pads by an amount that is not bounded."""
    for face, condition in body.faces.items():
        face_map = map_of(condition)
        if face_map is not None and face_map.error > 0.0:
            raise NotPhysical(
                f"The face {face} has a formula, whose error is not followed into the flows of pads on mixed faces; "
                "give its data as patches or readings.",
                ("faces", face),
            )


def _check_steady(body: Body, base: Base) -> None:
    """Raise NoSteadyState where flows are given that nothing can carry away."""
    if not needs_balance(base):
        check_steady_state(base.body)
        return
    given = given_total(base)
    if not math.isfinite(given):
        raise NoSteadyState(
            "Inflow or generation goes on without end, and no face takes it up there ({amount}); it has to end.",
            given,
            ("faces",),
        )
    if any(spot.level is not None for spot in base.spots):
        return
    pads = [pad for face in base.faces for pad in pads_of(body, face)]
    flows = [pad.flow for pad in pads if isinstance(pad, HeldPad) and pad.flow is not None]
    total = math.fsum([given, *flows])
    if abs(total) > BALANCED * math.fsum(map(abs, [given, *flows])):
        raise NoSteadyState(
            "No face and no pad is held at a value or has a film, and the inflows, the flows of the pads and the "
            "generation add up to {amount}; they have to add up to zero.",
            total,
            ("faces",),
        )


class MixedSolution(Solution):
    """A body with mixed faces and its field; answers like `Solution`, with finer panels where they are needed.

    count: panels along each axis of a pad from which totals are told.
    """

    def __init__(self, ladder: Ladder) -> None:
        self._ladder, self._base = ladder, ladder.base
        self.count = ladder.counts[0]

    @property
    def body(self) -> Body:
        """The body as given."""
        return self._ladder.body

    @property
    def _setting(self) -> Setting:  # type: ignore[override]
        """What the answers of faces with one condition each are computed from; there is no such thing here."""
        raise NotPhysical("Reach is told of bodies without mixed faces only.")

    @property
    def usual_accuracy(self) -> float:
        """The accuracy that answers have unless another is asked for, in parts of the span."""
        return USUAL_MIXED

    @property
    def _here(self) -> Refinement:
        return self._ladder.at(self.count)

    @property
    def depends_on_far_level(self) -> bool:
        """Whether flows depend on what the potential comes to far away, which no face tells."""
        told = [spot for spot in self._base.spots if spot.level is not None]
        return self.body.leaves_far_level_open and not needs_balance(self._base) and bool(told)

    @property
    def level_pinned(self) -> bool:
        """Whether the data leave the level open, so that the field is counted from its own mean or from far away."""
        return needs_balance(self._base) and all(spot.level is None for spot in self._base.spots)

    @property
    def span(self) -> float:
        """Range of the potential that accuracies refer to."""
        return self._here.span

    @property
    def reference(self) -> float:
        """The level the parts of the problem are counted from."""
        return self._here.solutions[0].reference

    def refine_flows(self, accuracy: float) -> None:
        """Take finer panels until the flows of the pads meet an accuracy, or no finer ones are allowed."""
        while True:
            answers = self.pads()
            size = math.fsum(abs(answer.flow.value) for answer in answers)
            missed = [
                _over(max(answer.flow.error_bound for answer in answers), accuracy * size),
                _over(max(answer.potential.error_bound for answer in answers), accuracy * self.span),
            ]
            finer = self._ladder.finer(self.count, max(missed), ORDER_OF_TOTALS)
            if finer is None:
                return
            # Should this be stopped, the next one to ask is as far as before.
            self._ladder.at(finer)
            self.count = finer

    def pads(self) -> tuple[PadAnswer, ...]:
        """Flow and potential of every pad, face by face."""
        go_on()
        answers = [
            self._pad(face, index, pad)
            for face in self._base.faces
            for index, pad in enumerate(pads_of(self.body, face))
        ]
        least = LEAST_OF_WORST * max(answer.flow.error_bound for answer in answers)
        return tuple(
            replace(answer, flow=Bounded(answer.flow.value, max(answer.flow.error_bound, least)))
            if answer.flow.error_bound > 0.0
            else answer
            for answer in answers
        )

    def _pad(self, face: Face, index: int, pad: MixedPad) -> PadAnswer:
        number = next((n for n, spot in enumerate(self._base.spots) if (spot.face, spot.pad) == (face, index)), None)
        if number is None:
            return self._pad_of_base(face, index, pad)
        spot, rounding = self._base.spots[number], time_error.step_error(STEP)
        excess = self._ladder.limit(
            [
                Bounded(
                    math.fsum(refined.flows[number]),
                    rounding * math.fsum(float(np.abs(flows).sum()) for flows in refined.flows),
                )
                for refined in self._here.refined
            ]
        )
        if isinstance(pad, HeldPad):
            flow = excess if pad.flow is None else Bounded(pad.flow, 0.0)
            return PadAnswer(face, index, pad.name, flow, self._level(number))
        assert isinstance(pad, FilmPad)
        share = 1.0 + self._base.coefficients[face] / spot.excess
        per_flow = 1 / (spot.area * spot.excess)
        potential = self._limited(Bounded(pad.ambient - per_flow * excess.value, per_flow * excess.error_bound))
        return PadAnswer(face, index, pad.name, Bounded(share * excess.value, share * excess.error_bound), potential)

    def _pad_of_base(self, face: Face, index: int, pad: MixedPad) -> PadAnswer:
        """A pad with a given inflow, or with the film of the base."""
        means = [
            solution.mean(face, pad.where, tolerance=MEAN_ACCURACY * self.span) for solution in self._here.solutions
        ]
        mean = self._limited(self._ladder.limit(means))
        if isinstance(pad, FluxPad):
            return PadAnswer(face, index, pad.name, Bounded(pad.inflow * pad.where.area, 0.0), mean)
        assert isinstance(pad, FilmPad)
        per_degree = pad.coefficient * pad.where.area
        flow = Bounded(per_degree * (pad.ambient - mean.value), per_degree * mean.error_bound)
        return PadAnswer(face, index, pad.name, flow, mean)

    def _level(self, number: int) -> Bounded:
        """Level of a held spot."""
        level = self._base.spots[number].level
        if level is not None:
            return Bounded(level, 0.0)
        rounding = time_error.step_error(STEP) * self.span
        return self._ladder.limit([Bounded(float(refined.levels[number]), rounding) for refined in self._here.refined])

    def field(
        self, grid: Grid, *, tolerance: float, with_flux: bool = False, keep_going: KeepGoing | None = None
    ) -> Field:
        """Potential, and flux density if asked for, on a grid.

        Finer panels are taken until the bound meets the tolerance; raises AccuracyNotReached where none are allowed.
        On a held pad the potential is its level and the flux along it zero; its flux density is told as panels' means.
        """
        x, y, z = np.meshgrid(*grid.axes, indexing="ij")
        points = np.stack([x.ravel(), y.ravel(), z.ravel()], axis=1)

        def ask(solution: Solution, share: float) -> Field:
            found = solution.field(grid, tolerance=share, with_flux=with_flux, keep_going=keep_going)
            flux = None if found.flux is None else found.flux.reshape(3, -1)
            bound = None if found.flux_bound is None else found.flux_bound.ravel()
            return replace(found, potential=found.potential.ravel(), flux=flux, flux_bound=bound)

        with on_behalf_of(keep_going):
            found = self._field(ask, points, tolerance)
        return replace(
            found,
            potential=found.potential.reshape(grid.shape),
            flux=None if found.flux is None else found.flux.reshape(3, *grid.shape),
            flux_bound=None if found.flux_bound is None else found.flux_bound.reshape(grid.shape),
        )

    def field_at(
        self, points: FloatArray, *, tolerance: float, with_flux: bool = False, keep_going: KeepGoing | None = None
    ) -> Field:
        """Potential, and flux density if asked for, at points, shape (n, 3); see `field`."""
        levels = None if with_flux else self._levels_at(points)
        if levels is not None:
            return levels

        def ask(solution: Solution, share: float) -> Field:
            return solution.field_at(points, tolerance=share, with_flux=with_flux, keep_going=keep_going)

        with on_behalf_of(keep_going):
            return self._field(ask, points, tolerance)

    def _levels_at(self, points: FloatArray) -> Field | None:
        """The field at points all of which are on held pads: the levels of those; None where others are among them."""
        check_inside(self.body, (points[:, 0], points[:, 1], points[:, 2]))
        potential, bound, found = np.zeros(len(points)), 0.0, np.zeros(len(points), dtype=bool)
        for number, spot in enumerate(self._base.spots):
            on_it, _ = _places_on(self.body, spot, points)
            if spot.is_held and on_it.any():
                level = self._level(number)
                potential[on_it], bound = level.value, max(bound, level.error_bound)
                found |= on_it
        return Field(potential, bound, None, None, 0) if found.all() else None

    def _field(self, ask: Callable[[Solution, float], Field], points: FloatArray, tolerance: float) -> Field:
        count, share = self.count, SHARE * tolerance
        while True:
            here = self._ladder.at(count)
            if not here.refined:
                return ask(here.solutions[0], tolerance)
            levels = zip(here.solutions, here.refined, strict=True)
            finest = here.refined[0]
            found = _compared(
                [
                    self._on_spots(ask(solution, share), solution, refined, finest, points, share)
                    for solution, refined in levels
                ],
                self._noise(finest, points),
                self._unsettled(here),
                here.span,
            )
            potential, bound = self._within_limits(found.potential, found.potential_bound)
            found = replace(found, potential=potential, potential_bound=bound)
            if found.potential_bound <= tolerance:
                return found
            finer = self._ladder.finer(count, _over(found.potential_bound, tolerance), ORDER_OF_FIELDS)
            if finer is None:
                raise AccuracyNotReached(tolerance, OFFERED * found.potential_bound)
            count = finer

    def _unsettled(self, here: Refinement) -> float:
        """By what part the flows of the finest panels, and levels that are found, may still be off."""
        flows = [
            [Bounded(math.fsum(refined.flows[number]), 0.0) for refined in here.refined]
            for number in range(len(self._base.spots))
        ]
        levels = [
            [Bounded(float(refined.levels[number]), 0.0) for refined in here.refined]
            for number, spot in enumerate(self._base.spots)
            if spot.level is None
        ]
        size = math.fsum(abs(fine.value) for fine, _, _ in flows)
        span = here.span
        parts = [_over(self._distance_to_limit(values), size) for values in flows]
        parts += [_over(self._distance_to_limit(values), span) for values in levels]
        return max(parts)

    def _distance_to_limit(self, values: Sequence[Bounded]) -> float:
        limit = self._ladder.limit(values)
        return abs(limit.value - values[0].value) + limit.error_bound

    @property
    def _limits(self) -> tuple[float, float] | None:
        """Between what levels the potential is everywhere, by the maximum principle; None where that does not tell."""
        if self._ladder.is_driven:
            return None
        given = [Bounded(level, 0.0) for level in self._ladder.given_levels]
        levels = [*given, *(self._level(number) for number in range(len(self._base.spots)))]
        low = min(level.value - level.error_bound for level in levels)
        high = max(level.value + level.error_bound for level in levels)
        return low, high

    def _within_limits(self, potential: FloatArray, bound: float) -> tuple[FloatArray, float]:
        """Potentials and their common bound, no farther from the truth than the levels between which that is."""
        limits = self._limits
        if limits is None:
            return potential, bound
        low, high = limits
        inside = np.clip(potential, low, high)
        return inside, min(bound, float(np.maximum(inside - low, high - inside).max()))

    def _limited(self, known: Bounded) -> Bounded:
        value, bound = self._within_limits(np.array([known.value]), known.error_bound)
        return Bounded(float(value[0]), bound)

    def _noise(self, refined: Refined, points: FloatArray) -> tuple[FloatArray, FloatArray]:
        """How far potential and flux may be off where panels are told apart, shape (n,) each."""
        potential, flux = noise(self._base, refined, points)
        for spot in self._base.spots:
            if spot.is_held:
                potential[_places_on(self.body, spot, points)[0]] = 0.0
        return potential, flux

    def _on_spots(
        self,
        answer: Field,
        solution: Solution,
        refined: Refined,
        finest: Refined,
        points: FloatArray,
        tolerance: float,
    ) -> Field:
        """A field with what is known of spots: the level of held ones, and panels' own flux on borders of panels."""
        for number, spot in enumerate(self._base.spots):
            on_it, inside = _places_on(self.body, spot, points)
            if spot.is_held:
                answer.potential[on_it] = refined.levels[number]
            if answer.flux is None or answer.flux_bound is None:
                continue
            between = np.flatnonzero(inside & np.isnan(answer.flux).any(axis=0))
            if between.size:
                # Between two panels the field of their densities has no finite flux, which the true one has.
                grid, moved = finest.grids[number], points[between].copy()
                for axis, edges in zip(axes_along(spot.face), (grid.first, grid.second), strict=True):
                    panel = np.clip(np.searchsorted(edges, moved[:, axis], side="right") - 1, 0, edges.size - 2)
                    on_edge = np.isin(moved[:, axis], edges)
                    moved[on_edge, axis] = 0.5 * (edges[panel] + edges[panel + 1])[on_edge]
                beside = solution.field_at(moved, tolerance=tolerance, with_flux=True)
                answer.flux[:, between] = beside.flux
                answer.flux_bound[between] = beside.flux_bound
            if spot.is_held:
                for axis in axes_along(spot.face):
                    answer.flux[axis, inside] = 0.0
        return answer

    def extremes(self, *, tolerance: float, keep_going: KeepGoing | None = None) -> Extremes:
        """The hottest and the coldest place of the closed body."""
        with on_behalf_of(keep_going):
            return Extremes(
                self._extreme(1.0, tolerance, keep_going, "hottest"),
                self._extreme(-1.0, tolerance, keep_going, "coldest"),
            )

    def _extreme(self, sign: float, tolerance: float, keep_going: KeepGoing | None, which: str) -> Place:
        held = [self._held_place(number) for number, spot in enumerate(self._base.spots) if spot.is_held]
        on_face = extremes.extreme_held(self._base.body, sign)
        best = max([*held, *([on_face] if on_face else [])], key=lambda place: sign * place.value, default=None)
        films = [spot.level for spot in self._base.spots if not spot.is_held and spot.level is not None]
        exceeds = best is not None and any(sign * ambient > sign * best.value for ambient in films)
        if best is not None and not exceeds and not extremes.may_exceed(self._base.body, sign * best.value, sign):
            return best
        fine, middle = (
            getattr(solution.extremes(tolerance=SHARE * tolerance, keep_going=keep_going), which)
            for solution in self._here.solutions[:2]
        )
        error = fine.error_bound + middle.error_bound + abs(fine.value - middle.value)
        if best is None or sign * fine.value > sign * best.value + error:
            return replace(fine, error_bound=error)
        # The two cannot be told apart, or the held one is the higher.
        return replace(best, error_bound=best.error_bound + max(sign * (fine.value - best.value), 0.0) + error)

    def _held_place(self, number: int) -> Place:
        spot, level = self._base.spots[number], self._level(number)
        place = [0.0, 0.0, 0.0]
        first, second = axes_along(spot.face)
        place[axis_of(spot.face)] = self.body.end_of(spot.face)
        place[first] = 0.5 * (spot.where.p_low + spot.where.p_high)
        place[second] = 0.5 * (spot.where.q_low + spot.where.q_high)
        return Place((place[0], place[1], place[2]), level.value, level.error_bound, f"face {spot.face}")

    def peak(
        self, face: Face, rectangle: Rectangle | None = None, *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The highest potential on a face or a rectangle of it."""
        for number, spot in enumerate(self._base.spots):
            if rectangle is not None and spot.face == face and spot.is_held and _lies_in(rectangle, spot.where):
                return self._held_place(number)
        fine, middle = (
            solution.peak(face, rectangle, tolerance=SHARE * tolerance, keep_going=keep_going)
            for solution in self._here.solutions[:2]
        )
        error = fine.error_bound + middle.error_bound + abs(fine.value - middle.value)
        known = self._limited(Bounded(fine.value, error))
        return replace(fine, value=known.value, error_bound=known.error_bound)

    def means(self, face: Face, rectangles: Sequence[Rectangle], *, tolerance: float) -> list[Bounded]:
        """Means of the potential over rectangles of a face."""
        return [self.mean(face, rectangle, tolerance=tolerance) for rectangle in rectangles]

    def convergence(
        self, points: FloatArray, *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> list[Convergence]:
        """Refused: here the panels set the error, and the answers of given panels converge to another field."""
        raise self._of_panels()

    def overshoot(self, terms: int) -> list[Overshoot]:
        """Refused, see `convergence`."""
        raise self._of_panels()

    def _of_panels(self) -> NotPhysical:
        return NotPhysical(
            "The error of a body with mixed faces is that of the panels on its pads, which fields, flows and means "
            "state; how a series converges is told for bodies with one condition on each face.",
            ("faces", self._base.faces[0]),
        )

    def mean(self, face: Face, rectangle: Rectangle | None = None, *, tolerance: float) -> Bounded:
        """Mean of the potential over a face or a rectangle of it, with finer panels where its bound asks for them."""
        for number, spot in enumerate(self._base.spots):
            if rectangle is not None and spot.face == face and spot.is_held and _lies_in(rectangle, spot.where):
                return self._level(number)
        count = self.count
        while True:
            solutions = self._ladder.at(count).solutions
            means = [solution.mean(face, rectangle, tolerance=tolerance) for solution in solutions]
            found = self._limited(change_of(means))
            finer = self._ladder.finer(count, _over(found.error_bound, tolerance), ORDER_OF_FIELDS)
            if finer is None:
                return found
            count = finer

    def face_total(
        self, face: Face, rectangle: Rectangle | None = None, *, gap: float | None = None, tolerance: float
    ) -> Total:
        """Flow into the body through a face or a rectangle of it."""
        return self._total(
            lambda solution: solution.face_total(face, rectangle, gap=gap, tolerance=tolerance), whole=rectangle is None
        )

    def plane_total(
        self,
        axis: int,
        position: float,
        rectangle: Rectangle | None = None,
        *,
        gap: float | None = None,
        tolerance: float,
    ) -> Total:
        """Flow along an axis through a plane square to it or a rectangle of that plane."""
        return self._total(
            lambda solution: solution.plane_total(axis, position, rectangle, gap=gap, tolerance=tolerance),
            whole=rectangle is None,
        )

    def _total(self, ask: Callable[[Solution], Total], *, whole: bool) -> Total:
        totals = [ask(solution) for solution in self._here.solutions]
        gaps = [total.with_gap for total in totals if total.with_gap is not None]
        with_gap = change_of(gaps) if len(gaps) == LEVELS else None
        values = [
            Bounded(total.value, total.error_bound)
            for total in totals
            if total.value is not None and total.error_bound is not None
        ]
        if len(values) < LEVELS:
            return replace(totals[0], with_gap=with_gap)
        # Through a whole face or section a flow is as regular as those of the pads.
        found = self._ladder.limit(values) if whole else change_of(values)
        return replace(totals[0], value=found.value, error_bound=found.error_bound, with_gap=with_gap)

    def balance(self, *, gap: float | None = None, tolerance: float) -> Balance:
        """Inflow of every face, generation, and what is left over; of the finest panels where a face is unbounded."""
        books = self._here.solutions[0].balance(gap=gap, tolerance=tolerance)
        inflow = {face: self.face_total(face, gap=gap, tolerance=tolerance) for face in books.inflow}
        books = replace(books, inflow=inflow)
        values = [total.value for total in inflow.values() if total.value is not None]
        bounds = [total.error_bound for total in inflow.values() if total.error_bound is not None]
        if books.residual is None or len(values) < len(inflow):
            return books
        carried_off = books.carried_off
        if carried_off is not None:
            rest = [solution.balance(gap=gap, tolerance=tolerance).carried_off for solution in self._here.solutions[1:]]
            carried_off = self._ladder.limit([carried_off, *(off for off in rest if off is not None)])
            values.append(-carried_off.value)
            bounds.append(carried_off.error_bound)
        residual, bound = math.fsum([books.generation, *values]), math.fsum(bounds)
        return Balance(inflow, books.generation, residual, bound, abs(residual) <= bound, carried_off)

    def certificate(self, points: FloatArray, error_bound: float, *, tolerance: float) -> Certificate:
        """What stands behind an answer with that bound: both representations of the field of the finest panels."""
        return self._here.solutions[0].certificate(points, error_bound, tolerance=SHARE * tolerance)

    def estimate_grid(self, shape: tuple[int, int, int], *, tolerance: float, with_flux: bool = False) -> Estimate:
        """Cost of a field on a grid, at the present refinement."""
        return _together(
            solution.estimate_grid(shape, tolerance=SHARE * tolerance, with_flux=with_flux)
            for solution in self._here.solutions
        )

    def estimate_points(self, count: int, *, tolerance: float, with_flux: bool = False) -> Estimate:
        """Cost of a field at points, at the present refinement."""
        return _together(
            solution.estimate_points(count, tolerance=SHARE * tolerance, with_flux=with_flux)
            for solution in self._here.solutions
        )


def _over(bound: float, wanted: float) -> float:
    """How many times too wide a bound is."""
    return bound / wanted if wanted > 0.0 else math.inf if bound > 0.0 else 0.0


def _together(estimates: Iterable[Estimate]) -> Estimate:
    kept = list(estimates)
    return Estimate(sum(some.multiplications for some in kept), max(some.bytes for some in kept))


def _places_on(body: Body, spot: Spot, points: FloatArray) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Which points are on a spot, and which of them are not on its border, or where that is the border of the body."""
    first, second = axes_along(spot.face)
    on_face = points[:, axis_of(spot.face)] == body.end_of(spot.face)
    on_it, inside = on_face.copy(), on_face.copy()
    ends = ((spot.where.p_low, spot.where.p_high), (spot.where.q_low, spot.where.q_high))
    for axis, (low, high) in zip((first, second), ends, strict=True):
        place = points[:, axis]
        on_it &= (place >= low) & (place <= high)
        inside &= ((place > low) | (place == body.begins[axis])) & ((place < high) | (place == body.size[axis]))
    return on_it, inside & on_it


def _lies_in(rectangle: Rectangle, other: Rectangle) -> bool:
    return (
        other.p_low <= rectangle.p_low
        and rectangle.p_high <= other.p_high
        and other.q_low <= rectangle.q_low
        and rectangle.q_high <= other.q_high
    )


def _compared(
    fields: Sequence[Field], noise_of_panels: tuple[FloatArray, FloatArray], unsettled: float, span: float
) -> Field:
    """The field of the finest panels, with what it may still be off by in its bounds.

    unsettled: by what part flows may be off. Well off the pads a field is off by some such part, whatever its changes
    at a place come to by chance.
    """
    fine, middle, coarse = fields
    left = left_over(np.abs(fine.potential - middle.potential), np.abs(middle.potential - coarse.potential))
    at_places = np.where(fine.potential == middle.potential, left, np.maximum(left, 0.5 * unsettled * span))
    bound = float((at_places + noise_of_panels[0]).max()) + fine.potential_bound + middle.potential_bound
    if fine.flux is None or middle.flux is None or coarse.flux is None:
        return replace(fine, potential_bound=bound)
    assert fine.flux_bound is not None
    assert middle.flux_bound is not None
    last, before = np.abs(fine.flux - middle.flux), np.abs(middle.flux - coarse.flux)
    flux_left = left_over(np.nan_to_num(last), np.nan_to_num(before)).max(axis=0)
    flux_left = np.maximum(flux_left, 2.0 * unsettled * np.nan_to_num(np.abs(fine.flux)).max(axis=0))
    flux_left *= FLUX_SAFETY
    flux_left += noise_of_panels[1] + fine.flux_bound + middle.flux_bound
    return replace(fine, potential_bound=bound, flux_bound=flux_left)
