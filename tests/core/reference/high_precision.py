"""Potential and gradient of a rectangular body to more than twenty digits, by the time integral.

    u = sum over driven faces and sources of  int_0^inf  X(t) Y(t) Z(t) dt,

each factor by images at short times and eigenfunctions at long ones, in 60-digit arithmetic; the integral
by the trapezoidal rule in log t (Trefethen and Weideman, SIAM Review 56, 2014). `series.py` computes the
same by double eigenfunction series; `test_reference.py` compares both and fields known in closed form.

What cannot be integrated as it stands is taken out first and added in closed form: the part that never
decays when both x and y are insulated, and on a held face the local value, without which the normal flux
has no finite integral.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise

from service.core import FACES, Face
from tests.core.reference.cases import Case, Cells, Data
from tests.core.reference.kernels import ONE, ZERO, Number, arithmetic
from tests.core.reference.lines import SMALL_EXPONENT, Line, Profile, ProfileResponse, WallResponse
from tests.core.reference.steady_line import attenuated_held_wall, steady_profile, steady_wall

# The error of the trapezoidal rule is about exp(-pi^2 / step) = 2e-27.
STEP = arithmetic.mpf("0.16")
# Below this part of the largest term a sum that shrinks like the root of time is cut off, some ten terms
# short.
NEGLIGIBLE = arithmetic.mpf("1e-24")
LIMIT_OF_NODES = 6000

Terms = list[tuple[tuple[int, int, int], Number]]
Response = tuple[list[Number], list[Number]]


class NoFiniteValue(Exception):
    """The integral does not settle: the flux asked for is infinite."""


@dataclass(frozen=True)
class Drive:
    """One driven face or source: a response on each axis and the coefficients of their products.

    axis: the driven axis, or None for a source.
    """

    axis: int | None
    factors: tuple[ProfileResponse | WallResponse, ...]
    terms: Terms

    @property
    def wall(self) -> WallResponse | None:
        """The response to the driven face, None for a source."""
        factor = None if self.axis is None else self.factors[self.axis]
        return factor if isinstance(factor, WallResponse) else None

    def local_factors(self) -> list[Response]:
        """Values and slopes of the data themselves, one along the driven axis."""
        return [f.local() if isinstance(f, ProfileResponse) else ([ONE], [ZERO]) for f in self.factors]

    def first_time(self) -> Number:
        """Before this time every response is a mere power of time."""
        scales = [d * d / f.line.conductivity for f in self.factors for d in f.distances() if d > 0]
        return min(scales) / (4 * SMALL_EXPONENT)


def make_line(case: Case, axis: int) -> Line:
    """The line of an axis with its end conditions."""
    endless = math.isinf(case.size[axis])
    low = case.walls[FACES[2 * axis]]
    high = None if endless else case.walls[FACES[2 * axis + 1]]
    number = arithmetic.mpf
    return Line(
        number(case.size[axis]),
        number(case.conductivity[axis]),
        low.kind,
        "" if high is None else high.kind,
        number(low.coefficient),
        ZERO if high is None else number(high.coefficient),
    )


def indicator(low: float, high: float) -> Profile:
    """One between two places, zero elsewhere; the upper place may be infinite."""
    knots = [(arithmetic.mpf(low), ONE, ZERO)]
    if math.isfinite(high):
        knots.append((arithmetic.mpf(high), -ONE, ZERO))
    return Profile(tuple(knots))


def hats(places: Sequence[float]) -> tuple[Profile, ...]:
    """Functions that are one at one place, zero at the others and linear between."""
    at = [arithmetic.mpf(place) for place in places]
    slopes = [ZERO, *(1 / (right - left) for left, right in pairwise(at)), ZERO]
    found = []
    for i, place in enumerate(at):
        rise, fall = slopes[i], slopes[i + 1]
        jump = ONE if i == 0 else (-ONE if i == len(at) - 1 else ZERO)
        knots = [(place, jump, -rise - fall)]
        if i > 0:
            knots.insert(0, (at[i - 1], ZERO, rise))
        if i < len(at) - 1:
            knots.append((at[i + 1], ZERO, fall))
        found.append(Profile(tuple(knots)))
    return tuple(found)


def split_data(
    data: Data, extent: tuple[float, float]
) -> tuple[tuple[Profile, ...], tuple[Profile, ...], dict[tuple[int, int], Number]]:
    """A map as sum of coefficient[i, j] * first[i](p) * second[j](q)."""
    if isinstance(data, (int, float)):
        return (indicator(0, extent[0]),), (indicator(0, extent[1]),), {(0, 0): arithmetic.mpf(data)}
    if isinstance(data, Cells):
        edges = [sorted({0.0, extent[k], *(p[i] for p in data.patches for i in (2 * k, 2 * k + 1))}) for k in (0, 1)]
        bases = [tuple(indicator(*pair) for pair in pairwise(edge)) for edge in edges]
        table = {}
        for i, p in enumerate(edges[0][:-1]):
            for j, q in enumerate(edges[1][:-1]):
                inside = [v for a, b, c, d, v in data.patches if a <= p < b and c <= q < d]
                table[i, j] = arithmetic.mpf(inside[0] if inside else data.background)
        return bases[0], bases[1], table
    table = {(i, j): arithmetic.mpf(v) for i, row in enumerate(data.table) for j, v in enumerate(row)}
    return hats(data.first), hats(data.second), table


class HighPrecision:
    """Reference solution of one case."""

    def __init__(self, case: Case) -> None:
        self.case = case
        self.lines = [make_line(case, axis) for axis in range(3)]
        # x and y insulated: a constant over the section never decays, and the line along z is treated on
        # its own.
        self.constant_section = self.lines[0].is_insulated and self.lines[1].is_insulated
        self._found: dict[tuple[float, ...], tuple[Number, list[Number]]] = {}

    def potential_and_flux(self, place: Sequence[float]) -> tuple[Number, list[Number]]:
        """u and the flux density (-kx u_x, -ky u_y, -kz u_z) at one place of the closed body."""
        key = tuple(float(c) for c in place)
        if key not in self._found:
            point = [arithmetic.mpf(c) for c in key]
            total = [ZERO] * 4
            for drive in self.drives(point):
                total = _add(total, self._integrate(drive))
            flux = [-line.conductivity * slope for line, slope in zip(self.lines, total[1:], strict=True)]
            self._found[key] = total[0], flux
        return self._found[key]

    def potential(self, place: Sequence[float]) -> Number:
        """u at one place."""
        return self.potential_and_flux(place)[0]

    def drives(self, point: list[Number]) -> list[Drive]:
        """Everything that drives the field, with its responses at a place."""
        found = [
            self._face_drive(face, self.case.walls[face].data, point)
            for face in self.case.faces
            if self.case.walls[face].data != 0.0
        ]
        for low, high, density in self.case.sources:
            responses = tuple(
                ProfileResponse(line, (indicator(low[axis], high[axis]),), point[axis])
                for axis, line in enumerate(self.lines)
            )
            found.append(Drive(None, responses, [((0, 0, 0), arithmetic.mpf(density))]))
        return found

    def _face_drive(self, face: Face, data: Data, point: list[Number]) -> Drive:
        axis = "xyz".index(face[0])
        first, second, table = split_data(data, self.case.extent(face))
        bases = [first, second]
        bases.insert(axis, ())
        factors = tuple(
            WallResponse(line, face.endswith("high"), point[index])
            if index == axis
            else ProfileResponse(line, bases[index], point[index])
            for index, line in enumerate(self.lines)
        )
        terms: Terms = []
        for pair, value in table.items():
            index = list(pair)
            index.insert(axis, 0)
            terms.append(((index[0], index[1], index[2]), value))
        return Drive(axis, factors, terms)

    def _integrate(self, drive: Drive) -> list[Number]:
        """u and its gradient from one drive."""
        if drive.wall is not None and drive.wall.end == "D":
            return self._integrate_held(drive, drive.wall)
        steady, constant = self._constant_part(drive)

        def integrand(time: Number) -> list[Number]:
            factors = [factor.at(time) for factor in drive.factors]
            found = contract(drive.terms, factors)
            for index, weight in enumerate(constant):
                found[0] -= weight * factors[2][0][index]
                found[3] -= weight * factors[2][1][index]
            return found

        if drive.wall is not None and drive.wall.depth == 0:
            steady = _add(steady, self._slope_on_own_face(drive, drive.wall, constant))
        return _add(steady, trapezoid(integrand, self._last_time(drive), drive.first_time(), steady))

    def _integrate_held(self, drive: Drive, wall: WallResponse) -> list[Number]:
        """As above for a held face: the local value, slowly attenuated, is integrated in closed form.

        With f the local value, m the constant part and mu a rate,
            P - m = (P - f) + (f - m) (1 - exp(-mu t)) + (f - m) exp(-mu t).
        """
        steady, constant = self._constant_part(drive)
        axis = drive.axis
        assert axis is not None
        unit: Response = ([ONE], [ZERO])
        local = contract(drive.terms, drive.local_factors())
        kept = list(local)
        if constant:
            kept[0] -= constant[0]
        rate = self._slowest_rate(axis)
        value, slope = attenuated_held_wall(wall.line, wall.at_high, wall.place, rate)
        steady = _add(steady, _along(kept, axis, value, slope))

        def integrand(time: Number) -> list[Number]:
            factors = [factor.at(time) for factor in drive.factors]
            z, dz = factors[axis][0][0], factors[axis][1][0]
            factors[axis] = unit
            across = contract(drive.terms, factors)
            grown = -arithmetic.expm1(-rate * time)
            across = [(p - f) + k * grown for p, f, k in zip(across, local, kept, strict=True)]
            return _along(across, axis, z, dz)

        last = SMALL_EXPONENT / (rate + wall.line.rate(0))
        beside = list(steady)
        if not wall.line.is_endless:
            # A slope far below value / length is nothing beside those of other drives.
            beside[1 + axis] = max(abs(beside[1 + axis]), abs(local[0]) / wall.line.length)
        return _add(steady, trapezoid(integrand, last, drive.first_time(), beside))

    def _slowest_rate(self, without: int | None) -> Number:
        """Slowest decay of the product of lines, beside the constant over the section."""
        rates = [ZERO if axis == without else line.rate(0) for axis, line in enumerate(self.lines)]
        if self.constant_section:
            return min(self.lines[0].rate(1), self.lines[1].rate(1)) + rates[2]
        return sum(rates, ZERO)

    def _last_time(self, drive: Drive) -> Number:
        return SMALL_EXPONENT / self._slowest_rate(None)

    def _constant_part(self, drive: Drive) -> tuple[list[Number], list[Number]]:
        """u and gradient of the part constant over the section; its weight on each z response."""
        if not self.constant_section:
            return [ZERO] * 4, []
        x, y, z = drive.factors
        weights = [ZERO] * len(z.profiles if isinstance(z, ProfileResponse) else (0,))
        for (i, j, k), coefficient in drive.terms:
            weights[k] += coefficient * x.constant_part[i] * y.constant_part[j]
        total = [ZERO] * 4
        for index, weight in enumerate(weights):
            if isinstance(z, WallResponse):
                value, slope = steady_wall(z.line, z.at_high, z.place)
            else:
                value, slope = steady_profile(z.line, z.profiles[index], z.place)
            total = _add(total, [weight * value, ZERO, ZERO, weight * slope])
        return total, weights

    def _slope_on_own_face(self, drive: Drive, wall: WallResponse, constant: list[Number]) -> list[Number]:
        """The slope that data make on their own face, which the integral misses exactly there."""
        axis = drive.axis
        assert axis is not None
        local = contract(drive.terms, drive.local_factors())[0]
        if constant and axis == 2:
            local -= constant[0]
        inward = -local * (wall.film if wall.end == "R" else ONE) / wall.line.conductivity
        found = [ZERO] * 4
        found[1 + axis] = -inward if wall.at_high else inward
        return found


def contract(terms: Terms, factors: Sequence[Response]) -> list[Number]:
    """Sum of products and its three slopes."""
    (x, dx), (y, dy), (z, dz) = factors
    found = [ZERO] * 4
    for (i, j, k), coefficient in terms:
        yz = coefficient * y[j] * z[k]
        found[0] += x[i] * yz
        found[1] += dx[i] * yz
        found[2] += coefficient * x[i] * dy[j] * z[k]
        found[3] += coefficient * x[i] * y[j] * dz[k]
    return found


def _along(across: Sequence[Number], axis: int, value: Number, slope: Number) -> list[Number]:
    """Product of a function of the other two axes (value and slopes) and one of this axis."""
    found = [part * value for part in across]
    found[1 + axis] = across[0] * slope
    return found


def _add(first: Sequence[Number], second: Sequence[Number]) -> list[Number]:
    return [a + b for a, b in zip(first, second, strict=True)]


def trapezoid(
    integrand: Callable[[Number], list[Number]], last: Number, first: Number, beside: Sequence[Number]
) -> list[Number]:
    """Integral of what is nothing after `last` and a mere power of time before `first`.

    beside: what the integrals are added to; terms that are negligible beside it end the sum.
    """
    total = [ZERO] * 4
    peaks = [abs(part) for part in beside]
    shrink = arithmetic.exp(-STEP)
    time = last
    quiet = 0
    for _ in range(LIMIT_OF_NODES):
        parts = [STEP * time * part for part in integrand(time)]
        total = _add(total, parts)
        peaks = [max(peak, abs(part)) for peak, part in zip(peaks, parts, strict=True)]
        small = all(abs(part) <= NEGLIGIBLE * peak for part, peak in zip(parts, peaks, strict=True))
        quiet = quiet + 1 if small and time < first else 0
        if quiet == 3:
            return total
        time *= shrink
    raise NoFiniteValue
