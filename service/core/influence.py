"""What a unit of flow into one pad raises at every other: the influence matrix of pads on faces of a body.

    M_ij = mean rise over pad i for a unit of flow into pad j, with every held value and ambient at zero

is symmetric (Green's reciprocity; Carslaw and Jaeger 1959, section 14.1). For pads on faces square to one axis it is
one time integral for all pairs: the mean of one interval over another along each of the two axes of the faces, times
what the third line answers at its ends. As in `time_form` the pads' own shapes at short times are taken out with
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
from service.core.conditions import Condition, Film, FilmPad, FluxPad, Held, Inflow, Insulated, Mixed, MixedPad
from service.core.errors import NoSteadyState, NotPhysical
from service.core.faces import Face, axes_along, axis_of, is_high
from service.core.field import KeepGoing
from service.core.lines import laplace
from service.core.lines.line import VALUE, Line, WallDrive
from service.core.lines.modes import MODE_COUNT, modes_of
from service.core.lines.pairs import Intervals, pair_means
from service.core.lines.places import Places
from service.core.lines.time_response import respond
from service.core.maps import FaceMap, Patch, Rectangle
from service.core.problem import Body
from service.core.solving import solve
from service.core.split import lines_of, scale_of

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

# Pads whose means are had a second time by the general integral.
CHECKED_PADS = 3


@dataclass(frozen=True)
class Pad:
    """A rectangle of a face. where: in the face's axes in the order x, y, z. name: what to call it, or None."""

    face: Face
    where: Rectangle
    name: str | None = None


@dataclass(frozen=True, eq=False)
class Influence:
    """Mean rises per unit flow of pads.

    mean, bound: shape (n, n), symmetric; row: the pad that is read, column: the pad that flow goes into.
    agreement: largest difference between an entry and the same by the general integral, from pad to pad and back.
    agreement_bound: what that may be. checked: how many entries were compared.
    """

    pads: tuple[Pad, ...]
    mean: FloatArray
    bound: FloatArray
    agreement: float
    agreement_bound: float
    checked: int


def influence(
    body: Body,
    pads: Sequence[Pad],
    *,
    tolerance: float,
    earlier: Influence | None = None,
    keep_going: KeepGoing | None = None,
) -> Influence:
    """The influence matrix of pads on insulated, given-inflow or film faces of a body.

    tolerance: of the entries that are checked, in potential per flow. earlier: of the same body; what it says of pads
    that are still where they were is taken from it, so that a pad that moved costs one column.
    Raises NotPhysical for a pad on a held face or outside its face, NoSteadyState where flow into a pad has no way out.
    """
    check_pads(body, pads)
    if _is_mixed(body):
        return _column_by_column(body, pads, tolerance, keep_going)
    lines = _driven_by(pads, lines_of(body))
    n = len(pads)
    mean, bound = np.zeros((n, n)), np.zeros((n, n))
    known = _taken_over(pads, earlier, mean, bound)
    for axis in range(3):
        of_axis = np.array([index for index, pad in enumerate(pads) if axis_of(pad.face) == axis], dtype=int)
        new = of_axis[~known[of_axis]]
        if new.size:
            rows, columns = [pads[index] for index in of_axis], [pads[index] for index in new]
            block, error = _same_axis(body, lines, rows, columns, keep_going)
            mean[np.ix_(of_axis, new)], bound[np.ix_(of_axis, new)] = block, error
            mean[np.ix_(new, of_axis)], bound[np.ix_(new, of_axis)] = block.T, error.T
    for j, column in enumerate(pads):
        others = [i for i in range(n) if axis_of(pads[i].face) != axis_of(column.face) and (i < j or known[i])]
        if others and not known[j]:
            driven = solve(with_flow_into(environment(body), column, 1.0))
            for i in others:
                found = driven.mean(pads[i].face, pads[i].where, tolerance=tolerance)
                mean[i, j] = mean[j, i] = found.value
                bound[i, j] = bound[j, i] = found.error_bound
            if keep_going is not None:
                keep_going()
    if known.all() and earlier is not None and n:
        checked = earlier.agreement, earlier.agreement_bound, earlier.checked
    else:
        checked = _agreement(body, pads, np.flatnonzero(~known), mean, bound, tolerance)
    return Influence(tuple(pads), mean, bound, *checked)


