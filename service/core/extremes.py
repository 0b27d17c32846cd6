"""The hottest and the coldest place of a body or a part of it.

A steady field without generation has its extremes on the surface (maximum principle), and on an insulated part of it
only if nothing flows in there. So where nothing flows in, the highest held value is the answer if no ambient is
higher, exactly. Otherwise the region is searched: on a grid that follows the faces, patches and boxes of the body, then
around every place that could still hold the extreme, on finer and finer grids.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core import field
from service.core.climbing import Place, Search, Start, climb, from_grid
from service.core.conditions import Held
from service.core.endless import far_setting
from service.core.errors import AccuracyNotReached
from service.core.faces import AXES, Face, axes_along
from service.core.field import Setting
from service.core.first_grids import first_grids, from_boxes, grids_at_held_edges, thinned
from service.core.held_peaks import extreme_held, extreme_held_within, held_faces_under, may_exceed
from service.core.maps import Rectangle
from service.core.profiles import Profiles
from service.core.region import Region
from service.core.time_range import has_decay

FloatArray = NDArray[np.float64]

# Peaks that are followed for one extreme at the most.
MOST_CLIMBS = 6

# Beside edges is looked where the best so far is above the highest held value by no more than this part of the span.
NEARLY_HELD = 0.05

# Places along each side of a pad, in parts of it, closer at its edges; peaks that are followed on it.
PAD_PLACES = 0.5 - 0.5 * np.cos(np.linspace(0.0, math.pi, 9))
MOST_PAD_CLIMBS = 2

# Places along a side of a pad at which data of the body begin, end or have their middle, at the most.
MOST_SHOWN = 40


@dataclass(frozen=True)
class Extremes:
    """The places of the highest and lowest potential."""

    hottest: Place
    coldest: Place


def find(setting: Setting, tolerance: float, keep_going: field.KeepGoing | None) -> Extremes:
    """Hottest and coldest place of the closed body."""
    looked_at = _Looked(setting, Region.whole(setting.body), tolerance, keep_going)
    return Extremes(looked_at.extreme(1.0), looked_at.extreme(-1.0))


def extreme_within(
    setting: Setting, region: Region, sign: float, tolerance: float, keep_going: field.KeepGoing | None
) -> Place:
    """The highest (for sign -1 the lowest) potential in a region."""
    return _Looked(setting, region, tolerance, keep_going).extreme(sign)


def highest_on(
    setting: Setting, face: Face, rectangle: Rectangle, tolerance: float, keep_going: field.KeepGoing | None
) -> Place:
    """The highest potential on a rectangle of a face, its border included."""
    axes = [np.array([setting.body.end_of(face)])] * 3
    ends = ((rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high))
    for axis, (low, high) in zip(axes_along(face), ends, strict=True):
        shown = thinned(_data_within(setting, axis, low, high), MOST_SHOWN)
        axes[axis] = np.unique(np.concatenate([low + (high - low) * PAD_PLACES[:-1], [high], shown]))
    return highest_among(setting, axes, tolerance, keep_going)


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
    search = Search(setting, 0.5 * tolerance, keep_going)
    try:
        starts = from_grid(search, axes, sign * search.field(axes, search.accuracy).potential, sign)
        followed = [start for start in starts if start.value + start.slack >= starts[0].value][:MOST_PAD_CLIMBS]
        return max((climb(search, start, sign) for start in followed), key=lambda place: sign * place.value)
    except AccuracyNotReached as error:
        raise AccuracyNotReached(tolerance, 2 * error.bound) from None


class _Looked:
    """The first grids of a region with their values, which serve for both extremes."""

    def __init__(self, setting: Setting, region: Region, tolerance: float, keep_going: field.KeepGoing | None) -> None:
        self._setting = setting
        self._region = region
        self._tolerance = tolerance
        # Half of the tolerance for the values, half for what lies between the places of the last grid.
        self._search = Search(setting, 0.5 * tolerance, keep_going)

    def extreme(self, sign: float) -> Place:
        """The highest (for sign -1 the lowest) potential. Raises AccuracyNotReached."""
        body = self._setting.body
        held = extreme_held_within(body, self._region, sign)
        if held is not None:
            if held_faces_under(body, self._region):
                return held
            highest = extreme_held(body, sign)
            is_highest = highest is not None and sign * held.value >= sign * highest.value
            if is_highest and not may_exceed(body, sign * held.value, sign):
                return held
        try:
            return self._by_search(sign, held)
        except AccuracyNotReached as error:
            # It was asked of the values, with half of the tolerance.
            raise AccuracyNotReached(self._tolerance, 2 * error.bound) from None

    @cached_property
    def _grids(self) -> list[tuple[list[FloatArray], FloatArray]]:
        """Axes and potential of each first grid."""
        search = self._search
        return [
            (axes, search.field(axes, search.accuracy).potential) for axes in first_grids(self._setting, self._region)
        ]

    def _is_known(self, start: Start, level: float) -> bool:
        """Whether a start is on a held face and no higher than what is known to be held."""
        body = self._setting.body
        faces = [body.face_at(axis, at) for axis, at in enumerate(start.place)]
        is_held = any(face is not None and isinstance(body.faces[face], Held) for face in faces)
        return is_held and start.value <= level + self._search.tolerance

    def _by_search(self, sign: float, held: Place | None) -> Place:
        starts = from_boxes(self._setting, self._region, sign)
        for axes, potential in self._grids:
            starts += from_grid(self._search, axes, sign * potential, sign)
        best = self._highest_from(starts, sign, held, held)
        if held is not None and best is not None:
            level = sign * held.value - NEARLY_HELD * self._setting.span
            if level + 2 * NEARLY_HELD * self._setting.span >= sign * best.value:
                best = self._highest_from(self._starts_at_edges(level, sign), sign, held, best)
        assert best is not None
        if best is held:
            # Nothing was found that goes beyond it by as much as the search can tell.
            return replace(best, error_bound=best.error_bound + self._search.tolerance)
        return _far_if_only_approached(self._setting, self._region, best, self._search.tolerance, sign)

    def _starts_at_edges(self, level: float, sign: float) -> list[Start]:
        """Starts beside edges with faces held nearly at the highest level."""
        starts = []
        for axes in grids_at_held_edges(self._setting, self._region, level, sign):
            potential = self._search.field(axes, self._search.accuracy).potential
            starts += from_grid(self._search, axes, sign * potential, sign)
        return starts

    def _highest_from(
        self, starts: Sequence[Start], sign: float, held: Place | None, best: Place | None
    ) -> Place | None:
        """The highest peak that is reached from some starts, or the best so far."""
        climbs = 0
        # The first grids share places.
        apart = {start.place: start for start in sorted(starts, key=lambda start: start.slack)}
        for start in sorted(apart.values(), key=lambda start: -start.value):
            # A peak that does not come near the best so far is not followed.
            if best is not None and start.value + start.slack < sign * best.value:
                continue
            if held is not None and self._is_known(start, sign * held.value):
                continue
            found = climb(self._search, start, sign)
            climbs += 1
            if best is None or sign * found.value > sign * best.value:
                best = found
            if climbs == MOST_CLIMBS:
                break
        return best


def _far_if_only_approached(setting: Setting, region: Region, found: Place, tolerance: float, sign: float) -> Place:
    """The place as it is, or far along an endless axis where the field only comes to the same value there."""
    best: Place | None = None
    for axis, line in enumerate(setting.lines):
        drives = [part.drives[axis] for part in setting.parts]
        changes = any(not (isinstance(drive, Profiles) and drive.is_constant) for drive in drives)
        if not (line.is_endless and changes):
            continue
        ends = region.along(axis)
        for high in (high for high in (True, False) if math.isinf(ends[high])):
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
