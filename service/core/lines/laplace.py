"""A line in the Laplace domain: U'' - gamma^2 U + f = 0, the integral over time of exp(-gamma^2 t) times its answer.

This is the axial factor of the eigenfunction series, with gamma^2 the decay rate of the two other lines, and the
closed form of what the time integral leaves out. A wave exp(-gamma s) meets each end with the reflection factor
R = (gamma - H) / (gamma + H); only decaying exponentials are formed. Where gamma times the length is small the
reflections nearly cancel, and the same solution is written with cosh and sinh of arguments below 1, all terms positive.
"""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from service.core.lines import stack_laplace
from service.core.lines.line import PRIMITIVE, SLOPE, VALUE, Drive, Line, Order, WallDrive, breaks_of, wall_distance
from service.core.lines.places import Places
from service.core.lines.stack import StackLine
from service.core.lines.steady import closed_line_wall, half_line_profile, half_line_wall
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]

# Below this gamma * length the hyperbolic form is used.
SMALL_LENGTH = 1.0

# Points of Gauss's rule that is exact to rounding for the answer over a length up to SMALL_LENGTH / gamma.
EXACT_POINTS = 12


def transform(line: Line, drive: Drive, places: Places, gamma: FloatArray) -> FloatArray:
    """The transformed answer, shape (n, n_gamma, n_profiles).

    gamma: >= 0, shape (n_gamma,), per scaled length. At 0 it is the steady one-dimensional solution. A line that
    loses nothing has none: it answers for the drive less its mean, counted from the mean of the answer. A half-line
    insulated at its end counts from its value far away, a line without ends from the mean of both.
    """
    if isinstance(line, StackLine):
        return stack_laplace.transform(line, drive, places, gamma**2).real
    if isinstance(drive, WallDrive):
        if places.high is None:
            return _wall(line, drive, places.low, gamma, places.order)
        return _wall_integrals(line, drive, places.low, places.high, gamma)
    return np.stack([_profile(line, drive, places, float(g)) for g in gamma], axis=1)


def _wall(line: Line, drive: WallDrive, coordinates: FloatArray, gamma: FloatArray, order: Order) -> FloatArray:
    columns = []
    for g in gamma:
        if line.is_endless or g * line.extent > SMALL_LENGTH:
            columns.append(_wall_by_waves(line, drive, coordinates, float(g), order))
        else:
            columns.append(_wall_by_hyperbolics(line, drive, coordinates, float(g), order))
    return np.stack(columns, axis=1)[:, :, None]


def _wall_integrals(line: Line, drive: WallDrive, low: FloatArray, high: FloatArray, gamma: FloatArray) -> FloatArray:
    """The answer integrated over intervals: by its antiderivative at the ends, which would cancel in an interval that
    is narrow against 1 / gamma; over that by quadrature, exact to rounding.
    """
    total = _wall(line, drive, high, gamma, PRIMITIVE) - _wall(line, drive, low, gamma, PRIMITIVE)
    widths = (high - low) * line.scale
    narrow = np.isfinite(widths)[:, None] & (widths[:, None] * gamma <= SMALL_LENGTH)
    which = np.flatnonzero(narrow.any(axis=1))
    if which.size:
        nodes, weights = np.polynomial.legendre.leggauss(EXACT_POINTS)
        half = 0.5 * (high - low)[which]
        places = (low[which, None] + half[:, None] * (1.0 + nodes)).ravel()
        values = _wall(line, drive, places, gamma, VALUE).reshape(which.size, EXACT_POINTS, gamma.size, 1)
        smooth = np.einsum("npgr,p->ngr", values, weights) * (half * line.scale)[:, None, None]
        total[which] = np.where(narrow[which, :, None], smooth, total[which])
    return total


