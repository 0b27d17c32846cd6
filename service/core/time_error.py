"""How far the trapezoidal rule and rounding may take the time integral from the field.

The rule in s = ln t errs by the integrand on a contour shifted by i d into the sector in which it is analytic
(Trefethen and Weideman, SIAM Review 56, 2014, theorem 5.1). There a front is as wide as it is a factor 1 / sin(ANGLE)
later, and a mode has decayed as little as it has that much earlier.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core.lines.afar import Afar, seen_from_afar
from service.core.lines.images import LATEST, NARROW, narrow_from
from service.core.lines.kernels import ARRIVAL
from service.core.lines.line import Drive, Line, WallDrive, breaks_of
from service.core.lines.modes import MODE_COUNT, eigen_integrals, modes_of
from service.core.lines.places import Places
from service.core.profiles import Profiles
from service.core.time_integral import Factors, Integral, Product

FloatArray = NDArray[np.float64]

# Angle kept between the contour shifted by i (pi / 2 - ANGLE) and the edge of the sector, in the error bound; near
# the best for steps around 0.3.
ANGLE = 0.12

# Steps in ln t outside this range are not taken: coarser saves little, finer is below rounding.
COARSEST_STEP, FINEST_STEP = 0.4, 0.2

# Antiderivatives of what breaks send out are exact to this part of ROUNDING, a few roundings.
BY_ENDS = 1 / 16

# Rounding in a product of three factors, relative to what their lines carry: special functions, sums over breaks.
ROUNDING = 8e-15


def step_error(step: float, power: float = 2.5) -> float:
    """Relative error of the trapezoidal rule in ln t, on the integral of absolute values.

    On the contour shifted by i d, d = pi / 2 - ANGLE, a kernel w^p exp(-w^2) t^(-q) with w = distance / 2 sqrt t is
    (1 / sin ANGLE)^(p / 2 + q) times what it is at the time t / sin(ANGLE): 1/2 for each of three lines that carry
    a profile, 1 more for a driven end (q = 1, p = 1), 1 more again for its slope (q = 3/2, p = 2). The rule's error
    is 2 / (exp(2 pi d / step) - 1) times the integral on that contour.
    """
    shift = math.pi / 2 - ANGLE
    return 2 * math.sin(ANGLE) ** -power / math.expm1(2 * math.pi * shift / step)


def step_for(relative_error: float) -> float:
    """The coarsest step whose error is below the one given, within the range worth taking."""
    shift = math.pi / 2 - ANGLE
    step = 2 * math.pi * shift / math.log1p(2 * math.sin(ANGLE) ** -2.5 / max(relative_error, 1e-30))
    return min(max(step, FINEST_STEP), COARSEST_STEP)


def bound_everywhere(integral: Integral) -> float:
    """One error bound for the values at all places, less sharp than the others and quick.

    Rounding refers to the largest jump of a profile all along, which is at least what its line carries.
    """
    jumps = [
        _most_carried(line, drive, places, integral.times)
        for line, drive, places in zip(integral.lines, integral.part.drives, integral.places, strict=True)
    ]
    carried = [
        jump if own is None else own.max(axis=0, keepdims=True)
        for jump, own in zip(jumps, integral.carried, strict=True)
    ]
    by_rule = by_rounding = 0.0
    for product in integral.products:
        most = [np.abs(factor).max(axis=0, keepdims=True) for factor in product.factors]
        if product.weights.size > 1:
            # All three in one go: the work is in the calls, not in the numbers.
            columns = np.cumsum([size.shape[2] for size in most])[:2]
            shape = (1, product.weights.size)
            same = [np.broadcast_to(size, (*shape, size.shape[2])) for size in most]
            most = np.split(_widened(np.concatenate(same, axis=2), integral.step), columns, axis=2)
        x, y, z = most
        by_rule += float(_weigh(x * y * z, product.weights)[0])
        if product.weights.size > 1:
            most = _at_least(most, carried, product.weights.size)
        x, y, z = most
        by_rounding += float(_weigh(x * y * z, product.weights)[0])
    return _rule_error(integral) * by_rule + ROUNDING * by_rounding


def bound_on_grid(integral: Integral) -> Factors:
    """Error bounds for each coordinate of a grid, shape (n,) each; each of the three holds, so the least does."""
    bounds = [np.zeros(factor.shape[0]) for factor in integral.products[0].factors]
    relative = _rule_error(integral)
    carried = [own.max(axis=0, keepdims=True) for own in _carried(integral)]
    for product in integral.products:
        sizes = [_widened(np.abs(factor), integral.step) for factor in product.factors]
        most = [size.max(axis=0, keepdims=True) for size in sizes]
        rounding = ROUNDING * float(_rounded(carried, product, most)[0])
        for axis in range(3):
            others = most[(axis + 1) % 3] * most[(axis + 2) % 3]
            bounds[axis] += relative * _weigh(sizes[axis] * others, product.weights) + rounding
    return bounds[0], bounds[1], bounds[2]


def bound_at_points(integral: Integral) -> FloatArray:
    """Error bound at each point, shape (n,)."""
    total = np.zeros(())
    relative, carried = _rule_error(integral), _carried(integral)
    for product in integral.products:
        sizes = [_widened(np.abs(factor), integral.step) for factor in product.factors]
        total = total + relative * _weigh(sizes[0] * sizes[1] * sizes[2], product.weights)
        total = total + ROUNDING * _rounded(carried, product, sizes)
    return total


def _rule_error(integral: Integral) -> float:
    wall = integral.part.wall_axis
    if wall is None:
        return step_error(integral.step, 1.5)
    return step_error(integral.step, 3.5 if integral.places[wall].order == -1 else 2.5)


def _at_least(sizes: Sequence[FloatArray], carried: Sequence[FloatArray], count: int) -> list[FloatArray]:
    """Sizes, or what was carried at the first `count` nodes where that is more."""
    some = [least[:, :count] if least.ndim == 3 else least for least in carried]
    return [np.maximum(size, least) for size, least in zip(sizes, some, strict=True)]


def _rounded(carried: Sequence[FloatArray], product: Product, sizes: Sequence[FloatArray]) -> FloatArray:
    """Sum over nodes of what rounding refers to: a factor's own size, or what its modes carry where they cancel."""
    if product.weights.size > 1:
        sizes = _at_least(sizes, carried, product.weights.size)
    return _weigh(sizes[0] * sizes[1] * sizes[2], product.weights)


