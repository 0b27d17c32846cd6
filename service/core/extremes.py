"""The hottest and the coldest place of a body.

A steady field without generation has its extremes on the surface (maximum principle), and on an insulated part of it
only if nothing flows in there. So where nothing flows in, the highest held value is the answer if no ambient is
higher, exactly. Otherwise the closed body is searched: on a grid that follows its faces, patches and boxes, then
around every place that could still hold the extreme, on finer and finer grids.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import maximum_filter

from service.core import field
from service.core.conditions import Film, Held, Inflow, map_of
from service.core.endless import far_setting, neighbourhood
from service.core.errors import AccuracyNotReached
from service.core.faces import AXES, Face, axes_along, axis_of
from service.core.field import Grid, Setting
from service.core.maps import FaceMap, Peak, Rectangle
from service.core.problem import Body
from service.core.profiles import Profiles, chebyshev_places
from service.core.time_range import has_decay, widest

FloatArray = NDArray[np.float64]

# Places along an axis of the first grid through the body at the most, and starts that are followed from each grid.
FIRST_PLACES, STARTS = 25, 8

# Peaks that are followed for one extreme at the most, and that are looked at more closely to choose those.
MOST_CLIMBS, MOST_PEAKS = 6, 128

# Places along an axis of a face's first grid; beyond it only its readings or the middles of its cells are looked at.
MOST_FACE_PLACES = 100

# Accuracy of the first grid, in parts of the span; of a finer one, in parts of what may lie between its places.
FIRST_ACCURACY = 1e-6
ACCURACY_OF_GAP = 1e-3

# Places of each finer grid in parts of its half width, and by how much the next one is narrower.
FINER = np.linspace(-1.0, 1.0, 5)
NARROWING = 4.0

# Places along each side of a pad, in parts of it, closer at its edges; peaks that are followed on it.
PAD_PLACES = 0.5 - 0.5 * np.cos(np.linspace(0.0, math.pi, 9))
MOST_PAD_CLIMBS = 2

# Places along a side of a pad at which data of the body begin, end or have their middle, at the most.
MOST_SHOWN = 40

# How many times the rise of a parabola above the highest of its three points is allowed for a peak between them.
PEAK_SAFETY = 4.0

# A grid narrower than this part of the body ends the search.
SMALLEST_WIDTH = 1e-9


@dataclass(frozen=True)
class Place:
    """An extreme of the field.

    position: infinite along an axis far along which the value is only approached. value: of the potential there.
    error_bound: of that value, and of how far the peak it belongs to may exceed it.
    where: "inside", or the faces the place is on, such as "face z_low".
    """

    position: tuple[float, float, float]
    value: float
    error_bound: float
    where: str


@dataclass(frozen=True)
class Extremes:
    """The places of the highest and lowest potential."""

    hottest: Place
    coldest: Place


def find(setting: Setting, tolerance: float, keep_going: field.KeepGoing | None) -> Extremes:
    """Hottest and coldest place of the closed body."""
    # Half of the tolerance for the values, half for what lies between the places of the last grid.
    search = _Search(setting, 0.5 * tolerance, keep_going)
    try:
        return Extremes(_extreme(search, 1.0), _extreme(search, -1.0))
    except AccuracyNotReached as error:
        # It was asked of the values, with half of the tolerance.
        raise AccuracyNotReached(tolerance, 2 * error.bound) from None


def highest_on(
    setting: Setting, face: Face, rectangle: Rectangle, tolerance: float, keep_going: field.KeepGoing | None
) -> Place:
    """The highest potential on a rectangle of a face, its border included."""
    axes = [np.array([setting.body.end_of(face)])] * 3
    ends = ((rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high))
    for axis, (low, high) in zip(axes_along(face), ends, strict=True):
        shown = _thinned(_data_within(setting, axis, low, high), MOST_SHOWN)
        axes[axis] = np.unique(np.concatenate([low + (high - low) * PAD_PLACES[:-1], [high], shown]))
    return highest_among(setting, axes, tolerance, keep_going)


def places_within(setting: Setting, axis: int, low: float, high: float) -> FloatArray:
    """Places along a stretch of an axis for a first grid: closer at its ends, and where its data show."""
    if low == high:
        return np.array([low])
    ends = [end for end in (low, high) if math.isfinite(end)]
    places = _first_places(setting, axis)
    places = places[(places > low) & (places < high)]
    if len(ends) == 2:
        places = np.concatenate([places, low + (high - low) * PAD_PLACES[1:-1]])
    return np.unique(np.concatenate([ends, _thinned(np.unique(places), MOST_SHOWN)]))


def _data_within(setting: Setting, axis: int, low: float, high: float) -> FloatArray:
    """Where data begin and end along a stretch of an axis, and the middles between: what drives there may be small."""
    knots = np.concatenate([np.zeros(0), *(part.knots(axis) for part in setting.parts)])
    ends = np.unique(np.concatenate([[low], knots[(knots > low) & (knots < high)], [high]]))
    return np.unique(np.concatenate([ends, 0.5 * (ends[1:] + ends[:-1])]))


def highest_among(
    setting: Setting,
    axes: list[FloatArray],
    tolerance: float,
    keep_going: field.KeepGoing | None,
    sign: float = 1.0,
) -> Place:
    """The highest (for sign -1 the lowest) potential in the box that a grid spans, looked for from its places."""
    # Half is left for what lies between the places looked at.
    search = _Search(setting, 0.5 * tolerance, keep_going)
    try:
        starts = _from_grid(search, axes, sign * search.field(axes, search.accuracy).potential, sign)
        followed = [start for start in starts if start.value + start.slack >= starts[0].value][:MOST_PAD_CLIMBS]
        return max((_climb(search, start, sign) for start in followed), key=lambda place: sign * place.value)
    except AccuracyNotReached as error:
        raise AccuracyNotReached(tolerance, 2 * error.bound) from None


def _extreme(search: _Search, sign: float) -> Place:
    body = search.setting.body
    held = extreme_held(body, sign)
    if held is not None and not may_exceed(body, sign * held.value, sign):
        return held
    return _by_search(search, sign, held)


def may_exceed(body: Body, level: float, sign: float) -> bool:
    """Whether an inflow, a source or an ambient could lift the potential above a level (below, for sign -1)."""
    for condition in body.faces.values():
        if isinstance(condition, Inflow) and _highest(condition.inflow, sign) > 0:
            return True
        if isinstance(condition, Film) and _highest(condition.ambient, sign) > level:
            return True
    return any(sign * source.density > 0 for source in body.generating)


def _highest(face_map: FaceMap, sign: float) -> float:
    """The highest of a face's data, for sign -1 the lowest turned round, with what may lie beyond it."""
    slack = 0.0 if face_map.peaks is None else face_map.peaks[1 if sign > 0 else 0].slack
    return sign * (face_map.highest if sign > 0 else face_map.lowest) + slack


