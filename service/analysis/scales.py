"""What makes results of several units comparable."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from service.analysis.evaluations import FloatArray


def scales_of(values: FloatArray, units: Sequence[str]) -> FloatArray:
    """By what to divide each result.

    values: shape (n_cases, n_results), of cases all over the range, NaN where one failed. units: of each result. All
    results of one unit share the largest spread of any of them over the cases, so that they are compared as they are;
    where nothing of a unit changes they share the largest size, or 1.
    """
    seen = values[np.isfinite(values).all(axis=1)]
    if not seen.size:
        return np.ones(len(units))
    spreads, sizes = np.ptp(seen, axis=0), np.abs(seen).max(axis=0)
    scales = []
    for unit in units:
        alike = np.array([other == unit for other in units])
        scales.append(spreads[alike].max() or sizes[alike].max() or 1.0)
    return np.array(scales)