def wall_values(line: Line, drive: WallDrive, place: float, gamma: FloatArray) -> FloatArray:
    """The transformed answer of a driven line at one place for many gamma, shape (n_gamma,)."""
    if isinstance(line, StackLine):
        return stack_laplace.transform(line, drive, Places(np.array([place]), VALUE), gamma**2)[0, :, 0].real
    values = np.empty_like(gamma)
    long = gamma > 0 if line.is_endless else gamma * line.extent > SMALL_LENGTH
    at = np.array([place])
    steady = gamma == 0.0
    if steady.any():
        values[steady] = _wall(line, drive, at, np.zeros(1), VALUE)[0, 0, 0]
    if not long.all():
        values[~long & ~steady] = _wall_by_hyperbolics(line, drive, at, gamma[~long & ~steady], VALUE)
    near, far = (line.film_high, line.film_low) if drive.high else (line.film_low, line.film_high)
    s, g = float(wall_distance(line, at, high=drive.high)[0]), gamma[long]
    answer = np.exp(-g * s)
    if not line.is_endless:
        back = reflection(far, g)
        echo = back * reflection(near, g) * np.exp(-2 * g * line.extent)
        answer = (answer + back * np.exp(-g * (2 * line.extent - s))) / (1 - echo)
    values[long] = wall_amplitude(near, g) * answer
    return values


def reflection(film: float, gamma: FloatArray | float) -> FloatArray:
    """R = (gamma - H) / (gamma + H): 1 for an insulated end, -1 for a held one."""
    if film == math.inf:
        return -np.ones_like(gamma)
    if film == 0.0:
        return np.ones_like(gamma)
    return np.asarray((gamma - film) / (gamma + film))


def wall_amplitude(film: float, gamma: FloatArray | float) -> FloatArray:
    """What a unit of an end's data sends into a half-line: 1 if held, H / (gamma + H) for a film, 1 / gamma inflow."""
    if film == math.inf:
        return np.ones_like(gamma)
    return np.asarray((film if film > 0.0 else 1.0) / (gamma + film))


def _wall_by_waves(line: Line, drive: WallDrive, coordinates: FloatArray, gamma: float, order: Order) -> FloatArray:
    near, far = (line.film_high, line.film_low) if drive.high else (line.film_low, line.film_high)
    s = wall_distance(line, coordinates, high=drive.high)
    amplitude = float(wall_amplitude(near, gamma)) if gamma > 0 or near > 0 else 0.0
    if gamma == 0.0:
        return half_line_wall(s, near, order)
    back, echo = np.zeros_like(s), 0.0
    if not line.is_endless:
        returned = float(reflection(far, gamma))
        back = returned * np.exp(-gamma * (2 * line.extent - s))
        echo = returned * float(reflection(near, gamma)) * math.exp(-2 * gamma * line.extent)
    forth = np.exp(-gamma * s)
    factor = amplitude / (1 - echo)
    inward = -1.0 if drive.high else 1.0
    if order == 0:
        return factor * (forth + back)
    if order == -1:
        return inward * factor * gamma * (back - forth)
    return inward * factor * (back - forth) / gamma


def _wall_by_hyperbolics(
    line: Line, drive: WallDrive, coordinates: FloatArray, gamma: float | FloatArray, order: Order
) -> FloatArray:
    """At one gamma for many places, or at many for one place."""
    near, far = (line.film_high, line.film_low) if drive.high else (line.film_low, line.film_high)
    if np.ndim(gamma) == 0 and gamma == 0.0 and line.keeps_its_mean:
        return closed_line_wall(line, drive, coordinates, order)
    # psi grows from the far end: psi' = H psi there; the answer is psi over what it does at the near end.
    d = wall_distance(line, coordinates, high=not drive.high)
    whole = np.array([line.extent])
    value = _psi(far, whole, gamma, VALUE)
    slope = _psi(far, whole, gamma, -1)
    factor: FloatArray
    if near == math.inf:
        factor = 1.0 / value
    elif near == 0.0:
        factor = 1.0 / slope
    else:
        factor = near / (slope + near * value)
    towards = 1.0 if drive.high else -1.0
    return factor * _psi(far, d, gamma, order) * (1.0 if order == 0 else towards)


