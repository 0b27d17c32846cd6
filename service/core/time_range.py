"""From when to when the time integral has to run."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core.lines.line import Drive, Line, WallDrive, wall_distance
from service.core.lines.modes import MODE_COUNT, modes_of
from service.core.lines.places import Places
from service.core.lines.stack import StackLine
from service.core.profiles import Profiles
from service.core.split import Part

FloatArray = NDArray[np.float64]

# The range of integration ends where the integrand is below exp(-CUT) = 2e-22 of its size; what is cut at both ends
# is below CUT_ERROR of what drives the body.
CUT, CUT_ERROR = 50.0, 1e-21

# Where a line leaves its profile as sqrt(t), the range begins where that is below this part of the rule's own error;
# a slope on a driven face meets it with t^(-3/2), and begins where the square of that is below rounding.
EARLIEST, EARLIEST_FOR_SLOPES = 1e-3, 1e-30

# A place within this part of the body of a driven end is on it; no range begins before the square of that.
NEGLIGIBLE, TINY = 1e-50, 1e-110

# Part of the release time by which a range has begun where a profile or a mean is let go with it:
# (t / release)^(5/2) is then below rounding.
LATEST_BEGINNING = 3e-7

# Where no mode decays the integrand falls as a power of t. Its expansion begins with t^(-1/2) and goes on with 1 / t at
# the least, in ln t and in terms of the square of all distances; the first is added up without end, and at this many
# squares the rest is below CUT_ERROR.
AFAR = 1 / CUT_ERROR

# Ranges begin at multiples of this in ln t: parts that begin at about the same time share their lines' answers.
LATTICE = 3.0


def times_for(
    lines: Sequence[Line], part: Part, places: Sequence[Places], step: float, rule_error: float
) -> FloatArray:
    """Nodes of the time integral of a part, evenly spaced in ln t.

    rule_error: relative error of the trapezoidal rule on that step.
    """
    last = last_time(lines, places)
    lets_go = profile_is_taken_out(lines, part, places) or is_undying(lines)
    first = max(_first_time(lines, part, places, EARLIEST * rule_error), TINY * shortest(lines) ** 2)
    # A plain integrand begins only when the front from its end arrives; the others begin with what is let go.
    first = min(first, LATEST_BEGINNING * release_time(lines) if lets_go else last / 16)
    begin = LATTICE * math.floor(math.log(first) / LATTICE)
    return np.exp(step * np.arange(math.floor(begin / step), math.ceil(math.log(last) / step) + 1))


def weights(lines: Sequence[Line], times: FloatArray, step: float) -> FloatArray:
    """Weights of the nodes; where no mode decays the last stands for all that would follow it."""
    weight = step * times
    if not has_decay(lines):
        weight[-1] /= -math.expm1(-0.5 * step)
    return weight


def has_decay(lines: Sequence[Line]) -> bool:
    """Whether what remains, without the product of means where that never decays, decays exponentially."""
    lossy = any(not (line.is_endless or line.keeps_its_mean) for line in lines)
    return lossy or sum(line.is_endless for line in lines) <= 1


def settling_time(lines: Sequence[Line]) -> float:
    """Time constant of the slowest decay, or of a body as large as its data where there is none."""
    return 1 / slowest_rate(lines) if has_decay(lines) else (shortest(lines) / math.pi) ** 2


def release_time(lines: Sequence[Line]) -> float:
    """Time on which a profile or a mean that was taken out is let go.

    That of the slowest decay, but where two axes are endless that of the shortest length: profiles spread there long
    before what they drive decays, and by then nothing may be left of them.
    """
    if sum(line.is_endless for line in lines) <= 1:
        return settling_time(lines)
    return (shortest(lines) / math.pi) ** 2


def slowest_rate(lines: Sequence[Line]) -> float:
    """Decay rate of the slowest product of modes, not counting one that does not decay at all."""
    rates = [_slow_rates(line) for line in lines if not line.is_endless]
    together = sum(first for first, _ in rates)
    return together if together > 0 else min(second for _, second in rates)


def _slow_rates(line: Line) -> tuple[float, float]:
    """Decay rates of a line's first two modes, or what they cannot fall below."""
    if isinstance(line, StackLine):
        return line.slow_rates
    first, second = modes_of(line, MODE_COUNT).rates[:2]
    return float(first), float(second)


def is_undying(lines: Sequence[Line]) -> bool:
    """Whether the product of the lines' means never decays: a closed body, or a bar with insulated sides."""
    return has_decay(lines) and all(line.keeps_its_mean or line.is_endless for line in lines)


def profile_is_taken_out(lines: Sequence[Line], part: Part, places: Sequence[Places]) -> bool:
    """Whether the driven line is asked on its driven end, or for a slope, where its kernel is not integrable alone."""
    if part.wall_axis is None:
        return False
    drive, asked = part.drives[part.wall_axis], places[part.wall_axis]
    assert isinstance(drive, WallDrive)
    if asked.order == -1:
        return True
    line, on_it = lines[part.wall_axis], NEGLIGIBLE * shortest(lines)
    ends = [asked.low] if asked.high is None else [asked.low, asked.high]
    return any(bool((wall_distance(line, end, high=drive.high) <= on_it).any()) for end in ends)


