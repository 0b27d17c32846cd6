"""The table of cases of a study page by page, so that no more of it than a page has to be in memory."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterable, Iterator
from contextlib import closing
from dataclasses import dataclass
from itertools import groupby
from operator import itemgetter
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.analysis.evaluations import Evaluations, Failure, FloatArray
from service.refusals import UnknownStudy
from service.studies.store import UNKNOWN, Study, StudyStore, checked

IntArray = NDArray[np.int64]

# A page is full with so much of chunks.
PAGE_BYTES = 1 << 18
# What reading a chunk takes beside its numbers counts as so many bytes, lest a page be made of very many small ones.
_BYTES_BESIDE_A_PAYLOAD = 1024

# A chunk by its wave and its first case, by which chunks are in order.
_Place = tuple[int, int]


@dataclass(frozen=True)
class Table:
    """Cases that are done, in their order. case: number of each, counted over all waves."""

    case: IntArray
    numbers: FloatArray
    evaluations: Evaluations


@dataclass(frozen=True)
class Extent:
    """How large the table of a study is at one moment.

    cases, failed: that are done, and those of them without results. text_bytes: of what is told of those. last: the
    chunk it ends with, None of an empty one.
    """

    study: Study
    cases: int
    failed: int
    text_bytes: int
    last: _Place | None


@dataclass(frozen=True)
class _Chunk:
    """A chunk as it was read. begin: number of its first case. numbers: of its cases."""

    place: _Place
    begin: int
    cases: int
    numbers: bytes
    digest: str
    payload: bytes


def extent_of(store: StudyStore, study: Study) -> Extent:
    """How large the table of a study is; nothing of it is read. Raises UnknownStudy and StoreBusy."""
    study_id = study.study_id
    with store.reading() as connection:
        _check_same(connection, study)
        cases, failed, size = connection.execute(
            "SELECT COALESCE(SUM(cases), 0), COALESCE(SUM(failed), 0), COALESCE(SUM(LENGTH(payload)), 0) FROM chunk "
            "WHERE study = ?",
            (study_id,),
        ).fetchone()
        last = connection.execute(
            "SELECT wave, first FROM chunk WHERE study = ? ORDER BY wave DESC, first DESC LIMIT 1", (study_id,)
        ).fetchone()
    # A chunk that is damaged on disk may be shorter than what it had.
    text = max(0, size - 16 * cases * len(study.columns.results))
    return Extent(study, cases, failed, text, last)


def pages(store: StudyStore, extent: Extent) -> Iterator[Table]:
    """The table a page after the other, up to the chunk it ended with, however the study goes on meanwhile.

    What is kept of a chunk that is damaged on disk is not told: its cases have failed. Raises UnknownStudy when the
    study is deleted meanwhile, and StoreBusy.
    """
    place: _Place = (-1, -1)
    while extent.last is not None and place < extent.last:
        chunks = _read(store, extent.study, place, extent.last)
        place = chunks[-1].place
        yield _table(extent, chunks)


def joined(extent: Extent, parts: list[Table]) -> Table:
    """One table of several, each of which goes on where the one before it ends."""
    columns = extent.study.columns
    results = np.zeros((0, len(columns.results)))
    failures: dict[int, Failure] = {}
    for part in parts:
        failures |= part.evaluations.failures
    evaluations = Evaluations(
        np.concatenate([results, *(part.evaluations.values for part in parts)]),
        np.concatenate([results, *(part.evaluations.bounds for part in parts)]),
        failures,
    )
    return Table(
        np.concatenate([np.zeros(0, np.int64), *(part.case for part in parts)]),
        np.concatenate([np.zeros((0, len(columns.numbers))), *(part.numbers for part in parts)]),
        evaluations,
    )


def whole_table(store: StudyStore, extent: Extent) -> Table:
    """All pages as one table, for those that are known to be small. Raises what `pages` raises."""
    return joined(extent, list(pages(store, extent)))


def _read(store: StudyStore, study: Study, after: _Place, last: _Place) -> list[_Chunk]:
    """The chunks of the page after one of them, which is not the last."""
    chunks: list[_Chunk] = []
    with store.reading() as connection:
        _check_same(connection, study)
        rows = connection.execute(
            "SELECT wave, first, cases, digest, payload FROM chunk WHERE study = ? AND (wave, first) > (?, ?) AND "
            "(wave, first) <= (?, ?) ORDER BY wave, first",
            (study.study_id, *after, *last),
        )
        with closing(rows):
            page = list(_until_full(rows))
        for wave, rows_of_wave in groupby(page, key=itemgetter(0)):
            chunks += _with_numbers(connection, study, wave, rows_of_wave)
    return chunks


def _until_full(rows: Iterable[Any]) -> Iterator[Any]:
    size = 0
    for row in rows:
        yield row
        size += _BYTES_BESIDE_A_PAYLOAD + len(row[-1])
        if size >= PAGE_BYTES:
            return


def _with_numbers(connection: sqlite3.Connection, study: Study, wave: int, rows: Iterable[Any]) -> Iterator[_Chunk]:
    """Chunks of one wave with the numbers of their cases; those of its other cases, which may be many, are not read."""
    (begin,) = connection.execute(
        "SELECT COALESCE(SUM(cases), 0) FROM wave WHERE study = ? AND number < ?", (study.study_id, wave)
    ).fetchone()
    (row_id,) = connection.execute(
        "SELECT rowid FROM wave WHERE study = ? AND number = ?", (study.study_id, wave)
    ).fetchone()
    a_case = 8 * len(study.columns.numbers)
    with connection.blobopen("wave", "numbers", row_id, readonly=True) as blob:
        for _, first, cases, digest, payload in rows:
            if len(blob) < (first + cases) * a_case:
                raise sqlite3.DatabaseError("The numbers of a study are not as they were written.")
            blob.seek(first * a_case)
            yield _Chunk((wave, first), begin + first, cases, blob.read(cases * a_case), digest, payload)


def _check_same(connection: sqlite3.Connection, study: Study) -> None:
    """Raise UnknownStudy if a study was deleted; one that came in again since is another one."""
    row = connection.execute("SELECT created FROM study WHERE id = ?", (study.study_id,)).fetchone()
    if row != (study.created,):
        raise UnknownStudy(UNKNOWN)


def _table(extent: Extent, chunks: list[_Chunk]) -> Table:
    columns = extent.study.columns
    tables = []
    for chunk in chunks:
        found = checked(chunk.payload, chunk.digest, chunk.cases, len(columns.results))
        failures = {chunk.begin + case: failure for case, failure in found.failures.items()}
        numbers = np.frombuffer(chunk.numbers, "<f8").astype(float).reshape(chunk.cases, len(columns.numbers))
        case: IntArray = np.arange(chunk.begin, chunk.begin + chunk.cases, dtype=np.int64)
        tables.append(Table(case, numbers, Evaluations(found.values, found.bounds, failures)))
    return joined(extent, tables)