def _psi(film: float, d: FloatArray, gamma: float | FloatArray, order: Order) -> FloatArray:
    """cosh(gamma d) + (H / gamma) sinh(gamma d), from an end; sinh(gamma d) / gamma from a held one."""
    y = gamma * d
    sinhc = np.where(y == 0, 1.0, np.sinh(y) / np.where(y == 0, 1.0, y))
    half = np.where(y == 0, 1.0, 2 * np.sinh(y / 2) / np.where(y == 0, 1.0, y))
    if order == 0:
        even, odd = np.cosh(y), d * sinhc
    elif order == -1:
        even, odd = gamma * np.sinh(y), np.cosh(y)
    else:
        # The integrals from 0 to d: sinh(y) / gamma and (cosh(y) - 1) / gamma^2.
        even, odd = d * sinhc, 0.5 * (d * half) ** 2
    if film == math.inf:
        return odd
    return even + film * odd


def _profile(line: Line, profiles: Profiles, places: Places, gamma: float) -> FloatArray:
    if gamma == 0.0 and line.is_endless:
        return half_line_profile(line, profiles, places)
    if line.is_endless or gamma * line.extent > SMALL_LENGTH:
        waves = departure(line, profiles, places, np.array([gamma]))[:, 0]
        return waves + places.profile(line, profiles) / gamma**2
    return _by_green_function(line, profiles, places, gamma)


def departure(line: Line, profiles: Profiles, places: Places, gamma: FloatArray) -> FloatArray:
    """The transformed answer less f / gamma^2: waves from the breaks, shape (n, n_gamma, n_profiles)."""
    if isinstance(line, StackLine):
        return stack_laplace.departure(line, profiles, places, gamma**2).real
    if places.high is None:
        return _waves(line, profiles, places.low, gamma, places.order)
    return _waves(line, profiles, places.high, gamma, PRIMITIVE) - _waves(line, profiles, places.low, gamma, PRIMITIVE)


def _waves(line: Line, profiles: Profiles, coordinates: FloatArray, gamma: FloatArray, order: Order) -> FloatArray:
    """Sum over breaks and images of exp(-gamma distance) times (jump / gamma + slope jump / gamma^2) / (2 gamma).

    A factor exp(-gamma s) changes by -gamma or 1 / -gamma from one order to the next where s grows with x, and by
    +gamma or 1 / gamma where it falls.
    """
    breaks = breaks_of(line, profiles)
    knots, jumps, slope_jumps = breaks.knots, breaks.jumps, breaks.slope_jumps
    g = gamma[None, None, :]
    low_distance = wall_distance(line, coordinates, high=False)[:, None, None]
    low_knot = (knots * line.scale)[None, :, None]
    difference = ((coordinates[:, None] - knots) * line.scale)[:, :, None]
    side = np.sign(difference)
    if line.has_low_end:
        side[:, 0] = 1.0
    if not line.is_endless:
        side[:, -1] = -1.0
    rising = (-g) ** -order if order else np.ones_like(g)
    falling = g**-order if order else np.ones_like(g)
    jump_part, slope_part = 1 / (2 * g * g), 1 / (2 * g**3)

    direct = np.exp(-g * np.abs(difference))
    turn = np.where(side > 0, rising, falling)
    with_jump = -side * direct * turn
    with_slope = direct * turn
    if order == PRIMITIVE:
        # The antiderivative runs on continuously through the break.
        with_jump = direct / g
        with_slope = -side * np.expm1(-g * np.abs(difference)) / g
    elif order == -1:
        # On a break the mean of both sides: the jump's slope is symmetric, the kink's cancels.
        with_jump = g * direct
        with_slope = -side * g * direct

    low_film, high_film = line.film_low, line.film_high
    reflected_low = reflection(low_film, g)
    if line.is_endless and line.has_low_end:
        from_low = reflected_low * np.exp(-g * (low_distance + low_knot)) * rising
        with_jump = with_jump + from_low
        with_slope = with_slope + from_low
    elif not line.is_endless:
        high_distance = wall_distance(line, coordinates, high=True)[:, None, None]
        high_knot = ((line.length - knots) * line.scale)[None, :, None]
        reflected_high = reflection(high_film, g)
        both = reflected_low * reflected_high
        echo = 1 - both * np.exp(-2 * g * line.extent)
        # The last wave to reach x comes from the low end (grows with x) or from the high end.
        last_low = rising * np.exp(-g * low_distance) / echo
        last_high = falling * np.exp(-g * high_distance) / echo
        first_low, first_high = np.exp(-g * low_knot), np.exp(-g * high_knot)
        across = np.exp(-g * line.extent)
        with_jump = with_jump + last_low * (reflected_low * first_low - both * across * first_high)
        with_jump = with_jump + last_high * (both * across * first_low - reflected_high * first_high)
        with_slope = with_slope + last_low * (reflected_low * first_low + both * across * first_high)
        with_slope = with_slope + last_high * (both * across * first_low + reflected_high * first_high)
    total = np.einsum("pbg,br->pgr", with_jump * jump_part, jumps)
    if slope_jumps.any():
        total += np.einsum("pbg,br->pgr", with_slope * slope_part, slope_jumps)
    return total


