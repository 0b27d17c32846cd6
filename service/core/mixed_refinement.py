"""A mixed body at refinements from coarse to fine, each computed when it is first asked for.

Each refinement is n panels along each axis of a spot, with n / 2 and n / 4 nested in it; see `panel_error` for what
the three of them tell.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core.bounded import Bounded
from service.core.conditions import Film, Held, HeldPad, Inflow, map_of
from service.core.errors import NotPhysical, TooManyPanels
from service.core.faces import AXES, axes_along
from service.core.field import Setting
from service.core.mixed_base import Base, Spot, pads_of, with_faces
from service.core.mixed_panels import (
    Refined,
    are_told_apart,
    base_means,
    given_total,
    needs_balance,
    solve_system,
    system_of,
    with_flows,
)
from service.core.panel_error import extrapolated
from service.core.problem import Body
from service.core.solution import Solution
from service.core.span import rises, span_of
from service.core.split import lines_of, parts_of, reference_level, scale_of
from service.core.stopping import go_on

FloatArray = NDArray[np.float64]

# Panels along each axis of a spot, from coarse to fine; multiples of 4.
COUNTS = (8, 12, 16, 24, 32, 48, 64)

# Refinements looked at together: all panels, half and a quarter as many along each axis.
LEVELS = 3

# Most panels of all pads together: a matrix of 128 MiB, factorised in about a second.
MOST_PANELS = 4096

# A field is asked of each refinement with this part of the tolerance.
SHARE = 0.1

# Panels that grow with the power GRADING of their number are about as wide as they are far from the border, at a
# distance r of a length L from it, with RESOLVING (L / r)^RESOLVING_POWER panels. Fewer do not see what is at r, and
# their changes tell nothing of the error. Two held pads of a length 0.8 with gaps of 0.03 to 0.0001 set the number.
RESOLVING, RESOLVING_POWER = 8.0, 0.2

# Where more panels than allowed would see all, bounds are widened by the ratio with this power.
UNRESOLVED_POWER = 3.0

# Part of the span to which the mean over a spot is integrated that a level is counted from.
LEVEL_ACCURACY = 1e-12


@dataclass(frozen=True, eq=False)
class Refinement:
    """The answer with `count` panels along each axis of a spot, half and a quarter as many: in that order.

    refined: the flows, empty if there are no spots. solutions: the fields. span: range of the potential.
    """

    count: int
    refined: tuple[Refined, ...]
    solutions: tuple[Solution, ...]
    span: float


class Ladder:
    """The refinements of a body, each computed when it is first asked for."""

    def __init__(self, body: Body, base: Base, most_panels: int) -> None:
        self.body, self.base = body, base
        self._kept: dict[int, Refinement] = {}
        allowed = [count for count in COUNTS if count**2 * len(base.spots) <= most_panels]
        if not allowed:
            least = COUNTS[0] ** 2 * len(base.spots)
            raise TooManyPanels(
                f"The mixed faces have {len(base.spots)} held pads, pads behind films and pieces of background; at "
                f"most {most_panels // COUNTS[0] ** 2} are solved together, with {COUNTS[0] ** 2} panels each.",
                least,
                most_panels,
                ("faces", base.faces[0], "pads"),
            )
        allowed = [count for count in allowed if all(are_told_apart(base, spot, count) for spot in base.spots)]
        if not allowed:
            raise _too_narrow(base)
        needed = RESOLVING * max((_detail(body, base, spot) for spot in base.spots), default=1.0) ** RESOLVING_POWER
        enough = [count for count in allowed if count >= needed]
        self.counts = (enough or allowed[-1:]) if base.spots else allowed[:1]
        self._unresolved = max(needed / self.counts[0], 1.0) ** UNRESOLVED_POWER if base.spots else 1.0

    def at(self, count: int) -> Refinement:
        """The answer with so many panels along each axis of a spot."""
        if count not in self._kept:
            go_on()
            self._kept[count] = self._refinement(count)
        return self._kept[count]

    def finer(self, count: int, missed_by: float, order: float) -> int | None:
        """The refinement to take where a bound, which falls as count^-order, is so many times too wide.

        None if it is not, or none is finer.
        """
        finer = [other for other in self.counts if other > count]
        if missed_by <= 1.0 or not finer:
            return None
        return max([finer[0], *(other for other in finer if other <= count * missed_by ** (1 / order))])

    def limit(self, values: Sequence[Bounded]) -> Bounded:
        """The limit of a total at the three levels of a refinement, the finest first."""
        found = extrapolated(values, held=any(spot.is_held for spot in self.base.spots))
        return replace(found, error_bound=self._unresolved * found.error_bound)

    def _refinement(self, count: int) -> Refinement:
        base = self.base
        if not base.spots:
            lines, reference = lines_of(base.body), reference_level(base.body)
            parts = parts_of(base.body, reference)
            only = Solution(Setting(base.body, lines, parts, reference, span_of(base.body, lines, parts)))
            return Refinement(count, (), (only,) * LEVELS, only.span)
        system = system_of(base, count)
        means, given = base_means(base, system.grids), given_total(base) if needs_balance(base) else 0.0
        refined, settings = [], []
        for level in range(LEVELS):
            half = system.halved(means) if level < LEVELS - 1 else None
            found = solve_system(system, [spot.level for spot in base.spots], self._given_flows, means, given)
            found, setting = self._with_level(found)
            refined.append(found)
            settings.append(setting)
            if half is not None:
                system, means = half
        return Refinement(count, tuple(refined), tuple(map(Solution, settings)), self._span_of(refined[0], settings[0]))

    @cached_property
    def _given_flows(self) -> FloatArray:
        """The given flow of each spot, 0 for those that have none."""
        flows = np.zeros(len(self.base.spots))
        for number, spot in enumerate(self.base.spots):
            pad = None if spot.pad is None else pads_of(self.body, spot.face)[spot.pad]
            if isinstance(pad, HeldPad) and pad.flow is not None:
                flows[number] = pad.flow
        return flows

    def _with_level(self, found: Refined) -> tuple[Refined, Setting]:
        """The field of the flows found, with its level where they fix it only up to a constant."""
        base = self.base
        body = with_faces(self.body, with_flows(base, found))
        lines, reference = lines_of(body), reference_level(body)
        parts = parts_of(body, reference)
        setting = Setting(body, lines, parts, reference, self._size_of(found))
        if not needs_balance(base):
            return found, setting
        known = [number for number, spot in enumerate(base.spots) if spot.level is not None]
        number = known[0] if known else 0
        spot = base.spots[number]
        mean = Solution(setting).mean(spot.face, spot.where, tolerance=LEVEL_ACCURACY * setting.span).value
        level = found.levels[number] - float(found.flows[number].sum()) / (spot.area * spot.excess)
        if known:
            return found, replace(setting, reference=level - mean)
        return replace(found, levels=found.levels + (mean - level)), setting

    @cached_property
    def is_driven(self) -> bool:
        """Whether something is generated or given per area, which may raise the potential beyond all levels."""
        conditions = self.base.body.faces.values()
        maps = [condition.inflow for condition in conditions if isinstance(condition, Inflow)]
        return bool(self.base.body.generating) or any(one.lowest != 0.0 or one.highest != 0.0 for one in maps)

    @cached_property
    def given_levels(self) -> list[float]:
        """Levels of faces and of what lies far away; those of spots are told by each refinement."""
        films = [condition for condition in self.base.body.faces.values() if isinstance(condition, Held | Film)]
        levels = []
        for condition in films:
            face_map = map_of(condition)
            assert face_map is not None
            levels += [face_map.lowest, face_map.highest]
        if not films and not needs_balance(self.base):
            levels.append(self.base.body.far_level or 0.0)
        return levels

    def _span_of(self, found: Refined, setting: Setting) -> float:
        """Range of all levels, and of what they and all that is given raise the potential to."""
        potentials = np.array([*found.levels, *self.given_levels])
        if self.is_driven:
            # Much of what is given leaves through spots, and raises the potential before them.
            raised = setting.reference + rises(setting.body, setting.lines, setting.parts)
            potentials = np.concatenate([potentials, raised])
        return float(np.ptp(potentials))

    def _size_of(self, found: Refined) -> float:
        """What the field of the base and that of the spots' flows come to at the most."""
        levels = [*found.levels, *self.given_levels]
        return max(float(max(levels) - min(levels)), self._span_of_base)

    @cached_property
    def _span_of_base(self) -> float:
        lines = lines_of(self.base.body)
        return span_of(self.base.body, lines, parts_of(self.base.body, reference_level(self.base.body)))


