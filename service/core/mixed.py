"""The solved problem of a body with several conditions on one face.

Totals are told by extrapolation from refinements, see `panel_error`; fields have their own, see `mixed_fields`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from service.core import mixed_extremes
from service.core.balance import Balance
from service.core.bounded import Bounded, Total
from service.core.certificate import Certificate
from service.core.climbing import Place
from service.core.conditions import HeldPad, map_of
from service.core.convergence import Convergence, Overshoot
from service.core.errors import NoSteadyState, NotPhysical
from service.core.estimate import Estimate
from service.core.extremes import Extremes
from service.core.faces import Face, axis_of
from service.core.field import Field, Grid, KeepGoing, Setting
from service.core.maps import Rectangle
from service.core.mixed_base import Base, base_of, pads_of
from service.core.mixed_fields import field_of_panels, field_on_held_pads
from service.core.mixed_levels import Levels
from service.core.mixed_pads import PadAnswer, pad_answers
from service.core.mixed_panels import given_total, needs_balance
from service.core.mixed_refinement import LEVELS, MOST_PANELS, SHARE, Ladder, Refinement
from service.core.panel_error import ORDER_OF_FIELDS, ORDER_OF_TOTALS, change_of, times_too_wide
from service.core.problem import Body
from service.core.region import Region
from service.core.sections import checked_rectangle
from service.core.solution import Solution
from service.core.solvability import BALANCED, check_steady_state
from service.core.stopping import on_behalf_of

FloatArray = NDArray[np.float64]

# The accuracy of fields that is usual here, in parts of the span: next to the borders of pads finer panels gain little.
USUAL_MIXED = 5e-3


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
    def _levels(self) -> Levels:
        return Levels(self._ladder, self._here)

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
                times_too_wide(max(answer.flow.error_bound for answer in answers), accuracy * size),
                times_too_wide(max(answer.potential.error_bound for answer in answers), accuracy * self.span),
            ]
            finer = self._ladder.finer(self.count, max(missed), ORDER_OF_TOTALS)
            if finer is None:
                return
            # Should this be stopped, the next one to ask is as far as before.
            self._ladder.at(finer)
            self.count = finer

    def pads(self) -> tuple[PadAnswer, ...]:
        """Flow and potential of every pad, face by face."""
        return pad_answers(self._levels)

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
            found = field_of_panels(self._levels, ask, points, tolerance)
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
        levels = None if with_flux else field_on_held_pads(self._levels, points)
        if levels is not None:
            return levels

        def ask(solution: Solution, share: float) -> Field:
            return solution.field_at(points, tolerance=share, with_flux=with_flux, keep_going=keep_going)

        with on_behalf_of(keep_going):
            return field_of_panels(self._levels, ask, points, tolerance)

    def extremes(self, *, tolerance: float, keep_going: KeepGoing | None = None) -> Extremes:
        """The hottest and the coldest place of the closed body."""
        region = Region.whole(self.body)
        return Extremes(
            self._extreme(region, 1.0, tolerance, keep_going), self._extreme(region, -1.0, tolerance, keep_going)
        )

    def highest_within(
        self, low: Sequence[float], high: Sequence[float], *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The highest potential in a closed box with these corners (x, y, z)."""
        return self._extreme(Region.between(self.body, low, high), 1.0, tolerance, keep_going)

    def lowest_within(
        self, low: Sequence[float], high: Sequence[float], *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The lowest potential in a closed box with these corners (x, y, z)."""
        return self._extreme(Region.between(self.body, low, high), -1.0, tolerance, keep_going)

    def peak(
        self, face: Face, rectangle: Rectangle | None = None, *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The highest potential on a face or a rectangle of it."""
        where = checked_rectangle(self.body, axis_of(face), rectangle)
        return self._extreme(Region.on_face(self.body, face, where), 1.0, tolerance, keep_going)

    def _extreme(self, region: Region, sign: float, tolerance: float, keep_going: KeepGoing | None) -> Place:
        with on_behalf_of(keep_going):
            return mixed_extremes.extreme(self._levels, region, sign, tolerance, keep_going)

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
        levels, count = self._levels, self.count
        number = levels.held_spot_around(face, rectangle)
        if number is not None:
            return levels.of(number)
        while True:
            solutions = self._ladder.at(count).solutions
            means = [solution.mean(face, rectangle, tolerance=tolerance) for solution in solutions]
            found = levels.limited(change_of(means))
            finer = self._ladder.finer(count, times_too_wide(found.error_bound, tolerance), ORDER_OF_FIELDS)
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


def _together(estimates: Iterable[Estimate]) -> Estimate:
    kept = list(estimates)
    return Estimate(sum(some.multiplications for some in kept), max(some.bytes for some in kept))
