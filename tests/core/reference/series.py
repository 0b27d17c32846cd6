"""Potential and gradient by double eigenfunction series: the second way to the reference values.

    u = sum over m, n of  c_mn X_m(x) Y_n(y) w_mn(z),      k_z (w'' - gamma^2 w) + q = 0

(and the same with the axes exchanged). Converges like exp(-gamma d), d the distance from the driven face or
from the source along the axis that is not expanded, so it serves places well away from what drives them.
"""

from __future__ import annotations

from dataclasses import dataclass

from tests.core.reference.high_precision import Drive, HighPrecision
from tests.core.reference.kernels import ZERO, Number, arithmetic
from tests.core.reference.lines import Line, ProfileResponse, WallResponse
from tests.core.reference.steady_line import steady_profile, steady_wall

# exp(-53) is 1e-23.
LARGEST_EXPONENT = 53


@dataclass(frozen=True)
class _Axial:
    """Solutions of w'' = gamma^2 w that meet the condition at the low or at the high end."""

    line: Line
    gamma: Number

    def from_low(self, z: Number) -> tuple[Number, Number]:
        return self._from(self.line.low, self.line.low_film, z)

    def from_high(self, z: Number) -> tuple[Number, Number]:
        if self.line.is_endless:
            value = arithmetic.exp(-self.gamma * z)
            return value, -self.gamma * value
        value, slope = self._from(self.line.high, self.line.high_film, self.line.length - z)
        return value, -slope

    def _from(self, end: str, film: Number, depth: Number) -> tuple[Number, Number]:
        g = self.gamma
        c, s = arithmetic.cosh(g * depth), arithmetic.sinh(g * depth)
        if end == "D":
            return s, g * c
        H = ZERO if end == "N" else film / self.line.conductivity
        return c + H / g * s, g * s + H * c

    @property
    def wronskian(self) -> Number:
        (a, da), (b, db) = self.from_low(ZERO), self.from_high(ZERO)
        return da * b - a * db

    def wall(self, at_high: bool, z: Number) -> tuple[Number, Number]:
        """Response to unit data at an end."""
        line = self.line
        end, film = (line.high, line.high_film) if at_high else (line.low, line.low_film)
        value, slope = (self.from_high if at_high else self.from_low)(line.length if at_high else ZERO)
        strength = (-slope if at_high else slope) if end == "D" else value / line.conductivity
        if end == "R":
            strength *= film
        w, dw = (self.from_low if at_high else self.from_high)(z)
        return strength * w / self.wronskian, strength * dw / self.wronskian

    def slab(self, low: Number, high: Number, z: Number) -> tuple[Number, Number]:
        """Response to a unit source between two places, seen from outside."""
        above = z >= high
        near = self.from_low if above else self.from_high
        # int phi = (phi'(high) - phi'(low)) / gamma^2
        total = (near(high)[1] - near(low)[1]) / self.gamma**2
        w, dw = (self.from_high if above else self.from_low)(z)
        scale = total / (self.line.conductivity * self.wronskian)
        return scale * w, scale * dw


def by_series(reference: HighPrecision, place: tuple[float, float, float], axes: list[int]) -> list[Number]:
    """u and its gradient; axes: for each drive the axis along which it is not expanded.

    For a driven face that is its own axis; for a source one along which the place lies outside the source.
    """
    point = [arithmetic.mpf(c) for c in place]
    total = [ZERO] * 4
    for drive, axis in zip(reference.drives(point), axes, strict=True):
        total = [a + b for a, b in zip(total, _one_drive(drive, axis), strict=True)]
    return total


def _one_drive(drive: Drive, axis: int) -> list[Number]:
    first, second = (other for other in range(3) if other != axis)
    p, q, along = drive.factors[first], drive.factors[second], drive.factors[axis]
    assert isinstance(p, ProfileResponse)
    assert isinstance(q, ProfileResponse)
    table: dict[tuple[int, int], Number] = {}
    for index, coefficient in drive.terms:
        table[index[first], index[second]] = coefficient
    total = [ZERO] * 4
    for m in range(10_000):
        mode_p = p.line.mode(m)
        weights_p = [mode_p.projection(f, p.line.length) / mode_p.squared_norm for f in p.profiles]
        added = False
        for n in range(10_000):
            mode_q = q.line.mode(n)
            rate = p.line.rate(m) + q.line.rate(n)
            gamma = arithmetic.sqrt(rate / along.line.conductivity)
            if gamma * _gap(along) > LARGEST_EXPONENT:
                break
            added = True
            weights_q = [mode_q.projection(f, q.line.length) / mode_q.squared_norm for f in q.profiles]
            weight = sum((c * weights_p[i] * weights_q[j] for (i, j), c in table.items()), ZERO)
            (x, dx), (y, dy) = mode_p.at(p.place), mode_q.at(q.place)
            w, dw = _axial_response(along, gamma)
            total[0] += weight * x * y * w
            total[1 + first] += weight * dx * y * w
            total[1 + second] += weight * x * dy * w
            total[1 + axis] += weight * x * y * dw
        if not added:
            return total
    raise RuntimeError("the series does not converge here")


def _slab_of(along: ProfileResponse) -> tuple[Number, Number]:
    knots = along.profiles[0].knots
    return knots[0][0], knots[-1][0]


def _gap(along: ProfileResponse | WallResponse) -> Number:
    if isinstance(along, WallResponse):
        return along.depth
    low, high = _slab_of(along)
    return max(low - along.place, along.place - high)


def _axial_response(along: ProfileResponse | WallResponse, gamma: Number) -> tuple[Number, Number]:
    z = along.place
    if isinstance(along, WallResponse):
        if gamma == 0:
            return steady_wall(along.line, along.at_high, z)
        return _Axial(along.line, gamma).wall(along.at_high, z)
    if gamma == 0:
        return steady_profile(along.line, along.profiles[0], z)
    return _Axial(along.line, gamma).slab(*_slab_of(along), z)
