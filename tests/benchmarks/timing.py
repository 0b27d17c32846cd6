"""Time of a call: the shortest of some repeats, which the rest of the machine disturbs least."""

from __future__ import annotations

import time
from collections.abc import Callable


def shortest(call: Callable[[], object], repeats: int = 5) -> float:
    """Seconds of the quickest of some calls."""
    best = float("inf")
    for _ in range(repeats):
        begin = time.perf_counter()
        call()
        best = min(best, time.perf_counter() - begin)
    return best
