"""The eigenfunction series: the second, independent form of the same field, with a bound on what it leaves out.

Two lines give eigenfunctions, the third is solved along its axis for each pair of modes (separation of variables,
Carslaw and Jaeger 1959, chapters V and VI). A driven end sends exp(-gamma s) along the axis. Where the axis carries a
profile f instead, the answer is f / gamma^2 plus waves from the breaks of f; the first is f times a field of one
dimension fewer, which is treated the same way:

    u = sum over mn of c_m c_n phi_m phi_n W(z; gamma_mn) + f(z) [ sum over m of c_m phi_m W(y; gamma_m) + f(y) U(x) ]

Any order of the axes will do, and the one with the farthest breaks needs the fewest terms. A mode that does not
decay has no f / gamma^2; its share is the one-dimensional field whose mean is zero, and the sums stay consistent.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.lines import laplace
from service.core.lines.line import VALUE, Drive, Line, WallDrive, wall_distance
from service.core.lines.modes import eigen_integrals, modes_of
from service.core.lines.places import Places
from service.core.lines.stack import StackLine
from service.core.split import Part

FloatArray = NDArray[np.float64]

# Waves are summed until exp(-gamma distance) is below exp(-36) = 2e-16.
LAST_EXPONENT = 36.0

# More terms than this are not summed at one place; the time form stands alone there.
MOST_TERMS = 60_000

# Nor more than this many products of a term and a column of the part's profiles.
MOST_PRODUCTS = 4_000_000

ORDERS: tuple[tuple[int, int, int], ...] = ((0, 1, 2), (0, 2, 1), (1, 0, 2), (1, 2, 0), (2, 0, 1), (2, 1, 0))

# Rounding of one term relative to its size, and where f / gamma^2 and the waves cancel relative to that: there the
# error of gamma counts as well.
ROUNDING = 4e-15
CANCELLED = 4e-13

# A bound below this part of the value is good enough to look at no other order of the axes.
GOOD_ENOUGH = 1e-12


@dataclass(frozen=True)
class SeriesValue:
    """A part's field at one place. bound: on what was left out and on rounding. terms: how many were summed."""

    value: float
    bound: float
    terms: int


@dataclass(frozen=True)
class PartialSum:
    """The double series cut at `terms` modes along each of its two axes: its value and a bound on the rest.

    bound: infinite where no bound exists, on the driven face itself.
    """

    terms: int
    value: float
    bound: float


def summed(lines: Sequence[Line], part: Part, point: Sequence[float]) -> SeriesValue | None:
    """A part's field at a point by the order of axes that gives the best bound, or None if all take too many terms."""
    orders = [
        (_cost(lines, part, point, order), order)
        for order in ORDERS
        if all(_has_modes(lines[axis]) for axis in order[1:])
    ]
    best: SeriesValue | None = None
    for cost, order in sorted(orders):
        if math.isinf(cost):
            break
        found = _sum(lines, part, point, order)
        if best is None or found.bound < best.bound:
            best = found
        if best.bound <= GOOD_ENOUGH * abs(best.value):
            break
    return best


def reach(line: Line, drive: Drive, place: float) -> float:
    """Scaled distance from a place to the nearest break of what drives its line, infinite where there is none.

    A curved profile is not made of waves from its breaks; along it there is no distance that would end a series.
    """
    if isinstance(drive, WallDrive):
        return float(wall_distance(line, np.array([place]), high=drive.high)[0])
    if drive.is_curved:
        return 0.0
    knots, has_jump, has_kink = line.active_breaks(drive)
    active = has_jump | has_kink
    if not active.any():
        return math.inf
    return float(line.between(np.array(place), knots[active]).min())


def _has_modes(line: Line) -> bool:
    """Whether a line gives eigenfunctions here: it has two ends and is of one material."""
    return not (line.is_endless or isinstance(line, StackLine))


def _modes_needed(lines: Sequence[Line], axes: Sequence[int], distance: float) -> list[float]:
    if distance == 0.0:
        return [math.inf for _ in axes]
    return [lines[axis].extent * LAST_EXPONENT / distance / math.pi + 2 for axis in axes]