def extreme_held(body: Body, sign: float) -> Place | None:
    """The highest (lowest) held value and a place where it is held."""
    best: tuple[Peak, Face] | None = None
    for face in body.present_faces:
        condition = body.faces[face]
        if isinstance(condition, Held):
            peak = _peak_of(condition.value, [body.size[axis] for axis in axes_along(face)], sign)
            if best is None or sign * peak.value > sign * best[0].value:
                best = peak, face
    if best is None:
        return None
    peak, face = best
    place = [0.0, 0.0, 0.0]
    place[axis_of(face)] = body.end_of(face)
    for axis, at in zip(axes_along(face), (peak.first, peak.second), strict=True):
        place[axis] = at
    found = (place[0], place[1], place[2])
    return Place(found, peak.value, peak.slack, _where(body, found))


def _peak_of(face_map: FaceMap, lengths: Sequence[float], sign: float) -> Peak:
    """Where the data of a face are highest (lowest)."""
    if face_map.peaks is not None:
        return face_map.peaks[1 if sign > 0 else 0]
    table = sign * face_map.table
    i, j = np.unravel_index(int(table.argmax()), table.shape)
    # The places of curved data include their knots, where readings are highest and lowest under any law.
    places = [
        chebyshev_places(knots) if curved else knots
        for knots, curved in zip((face_map.first_knots, face_map.second_knots), face_map.curved, strict=True)
    ]
    first = _representative(places[0], int(i), face_map.bilinear, lengths[0])
    second = _representative(places[1], int(j), face_map.bilinear, lengths[1])
    return Peak(sign * float(table[i, j]), first, second, 0.0)


def _representative(knots: FloatArray, index: int, bilinear: bool, length: float) -> float:
    """A reading's own place, or the middle of a cell; in a cell without an end a place off the end it has, or 0."""
    if bilinear:
        return float(knots[index + 1] if np.isneginf(knots[index]) else min(knots[index], length))
    low, high = float(knots[index]), float(min(knots[index + 1], length))
    if math.isfinite(low) and math.isfinite(high):
        return 0.5 * (low + high)
    # As far from the others' knots as these are apart.
    finite = knots[np.isfinite(knots)]
    beyond = float(np.ptp(finite)) if finite.size else 0.0
    return low + beyond if math.isfinite(low) else high - beyond if math.isfinite(high) else 0.0


