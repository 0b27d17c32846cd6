"""A part's time integral, set up but not yet added up."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.lines.line import Line
from service.core.lines.places import Places
from service.core.split import Part

FloatArray = NDArray[np.float64]
Factors = tuple[FloatArray, FloatArray, FloatArray]


@dataclass(frozen=True, eq=False)
class Product:
    """Sum over nodes q and columns r of weight_q X_iqr Y_jqr Z_kqr.

    factors: shape (n, n_nodes, n_columns) each; a factor may have 1 in place of n_nodes or n_columns.
    """

    weights: FloatArray
    factors: Factors


@dataclass(frozen=True, eq=False)
class Integral:
    """A part's time integral on the product of three sets of places.

    lines, part, places, times: what it was made from. products: what to add up. step: in ln t. carried: for each line
    what its answers were summed from, shape (n, n_nodes, n_columns), or None where its modes and images say.
    """

    lines: Sequence[Line]
    part: Part
    places: Sequence[Places]
    times: FloatArray
    step: float
    products: tuple[Product, ...]
    carried: tuple[FloatArray | None, FloatArray | None, FloatArray | None]

    @property
    def node_count(self) -> int:
        """How many times it is summed over."""
        return self.times.size
