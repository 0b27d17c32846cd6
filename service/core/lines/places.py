"""Where a line is asked, and what it answers."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core.lines.line import Line, Order
from service.core.lines.modes import MODE_COUNT, modes_of
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Places:
    """Where a line is asked, and for what: values or slopes at places, or integrals over intervals.

    low: places, or lower ends of the intervals, in the caller's unit, shape (n,). high: upper ends, or None.
    order: VALUE or SLOPE for places; PRIMITIVE for intervals.
    """

    low: FloatArray
    order: Order
    high: FloatArray | None = None
    _shapes: dict[Line, FloatArray] = field(default_factory=dict, repr=False)
    _profiles: dict[tuple[Line, Profiles], FloatArray] = field(default_factory=dict, repr=False)

    @cached_property
    def key(self) -> tuple[Order, bytes, bytes | None]:
        """All that is asked, by which answers are kept."""
        return self.order, self.low.tobytes(), None if self.high is None else self.high.tobytes()

    def mode_shapes(self, line: Line) -> FloatArray:
        """The line's eigenfunctions asked in the same way, shape (n, MODE_COUNT), kept for the next time."""
        if line not in self._shapes:
            modes = modes_of(line, MODE_COUNT)
            asked = modes.at(self.low, self.order) if self.high is None else modes.over(self.low, self.high)
            self._shapes[line] = asked
        return self._shapes[line]

    def profile(self, line: Line, profiles: Profiles) -> FloatArray:
        """The same asked of the profiles themselves, shape (n, n_profiles), per scaled length."""
        key = (line, profiles)
        if key not in self._profiles:
            if self.high is not None:
                self._profiles[key] = profiles.integrals(self.low, self.high) * line.scale
            elif self.order == -1:
                self._profiles[key] = profiles.slope_at(self.low) / line.scale
            else:
                self._profiles[key] = profiles.at(self.low)
        return self._profiles[key]

    def initial(self, line: Line, profiles: Profiles) -> FloatArray:
        """What the line answers just after time 0: the profile, but 0 on a held end and for a slope on any end."""
        return self._settled(line, self.profile(line, profiles).copy())

    def _settled(self, line: Line, values: FloatArray) -> FloatArray:
        if self.high is None:
            for place, film in ((line.begins, line.film_low), (line.length, line.film_high)):
                if film == math.inf or self.order == -1:
                    values[self.low == place] = 0.0
        return values


@dataclass(frozen=True, eq=False)
class TimeResponse:
    """Answer of a line to its drive.

    total: shape (n, n_times, n_profiles). initial: what it is just after time 0, shape (n, n_profiles): the profile,
    0 on a held end and for slopes on any end, and zero for a driven end. early: departures from it
    at the short times, from which the total there is made. carried: the sizes of what each answer was summed from where
    that is not had from the line's modes and images, shape (n, n_times, n_profiles), else None.
    """

    total: FloatArray
    initial: FloatArray
    early: FloatArray
    carried: FloatArray | None = None

    @cached_property
    def departure(self) -> FloatArray:
        """The total less what the line is just after time 0, with digits of its own while times are short."""
        departure = self.total - self.initial[:, None, :]
        departure[:, : self.early.shape[1]] = self.early
        return departure