def _carried(integral: Integral) -> Factors:
    """For each axis what rounding in its factor refers to at each node, shape (1 or n, n_nodes, n_columns)."""
    x, y, z = (
        _carried_by(line, drive, places, integral.times) if own is None else own
        for line, drive, places, own in zip(
            integral.lines, integral.part.drives, integral.places, integral.carried, strict=True
        )
    )
    return x, y, z


def _carried_by(line: Line, drive: Drive, places: Places, times: FloatArray) -> FloatArray:
    """Size of what a line's answers are summed from where it cancels, shape (1, n_times, n_columns), else 0.

    Images cancel once the fronts from both ends of a piece of the profile overlap, modes whenever they are used.
    """
    late = times > LATEST * line.extent**2
    if isinstance(drive, WallDrive):
        sizes = np.zeros((1, times.size, 1))
    else:
        sizes = _carried_by_images(line, drive, places, times)
    if late.any():
        sizes[0, late] = _carried_by_modes(line, drive, places, times[late])
    return sizes


def _most_carried(line: Line, drive: Drive, places: Places, times: FloatArray) -> FloatArray:
    """At least what a line's answers are summed from, quickly had."""
    if isinstance(drive, WallDrive):
        return np.zeros(1)
    return _carried_by_images(line, drive, places, times) if line.is_endless else line.largest_jump(drive)


