"""The durable engine: which studies run and wait, remembered by DBOS in an SQLite file beside the store.

DBOS starts every study that was accepted, so many at a time, and after a crash those again that had begun. What is
done in a study is not its matter but the store's. The library is one for the process, so that of several apps in one
process only one at a time can run studies.
"""

from __future__ import annotations

import logging
import sqlite3
import threading
import time
from collections.abc import Callable
from contextlib import closing
from pathlib import Path

from dbos import DBOS, DBOSConfig, SetWorkflowID

# Called with the id of a study and the number of the attempt.
RunStudy = Callable[[str, int], None]

_QUEUE = "studies"
# How soon a study that was accepted begins.
_POLL_SECONDS = 0.25
# A study is resumed however often the service was killed.
_MOST_RECOVERIES = 1_000_000

logger = logging.getLogger("service")

_lock = threading.Lock()
_running: Engine | None = None


class Stopping(BaseException):
    """The service ends. No failure of the study: it is begun again with the service, which only a base exception
    tells the engine.
    """


class Engine:
    """Begins studies in threads. path: file of the engine. most_running: studies that run at the same time."""

    def __init__(self, path: Path, most_running: int, run: RunStudy) -> None:
        self._path = path
        self._most_running = most_running
        self.run = run
        self._is_open = False

    def submit(self, study_id: str, attempt: int) -> None:
        """Have a study begun as soon as there is room. The same attempt is begun once, however often it is asked for.

        Raises RuntimeError while another app of this process runs studies.
        """
        with _lock:
            self._open()
            with SetWorkflowID(f"{study_id}.{attempt}"):
                DBOS.enqueue_workflow(_QUEUE, _run_study, study_id, attempt)

    def close(self) -> None:
        """Begin no more. Those that run have been told to stop and have stopped."""
        with _lock:
            self._close()

    def _open(self) -> None:
        global _running
        if self._is_open:
            return
        if _running is not None:
            raise RuntimeError("Another app of this process runs studies; close it first.")
        config: DBOSConfig = {
            "name": "stillfield",
            "system_database_url": f"sqlite:///{self._path}",
            # Not the release of the service: which of its studies a release may go on with is decided in the store.
            "application_version": "studies-1",
            "executor_id": "stillfield",
            "enable_otlp": False,
            "log_level": logging.getLevelName(logging.CRITICAL),
        }
        _set_aside_if_damaged(self._path)
        # Recovery begins with the launch.
        _running = self
        self._is_open = True
        try:
            DBOS(config=config)
            DBOS.launch()
            # What is over is of no more use to it; the store has the studies.
            over = DBOS.list_workflows(status=["SUCCESS", "ERROR"], load_input=False, load_output=False)
            DBOS.delete_workflows([workflow.workflow_id for workflow in over])
            DBOS.register_queue(
                _QUEUE,
                worker_concurrency=self._most_running,
                polling_interval_sec=_POLL_SECONDS,
                on_conflict="always_update",
            )
        except BaseException:
            self._close()
            raise

    def _close(self) -> None:
        global _running
        if self._is_open:
            DBOS.destroy()
            self._is_open = False
            _running = None


def _set_aside_if_damaged(path: Path) -> None:
    """Begin with an empty file where the present one cannot be read: which studies go on the store knows as well."""
    if not path.is_file():
        return
    try:
        with closing(sqlite3.connect(path)) as connection:
            connection.execute("PRAGMA quick_check(1)").fetchall()
    except sqlite3.OperationalError:
        # Held by another process for a moment, which is no damage.
        return
    except sqlite3.DatabaseError as error:
        aside = path.with_name(f"{path.name}.damaged-{int(time.time())}")
        logger.error("The file of the engine is damaged (%s) and set aside as %s.", error, aside)
        path.rename(aside)
        for rest in ("-wal", "-shm"):
            path.with_name(path.name + rest).unlink(missing_ok=True)


@DBOS.workflow(name="study", max_recovery_attempts=_MOST_RECOVERIES)
def _run_study(study_id: str, attempt: int) -> None:
    engine = _running
    if engine is None:
        raise Stopping
    engine.run(study_id, attempt)