def _driven_by(pads: Sequence[Pad], lines: Sequence[Line]) -> tuple[Line, Line, Line]:
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


def _is_mixed(body: Body) -> bool:
    return any(isinstance(condition, Mixed) for condition in body.faces.values())


def _column_by_column(body: Body, pads: Sequence[Pad], tolerance: float, keep_going: KeepGoing | None) -> Influence:
    """The matrix where held or film pads take part: a field for each pad, read at all of them.

    The difference between an entry and its mirror image is the check.
    """
    n, rest = len(pads), environment(body)
    mean, bound = np.zeros((n, n)), np.zeros((n, n))
    for j, column in enumerate(pads):
        driven = solve(with_flow_into(rest, column, 1.0), keep_going)
        for face in {pad.face for pad in pads}:
            rows = [i for i, pad in enumerate(pads) if pad.face == face]
            found = driven.means(face, [pads[i].where for i in rows], tolerance=tolerance)
            mean[rows, j] = [entry.value for entry in found]
            bound[rows, j] = [entry.error_bound for entry in found]
    differences, allowed = np.abs(mean - mean.T), bound + bound.T
    return Influence(
        tuple(pads),
        0.5 * (mean + mean.T),
        0.5 * allowed,
        float(differences.max(initial=0.0)),
        float(allowed.max(initial=0.0)),
        n * n,
    )


def peaks(
    body: Body, pads: Sequence[Pad], *, tolerance: float, keep_going: KeepGoing | None = None
) -> tuple[FloatArray, FloatArray]:
    """Highest rise on each pad (row) for a unit of flow into each pad (column), and its bounds, (n, n) each.

    It is not symmetric. Every entry is searched for on its own, to the tolerance in potential per flow.
    """
    check_pads(body, pads)
    n, rest = len(pads), environment(body)
    highest, bound = np.empty((n, n)), np.empty((n, n))
    for j, column in enumerate(pads):
        driven = solve(with_flow_into(rest, column, 1.0), keep_going)
        for i, row in enumerate(pads):
            place = driven.peak(row.face, row.where, tolerance=tolerance, keep_going=keep_going)
            highest[i, j], bound[i, j] = place.value, place.error_bound
    return highest, bound


def environment(body: Body) -> Body:
    """The body with every held value and ambient at zero and nothing given or generated."""
    zero = FaceMap.uniform(0.0)

    def background_at_rest(condition: Inflow | Film | Insulated) -> Film | Insulated:
        return Film(condition.coefficient, zero) if isinstance(condition, Film) else Insulated()

    def at_rest(condition: Condition) -> Condition:
        if isinstance(condition, Held):
            return Held(zero)
        if isinstance(condition, Mixed):
            return Mixed(background_at_rest(condition.background), tuple(pad_at_rest(pad) for pad in condition.pads))
        return background_at_rest(condition)

    def pad_at_rest(pad: MixedPad) -> MixedPad:
        if isinstance(pad, FluxPad):
            return replace(pad, inflow=0.0)
        if isinstance(pad, FilmPad):
            return replace(pad, ambient=0.0)
        return replace(pad, value=None if pad.value is None else 0.0, flow=None if pad.flow is None else 0.0)

    faces = {face: at_rest(condition) for face, condition in body.faces.items()}
    return replace(
        body,
        faces=faces,
        far_level=None,
        sources=(),
        layers=tuple(replace(layer, generation=0.0) for layer in body.layers),
    )


def with_flow_into(body: Body, pad: Pad, flow: float) -> Body:
    """A body at rest with a flow into one pad. On a film face a warmer ambient before the pad drives as much."""
    condition, (first, second) = body.faces[pad.face], axes_along(pad.face)
    density = flow / pad.where.area
    amount = density / condition.coefficient if isinstance(condition, Film) else density
    begins = body.begins[first], body.begins[second]
    driven = FaceMap.patches((body.size[first], body.size[second]), 0.0, [Patch(pad.where, amount)], begins=begins)
    drive = Film(condition.coefficient, driven) if isinstance(condition, Film) else Inflow(driven)
    return replace(body, faces={**body.faces, pad.face: drive})