def _first_time(lines: Sequence[Line], part: Part, places: Sequence[Places], earliest: float) -> float:
    """Where the integrand begins to matter.

    A front from a jump matters as soon as it arrives at the nearest place that is not on the jump itself. A kink, a
    film end or the end of an interval matters from the beginning, but only as sqrt(t).
    """
    wall = part.wall_axis
    if wall is not None and not profile_is_taken_out(lines, part, places):
        return _nearest_to_wall(lines[wall], part.drives[wall], places[wall]) ** 2 / (4 * CUT)
    slopes = any(asked.order == -1 for asked in places)
    film = max((film for line in lines for film in line.films_per_extent if film < math.inf), default=0.0)
    least = shortest(lines)
    # A film of a large Biot number acts early, against another such film with the square of it.
    scale = least / (1 + film * least)
    if slopes:
        # The same for all parts of a body: what their totals have in common at short times cancels between them.
        floor = EARLIEST_FOR_SLOPES * scale**2
    else:
        # A kink between narrow pieces is steep.
        floor = earliest * (scale * min(1.0, _narrowest(lines, part) / least)) ** 2
    if wall is None and not slopes:
        return floor
    if wall is not None and _film_at(lines[wall], part.drives[wall]) > 0:
        # The kernel of a held end, or of a film like it, is large up to the square of the distance from it.
        floor = min(floor, _nearest_to_wall(lines[wall], part.drives[wall], places[wall]) ** 2 / (4 * CUT))
    along = [axis for axis in range(3) if axis != wall]
    jump, other = np.min([_nearest_to_break(lines[axis], part.drives[axis], places[axis]) for axis in along], axis=0)
    return float(min(jump**2 / (4 * CUT), max(other**2 / (4 * CUT), floor), least**2))


def _narrowest(lines: Sequence[Line], part: Part) -> float:
    """Scaled width of the narrowest piece of a part's profiles."""
    return min(
        line.narrowest(drive) for line, drive in zip(lines, part.drives, strict=True) if isinstance(drive, Profiles)
    )


def shortest(lines: Sequence[Line]) -> float:
    """Shortest scaled length of the body; of what drives it where it has no end; of the unit where that has none."""
    finite = [line.extent for line in lines if not line.is_endless]
    return min(finite or _data_widths(lines) or [line.scale for line in lines])


def widest(lines: Sequence[Line]) -> float:
    """Largest scaled length of the body, or of what drives it where it has none that is finite."""
    finite = [line.extent for line in lines if not line.is_endless]
    return max(finite or _data_widths(lines) or [line.scale for line in lines])


def _data_widths(lines: Sequence[Line]) -> list[float]:
    widths = [(line.data[1] - line.data[0]) * line.scale for line in lines]
    return [width for width in widths if width > 0]


def last_time(lines: Sequence[Line], places: Sequence[Places] = ()) -> float:
    """Until when the integral of a body runs that is asked at some places, or close to what drives it."""
    if has_decay(lines):
        return CUT * settling_time(lines)
    return AFAR * _reach(lines, places) ** 2


def _reach(lines: Sequence[Line], places: Sequence[Places]) -> float:
    """Largest scaled distance of the places from what drives a body, its own size, and the depth of its films."""
    found = [shortest(lines)]
    for axis, line in enumerate(lines):
        if not line.is_endless:
            found.append(line.extent)
            continue
        marks = [np.array(line.data)]
        if places:
            asked = places[axis]
            marks += [asked.low] if asked.high is None else [asked.low, asked.high]
        there = np.concatenate(marks)
        there = there[np.isfinite(there)]
        found.append(float(there.max() - there.min()) * line.scale)
        if 0.0 < line.film_low < math.inf:
            found.append(1 / line.film_low)
    return max(found)


def _film_at(line: Line, drive: Drive) -> float:
    assert isinstance(drive, WallDrive)
    return line.film_high if drive.high else line.film_low


def _nearest_to_wall(line: Line, drive: Drive, places: Places) -> float:
    """Least scaled distance from the driven end, of places that are not on it."""
    assert isinstance(drive, WallDrive)
    ends = [places.low] if places.high is None else [places.low, places.high]
    distances = np.concatenate([wall_distance(line, end, high=drive.high) for end in ends])
    return float(distances[distances > 0].min(initial=line.extent))


def _nearest_to_break(line: Line, drive: Drive, places: Places) -> tuple[float, float]:
    """Least scaled distance to a jump from a place not on it, and to a kink or film end; infinite if there is none.

    Intervals may end on a break, which shows as sqrt(t) like a kink.
    """
    assert isinstance(drive, Profiles)
    if places.high is not None:
        return math.inf, 0.0
    knots, has_jump, has_kink = line.active_breaks(drive)
    distances = line.between(places.low[:, None], knots)
    near_jump = distances[:, has_jump]
    other = float(distances[:, has_kink].min(initial=math.inf))
    if drive.is_curved or (places.order == -1 and (near_jump == 0).any()):
        # A curved profile changes everywhere from the beginning; on a held end the slope begins as 1 / sqrt(t).
        other = 0.0
    return float(near_jump[near_jump > 0].min(initial=math.inf)), other
