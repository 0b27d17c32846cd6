"""The line of a stack in the Laplace domain: what ends, sources and profiles send through its layers.

A layer is a piece of a transmission line with the admittance Y = sqrt(k c s) and the propagation q = sqrt(c s / k)
(Carslaw and Jaeger 1959, sections 3.7 and 15.9). What an end or a source sends is passed on from layer to layer by
factors that are all sums of numbers in one half-plane, so that nothing cancels however thin a layer is. Only decaying
exponentials are formed.

A load is what a layer meets at its end, written as a pair (p, m): the field there is p cosh + m sinh of the distance
from that end. p = 1, m = Y_load / Y, but p = 0, m = 1 at a held end.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.lines import stack_at_rest
from service.core.lines.line import SLOPE, VALUE, Drive, Order, WallDrive
from service.core.lines.places import Places
from service.core.lines.stack import Pieces, StackLine, pieces_of
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]
# Real or complex: the same formulas serve the series and the inversion.
Array = NDArray[np.inexact]

# In place of s = 0: so small, in terms of the slowest rate, that the answer is the steady one to rounding.
AT_REST = 1e-24


@dataclass(frozen=True)
class _Load:
    """What a layer meets at its end: the field there is p cosh + m sinh of the distance from that end."""

    p: Array | float
    m: Array | float

    def value(self, plus: Array, minus: Array) -> Array:
        """2 exp(-y) (p cosh y + m sinh y), from 1 + exp(-2y) and 1 - exp(-2y)."""
        return self.p * plus + self.m * minus

    def slope(self, plus: Array, minus: Array) -> Array:
        """2 exp(-y) (p sinh y + m cosh y)."""
        return self.p * minus + self.m * plus

    def run(self, y: Array) -> Array:
        """2 exp(-y) times the integral of the field up to y: p sinh y + m (cosh y - 1)."""
        return self.p * -np.expm1(-2 * y) + self.m * np.expm1(-y) ** 2


def _plus_minus(y: Array) -> tuple[Array, Array]:
    """1 + exp(-2 y) and 1 - exp(-2 y)."""
    minus = -np.expm1(-2 * y)
    return 2 - minus, minus


class _Upward:
    """What goes up through a stack, for many s at once."""

    def __init__(self, line: StackLine, s: Array) -> None:
        k, c = np.array(line.conductivity)[:, None], np.array(line.capacity)[:, None]
        root, n = np.sqrt(s), len(line.thickness)
        self.s, self.capacity, self.thickness = s, line.capacity, line.thickness
        self.q, self.admittance = np.sqrt(c / k) * root, np.sqrt(k * c) * root
        self.loads: list[_Load] = [_Load(0.0, 1.0)] * n
        # Of the whole of each layer: 1 + and 1 - exp(-2 y), and the load's field over it.
        self.across: list[tuple[Array, Array]] = [(root, root)] * n
        self.whole: list[Array] = [root] * n
        # seen: the admittance into a layer from its bottom. passed: the field on its top for 1 at its bottom. beyond:
        # the field just above the contact on its top for 1 just below it.
        self.seen: list[Array] = [root] * n
        self.passed: list[Array] = [root] * n
        self.beyond: list[Array | float] = [1.0] * n
        for j in reversed(range(n)):
            if j < n - 1:
                contact, met = line.contacts[j], self.seen[j + 1]
                if contact < math.inf:
                    met = 1 / (1 / self.seen[j + 1] + 1 / contact)
                    self.beyond[j] = met / self.seen[j + 1]
                self.loads[j] = _Load(1.0, met / self.admittance[j])
            elif line.film_high < math.inf:
                self.loads[j] = _Load(1.0, line.film_high / self.admittance[j])
            y = self.q[j] * line.thickness[j]
            self.across[j] = _plus_minus(y)
            self.whole[j] = self.loads[j].value(*self.across[j])
            self.seen[j] = self.admittance[j] * self.loads[j].slope(*self.across[j]) / self.whole[j]
            self.passed[j] = 2 * self.loads[j].p * np.exp(-y) / self.whole[j]

    def inside(self, j: int, below: float, above: float, width: float, order: Order) -> Array:
        """The field in layer j (its flow k Z', its integral) for 1 at the bottom of the layer."""
        q, load = self.q[j], self.loads[j]
        come, rest = np.exp(-q * below) / self.whole[j], _plus_minus(q * above)
        if order == VALUE:
            return come * load.value(*rest)
        if order == SLOPE:
            return -self.admittance[j] * come * load.slope(*rest)
        value, slope = load.value(*rest), load.slope(*rest)
        y = q * width
        return come * (value * -np.expm1(-2 * y) + slope * np.expm1(-y) ** 2) / (2 * q)

    def generated(self, j: int, down: _Load, below: float, above: float, width: float, order: Order) -> Array:
        """The field in layer j that holds a unit profile, with the load that it meets at its bottom.

        Green's function integrated over the layer, C_b [sinh + a (cosh - 1)] + C_a [sinh + b (cosh - 1)] over the
        Wronskian: every term is positive for positive s.
        """
        q, up = self.q[j], self.loads[j]
        plus, minus = self.across[j]
        whole = 2 * self.s * ((down.m * up.p + down.p * up.m) * plus + (down.p * up.p + down.m * up.m) * minus)

        def value(y: float, z: float) -> Array:
            from_above = down.value(*_plus_minus(q * y)) * up.run(q * z)
            return (up.value(*_plus_minus(q * z)) * down.run(q * y) + from_above) / whole

        def flow(y: float, z: float) -> Array:
            # What the derivative leaves of the products: m p sinh z - p m sinh y + m m (cosh z - cosh y).
            rises = -np.exp(-q * y) * np.expm1(-2 * q * z) * down.m * up.p
            falls = -np.exp(-q * z) * np.expm1(-2 * q * y) * down.p * up.m
            nearer, farther = min(y, z), max(y, z)
            apart = np.exp(-q * nearer) * np.expm1(-q * (farther - nearer)) * np.expm1(-q * (y + z)) * down.m * up.m
            return 2 * self.admittance[j] * (rises - falls + (apart if y < z else -apart)) / whole

        if order == VALUE:
            return value(below, above)
        if order == SLOPE:
            return flow(below, above)
        # Where a wave fades within the interval from its balance, k Z'' - c s Z + c = 0; the field is smooth elsewhere.
        gain = flow(below + width, above) - flow(below, above + width)
        nodes, weights = np.polynomial.legendre.leggauss(12)
        shares = 0.5 * (1 + nodes) * width
        smooth = sum(
            (0.5 * width * weight * value(below + share, above + width - share))
            for weight, share in zip(weights, shares, strict=True)
        )
        fades = np.abs(q) * width > 3.0
        return np.where(fades, (width + gain / self.capacity[j]) / self.s, smooth)


def transform(line: StackLine, drive: Drive, places: Places, s: Array) -> Array:
    """The answer in the Laplace domain, shape (n, n_s, n_columns). s: real and >= 0, or complex off the negative axis.

    Profiles have to be constant between their knots. At s = 0 a line that loses nothing answers for the drive less
    its mean, counted from the mean of the answer.
    """
    line = line if isinstance(drive, WallDrive) else line.divided(drive.knots)
    at_rest = s == 0
    s = np.where(at_rest, AT_REST * line.slow_rates[1], s)
    answer = _moving(line, drive, places, s)[0]
    if line.keeps_its_mean and at_rest.any():
        answer[:, at_rest] = stack_at_rest.answer(line, drive, pieces_of(line, places), places.low.size)[:, None, :]
    return answer


def with_sizes(
    line: StackLine, drive: Drive, places: Places, s: Array, *, less_profile: bool = False
) -> tuple[Array, FloatArray]:
    """The transform, or the departure, and the sum of sizes of what it was summed from, both (n, n_s, n_columns)."""
    if isinstance(drive, WallDrive):
        return _moving(line, drive, places, s)
    return (_departing if less_profile else _moving)(line.divided(drive.knots), drive, places, s)


def _moving(line: StackLine, drive: Drive, places: Places, s: Array) -> tuple[Array, FloatArray]:
    """The same for s > 0, of a line that is divided at the knots of the drive."""
    if isinstance(drive, WallDrive):
        only = _of_end(line, drive, pieces_of(line, places), places.low.size, s)
        return only, np.abs(only)
    values, pieces, n = line.held_by_layers(drive), pieces_of(line, places), len(line.thickness)
    up, down = _Upward(line, s), _Upward(line.mirrored(), s)
    fields = _Fields(up, down, pieces, places.low.size, drive.n_profiles)
    for j in map(int, np.flatnonzero(values.any(axis=1))):
        below, thickness = down.loads[n - 1 - j], line.thickness[j]
        for number in pieces.within(j):
            place = pieces.below[number], pieces.above[number], pieces.width[number], places.order
            fields.add(number, up.generated(j, below, *place), values[j])
        fields.rise(j + 1, up.generated(j, below, thickness, 0.0, 0.0, VALUE) * up.beyond[j], values[j])
        fields.fall(j - 1, up.generated(j, below, 0.0, thickness, 0.0, VALUE) * down.beyond[n - 1 - j], values[j])
    return fields.total, fields.sizes


def departure(line: StackLine, profiles: Profiles, places: Places, s: Array) -> Array:
    """The transformed answer less profile / s: what the borders send out, shape (n, n_s, n_profiles)."""
    return _departing(line.divided(profiles.knots), profiles, places, s)[0]


def _departing(line: StackLine, profiles: Profiles, places: Places, s: Array) -> tuple[Array, FloatArray]:
    values, pieces, n = line.held_by_layers(profiles), pieces_of(line, places), len(line.thickness)
    up, down = _Upward(line, s), _Upward(line.mirrored(), s)
    fields = _Fields(up, down, pieces, places.low.size, profiles.n_profiles)
    if line.film_low > 0:
        fields.rise(0, -_taken_in(line.film_low, up.seen[0]) / s, values[0])
    if line.film_high > 0:
        fields.fall(n - 1, -_taken_in(line.film_high, down.seen[0]) / s, values[-1])
    for border in range(1, n):
        jump = values[border] - values[border - 1]
        if jump.any():
            above, below = up.seen[border], down.seen[n - border]
            flow = -1 / s / (1 / above + 1 / below + 1 / line.contacts[border - 1])
            fields.rise(border, flow / above, jump)
            fields.fall(border - 1, -flow / below, jump)
    return fields.total, fields.sizes


class _Fields:
    """Sums up what goes up and down through a stack, and the sizes of it, to which rounding refers."""

    def __init__(self, up: _Upward, down: _Upward, pieces: Pieces, n_places: int, n_columns: int) -> None:
        self.up, self.down, self.pieces = up, down, pieces
        self.n_layers = len(up.thickness)
        self.mirrored = pieces.upside_down(self.n_layers)
        self.total = np.zeros((n_places, up.s.size, n_columns), dtype=up.s.dtype)
        self.sizes = np.zeros(self.total.shape)

    def add(self, number: int, values: Array, columns: FloatArray) -> None:
        """Add values at a piece, times each column."""
        self.total[self.pieces.index[number]] += values[:, None] * columns
        self.sizes[self.pieces.index[number]] += np.abs(values)[:, None] * np.abs(columns)

    def rise(self, layer: int, start: Array, columns: FloatArray) -> None:
        """Add what goes up from the bottom of a layer, where the field is `start`."""
        self._follow(self.up, self.pieces, layer, start, columns)

    def fall(self, layer: int, start: Array, columns: FloatArray) -> None:
        """Add what goes down from the top of a layer, where the field is `start`."""
        sign = -1.0 if self.pieces.order == SLOPE else 1.0
        self._follow(self.down, self.mirrored, self.n_layers - 1 - layer, start, sign * columns)

    def _follow(self, way: _Upward, pieces: Pieces, first: int, start: Array, columns: FloatArray) -> None:
        for j in range(first, int(pieces.layer.max(initial=-1)) + 1):
            for number in pieces.within(j):
                place = pieces.below[number], pieces.above[number], pieces.width[number], pieces.order
                self.add(number, start * way.inside(j, *place), columns)
            start = start * way.passed[j] * way.beyond[j]


def _of_end(line: StackLine, drive: WallDrive, pieces: Pieces, n_places: int, s: Array) -> Array:
    """The answer to a unit of an end's data."""
    up, down = _Upward(line, s), _Upward(line.mirrored(), s)
    fields = _Fields(up, down, pieces, n_places, 1)
    film, seen = (line.film_high, down.seen[0]) if drive.high else (line.film_low, up.seen[0])
    start = 1 / seen if film == 0.0 else _taken_in(film, seen) * np.ones_like(s)
    if drive.high:
        fields.fall(fields.n_layers - 1, start, np.ones(1))
    else:
        fields.rise(0, start, np.ones(1))
    return fields.total


def _taken_in(film: float, seen: Array) -> Array | float:
    """The field an end takes on for a unit of its held value or ambient."""
    return 1.0 if film == math.inf else film / (film + seen)