def check_pads(body: Body, pads: Sequence[Pad]) -> None:
    """Raise NotPhysical or NoSteadyState for pads that have no influence matrix."""
    if body.varies:
        raise NotPhysical(
            "Rises are in proportion to flows only where the conductivity does not vary with the potential and no face "
            "radiates; leave the law or the emissivity out, or ask for the field itself.",
            ("law",) if body.law is not None else ("faces",),
        )
    if body.law is not None or any(isinstance(face, Film) and face.radiation for face in body.faces.values()):
        raise NotPhysical(
            "Rises are not in proportion to flows where the conductivity varies or a face radiates; there is no "
            "influence matrix.",
            ("law",),
        )
    lines = lines_of(body)
    for index, pad in enumerate(pads):
        if pad.face not in body.present_faces:
            raise NotPhysical(f"The body has no face {pad.face}.", ("pads", index, "face"))
        if isinstance(body.faces[pad.face], Mixed):
            raise NotPhysical(
                f"The face {pad.face} is mixed; ask for the resistances of its own pads, or put pads on other faces.",
                ("pads", index, "face"),
            )
        if isinstance(body.faces[pad.face], Held):
            raise NotPhysical(
                f"The face {pad.face} is held: a flow into it raises nothing; put pads on faces that are not.",
                ("pads", index, "face"),
            )
        first, second = axes_along(pad.face)
        where = pad.where
        fits = (
            body.begins[first] <= where.p_low < where.p_high <= body.size[first]
            and body.begins[second] <= where.q_low < where.q_high <= body.size[second]
            and math.isfinite(where.area)
        )
        if not fits:
            raise NotPhysical(
                f"Pad {index} reaches from ({where.p_low:g}, {where.q_low:g}) to ({where.p_high:g}, {where.q_high:g}); "
                f"it has to have a positive finite extent and lie in the face {pad.face}.",
                ("pads", index),
            )
    if pads and not _is_mixed(body) and (time_range.is_undying(lines) or not _comes_to_rest(lines)):
        raise NoSteadyState(
            "A flow of {amount} into a pad has no way out of this body: no face is held or has a film, so that its "
            "rise has no end.",
            1.0,
            ("faces",),
        )


def _comes_to_rest(lines: Sequence[Line]) -> bool:
    """Whether a flow into a body that decays as a power of time raises it to a steady level: three open axes do."""
    return time_range.has_decay(lines) or sum(line.is_endless for line in lines) == 3


def _taken_over(
    pads: Sequence[Pad], earlier: Influence | None, mean: FloatArray, bound: FloatArray
) -> NDArray[np.bool_]:
    """Fill in what an earlier matrix says; returns of which pads it knows, shape (n,)."""
    if earlier is None:
        return np.zeros(len(pads), dtype=bool)
    place = {(pad.face, pad.where): index for index, pad in enumerate(earlier.pads)}
    found = np.array([place.get((pad.face, pad.where), -1) for pad in pads])
    known = found >= 0
    here, there = np.ix_(known, known), np.ix_(found[known], found[known])
    mean[here], bound[here] = earlier.mean[there], earlier.bound[there]
    return known


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


def _same_axis(
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


def _agreement(
    body: Body,
    pads: Sequence[Pad],
    new: NDArray[np.intp],
    mean: FloatArray,
    bound: FloatArray,
    tolerance: float,
) -> tuple[float, float, int]:
    """Some entries of new pads had a second time by the general integral: a pad over itself, to the next and back."""
    largest, allowed, checked = 0.0, 0.0, 0
    rest = environment(body)
    for j in new[np.unique(np.linspace(0, new.size - 1, min(new.size, CHECKED_PADS)).round().astype(int))]:
        own, other = int(j), (int(j) + 1) % len(pads)
        driven = {column: solve(with_flow_into(rest, pads[column], 1.0)) for column in {own, other}}
        for row, column in dict.fromkeys([(own, own), (other, own), (own, other)]):
            found = driven[column].mean(pads[row].face, pads[row].where, tolerance=tolerance)
            largest = max(largest, abs(found.value - float(mean[row, column])))
            allowed = max(allowed, found.error_bound + float(bound[row, column]))
            checked += 1
    return largest, allowed, checked
