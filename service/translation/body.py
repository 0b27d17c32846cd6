"""Size, conductivity and layers of a body as a client writes them, to the solver's numbers."""

from __future__ import annotations

import math
from dataclasses import dataclass

from service.core import ConductivityLaw, Layer
from service.core.faces import AXES
from service.models import problem as models
from service.refusals import Path
from service.settings import Settings
from service.translation.collector import UNREAD, Collector
from service.translation.extent import AxisExtent, Extents
from service.translation.laws import read_law
from service.units import Kind

Conductivities = tuple[float, float, float]


@dataclass(frozen=True)
class Material:
    """What a body is made of. layers: empty for a body of one material. law: how the conductivity varies, or None."""

    extents: Extents
    conductivity: Conductivities
    layers: tuple[Layer, ...] = ()
    law: ConductivityLaw | None = None


def read_material(collector: Collector, settings: Settings, body: models.Body) -> Material:
    """Size and conductivity, or the layers; NaN for what could not be read, which is then noted."""
    size = body.size
    x, y = (_extent(collector, value, axis) for value, axis in ((size.x, "x"), (size.y, "y")))
    if body.layers is None:
        conductivity = _conductivity_of_body(collector, body)
        law = read_law(collector, body.conductivity_law, conductivity[0])
        return Material((x, y, _extent(collector, size.z, "z")), conductivity, law=law)
    for path, value in ((("body", "size", "z"), size.z), (("body", "conductivity"), body.conductivity)):
        if value is not None:
            collector.add(path, f"The layers say this; leave {path[-1]} out.", "one-of")
    layers = _layers(collector, settings, body.layers)
    law = read_law(collector, body.conductivity_law, layers[0].conductivity[0] if layers else UNREAD)
    thicknesses = [layer.thickness for layer in layers]
    z = AxisExtent.of_stack(thicknesses) if layers and all(map(math.isfinite, thicknesses)) else _UNREAD_EXTENT
    return Material((x, y, z), layers[0].conductivity if layers else (UNREAD,) * 3, layers, law)


_UNREAD_EXTENT = AxisExtent(0.0, UNREAD)


def _extent(collector: Collector, value: float | str | None, axis: str) -> AxisExtent:
    path: Path = ("body", "size", axis)
    match value:
        case None:
            collector.add(path, "This field is required, unless `layers` are given.", "missing")
            return _UNREAD_EXTENT
        case "semi-infinite":
            return AxisExtent(0.0, math.inf)
        case "infinite":
            return AxisExtent(-math.inf, math.inf)
        case _:
            return AxisExtent(0.0, collector.read_positive(Kind.LENGTH, value, path, f"The size along {axis}"))


def _conductivity_of_body(collector: Collector, body: models.Body) -> Conductivities:
    path: Path = ("body", "conductivity")
    conductivity, law = body.conductivity, body.conductivity_law
    if conductivity is None and isinstance(law, models.TableLaw) and law.conductivity is not None:
        # What is read here is read once more with the law, which tells what is wrong with it.
        first = Collector(collector.units).read(Kind.CONDUCTIVITY, law.conductivity[0], path)
        return first, first, first
    if conductivity is None:
        collector.add(path, "This field is required, unless `layers` are given.", "missing")
        return UNREAD, UNREAD, UNREAD
    return _conductivity(collector, conductivity, path, "The conductivity")


def _conductivity(collector: Collector, given: models.Conductivity, path: Path, what: str) -> Conductivities:
    """Along x, y and z. what: begins a sentence about it."""
    if isinstance(given, models.AxisConductivities):
        kx, ky, kz = (
            collector.read_positive(Kind.CONDUCTIVITY, value, (*path, axis), f"{what} along {axis}")
            for axis, value in zip(AXES, (given.x, given.y, given.z), strict=True)
        )
        return kx, ky, kz
    if isinstance(given, models.PlaneConductivities):
        plane = collector.read_positive(Kind.CONDUCTIVITY, given.in_plane, (*path, "in_plane"), f"{what} in the plane")
        through = collector.read_positive(
            Kind.CONDUCTIVITY, given.through, (*path, "through"), f"{what} through the plane"
        )
        return plane, plane, through
    value = collector.read_positive(Kind.CONDUCTIVITY, given, path, what)
    return value, value, value


def _layers(collector: Collector, settings: Settings, layers: list[models.Layer]) -> tuple[Layer, ...]:
    path: Path = ("body", "layers")
    if len(layers) > settings.layers:
        collector.add(path, f"There are {len(layers)} layers; at most {settings.layers} are allowed.", "too-many")
        return ()
    names: set[str] = set()
    read = []
    for index, layer in enumerate(layers):
        here: Path = (*path, index)
        if layer.name is not None and layer.name in names:
            collector.add((*here, "name"), "Another layer has the same name.", "repeated")
        names.add(layer.name or "")
        generation = 0.0
        if layer.generation is not None:
            generation = collector.read(Kind.DENSITY, layer.generation, (*here, "generation"))
        read.append(
            Layer(
                _thickness(collector, layer.thickness, (*here, "thickness")),
                _conductivity(collector, layer.conductivity, (*here, "conductivity"), "The conductivity"),
                _contact(collector, layer, here),
                generation,
                layer.name,
            )
        )
    return tuple(read)


def _thickness(collector: Collector, thickness: float | str, path: Path) -> float:
    if thickness in ("semi-infinite", "infinite"):
        detail = (
            "A layer has a finite thickness. Give one that is deep against all the rest, and then a deeper one to see "
            "that it makes no difference; a body of one material can be semi-infinite along z."
        )
        collector.add(path, detail, "endless")
        return UNREAD
    return collector.read_positive(Kind.LENGTH, thickness, path, "The thickness")


def _contact(collector: Collector, layer: models.Layer, here: Path) -> float:
    """Conductance per area between a layer and the one below it; infinite where they are bonded."""
    conductance, resistance = layer.contact_conductance_below, layer.contact_resistance_below
    if conductance is not None and resistance is not None:
        detail = "Give either `contact_conductance_below` or `contact_resistance_below`, not both."
        collector.add((*here, "contact_resistance_below"), detail, "one-of")
        return UNREAD
    if conductance is not None:
        where = (*here, "contact_conductance_below")
        return collector.read_positive(Kind.FILM_COEFFICIENT, conductance, where, "The contact conductance")
    if resistance is not None:
        where = (*here, "contact_resistance_below")
        return collector.read_resistance_of_area(resistance, where, "The contact resistance")
    return math.inf


def path_of_layer(path: Path, body: models.Body) -> Path:
    """The part of a layer that the solver names, as the client's document calls it."""
    index, *rest = path
    if not rest or body.layers is None:
        return ("body", "layers", *path)
    given = body.layers[int(index)]
    contact = "contact" + ("_conductance" if given.contact_resistance_below is None else "_resistance") + "_below"
    words = {"contact_below": contact}
    field: Path = (words.get(str(rest[0]), rest[0]),)
    if rest[0] == "conductivity" and isinstance(given.conductivity, models.AxisConductivities):
        field = tuple(rest)
    return ("body", "layers", index, *field)