def _cost(lines: Sequence[Line], part: Part, point: Sequence[float], order: tuple[int, int, int]) -> float:
    """Terms an order of the axes takes at a place; infinite where that is more than is summed."""
    first = reach(lines[order[0]], part.drives[order[0]], point[order[0]])
    terms = math.prod(_modes_needed(lines, order[1:], first))
    if not isinstance(part.drives[order[0]], WallDrive):
        second = reach(lines[order[1]], part.drives[order[1]], point[order[1]])
        terms += math.prod(_modes_needed(lines, order[2:], second))
    return terms if terms <= MOST_TERMS and terms * part.columns <= MOST_PRODUCTS else math.inf


def _sum(lines: Sequence[Line], part: Part, point: Sequence[float], order: tuple[int, int, int]) -> SeriesValue:
    total, size, shares, terms, left_out = 0.0, 0.0, 0.0, 0, 0.0
    initial = np.ones(1)
    for depth in range(3):
        axis, rest = order[depth], order[depth + 1 :]
        drive, line = part.drives[axis], lines[axis]
        distance = reach(line, drive, point[axis])
        counts = [int(count) for count in _modes_needed(lines, rest, distance)]
        amplitudes, rates = _products(lines, part, point, rest, counts)
        if math.isinf(distance) and rates.size > 1:
            # Without breaks there are no waves; only a mode that does not decay has a share.
            amplitudes, rates = amplitudes[:1], rates[:1]
        waves = _waves(line, drive, point[axis], rates)
        contributions = (amplitudes * waves) * initial
        total += float(contributions.sum())
        size += float(np.abs(contributions).sum())
        shares += float(np.abs(amplitudes * initial).max(axis=1) @ _profile_share(line, drive, rates))
        terms += rates.size
        if rates.size > 1:
            left_out += math.exp(-LAST_EXPONENT) * rates.size * float(np.abs(amplitudes * waves).max())
        if isinstance(drive, WallDrive):
            break
        initial = initial * drive.at(np.array([point[axis]]))[0]
    return SeriesValue(total, ROUNDING * size + CANCELLED * shares + left_out, terms)


def _products(
    lines: Sequence[Line], part: Part, point: Sequence[float], axes: Sequence[int], counts: Sequence[int]
) -> tuple[FloatArray, FloatArray]:
    """Coefficients times eigenfunctions at the point for all pairs of modes, and their rates: (n, columns), (n,)."""
    amplitudes, rates = np.full((1, 1), part.factor), np.zeros(1)
    for axis, count in zip(axes, counts, strict=True):
        modes = modes_of(lines[axis], count)
        shapes = modes.at(np.array([point[axis]]), VALUE)[0]
        here = eigen_integrals(lines[axis], part.drives[axis], count) * shapes[:, None]
        amplitudes = (amplitudes[:, None, :] * here[None, :, :]).reshape(amplitudes.shape[0] * count, -1)
        rates = (rates[:, None] + modes.rates).ravel()
    return amplitudes, rates


def _waves(line: Line, drive: Drive, place: float, rates: FloatArray) -> FloatArray:
    """What travels along the axis at each rate: all of a driven end's answer, the waves of a profile, (n, columns)."""
    places = Places(np.array([place]), VALUE)
    gamma = np.sqrt(rates)
    if isinstance(drive, WallDrive):
        return laplace.wall_values(line, drive, place, gamma)[:, None]
    waves = np.empty((rates.size, drive.n_profiles))
    # Short waves by their closed form; where the line is short against them that cancels, and the whole answer is had.
    whole = gamma == 0.0 if line.is_endless else gamma * line.extent <= laplace.SMALL_LENGTH
    if whole.any():
        share = np.where(rates[whole] > 0, 1 / np.where(rates[whole] > 0, rates[whole], 1.0), 0.0)
        waves[whole] = laplace.transform(line, drive, places, gamma[whole])[0]
        waves[whole] -= share[:, None] * drive.at(places.low)
    if not whole.all():
        waves[~whole] = laplace.departure(line, drive, places, gamma[~whole])[0]
    return waves


def _profile_share(line: Line, drive: Drive, rates: FloatArray) -> FloatArray:
    """Size of f / gamma^2 and of the kinks' waves, whose rounding remains where they nearly cancel."""
    if isinstance(drive, WallDrive):
        return np.zeros_like(rates)
    decaying = rates > 0
    divisor = np.where(decaying, rates, 1.0)
    sizes = np.full_like(rates, np.abs(drive.left).max())
    if line.is_endless:
        sizes += float(np.abs(drive.slopes).max()) / line.scale / np.sqrt(divisor)
    return np.where(decaying, sizes / divisor, 0.0)


