"""Data that vary over a face: sums of products of one-dimensional profiles.

A map f(p, q) over a face with axes p and q (in the order x, y, z) is kept as

    f(p, q) = sum over r of  P_r(p) Q_r(q)

with profiles P_r on common knots. Constant patches over a background, bilinear readings and the curved pieces of a
formula all have this form, and the solver then needs nothing but the response of one line to one profile. The number
of products is the numerical rank of the table of cell values or readings, found by a singular value decomposition.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core.errors import NotPhysical
from service.core.factors import factors_of
from service.core.profiles import DEGREE, Profiles, chebyshev_places

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Rectangle:
    """A rectangle in a face: p_low <= p <= p_high, q_low <= q <= q_high, in the face's axes in the order x, y, z."""

    p_low: float
    p_high: float
    q_low: float
    q_high: float

    @property
    def area(self) -> float:
        """Its area, infinite where it has no end."""
        return (self.p_high - self.p_low) * (self.q_high - self.q_low)

    def overlaps(self, other: Rectangle) -> bool:
        """Whether the two share more than an edge."""
        return max(self.p_low, other.p_low) < min(self.p_high, other.p_high) and max(self.q_low, other.q_low) < min(
            self.q_high, other.q_high
        )

    def lies_in(self, other: Rectangle) -> bool:
        """Whether all of it is in another one."""
        return (
            other.p_low <= self.p_low
            and self.p_high <= other.p_high
            and other.q_low <= self.q_low
            and self.q_high <= other.q_high
        )


@dataclass(frozen=True)
class Patch:
    """A constant over a rectangle of a face, in place of the background there."""

    where: Rectangle
    value: float


@dataclass(frozen=True)
class Peak:
    """Where the data of a formula are highest or lowest, and by how much they may go beyond that value."""

    value: float
    first: float
    second: float
    slack: float


