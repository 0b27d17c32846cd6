"""A table of data over a face as a sum of products of one-dimensional values, as few as its numerical rank asks for."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from service.core.profiles import CHEBYSHEV, DEGREE

FloatArray = NDArray[np.float64]

# Singular values below this part of the largest are rounding noise of the decomposition, not data.
RANK_TOLERANCE = 4e-16


def factors_of(
    table: FloatArray, pieces: tuple[int, int], degrees: tuple[int | None, int | None]
) -> tuple[FloatArray, FloatArray]:
    """Columns A and B with table = A B^T.

    pieces: how many there are along each axis. degrees: of the pieces where they are curved, else None.
    """
    # Places that tell all others keep the table that is decomposed small.
    telling = [_telling(*axis) for axis in zip(pieces, degrees, table.shape, strict=True)]
    found = _factor(table[np.ix_(*telling)])
    along_first, along_second = (
        values if places.size == count or degree is None else _carried(values, degree)
        for values, places, count, degree in zip(found, telling, table.shape, degrees, strict=True)
    )
    return along_first, along_second


def _telling(pieces: int, degree: int | None, count: int) -> NDArray[np.intp]:
    """Which places along an axis tell the values at all: all but on curved pieces of a low degree (else None)."""
    if degree is None or degree == DEGREE:
        return np.arange(count)
    inside = _places_of_degree(degree)[:-1]
    return np.append((DEGREE * np.arange(pieces)[:, None] + inside).ravel(), DEGREE * pieces)


def _places_of_degree(degree: int) -> NDArray[np.intp]:
    """As many of Chebyshev's points of a piece, its ends among them, as polynomials of a degree need."""
    return np.linspace(0, DEGREE, degree + 1).round().astype(int)


def _carried(values: FloatArray, degree: int) -> FloatArray:
    """Values at all places of curved pieces from those that `_telling` names, shape (n_places, n_profiles)."""
    known = CHEBYSHEV[_places_of_degree(degree)]
    # Lagrange's polynomials, which are 0 and 1 exactly at the places known.
    weights = np.ones((DEGREE + 1, degree + 1))
    for index, own in enumerate(known):
        for other in np.delete(known, index):
            weights[:, index] *= (CHEBYSHEV - other) / (own - other)
    pieces = (values.shape[0] - 1) // degree
    of_piece = values[degree * np.arange(pieces)[:, None] + np.arange(degree + 1)]
    inside = np.einsum("jk,pkr->pjr", weights[:-1], of_piece).reshape(DEGREE * pieces, -1)
    return np.concatenate([inside, values[-1:]])


def _factor(table: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Columns A and B with table = A B^T, as few as the numerical rank of the table asks for (at least one).

    Rows and columns of zeros stay exactly zero: the reference level drives nothing.
    """
    rows, columns = table.any(axis=1), table.any(axis=0)
    along_first, along_second = np.zeros((table.shape[0], 1)), np.zeros((table.shape[1], 1))
    core = table[np.ix_(rows, columns)]
    if core.size == 0:
        return along_first, along_second
    if (core == core[:, :1]).all():
        along_first[rows, 0], along_second[columns] = core[:, 0], 1.0
        return along_first, along_second
    if (core == core[:1]).all():
        along_first[rows], along_second[columns, 0] = 1.0, core[0]
        return along_first, along_second
    left, singular, right = np.linalg.svd(core, full_matrices=False)
    rank = int(np.count_nonzero(singular > RANK_TOLERANCE * max(table.shape) * singular[0]))
    along_first, along_second = np.zeros((table.shape[0], rank)), np.zeros((table.shape[1], rank))
    along_first[rows] = left[:, :rank] * singular[:rank]
    along_second[columns] = right[:rank].T
    return along_first, along_second
