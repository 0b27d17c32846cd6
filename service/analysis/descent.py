"""One local search for the lowest of the largest of several functions under limits, asking for its cases in waves.

Variables u are numbers in parts of their ranges, 0 to 1. Minimised is the largest of f_k(u) while e_j(u) <= 0 and while
rectangles keep apart, c(u) >= 0, which costs no case and is kept exactly. In each step the f_k and e_j are replaced by
their tangents and d'Bd / 2 is added, B a damped BFGS estimate of the curvature of the Lagrangian; that is minimised in
a trust region, in epigraph form, with a charge in proportion to the largest e_j. The step is taken if the largest f_k
and that charge fall by a fair part of what was promised. Where curvature alone spoils a step it is corrected once by
the values found at its end.

Source: Fletcher, Practical Methods of Optimization, 2nd ed., 1987, sections 14.4 (exact penalty, trust region) and 14.5
(second-order correction); Powell, LNM 630 (1978) 144 (damping).
"""

from __future__ import annotations

from collections.abc import Callable, Generator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.optimize import minimize

from service.analysis.evaluations import FloatArray

# Radius of the first trust region, of the largest, and of one that ends the search, in parts of the ranges.
FIRST_RADIUS, LARGEST_RADIUS, SMALLEST_RADIUS = 0.1, 0.5, 1e-7

# Slopes are taken over this part of the radius, so that kinks farther off are not felt. Below the first of these noise
# of 1e-9 would show in them, above the second the curvature.
STEP_OF_RADIUS, SMALLEST_STEP, LARGEST_STEP = 0.1, 3e-4, 3e-3

# Parts of the promised fall that a step has to keep to be taken, not to shrink the region, and to widen it.
TAKEN, POOR, GOOD = 0.05, 0.25, 0.75

# The search has converged when a step promises less than this, functions changing by about 1 over the ranges.
LEAST_FALL = 1e-9

# First charge for an excess of 1, how it grows while there is more than the least, and where that ends.
FIRST_CHARGE, DEARER, LARGEST_CHARGE = 10.0, 10.0, 1e6
LEAST_EXCESS = 1e-9

# A curvature smaller than this part of the one estimated is damped.
DAMPING = 0.2

MOST_STEPS = 200

# The two places of each axis from which a slope is taken, in steps, as they are preferred.
SIDES = ((-1.0, 1.0), (1.0, 2.0), (-1.0, -2.0))

# Clearances are linear piece by piece, so that any step gives their slopes that rounding leaves alone.
CLEARANCE_STEP = 1e-6

Ended = Literal["converged", "no step", "steps used up", "cases used up"]


@dataclass(frozen=True)
class Point:
    """What was found at one place.

    values: shape (K + J,), the f_k and then the e_j. n_goals: K. noise: what the f_k may be off by.
    """

    values: FloatArray
    n_goals: int
    noise: float

    @property
    def goal(self) -> float:
        """The largest of the f_k."""
        return float(self.values[: self.n_goals].max())

    @property
    def excess(self) -> float:
        """The largest of the e_j, 0 if there is none above."""
        return float(self.values[self.n_goals :].max(initial=0.0))

    def charged(self, charge: float) -> float:
        """The largest f_k with the charge for the excess."""
        return self.goal + charge * self.excess


Points = list[Point | None]
Apart = Callable[[FloatArray], FloatArray]


@dataclass(frozen=True)
class _Model:
    """Tangents at a place and the curvature. slopes: shape (K + J, n)."""

    point: Point
    slopes: FloatArray
    curvature: FloatArray

    def charged(self, step: FloatArray, charge: float) -> float:
        """What the goal with the charge comes to after a step."""
        there = Point(self.point.values + self.slopes @ step, self.point.n_goals, 0.0)
        return there.charged(charge) + 0.5 * float(step @ self.curvature @ step)


@dataclass(frozen=True)
class _Step:
    """A step of a model. weights: of the f_k and e_j in the Lagrangian there, shape (K + J,)."""

    by: FloatArray
    weights: FloatArray