@dataclass(frozen=True, eq=False)
class FaceMap:
    """Data over a face. Build one with `uniform`, `patches`, `readings` or `formula_map.of_formula`.

    first_knots, second_knots: places along the face's two axes, from where an axis begins; the last may be infinite.
    table: a value for each cell between the knots, or for each pair of knots when the data are bilinear; along a
        curved axis for each of `chebyshev_places(knots)`.
    bilinear: whether the values are those at places and not in cells.
    extent: lengths of the face the map was made for, or None for a uniform map, which fits every face.
    begins: where the axes of that face begin, 0 or -infinity.
    usual: the background, or for readings the lowest; the level other faces are likely to share.
    curved: whether the pieces along each axis are curved.
    degree: of the curved pieces, where it is known to be less than DEGREE.
    error: by how much the map may differ from the data it stands for, and slope_error the slopes of both along any
        direction of the face; 0 for data that are the map itself.
    peaks: the lowest and the highest of the data where they are not in the table.
    kinks: places along each axis where the slopes of curved data jump.
    """

    first_knots: FloatArray
    second_knots: FloatArray
    table: FloatArray
    bilinear: bool
    extent: tuple[float, float] | None
    usual: float
    begins: tuple[float, float] = (0.0, 0.0)
    curved: tuple[bool, bool] = (False, False)
    degree: int = DEGREE
    error: float = 0.0
    slope_error: float = 0.0
    peaks: tuple[Peak, Peak] | None = None
    kinks: tuple[tuple[float, ...], tuple[float, ...]] = ((), ())

    @classmethod
    def uniform(cls, value: float) -> FaceMap:
        """The same value everywhere."""
        if not math.isfinite(value):
            raise NotPhysical("A value on a face is not a finite number.")
        knots = np.array([0.0, math.inf])
        return cls(knots, knots, np.full((1, 1), float(value)), False, None, float(value))

    @classmethod
    def patches(
        cls,
        extent: tuple[float, float],
        background: float,
        patches: Sequence[Patch],
        *,
        begins: tuple[float, float] = (0.0, 0.0),
    ) -> FaceMap:
        """Constant patches over a background.

        extent: lengths of the face along its two axes, infinite along an endless one.
        begins: where the axes begin: 0, or -infinity along one without ends.
        Raises NotPhysical for a patch that is empty, outside the face or over another one.
        """
        _check_patches(extent, begins, background, patches)
        ends = [(patch.where.p_low, patch.where.p_high, patch.where.q_low, patch.where.q_high) for patch in patches]
        first = np.unique([begins[0], extent[0], *(p for end in ends for p in end[:2])])
        second = np.unique([begins[1], extent[1], *(q for end in ends for q in end[2:])])
        cells = np.full((first.size - 1, second.size - 1), float(background))
        for patch in patches:
            rows = slice(*np.searchsorted(first, (patch.where.p_low, patch.where.p_high)))
            columns = slice(*np.searchsorted(second, (patch.where.q_low, patch.where.q_high)))
            cells[rows, columns] = patch.value
        return cls(first, second, cells, False, extent, float(background), begins)

    @classmethod
    def readings(
        cls,
        extent: tuple[float, float],
        first_axis: Sequence[float],
        second_axis: Sequence[float],
        table: Sequence[Sequence[float]],
        *,
        extend: bool = False,
        begins: tuple[float, float] = (0.0, 0.0),
    ) -> FaceMap:
        """Bilinear between readings on rectilinear axes.

        table: one row for each place on the first axis, one column for each on the second.
        extend: hold the outermost reading between the end of an axis and the edge of the face; without it the axes
            have to reach from edge to edge.
        Raises NotPhysical when axes do not increase or do not cover the face, or the table has another shape.
        """
        values = np.asarray(table, dtype=float)
        if values.shape != (len(first_axis), len(second_axis)):
            raise NotPhysical(
                f"The table of readings has shape {values.shape}; the axes ask for "
                f"({len(first_axis)}, {len(second_axis)}).",
                ("table",),
            )
        if not np.isfinite(values).all():
            raise NotPhysical("The table of readings has entries that are not finite numbers.", ("table",))
        along_first, along_second = (begins[0], extent[0]), (begins[1], extent[1])
        first, values = _reach_edges(np.asarray(first_axis, dtype=float), values, along_first, extend, "first_axis")
        values = values.T
        second, values = _reach_edges(np.asarray(second_axis, dtype=float), values, along_second, extend, "second_axis")
        return cls(first, second, values.T.copy(), True, extent, float(values.min()), begins)

    @property
    def lowest(self) -> float:
        """Least of the data."""
        return float(self.table.min()) if self.peaks is None else self.peaks[0].value

    @property
    def highest(self) -> float:
        """Greatest of the data."""
        return float(self.table.max()) if self.peaks is None else self.peaks[1].value

    @property
    def is_uniform(self) -> bool:
        """Whether the data are the same everywhere."""
        return self.lowest == self.highest

    @property
    def cell_means(self) -> FloatArray:
        """Mean of the data in each cell between the knots."""
        if any(self.curved):
            first = self.first.integrals(self.first_knots[:-1], self.first_knots[1:]) / self.first.widths[:, None]
            second = self.second.integrals(self.second_knots[:-1], self.second_knots[1:]) / self.second.widths[:, None]
            return first @ second.T
        if not self.bilinear:
            return self.table
        table = self.table
        return 0.25 * (table[1:, 1:] + table[1:, :-1] + table[:-1, 1:] + table[:-1, :-1])

    @property
    def first(self) -> Profiles:
        """Profiles along the first axis; the map is the sum of products of their columns with those of `second`."""
        return self._factors[0]

    @property
    def second(self) -> Profiles:
        """Profiles along the second axis."""
        return self._factors[1]

    @property
    def first_places(self) -> FloatArray:
        """Places of the table along the first axis, of data given at places."""
        return chebyshev_places(self.first_knots) if self.curved[0] else self.first_knots

    @property
    def second_places(self) -> FloatArray:
        """The same along the second axis."""
        return chebyshev_places(self.second_knots) if self.curved[1] else self.second_knots

    @cached_property
    def _factors(self) -> tuple[Profiles, Profiles]:
        counts = self.first_knots.size - 1, self.second_knots.size - 1
        degrees = [self.degree if curved else None for curved in self.curved]
        along_first, along_second = factors_of(self.table, counts, (degrees[0], degrees[1]))
        return (
            self._profiles(self.first_knots, along_first, curved=self.curved[0]),
            self._profiles(self.second_knots, along_second, curved=self.curved[1]),
        )

    def _profiles(self, knots: FloatArray, values: FloatArray, *, curved: bool) -> Profiles:
        if curved:
            return Profiles.through(knots, values)
        if self.bilinear:
            return Profiles(knots, values[:-1].copy(), values[1:].copy())
        return Profiles(knots, values, values.copy())

    def at(self, first: FloatArray, second: FloatArray) -> FloatArray:
        """Values on the grid of two axes, shape (first.size, second.size)."""
        return self.first.at(first) @ self.second.at(second).T

    def minus(self, reference: float) -> FaceMap:
        """The same map counted from another zero."""
        if reference == 0.0:
            return self
        peaks = None
        if self.peaks is not None:
            lowest, highest = (replace(peak, value=peak.value - reference) for peak in self.peaks)
            peaks = lowest, highest
        return replace(self, table=self.table - reference, usual=self.usual - reference, peaks=peaks)

    def times(self, factor: float) -> FaceMap:
        """The map of all values times a factor, without peaks and error; its profiles are not found anew."""
        scaled = replace(self, table=self.table * factor, usual=self.usual * factor, peaks=None, error=0.0)
        values = self.first
        bends = None if values.bends is None else values.bends * factor
        first = Profiles(values.knots, values.left * factor, values.right * factor, bends)
        scaled.__dict__["_factors"] = first, self.second
        return scaled

    def check_covers(
        self, first_length: float, second_length: float, face: str, begins: tuple[float, float] = (0.0, 0.0)
    ) -> None:
        """Raise NotPhysical unless the map was made for a face of these lengths that begins there."""
        if self.extent is None:
            return
        if self.extent == (first_length, second_length) and self.begins != begins:
            raise NotPhysical(
                f"The map on {face} was made for a face that begins at ({self.begins[0]:g}, {self.begins[1]:g}); the "
                f"face begins at ({begins[0]:g}, {begins[1]:g}).",
                ("faces", face),
            )
        if self.extent != (first_length, second_length):
            raise NotPhysical(
                f"The map on {face} was made for a face of {self.extent[0]:g} by {self.extent[1]:g}; the face "
                f"measures {first_length:g} by {second_length:g}.",
                ("faces", face),
            )


