"""Functions of one coordinate, polynomials in pieces: what a face's data are along one of its axes."""

from __future__ import annotations

import hashlib
import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

# Degree of the pieces of a curved profile, which passes through the data at the Chebyshev points of each piece.
DEGREE = 7

# Points of Gauss's rule that is exact for a curved piece.
EXACT_POINTS = 4


@dataclass(frozen=True, eq=False)
class Profiles:
    """Functions of one coordinate, linear in pieces or curved, that share their knots; they may jump at a knot.

    knots: shape (n_pieces + 1,), increasing, first 0; the last may be infinite if the profiles are constant there, and
        along an axis without ends the first is -infinity.
    left, right: values at the left and right end of each piece, shape (n_pieces, n_profiles).
    bends: how a curved piece departs from the straight line between its ends: the weight of P_k - P_(k-2) for each
        degree k from 2 on, P_k Legendre's polynomials, shape (n_degrees, n_pieces, n_profiles). None for straight
        pieces; none of the pieces is endless then.
    """

    knots: FloatArray
    left: FloatArray
    right: FloatArray
    bends: FloatArray | None = None

    def __post_init__(self) -> None:
        for array in self._arrays:
            array.setflags(write=False)

    @property
    def _arrays(self) -> list[FloatArray]:
        straight = [self.knots, self.left, self.right]
        return straight if self.bends is None else [*straight, self.bends]

    @classmethod
    def through(cls, knots: FloatArray, values: FloatArray) -> Profiles:
        """Curved profiles with these values at `chebyshev_places(knots)`, shape (n_places, n_profiles)."""
        starts = DEGREE * np.arange(knots.size - 1)
        table = values[starts[:, None] + np.arange(DEGREE + 1)]
        ends = table[:, :1] * _NEAR_LEFT[:, None] + table[:, -1:] * _NEAR_RIGHT[:, None]
        bends = np.einsum("kn,pnr->kpr", _BENDS_OF_VALUES, (table - ends)[:, 1:-1])
        return cls(knots, table[:, 0].copy(), table[:, -1].copy(), bends)

    @cached_property
    def digest(self) -> bytes:
        """Fingerprint of the numbers, by which eigen-integrals are cached."""
        content = b"".join(array.tobytes() for array in self._arrays)
        return hashlib.sha256(content + repr([array.shape for array in self._arrays]).encode()).digest()

    def __hash__(self) -> int:
        return hash(self.digest)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Profiles) and self.digest == other.digest

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

    @property
    def is_curved(self) -> bool:
        """Whether the pieces are curved."""
        return self.bends is not None

    @cached_property
    def sizes(self) -> FloatArray:
        """What the size of each profile does not exceed on each piece, shape (n_pieces, n_profiles)."""
        straight = np.maximum(np.abs(self.left), np.abs(self.right))
        return straight if self.bends is None else straight + 2.0 * np.abs(self.bends).sum(axis=0)

    @cached_property
    def legendre(self) -> FloatArray:
        """Weights of Legendre's polynomials on each piece, shape (n_degrees, n_pieces, n_profiles)."""
        straight = np.stack([0.5 * (self.left + self.right), 0.5 * (self.right - self.left)])
        if self.bends is None:
            return straight
        weights = np.concatenate([straight, self.bends])
        weights[: self.bends.shape[0]] -= self.bends
        return weights

    def derivative(self, order: int) -> Profiles:
        """The profiles' derivative of some order along the coordinate, piece by piece."""
        weights = np.polynomial.legendre.legder(self.legendre, order, axis=0) * (2.0 / self.widths[:, None]) ** order
        weights = np.concatenate([weights, np.zeros((max(2 - weights.shape[0], 0), *weights.shape[1:]))])
        bends = weights[2:].copy()
        for k in range(bends.shape[0] - 1, -1, -1):
            if k + 2 < bends.shape[0]:
                bends[k] += bends[k + 2]
        straight = weights[:2].copy()
        for k in range(min(bends.shape[0], 2)):
            straight[k] += bends[k]
        left, right = straight[0] - straight[1], straight[0] + straight[1]
        return Profiles(self.knots, left, right, bends if bends.size else None)

    def only(self, pieces: NDArray[np.bool_]) -> Profiles:
        """The profiles with zero on all other pieces."""
        chosen = pieces[:, None]
        bends = None if self.bends is None else np.where(chosen, self.bends, 0.0)
        return Profiles(self.knots, np.where(chosen, self.left, 0.0), np.where(chosen, self.right, 0.0), bends)

    def on_piece(self, piece: int | NDArray[np.intp], places: FloatArray) -> FloatArray:
        """Values of the polynomials of pieces at places from -1 to 1 in them, shape (*places.shape, n_profiles)."""
        straight = 0.5 * (1 - places[..., None]) * self.left[piece] + 0.5 * (1 + places[..., None]) * self.right[piece]
        if self.bends is None:
            return straight
        return straight + np.einsum("...k,k...r->...r", _bend_shapes(places, self.bends.shape[0]), self.bends[:, piece])

    @cached_property
    def _widths_of_what_is_there(self) -> FloatArray:
        something = self.sizes.any(axis=1)
        return np.where(something, self.widths, math.inf)

    @property
    def narrowest_index(self) -> int:
        """Which piece is the narrowest of those that are not zero."""
        return int(self._widths_of_what_is_there.argmin())

    @cached_property
    def narrowest(self) -> float:
        """Width of the narrowest piece that is not zero, infinite if there is none or it has no end."""
        return float(self._widths_of_what_is_there.min())

    def at(self, coordinates: FloatArray) -> FloatArray:
        """Values, shape (n_points, n_profiles); the mean of both sides exactly on a jump."""
        if self.is_constant:
            return np.repeat(self.left, coordinates.size, axis=0)
        return 0.5 * (self._from_side(coordinates, "left") + self._from_side(coordinates, "right"))

    def slope_at(self, coordinates: FloatArray) -> FloatArray:
        """Slopes, shape (n_points, n_profiles); the mean of both sides exactly on a knot."""
        if self.is_curved:
            return 0.5 * (self.slope_from(coordinates, "left") + self.slope_from(coordinates, "right"))
        slopes = self.slopes
        return 0.5 * (slopes[self._piece(coordinates, "left")] + slopes[self._piece(coordinates, "right")])

    def slope_from(self, coordinates: FloatArray, side: str) -> FloatArray:
        """Slopes of curved profiles from one side of each place, "left" or "right"."""
        piece = self._piece(coordinates, side)
        places = 2.0 * (coordinates - self.knots[piece]) / self.widths[piece] - 1.0
        return self.derivative(1).on_piece(piece, places)

    @cached_property
    def is_constant(self) -> bool:
        """Whether none of the profiles changes along the line."""
        return self.left.shape[0] == 1 and not self.is_curved and bool((self.left == self.right).all())

    def integrals(self, low: FloatArray, high: FloatArray) -> FloatArray:
        """Integral of each profile over each interval, shape (n_intervals, n_profiles)."""
        if self.is_constant:
            with np.errstate(invalid="ignore"):
                return np.where(self.left == 0.0, 0.0, self.left * (high - low)[:, None])
        total = np.zeros((low.size, self.n_profiles))
        slopes = self.slopes
        for piece in range(self.left.shape[0]):
            start = np.clip(low, self.knots[piece], self.knots[piece + 1])
            stop = np.clip(high, self.knots[piece], self.knots[piece + 1])
            if self.is_curved:
                total += self._integral_in(piece, start, stop)
                continue
            middle = 0.5 * (start + stop) - self.knots[piece] if slopes[piece].any() else np.zeros_like(start)
            values = self.left[piece] + slopes[piece] * middle[:, None]
            # A piece that is zero adds nothing, even over an endless interval.
            with np.errstate(invalid="ignore"):
                total += np.where(values == 0.0, 0.0, values * (stop - start)[:, None])
        return total

    def _integral_in(self, piece: int, start: FloatArray, stop: FloatArray) -> FloatArray:
        """Integral over intervals inside one curved piece, by a rule that is exact for it."""
        nodes, weights = np.polynomial.legendre.leggauss(EXACT_POINTS)
        half = 0.5 * (stop - start)[:, None]
        at = (0.5 * (start + stop) - self.knots[piece])[:, None] + half * nodes
        values = self.on_piece(piece, 2.0 * at / self.widths[piece] - 1.0)
        return np.asarray(np.einsum("ng,ngr->nr", half * weights, values))

    def _piece(self, coordinates: FloatArray, side: str) -> NDArray[np.intp]:
        last = self.left.shape[0] - 1
        position = np.searchsorted(self.knots, coordinates, side="left" if side == "left" else "right")
        return np.clip(position - 1, 0, last)

    def _from_side(self, coordinates: FloatArray, side: str) -> FloatArray:
        piece = self._piece(coordinates, side)
        start = self.knots[piece]
        distance = coordinates - np.where(np.isfinite(start), start, coordinates)
        if self.is_curved:
            inside = self.on_piece(piece, 2.0 * distance / self.widths[piece] - 1.0)
        else:
            inside = self.left[piece] + self.slopes[piece] * distance[:, None]
        return np.where((coordinates == self.knots[piece + 1])[:, None], self.right[piece], inside)


def _bend_shapes(places: FloatArray, count: int) -> FloatArray:
    """P_k - P_(k-2) for the first k from 2 on, shape (*places.shape, count)."""
    polynomials = np.polynomial.legendre.legvander(places, count + 1)
    return np.asarray(polynomials[..., 2:] - polynomials[..., :-2])


# Chebyshev's points of a piece from -1 to 1 with its ends, and the weights of a piece's bends from its inner values.
CHEBYSHEV = -np.cos(np.pi * np.arange(DEGREE + 1) / DEGREE)
_NEAR_LEFT, _NEAR_RIGHT = 0.5 * (1 - CHEBYSHEV), 0.5 * (1 + CHEBYSHEV)
_BENDS_OF_VALUES = np.linalg.inv(_bend_shapes(CHEBYSHEV[1:-1], DEGREE - 1))


def chebyshev_places(knots: FloatArray) -> FloatArray:
    """The places at which curved pieces between knots are given, each knot once."""
    inner = knots[:-1, None] + 0.5 * (1 + CHEBYSHEV[1:-1]) * np.diff(knots)[:, None]
    return np.append(np.column_stack([knots[:-1], inner]).ravel(), knots[-1])
