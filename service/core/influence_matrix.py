"""The influence matrix of pads on faces square to one axis: one time integral for all pairs, with its bound.

Its integrand is the mean of one interval over another along each of the two axes of the faces, times what the third
line answers at its ends. As in `time_form` the pads' own shapes at short times are taken out with
chi = 1 - (1 - exp(-t / T))^3, whose integral against the third line is known in the Laplace domain.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import maximum_filter1d

from service.core import time_error, time_range
from service.core.faces import Face, axes_along, axis_of, is_high
from service.core.fed_pads import Pad
from service.core.field import KeepGoing
from service.core.lines import laplace
from service.core.lines.line import VALUE, Line, WallDrive
from service.core.lines.modes import MODE_COUNT, modes_of
from service.core.lines.pairs import Intervals, pair_means
from service.core.lines.places import Places
from service.core.lines.time_response import respond
from service.core.problem import Body
from service.core.split import scale_of

FloatArray = NDArray[np.float64]

# Step in ln t: the rule's relative error is 6e-14 before the spread of sums of absolute values.
STEP = 0.25

# The range begins at this part of the square of the narrowest pad: the means leave the pads' shapes as sqrt t, and the
# answer of the end falls as sqrt t too.
EARLIEST = 1e-18

# What a sum of absolute values at the nodes may grow to on the shifted contour of the error bound: the means of pads
# that touch are positive and change by sqrt(1 / sin(ANGLE)) in t at the most, the two of them and the end together.
SPREAD = math.sin(time_error.ANGLE) ** -1.5

# Angles that the contours of the bound keep to the edge of the sector for pads that are apart. Near it the rule is
# better, further off the front between the pads is narrower, and so what is far beyond a decay keeps its digits.
CONTOURS = (time_error.ANGLE, 0.67)

# Fronts are added up at every so many nodes; between those they change by less than the factor of two allowed for.
SPARSE = 4

# Rounding of a mean of one interval over another, relative to the mean of a narrowest one over itself.
PAIR_ROUNDING = 2e-13

# Numbers of the matrix times nodes that are held at once.
NUMBERS_AT_ONCE = 4_000_000


@dataclass(frozen=True, eq=False)
class _Side:
    """Rows or columns of a matrix: different intervals along both axes, and which of them each pad has."""

    first: Intervals
    second: Intervals
    at_first: NDArray[np.intp]
    at_second: NDArray[np.intp]
    face: NDArray[np.intp]

    @classmethod
    def of(cls, pads: Sequence[Pad], faces: Sequence[Face]) -> _Side:
        """The side of some pads. faces: in the order they are counted."""
        ends = np.array([(pad.where.p_low, pad.where.p_high, pad.where.q_low, pad.where.q_high) for pad in pads]).T
        first, at_first = Intervals.unique(ends[0], ends[1])
        second, at_second = Intervals.unique(ends[2], ends[3])
        return cls(first, second, at_first, at_second, np.array([faces.index(pad.face) for pad in pads]))

    def narrowest(self, along: tuple[Line, Line]) -> float:
        """Least scaled width of a pad."""
        first, second = along
        return min(float(self.first.widths.min()) * first.scale, float(self.second.widths.min()) * second.scale)


def lines_driven_by(pads: Sequence[Pad], lines: Sequence[Line]) -> tuple[Line, Line, Line]:
    """The lines of a body with its pads as all that drives it, which says how far endless axes have to be followed."""
    found = list(lines)
    for axis, line in enumerate(lines):
        if line.is_endless:
            ends = [0.0] if line.has_low_end else []
            for pad in pads:
                along, where = axes_along(pad.face), pad.where
                if axis in along:
                    ends += [where.p_low, where.p_high] if along[0] == axis else [where.q_low, where.q_high]
            found[axis] = replace(line, data=(min(ends, default=0.0), max(ends, default=0.0)))
    return found[0], found[1], found[2]


def of_axis(
    body: Body, lines: Sequence[Line], rows: Sequence[Pad], columns: Sequence[Pad], keep_going: KeepGoing | None
) -> tuple[FloatArray, FloatArray]:
    """The matrix of pads on faces square to one axis, and its bound. columns: all of the rows, or some."""
    axis = axis_of(rows[0].face)
    first_axis, second_axis = axes_along(axis)
    along = lines[first_axis], lines[second_axis]
    faces = sorted({pad.face for pad in rows})
    row = _Side.of(rows, faces)
    column = row if len(columns) == len(rows) else _Side.of(columns, faces)
    narrowest = row.narrowest(along)
    times = _times(lines, narrowest)
    weights = time_range.weights(lines, times, STEP)
    # Let go with the narrowest pad, whose answer would be the difference of larger numbers later on.
    release = min(narrowest**2, time_range.release_time(lines))
    taken_out = 1 + np.expm1(-times / release) ** 3
    through, closed = _third_line(lines[axis], faces, times, release)
    pick_first, pick_second = np.ix_(row.at_first, column.at_first), np.ix_(row.at_second, column.at_second)
    pick_end = np.ix_(row.face, column.face)
    shape = (
        _shape(along[0], row.first, column.first)[pick_first] * _shape(along[1], row.second, column.second)[pick_second]
    )
    at_once = shape * closed[pick_end]
    total, size, rounding = at_once.copy(), np.abs(at_once), np.zeros_like(at_once)
    most_first, most_second = _most(along[0], row.first, times), _most(along[1], row.second, times)
    # Of pads that are apart a front is on its way, which comes earlier on the contour.
    apart = (_gaps(along[0], row.first, column.first) > 0)[pick_first] | (
        _gaps(along[1], row.second, column.second) > 0
    )[pick_second]
    widest_end = maximum_filter1d(np.abs(through), 2 * _nodes_within() + 1, axis=2, mode="nearest")
    on_its_way = [np.zeros_like(size) for _ in CONTOURS]
    run = max(NUMBERS_AT_ONCE // total.size, 1)
    for start in range(0, times.size, run):
        if keep_going is not None:
            keep_going()
        part = slice(start, start + run)
        first = pair_means(along[0], row.first, column.first, times[part])
        second = pair_means(along[1], row.second, column.second, times[part])
        for index in range(first.shape[2]):
            q = start + index
            one, two = first[:, :, index][pick_first], second[:, :, index][pick_second]
            means = one * two
            end = weights[q] * through[:, :, q][pick_end]
            total += (means - taken_out[q] * shape) * end
            size += (means + taken_out[q] * shape) * np.abs(end)
            if q % SPARSE == 0 and apart.any():
                widest = weights[q] * widest_end[:, :, q][pick_end]
                for angle, fronts in zip(CONTOURS, on_its_way, strict=True):
                    front_first = _fronts(along[0], row.first, column.first, times[q], angle)
                    front_second = _fronts(along[1], row.second, column.second, times[q], angle)
                    fronts += front_first[pick_first] * front_second[pick_second] * widest
            rounding += (np.abs(one) * most_second[q] + np.abs(two) * most_first[q]) * np.abs(end)
    by_rule = time_error.step_error(STEP) * SPREAD * size
    ways = [2 * SPARSE * _rule_error(angle) * fronts for angle, fronts in zip(CONTOURS, on_its_way, strict=True)]
    by_rule = np.where(apart, np.minimum(*ways), by_rule)
    scale = scale_of(body, axis) * along[0].scale * along[1].scale
    return scale * total, scale * (by_rule + 4 * time_error.ROUNDING * size + PAIR_ROUNDING * rounding)


def _most(line: Line, intervals: Intervals, times: FloatArray) -> FloatArray:
    """What no mean over an interval for a unit on it exceeds at the times, shape (n_times,).

    The narrowest at first, then a point source on an insulated end, and with both ends at last.
    """
    at_first = 1 / (float(intervals.widths.min()) * line.scale)
    at_last = 0.0 if line.is_endless else 2 / line.extent
    return np.minimum(at_first, 2 / np.sqrt(math.pi * times) + at_last)


def _gaps(line: Line, rows: Intervals, columns: Intervals) -> FloatArray:
    """Scaled distances between intervals, 0 where they touch or overlap."""
    beyond = np.maximum(rows.low[:, None] - columns.high, columns.low - rows.high[:, None])
    return np.maximum(beyond, 0.0) * line.scale


def _fronts(line: Line, rows: Intervals, columns: Intervals, time: float, angle: float) -> FloatArray:
    """What means do not exceed on a contour, by the front between two intervals and the decay of the slowest mode.

    There a front is exp(-d^2 sin(angle) / 4 t), and a mode has decayed by sin(angle) t; see _rule_error for the rest.
    """
    widths = np.maximum(rows.widths[:, None], columns.widths) * line.scale
    at_last = 0.0 if line.is_endless else 2 / line.extent
    most = np.minimum(2 / widths, 2 / math.sqrt(math.pi * time) + at_last)
    rate = 0.0 if line.is_endless else float(modes_of(line, MODE_COUNT).rates[0])
    return np.asarray(most * np.exp(-math.sin(angle) * (_gaps(line, rows, columns) ** 2 / (4 * time) + rate * time)))


def _rule_error(angle: float) -> float:
    """Error of the rule in parts of a sum of absolute values on the contour that keeps an angle to the sector's edge,
    where the two means and the end are larger by sin(angle)^(-1/2) each.
    """
    return 2 * math.sin(angle) ** -1.5 / math.expm1(2 * math.pi * (math.pi / 2 - angle) / STEP)


def _nodes_within() -> int:
    """How many nodes away the end's answer is looked for that it has on the contours."""
    return math.ceil(-math.log(math.sin(time_error.ANGLE)) / STEP)


