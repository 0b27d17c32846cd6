"""Roots of the characteristic equation over the whole range of Biot numbers."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest

from service.core import cache_report
from service.core.lines.eigenvalues import roots

BIOTS = (0.0, 1e-12, 1e-9, 1e-3, 0.7, 40.0, 1e9, 1e12, math.inf)


def angle(biot: float, beta: mpmath.mpf) -> mpmath.mpf:
    return mpmath.pi / 2 if biot == math.inf else mpmath.atan(mpmath.mpf(biot) / beta)


@pytest.mark.parametrize("high", BIOTS)
@pytest.mark.parametrize("low", BIOTS)
def test_roots_hold_to_rounding_and_none_is_missed(low: float, high: float) -> None:
    found = roots(low, high, 30)
    assert (np.diff(found) > 0).all()
    with mpmath.workdps(40):
        for m, root in enumerate(found):
            if root == 0.0:
                assert low == high == 0.0
                continue
            near = mpmath.findroot(
                lambda beta, m=m: beta - m * mpmath.pi - angle(low, beta) - angle(high, beta), mpmath.mpf(float(root))
            )
            # 4 units in the last place of the root itself, however small it is.
            assert abs(near - float(root)) <= 9e-16 * near
            assert m * mpmath.pi <= near * (1 + mpmath.mpf(10) ** -20)
            assert near <= (m + 1) * mpmath.pi * (1 + mpmath.mpf(10) ** -20)


def test_cached_roots_are_shared_and_counted() -> None:
    before = cache_report()["eigenvalues"]
    first = roots(0.123456, 7.5, 9)
    assert roots(0.123456, 7.5, 9) is first
    after = cache_report()["eigenvalues"]
    assert after.misses == before.misses + 1
    assert after.hits == before.hits + 1
    assert after.size <= after.limit
    with pytest.raises(ValueError, match="read-only"):
        first[0] = 1.0
