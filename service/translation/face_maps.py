"""Data of a face: one value, patches, readings or a formula as a client writes them to the solver's maps."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from service.core import errors, formula, formula_map, maps
from service.core.faces import AXES, Face, axes_along
from service.models.face_maps import AxisIntervals, FaceData, FormulaMap, PatchesMap, SamplesMap
from service.models.face_maps import Patch as PatchModel
from service.number_range import LARGEST_NUMBER
from service.refusals import Path
from service.settings import Settings
from service.translation.collector import UNREAD, Collector
from service.translation.extent import Extents
from service.translation.readings import Readings, ReadingsError, fill_smoothly, readings_of_csv
from service.units import Kind

# More places than these are counted but not listed in a sentence.
PLACES_LISTED = 5


@dataclass(frozen=True)
class NamedPatch:
    """A patch of a face as questions refer to it."""

    name: str | None
    where: maps.Rectangle


@dataclass(frozen=True)
class FaceContents:
    """What was read of one face: its map, its patches, and how many missing readings were filled."""

    face_map: maps.FaceMap
    patches: tuple[NamedPatch, ...] = ()
    filled: int = 0


class FaceReader:
    """Reads the data of one face.

    extents: of the body's axes in the declared unit.
    """

    def __init__(self, collector: Collector, settings: Settings, face: Face, extents: Extents) -> None:
        self.collector = collector
        self.settings = settings
        self.face = face
        first, second = axes_along(face)
        self.axes = (AXES[first], AXES[second])
        self.along = (extents[first], extents[second])
        self.extent = (extents[first].high, extents[second].high)
        self.begins = (extents[first].low, extents[second].low)

    def read(self, kind: Kind, data: FaceData, path: Path) -> FaceContents | None:
        """The solver's map of the data, or None when something was wrong, which is then noted."""
        noted = len(self.collector.issues)
        try:
            if isinstance(data, PatchesMap):
                contents = self._patches(kind, data, path)
            elif isinstance(data, SamplesMap):
                contents = self._samples(kind, data, path)
            elif isinstance(data, FormulaMap):
                contents = self._formula(kind, data)
            elif isinstance(data, float | str):
                value = self.collector.read(kind, data, path)
                contents = None if math.isnan(value) else FaceContents(maps.FaceMap.uniform(value))
            else:
                raise TypeError(f"no reader for {type(data).__name__}")
        except errors.NotPhysical as error:
            self.collector.add_core_error(path, self._in_words_of_request(error, data))
            return None
        if contents is not None and kind is Kind.POTENTIAL and isinstance(data, SamplesMap | FormulaMap):
            lowest = contents.face_map.lowest
            if self.collector.units.is_too_low(lowest):
                what = f"The data go down to {self.collector.units.show(kind, lowest)}"
                self.collector.add(path, self.collector.too_low(what), "absolute-zero")
        return contents if len(self.collector.issues) == noted else None

    def rectangle(self, intervals: AxisIntervals, path: Path) -> maps.Rectangle | None:
        """The rectangle that intervals along the two axes of the face cut, or None when they do not."""
        noted = len(self.collector.issues)
        ends: list[float] = []
        for axis in AXES:
            interval = getattr(intervals, axis)
            if axis not in self.axes:
                if interval is not None:
                    detail = f"The face {self.face} has no extent along {axis}; leave {axis} out."
                    self.collector.add((*path, axis), detail, "axis")
            elif interval is None:
                detail = f"An interval along {axis} is required on the face {self.face}, from and to."
                self.collector.add((*path, axis), detail, "missing")
            else:
                extent = self.along[self.axes.index(axis)]
                ends.extend(self.collector.read_interval(interval, extent, (*path, axis)))
        if len(self.collector.issues) > noted or any(math.isnan(end) for end in ends):
            return None
        return maps.Rectangle(*ends)

    def _patches(self, kind: Kind, data: PatchesMap, path: Path) -> FaceContents | None:
        if len(data.patches) > self.settings.patches:
            detail = f"There are {len(data.patches)} patches; at most {self.settings.patches} are allowed on a face."
            self.collector.add((*path, "patches"), detail, "too-many")
            return None
        background = self.collector.read(kind, data.background, (*path, "background"))
        patches, named = [], []
        for index, patch in enumerate(data.patches):
            here: Path = (*path, "patches", index)
            where = self.rectangle(patch, here)
            value = self._value_of_patch(kind, patch, where, here)
            self._check_name(data.patches[:index], patch, here)
            if where is not None and not math.isnan(value):
                patches.append(maps.Patch(where, value))
                named.append(NamedPatch(patch.name, where))
        if len(patches) < len(data.patches) or math.isnan(background) or self._has_unread_extent():
            return None
        return FaceContents(maps.FaceMap.patches(self.extent, background, patches, begins=self.begins), tuple(named))

    def _value_of_patch(self, kind: Kind, patch: PatchModel, where: maps.Rectangle | None, path: Path) -> float:
        """The value on a patch; the density of the flow where that is given as a total."""
        if patch.flow is not None and kind is not Kind.FLUX:
            self.collector.add((*path, "flow"), "Only a face with the condition flux takes a total flow.", "one-of")
            return UNREAD
        if patch.flow is None and patch.value is None:
            detail = "This field is required." if kind is not Kind.FLUX else "Give either `value` or `flow`."
            self.collector.add((*path, "value"), detail, "missing")
            return UNREAD
        if patch.flow is None:
            assert patch.value is not None
            return self.collector.read(kind, patch.value, (*path, "value"))
        if patch.value is not None:
            self.collector.add((*path, "flow"), "Give either `value` or `flow`, not both.", "one-of")
            return UNREAD
        flow = self.collector.read(Kind.FLOW, patch.flow, (*path, "flow"))
        if where is None:
            return UNREAD
        if not math.isfinite(where.area):
            detail = "A flow cannot be spread over a patch without end; give `value`, the flow per area."
            self.collector.add((*path, "flow"), detail, "endless")
            return UNREAD
        # An empty patch is refused with a sentence of its own.
        return flow / where.area if where.area else 0.0

    def _check_name(self, before: list[PatchModel], patch: PatchModel, path: Path) -> None:
        if patch.name is not None and any(patch.name == other.name for other in before):
            self.collector.add((*path, "name"), "Another patch of this face has the same name.", "repeated")

    def _samples(self, kind: Kind, data: SamplesMap, path: Path) -> FaceContents | None:
        readings = self._table(data, path)
        if readings is None:
            return None
        if readings.table.size > self.settings.readings:
            detail = (
                f"There are {readings.table.size} readings; at most {self.settings.readings} are allowed on a face."
            )
            self.collector.add(path, detail, "too-many")
            return None
        missing = int(np.isnan(readings.table).sum())
        if missing and data.fill_missing is None:
            self._refuse_missing(readings, missing, path)
            return None
        if missing:
            self._check_increasing(readings)
            try:
                readings = fill_smoothly(readings)
            except ReadingsError as error:
                self.collector.add(path, str(error), "readings")
                return None
        if self._has_unread_extent():
            return None
        # Bare readings are in the declared unit; the solver wants its own.
        factor = self.collector.units.read(kind, 1.0)
        face_map = maps.FaceMap.readings(
            self.extent,
            readings.first_axis,
            readings.second_axis,
            (readings.table * factor).tolist(),
            extend=data.beyond == "hold",
            begins=self.begins,
        )
        return FaceContents(face_map, filled=missing)

    def _formula(self, kind: Kind, data: FormulaMap) -> FaceContents | None:
        expression = formula.read(data.expression, self.axes)
        if self._has_unread_extent():
            return None
        # Bare numbers of a formula are in the declared units; the solver wants its own.
        factor = self.collector.units.read(kind, 1.0)
        face_map = formula_map.of_formula(self.extent, expression, factor, begins=self.begins)
        largest = max(abs(face_map.lowest), abs(face_map.highest)) / abs(factor)
        if largest > LARGEST_NUMBER:
            raise errors.NotPhysical(
                f"The formula reaches {largest:.3g} in size; no number may be larger than {LARGEST_NUMBER:g}."
            )
        return FaceContents(face_map)

    def _table(self, data: SamplesMap, path: Path) -> Readings | None:
        """Axes and readings, NaN where one is missing."""
        if data.csv is not None:
            try:
                return readings_of_csv(data.csv)
            except ReadingsError as error:
                self.collector.add((*path, "csv"), str(error), "readings")
                return None
        noted = len(self.collector.issues)
        places: list[list[float]] = []
        for axis in AXES:
            values = getattr(data, axis)
            if axis not in self.axes:
                if values is not None:
                    detail = f"The face {self.face} has no extent along {axis}; leave {axis} out."
                    self.collector.add((*path, axis), detail, "axis")
            elif values is None:
                detail = f"The places of the readings along {axis} are required on the face {self.face}."
                self.collector.add((*path, axis), detail, "missing")
            else:
                extent = self.along[self.axes.index(axis)]
                places.append([self.collector.read_place(v, extent, (*path, axis, i)) for i, v in enumerate(values)])
        assert data.table is not None
        if len(self.collector.issues) > noted or not self._check_shape(data.table, places, path):
            return None
        rows = [[np.nan if entry is None else entry for entry in row] for row in data.table]
        return Readings(places[0], places[1], np.array(rows, dtype=float))

    def _check_shape(self, table: list[list[float | None]], places: list[list[float]], path: Path) -> bool:
        if len(table) != len(places[0]) or not table:
            detail = (
                f"The table has {len(table)} rows; it needs one for each of the {len(places[0])} places "
                f"along {self.axes[0]}."
            )
            self.collector.add((*path, "table"), detail, "shape")
            return False
        for index, row in enumerate(table):
            if len(row) != len(places[1]):
                detail = (
                    f"The row has {len(row)} readings; it needs one for each of the {len(places[1])} places "
                    f"along {self.axes[1]}."
                )
                self.collector.add((*path, "table", index), detail, "shape")
                return False
        return True

    def _check_increasing(self, readings: Readings) -> None:
        for axis, name in ((readings.first_axis, self.axes[0]), (readings.second_axis, self.axes[1])):
            if len(axis) < 2 or (np.diff(axis) <= 0).any():
                raise errors.NotPhysical("An axis of readings needs at least two places in increasing order.", (name,))

    def _refuse_missing(self, readings: Readings, missing: int, path: Path) -> None:
        places = [
            f"({readings.first_axis[row]:g}, {readings.second_axis[column]:g})"
            for row, column in np.argwhere(np.isnan(readings.table))[:PLACES_LISTED]
        ]
        more = f" and {missing - len(places)} more" if missing > len(places) else ""
        self.collector.add(
            path,
            f"Readings are missing at ({self.axes[0]}, {self.axes[1]}) = {', '.join(places)}{more}; complete "
            "them, or "
            'have them filled with "fill_missing": "smooth".',
            "missing-reading",
        )

    def _has_unread_extent(self) -> bool:
        return any(math.isnan(length) for length in self.extent)

    def _in_words_of_request(self, error: errors.NotPhysical, data: FaceData) -> errors.NotPhysical:
        """The solver's names of the axes of a table as the names the client wrote."""
        if isinstance(data, FormulaMap):
            return errors.NotPhysical(error.message, ("expression",))
        if isinstance(data, SamplesMap) and data.csv is not None:
            return errors.NotPhysical(error.message, ("csv",))
        names = {"first_axis": self.axes[0], "second_axis": self.axes[1]}
        return errors.NotPhysical(error.message, tuple(names.get(str(part), part) for part in error.field))
