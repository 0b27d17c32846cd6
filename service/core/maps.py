"""Data that vary over a face: sums of products of one-dimensional piecewise linear profiles.

A map f(p, q) over a face with axes p and q (in the order x, y, z) is kept as

    f(p, q) = sum over r of  P_r(p) Q_r(q)

with profiles P_r on common knots. Constant patches over a background and bilinear readings both have this form, and
the solver then needs nothing but the response of one line to one profile. The number of products is the numerical
rank of the table of cell values or readings, found by a singular value decomposition.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.errors import NotPhysical

FloatArray = NDArray[np.float64]

# Singular values below this part of the largest are rounding noise of the decomposition, not data.
RANK_TOLERANCE = 4e-16


@dataclass(frozen=True, eq=False)
class Profiles:
    """Piecewise linear functions of one coordinate that share their knots; they may jump at a knot.

    knots: shape (n_pieces + 1,), increasing, first 0; the last may be infinite if the profiles are constant there.
    left, right: values at the left and right end of each piece, shape (n_pieces, n_profiles).
    """

    knots: FloatArray
    left: FloatArray
    right: FloatArray

    def __post_init__(self) -> None:
        for array in (self.knots, self.left, self.right):
            array.setflags(write=False)

    @property
    def n_profiles(self) -> int:
        """How many functions there are."""
        return self.left.shape[1]

    @property
    def widths(self) -> FloatArray:
        """Length of each piece, shape (n_pieces,)."""
        return np.diff(self.knots)

    @property
    def slopes(self) -> FloatArray:
        """Slope of each piece, shape (n_pieces, n_profiles); zero on an endless piece."""
        return (self.right - self.left) / self.widths[:, None]

    def at(self, coordinates: FloatArray) -> FloatArray:
        """Values, shape (n_points, n_profiles); the mean of both sides exactly on a jump."""
        return 0.5 * (self._from_side(coordinates, "left") + self._from_side(coordinates, "right"))

    def slope_at(self, coordinates: FloatArray) -> FloatArray:
        """Slopes, shape (n_points, n_profiles); the mean of both sides exactly on a knot."""
        slopes = self.slopes
        return 0.5 * (slopes[self._piece(coordinates, "left")] + slopes[self._piece(coordinates, "right")])

    def integrals(self, low: FloatArray, high: FloatArray) -> FloatArray:
        """Integral of each profile over each interval, shape (n_intervals, n_profiles)."""
        total = np.zeros((low.size, self.n_profiles))
        slopes = self.slopes
        for piece in range(self.left.shape[0]):
            start = np.clip(low, self.knots[piece], self.knots[piece + 1])
            stop = np.clip(high, self.knots[piece], self.knots[piece + 1])
            middle = 0.5 * (start + stop) - self.knots[piece] if slopes[piece].any() else np.zeros_like(start)
            values = self.left[piece] + slopes[piece] * middle[:, None]
            # A piece that is zero adds nothing, even over an endless interval.
            with np.errstate(invalid="ignore"):
                total += np.where(values == 0.0, 0.0, values * (stop - start)[:, None])
        return total

    def _piece(self, coordinates: FloatArray, side: str) -> NDArray[np.intp]:
        last = self.left.shape[0] - 1
        position = np.searchsorted(self.knots, coordinates, side="left" if side == "left" else "right")
        return np.clip(position - 1, 0, last)

    def _from_side(self, coordinates: FloatArray, side: str) -> FloatArray:
        piece = self._piece(coordinates, side)
        distance = coordinates - self.knots[piece]
        return np.where(
            (coordinates == self.knots[piece + 1])[:, None],
            self.right[piece],
            self.left[piece] + self.slopes[piece] * distance[:, None],
        )


@dataclass(frozen=True)
class Rectangle:
    """A rectangle in a face: p_low <= p <= p_high, q_low <= q <= q_high, in the face's axes in the order x, y, z."""

    p_low: float
    p_high: float
    q_low: float
    q_high: float

    def overlaps(self, other: Rectangle) -> bool:
        """Whether the two share more than an edge."""
        return (
            max(self.p_low, other.p_low) < min(self.p_high, other.p_high)
            and max(self.q_low, other.q_low) < min(self.q_high, other.q_high)
        )


@dataclass(frozen=True)
class Patch:
    """A constant over a rectangle of a face, in place of the background there."""

    where: Rectangle
    value: float