def _times(lines: Sequence[Line], narrowest: float) -> FloatArray:
    first = min(EARLIEST * narrowest**2, time_range.LATEST_BEGINNING * time_range.release_time(lines))
    last = time_range.last_time(lines)
    return np.exp(STEP * np.arange(math.floor(math.log(first) / STEP), math.ceil(math.log(last) / STEP) + 1))


def _third_line(line: Line, faces: Sequence[Face], times: FloatArray, release: float) -> tuple[FloatArray, FloatArray]:
    """What a unit inflow at the end of one face raises at another's: at times, and integrated with chi over all times.

    Shapes (n_faces, n_faces, n_times) and (n_faces, n_faces).
    """
    ends = Places(np.array([line.length if is_high(face) else 0.0 for face in faces]), VALUE)
    rates = np.sqrt(np.array([1.0, 2.0, 3.0]) / release)
    through, closed = np.empty((len(faces), len(faces), times.size)), np.empty((len(faces), len(faces)))
    for column, face in enumerate(faces):
        film = line.film_high if is_high(face) else line.film_low
        per_inflow = 1 / film if film > 0 else 1.0
        drive = WallDrive(is_high(face))
        through[:, column] = per_inflow * respond(line, drive, ends, times).total[:, :, 0]
        transformed = laplace.transform(line, drive, ends, rates)[:, :, 0]
        closed[:, column] = per_inflow * transformed @ np.array([3.0, -3.0, 1.0])
    # From one end to the other and back they differ by rounding alone.
    return 0.5 * (through + through.transpose(1, 0, 2)), 0.5 * (closed + closed.T)


def _shape(line: Line, rows: Intervals, columns: Intervals) -> FloatArray:
    """Means of intervals over intervals as time begins: their overlap over both widths, per scaled length."""
    overlap = np.minimum(rows.high[:, None], columns.high) - np.maximum(rows.low[:, None], columns.low)
    return np.maximum(overlap, 0.0) / np.outer(rows.widths, columns.widths) / line.scale