def _carried_by_images(line: Line, profiles: Profiles, places: Places, times: FloatArray) -> FloatArray:
    if profiles.is_curved:
        return _carried_by_curves(line, profiles, places, times)
    breaks = breaks_of(line, profiles)
    sizes = np.zeros((1, times.size, profiles.n_profiles))
    narrowest = profiles.narrowest * line.scale
    if narrowest == math.inf:
        return sizes
    root_time = np.sqrt(times)[:, None]
    # The breaks cancel down to this part of their jumps; a narrower piece is summed from its inside.
    left = np.minimum(1.0, narrow_from(line, profiles) / root_time) / (4 * NARROW)
    size = np.abs(breaks.jumps).max(axis=0) + root_time * np.abs(breaks.slope_jumps).max(axis=0)
    per_length = 1 / root_time if places.order == -1 else np.ones_like(root_time)
    seen = seen_from_afar(line, profiles) if line.is_endless else None
    if places.high is not None:
        widths = np.full_like(root_time, float((places.high - places.low).max()) * line.scale)
        if seen is not None:
            # Nothing is there beyond what fronts have reached.
            widths = np.minimum(widths, seen.width + 2 * ARRIVAL * root_time)
        per_length = per_length * widths
    overlap = root_time[:, 0] > math.sqrt(LATEST) * narrowest
    sizes[0, overlap] = (size * left * per_length)[overlap]
    if places.high is not None:
        # The integral over a wide interval is the difference of antiderivatives at its ends.
        wide = root_time[:, 0] < float((places.high - places.low).max()) * line.scale
        sizes[0, wide] = np.maximum(sizes[0], size * root_time * BY_ENDS)[wide]
    if seen is not None:
        late = root_time[:, 0] >= seen.root_time
        step = np.abs(seen.step.left).max(axis=0) / (4 * NARROW)
        amount = np.abs(seen.amounts).sum(axis=0) / root_time
        if line.film_low > 0.0:
            # An end that is held or has a film takes up its share, which falls with the square of all distances.
            amount = amount * np.minimum(1.0, _depth(line, seen, places) / root_time) ** (
                1 if places.order == -1 else 2
            )
        sizes[0, late] = ((amount + step) * per_length)[late]
    return sizes


def _depth(line: Line, seen: Afar, places: Places) -> float:
    """Scaled distance from an end that takes up flow, and behind a film as much again as that is worth."""
    ends = np.concatenate([places.low, seen.at] if places.high is None else [places.low, places.high, seen.at])
    return float(ends.max()) * line.scale + (1 / line.film_low if line.film_low < math.inf else 0.0)


def _carried_by_curves(line: Line, profiles: Profiles, places: Places, times: FloatArray) -> FloatArray:
    """Of curved pieces: the rounding of their slopes where breaks cancel, all of the profile once they are narrow."""
    root_time = np.sqrt(times)[:, None]
    size = profiles.sizes.max(axis=0) * np.minimum(1.0, root_time / (profiles.narrowest * line.scale))
    if places.high is not None:
        return np.array([size * float((places.high - places.low).max()) * line.scale])
    return np.array([size / root_time if places.order == -1 else size])


def _carried_by_modes(line: Line, drive: Drive, places: Places, times: FloatArray) -> FloatArray:
    modes = modes_of(line, MODE_COUNT)
    strengths = np.abs(eigen_integrals(line, drive, MODE_COUNT))
    if isinstance(drive, Profiles):
        # An eigen-integral that cancels keeps the rounding of what it is summed from.
        widths = np.diff(np.minimum(drive.knots, line.length)) / line.length
        strengths = np.maximum(strengths, 2 * widths @ drive.sizes)
    slowest = np.abs(places.mode_shapes(line)[:, 0]).max()
    factor = float(modes.wave_numbers[1]) if places.order == -1 else 1.0
    if places.high is not None:
        factor = float((places.high - places.low).max()) * line.scale
    # The slowest mode as it is at the places asked; the others by the strongest of them, at the pace of the second.
    decay = np.exp(-np.outer(times, modes.rates[:2]))
    return decay[:, :1] * strengths[0] * float(slowest) + decay[:, 1:] * strengths[1:].max(axis=0) * factor


def _weigh(sizes: FloatArray, weights: FloatArray) -> FloatArray:
    return (sizes.sum(axis=2) * np.abs(weights)).sum(axis=1)


def _widened(sizes: FloatArray, step: float) -> FloatArray:
    """At each node the largest size within a factor 1 / sin(ANGLE) in time, which bounds it on the shifted contour.

    There a front is as wide as it is that much later, and a mode has decayed as little as it has that much earlier.
    """
    if sizes.shape[1] == 1:
        return sizes
    reach, count = math.ceil(-math.log(math.sin(ANGLE)) / step), sizes.shape[1]
    widest = np.zeros((sizes.shape[0], count + 2 * reach, sizes.shape[2]))
    widest[:, reach : reach + count] = sizes
    # Windows of 2, 4, 8, ... nodes, and two of the last kind side by side.
    width = 1
    while 2 * width <= 2 * reach + 1:
        widest = np.maximum(widest[:, :-width], widest[:, width:])
        width *= 2
    rest = 2 * reach + 1 - width
    return np.maximum(widest[:, :count], widest[:, rest : rest + count])
