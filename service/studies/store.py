"""Studies, their waves of cases and their finished chunks, in one SQLite file: the truth about what is done.

A chunk is written in one transaction with the counts that it changes, so that a service killed at any moment finds
each finished chunk whole or not at all.
"""

from __future__ import annotations

import hashlib
import json
import logging
import sqlite3
import threading
import time
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal, Self

import numpy as np

from service.analysis.evaluations import Evaluations, Failure, FloatArray
from service.analysis.limits import Limit
from service.refusals import QueueFull, StoreBusy, StoreFull, UnknownStudy, WrongState
from service.translation.case_columns import Column, Columns, LimitColumn

State = Literal["waiting", "running", "finished", "cancelled", "failed"]
STATES: tuple[State, ...] = ("waiting", "running", "finished", "cancelled", "failed")

UNKNOWN = "No study is known under this id; post it to /v1/studies."
DAMAGED = "The stored studies are damaged; the log of the service has more for whoever runs it."

# Another process may hold the file for a moment, a backup above all.
_BUSY_SECONDS = 5.0
_RETRY_AFTER_SECONDS = 30

_TABLES = """
CREATE TABLE IF NOT EXISTS study (
    id TEXT PRIMARY KEY, position INTEGER NOT NULL, name TEXT NOT NULL, question BLOB NOT NULL, release TEXT NOT NULL,
    columns BLOB NOT NULL, chunk_size INTEGER NOT NULL, expected INTEGER NOT NULL, reserved INTEGER NOT NULL,
    state TEXT NOT NULL, attempt INTEGER NOT NULL, revision INTEGER NOT NULL,
    created REAL NOT NULL, started REAL, ended REAL,
    done INTEGER NOT NULL, failed INTEGER NOT NULL, seconds REAL NOT NULL, size INTEGER NOT NULL, fault BLOB
);
CREATE TABLE IF NOT EXISTS wave (
    study TEXT NOT NULL, number INTEGER NOT NULL, accuracy REAL, cases INTEGER NOT NULL, numbers BLOB NOT NULL,
    PRIMARY KEY (study, number)
);
CREATE TABLE IF NOT EXISTS chunk (
    study TEXT NOT NULL, wave INTEGER NOT NULL, first INTEGER NOT NULL, cases INTEGER NOT NULL,
    failed INTEGER NOT NULL, digest TEXT NOT NULL, payload BLOB NOT NULL, PRIMARY KEY (study, wave, first)
);
CREATE TABLE IF NOT EXISTS answer (study TEXT PRIMARY KEY, digest TEXT NOT NULL, content BLOB NOT NULL);
"""


logger = logging.getLogger("service")


class NotRepeatable(Exception):
    """A study that was resumed asks for other cases than it did before."""


@dataclass(frozen=True)
class Acceptance:
    """A study as it comes in.

    question: its canonical text. chunk_size: cases in a chunk at most. expected: about how many cases it takes.
    reserved: bytes kept free for it.
    """

    study_id: str
    name: str
    question: bytes
    release: str
    columns: Columns
    chunk_size: int
    expected: int
    reserved: int


@dataclass(frozen=True)
class Study:
    """A study as it stands.

    attempt: names the present try, and grows with each. revision: grows with every change. created, started, ended:
    seconds since 1970. done, failed: cases with an outcome, and those of them without results. seconds: what workers
    spent on them. fault: why it failed, with `code` and `message`.
    """

    study_id: str
    name: str
    release: str
    columns: Columns
    chunk_size: int
    expected: int
    state: State
    attempt: int
    revision: int
    created: float
    started: float | None
    ended: float | None
    done: int
    failed: int
    seconds: float
    fault: dict[str, str] | None

    @property
    def is_over(self) -> bool:
        """Whether nothing more happens by itself."""
        return self.state not in ("waiting", "running")