def _too_narrow(base: Base) -> NotPhysical:
    spot = next(spot for spot in base.spots if not are_told_apart(base, spot, COUNTS[0]))
    what = "A piece of the background" if spot.pad is None else f"Pad {spot.pad}"
    path = ("faces", spot.face) if spot.pad is None else ("faces", spot.face, "pads", spot.pad)
    where = spot.where
    sizes = [
        f"{high - low:.3g} wide at {AXES[axis]} = {low:g}"
        for axis, (low, high) in zip(
            axes_along(spot.face), ((where.p_low, where.p_high), (where.q_low, where.q_high)), strict=True
        )
    ]
    return NotPhysical(
        f"{what} of {spot.face} is {' and '.join(sizes)}, too narrow beside its coordinates for their digits; make it "
        "wider, or count coordinates from a place near to it.",
        path,
    )


def _detail(body: Body, base: Base, spot: Spot) -> float:
    """Size of a spot over the least distance at which something shows: another spot, a side or the opposite face."""
    scales = [scale_of(body, axis) for axis in range(3)]
    first, second = axes_along(spot.face)
    where, size = spot.where, [0.0, 0.0]
    near = []
    ends = ((where.p_low, where.p_high), (where.q_low, where.q_high))
    for index, (axis, (low, high)) in enumerate(zip((first, second), ends, strict=True)):
        size[index] = (high - low) * scales[axis]
        near += [(low - body.begins[axis]) * scales[axis], (body.size[axis] - high) * scales[axis]]
    for other in base.spots:
        if other is not spot and other.face == spot.face:
            across = max(other.where.p_low - where.p_high, where.p_low - other.where.p_high, 0.0) * scales[first]
            beside = max(other.where.q_low - where.q_high, where.q_low - other.where.q_high, 0.0) * scales[second]
            near.append(math.hypot(across, beside))
    # Square to the face a length counts sqrt(capacity / conductivity); see `lines.stack` for the capacity of a layer.
    depth = body.size[base.axis] * scales[base.axis]
    if body.layers:
        layer = body.layers[0 if spot.face == "z_low" else -1]
        depth = layer.thickness * math.sqrt(layer.conductivity[0] / body.conductivity[0] / layer.conductivity[2])
    near.append(depth)
    positive = [distance for distance in near if 0.0 < distance < math.inf]
    return max(max(size) / min(positive), 1.0) if positive else 1.0
