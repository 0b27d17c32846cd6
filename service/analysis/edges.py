"""Edges between where limits hold and where they do not, closed in and proved.

Source of the search: Chandrupatla, Advances in Engineering Software 28 (1997) 145.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.optimize.elementwise import find_root

from service.analysis.samples import Samples

# Where cases begin to fail is told to this part of the widest step and of the number, by so many halvings at the most.
HALVED = 1e-6
HALVINGS = 24

# Edges are closed in again when cases failed within their brackets, so many times at the most.
PASSES = 3

# Width of a root's bracket in parts of the number: full accuracy.
ROOT_TOLERANCES = {"xatol": 0.0, "xrtol": 1e-15, "fatol": 0.0}

# The slope at an edge is taken over this part of its bracket to either side.
SLOPE_STEP = 1e-3

# An edge is proved where the margin is beyond its bound on either side: tried this many times bound / slope away.
PROOF_AT = (1.5, 12.0)

Ends = Literal["limit", "range", "invalid"]


@dataclass(frozen=True)
class Edge:
    """Where an interval ends.

    kind: at a limit, at the end of the range that was looked at, or where cases begin to fail. number: of the edge.
    error_bound: by how much the true edge may be off; 0 at the end of the range. limit: which one ends it, and slope:
    the derivative of that limit's result by the number, with an estimate of its error; None for the other kinds, and
    where cases beside it fail.
    """

    kind: Ends
    number: float
    error_bound: float = 0.0
    limit: int | None = None
    slope: float | None = None
    slope_error: float | None = None


@dataclass
class Edges:
    """Edges of samples as far as they are known. roots: each with the bracket it was found in."""

    samples: Samples
    roots: list[tuple[float, float, float]] = field(default_factory=list)

    def close_in(self) -> None:
        """Find the roots between all neighbours that are decided differently. Raises CasesUsedUp."""
        for _ in range(PASSES):
            narrow_invalid(self.samples)
            brackets = self._open_brackets()
            if not brackets:
                return
            low, high = np.array(brackets).T
            found = find_root(self.samples.worst_at, (low, high), tolerances=ROOT_TOLERANCES)
            self.roots += [(float(found.x[index]), *brackets[index]) for index in np.flatnonzero(found.success)]
        narrow_invalid(self.samples)

    def proved(self) -> list[Edge]:
        """Edges with what ends them, the slope there, and how far off they may be. Raises CasesUsedUp.

        The margin is continuous, so an edge lies between the nearest cases that are decided; some more are looked at on
        either side where the slope lets them be. Where cases went on failing beside an edge it is known to lie between
        two that did not.
        """
        samples = self.samples
        roots = sorted([*self.roots, *((low, low, high) for low, high in self._open_brackets())])
        if not roots:
            return []
        root, low, high = np.array(roots).T
        step = SLOPE_STEP * (high - low)
        sides = np.maximum(root - step, low), np.minimum(root + step, high)
        samples.look(np.concatenate([root, *sides]))
        at, before, after = samples.at(root), samples.at(sides[0]), samples.at(sides[1])
        limits = self._nearest_limits(at, before, after)
        values = [samples.values[place, limits] for place in (before, at, after)]
        slopes = (values[2] - values[0]) / (sides[1] - sides[0])
        with np.errstate(divide="ignore", invalid="ignore"):
            # What the values are off by, and how slopes to either side differ, which is more than their mean is off.
            slope_errors = (samples.bounds[before, limits] + samples.bounds[after, limits]) / (sides[1] - sides[0])
            slope_errors += np.abs(
                (values[2] - values[1]) / (sides[1] - root) - (values[1] - values[0]) / (root - sides[0])
            )
            rooms = samples.bounds[at, limits] / np.abs(slopes) + np.spacing(np.abs(root))
        rooms[np.isnan(rooms)] = 0.0
        places = [np.clip(root + sign * far * rooms, low, high) for far in PROOF_AT for sign in (-1, 1)]
        samples.look(np.concatenate(places))
        edges = []
        for index, number in enumerate(root):
            ends = self._decided_around(*roots[index])
            off = max(number - ends[0], ends[1] - number)
            is_told = np.isfinite(slope_errors[index])
            slope = (float(slopes[index]), float(slope_errors[index])) if is_told else (None, None)
            edges.append(Edge("limit", float(number), float(off), int(limits[index]), *slope))
        return edges

    def _nearest_limits(
        self, at: NDArray[np.intp], before: NDArray[np.intp], after: NDArray[np.intp]
    ) -> NDArray[np.intp]:
        """The limit of each root that is passed nearest to it, by its margin there and how fast that changes.

        Not by the least margin in parts of the scale, which says little where results change by decades.
        """
        samples = self.samples
        widths = samples.numbers[after] - samples.numbers[before]
        with np.errstate(divide="ignore", invalid="ignore"):
            rates = np.abs(samples.margins[after] - samples.margins[before]) / widths[:, None]
            away = np.abs(samples.margins[at]) / rates
        # What does not change, or has no value beside the root, is told by its margin alone.
        away = np.where(np.isnan(away), np.inf, away)
        by_margin = np.array([samples.binding(index) for index in at])
        return np.where(np.isfinite(away).any(axis=1), np.argmin(away, axis=1), by_margin)

    def as_known(self) -> list[Edge]:
        """Edges without a further case: each at its nearest case that holds, and off by the width of its bracket."""
        samples = self.samples
        edges = []
        for root, low, high in sorted([*self.roots, *((low, low, high) for low, high in self._open_brackets())]):
            before, after = self._decided_around(root, low, high)
            number = before if samples.signs[np.searchsorted(samples.numbers, before)] == 1 else after
            limit = samples.binding(int(np.searchsorted(samples.numbers, number)))
            edges.append(Edge("limit", number, after - before, limit))
        return edges

    def _decided_around(self, root: float, low: float, high: float) -> tuple[float, float]:
        """The nearest cases on either side of a root, or at it, that are decided differently."""
        numbers, signs = self.samples.numbers, self.samples.signs
        decided = numbers[signs != 0]
        below, above = decided[decided <= root], decided[decided >= root]
        pairs = [(below[-1], above[0])] if below.size and above.size else []
        if pairs and below[-1] == above[0]:
            # Decided at the root itself: the edge lies to one side of it.
            pairs = [(below[-2], root)] if below.size > 1 else []
            pairs += [(root, above[1])] if above.size > 1 else []
        for before, after in pairs:
            if low <= before and after <= high:
                ends = signs[np.searchsorted(numbers, (before, after))]
                if ends[0] != ends[1]:
                    return float(before), float(after)
        return low, high

    def _open_brackets(self) -> list[tuple[float, float]]:
        """Neighbours within a stretch that are decided differently, without a root between them yet.

        Undecided ones between them are left out.
        """
        found = []
        for first, last in self.samples.stretches():
            signs, numbers = self.samples.signs[first : last + 1], self.samples.numbers[first : last + 1]
            for before, after in pairwise(np.flatnonzero(signs)):
                low, high = float(numbers[before]), float(numbers[after])
                is_open = not any(low <= root <= high for root, _, _ in self.roots)
                found += [(low, high)] if signs[before] != signs[after] and is_open else []
        return found


def narrow_invalid(samples: Samples) -> None:
    """Halve steps of which one end failed, so that it is known where cases begin to fail. Raises CasesUsedUp."""
    widest = HALVED * np.diff(samples.numbers).max(initial=0.0)
    # A range that reaches to zero or beyond has no parts of the number to go by.
    is_relative = samples.numbers[0] > 0.0
    for _ in range(HALVINGS):
        ends = samples.numbers[:-1], samples.numbers[1:]
        between = samples.usable[:-1] != samples.usable[1:]
        wide = between & (ends[1] - ends[0] > (np.minimum(widest, HALVED * ends[1]) if is_relative else widest))
        if not wide.any():
            break
        samples.look(0.5 * (ends[0] + ends[1])[wide])
