"""What is known on one face as a client writes it, to the solver's condition."""

from __future__ import annotations

import math

from service.core.conditions import Condition, Film, FilmPad, FluxPad, Held, HeldPad, Inflow, Insulated, Mixed, MixedPad
from service.core.faces import Face, axis_of
from service.core.maps import FaceMap, Rectangle
from service.core.problem import SAME_RATIO, Layer
from service.models import faces as models
from service.refusals import Path
from service.settings import Settings
from service.translation.body import Material
from service.translation.collector import UNREAD, Collector
from service.translation.face_maps import FaceContents, FaceReader, NamedPatch
from service.translation.laws import read_radiation
from service.units import Kind


class ConditionReader:
    """Reads the condition of one face of a body."""

    def __init__(self, collector: Collector, settings: Settings, face: Face, material: Material) -> None:
        self.collector = collector
        self.settings = settings
        self.layers = material.layers
        self.is_side_of_stack = bool(material.layers) and axis_of(face) != 2
        self.data = FaceReader(collector, settings, face, material.extents)

    def read(self, condition: models.FaceCondition, path: Path) -> tuple[Condition, FaceContents | None] | None:
        """The solver's condition and the contents of its map; None when something was wrong and was noted."""
        match condition:
            case models.HeldFace():
                read = self.data.read(Kind.POTENTIAL, condition.value, (*path, "value"))
                return None if read is None else (Held(read.face_map), read)
            case models.FluxFace():
                read = self.data.read(Kind.FLUX, condition.inflow, (*path, "inflow"))
                return None if read is None else (Inflow(read.face_map), read)
            case models.FilmFace():
                radiation = read_radiation(self.collector, condition.emissivity, (*path, "emissivity"))
                coefficient = self._film_coefficient(condition, (*path, "coefficient"))
                read = self.data.read(Kind.POTENTIAL, condition.ambient, (*path, "ambient"))
                return None if read is None else (Film(coefficient, read.face_map, radiation), read)
            case models.MixedFace():
                return self._mixed(condition, path)
            case _:
                return Insulated(), None

    def _mixed(self, mixed: models.MixedFace, path: Path) -> tuple[Condition, FaceContents] | None:
        noted = len(self.collector.issues)
        if len(mixed.pads) > self.settings.pads:
            detail = f"There are {len(mixed.pads)} pads; at most {self.settings.pads} are allowed on a face."
            self.collector.add((*path, "pads"), detail, "too-many")
            return None
        solved = sum(not isinstance(pad, models.FluxPad) for pad in mixed.pads)
        if solved > self.settings.solved_pads:
            detail = (
                f"There are {solved} held pads and pads behind films; at most {self.settings.solved_pads} are solved "
                "together. Pads with a given inflow do not count."
            )
            self.collector.add((*path, "pads"), detail, "too-many")
            return None
        background = self._background(mixed.background, (*path, "background"))
        pads, names = [], set()
        for index, pad in enumerate(mixed.pads):
            here: Path = (*path, "pads", index)
            where = self.data.rectangle(pad, here)
            if pad.name is not None and pad.name in names:
                self.collector.add((*here, "name"), "Another pad of this face has the same name.", "repeated")
            names.add(pad.name)
            read = self._pad(pad, where or Rectangle(UNREAD, UNREAD, UNREAD, UNREAD), here)
            if read is not None:
                pads.append(read)
        if len(self.collector.issues) > noted:
            return None
        named = tuple(NamedPatch(pad.name, pad.where) for pad in pads)
        return Mixed(background, tuple(pads)), FaceContents(FaceMap.uniform(0.0), named)

    def _background(
        self, background: models.UniformFlux | models.UniformFilm | models.InsulatedFace, path: Path
    ) -> Inflow | Film | Insulated:
        match background:
            case models.UniformFlux():
                inflow = self.collector.read(Kind.FLUX, background.inflow, (*path, "inflow"))
                return Insulated() if math.isnan(inflow) else Inflow(FaceMap.uniform(inflow))
            case models.UniformFilm():
                coefficient = self._coefficient(background.coefficient, (*path, "coefficient"))
                ambient = self.collector.read(Kind.POTENTIAL, background.ambient, (*path, "ambient"))
                return Insulated() if math.isnan(ambient) else Film(coefficient, FaceMap.uniform(ambient))
            case _:
                return Insulated()

    def _pad(
        self, pad: models.HeldPad | models.FilmPad | models.FluxPad, where: Rectangle, path: Path
    ) -> MixedPad | None:
        """A pad; None when its condition could not be read, which was then noted."""
        if isinstance(pad, models.FilmPad):
            coefficient = self._coefficient(pad.coefficient, (*path, "coefficient"))
            ambient = self.collector.read(Kind.POTENTIAL, pad.ambient, (*path, "ambient"))
            return FilmPad(where, coefficient, ambient, pad.name)
        if isinstance(pad, models.FluxPad):
            return self._flux_pad(pad, where, path)
        if pad.value is not None and pad.flow is not None:
            self.collector.add((*path, "flow"), "Give either `value` or `flow`, not both.", "one-of")
            return None
        if pad.value is not None:
            return HeldPad(where, self.collector.read(Kind.POTENTIAL, pad.value, (*path, "value")), None, pad.name)
        if pad.flow is not None:
            return HeldPad(where, None, self.collector.read(Kind.FLOW, pad.flow, (*path, "flow")), pad.name)
        self.collector.add((*path, "value"), "Give either `value` or `flow`.", "missing")
        return None

    def _flux_pad(self, pad: models.FluxPad, where: Rectangle, path: Path) -> FluxPad | None:
        if pad.inflow is not None and pad.flow is not None:
            self.collector.add((*path, "flow"), "Give either `inflow` or `flow`, not both.", "one-of")
            return None
        if pad.inflow is not None:
            return FluxPad(where, self.collector.read(Kind.FLUX, pad.inflow, (*path, "inflow")), pad.name)
        if pad.flow is not None:
            return FluxPad(where, self.collector.read(Kind.FLOW, pad.flow, (*path, "flow")) / where.area, pad.name)
        self.collector.add((*path, "inflow"), "Give either `inflow` or `flow`.", "missing")
        return None

    def _film_coefficient(self, film: models.FilmFace, path: Path) -> float:
        """The coefficient of a film face, which may be zero where the face radiates."""
        given = film.coefficient
        if film.emissivity is not None and not isinstance(given, list):
            coefficient = self.collector.read(Kind.FILM_COEFFICIENT, given, path)
            if coefficient == 0.0:
                return coefficient
        return self._coefficient(given, path)

    def _coefficient(self, given: models.FilmCoefficient, path: Path) -> float:
        """The coefficient of a film; that beside the first layer on a side of a stack."""
        what = "The film coefficient"
        if not isinstance(given, list):
            coefficient = self.collector.read_positive(Kind.FILM_COEFFICIENT, given, path, what)
            if self.is_side_of_stack and any(abs(self._ratio(layer) - 1.0) > SAME_RATIO for layer in self.layers):
                detail = (
                    "The layers conduct differently along x; give a list with one coefficient beside each layer, in "
                    "proportion to those conductivities."
                )
                self.collector.add(path, detail, "film-of-stack")
            return coefficient
        if not self.is_side_of_stack:
            detail = "A list of coefficients is for the sides of a stack; give one coefficient here."
            self.collector.add(path, detail, "film-of-stack")
            return UNREAD
        if len(given) != len(self.layers):
            detail = f"There are {len(given)} coefficients; one is wanted beside each of the {len(self.layers)} layers."
            self.collector.add(path, detail, "film-of-stack")
            return UNREAD
        beside = [
            self.collector.read_positive(Kind.FILM_COEFFICIENT, value, (*path, index), what)
            for index, value in enumerate(given)
        ]
        for index, (coefficient, layer) in enumerate(zip(beside, self.layers, strict=True)):
            wanted = beside[0] * self._ratio(layer)
            if abs(coefficient - wanted) > SAME_RATIO * wanted:
                self._refuse_ratio(given[index], wanted, index, (*path, index))
        return beside[0]

    def _ratio(self, layer: Layer) -> float:
        """How much better a layer conducts along x than the first one."""
        return layer.conductivity[0] / self.layers[0].conductivity[0]

    def _refuse_ratio(self, given: float | str, wanted: float, index: int, path: Path) -> None:
        units = self.collector.units
        proper = f"{units.write(Kind.FILM_COEFFICIENT, wanted):.12g} {units.declared[Kind.FILM_COEFFICIENT]}"
        self.collector.add(
            path,
            f"The coefficient beside layer {index} is {units.show(Kind.FILM_COEFFICIENT, given)}; in proportion to the "
            f"conductivities along x, as the exact field of a stack needs it, it is {proper}.",
            "film-of-stack",
        )
