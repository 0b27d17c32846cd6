"""Steady potential of a single line: what the time integral of a line's response adds up to, in closed form.

    k V'' + q = 0 with the line's end conditions; V'' k = rate V for the attenuated wall response

A line with both ends insulated has no steady state of its own: the mean of the driving is taken out first
and the mean of V is zero. An endless line insulated at its low end is counted from its far level.
"""

from __future__ import annotations

from tests.core.reference.kernels import ONE, ZERO, Number, arithmetic
from tests.core.reference.lines import Line, Profile


class _Particular:
    """P with k P'' = -q, P(0) = P'(0) = 0, for a piecewise linear q."""

    def __init__(self, line: Line, source: Profile) -> None:
        self.line, self.source = line, source

    def at(self, place: Number) -> tuple[Number, Number]:
        value = slope = ZERO
        for p, jump, bend in self.source.knots:
            if place > p:
                d = place - p
                value += jump * d**2 / 2 + bend * d**3 / 6
                slope += jump * d + bend * d**2 / 2
        return -value / self.line.conductivity, -slope / self.line.conductivity

    def integral(self) -> Number:
        L = self.line.length
        total = sum((j * (L - p) ** 3 / 6 + m * (L - p) ** 4 / 24 for p, j, m in self.source.knots), ZERO)
        return -total / self.line.conductivity


def steady(line: Line, source: Profile, place: Number, low_drive: Number, high_drive: Number) -> tuple[Number, Number]:
    """V and V' at a place for a source and end data (held value, inflow or ambient), both ends together."""
    if line.is_insulated:
        mean = (source.integral(line.length) + low_drive + high_drive) / line.length
        source = Profile((*source.knots, (ZERO, -mean, ZERO), (line.length, mean, ZERO)))
    particular = _Particular(line, source)
    level, gradient = _constants(line, source, particular, low_drive, high_drive)
    value, slope = particular.at(place)
    return value + level + gradient * place, slope + gradient


def _constants(
    line: Line, source: Profile, particular: _Particular, low_drive: Number, high_drive: Number
) -> tuple[Number, Number]:
    k = line.conductivity
    if line.is_endless:
        total = source.integral(line.length)
        if line.low == "N":
            # V = -(1/k) int max(z, z') q dz' - low_drive z / k, which vanishes far away when all is balanced.
            moment = sum((-j * p**2 / 2 + m * p**3 / 6 for p, j, m in source.knots), ZERO)
            return -moment / k, -low_drive / k
        gradient = total / k
        return (low_drive if line.low == "D" else low_drive + k * gradient / line.low_film), gradient
    L = line.length
    if line.is_insulated:
        gradient = -low_drive / k
        return -particular.integral() / L - gradient * L / 2, gradient
    end, end_slope = particular.at(L)
    rows = {
        "low": {
            "D": (ONE, ZERO, low_drive),
            "N": (ZERO, -k, low_drive),
            "R": (line.low_film, -k, line.low_film * low_drive),
        },
        "high": {
            "D": (ONE, L, high_drive - end),
            "N": (ZERO, k, high_drive - k * end_slope),
            "R": (
                line.high_film,
                line.high_film * L + k,
                line.high_film * (high_drive - end) - k * end_slope,
            ),
        },
    }
    a, b, r = rows["low"][line.low]
    c, d, s = rows["high"][line.high]
    determinant = a * d - b * c
    return (r * d - b * s) / determinant, (a * s - r * c) / determinant


NOTHING = Profile(((ZERO, ZERO, ZERO),))


def steady_profile(line: Line, source: Profile, place: Number) -> tuple[Number, Number]:
    """Time integral of the response to a profile, its constant part taken out on an insulated line."""
    return steady(line, source, place, ZERO, ZERO)


def steady_wall(line: Line, at_high: bool, place: Number) -> tuple[Number, Number]:
    """Time integral of the response to unit data at an end, without its constant part."""
    return steady(line, NOTHING, place, ZERO if at_high else ONE, ONE if at_high else ZERO)


def attenuated_held_wall(line: Line, at_high: bool, place: Number, rate: Number) -> tuple[Number, Number]:
    """Time integral of exp(-rate t) times the response to a unit held value: V and V'."""
    if rate == 0:
        return steady_wall(line, at_high, place)
    depth = line.length - place if at_high else place
    gamma = arithmetic.sqrt(rate / line.conductivity)
    sign = -1 if at_high else 1
    if line.is_endless:
        value = arithmetic.exp(-gamma * depth)
        return value, -sign * gamma * value
    end, film = (line.low, line.low_film) if at_high else (line.high, line.high_film)
    rest = gamma * (line.length - depth)
    c, s = arithmetic.cosh(rest), arithmetic.sinh(rest)
    C, S = arithmetic.cosh(gamma * line.length), arithmetic.sinh(gamma * line.length)
    if end == "D":
        return s / S, -sign * gamma * c / S
    if end == "N":
        return c / C, -sign * gamma * s / C
    H = film / line.conductivity
    bottom = gamma * C + H * S
    return (gamma * c + H * s) / bottom, -sign * gamma * (gamma * s + H * c) / bottom
