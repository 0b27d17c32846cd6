"""Rectangles of a request that have to keep apart, as a function of the numbers."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from service.analysis.evaluations import FloatArray
from service.analysis.rectangles import clearances
from service.core.faces import AXES
from service.models.best_values import Apart
from service.refusals import Path
from service.translation.analysis import Prepared
from service.translation.collector import UNREAD, Collector
from service.translation.measures import measure_of_kind, read_measured
from service.translation.numbers import NumberTarget, resolve, value_at
from service.units import Kind


@dataclass(frozen=True)
class Coordinate:
    """One end of a rectangle. moved: by which number and how, None where none does."""

    base: float
    moved: tuple[int, NumberTarget] | None

    def of(self, cases: FloatArray) -> FloatArray:
        """Its value in cases, shape (n_cases,)."""
        if self.moved is None:
            return np.full(len(cases), self.base)
        number, target = self.moved
        return target.moved(self.base, cases[:, number])


@dataclass(frozen=True)
class Rectangles:
    """Rectangles that keep apart by a gap. ends: of each rectangle along each of their axes, from and to."""

    ends: tuple[tuple[tuple[Coordinate, Coordinate], ...], ...]
    gap: float

    def clearances(self, cases: FloatArray) -> FloatArray:
        """How much farther than the gap each two are apart, shape (n_cases, n_pairs)."""
        places = [[[end.of(cases) for end in axis] for axis in rectangle] for rectangle in self.ends]
        return clearances(np.moveaxis(np.array(places), -1, 0), self.gap)

    def pair(self, index: int) -> list[int]:
        """Which two a clearance is about."""
        first, second = np.triu_indices(len(self.ends), 1)
        return [int(first[index]), int(second[index])]


class ApartReader:
    """Reads what has to keep apart in a request."""

    def __init__(self, collector: Collector, prepared: Prepared, targets: Sequence[NumberTarget]) -> None:
        self._collector = collector
        self._document = prepared.document
        self._length = measure_of_kind(Kind.LENGTH, prepared.problem.units)
        self._moved = {leaf.path: (number, target) for number, target in enumerate(targets) for leaf in target.leaves}

    def read(self, asked: Sequence[Apart]) -> tuple[Rectangles, ...]:
        """All lists of rectangles. Notes what is at fault."""
        return tuple(self._rectangles(apart, ("apart", index)) for index, apart in enumerate(asked))

    def _rectangles(self, apart: Apart, here: Path) -> Rectangles:
        gap = read_measured(self._collector, self._length, apart.gap, (*here, "gap"))
        if gap < 0.0:
            self._collector.add((*here, "gap"), "The gap must not be negative.", "negative")
        rectangles = []
        seen: set[Path] = set()
        axes: tuple[str, ...] | None = None
        for index, pointer in enumerate(apart.rectangles):
            place = (*here, "rectangles", index)
            path = resolve(self._collector, self._document, pointer, place)
            if path is None:
                continue
            if path in seen:
                detail = f"{pointer} stands in this list already; a rectangle cannot keep apart from itself."
                self._collector.add(place, detail, "twice")
            seen.add(path)
            given = value_at(self._document, path)
            own = tuple(axis for axis in AXES if isinstance(given, dict) and isinstance(given.get(axis), list))
            if not own or (axes is not None and own != axes):
                detail = (
                    f"{pointer} has no from and to along the same axes as the others; point to a patch or a source."
                )
                self._collector.add(place, detail if own else f"{pointer} has no from and to along any axis.", "axes")
                continue
            axes = own
            rectangles.append(tuple(self._ends(given[axis], (*path, axis), place) for axis in own))
        return Rectangles(tuple(rectangles), gap)

    def _ends(self, interval: list[Any], path: Path, place: Path) -> tuple[Coordinate, Coordinate]:
        low, high = (self._coordinate(end, (*path, index), place) for index, end in enumerate(interval))
        return low, high

    def _coordinate(self, given: Any, path: Path, place: Path) -> Coordinate:
        if given in ("begin", "end"):
            self._collector.add(place, f'Write "{given}" as a length where rectangles have to keep apart.', "word")
            return Coordinate(UNREAD, None)
        return Coordinate(read_measured(self._collector, self._length, given, path), self._moved.get(path))
