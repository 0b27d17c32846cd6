"""The solved problem: everything an engineer can ask of one body."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core import balance, certificate, convergence, estimate, extremes, means, totals
from service.core import field as fields
from service.core.balance import Balance
from service.core.bounded import Bounded, Total
from service.core.certificate import Certificate
from service.core.climbing import Place
from service.core.convergence import Convergence, Overshoot
from service.core.estimate import Estimate
from service.core.extremes import Extremes
from service.core.faces import Face, axis_of
from service.core.field import Field, Grid, KeepGoing, Setting
from service.core.maps import Rectangle
from service.core.problem import Body
from service.core.reach import Reach, reach
from service.core.region import Region
from service.core.sections import checked_rectangle
from service.core.solvability import check_steady_state, level_is_pinned
from service.core.span import span_of
from service.core.split import level_of_mean, lines_of, parts_of, reference_level

FloatArray = NDArray[np.float64]

USUAL_ACCURACY = 1e-9


def solve(body: Body) -> Solution:
    """Check that a body has a steady field and make it ready to be asked. Raises NoSteadyState."""
    check_steady_state(body)
    lines = lines_of(body)
    reference = reference_level(body)
    parts = parts_of(body, reference)
    if body.layers and level_is_pinned(body) and not any(line.is_endless for line in lines):
        reference = level_of_mean(lines, parts)
    return Solution(Setting(body, lines, parts, reference, span_of(body, lines, parts)))


class Solution:
    """A body with its field, computed where and when it is asked for."""

    def __init__(self, setting: Setting) -> None:
        self._setting = setting

    @property
    def body(self) -> Body:
        """The body as given."""
        return self._setting.body

    @property
    def span(self) -> float:
        """Range of the potential that accuracies refer to: of the data, or what flows and generation raise."""
        return self._setting.span

    @property
    def usual_accuracy(self) -> float:
        """The accuracy that answers have unless another is asked for, in parts of the span."""
        return USUAL_ACCURACY

    @property
    def reference(self) -> float:
        """The level the parts of the problem are counted from."""
        return self._setting.reference

    @property
    def depends_on_far_level(self) -> bool:
        """Whether flows depend on what the potential comes to far away, which no face tells."""
        return False

    @property
    def level_pinned(self) -> bool:
        """Whether the data leave the level open and the field is counted from its own mean."""
        return level_is_pinned(self.body)

    def prepare(self, *, tolerance: float, keep_going: KeepGoing | None = None) -> None:
        """Do ahead, where it can be stopped, what all answers of an accuracy share, if anything is iterated."""

    def field(
        self, grid: Grid, *, tolerance: float, with_flux: bool = False, keep_going: KeepGoing | None = None
    ) -> Field:
        """Potential, and flux density if asked for, on a grid."""
        return fields.on_grid(self._setting, grid, tolerance=tolerance, with_flux=with_flux, keep_going=keep_going)

    def field_at(
        self, points: FloatArray, *, tolerance: float, with_flux: bool = False, keep_going: KeepGoing | None = None
    ) -> Field:
        """Potential, and flux density if asked for, at points, shape (n, 3)."""
        return fields.at_points(self._setting, points, tolerance=tolerance, with_flux=with_flux, keep_going=keep_going)

    def extremes(self, *, tolerance: float, keep_going: KeepGoing | None = None) -> Extremes:
        """The hottest and the coldest place of the closed body."""
        return extremes.find(self._setting, tolerance, keep_going)

    def peak(
        self, face: Face, rectangle: Rectangle | None = None, *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The highest potential on a face or a rectangle of it."""
        rectangle = checked_rectangle(self.body, axis_of(face), rectangle)
        return extremes.highest_on(self._setting, face, rectangle, tolerance, keep_going)

    def highest_within(
        self, low: Sequence[float], high: Sequence[float], *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The highest potential in a closed box with these corners (x, y, z)."""
        region = Region.between(self.body, low, high)
        return extremes.extreme_within(self._setting, region, 1.0, tolerance, keep_going)

    def lowest_within(
        self, low: Sequence[float], high: Sequence[float], *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> Place:
        """The lowest potential in a closed box with these corners (x, y, z)."""
        region = Region.between(self.body, low, high)
        return extremes.extreme_within(self._setting, region, -1.0, tolerance, keep_going)

    def reach(
        self,
        face: Face,
        fractions: Sequence[float],
        *,
        unit: bool = False,
        modes: int = 10,
        tolerance: float,
        keep_going: KeepGoing | None = None,
    ) -> Reach:
        """How far from a face what its data drive has fallen below fractions of its largest size on the face.

        unit: follow a unit change all over the face in place of its data. tolerance: in parts of the largest size.
        """
        return reach(self._setting, face, fractions, unit=unit, modes=modes, tolerance=tolerance, keep_going=keep_going)

    def certificate(self, points: FloatArray, error_bound: float, *, tolerance: float) -> Certificate:
        """What stands behind an answer with that bound: agreement of both representations at some of its points."""
        return certificate.certify(self._setting, points, error_bound, tolerance)

    def convergence(
        self, points: FloatArray, *, tolerance: float, keep_going: KeepGoing | None = None
    ) -> list[Convergence]:
        """How the answers at points, shape (n, 3), converge."""
        fields.check_inside(self.body, (points[:, 0], points[:, 1], points[:, 2]))
        answers = []
        for point in points:
            if keep_going is not None:
                keep_going()
            answers.append(convergence.converge(self._setting, point, tolerance))
        return answers

    def overshoot(self, terms: int) -> list[Overshoot]:
        """By how much a series of so many modes per axis overshoots the data of each driven face."""
        return convergence.overshoots(self._setting, terms)

    def estimate_grid(self, shape: tuple[int, int, int], *, tolerance: float, with_flux: bool = False) -> Estimate:
        """Cost of a field on a grid."""
        return estimate.on_grid(self._setting, shape, tolerance, with_flux)

    def estimate_points(self, count: int, *, tolerance: float, with_flux: bool = False) -> Estimate:
        """Cost of a field at points."""
        return estimate.at_points(self._setting, count, tolerance, with_flux)

    def mean(self, face: Face, rectangle: Rectangle | None = None, *, tolerance: float) -> Bounded:
        """Mean of the potential over a face or a rectangle of it."""
        return means.mean(self._setting, face, rectangle, tolerance)

    def means(self, face: Face, rectangles: Sequence[Rectangle], *, tolerance: float) -> list[Bounded]:
        """Means of the potential over rectangles of a face, all at once."""
        return means.means(self._setting, face, rectangles, tolerance)

    def face_total(
        self, face: Face, rectangle: Rectangle | None = None, *, gap: float | None = None, tolerance: float
    ) -> Total:
        """Flow into the body through a face or a rectangle of it; unbounded where held values meet in a jump."""
        return totals.face_total(self._setting, face, rectangle, gap, tolerance)

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
        return totals.plane_total(self._setting, axis, position, rectangle, gap, tolerance)

    def balance(self, *, gap: float | None = None, tolerance: float) -> Balance:
        """Inflow of every face, generation, and what is left over."""
        return balance.balance(self._setting, tolerance, gap)
