"""What the line of a stack answers at given times: its Laplace transform inverted on a parabola.

    f(t) = 1 / (2 pi i) integral of exp(s t) F(s) ds,   s = (mu / t) (i u + 1)^2,   mu = pi N / 12,   step 3 / N

with the midpoint rule at N places 0 < u < 3, whose error falls as exp(-2 pi N / 3) (Weideman and Trefethen, Math. Comp.
76, 2007). Every transform here is analytic off the negative axis, so that neither roots nor eigenfunctions are needed.
Far from what drives the line |exp(s t) F| falls with the answer, on the parabola exp(-sqrt(s) d) is below
exp(-2 d / sqrt t), and rounding with it. The rule's own error stays at 1e-16 of what a front brings while d is below
20 sqrt t, which is less than the rounding that is allowed for once the front has come.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from service.core.lines import stack_laplace
from service.core.lines.images import LATEST
from service.core.lines.line import SLOPE, Drive, WallDrive
from service.core.lines.places import Places, TimeResponse
from service.core.lines.stack import StackLine
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]

# Places on the parabola. The rule errs by 3e-15 of the transform's size there where that falls as s^-2, as a film lets
# out or an interval next to a jump loses, and by less where it falls less.
PLACES = 18

# Numbers of a transform that are held at once.
NUMBERS_AT_ONCE = 1_000_000

# A layer that holds a profile is seen by its borders while sqrt(t) is below this part of its scaled thickness; the
# profile and what the borders send out cancel later.
BORDERS_UNTIL = 0.5

_MU = math.pi * PLACES / 12
_U = (np.arange(PLACES) + 0.5) * 3 / PLACES
_RAY = (1j * _U + 1) ** 2
_WEIGHTS = 3 / PLACES / math.pi * np.exp(_MU * _RAY) * 2j * _MU * (1j * _U + 1)


def respond(line: StackLine, drive: Drive, places: Places, times: FloatArray) -> TimeResponse:
    """Answer of a stack at the given times (scaled length squared), which have to increase."""
    if isinstance(drive, WallDrive):
        total, carried = _inverted(line, drive, places, times, less_profile=False)
        film, end = (line.film_high, line.length) if drive.high else (line.film_low, 0.0)
        if film == math.inf and places.high is None and places.order != SLOPE:
            # On a held end itself there is nothing but the pulse.
            total[places.low == end] = 0.0
        return TimeResponse(total, np.zeros((places.low.size, 1)), total[:, :0], carried)
    initial = _initial(line, drive, places)
    count = int(np.searchsorted(times, _borders_until(line, drive)))
    early, carried_early = _inverted(line, drive, places, times[:count], less_profile=True)
    early += (_profile(line, drive, places) - initial)[:, None, :]
    late, carried_late = _inverted(line, drive, places, times[count:], less_profile=False)
    total = np.concatenate([early + initial[:, None, :], late], axis=1)
    return TimeResponse(total, initial, early, np.concatenate([carried_early, carried_late], axis=1))


def _inverted(
    line: StackLine, drive: Drive, places: Places, times: FloatArray, *, less_profile: bool
) -> tuple[FloatArray, FloatArray]:
    """The answer, less its profile where asked, and the sizes of what it was summed from, (n, n_times, n_columns)."""
    columns = 1 if isinstance(drive, WallDrive) else drive.n_profiles
    answer = np.empty((places.low.size, times.size, columns))
    carried = np.empty_like(answer)
    at_once = max(NUMBERS_AT_ONCE // (max(places.low.size, 1) * PLACES * columns), 1)
    for start in range(0, times.size, at_once):
        run = slice(start, start + at_once)
        s = (_MU / times[run, None] * _RAY).ravel()
        transformed, sizes = stack_laplace.with_sizes(line, drive, places, s, less_profile=less_profile)
        shape = (places.low.size, -1, PLACES, columns)
        terms = transformed.reshape(shape) * _WEIGHTS[:, None]
        answer[:, run] = terms.imag.sum(axis=2) / times[run, None]
        carried[:, run] = (sizes.reshape(shape) * np.abs(_WEIGHTS)[:, None]).sum(axis=2) / times[run, None]
    return answer, carried


def _borders_until(line: StackLine, profiles: Profiles) -> float:
    """Time until which every piece of the profiles is seen by its borders."""
    return min(BORDERS_UNTIL * line.narrowest(profiles), math.sqrt(LATEST) * line.extent) ** 2


def _profile(line: StackLine, profiles: Profiles, places: Places) -> FloatArray:
    """The profiles at the places, on a border those of the layer below; zero for slopes."""
    if places.high is not None:
        return profiles.integrals(places.low, places.high)
    if places.order == SLOPE:
        return np.zeros((places.low.size, profiles.n_profiles))
    divided = line.divided(profiles.knots)
    return divided.held_by_layers(profiles)[divided.layer_of(places.low)]


def _initial(line: StackLine, profiles: Profiles, places: Places) -> FloatArray:
    """What the line is just after time 0: the profile, but 0 on a held end, and between the two on a bonded border.

    There it is the mean weighted by sqrt(k c), as two half-spaces that touch have it (Carslaw and Jaeger 1959, 2.7).
    """
    values = _profile(line, profiles, places).copy()
    if places.high is not None or places.order == SLOPE:
        return values
    divided = line.divided(profiles.knots)
    held = divided.held_by_layers(profiles)
    weight = np.sqrt(np.array(divided.conductivity) * np.array(divided.capacity))[:, None]
    for border, contact in enumerate(divided.contacts, start=1):
        if contact == math.inf:
            pair = slice(border - 1, border + 1)
            mean = (weight[pair] * held[pair]).sum(axis=0) / weight[pair].sum()
            values[places.low == divided.heights[border]] = mean
    for place, film in ((0.0, line.film_low), (line.length, line.film_high)):
        if film == math.inf:
            values[places.low == place] = 0.0
    return values
