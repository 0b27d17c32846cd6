"""Places a question names: grids, points, parts of faces and planes, each checked to lie in the body."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.faces import AXES, Face, axes_along, axis_of
from service.core.maps import Rectangle
from service.core.problem import Body
from service.models import evaluate as models
from service.models.face_maps import AxisIntervals
from service.refusals import Path
from service.settings import Settings
from service.translation.collector import Collector
from service.translation.extent import AxisExtent
from service.translation.face_maps import FaceReader
from service.translation.problem import ReadProblem, endless_in_words
from service.units import Kind

FloatArray = NDArray[np.float64]
Corner = tuple[float, float, float]

# More interfaces than these are counted but not listed in a sentence.
INTERFACES_LISTED = 8


@dataclass(frozen=True)
class GridPlaces:
    """A rectilinear grid. axes: places along x, y and z. sides: the same on the wanted side of interfaces."""

    name: str | None
    axes: tuple[FloatArray, FloatArray, FloatArray]
    sides: tuple[FloatArray, FloatArray, FloatArray]

    @property
    def shape(self) -> tuple[int, int, int]:
        """Number of places along x, y and z."""
        return self.axes[0].size, self.axes[1].size, self.axes[2].size


@dataclass(frozen=True)
class NamedPoint:
    """One place. z: its height, just above it where the upper side of an interface is meant."""

    name: str | None
    at: tuple[float, float, float]
    z: float

    @property
    def place(self) -> tuple[float, float, float]:
        """What the solver is asked for."""
        return self.at[0], self.at[1], self.z


@dataclass(frozen=True)
class InterfacePlaces:
    """Places on an interface of a stack. number: of the layer above it. at: shape (n_places, 2)."""

    name: str | None
    number: int
    at: FloatArray


@dataclass(frozen=True)
class FacePart:
    """A face or a rectangle of it. patch: number of the patch it is, if it is one."""

    name: str | None
    face: Face
    patch: int | None
    where: Rectangle | None


@dataclass(frozen=True)
class PlanePart:
    """A plane square to an axis (0, 1, 2) at a position, or a rectangle of it."""

    name: str | None
    axis: int
    position: float
    where: Rectangle | None


def layer_name(body: Body, index: int) -> str:
    """The name of a layer, or its number from 0."""
    return body.layers[index].name or str(index)


def interface_names(body: Body) -> list[str]:
    """The interfaces of a stack by the layers below and above each, from below."""
    return [f"{layer_name(body, upper - 1)}/{layer_name(body, upper)}" for upper in range(1, len(body.layers))]


class PlaceReader:
    """Reads the places of one question, noting with its path each that lies outside the body."""

    def __init__(self, collector: Collector, settings: Settings, problem: ReadProblem) -> None:
        self.collector = collector
        self.settings = settings
        self.problem = problem
        self.extents = problem.extents

    def grid(self, grid: models.Grid, path: Path) -> GridPlaces:
        """The places of a grid."""
        x, y = self._axis(grid.x, 0, (*path, "x")), self._axis(grid.y, 1, (*path, "y"))
        if isinstance(grid.z, models.LayerAxis):
            z, inside = self._through_layer(grid.z, (*path, "z"))
            if grid.side is not None:
                self.collector.add((*path, "side"), "Places through a layer lie in it; leave `side` out.", "side")
        else:
            z = self._axis(grid.z, 2, (*path, "z"))
            inside = self._on_side(z, grid.side, path)
        return GridPlaces(grid.name, (x, y, z), (x, y, inside))

    def point(self, point: models.Point, path: Path) -> NamedPoint:
        """The place of a point."""
        at = [self._inside(value, axis, (*path, "at", axis)) for axis, value in enumerate(point.at)]
        z = self._on_side(np.array(at[2:]), point.side, path)
        return NamedPoint(point.name, (at[0], at[1], at[2]), float(z[0]))

    def interface(self, asked: models.Interface, path: Path) -> InterfacePlaces | None:
        """Places on an interface; None when there is no such interface, which is then noted."""
        names = interface_names(self.problem.body)
        at = [
            [self._inside(value, axis, (*path, "at", index, axis)) for axis, value in enumerate(place)]
            for index, place in enumerate(asked.at)
        ]
        for number, name in enumerate(names, start=1):
            if asked.interface in (number, name):
                return InterfacePlaces(asked.name, number, np.array(at))
        listed = ", ".join(f'{number} ("{name}")' for number, name in enumerate(names[:INTERFACES_LISTED], start=1))
        more = f" and {len(names) - INTERFACES_LISTED} more" if len(names) > INTERFACES_LISTED else ""
        has = f"the stack has {listed}{more}" if names else "the body is of one piece"
        self.collector.add((*path, "interface"), f"There is no such interface; {has}.", "no-such-interface")
        return None

    def face_part(self, part: models.FacePart, path: Path) -> FacePart | None:
        """A face, one of its patches or a rectangle of it; None when it is none of these, which is then
        noted.
        """
        face = part.face
        if not self.is_present(face, (*path, "face")):
            return None
        has_intervals = any(interval is not None for interval in (part.x, part.y, part.z))
        if part.patch is not None:
            if has_intervals:
                self.collector.add((*path, "patch"), "Give either a patch or intervals along the axes.", "one-of")
                return None
            return self._patch(part, face, (*path, "patch"))
        if not has_intervals:
            return FacePart(part.name, face, None, None)
        where = FaceReader(self.collector, self.settings, face, self.extents).rectangle(part, path)
        if where is None or not self._rectangle_fits(where, axes_along(face), path):
            return None
        return FacePart(part.name, face, None, where)

    def is_present(self, face: Face, path: Path) -> bool:
        """Whether the body has the face; noted when it has not."""
        if face in self.problem.body.present_faces:
            return True
        extent = self.extents[axis_of(face)]
        self.collector.add(path, f"{endless_in_words(extent, face)} has no face {face}.", "no-such-face")
        return False

    def is_endless(self, part: FacePart) -> bool:
        """Whether the part reaches without end along the body."""
        if part.where is None:
            return any(math.isinf(self.extents[axis].high) for axis in axes_along(part.face))
        return math.isinf(part.where.area)

    def plane(self, plane: models.Plane, path: Path) -> PlanePart | None:
        """A plane or a rectangle of it; None when it is neither, which is then noted."""
        given = {axis: getattr(plane, axis) for axis in AXES}
        fixed = [axis for axis, value in given.items() if value is not None and not isinstance(value, list)]
        if len(fixed) != 1:
            detail = 'Give one length along exactly one axis, such as {"z": 20}; intervals along the others are free.'
            self.collector.add(path, detail, "plane")
            return None
        axis = AXES.index(fixed[0])
        position = self._inside(given[fixed[0]], axis, (*path, fixed[0]))
        along = axes_along(axis)
        if all(given[AXES[other]] is None for other in along):
            return PlanePart(plane.name, axis, position, None)
        ends: list[float] = []
        for other in along:
            interval = given[AXES[other]]
            extent = self.extents[other]
            ends.extend(
                (extent.low, extent.high)
                if interval is None
                else self.collector.read_interval(interval, extent, (*path, AXES[other]))
            )
        where = Rectangle(*ends)
        return PlanePart(plane.name, axis, position, where) if self._rectangle_fits(where, along, path) else None

    def _axis(self, places: float | str | list[float | str] | models.EvenAxis, axis: int, path: Path) -> FloatArray:
        if isinstance(places, models.EvenAxis):
            first = self._inside(places.from_, axis, (*path, "from"))
            last = self._inside(places.to, axis, (*path, "to"))
            if last <= first:
                self.collector.add(path, "`to` has to be greater than `from`.", "order")
            return np.linspace(first, last, places.count)
        if isinstance(places, list):
            values = [self._inside(value, axis, (*path, index)) for index, value in enumerate(places)]
            if (np.diff(values) <= 0).any():
                self.collector.add(path, "The places have to increase.", "order")
            return np.array(values)
        return np.array([self._inside(places, axis, path)])

    def box(self, intervals: AxisIntervals, path: Path) -> tuple[Corner, Corner] | None:
        """Opposite corners of a box, from side to side along axes that are left out; None when it is none, which is
        then noted.
        """
        noted = len(self.collector.issues)
        ends = [(extent.low, extent.high) for extent in self.extents]
        for axis, name in enumerate(AXES):
            interval = getattr(intervals, name)
            if interval is not None:
                ends[axis] = self.collector.read_interval(interval, self.extents[axis], (*path, name))
                self._fits(axis, *ends[axis], path)
        (x_low, x_high), (y_low, y_high), (z_low, z_high) = ends
        return ((x_low, y_low, z_low), (x_high, y_high, z_high)) if len(self.collector.issues) == noted else None

    def layer(self, reference: int | str, path: Path) -> int | None:
        """The number of a layer of a stack; None when there is no such layer, which is then noted."""
        layers = self.problem.body.layers
        for index, layer in enumerate(layers):
            if reference in (index, layer.name):
                return index
        has = f"has the layers 0 to {len(layers) - 1}" if layers else "has no layers"
        self.collector.add(path, f"There is no such layer; the body {has}.", "no-such-layer")
        return None

    def sides_of_layer(self, index: int) -> tuple[float, float]:
        """The heights of a layer's lower and upper side."""
        sides = (0.0, *self.extents[2].interfaces, self.extents[2].high)
        return sides[index], sides[index + 1]

    def _through_layer(self, asked: models.LayerAxis, path: Path) -> tuple[FloatArray, FloatArray]:
        """Heights through a layer, as they are shown and as the solver is asked for them."""
        index = self.layer(asked.layer, (*path, "layer"))
        if index is None:
            return np.zeros(1), np.zeros(1)
        shown = np.linspace(*self.sides_of_layer(index), asked.count)
        inside = shown.copy()
        if index:
            inside[0] = np.nextafter(inside[0], math.inf)
        return shown, inside

    def _inside(self, value: float | str, axis: int, path: Path) -> float:
        """A coordinate of the closed body."""
        extent = self.extents[axis]
        place = self.collector.read_place(value, extent, path)
        if place < extent.low or place > extent.high:
            shown = self.problem.units.show(Kind.LENGTH, value)
            self.collector.add(
                path,
                f"{AXES[axis]} = {shown} lies outside the body, which reaches {self._reach(extent)}.",
                "outside-body",
            )
        return place

    def _reach(self, extent: AxisExtent) -> str:
        if math.isinf(extent.high):
            return "from 0 without end"
        return f"from 0 to {self.problem.units.show(Kind.LENGTH, extent.high)}"

    def _on_side(self, z: FloatArray, side: models.Side | None, path: Path) -> FloatArray:
        """Heights as the solver is asked for them: what lies on an interface is below it unless moved above."""
        if side is None:
            return z
        on_interface = np.isin(z, self.extents[2].interfaces)
        if not on_interface.any():
            detail = "None of the places lies on an interface between layers; leave `side` out."
            self.collector.add((*path, "side"), detail, "side")
        return np.where(on_interface, np.nextafter(z, math.inf), z) if side == "above" else z

    def _rectangle_fits(self, where: Rectangle, along: tuple[int, int], path: Path) -> bool:
        ends = ((where.p_low, where.p_high), (where.q_low, where.q_high))
        fits = [self._fits(axis, *interval, path) for axis, interval in zip(along, ends, strict=True)]
        return all(fits)

    def _fits(self, axis: int, low: float, high: float, path: Path) -> bool:
        """Whether an interval lies in the body; noted when it does not."""
        extent = self.extents[axis]
        if extent.low <= low < high <= extent.high:
            return True
        self.collector.add(
            (*path, AXES[axis]),
            f"The interval from {low:g} to {high:g} has to have a positive extent and lie between "
            f"{extent.low:g} and {extent.high:g}.",
            "outside-body",
        )
        return False

    def _patch(self, part: models.FacePart, face: Face, path: Path) -> FacePart | None:
        patches = self.problem.patches.get(face, ())
        for index, patch in enumerate(patches):
            if part.patch in (index, patch.name):
                return FacePart(part.name or patch.name, face, index, patch.where)
        has = f"has the patches 0 to {len(patches) - 1}" if patches else "has no patches"
        self.collector.add(path, f"There is no such patch; the face {face} {has}.", "no-such-patch")
        return None