class _Search:
    """The first grids with their values, which serve for both extremes."""

    def __init__(self, setting: Setting, tolerance: float, keep_going: field.KeepGoing | None) -> None:
        self.setting = setting
        self.tolerance = tolerance
        self.keep_going = keep_going
        self.accuracy = max(tolerance, FIRST_ACCURACY * setting.span)

    @cached_property
    def grids(self) -> list[tuple[list[FloatArray], FloatArray]]:
        """Axes and potential of each first grid."""
        return [(axes, self.field(axes, self.accuracy).potential) for axes in _grids(self.setting)]

    def field(self, axes: list[FloatArray], accuracy: float) -> field.Field:
        """The field on the tensor product of three axes."""
        grid = Grid(axes[0], axes[1], axes[2])
        return field.on_grid(self.setting, grid, tolerance=accuracy, with_flux=False, keep_going=self.keep_going)


@dataclass(frozen=True)
class _Start:
    """A place to climb from. value, slack: signed, and by how much the peak may exceed it. widths: half widths of the
    first grid around it. limits: where the climb has to stay, for each axis.
    """

    place: tuple[float, float, float]
    value: float
    slack: float
    widths: tuple[float, float, float]
    limits: tuple[tuple[float, float], ...]


def _by_search(search: _Search, sign: float, held: Place | None) -> Place:
    best, climbs = held, 0
    starts = _from_boxes(search.setting, sign)
    for axes, potential in search.grids:
        starts += _from_grid(search, axes, sign * potential, sign)
    for start in sorted(starts, key=lambda start: -start.value):
        # A peak that does not come near the best so far is not followed.
        if best is not None and start.value + start.slack < sign * best.value:
            continue
        found = _climb(search, start, sign)
        climbs += 1
        if best is None or sign * found.value > sign * best.value:
            best = found
        if climbs == MOST_CLIMBS:
            break
    assert best is not None
    return best if best is held else _far_if_only_approached(search.setting, best, search.tolerance, sign)


def _grids(setting: Setting) -> list[list[FloatArray]]:
    """The first grids: one through the body, and one on each inflow or film face with all that its data show."""
    body = setting.body
    grids = [[_thinned(_first_places(setting, axis)) for axis in range(3)]]
    for face, condition in body.faces.items():
        face_map = map_of(condition)
        if face_map is None or isinstance(condition, Held) or face_map.is_uniform:
            continue
        axes = [np.zeros(1)] * 3
        axes[axis_of(face)] = np.array([body.end_of(face)])
        for axis, knots in zip(axes_along(face), (face_map.first_knots, face_map.second_knots), strict=True):
            axes[axis] = _data_places(setting, axis, knots, face_map.bilinear)
        grids.append(axes)
    return grids


def _data_places(setting: Setting, axis: int, knots: FloatArray, bilinear: bool) -> FloatArray:
    """Where a face's data show along an axis: everything if that is little, else its readings or its cells' middles."""
    places = _first_places(setting, axis)
    if places.size <= MOST_FACE_PLACES:
        return places
    knots = knots[np.isfinite(knots)]
    return knots if bilinear else 0.5 * (knots[1:] + knots[:-1])


def _from_grid(search: _Search, axes: list[FloatArray], values: FloatArray, sign: float) -> list[_Start]:
    """The highest peaks of a grid. Those that its accuracy cannot tell apart are told apart first."""
    limits = tuple((float(axis[0]), float(axis[-1])) for axis in axes)
    peaks = _peaks(values, 2 * search.accuracy)
    places = np.array([[axis[index] for axis, index in zip(axes, at, strict=True)] for at in peaks])
    exact = sign * field.at_points(search.setting, places, tolerance=search.tolerance, with_flux=False).potential
    starts = []
    for number in np.argsort(-exact, kind="stable")[:STARTS]:
        at, place = peaks[number], places[number]
        x, y, z = (
            max(float(axis[min(index + 1, axis.size - 1)]) - here, here - float(axis[max(index - 1, 0)]))
            for axis, index, here in zip(axes, at, place, strict=True)
        )
        slack = 2 * _steps(values, at)
        start = (float(place[0]), float(place[1]), float(place[2]))
        starts.append(_Start(start, float(exact[number]), slack, (x, y, z), limits))
    return starts


