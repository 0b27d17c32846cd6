"""Problems by content digest, in one SQLite file that survives a restart.

Nothing is ever dropped: an id that was given out stays good. When the room is used up, new problems are
refused.
"""

from __future__ import annotations

import sqlite3
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from service.refusals import StoreBusy, StoreFull

# Another process may hold the file for a moment, a backup above all.
_BUSY_SECONDS = 5.0


@dataclass(frozen=True)
class StoreReport:
    """What the store holds. size, limit: bytes of problems."""

    problems: int
    size: int
    limit: int


class ProblemStore:
    """Canonical problem texts under their digests. One connection, used by one thread at a time."""

    def __init__(self, path: Path, limit_bytes: int) -> None:
        self._limit = limit_bytes
        self._lock = threading.Lock()
        if str(path) != ":memory:":
            path.parent.mkdir(parents=True, exist_ok=True)
        self._connection = sqlite3.connect(path, timeout=_BUSY_SECONDS, isolation_level=None, check_same_thread=False)
        # Readers do not wait for the writer, and what was answered as stored is on the disk.
        self._connection.execute("PRAGMA journal_mode=WAL")
        self._connection.execute("PRAGMA synchronous=FULL")
        self._connection.execute(
            "CREATE TABLE IF NOT EXISTS problem (id TEXT PRIMARY KEY, content BLOB NOT NULL) WITHOUT ROWID"
        )

    def put(self, problem_id: str, content: bytes) -> bool:
        """Store a problem; whether it is new. Raises StoreFull when there is no room for it, and StoreBusy."""
        with self._ready():
            self._connection.execute("BEGIN IMMEDIATE")
            try:
                is_new = not self._has(problem_id)
                if is_new:
                    self._check_room(len(content))
                    self._connection.execute("INSERT INTO problem VALUES (?, ?)", (problem_id, content))
            except BaseException:
                self._connection.execute("ROLLBACK")
                raise
            self._connection.execute("COMMIT")
            return is_new

    def get(self, problem_id: str) -> bytes | None:
        """The canonical text of a problem, None if it is not stored. Raises StoreBusy."""
        with self._ready():
            row = self._connection.execute("SELECT content FROM problem WHERE id = ?", (problem_id,)).fetchone()
        return None if row is None else bytes(row[0])

    def report(self) -> StoreReport:
        """What the store holds; also shows that it answers."""
        with self._lock:
            count, size = self._connection.execute(
                "SELECT COUNT(*), COALESCE(SUM(LENGTH(content)), 0) FROM problem"
            ).fetchone()
        return StoreReport(count, size, self._limit)

    def close(self) -> None:
        """Let go of the file."""
        with self._lock:
            self._connection.close()

    @contextmanager
    def _ready(self) -> Iterator[None]:
        """The connection to ourselves; another process that holds the file too long is a reason to come again."""
        with self._lock:
            try:
                yield
            except sqlite3.OperationalError as error:
                raise StoreBusy("The stored problems cannot be reached at the moment; try again later.") from error

    def _has(self, problem_id: str) -> bool:
        return self._connection.execute("SELECT 1 FROM problem WHERE id = ?", (problem_id,)).fetchone() is not None

    def _check_room(self, wanted: int) -> None:
        (used,) = self._connection.execute("SELECT COALESCE(SUM(LENGTH(content)), 0) FROM problem").fetchone()
        if used + wanted > self._limit:
            raise StoreFull(
                f"The problem needs {wanted} bytes and {max(self._limit - used, 0)} are free; send the "
                "problem with each question instead of its id, or have the store enlarged."
            )
