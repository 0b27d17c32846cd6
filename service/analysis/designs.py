"""Which cases to compute: every combination of values, or samples that fill a box evenly."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Literal

import numpy as np
from scipy.stats import qmc

from service.analysis.evaluations import FloatArray

Method = Literal["latin_hypercube", "sobol", "random"]


def every_combination(values: Sequence[FloatArray]) -> FloatArray:
    """All combinations of the values of each number, the last number varying fastest; shape (n_cases, n_numbers)."""
    return np.stack(np.meshgrid(*values, indexing="ij"), axis=-1).reshape(-1, len(values))


def count_of_combinations(counts: Sequence[int]) -> int:
    """How many combinations there are of so many values of each number."""
    return math.prod(counts)


def filling(method: Method, count: int, low: FloatArray, high: FloatArray, seed: int) -> FloatArray:
    """Samples of the box from low to high, each of shape (n_numbers,); shape (count, n_numbers).

    Latin hypercube: each number has one sample in each of `count` equal parts of its range. Sobol: the first `count`
    points of a scrambled sequence, most even where `count` is a power of two. The seed decides them all.
    """
    rng = np.random.default_rng(seed)
    if method == "random":
        unit = rng.random((count, low.size))
    elif method == "sobol":
        sequence = qmc.Sobol(low.size, rng=rng)
        # Asked for a power of two: other counts of this sequence come with a warning.
        unit = sequence.random_base2(math.ceil(math.log2(max(count, 1))))[:count]
    else:
        unit = qmc.LatinHypercube(low.size, rng=rng).random(count)
    return low + unit * (high - low)