@dataclass(frozen=True, eq=False)
class FaceMap:
    """Data over a face. Build one with `uniform`, `patches` or `readings`.

    first, second: the profiles along the face's two axes; the map is the sum of the products of their columns.
    extent: lengths of the face the map was made for, or None for a uniform map, which fits every face.
    lowest, highest: range of the data.
    """

    first: Profiles
    second: Profiles
    extent: tuple[float, float] | None
    lowest: float
    highest: float

    @classmethod
    def uniform(cls, value: float) -> FaceMap:
        """The same value everywhere."""
        if not math.isfinite(value):
            raise NotPhysical("A value on a face is not a finite number.")
        knots = np.array([0.0, math.inf])
        ones = np.ones((1, 1))
        return cls(Profiles(knots, value * ones, value * ones), Profiles(knots, ones, ones), None, value, value)

    @classmethod
    def patches(cls, extent: tuple[float, float], background: float, patches: Sequence[Patch]) -> FaceMap:
        """Constant patches over a background.

        extent: lengths of the face along its two axes; the second may be infinite.
        Raises NotPhysical for a patch that is empty, outside the face or over another one.
        """
        _check_patches(extent, patches)
        knots = [
            np.unique([0.0, extent[0], *(p for patch in patches for p in (patch.where.p_low, patch.where.p_high))]),
            np.unique([0.0, extent[1], *(q for patch in patches for q in (patch.where.q_low, patch.where.q_high))]),
        ]
        cells = np.full((knots[0].size - 1, knots[1].size - 1), background)
        for patch in patches:
            rows = slice(*np.searchsorted(knots[0], (patch.where.p_low, patch.where.p_high)))
            columns = slice(*np.searchsorted(knots[1], (patch.where.q_low, patch.where.q_high)))
            cells[rows, columns] = patch.value
        along_first, along_second = _factor(cells)
        return cls(
            Profiles(knots[0], along_first, along_first.copy()),
            Profiles(knots[1], along_second, along_second.copy()),
            extent,
            float(cells.min()),
            float(cells.max()),
        )

    @classmethod
    def readings(
        cls,
        extent: tuple[float, float],
        first_axis: Sequence[float],
        second_axis: Sequence[float],
        table: Sequence[Sequence[float]],
        *,
        extend: bool = False,
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
        along_first, along_second = _factor(values)
        return cls(
            _hats(np.asarray(first_axis, dtype=float), along_first, extent[0], extend, "first_axis"),
            _hats(np.asarray(second_axis, dtype=float), along_second, extent[1], extend, "second_axis"),
            extent,
            float(values.min()),
            float(values.max()),
        )

    @property
    def is_uniform(self) -> bool:
        """Whether the data are the same everywhere."""
        return self.lowest == self.highest

    def at(self, first: FloatArray, second: FloatArray) -> FloatArray:
        """Values on the grid of two axes, shape (first.size, second.size)."""
        return self.first.at(first) @ self.second.at(second).T

    def minus(self, reference: float) -> FaceMap:
        """The same map counted from another zero."""
        if reference == 0.0:
            return self
        if self.is_uniform:
            shifted = FaceMap.uniform(self.lowest - reference)
            return FaceMap(shifted.first, shifted.second, self.extent, shifted.lowest, shifted.highest)
        constant = np.full((self.first.left.shape[0], 1), -reference)
        ones = np.ones((self.second.left.shape[0], 1))
        return FaceMap(
            _beside(self.first, constant),
            _beside(self.second, ones),
            self.extent,
            self.lowest - reference,
            self.highest - reference,
        )

    def check_covers(self, first_length: float, second_length: float, face: str) -> None:
        """Raise NotPhysical unless the map was made for a face of these lengths."""
        if self.extent is not None and self.extent != (first_length, second_length):
            raise NotPhysical(
                f"The map on {face} was made for a face of {self.extent[0]:g} by {self.extent[1]:g}; the face "
                f"measures {first_length:g} by {second_length:g}.",
                ("faces", face),
            )


def _beside(profiles: Profiles, constant: FloatArray) -> Profiles:
    return Profiles(profiles.knots, np.hstack([profiles.left, constant]), np.hstack([profiles.right, constant]))


def _factor(table: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Columns A and B with table = A B^T, as few as the numerical rank of the table asks for (at least one)."""
    if (table == table.flat[0]).all():
        return np.full((table.shape[0], 1), table.flat[0]), np.ones((table.shape[1], 1))
    left, singular, right = np.linalg.svd(table, full_matrices=False)
    rank = max(1, int(np.count_nonzero(singular > RANK_TOLERANCE * max(table.shape) * singular[0])))
    return left[:, :rank] * singular[:rank], right[:rank].T.copy()


def _hats(axis: FloatArray, values: FloatArray, length: float, extend: bool, name: str) -> Profiles:
    """Profiles linear between the places of an axis, held constant from its ends to the edges if allowed."""
    if axis.size < 2 or not np.isfinite(axis).all() or (np.diff(axis) <= 0).any():
        raise NotPhysical("An axis of readings needs at least two places in increasing order.", (name,))
    if axis[0] < 0 or axis[-1] > length:
        raise NotPhysical(
            f"The readings reach from {axis[0]:g} to {axis[-1]:g}; the face reaches from 0 to {length:g}.", (name,)
        )
    if not extend and (axis[0] > 0 or axis[-1] < length):
        raise NotPhysical(
            f"The readings reach from {axis[0]:g} to {axis[-1]:g} but the face from 0 to {length:g}; add readings at "
            "its edges or ask for the outermost readings to be held.",
            (name,),
        )
    if axis[0] > 0:
        axis, values = np.concatenate([[0.0], axis]), np.vstack([values[:1], values])
    if axis[-1] < length:
        axis, values = np.concatenate([axis, [length]]), np.vstack([values, values[-1:]])
    return Profiles(axis, values[:-1].copy(), values[1:].copy())


def _check_patches(extent: tuple[float, float], patches: Sequence[Patch]) -> None:
    for index, patch in enumerate(patches):
        where = patch.where
        if not math.isfinite(patch.value):
            raise NotPhysical(f"The value of patch {index} is not a finite number.", ("patches", index, "value"))
        if not (0 <= where.p_low < where.p_high <= extent[0] and 0 <= where.q_low < where.q_high <= extent[1]):
            raise NotPhysical(
                f"Patch {index} reaches from ({where.p_low:g}, {where.q_low:g}) to ({where.p_high:g}, "
                f"{where.q_high:g}); it has to have a positive extent and lie in the face, which reaches from (0, 0) "
                f"to ({extent[0]:g}, {extent[1]:g}).",
                ("patches", index),
            )
        for other in range(index):
            if where.overlaps(patches[other].where):
                raise NotPhysical(f"Patches {other} and {index} overlap.", ("patches", index))
