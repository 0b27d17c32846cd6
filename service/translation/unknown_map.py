"""A map whose entries are unknown: where it stands, its axes and entries, and what an analysis is told of it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from service.analysis.smoothing import SmoothMap
from service.core.varying import VaryingSolution
from service.models import calibration as models
from service.refusals import Path
from service.translation.analysis import Prepared
from service.translation.collector import Collector
from service.translation.measures import measure_at, read_measured
from service.translation.numbers import Leaf, NumberInfo, NumberTarget, resolve, value_at
from service.translation.result_reading import Combined
from service.translation.result_units import Measure

# Entries of a map that is looked for: each is a case.
MOST_ENTRIES = 400

# Results that follow the data of faces in proportion where the conductivity does not vary.
PROPORTIONAL = {"potential", "mean", "inflow", "flow"}
ALONG_AN_AXIS = {"gradient", "flux"}

PATH: Path = ("smooth_map",)


@dataclass(frozen=True)
class UnknownMap:
    """A map to be found. axes: places of its entries along two axes of the body, by their names, in order."""

    smooth: SmoothMap
    measure: Measure
    axes: Mapping[str, list[float]]
    infos: tuple[NumberInfo, ...]
    targets: tuple[NumberTarget, ...]


def read_unknown_map(
    collector: Collector,
    asked: models.SmoothMapUnknown,
    others: Sequence[NumberTarget],
    readings: Sequence[models.Reading],
    prepared: Prepared,
) -> UnknownMap | None:
    """The map in the units of the problem; None, and noted, if it cannot be looked for.

    others: what the other unknowns change. readings: of which it is asked whether they follow it in proportion.
    """
    found = _table_at(collector, asked, prepared)
    if found is None:
        return None
    path, axes, table = found
    measure = measure_at((*path, "table"), prepared.problem.units)
    if measure is None or len(path) != 4 or path[:2] != ("problem", "faces"):
        collector.add((*PATH, "map"), "Only a map of a face's data can be looked for.", "no-map")
        return None
    changed = {leaf.path for target in others for leaf in target.leaves}
    if any(leaf[:4] == path for leaf in changed):
        collector.add((*PATH, "map"), "Another unknown changes this map already.", "changed-twice")
        return None
    typical = _read_size(collector, asked.typical, measure, "typical", float(np.abs(table).max()))
    departure = None if asked.departure is None else _read_size(collector, asked.departure, measure, "departure", 0.0)
    if not typical > 0 or (departure is not None and not departure > 0):
        return None
    first, second = (np.array(places) for places in axes.values())
    entries = [(i, j) for i in range(len(first)) for j in range(len(second))]
    affine = not isinstance(prepared.solution, VaryingSolution) and all(
        _follows(prepared, prepared.index_of[reading.result])
        for reading in readings
        if reading.result in prepared.index_of
    )
    return UnknownMap(
        SmoothMap(asked.name, first, second, table, typical, departure, affine),
        measure,
        axes,
        tuple(NumberInfo(f"{asked.name}, {i}, {j}", measure, float(table[i, j])) for i, j in entries),
        tuple(NumberTarget("at", (Leaf((*path, "table", i, j), float(table[i, j])),)) for i, j in entries),
    )


def _table_at(
    collector: Collector, asked: models.SmoothMapUnknown, prepared: Prepared
) -> tuple[Path, dict[str, list[float]], Any] | None:
    """Path, axes and entries of the map."""
    place = (*PATH, "map")
    path = resolve(collector, prepared.document, asked.map, place)
    if path is None:
        return None
    here = value_at(prepared.document, path)
    if not isinstance(here, dict) or here.get("map") != "samples" or "table" not in here:
        detail = f"{asked.map} is no map of `samples` with a `table`; give one whose entries are where to begin."
        collector.add(place, detail, "no-map")
        return None
    table = here["table"]
    if any(entry is None for row in table for entry in row):
        collector.add(place, "Entries of a map that is looked for must not be missing.", "missing")
        return None
    noted = len(collector.issues)
    length = measure_at((*path, "x"), prepared.problem.units)
    assert length is not None
    axes = {
        axis: [read_measured(collector, length, value, (*path, axis, index)) for index, value in enumerate(here[axis])]
        for axis in ("x", "y", "z")
        if axis in here
    }
    entries = np.array(table, dtype=float)
    if entries.size > MOST_ENTRIES:
        detail = f"The map has {entries.size} entries; at most {MOST_ENTRIES} are looked for."
        collector.add(place, detail, "too-many")
    return None if len(collector.issues) > noted else (path, axes, entries)


def _read_size(collector: Collector, given: float | str | None, measure: Measure, key: str, usual: float) -> float:
    """A size greater than zero in the unit of differences; NaN, and noted, if it is none."""
    here = (*PATH, key)
    size = usual if given is None else read_measured(collector, measure.step, given, here)
    if size <= 0:
        detail = "All entries of the table are zero; give a `typical` size." if given is None else (
            f"`{key}` has to be greater than zero."
        )  # fmt: skip
        collector.add(here, detail, "not-positive")
    return size


def _follows(prepared: Prepared, result: int) -> bool:
    """Whether a result is an affine function of the data of faces."""
    wanted = prepared.results.wanted[result]
    if isinstance(wanted, Combined):
        return not wanted.is_ratio and _follows(prepared, wanted.first) and _follows(prepared, wanted.second)
    kind = prepared.results.infos[result].kind
    asked = prepared.document["results"][result]
    return kind in PROPORTIONAL or (kind in ALONG_AN_AXIS and "along" in asked)