@dataclass(frozen=True)
class StudiesReport:
    """What the store holds. counts: studies by state. size: bytes in use and reserved."""

    counts: Mapping[State, int]
    size: int
    limit: int

    @classmethod
    def empty(cls, limit: int) -> Self:
        """That of a store without studies."""
        return cls(dict.fromkeys(STATES, 0), 0, limit)


@dataclass(frozen=True)
class Kept:
    """What was kept since the store was opened. failed: of the cases. seconds: what workers spent on them."""

    cases: int = 0
    failed: int = 0
    seconds: float = 0.0


class StudyStore:
    """One connection, used by one thread at a time.

    limit_bytes: of everything that is kept or reserved. most_waiting: studies that may wait at the same time.
    """

    def __init__(self, path: Path, limit_bytes: int, most_waiting: int) -> None:
        self._limit = limit_bytes
        self._most_waiting = most_waiting
        self._lock = threading.Lock()
        self.kept = Kept()
        path.parent.mkdir(parents=True, exist_ok=True)
        self._connection = sqlite3.connect(path, timeout=_BUSY_SECONDS, isolation_level=None, check_same_thread=False)
        # Readers do not wait for the writer, and what counts as done is on the disk.
        self._connection.execute("PRAGMA journal_mode=WAL")
        self._connection.execute("PRAGMA synchronous=FULL")
        self._connection.executescript(_TABLES)

    def accept(self, new: Acceptance) -> Study:
        """The study of this id, which waits from now on if it is new or was cancelled or failed before.

        Raises QueueFull, StoreFull and StoreBusy.
        """
        with self._change():
            known = self._study(new.study_id)
            if known is not None and known.state in ("waiting", "running", "finished"):
                return known
            self._check_queue()
            now = time.time()
            # By the clock, so that a study that was forgotten and comes in again has no try of the same name.
            attempt = int(1000 * now)
            if known is not None:
                self._check_room(max(0, new.reserved - self._one("SELECT size FROM study WHERE id = ?", new.study_id)))
                self._execute(
                    "UPDATE study SET state = 'waiting', attempt = MAX(attempt + 1, ?), revision = revision + 1, "
                    "started = NULL, ended = NULL, fault = NULL WHERE id = ?",
                    *(attempt, new.study_id),
                )
            else:
                self._check_room(len(new.question) + new.reserved)
                self._execute(
                    "INSERT INTO study SELECT ?, COALESCE(MAX(position), 0) + 1, ?, ?, ?, ?, ?, ?, ?, 'waiting', ?, 1, "
                    "?, NULL, NULL, 0, 0, 0.0, ?, NULL FROM study",
                    *(new.study_id, new.name, new.question, new.release, _columns_text(new.columns), new.chunk_size),
                    *(new.expected, new.reserved, attempt, now, len(new.question)),
                )
            return self._known(new.study_id)

    def study(self, study_id: str) -> Study | None:
        """A study as it stands, None if there is none of this id."""
        with self._ready():
            return self._study(study_id)

    def question(self, study_id: str) -> bytes:
        """The canonical text of the question of a study."""
        with self._ready():
            self._known(study_id)
            return bytes(self._one("SELECT question FROM study WHERE id = ?", study_id))

    def newest(self, most: int) -> list[Study]:
        """The studies that came in last, the newest first."""
        with self._ready():
            rows = self._connection.execute(f"{_SELECT} ORDER BY position DESC LIMIT ?", (most,)).fetchall()
        return [_study_of(row) for row in rows]

    def unfinished(self) -> list[Study]:
        """Studies that wait or run, in the order in which they came."""
        with self._ready():
            rows = self._connection.execute(
                f"{_SELECT} WHERE state IN ('waiting', 'running') ORDER BY position"
            ).fetchall()
        return [_study_of(row) for row in rows]

    def begin(self, study_id: str, attempt: int) -> Study | None:
        """The study, which runs from now on; None if this attempt of it is no longer wanted."""
        with self._change():
            study = self._study(study_id)
            if study is None or study.is_over or study.attempt != attempt:
                return None
            self._execute(
                "UPDATE study SET state = 'running', started = COALESCE(started, ?), revision = revision + 1 "
                "WHERE id = ?",
                *(time.time(), study_id),
            )
            return self._known(study_id)

    def begin_wave(self, study_id: str, number: int, cases: FloatArray, accuracy: float | None) -> None:
        """Note the cases of a wave. Raises NotRepeatable if other ones were noted before."""
        numbers = np.ascontiguousarray(cases, "<f8").tobytes()
        with self._change():
            row = self._connection.execute(
                "SELECT cases, accuracy, numbers FROM wave WHERE study = ? AND number = ?", (study_id, number)
            ).fetchone()
            if row is None:
                values = (study_id, number, accuracy, len(cases), numbers)
                self._execute("INSERT INTO wave VALUES (?, ?, ?, ?, ?)", *values)
                self._execute("UPDATE study SET size = size + ? WHERE id = ?", len(numbers), study_id)
            elif (row[0], row[1], bytes(row[2])) != (len(cases), accuracy, numbers):
                raise NotRepeatable(
                    "The study asks for other cases than it did before it was interrupted; delete it and post it again."
                )

    def chunks(self, study_id: str, wave: int) -> dict[int, Evaluations]:
        """The finished chunks of a wave by their first case. One that is damaged on disk counts as not finished."""
        with self._ready():
            study = self._known(study_id)
            rows = self._connection.execute(
                "SELECT first, cases, digest, payload FROM chunk WHERE study = ? AND wave = ? ORDER BY first",
                (study_id, wave),
            ).fetchall()
        width = len(study.columns.results)
        return {
            first: unpacked(payload, count, width)
            for first, count, digest, payload in rows
            if _digest(payload) == digest
        }

    def keep(self, study_id: str, wave: int, first: int, outcome: Evaluations, seconds: float) -> None:
        """Keep a finished chunk. seconds: what a worker spent on it."""
        payload = packed(outcome)
        digest = _digest(payload)
        count, failed = len(outcome.values), len(outcome.failures)
        with self._change():
            before = self._connection.execute(
                "DELETE FROM chunk WHERE study = ? AND wave = ? AND first = ?", (study_id, wave, first)
            ).rowcount
            self._execute(
                "INSERT INTO chunk VALUES (?, ?, ?, ?, ?, ?, ?)", study_id, wave, first, count, failed, digest, payload
            )
            if before == 0:
                self._execute(
                    "UPDATE study SET done = done + ?, failed = failed + ?, seconds = seconds + ?, size = size + ?, "
                    "revision = revision + 1 WHERE id = ?",
                    *(count, failed, seconds, len(payload), study_id),
                )
        kept = self.kept
        self.kept = Kept(kept.cases + count, kept.failed + failed, kept.seconds + seconds)

    def finish(self, study_id: str, attempt: int, content: bytes) -> None:
        """Keep the answer of a study, which is finished with it, unless this attempt was cancelled in the end."""
        with self._change():
            if not self._is_at(study_id, attempt):
                return
            self._execute("INSERT OR REPLACE INTO answer VALUES (?, ?, ?)", study_id, _digest(content), content)
            self._execute("UPDATE study SET size = size + ? WHERE id = ?", len(content), study_id)
            self._end(study_id, "finished")

    def fail(self, study_id: str, attempt: int, code: str, message: str) -> None:
        """End a study that cannot go on, unless this attempt is over. code: for programs. message: a sentence."""
        with self._change():
            if not self._is_at(study_id, attempt):
                return
            fault = json.dumps({"code": code, "message": message})
            self._execute("UPDATE study SET fault = ? WHERE id = ?", fault, study_id)
            self._end(study_id, "failed")

    def cancel(self, study_id: str) -> Study | None:
        """The study, which does not go on; None if there is none. Its finished cases are kept."""
        with self._change():
            study = self._study(study_id)
            if study is None or study.is_over:
                return study
            self._end(study_id, "cancelled")
            return self._known(study_id)

    def forget(self, study_id: str, attempt: int) -> bool:
        """Drop everything about a study that is over; False if it is not over, or not with this attempt."""
        with self._change():
            study = self._study(study_id)
            if study is not None and (not study.is_over or study.attempt != attempt):
                return False
            self._execute("DELETE FROM study WHERE id = ?", study_id)
            self._execute("DELETE FROM wave WHERE study = ?", study_id)
            self._execute("DELETE FROM chunk WHERE study = ?", study_id)
            self._execute("DELETE FROM answer WHERE study = ?", study_id)
            return True

    def answer(self, study_id: str) -> bytes | None:
        """The answer of a finished study, None if it has none. Raises WrongState for one that is damaged on disk."""
        with self._ready():
            row = self._connection.execute("SELECT digest, content FROM answer WHERE study = ?", (study_id,)).fetchone()
        if row is None:
            return None
        digest, content = row
        if _digest(content) != digest:
            raise WrongState("The answer that was kept is damaged; delete the study and post it again.")
        return bytes(content)

    def failures(self, study_id: str, most: int) -> list[tuple[int, Failure]]:
        """The first cases that failed, with their numbers, counted over all waves."""
        with self._ready():
            width = len(self._known(study_id).columns.results)
            rows = self._connection.execute(
                "SELECT first + (SELECT COALESCE(SUM(cases), 0) FROM wave WHERE study = chunk.study AND "
                "number < chunk.wave), cases, digest, payload FROM chunk WHERE study = ? AND failed > 0 "
                "ORDER BY wave, first LIMIT ?",
                (study_id, most),
            ).fetchall()
        found: dict[int, Failure] = {}
        for begin, count, digest, payload in rows:
            failures = checked(payload, digest, count, width).failures
            found |= {begin + case: failure for case, failure in failures.items()}
        return sorted(found.items())[:most]

    def report(self) -> StudiesReport:
        """What the store holds; also shows that it answers."""
        with self._ready():
            rows = self._connection.execute("SELECT state, COUNT(*) FROM study GROUP BY state").fetchall()
            used = self._used()
        counts: dict[State, int] = dict.fromkeys(STATES, 0) | dict(rows)
        return StudiesReport(counts, used, self._limit)

    def close(self) -> None:
        """Let go of the file."""
        with self._lock:
            self._connection.close()

    @contextmanager
    def reading(self) -> Iterator[sqlite3.Connection]:
        """The connection to oneself, for a moment, to read what is kept. Raises StoreBusy."""
        with self._ready():
            yield self._connection

    @contextmanager
    def _ready(self) -> Iterator[None]:
        """The connection to ourselves; another process that holds the file too long is a reason to come again."""
        with self._lock:
            try:
                yield
            except sqlite3.OperationalError as error:
                raise StoreBusy("The stored studies cannot be reached at the moment; try again later.") from error
            except sqlite3.DatabaseError as error:
                logger.error("The file of the studies is damaged.", exc_info=error)
                raise StoreBusy(DAMAGED, passes=False) from error

    @contextmanager
    def _change(self) -> Iterator[None]:
        """All that is written inside, or nothing of it."""
        with self._ready():
            self._connection.execute("BEGIN IMMEDIATE")
            try:
                yield
                self._connection.execute("COMMIT")
            except BaseException:
                # Some errors, such as a full disk, have undone it already.
                if self._connection.in_transaction:
                    self._connection.execute("ROLLBACK")
                raise

    def _execute(self, statement: str, *values: Any) -> None:
        self._connection.execute(statement, values)

    def _one(self, statement: str, *values: Any) -> Any:
        row = self._connection.execute(statement, values).fetchone()
        return None if row is None else row[0]

    def _study(self, study_id: str) -> Study | None:
        row = self._connection.execute(f"{_SELECT} WHERE id = ?", (study_id,)).fetchone()
        return None if row is None else _study_of(row)

    def _known(self, study_id: str) -> Study:
        study = self._study(study_id)
        if study is None:
            raise UnknownStudy(UNKNOWN)
        return study

    def _is_at(self, study_id: str, attempt: int) -> bool:
        """Whether a study is not over and at this attempt."""
        study = self._known(study_id)
        return not study.is_over and study.attempt == attempt

    def _end(self, study_id: str, state: State) -> None:
        self._execute(
            "UPDATE study SET state = ?, ended = ?, revision = revision + 1 WHERE id = ?", state, time.time(), study_id
        )

    def _used(self) -> int:
        """Bytes in use; of a study that is not over at least what was reserved for it."""
        return self._one(
            "SELECT COALESCE(SUM(CASE WHEN state IN ('waiting', 'running') THEN MAX(size, reserved) ELSE size END), 0) "
            "FROM study"
        )

    def _check_room(self, wanted: int) -> None:
        used = self._used()
        if used + wanted > self._limit:
            raise StoreFull(
                f"The study needs up to {wanted} bytes and {max(self._limit - used, 0)} are free; delete studies that "
                "are over, or have the store enlarged."
            )

    def _check_queue(self) -> None:
        waiting = self._one("SELECT COUNT(*) FROM study WHERE state = 'waiting'")
        if waiting >= self._most_waiting:
            raise QueueFull(f"{waiting} studies wait already; try again later.", _RETRY_AFTER_SECONDS)


