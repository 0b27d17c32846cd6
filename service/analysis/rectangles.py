"""Rectangles that have to keep apart."""

from __future__ import annotations

import numpy as np

from service.analysis.evaluations import FloatArray


def clearances(rectangles: FloatArray, gap: float) -> FloatArray:
    """How much farther apart than a gap all pairs of rectangles are, along the axis on which they are farthest apart.

    rectangles: shape (n_cases, n_rectangles, 2, 2), along two axes from and to. Returns shape (n_cases, n_pairs), in
    the order (0, 1), (0, 2), ..., (1, 2), ...; negative where they are nearer than the gap or overlap.
    """
    first, second = np.triu_indices(rectangles.shape[1], 1)
    low, high = rectangles[..., 0], rectangles[..., 1]
    between = np.maximum(low[:, first] - high[:, second], low[:, second] - high[:, first])
    return between.max(axis=2) - gap
