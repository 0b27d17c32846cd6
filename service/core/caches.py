"""The bounded caches of the core, and what they have been good for."""

from __future__ import annotations

from dataclasses import dataclass

from service.core.influence_kept import KEPT
from service.core.lines.eigenvalues import roots
from service.core.lines.modes import eigen_integrals, modes_of

CACHED = {"eigenvalues": roots, "eigenfunctions": modes_of, "eigen_integrals": eigen_integrals}


@dataclass(frozen=True)
class CacheReport:
    """How often a cache had the answer and how often not, how many entries it holds, and how many at the most."""

    hits: int
    misses: int
    size: int
    limit: int


def cache_report() -> dict[str, CacheReport]:
    """A report on every cache of the core, by name."""
    reports = {}
    for name, function in CACHED.items():
        info = function.cache_info()
        reports[name] = CacheReport(info.hits, info.misses, info.currsize, info.maxsize or 0)
    reports["influence_matrices"] = CacheReport(KEPT.hits, KEPT.misses, len(KEPT), KEPT.limit)
    return reports