class Descent:
    """A local search. u: where it is; here: what was found there; weights: of the f_k and e_j in its last Lagrangian;
    charge: what an excess is charged.

    apart: clearances at places, shape (n_places, n_clearances), which are at least 0 at u. kept_clear: by how much more
    than 0 they are aimed at, so that rounding does not bring them below.
    """

    def __init__(self, u: FloatArray, here: Point, apart: Apart, kept_clear: float) -> None:
        self.u, self.here = u, here
        self._apart, self._kept_clear = apart, kept_clear
        self._radius, self.charge = FIRST_RADIUS, FIRST_CHARGE
        self.weights = np.zeros(here.values.size)

    def steps(self) -> Generator[FloatArray, Points, Ended]:
        """Search, yielding places that are wanted next and taking what was found there, None where a case failed."""
        curvature = np.eye(self.u.size)
        slopes = yield from self._slopes()
        for _ in range(MOST_STEPS):
            taken = yield from self._step(_Model(self.here, slopes, curvature))
            if not isinstance(taken, _Step):
                return taken
            before = taken.weights @ slopes
            slopes = yield from self._slopes()
            curvature = _updated(curvature, taken.by, taken.weights @ slopes - before)
        return "steps used up"

    def _step(self, model: _Model) -> Generator[FloatArray, Points, _Step | Ended]:
        """Take a step that a model promises and the functions keep; why there is none, where that is so."""
        stay = np.zeros(self.u.size)
        while self._radius >= SMALLEST_RADIUS:
            step = self._promising(model)
            self.weights = step.weights
            promised = model.charged(stay, self.charge) - model.charged(step.by, self.charge)
            if promised <= LEAST_FALL + self.here.noise:
                if self.here.excess <= LEAST_EXCESS or self.charge >= LARGEST_CHARGE:
                    return "converged"
                self.charge *= DEARER
                continue
            length = float(np.abs(step.by).max())
            there = (yield self._after(step))[0]
            if there is not None and self._fall(there) < TAKEN * promised:
                moved = Point(there.values - model.slopes @ step.by, there.n_goals, there.noise)
                step = self._promising(_Model(moved, model.slopes, model.curvature))
                there = (yield self._after(step))[0]
            kept = -np.inf if there is None else self._fall(there) / promised
            if kept < POOR:
                self._radius = 0.5 * length
            elif kept > GOOD and length > 0.9 * self._radius:
                self._radius = min(2.0 * self._radius, LARGEST_RADIUS)
            if there is not None and kept >= TAKEN:
                self.u, self.here = self._after(step)[0], there
                return step
        return "no step"

    def _after(self, step: _Step) -> FloatArray:
        return np.clip(self.u + step.by, 0.0, 1.0)[None]

    def _fall(self, there: Point) -> float:
        return self.here.charged(self.charge) - there.charged(self.charge)

    def _slopes(self) -> Generator[FloatArray, Points, FloatArray]:
        """Slopes of all functions, shape (K + J, n), by parabolas through u and two places of each axis.

        By a line through the one place where the other failed; nothing along an axis where both did.
        """
        size = self.u.size
        step = float(np.clip(STEP_OF_RADIUS * self._radius, SMALLEST_STEP, LARGEST_STEP))
        offsets = step * self._sides(step)
        found = yield (self.u + offsets[:, :, None] * np.eye(size)[:, None]).reshape(-1, size)
        slopes = np.zeros((self.here.values.size, size))
        for axis in range(size):
            pairs = zip(offsets[axis], found[2 * axis : 2 * axis + 2], strict=True)
            rises = [(offset, there.values - self.here.values) for offset, there in pairs if there is not None]
            if len(rises) == 2:
                (a, rise_a), (b, rise_b) = rises
                slopes[:, axis] = (rise_a * b * b - rise_b * a * a) / (a * b * (b - a))
            elif rises:
                slopes[:, axis] = rises[0][1] / rises[0][0]
        return slopes

    def _sides(self, step: float) -> FloatArray:
        """The two places of each axis to take its slope from, in steps: within the ranges, and apart if that can be."""
        size = self.u.size
        offsets = np.unique(SIDES)
        places = self.u + step * offsets[:, None, None] * np.eye(size)
        within = np.all((places >= 0.0) & (places <= 1.0), axis=2)
        clear = within & (self._apart(places.reshape(-1, size)).min(axis=1, initial=np.inf).reshape(-1, size) >= 0.0)
        sides = np.empty((size, 2))
        for axis in range(size):
            allowed = (dict(zip(offsets, where[:, axis], strict=True)) for where in (clear, within))
            sides[axis] = next(pair for good in allowed for pair in SIDES if good[pair[0]] and good[pair[1]])
        return sides

    def _promising(self, model: _Model) -> _Step:
        """The step within the region, the ranges and the clearances after which the model is lowest."""
        size, goals = self.u.size, model.point.n_goals
        n_functions = model.point.values.size
        is_goal = np.arange(n_functions) < goals
        # Variables: the step, the level no f_k is above, and the excess no e_j is above.
        rows = np.column_stack([-model.slopes, is_goal, ~is_goal])
        gaps = np.where(is_goal, model.point.goal, 0.0) - model.point.values
        curvature = np.pad(model.curvature, ((0, 2), (0, 2)))
        prices = np.concatenate([np.zeros(size), [1.0, self.charge]])
        constraints = [{"type": "ineq", "fun": lambda z: rows @ z + gaps, "jac": lambda z: rows}]
        if self._apart(self.u[None]).size:
            constraints.append({"type": "ineq", "fun": self._clearances, "jac": self._clearance_slopes})
        low, high = np.maximum(-self._radius, -self.u), np.minimum(self._radius, 1.0 - self.u)
        found = minimize(
            lambda z: float(prices @ z + 0.5 * z @ curvature @ z),
            np.concatenate([np.zeros(size + 1), [model.point.excess]]),
            jac=lambda z: prices + curvature @ z,
            method="SLSQP",
            bounds=[*zip(low, high, strict=True), (None, None), (0.0, None)],
            constraints=constraints,
            options={"ftol": 1e-13, "maxiter": 200},
        )
        step = self._drawn_back(np.clip(found.x[:size], low, high))
        return _Step(step, np.asarray(found.multipliers, dtype=float)[:n_functions])

    def _clearances(self, z: FloatArray) -> FloatArray:
        return self._apart((self.u + z[: self.u.size])[None])[0] - self._kept_clear

    def _clearance_slopes(self, z: FloatArray) -> FloatArray:
        steps = CLEARANCE_STEP * np.eye(self.u.size)
        place = self.u + z[: self.u.size]
        slopes = (self._apart(place + steps) - self._apart(place - steps)).T / (2.0 * CLEARANCE_STEP)
        return np.pad(slopes, ((0, 0), (0, 2)))

    def _drawn_back(self, step: FloatArray) -> FloatArray:
        """The longest part of a step after which all is apart, where tangents of the clearances led too far."""
        parts = 1.0 - np.concatenate([[0.0], np.geomspace(1e-6, 1.0, 31)])
        clear = (self._apart(self.u + parts[:, None] * step) >= 0.0).all(axis=1)
        return parts[int(np.argmax(clear))] * step


def _updated(curvature: FloatArray, moved: FloatArray, bend: FloatArray) -> FloatArray:
    """The curvature after a step along which the slope of the Lagrangian changed by `bend`; it stays positive."""
    pushed = curvature @ moved
    expected, measured = float(moved @ pushed), float(moved @ bend)
    if expected <= 0.0:
        return curvature
    if measured < DAMPING * expected:
        part = (1.0 - DAMPING) * expected / (expected - measured)
        bend = part * bend + (1.0 - part) * pushed
        measured = float(moved @ bend)
    return curvature - np.outer(pushed, pushed) / expected + np.outer(bend, bend) / measured
