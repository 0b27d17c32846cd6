"""The ambient of a linear film that stands for a face whose film is not: a map on pieces, of few products."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from service.core.faces import axes_along
from service.core.film_faces import FilmFace, least_slope
from service.core.kirchhoff import ZERO, Transformed
from service.core.maps import FaceMap
from service.core.problem import Body

FloatArray = NDArray[np.float64]

# The part of the error wanted that the rank of an ambient is cut at.
RANK_CUT = 0.02


def iterated_ambient(data: Transformed, film: FilmFace, wanted: float) -> FaceMap:
    """The part of a film's ambient that follows from its own potential: theta' - D(u(theta')) / H."""
    table = film.assumed - film.law.given_off(data.kirchhoff.potential(film.assumed)) / film.coefficient
    # A change of the ambient by this much leaves over no more than the part of what is allowed.
    small = RANK_CUT * wanted * least_slope(data, film) / film.coefficient
    if np.ptp(table) <= small:
        middle = 0.5 * float(table.max() + table.min())
        return FaceMap.uniform(middle) if middle != 0.0 else ZERO
    return map_on(data.body, film, _of_low_rank(table, small))


def map_on(body: Body, film: FilmFace, table: FloatArray) -> FaceMap:
    """The map with these values at the points of a film face, carried on where an axis has no end."""
    knots = []
    for index, axis in enumerate(film.axes):
        ends = np.array([-math.inf] * axis.open_low), np.array([math.inf] * axis.open_high)
        knots.append(np.concatenate([ends[0], axis.knots, ends[1]]))
        table = np.concatenate([table[:1]] * axis.open_low + [table] + [table[-1:]] * axis.open_high)
        table = table.T if index == 0 else table
    first, second = axes_along(film.face)
    curved = (film.axes[0].is_curved, film.axes[1].is_curved)
    extent, begins = (body.size[first], body.size[second]), (body.begins[first], body.begins[second])
    return FaceMap(knots[0], knots[1], table.T, True, extent, 0.0, begins, curved)


def _of_low_rank(table: FloatArray, small: float) -> FloatArray:
    """The table off by no more than `small` in any entry, of as few products as that allows."""
    left, singular, right = np.linalg.svd(table, full_matrices=False)
    # No entry is off by more than the root of the sum of squares of what is left out.
    left_out = np.sqrt(np.cumsum(singular[::-1] ** 2))[::-1]
    rank = max(int(np.count_nonzero(left_out > small)), 1)
    return np.asarray((left[:, :rank] * singular[:rank]) @ right[:rank])
