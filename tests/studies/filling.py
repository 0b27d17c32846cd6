"""Tables of studies put straight into the store, as large as they have to be."""

from __future__ import annotations

from contextlib import closing
from pathlib import Path

import numpy as np

from service import __version__
from service.analysis.evaluations import Evaluations, Failure, FloatArray
from service.analysis.limits import Limit
from service.studies.store import Acceptance, StudyStore
from service.translation.case_columns import Column, Columns, LimitColumn

STUDY = "5e" * 32
# A case of a failed one is told so.
REASON = 'No case: "a" is 0,\nand b is not.'


def columns(results: int, limits: int = 0) -> Columns:
    """Two numbers and some results, of which the first ones have limits."""
    return Columns(
        (Column("a", "mm"), Column("b", "1")),
        tuple(Column(f"result {index}", "degC") for index in range(results)),
        tuple(LimitColumn(None, Limit(index, at_most=0.5), "K") for index in range(limits)),
    )


def _outcome(cases: int, results: int, failed: frozenset[int], seed: int) -> Evaluations:
    """Some results of cases with all their digits."""
    values = np.random.default_rng(seed).uniform(-1, 1, (cases, results)) * 10.0 ** (seed % 7 - 3)
    lost = [case for case in sorted(failed) if case < cases]
    values[lost] = np.nan
    return Evaluations(values, 1e-9 * np.abs(values), {case: Failure("no-case", REASON) for case in lost})


def numbers_of(cases: int, seed: int) -> FloatArray:
    """The two numbers of some cases."""
    return np.random.default_rng(1000 + seed).random((cases, 2))


def outcomes(waves: list[int], chunk: int, results: int, failed: frozenset[int]) -> Evaluations:
    """What `fill` puts into a table, as a whole."""
    parts, begin = [], 0
    failures: dict[int, Failure] = {}
    for wave, cases in enumerate(waves):
        for first in range(0, cases, chunk):
            part = _outcome(min(chunk, cases - first), results, failed, 100_000 * wave + first)
            parts.append(part)
            failures |= {begin + first + case: failure for case, failure in part.failures.items()}
        begin += cases
    values = np.concatenate([part.values for part in parts])
    return Evaluations(values, np.concatenate([part.bounds for part in parts]), failures)


def fill(path: Path, waves: list[int], chunk: int, shape: Columns, failed: frozenset[int] = frozenset()) -> None:
    """A study that was cancelled, with waves of so many cases in chunks. failed: cases of each chunk that have."""
    with closing(StudyStore(path, 1 << 40, 1)) as store:
        attempt = store.accept(Acceptance(STUDY, "cases", b"{}", __version__, shape, chunk, sum(waves), 0)).attempt
        store.begin(STUDY, attempt)
        for wave, cases in enumerate(waves):
            store.begin_wave(STUDY, wave, numbers_of(cases, wave), None)
            for first in range(0, cases, chunk):
                found = _outcome(min(chunk, cases - first), len(shape.results), failed, 100_000 * wave + first)
                store.keep(STUDY, wave, first, found, 0.1)
        store.cancel(STUDY)
