"""Levels of held pads of mixed faces, given or found, and what they tell of the field everywhere."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core import time_error
from service.core.bounded import Bounded
from service.core.faces import Face
from service.core.maps import Rectangle
from service.core.mixed_base import Base
from service.core.mixed_refinement import Ladder, Refinement
from service.core.panels import STEP
from service.core.problem import Body

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Levels:
    """The levels of a body's spots as one of its refinements tells them."""

    ladder: Ladder
    here: Refinement

    @property
    def base(self) -> Base:
        """The base of the body, with its spots."""
        return self.ladder.base

    @property
    def body(self) -> Body:
        """The body as given."""
        return self.ladder.body

    def of(self, number: int) -> Bounded:
        """Level of a held spot."""
        level = self.base.spots[number].level
        if level is not None:
            return Bounded(level, 0.0)
        rounding = time_error.step_error(STEP) * self.here.span
        return self.ladder.limit([Bounded(float(refined.levels[number]), rounding) for refined in self.here.refined])

    def held_spot_around(self, face: Face, rectangle: Rectangle | None) -> int | None:
        """The held spot that a rectangle of a face lies in, None if there is none or the whole face is asked for."""
        if rectangle is None:
            return None
        for number, spot in enumerate(self.base.spots):
            if spot.face == face and spot.is_held and rectangle.lies_in(spot.where):
                return number
        return None

    @cached_property
    def _limits(self) -> tuple[float, float] | None:
        """Between what levels the potential is everywhere, by the maximum principle; None where that does not tell."""
        if self.ladder.is_driven:
            return None
        given = [Bounded(level, 0.0) for level in self.ladder.given_levels]
        levels = [*given, *(self.of(number) for number in range(len(self.base.spots)))]
        low = min(level.value - level.error_bound for level in levels)
        high = max(level.value + level.error_bound for level in levels)
        return low, high

    def within_limits(self, potential: FloatArray, bound: float) -> tuple[FloatArray, float]:
        """Potentials and their common bound, no farther from the truth than the levels between which that is."""
        limits = self._limits
        if limits is None:
            return potential, bound
        low, high = limits
        inside = np.clip(potential, low, high)
        return inside, min(bound, float(np.maximum(inside - low, high - inside).max()))

    def limited(self, known: Bounded) -> Bounded:
        """The same for one potential."""
        value, bound = self.within_limits(np.array([known.value]), known.error_bound)
        return Bounded(float(value[0]), bound)