def _from_boxes(setting: Setting, sign: float) -> list[_Start]:
    """The middles of the boxes of generation, with half their size to climb in."""
    boxes = [box for box in setting.body.generating if sign * box.density > 0]
    if not boxes:
        return []
    ends = np.array([neighbourhood(setting.lines, axis) for axis in range(3)]).T
    low, high = (np.clip([getattr(box, end) for box in boxes], *ends) for end in ("low", "high"))
    middles, halves = 0.5 * (low + high), 0.5 * (high - low)
    rough = field.at_points(setting, middles, tolerance=FIRST_ACCURACY * setting.span, with_flux=False)
    limits = tuple(zip(setting.body.begins, setting.body.size, strict=True))
    order = np.argsort(-sign * rough.potential, kind="stable")[:STARTS]
    return [
        _Start(
            (float(middles[i, 0]), float(middles[i, 1]), float(middles[i, 2])),
            float(sign * rough.potential[i]),
            setting.span,
            (float(halves[i, 0]), float(halves[i, 1]), float(halves[i, 2])),
            limits,
        )
        for i in order
    ]


def _far_if_only_approached(setting: Setting, found: Place, tolerance: float, sign: float) -> Place:
    """The place as it is, or far along an endless axis where the field only comes to the same value there."""
    best: Place | None = None
    for axis, line in enumerate(setting.lines):
        drives = [part.drives[axis] for part in setting.parts]
        changes = any(not (isinstance(drive, Profiles) and drive.is_constant) for drive in drives)
        if not (line.is_endless and changes):
            continue
        for high in (True, False) if setting.body.infinite[axis] else (True,):
            far = _far(setting, found, axis, tolerance, high=high)
            if sign * far.value < sign * found.value - far.error_bound:
                continue
            if best is None or sign * far.value > sign * best.value:
                best = far
    return found if best is None else best


def _far(setting: Setting, found: Place, axis: int, tolerance: float, *, high: bool) -> Place:
    """The same place far along an axis."""
    position = list(found.position)
    asked = setting
    if has_decay(setting.lines):
        position[axis] = field.far_along(setting, axis, high=high)
    else:
        asked = far_setting(setting, axis, high=high)
    answer = field.at_points(asked, np.array([position]), tolerance=tolerance, with_flux=False)
    position[axis] = math.inf if high else -math.inf
    bar = sum(line.is_endless for line in setting.lines) == 1 and not setting.body.infinite[axis]
    where = "far along the bar" if bar else f"far along {'' if high else '-'}{AXES[axis]}"
    return Place(
        (position[0], position[1], position[2]),
        float(answer.potential[0]),
        answer.potential_bound + found.error_bound,
        f"{found.where}, {where}",
    )


def _peaks(values: FloatArray, alike: float) -> list[tuple[int, int, int]]:
    """Places of a first grid that are not below any neighbour by what its accuracy can tell, the highest first."""
    rounded = np.round(values / alike) * alike if alike > 0 else values
    peaks = np.argwhere(rounded >= maximum_filter(rounded, size=3, mode="nearest"))
    # On a plateau those that look highest, though by less than the accuracy.
    order = np.argsort([-values[tuple(peak)] for peak in peaks], kind="stable")
    return [(int(i), int(j), int(k)) for i, j, k in peaks[order[:MOST_PEAKS]]]


def _steps(values: FloatArray, at: tuple[int, int, int]) -> float:
    """Sum over the axes of the smaller step from a peak to its neighbours, which a smooth peak cannot exceed."""
    total = 0.0
    for axis in range(3):
        line = _line_through(values, at, axis)
        here = at[axis]
        near = [abs(float(line[here] - line[other])) for other in (here - 1, here + 1) if 0 <= other < line.size]
        total += min(near, default=0.0)
    return total


def _line_through(values: FloatArray, at: tuple[int, int, int], axis: int) -> FloatArray:
    """Values along an axis through a place of a grid."""
    first, second = (at[other] for other in range(3) if other != axis)
    return np.asarray(np.moveaxis(values, axis, 0)[:, first, second])