def _by_green_function(line: Line, profiles: Profiles, places: Places, gamma: float) -> FloatArray:
    """Quadrature of Green's function times the profile: exact to rounding, since gamma times the length is below 1."""
    nodes, weights = np.polynomial.legendre.leggauss(EXACT_POINTS)
    knots = np.minimum(profiles.knots, line.length)
    if places.high is not None:
        middle, half = 0.5 * (places.high + places.low), 0.5 * (places.high - places.low)
        total = np.zeros((places.low.size, profiles.n_profiles))
        # A smooth answer between knots; a fine rule on each interval, split where the profile breaks.
        for index in range(places.low.size):
            inside = knots[(knots > places.low[index]) & (knots < places.high[index])]
            cuts = np.concatenate([[places.low[index]], inside, [places.high[index]]])
            for start, stop in pairwise(cuts):
                middle, half = 0.5 * (start + stop), 0.5 * (stop - start)
                at = _by_green_function(line, profiles, Places(middle + half * nodes, VALUE), gamma)
                total[index] += (weights * half * line.scale) @ at
        return total
    total = np.zeros((places.low.size, profiles.n_profiles))
    x = places.low[:, None]
    for piece in range(knots.size - 1):
        split = np.clip(x, knots[piece], knots[piece + 1])
        for start, stop in ((np.full_like(x, knots[piece]), split), (split, np.full_like(x, knots[piece + 1]))):
            at = 0.5 * (start + stop) + 0.5 * (stop - start) * nodes
            green = _green(line, x, at, gamma, places.order)
            weight = green * (0.5 * (stop - start) * line.scale * weights)
            offset = at - profiles.knots[piece]
            total += weight.sum(axis=1)[:, None] * profiles.left[piece]
            total += (weight * offset).sum(axis=1)[:, None] * profiles.slopes[piece]
    return total


def _green(line: Line, x: FloatArray, source: FloatArray, gamma: float, order: Order) -> FloatArray:
    if gamma == 0.0 and line.keeps_its_mean:
        # l / 3 - max(x, x') + (x^2 + x'^2) / 2l, whose mean is zero
        length, here, there = line.extent, x * line.scale, source * line.scale
        if order == -1:
            return here / length - np.where(here >= there, 1.0, 0.0)
        return length / 3 - np.maximum(here, there) + (here * here + there * there) / (2 * length)

    def low(place: FloatArray, n: Order) -> FloatArray:
        return _psi(line.film_low, place * line.scale, gamma, n)

    def high(place: FloatArray, n: Order) -> FloatArray:
        return _psi(line.film_high, (line.length - place) * line.scale, gamma, n)

    end = np.array([line.length])
    held = line.film_high == math.inf
    wronskian = low(end, VALUE) if held else low(end, SLOPE) + line.film_high * low(end, VALUE)
    above = low(source, VALUE) * (high(x, VALUE) if order == 0 else -high(x, SLOPE))
    below = high(source, VALUE) * low(x, order)
    return np.where(x >= source, above, below) / wronskian