_FIELDS = (
    "id, name, release, columns, chunk_size, expected, state, attempt, revision, created, started, ended, done, "
    "failed, seconds, fault"
)
_SELECT = f"SELECT {_FIELDS} FROM study"  # noqa: S608 (our own names)


def _study_of(row: tuple[Any, ...]) -> Study:
    fields = list(row)
    fields[3] = _columns_of(row[3])
    fields[-1] = None if row[-1] is None else json.loads(row[-1])
    return Study(*fields)


def _columns_text(columns: Columns) -> str:
    limits = [
        [column.name, column.limit.result, column.limit.at_most, column.limit.at_least, column.unit_of_margins]
        for column in columns.limits
    ]
    given, found = ([[column.name, column.unit] for column in part] for part in (columns.numbers, columns.results))
    return json.dumps([given, found, limits])


def _columns_of(text: str) -> Columns:
    try:
        given, found, limits = json.loads(text)
        return Columns(
            tuple(Column(*column) for column in given),
            tuple(Column(*column) for column in found),
            tuple(LimitColumn(name, Limit(*limit), unit) for name, *limit, unit in limits),
        )
    except (TypeError, ValueError) as error:
        raise sqlite3.DatabaseError("The columns of a study are not as they were written.") from error


def packed(outcome: Evaluations) -> bytes:
    """The outcome of a chunk as bytes: values, bounds, failures as JSON."""
    arrays = (np.ascontiguousarray(array, "<f8").tobytes() for array in (outcome.values, outcome.bounds))
    failures = [[case, failure.code, failure.message] for case, failure in sorted(outcome.failures.items())]
    return b"".join((*arrays, json.dumps(failures).encode()))


def unpacked(payload: bytes, cases: int, results: int) -> Evaluations:
    """What was packed."""
    size = cases * results
    numbers = np.frombuffer(payload, "<f8", 2 * size).astype(float).reshape(2, cases, results)
    failures = {case: Failure(code, message) for case, code, message in json.loads(payload[16 * size :])}
    return Evaluations(numbers[0], numbers[1], failures)


def checked(payload: bytes, digest: str, cases: int, results: int) -> Evaluations:
    """What was packed; where that is not what was kept any more, cases that have failed."""
    return unpacked(payload, cases, results) if _digest(payload) == digest else _lost(cases, results)


def _digest(payload: bytes) -> str:
    return hashlib.sha256(payload).hexdigest()


def _lost(cases: int, results: int) -> Evaluations:
    """What is told of a chunk that cannot be trusted."""
    nothing = np.full((cases, results), np.nan)
    failure = Failure("damaged", "What was kept of this case is damaged; delete the study and post it again.")
    return Evaluations(nothing, nothing.copy(), dict.fromkeys(range(cases), failure))