def _climb(search: _Search, start: _Start, sign: float) -> Place:
    """Follow one peak on finer and finer grids until what lies between their places is below the tolerance."""
    body, accuracy = search.setting.body, search.accuracy
    place, widths, limits = list(start.place), list(start.widths), _within_layer(body, start)
    smallest = SMALLEST_WIDTH * max(_reach(search.setting, axis) for axis in range(3))
    while True:
        local = [
            np.unique(np.clip(at + width * FINER, low, high))
            for at, width, (low, high) in zip(place, widths, limits, strict=True)
        ]
        answer = search.field(local, accuracy)
        values = sign * answer.potential
        top = np.unravel_index(int(values.argmax()), values.shape)
        index = (int(top[0]), int(top[1]), int(top[2]))
        place = [float(axis[i]) for axis, i in zip(local, index, strict=True)]
        vertices = [_vertex(local[axis], values, index, axis) for axis in range(3)]
        gap = PEAK_SAFETY * sum(rise for _, rise in vertices)
        done = gap <= search.tolerance or max(widths) <= smallest
        if done and accuracy <= search.tolerance:
            found = (place[0], place[1], place[2])
            return Place(found, sign * float(values[index]), answer.potential_bound + gap, _where(body, found))
        accuracy = search.tolerance if done else max(search.tolerance, ACCURACY_OF_GAP * gap)
        if not done:
            place = [vertex for vertex, _ in vertices]
            widths = [width / NARROWING for width in widths]


def _within_layer(body: Body, start: _Start) -> tuple[tuple[float, float], ...]:
    """Where a climb has to stay: in the layer it starts in, at whose ends the field steps or turns."""
    *across, (low, high) = start.limits
    if body.layers and low < high:
        borders = np.array([low, *(z for z in body.interfaces if low < z < high), high])
        layer = int(np.clip(np.searchsorted(borders, start.place[2]), 1, borders.size - 1))
        # A border belongs to the layer below it.
        low = low if layer == 1 else math.nextafter(float(borders[layer - 1]), math.inf)
        high = float(borders[layer])
    return (*across, (low, high))


def _vertex(places: FloatArray, values: FloatArray, top: tuple[int, int, int], axis: int) -> tuple[float, float]:
    """Top of the parabola through a grid's highest value and its neighbours along an axis, and its rise above it.

    At the end of the axis with the field falling from it, the end itself and 0.
    """
    line = _line_through(values, top, axis)
    here = top[axis]
    if places.size < 3:
        return float(places[here]), 0.0
    middle = min(max(here, 1), places.size - 2)
    x, y = places[middle - 1 : middle + 2], line[middle - 1 : middle + 2]
    left, right = (y[1] - y[0]) / (x[1] - x[0]), (y[2] - y[1]) / (x[2] - x[1])
    curvature = (right - left) / (x[2] - x[0])
    if curvature >= 0.0:
        return float(places[here]), 0.0
    vertex = 0.5 * (x[0] + x[1]) - 0.5 * left / curvature
    vertex = float(min(max(vertex, places[0]), places[-1]))
    rise = y[1] + (vertex - x[1]) * (left + curvature * (vertex - x[0])) - line[here]
    return vertex, max(float(rise), 0.0)


def _reach(setting: Setting, axis: int) -> float:
    """How far the neighbourhood of the data reaches along an axis."""
    low, high = neighbourhood(setting.lines, axis)
    return high - low


def _first_places(setting: Setting, axis: int) -> FloatArray:
    """Ends, knots and the middles between them, and an even or, along an endless bar, widening spread."""
    line = setting.lines[axis]
    if line.is_endless:
        beyond = widest(setting.lines) / line.scale * np.geomspace(0.02, 20.0, 11)
        low, high = line.data
        spread = np.concatenate([[0.0], beyond] if line.has_low_end else [low - beyond, [low, high], high + beyond])
    else:
        spread = line.length * np.linspace(0.0, 1.0, 11)
    places = [spread]
    if axis == 2:
        # Behind a contact the potential steps.
        interfaces = np.array(setting.body.interfaces)
        places += [interfaces, np.nextafter(interfaces, math.inf)]
    for part in setting.parts:
        knots = part.knots(axis)
        knots = knots[np.isfinite(knots)]
        places += [knots, 0.5 * (knots[1:] + knots[:-1])]
    unique = np.unique(np.concatenate(places))
    return unique[unique <= line.length]


def _thinned(places: FloatArray, most: int = FIRST_PLACES) -> FloatArray:
    if places.size <= most:
        return places
    return places[np.unique(np.linspace(0, places.size - 1, most).round().astype(int))]


def _where(body: Body, place: tuple[float, float, float]) -> str:
    names = []
    for axis, value in enumerate(place):
        face = body.face_at(axis, value)
        if face is not None:
            names.append(face)
    return "face " + "/".join(names) if names else "inside"
