"""One-dimensional lines in high-precision arithmetic: eigenfunctions at long times, images at short ones."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import cached_property

from scipy.optimize import brentq

from tests.core.reference.kernels import ONE, ZERO, Number, Spread, arithmetic

# Two reflections, which the images leave out, are of the order exp(-1 / (4 tau)); exp(-60) is 9e-27.
SMALL_EXPONENT = 60
SWITCH = ONE / (4 * SMALL_EXPONENT)


@dataclass(frozen=True)
class Profile:
    """A piecewise linear function: jumps and changes of slope at its knots, zero before the first.

    knots: tuples (place, jump, change of slope); on a finite line the function ends with zero at the far end.
    """

    knots: tuple[tuple[Number, Number, Number], ...]

    def integral(self, length: Number) -> Number:
        """Integral from 0 to the length, or over the whole profile when the length is infinite."""
        if arithmetic.isinf(length):
            return sum((-jump * p + bend * p * p / 2 for p, jump, bend in self.knots), ZERO)
        return sum((jump * (length - p) + bend * (length - p) ** 2 / 2 for p, jump, bend in self.knots), ZERO)

    def local(self, place: Number, length: Number) -> tuple[Number, Number]:
        """Value and slope, the mean of both sides on a knot inside; from the inside at the ends."""
        value, slope = ZERO, ZERO
        for p, jump, bend in self.knots:
            share = ONE if p < place or p == place == 0 else (ONE / 2 if p == place and p != length else ZERO)
            value += jump * share + (bend * (place - p) if p < place else ZERO)
            slope += bend * share
        return value, slope


@dataclass(frozen=True)
class Mode:
    """phi(x) = cosine cos(beta x) + sine sin(beta x), with its squared norm."""

    beta: Number
    cosine: Number
    sine: Number
    squared_norm: Number

    def at(self, x: Number) -> tuple[Number, Number]:
        """phi and its derivative."""
        c, s = arithmetic.cos(self.beta * x), arithmetic.sin(self.beta * x)
        return self.cosine * c + self.sine * s, self.beta * (self.sine * c - self.cosine * s)

    def projection(self, profile: Profile, length: Number) -> Number:
        """Integral of profile times phi."""
        if self.beta == 0:
            return profile.integral(length)
        end, end_slope = self.at(length)
        beta_squared = self.beta**2
        total = ZERO
        for p, jump, bend in profile.knots:
            here, here_slope = self.at(p)
            # int phi = -phi' / beta^2
            total += jump * (here_slope - end_slope) / beta_squared
            total += bend * (-(length - p) * end_slope + end - here) / beta_squared
        return total


@dataclass(frozen=True)
class Line:
    """A line 0 < x < length (maybe infinite) with ends "D", "N" or "R"; `*_film` is h, not h/k."""

    length: Number
    conductivity: Number
    low: str
    high: str
    low_film: Number = ZERO
    high_film: Number = ZERO
    _modes: list[Mode] = field(default_factory=list, compare=False, repr=False)

    @property
    def is_endless(self) -> bool:
        """Whether the line has no far end."""
        return bool(arithmetic.isinf(self.length))

    @property
    def is_insulated(self) -> bool:
        """Whether both ends are insulated or have a given inflow, so that a constant never decays."""
        return self.low == self.high == "N" and not self.is_endless

    @cached_property
    def strengths(self) -> tuple[Number, Number]:
        """H = h / k at both ends."""
        return self.low_film / self.conductivity, self.high_film / self.conductivity

    def mode(self, index: int) -> Mode:
        """Eigenfunction number index, from 0."""
        while len(self._modes) <= index:
            self._modes.append(self._next_mode(len(self._modes)))
        return self._modes[index]

    def rate(self, index: int) -> Number:
        """Decay rate k beta^2 of a mode; zero for an endless line."""
        return ZERO if self.is_endless else self.conductivity * self.mode(index).beta ** 2

    def use_images(self, time: Number) -> bool:
        """Whether the images are exact to the working precision at this time."""
        return self.is_endless or self.conductivity * time < SWITCH * self.length**2

    def _angle(self, end: str, film: Number, beta: Number) -> Number:
        if end == "R":
            return arithmetic.atan(film / beta)
        return arithmetic.pi / 2 if end == "D" else ZERO

    def _next_mode(self, index: int) -> Mode:
        if self.is_insulated and index == 0:
            return Mode(ZERO, ONE, ZERO, self.length)
        beta = self._root(index)
        if self.low == "D":
            cosine, sine = ZERO, ONE
        else:
            cosine, sine = ONE, self.strengths[0] / beta
        angle = beta * self.length
        norm = (
            (cosine**2 + sine**2) * self.length / 2
            + (cosine**2 - sine**2) * arithmetic.sin(2 * angle) / (4 * beta)
            + cosine * sine * arithmetic.sin(angle) ** 2 / beta
        )
        return Mode(beta, cosine, sine, norm)

    def _root(self, index: int) -> Number:
        """beta L = index pi + atan(H_low / beta) + atan(H_high / beta), which has one root for each index."""
        low, high = self.strengths
        length = self.length

        def rough(angle: float) -> float:
            total = 0.0
            for end, film in ((self.low, low), (self.high, high)):
                total += math.atan2(float(film * length), angle) if end == "R" else (math.pi / 2) * (end == "D")
            return angle - index * math.pi - total

        if "R" not in (self.low, self.high):
            return (
                index * arithmetic.pi + self._angle(self.low, low, ONE) + self._angle(self.high, high, ONE)
            ) / length
        start = brentq(rough, max(index * math.pi, 1e-300), (index + 1) * math.pi + 1e-9, xtol=1e-300, rtol=1e-15)
        beta = arithmetic.mpf(start) / length
        for _ in range(4):
            miss = beta * length - index * arithmetic.pi
            slope = length
            for end, film in ((self.low, low), (self.high, high)):
                miss -= self._angle(end, film, beta)
                if end == "R":
                    slope += film / (beta**2 + film**2)
            beta -= miss / slope
        return beta


class ProfileResponse:
    """What a line started from each of some profiles shows at one place: values and slopes at any time."""

    def __init__(self, line: Line, profiles: tuple[Profile, ...], place: Number) -> None:
        self.line, self.profiles, self.place = line, profiles, place
        self.knots = sorted({knot[0] for profile in profiles for knot in profile.knots})
        self._weights: list[tuple[Number, list[Number], list[Number]]] = []

    @property
    def constant_part(self) -> list[Number]:
        """The part that does not decay on an insulated line."""
        return [profile.integral(self.line.length) / self.line.length for profile in self.profiles]

    def distances(self) -> list[Number]:
        """Distances at which something happens."""
        ends = [] if self.line.is_endless else [self.line.length]
        return [abs(self.place - p) for p in [ZERO, *ends, *self.knots]]

    def local(self) -> tuple[list[Number], list[Number]]:
        """Values and slopes at time zero."""
        pairs = [profile.local(self.place, self.line.length) for profile in self.profiles]
        # On the edge of two held faces each has half a say.
        on_low, on_high = self.place == 0, self.place == self.line.length
        share = ONE / 2 if (on_low and self.line.low == "D") or (on_high and self.line.high == "D") else ONE
        return [share * value for value, _ in pairs], [share * slope for _, slope in pairs]

    def at(self, time: Number) -> tuple[list[Number], list[Number]]:
        """Values and slopes, one for each profile."""
        return self._by_images(time) if self.line.use_images(time) else self._by_modes(time)

    def _by_images(self, time: Number) -> tuple[list[Number], list[Number]]:
        line, x = self.line, self.place
        spread = Spread(line.conductivity * time)
        low, high = line.strengths
        step: dict[Number, tuple[Number, Number]] = {}
        ramp: dict[Number, tuple[Number, Number]] = {}
        for p in self.knots:
            s0, s1, s2 = spread.kernels(p - x)
            r0, r1, r2 = spread.reflected(p + x, line.low, low)
            step[p], ramp[p] = (s1 + r1, s0 - r0), (s2 + r2, s1 - r1)
            if not line.is_endless:
                h0, h1, h2 = spread.reflected(2 * line.length - p - x, line.high, high)
                # Seen from the far end a jump changes its sign and a bend does not.
                step[p] = (step[p][0] - h1, step[p][1] - h0)
                ramp[p] = (ramp[p][0] + h2, ramp[p][1] + h1)
        values = [sum((j * step[p][0] + m * ramp[p][0] for p, j, m in f.knots), ZERO) for f in self.profiles]
        slopes = [sum((j * step[p][1] + m * ramp[p][1] for p, j, m in f.knots), ZERO) for f in self.profiles]
        return values, slopes

    def _by_modes(self, time: Number) -> tuple[list[Number], list[Number]]:
        values, slopes = [ZERO] * len(self.profiles), [ZERO] * len(self.profiles)
        for index in range(10_000):
            rate, phi, phi_slope = self._weight(index)
            if rate * time > SMALL_EXPONENT:
                break
            decay = arithmetic.exp(-rate * time)
            for which in range(len(self.profiles)):
                values[which] += decay * phi[which]
                slopes[which] += decay * phi_slope[which]
        return values, slopes

    def _weight(self, index: int) -> tuple[Number, list[Number], list[Number]]:
        while len(self._weights) <= index:
            mode = self.line.mode(len(self._weights))
            value, slope = mode.at(self.place)
            parts = [mode.projection(f, self.line.length) / mode.squared_norm for f in self.profiles]
            self._weights.append(
                (
                    self.line.conductivity * mode.beta**2,
                    [c * value for c in parts],
                    [c * slope for c in parts],
                )
            )
        return self._weights[index]


class WallResponse:
    """What a line shows at one place when its low or high end is driven by unit data for an instant.

    Unit data are a held value, an inflow, or the ambient of a film.
    """

    def __init__(self, line: Line, at_high: bool, place: Number) -> None:
        self.line, self.at_high, self.place = line, at_high, place
        self._weights: list[tuple[Number, Number, Number]] = []

    @property
    def end(self) -> str:
        """Condition of the driven end."""
        return self.line.high if self.at_high else self.line.low

    @property
    def film(self) -> Number:
        """Film coefficient of the driven end."""
        return self.line.high_film if self.at_high else self.line.low_film

    @property
    def depth(self) -> Number:
        """Distance from the driven end."""
        return self.line.length - self.place if self.at_high else self.place

    @property
    def constant_part(self) -> list[Number]:
        """The part that does not decay on an insulated line."""
        return [1 / self.line.length]

    def distances(self) -> list[Number]:
        """Distances at which something happens."""
        return [self.depth] if self.line.is_endless else [self.depth, self.line.length - self.depth]

    def at(self, time: Number) -> tuple[list[Number], list[Number]]:
        """Value and slope along the axis."""
        value, slope = self._by_images(time) if self.line.use_images(time) else self._by_modes(time)
        return [value], [slope]

    def _by_images(self, time: Number) -> tuple[Number, Number]:
        k = self.line.conductivity
        spread = Spread(k * time)
        z, T = self.depth, spread.spread
        s0 = spread.kernels(z)[0]
        if self.end == "D":
            value, inward = k * z * s0 / T, k * s0 * (1 - z * z / (2 * T)) / T
        elif self.end == "N":
            value, inward = 2 * s0, -z * s0 / T
        else:
            H = self.film / k
            w = spread.film(z, H)
            value, inward = (
                2 * self.film * (s0 - H * w),
                2 * self.film * (H * s0 - H * H * w - z * s0 / (2 * T)),
            )
        return value, -inward if self.at_high else inward

    def _by_modes(self, time: Number) -> tuple[Number, Number]:
        value = slope = ZERO
        for index in range(10_000):
            rate, phi, phi_slope = self._weight(index)
            if rate * time > SMALL_EXPONENT:
                break
            decay = arithmetic.exp(-rate * time)
            value += decay * phi
            slope += decay * phi_slope
        return value, slope

    def weight_of(self, mode: Mode) -> Number:
        """Strength with which unit data drive a mode."""
        value, slope = mode.at(self.line.length if self.at_high else ZERO)
        if self.end == "D":
            return self.line.conductivity * (-slope if self.at_high else slope) / mode.squared_norm
        return (value if self.end == "N" else self.film * value) / mode.squared_norm

    def _weight(self, index: int) -> tuple[Number, Number, Number]:
        while len(self._weights) <= index:
            mode = self.line.mode(len(self._weights))
            value, slope = mode.at(self.place)
            strength = self.weight_of(mode)
            self._weights.append((self.line.conductivity * mode.beta**2, strength * value, strength * slope))
        return self._weights[index]