def _reach_edges(
    axis: FloatArray, values: FloatArray, ends: tuple[float, float], extend: bool, name: str
) -> tuple[FloatArray, FloatArray]:
    """An axis of readings and its table, rows along the axis, carried to the edges of the face if allowed."""
    if axis.size < 2 or not np.isfinite(axis).all() or (np.diff(axis) <= 0).any():
        raise NotPhysical("An axis of readings needs at least two places in increasing order.", (name,))
    low, high = ends
    if axis[0] < low or axis[-1] > high:
        raise NotPhysical(
            f"The readings reach from {axis[0]:g} to {axis[-1]:g}; the face reaches from {low:g} to {high:g}.", (name,)
        )
    if not extend and (axis[0] > low or axis[-1] < high):
        raise NotPhysical(
            f"The readings reach from {axis[0]:g} to {axis[-1]:g} but the face from {low:g} to {high:g}; add readings "
            "at its edges or ask for the outermost readings to be held.",
            (name,),
        )
    if axis[0] > low:
        axis, values = np.concatenate([[low], axis]), np.vstack([values[:1], values])
    if axis[-1] < high:
        axis, values = np.concatenate([axis, [high]]), np.vstack([values, values[-1:]])
    return axis, values


def _check_patches(
    extent: tuple[float, float], begins: tuple[float, float], background: float, patches: Sequence[Patch]
) -> None:
    if not math.isfinite(background):
        raise NotPhysical("The background is not a finite number.", ("background",))
    for index, patch in enumerate(patches):
        where = patch.where
        if not math.isfinite(patch.value):
            raise NotPhysical(f"The value of patch {index} is not a finite number.", ("patches", index, "value"))
        along_first = begins[0] <= where.p_low < where.p_high <= extent[0]
        along_second = begins[1] <= where.q_low < where.q_high <= extent[1]
        if not (along_first and along_second):
            raise NotPhysical(
                f"Patch {index} reaches from ({where.p_low:g}, {where.q_low:g}) to ({where.p_high:g}, "
                f"{where.q_high:g}); it has to have a positive extent and lie in the face, which reaches from "
                f"({begins[0]:g}, {begins[1]:g}) to ({extent[0]:g}, {extent[1]:g}).",
                ("patches", index),
            )
        for other in range(index):
            if where.overlaps(patches[other].where):
                raise NotPhysical(f"Patches {other} and {index} overlap.", ("patches", index))
