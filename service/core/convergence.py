"""How an answer converges: by terms of the series, by nodes of the time form, and what a tighter answer costs."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core import field, series, time_error, time_form
from service.core.certificate import by_series
from service.core.faces import FACES, Face
from service.core.field import Setting
from service.core.lines.line import VALUE, Line
from service.core.lines.modes import eigen_integrals, modes_of
from service.core.lines.places import Places
from service.core.maps import FaceMap
from service.core.profiles import Profiles
from service.core.split import SOURCES, Part

FloatArray = NDArray[np.float64]

# Modes per axis at which the series is cut for the table of errors.
SERIES_TERMS = (1, 2, 4, 8, 16, 32, 64, 128)

# Steps in ln t for the table of the time form, coarse to fine.
TIME_STEPS = (1.2, 0.9, 0.7, 0.5, 0.4, 0.3)

# Beyond this many modes per axis a number of terms needed is not looked for.
MOST_MODES = 2**40


@dataclass(frozen=True)
class SeriesStep:
    """The double series cut at `terms` modes along each of its axes.

    error: distance from the converged answer. tail_bound: bound on what was cut off, None where none exists.
    """

    terms: int
    value: float
    error: float
    tail_bound: float | None


@dataclass(frozen=True)
class NodeStep:
    """The time form on a coarser or finer rule: its nodes, its value, how far off, and its a-priori bound."""

    nodes: int
    value: float
    error: float
    error_bound: float


@dataclass(frozen=True)
class Convergence:
    """How the answer at one place converges.

    series: empty where two axes are endless.
    terms_needed: modes per axis at which the series' tail bound meets the tolerance, None if no number does.
    agreement: difference of the two converged representations, with what it may be; None where the series takes too
    many terms. node_count, node_count_tenfold: nodes for the tolerance and for a tenth of it; their ratio is what
    the tighter answer costs.
    """

    point: tuple[float, float, float]
    value: float
    error_bound: float
    series: tuple[SeriesStep, ...]
    time_form: tuple[NodeStep, ...]
    agreement: float | None
    agreement_bound: float | None
    terms_needed: int | None
    node_count: int
    node_count_tenfold: int

    @property
    def cost_ratio_tenfold(self) -> float:
        """Arithmetic for a tolerance ten times tighter over that for the tolerance asked."""
        return self.node_count_tenfold / max(self.node_count, 1)


@dataclass(frozen=True)
class Overshoot:
    """By how much a cut series overshoots the data of a face, as a part of their largest jump, and where."""

    face: Face
    terms: int
    overshoot: float
    at: tuple[float, float]


def converge(setting: Setting, point: FloatArray, tolerance: float) -> Convergence:
    """Both representations at a point, from coarse to converged."""
    place = point[None, :]
    answer = field.at_points(setting, place, tolerance=tolerance, with_flux=False)
    value = float(answer.potential[0])
    check = by_series(setting, point)
    return Convergence(
        (float(point[0]), float(point[1]), float(point[2])),
        value,
        answer.potential_bound,
        tuple(_series_steps(setting, point, value)),
        tuple(_node_step(setting, place, step, value) for step in TIME_STEPS),
        None if check is None else abs(check.value - value),
        None if check is None else check.bound + answer.potential_bound,
        _terms_needed(setting, point, tolerance),
        answer.node_count,
        _nodes_for(setting, place, tolerance / 10),
    )


def overshoots(setting: Setting, terms: int) -> list[Overshoot]:
    """Overshoot of the eigenfunction sums of every driven face, cut at `terms` modes per axis.

    A jump of the data, or data that meet a held edge in a jump, is overshot by about 9 % in each direction however
    many terms are taken (Wilbraham 1848, Gibbs 1899).
    """
    found = []
    for part in setting.parts:
        if part.cause in FACES and part.wall_axis is not None:
            axes = [axis for axis in range(3) if axis != part.wall_axis]
            if not any(setting.lines[axis].is_endless for axis in axes):
                found.append(_overshoot(setting, part, axes, terms))
    return found


def _axial(setting: Setting, part: Part) -> int:
    """The axis along which a textbook would solve: the driven one, or the one without an end, or the longest."""
    if setting.body.layers:
        return 2
    endless = [axis for axis in range(3) if setting.lines[axis].is_endless]
    if endless:
        return endless[0]
    if part.cause == SOURCES or part.wall_axis is None:
        return int(np.argmax([line.extent for line in setting.lines]))
    return part.wall_axis


def _has_series(setting: Setting) -> bool:
    """Whether there are eigenfunctions along two axes at least."""
    return sum(line.is_endless for line in setting.lines) + bool(setting.body.layers) <= 1


def _series_steps(setting: Setting, point: FloatArray, value: float) -> list[SeriesStep]:
    if not _has_series(setting):
        return []
    totals = np.full(len(SERIES_TERMS), setting.reference)
    tails = np.zeros(len(SERIES_TERMS))
    where = [float(x) for x in point]
    for part in setting.parts:
        cut = series.partial_sums(setting.lines, part, where, _axial(setting, part), SERIES_TERMS)
        totals += [partial.value for partial in cut]
        tails += [partial.bound for partial in cut]
    return [
        SeriesStep(terms, float(total), abs(float(total) - value), float(tail) if math.isfinite(tail) else None)
        for terms, total, tail in zip(SERIES_TERMS, totals, tails, strict=True)
    ]


def _terms_needed(setting: Setting, point: FloatArray, tolerance: float) -> int | None:
    if not _has_series(setting):
        return None
    where = [float(x) for x in point]

    def tail(terms: int) -> float:
        return sum(
            series.tail_bound(setting.lines, part, where, _axial(setting, part), terms) for part in setting.parts
        )

    terms = 1
    while tail(terms) > tolerance:
        terms *= 2
        if terms > MOST_MODES:
            return None
    low = terms // 2
    while terms - low > 1:
        middle = (low + terms) // 2
        low, terms = (low, middle) if tail(middle) <= tolerance else (middle, terms)
    return terms


def _node_step(setting: Setting, place: FloatArray, step: float, value: float) -> NodeStep:
    places = [Places(place[:, axis], VALUE) for axis in range(3)]
    total, bound, nodes = setting.reference, 0.0, 0
    for part in setting.parts:
        integral = time_form.integrate(setting.lines, part, places, step)
        total += float(time_form.at_points(integral)[0])
        bound += float(time_error.bound_at_points(integral)[0])
        nodes = max(nodes, integral.node_count)
    return NodeStep(nodes, total, abs(total - value), bound)


def _nodes_for(setting: Setting, place: FloatArray, tolerance: float) -> int:
    places = [Places(place[:, axis], VALUE) for axis in range(3)]
    step = field.step_for(setting, tolerance)
    counts = [time_form.integrate(setting.lines, part, places, step).node_count for part in setting.parts]
    return max(counts, default=0)


def _overshoot(setting: Setting, part: Part, axes: list[int], terms: int) -> Overshoot:
    coordinates = [_near_jumps(setting.lines[axis], part.drives[axis], terms) for axis in axes]
    sums, data = [], []
    for axis, at in zip(axes, coordinates, strict=True):
        line, drive = setting.lines[axis], part.drives[axis]
        assert isinstance(drive, Profiles)
        sums.append(modes_of(line, terms).at(at, VALUE) @ eigen_integrals(line, drive, terms))
        data.append(drive.at(at))
    summed, given = part.factor * (sums[0] @ sums[1].T), part.factor * (data[0] @ data[1].T)
    face: Face = part.cause  # type: ignore[assignment]
    assert part.face_map is not None
    jump, meets_zero = _largest_jump([setting.lines[axis] for axis in axes], part.face_map)
    # A uniform face has its value in the factor.
    jump *= abs(part.factor) / (abs(part.face_map.lowest) if part.face_map.is_uniform else 1.0)
    # On an edge with a held face the series has to come down to that face, which is zero in this part.
    highest = max(float(given.max()), 0.0) if meets_zero else float(given.max())
    lowest = min(float(given.min()), 0.0) if meets_zero else float(given.min())
    excess = np.maximum(summed - highest, lowest - summed)
    i, j = np.unravel_index(int(excess.argmax()), excess.shape)
    scale = jump if jump > 0 else max(highest - lowest, abs(highest))
    overshoot = max(float(excess[i, j]), 0.0) / scale
    return Overshoot(face, terms, overshoot, (float(coordinates[0][i]), float(coordinates[1][j])))


def _largest_jump(lines: Sequence[Line], face_map: FaceMap) -> tuple[float, bool]:
    """Largest jump of a face's data, inside it or at an edge with a held face; and whether there is such an edge."""
    table, jump, meets_zero = face_map.table, 0.0, False
    for axis, line in enumerate(lines):
        along = np.moveaxis(table, axis, 0)
        if not face_map.bilinear and along.shape[0] > 1:
            jump = max(jump, float(np.abs(np.diff(along, axis=0)).max()))
        for film, border in ((line.film_low, along[0]), (line.film_high, along[-1])):
            if film == math.inf:
                jump, meets_zero = max(jump, float(np.abs(border).max())), True
    return jump, meets_zero


def _near_jumps(line: Line, drive: object, terms: int) -> FloatArray:
    """Places where a sum of so many modes overshoots: fractions of its shortest wave from every knot."""
    assert isinstance(drive, Profiles)
    knots = np.minimum(drive.knots, line.length)
    offsets = np.linspace(-3.0, 3.0, 49) * line.length / terms
    places = np.concatenate([(knots[:, None] + offsets).ravel(), np.linspace(0.0, line.length, 65)])
    return np.unique(places[(places >= 0) & (places <= line.length)])