def partial_sums(
    lines: Sequence[Line], part: Part, point: Sequence[float], axial: int, terms: Sequence[int]
) -> list[PartialSum]:
    """A part's double series along one axis, cut at each of the given numbers of modes per axis.

    The whole answer of the axial line is in every term, as in a textbook's series. The bound on the rest uses that
    coefficients do not grow and that gamma >= (alpha_m + beta_n) / sqrt 2; a part driven by held values or ambients
    also stays within its data (maximum principle), so that the rest is at most these and the sum together.
    """
    axes = [axis for axis in range(3) if axis != axial]
    most = max(terms)
    amplitudes, rates = _products(lines, part, point, axes, (most, most))
    line, drive = lines[axial], part.drives[axial]
    waves = _waves(line, drive, point[axial], rates)
    if not isinstance(drive, WallDrive):
        share = np.where(rates > 0, 1 / np.where(rates > 0, rates, 1.0), 0.0)
        waves = waves + share[:, None] * drive.at(np.array([point[axial]]))
    table = (amplitudes * waves).sum(axis=1).reshape(most, most)
    sums = table.cumsum(axis=0).cumsum(axis=1)
    largest = _largest_value(lines, part)
    found = []
    for count in terms:
        value, tail = float(sums[count - 1, count - 1]), tail_bound(lines, part, point, axial, count)
        found.append(PartialSum(count, value, min(tail, largest + abs(value)) if math.isfinite(tail) else tail))
    return found


def _largest_value(lines: Sequence[Line], part: Part) -> float:
    """What the size of a part cannot exceed: its largest held value or ambient; infinite for inflows and sources."""
    if part.face_map is None or part.wall_axis is None:
        return math.inf
    line = lines[part.wall_axis]
    if (line.film_high if part.is_high else line.film_low) == 0.0:
        return math.inf
    return max(abs(part.face_map.lowest), abs(part.face_map.highest))


def tail_bound(lines: Sequence[Line], part: Part, point: Sequence[float], axial: int, count: int) -> float:
    """Bound on all terms with m or n at or beyond `count`."""
    line, drive = lines[axial], part.drives[axial]
    if not isinstance(drive, WallDrive):
        return math.inf
    distance = reach(line, drive, point[axial])
    axes = [axis for axis in range(3) if axis != axial]
    ratios = [math.exp(-math.pi / lines[axis].extent * distance / math.sqrt(2)) for axis in axes]
    if max(ratios) == 1.0:
        return math.inf
    # Modes are within [m pi, (m + 1) pi] / extent, so the slowest left out has at least this gamma.
    gamma = min(math.pi * count / lines[axis].extent for axis in axes)
    amplitude = _sent(line, drive, gamma)
    sizes = [_coefficient_bound(lines[axis], part.drives[axis]) for axis in axes]
    products = abs(part.factor) * float((sizes[0] * sizes[1]).sum())
    first, second = ratios
    sums = first**count / (1 - first) / (1 - second) + second**count / (1 - second) / (1 - first)
    return amplitude * products * sums


def _sent(line: Line, drive: WallDrive, gamma: float) -> float:
    """What the answer of a driven end, times exp(gamma s), cannot exceed at this gamma or a larger one."""
    if isinstance(line, StackLine):
        # The end itself, and a factor of 2 for every layer: what it passes on is below 2 exp(-y), contacts take more.
        end = line.length if drive.high else 0.0
        at_end = laplace.wall_values(line, drive, end, np.array([gamma]))[0]
        return float(at_end) * 2.0 ** len(line.thickness)
    film = line.film_high if drive.high else line.film_low
    amplitude = 2 * float(laplace.wall_amplitude(film, gamma))
    return amplitude if line.is_endless else amplitude / -math.expm1(-2 * gamma * line.extent)


def _coefficient_bound(line: Line, drive: Drive) -> FloatArray:
    """Bound on coefficient times eigenfunction of any mode: 2 times the mean of the profile's size, per column."""
    assert not isinstance(drive, WallDrive)
    knots = np.minimum(drive.knots, line.length)
    return np.asarray(2.0 * (np.diff(knots) @ drive.sizes) / line.length)
