"""Potential and flux density on grids and at points, by the time form, with a bound at every place."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core import map_error, time_error, time_form, time_range
from service.core.errors import AccuracyNotReached, OutsideBody
from service.core.faces import AXES
from service.core.lines.line import SLOPE, VALUE, Drive, Line, Order
from service.core.lines.places import Places, TimeResponse
from service.core.lines.time_response import respond
from service.core.problem import Body
from service.core.singular import has_no_finite_flux, held_edges
from service.core.split import Part
from service.core.time_integral import Integral

FloatArray = NDArray[np.float64]
KeepGoing = Callable[[], None]

# Points are served in runs of so many values of a factor at one time, at least so many points, so that memory stays
# bounded and a computation can be stopped.
VALUES_AT_ONCE, FEWEST_AT_ONCE = 2048, 32

# The flux is computed on a step finer by this factor in error, since it is asked next to edges where it is large.
FLUX_HEADROOM = 1e-3

# Headroom between the error factor aimed at and the sum of absolute values that multiplies it, per part.
SPREAD_HEADROOM = 32.0

# An accuracy is offered in place of one that cannot be met with so much room that it will be met when asked for.
OFFERED = 1.25

# Rounding of the sum of parts and the reference when it is stored, relative to the answer.
STORED = 4e-16


@dataclass(frozen=True, eq=False)
class Grid:
    """Three axes of coordinates whose tensor product is asked for; an axis of one place makes a plane or a line."""

    x: FloatArray
    y: FloatArray
    z: FloatArray

    @property
    def axes(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """The axes in the order x, y, z."""
        return self.x, self.y, self.z

    @property
    def shape(self) -> tuple[int, int, int]:
        """How many places along each axis."""
        return self.x.size, self.y.size, self.z.size


@dataclass(frozen=True, eq=False)
class Field:
    """Answers at places: shape (n_x, n_y, n_z) on a grid, (n,) at points.

    potential, potential_bound: values and a bound that holds at all of them.
    flux: flow per area along x, y, z, shape (3, ...), NaN exactly on a line where it has no finite value.
    flux_bound: bound on each component, the shape of the potential. Both are None where flux was not asked for.
    node_count: nodes of the time form, the most that any part took.
    """

    potential: FloatArray
    potential_bound: float
    flux: FloatArray | None
    flux_bound: FloatArray | None
    node_count: int


@dataclass(frozen=True, eq=False)
class Setting:
    """What the fields of one body are computed from."""

    body: Body
    lines: tuple[Line, Line, Line]
    parts: tuple[Part, ...]
    reference: float
    span: float

    @cached_property
    def map_error(self) -> float:
        """What the field may be off by because maps stand for formulas."""
        return map_error.of_potential(self.body, self.lines)


def on_grid(
    setting: Setting, grid: Grid, *, tolerance: float, with_flux: bool, keep_going: KeepGoing | None = None
) -> Field:
    """Field on the tensor product of three axes.

    tolerance: absolute, in the unit of the potential.
    Raises OutsideBody and AccuracyNotReached.
    """
    check_inside(setting.body, grid.axes)
    places = np.meshgrid(*grid.axes, indexing="ij", sparse=True)
    return _field(setting, grid.axes, places, grid.shape, tolerance, with_flux, keep_going)


def at_points(
    setting: Setting, points: FloatArray, *, tolerance: float, with_flux: bool, keep_going: KeepGoing | None = None
) -> Field:
    """Field at points, shape (n, 3). Raises OutsideBody and AccuracyNotReached."""
    columns = (points[:, 0], points[:, 1], points[:, 2])
    check_inside(setting.body, columns)
    pieces, run = [], points_at_once(setting)
    for start in range(0, points.shape[0], run):
        chunk = [column[start : start + run] for column in columns]
        pieces.append(_field(setting, chunk, chunk, chunk[0].shape, tolerance, with_flux, keep_going))
    return pieces[0] if len(pieces) == 1 else _joined(pieces)


def points_at_once(setting: Setting) -> int:
    """How many points are served in one run."""
    return max(VALUES_AT_ONCE // max((part.columns for part in setting.parts), default=1), FEWEST_AT_ONCE)


def _field(
    setting: Setting,
    columns: Sequence[FloatArray],
    places: Sequence[FloatArray],
    shape: tuple[int, ...],
    tolerance: float,
    with_flux: bool,
    keep_going: KeepGoing | None,
) -> Field:
    """The field on columns of coordinates, read as a tensor product where the shape has three dimensions.

    places: the same coordinates, shaped to broadcast to `shape`.
    """
    tensor = len(shape) == 3
    potential, bound, nodes = _accurate(setting, columns, tolerance, tensor, keep_going)
    edges = held_edges(setting.body, columns, tensor=tensor)
    for edge in edges:
        potential[edge.index] = edge.potential
    if not with_flux:
        return Field(potential, bound, None, None, nodes)
    flux, flux_bound = _flux(setting, columns, tolerance, tensor, keep_going)
    for edge in edges:
        z = columns[2][edge.index[-1]]
        for axis, slope in enumerate(edge.slopes):
            flux[axis][edge.index] = -setting.body.conductivity_at(axis, z) * slope
    flux[:, has_no_finite_flux(setting.body, places, shape)] = np.nan
    return Field(potential, bound, flux, flux_bound, nodes)


def check_inside(body: Body, columns: Sequence[FloatArray]) -> None:
    """Raise OutsideBody for a coordinate that is not in the closed body."""
    for axis, column in enumerate(columns):
        wrong = ~((column >= body.begins[axis]) & (column <= body.size[axis]) & np.isfinite(column))
        if wrong.any():
            index = int(np.argmax(wrong))
            raise OutsideBody(
                f"{AXES[axis]} = {column[index]:g} is outside the body, which reaches from "
                f"{body.begins[axis]:g} to {body.size[axis]:g} along {AXES[axis]}.",
                (AXES[axis], index),
            )


def far_along(setting: Setting, axis: int = 2, *, high: bool = True) -> float:
    """A place along an endless axis beyond which a field that decays shows nothing of its data."""
    line = setting.lines[axis]
    decay = 2 * time_range.CUT * math.sqrt(time_range.settling_time(setting.lines)) / line.scale
    return line.data[1] + decay if high else line.data[0] - decay


def kept_rows() -> time_form.Rows:
    """A function that answers for a line as `respond` does and keeps the answers for parts that share them."""
    kept: dict[tuple[object, ...], TimeResponse] = {}

    def rows(line: Line, drive: Drive, places: Places, times: FloatArray) -> TimeResponse:
        key = (line, drive, places.key, times[0], times[-1], times.size)
        if key not in kept:
            kept[key] = respond(line, drive, places, times)
        return kept[key]

    return rows


def step_for(setting: Setting, tolerance: float) -> float:
    """The step in ln t to begin with for an absolute tolerance."""
    size = SPREAD_HEADROOM * max(setting.span, 1e-300) * max(len(setting.parts), 1)
    return time_error.step_for(max(tolerance, 1e-300) / size)


def _accurate(
    setting: Setting, columns: Sequence[FloatArray], tolerance: float, tensor: bool, keep_going: KeepGoing | None
) -> tuple[FloatArray, float, int]:
    """Potential within the tolerance, its bound and the nodes taken; a finer step where the first is not enough."""
    off = setting.map_error
    if off > 0.5 * tolerance:
        raise AccuracyNotReached(tolerance, OFFERED * 2.0 * off)
    tolerance -= off
    if not setting.parts:
        # Nothing drives the body: it is at the reference level, exactly.
        shape = tuple(column.size for column in columns) if tensor else columns[0].shape
        return np.full(shape, setting.reference), off, 0
    step = step_for(setting, tolerance)
    while True:
        potential, bounds, nodes = _sum_of_parts(
            setting, columns, (VALUE, VALUE, VALUE), step, tensor, keep_going, wanted=tolerance
        )
        bound = _largest(bounds, tensor) + time_range.CUT_ERROR * setting.span
        if potential is not None:
            if setting.reference != 0.0:
                potential += setting.reference
            bound += STORED * max(float(potential.max()), -float(potential.min()))
            if bound <= tolerance:
                return potential, bound + off, nodes
        if step <= time_error.FINEST_STEP:
            raise AccuracyNotReached(tolerance + off, OFFERED * (bound + off))
        step = time_error.step_for(0.5 * time_error.step_error(step) * tolerance / bound)


def _largest(bounds: list[FloatArray], tensor: bool) -> float:
    if tensor:
        return min(float(bound.max()) for bound in bounds)
    return float(bounds[0].max())


def _flux(
    setting: Setting, columns: Sequence[FloatArray], tolerance: float, tensor: bool, keep_going: KeepGoing | None
) -> tuple[FloatArray, FloatArray]:
    shape = tuple(column.size for column in columns) if tensor else columns[0].shape
    flux, flux_bound = np.zeros((3, *shape)), np.zeros(shape)
    step = step_for(setting, FLUX_HEADROOM * tolerance)
    for axis in range(3):
        orders: list[Order] = [VALUE, VALUE, VALUE]
        orders[axis] = SLOPE
        slope, bounds, _ = _sum_of_parts(setting, columns, (orders[0], orders[1], orders[2]), step, tensor, keep_going)
        assert slope is not None
        factor = _conductivity_over_scale(setting.body, setting.lines[axis], axis, columns, tensor)
        flux[axis] = -factor * slope
        if tensor:
            x, y, z = bounds
            bound = np.minimum(np.minimum(x[:, None, None], y[:, None]), z)
        else:
            bound = bounds[0]
        np.maximum(flux_bound, factor * bound, out=flux_bound)
    flux_bound += map_error.of_flux(setting.body, columns, tensor=tensor)
    least = time_range.shortest(setting.lines)
    steepest = max(1 / (line.scale * least) if line.is_endless else line.steepest for line in setting.lines)
    return flux, flux_bound + STORED * np.abs(flux).max(axis=0) + time_range.CUT_ERROR * setting.span * steepest


def _conductivity_over_scale(
    body: Body, line: Line, axis: int, columns: Sequence[FloatArray], tensor: bool
) -> FloatArray | float:
    """Flow per area along an axis for a slope of 1 per scaled length, to broadcast to the field."""
    if axis == 2 or not body.layers:
        return 1 / line.scale
    factor = body.conductivity_at(axis, columns[2]) * line.scale
    return factor[None, None, :] if tensor else factor


def _sum_of_parts(
    setting: Setting,
    columns: Sequence[FloatArray],
    orders: tuple[Order, Order, Order],
    step: float,
    tensor: bool,
    keep_going: KeepGoing | None,
    wanted: float = math.inf,
) -> tuple[FloatArray | None, list[FloatArray], int]:
    """Sum over the parts, its bounds (of each coordinate on a grid, of each point else), and the most nodes taken.

    wanted: a bound that has to be met and needs no sharpening; once it is missed the sum is not finished and None.
    """
    shape = tuple(column.size for column in columns) if tensor else columns[0].shape
    places = [Places(column, order) for column, order in zip(columns, orders, strict=True)]
    total = np.zeros(shape)
    bounds = [np.zeros(column.size) for column in columns] if tensor else [np.zeros(shape)]
    nodes, rows = 0, kept_rows()
    for index, part in enumerate(setting.parts):
        if keep_going is not None:
            keep_going()
        integral = time_form.integrate(setting.lines, part, places, step, rows)
        nodes = max(nodes, integral.node_count)
        share = 0.9 * (wanted - _largest(bounds, tensor)) / (len(setting.parts) - index)
        for bound, more in zip(bounds, _bounds(integral, share, tensor), strict=True):
            bound += more
        if _largest(bounds, tensor) > wanted:
            return None, [bound * (len(setting.parts) / (index + 1)) for bound in bounds], nodes
        answer = time_form.on_grid(integral) if tensor else time_form.at_points(integral)
        total = answer if index == 0 else np.add(total, answer, out=total)
    return total, bounds, nodes


def _bounds(integral: Integral, enough: float, tensor: bool) -> Sequence[FloatArray | float]:
    """Bounds of a part: one for all places where that is enough."""
    if not tensor:
        return [time_error.bound_at_points(integral)]
    if math.isfinite(enough):
        quick = time_error.bound_everywhere(integral)
        if quick <= enough:
            return [quick, quick, quick]
    return time_error.bound_on_grid(integral)


def _joined(pieces: list[Field]) -> Field:
    fluxes = [piece.flux for piece in pieces if piece.flux is not None]
    bounds = [piece.flux_bound for piece in pieces if piece.flux_bound is not None]
    return Field(
        np.concatenate([piece.potential for piece in pieces]),
        max(piece.potential_bound for piece in pieces),
        np.concatenate(fluxes, axis=1) if fluxes else None,
        np.concatenate(bounds) if bounds else None,
        max(piece.node_count for piece in pieces),
    )
