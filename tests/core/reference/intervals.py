"""Integrals of the potential and of the flux over rectangles square to an axis, to more than twenty digits.

The responses of the two lines in the rectangle's plane are replaced by their integrals over an interval, in
closed form; the rest is as in `high_precision.py`. Serves bodies whose driven faces are square to the axis.
"""

from __future__ import annotations

from collections.abc import Sequence

from tests.core.reference.cases import Case
from tests.core.reference.high_precision import Drive, HighPrecision
from tests.core.reference.kernels import ZERO, Number, Spread, arithmetic
from tests.core.reference.lines import Line, Profile, ProfileResponse, WallResponse


def _third(spread: Spread, y: Number) -> tuple[Number, Number, Number]:
    """s1, s2 and s3(y) = int_y^inf s2 = ((y^2 + 2 T) s1 - 2 T y s0) / 2."""
    s0, s1, s2 = spread.kernels(y)
    T = spread.spread
    return s1, s2, ((y * y + 2 * T) * s1 - 2 * T * y * s0) / 2


def _third_reflected(spread: Spread, y: Number, end: str, film: Number) -> tuple[Number, Number]:
    """s2 and s3 after one reflection."""
    s1, s2, s3 = _third(spread, y)
    if end == "N":
        return s2, s3
    if end == "D":
        return -s2, -s3
    if s1 == 0:
        return ZERO, ZERO
    # w' = H w - s0, so that the integral of w from y on is (s1 - w) / H.
    tail = (s1 - spread.film(y, film)) / film
    return -s2 + 2 * tail, -s3 + 2 * (s2 - tail) / film


class ProfileIntegral(ProfileResponse):
    """Integral over an interval of what a line started from some profiles shows; its slopes are not kept."""

    def __init__(self, line: Line, profiles: tuple[Profile, ...], low: Number, high: Number) -> None:
        super().__init__(line, profiles, low)
        self.low, self.high = low, high

    @property
    def constant_part(self) -> list[Number]:
        """The part that does not decay on an insulated line."""
        return [(self.high - self.low) * part for part in super().constant_part]

    def distances(self) -> list[Number]:
        """Distances at which something happens, from both ends of the interval."""
        marks = [ZERO, *self.knots] if self.line.is_endless else [ZERO, self.line.length, *self.knots]
        return [abs(end - mark) for end in (self.low, self.high) for mark in marks]

    def local(self) -> tuple[list[Number], list[Number]]:
        """Integrals of the profiles themselves."""
        values = []
        for profile in self.profiles:
            total = ZERO
            for p, jump, bend in profile.knots:
                for end, sign in ((self.high, 1), (self.low, -1)):
                    d = max(end - p, ZERO)
                    total += sign * (jump * d + bend * d * d / 2)
            values.append(total)
        return values, [ZERO] * len(values)

    def _by_images(self, time: Number) -> tuple[list[Number], list[Number]]:
        upper, lower = self._antiderivatives(time, self.high), self._antiderivatives(time, self.low)
        return [a - b for a, b in zip(upper, lower, strict=True)], [ZERO] * len(upper)

    def _antiderivatives(self, time: Number, x: Number) -> list[Number]:
        line = self.line
        spread = Spread(line.conductivity * time)
        step: dict[Number, Number] = {}
        ramp: dict[Number, Number] = {}
        for p in self.knots:
            _, s2, s3 = _third(spread, p - x)
            r2, r3 = _third_reflected(spread, p + x, line.low, line.strengths[0])
            step[p], ramp[p] = s2 - r2, s3 - r3
            if not line.is_endless:
                h2, h3 = _third_reflected(spread, 2 * line.length - p - x, line.high, line.strengths[1])
                step[p], ramp[p] = step[p] - h2, ramp[p] + h3
        return [sum((j * step[p] + m * ramp[p] for p, j, m in f.knots), ZERO) for f in self.profiles]

    def _weight(self, index: int) -> tuple[Number, list[Number], list[Number]]:
        while len(self._weights) <= index:
            mode = self.line.mode(len(self._weights))
            if mode.beta == 0:
                integral = self.high - self.low
            else:
                integral = (mode.at(self.low)[1] - mode.at(self.high)[1]) / mode.beta**2
            parts = [mode.projection(f, self.line.length) / mode.squared_norm for f in self.profiles]
            rate = self.line.conductivity * mode.beta**2
            self._weights.append((rate, [c * integral for c in parts], [ZERO] * len(parts)))
        return self._weights[index]


class OverRectangles(HighPrecision):
    """Integrals over rectangles square to one axis; the driven faces are square to it too."""

    def __init__(self, case: Case, axis: int) -> None:
        super().__init__(case)
        self.axis = axis

    def integral(self, position: float, rectangle: Sequence[float]) -> tuple[Number, Number]:
        """Integrals of u and of the flux along the axis over p_low, p_high, q_low, q_high at a position."""
        number = arithmetic.mpf
        across = [other for other in range(3) if other != self.axis]
        spans = {across[0]: rectangle[:2], across[1]: rectangle[2:]}
        point = [number(position) if axis == self.axis else number(spans[axis][0]) for axis in range(3)]
        total = [ZERO] * 4
        for drive in self.drives(point):
            factors = []
            for axis, factor in enumerate(drive.factors):
                if axis == self.axis:
                    factors.append(factor)
                    continue
                assert not isinstance(factor, WallResponse), "a driven face that is not square to the axis"
                low, high = (number(end) for end in spans[axis])
                factors.append(ProfileIntegral(factor.line, factor.profiles, low, high))
            more = self._integrate(Drive(drive.axis, tuple(factors), drive.terms))
            total = [a + b for a, b in zip(total, more, strict=True)]
        return total[0], -self.lines[self.axis].conductivity * total[1 + self.axis]
