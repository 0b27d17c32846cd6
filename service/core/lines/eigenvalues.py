"""Eigenvalues of one line: a rod with a held, film or insulated condition at each end.

    phi'' + (beta / length)^2 phi = 0,   phi' = H phi at the low end,   phi' = -H phi at the high end

with H = 0 for an insulated end and H infinite for a held one. The Biot number of an end is H times the length.
"""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

# Newton's iterates rise to the root from below and are at rounding in 5 to 9 steps; the rest is head room.
MOST_STEPS = 60


@lru_cache(maxsize=2048)
def roots(biot_low: float, biot_high: float, count: int) -> FloatArray:
    """First roots beta of the line's characteristic equation, in increasing order.

        beta = m pi + atan(Bi_low / beta) + atan(Bi_high / beta),   m = 0, 1, 2, ...

    which is beta tan(beta) = Bi with one end insulated and beta cot(beta) = -Bi with one end held. The phase form
    has exactly one root for every m, in [m pi, (m + 1) pi], for every pair of Biot numbers.

    biot_low, biot_high: dimensionless, >= 0; 0 is an insulated end, infinity a held one.
    count: how many roots, >= 1.
    Returns shape (count,), rad; the first is 0 when both ends are insulated. The array is read-only and shared.
    Source: phase (Pruefer) form of Carslaw and Jaeger, Conduction of Heat in Solids, 2nd ed., 1959, section 3.9;
    their appendix IV tabulates the two special cases.
    """
    m = np.arange(count, dtype=float)
    both_insulated = biot_low == 0.0 and biot_high == 0.0
    found = m * math.pi if both_insulated else _newton(m * math.pi, biot_low, biot_high)
    found.setflags(write=False)
    return found


def _newton(offset: FloatArray, biot_low: float, biot_high: float) -> FloatArray:
    # The function is increasing and concave in beta, so that a Newton step from anywhere lands at or below the root
    # and the iterates then rise to it. The first guess is the root for small and for large Biot numbers alike.
    finite = [biot for biot in (biot_low, biot_high) if 0.0 < biot < math.inf]
    held = sum(biot == math.inf for biot in (biot_low, biot_high)) * (math.pi / 2)
    base = offset + held
    if not finite:
        return base
    total = sum(finite)
    guess = base + np.where(base > 0, np.arctan2(total, base), math.sqrt(total / (1 + total / 2)))
    beta = guess
    for _ in range(MOST_STEPS):
        value = beta - base
        slope = np.ones_like(beta)
        for biot in finite:
            value = value - np.arctan2(biot, beta)
            slope = slope + biot / (beta * beta + biot * biot)
        step = value / slope
        # A step below zero can only come from a guess far above the smallest root.
        beta = np.where(step < beta, beta - step, 0.5 * beta)
        if (np.abs(step) <= 4e-16 * beta).all():
            break
    return beta
