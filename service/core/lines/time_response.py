"""What a line answers at given times, by images while they are short and by eigenfunctions after that.

An endless line has no eigenfunctions; at long times it sees what drives it as a few point sources. All forms are exact
to rounding where they meet, so that a field, a mean or a total is one integral over time of products of three lines'
answers, whatever drives the body.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from service.core.lines import afar, curves, images, stack_response, wall_pulse
from service.core.lines.kernels import SMOOTH_POINTS
from service.core.lines.line import PRIMITIVE, VALUE, Drive, Line, Order, WallDrive
from service.core.lines.modes import MODE_COUNT, eigen_integrals, modes_of
from service.core.lines.places import Places, TimeResponse
from service.core.lines.stack import StackLine
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]


def respond(line: Line, drive: Drive, places: Places, times: FloatArray) -> TimeResponse:
    """Answer of a line at the given times (scaled length squared), which have to increase."""
    if isinstance(line, StackLine):
        return stack_response.respond(line, drive, places, times)
    count = int(np.searchsorted(times, _early_until(line, drive), side="right"))
    root_time = np.sqrt(times[:count])
    columns = 1 if isinstance(drive, WallDrive) else drive.n_profiles
    total = np.empty((places.low.size, times.size, columns))
    if isinstance(drive, WallDrive):
        initial = np.zeros((places.low.size, 1))
        early = _early_wall(line, drive, places, root_time)
    elif drive.is_constant and line.film_low == line.film_high == 0.0:
        # An even profile between insulated ends stays as it is, exactly.
        initial = places.initial(line, drive)
        total[:] = initial[:, None, :]
        return TimeResponse(total, initial, np.zeros_like(total))
    elif count == 0:
        initial = places.initial(line, drive)
        early = np.zeros((places.low.size, 0, columns))
    else:
        initial = places.initial(line, drive)
        early = _early_departure(line, drive, places, root_time)
        # Where the line leaves its profile at once, the departure is from what it becomes.
        early += (places.profile(line, drive) - initial)[:, None, :]
    total[:, :count] = early + initial[:, None, :]
    if count < times.size:
        late = _afar if line.is_endless else _late
        total[:, count:] = late(line, drive, places, times[count:])
    return TimeResponse(total, initial, early)


def _early_until(line: Line, drive: Drive) -> float:
    """The time until which a line answers by the breaks of its drive."""
    if not line.is_endless:
        return images.LATEST * line.extent**2
    seen = None if isinstance(drive, WallDrive) else afar.seen_from_afar(line, drive)
    return math.inf if seen is None else seen.root_time**2


def _afar(line: Line, drive: Drive, places: Places, times: FloatArray) -> FloatArray:
    """An endless line at times long against all that changes along it."""
    assert isinstance(drive, Profiles)
    seen, root_time = afar.seen_from_afar(line, drive), np.sqrt(times)
    assert seen is not None
    if places.high is None:
        return afar.from_afar(line, seen, places.low, root_time, places.order)
    low, high = places.low, places.high
    smooth = _smooth_from(line, low, high, root_time)
    wide = afar.from_afar(line, seen, high, root_time[:smooth], PRIMITIVE)
    wide -= afar.from_afar(line, seen, low, root_time[:smooth], PRIMITIVE)
    wide += seen.step.integrals(low, high)[:, None, :] * line.scale
    if smooth == root_time.size:
        return wide

    def value(at: FloatArray) -> FloatArray:
        return afar.from_afar(line, seen, at, root_time[smooth:], VALUE)

    return np.concatenate([wide, _integrated(value, line, low, high)], axis=1)


def _early_wall(line: Line, drive: WallDrive, places: Places, root_time: FloatArray) -> FloatArray:
    if places.high is None:
        return wall_pulse.wall_kernel(line, drive, places.low, root_time, places.order)
    return wall_pulse.wall_integrals(line, drive, places.low, places.high, root_time)


def _departure(line: Line, drive: Profiles, coordinates: FloatArray, root_time: FloatArray, order: Order) -> FloatArray:
    """The answer at short times less the profile, by what its breaks send out."""
    from_breaks = curves.departure if drive.is_curved else images.departure
    return from_breaks(line, drive, coordinates, root_time, order)


def _early_departure(line: Line, drive: Profiles, places: Places, root_time: FloatArray) -> FloatArray:
    if places.order == -1:
        return _early_slope(line, drive, places, root_time)
    if places.high is None:
        return _departure(line, drive, places.low, root_time, places.order)
    return _early_integrals(line, drive, places.low, places.high, root_time)


def _early_integrals(
    line: Line, drive: Profiles, low: FloatArray, high: FloatArray, root_time: FloatArray
) -> FloatArray:
    """Integrals over intervals less those of the profile.

    While an interval is wide against sqrt(t) by antiderivatives, then by quadrature over the smooth answer: the
    antiderivatives would cancel.
    """
    smooth = _smooth_from(line, low, high, root_time)
    early = _departure(line, drive, high, root_time[:smooth], PRIMITIVE)
    early -= _departure(line, drive, low, root_time[:smooth], PRIMITIVE)
    if smooth == root_time.size:
        return early

    def value(at: FloatArray) -> FloatArray:
        return _departure(line, drive, at, root_time[smooth:], 0) + drive.at(at)[:, None, :]

    late = _integrated(value, line, low, high) - drive.integrals(low, high)[:, None, :] * line.scale
    return np.concatenate([early, late], axis=1)


def _smooth_from(line: Line, low: FloatArray, high: FloatArray, root_time: FloatArray) -> int:
    """The first of the times at which the widest interval is no wider than sqrt(t)."""
    return int(np.searchsorted(root_time, float((high - low).max()) * line.scale))


def _integrated(value: Callable[[FloatArray], FloatArray], line: Line, low: FloatArray, high: FloatArray) -> FloatArray:
    """Integrals over intervals, in scaled length, of an answer that is smooth on them; value: (n,) to (n, t, r)."""
    nodes, weights = np.polynomial.legendre.leggauss(SMOOTH_POINTS)
    half = 0.5 * (high - low)
    values = value((0.5 * (low + high)[:, None] + half[:, None] * nodes).ravel())
    values = values.reshape(low.size, SMOOTH_POINTS, *values.shape[1:])
    return np.asarray(np.einsum("nptr,p->ntr", values, weights) * (half * line.scale)[:, None, None])


def _early_slope(line: Line, drive: Profiles, places: Places, root_time: FloatArray) -> FloatArray:
    """Slopes less those of the profile. On an end with little film the slope is H times the value, and so it is had
    from the value: the images' slopes would cancel there to a rounding error larger than itself.
    """
    slopes = _departure(line, drive, places.low, root_time, places.order)
    for end, film, sign in ((line.begins, line.film_low, 1.0), (line.length, line.film_high, -1.0)):
        on_end = places.low == end
        if on_end.any() and 0.0 < film * line.extent < 1.0:
            at_end = places.low[on_end]
            values = _departure(line, drive, at_end, root_time, 0) + drive.at(at_end)[:, None, :]
            slopes[on_end] = sign * film * values - drive.slope_at(at_end)[:, None, :] / line.scale
    return slopes


def _late(line: Line, drive: Drive, places: Places, times: FloatArray) -> FloatArray:
    modes = modes_of(line, MODE_COUNT)
    decay = np.exp(-np.outer(modes.rates, times))
    strengths = eigen_integrals(line, drive, MODE_COUNT)
    # One matrix product for all profiles: (n, modes) times (modes, times x profiles).
    driven = (decay[:, :, None] * strengths[:, None, :]).reshape(MODE_COUNT, -1)
    return (places.mode_shapes(line) @ driven).reshape(places.low.size, times.size, strengths.shape[1])
