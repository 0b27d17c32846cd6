"""A Dask cluster as crew. Its scheduler remembers nothing over a crash of its own; the store of studies does."""

from __future__ import annotations

import threading
import time
from concurrent.futures import Future

from distributed import Client, KilledWorker
from distributed import Future as DaskFuture

from service.analysis.evaluations import FloatArray
from service.studies.chunk_work import ChunkOutcome, evaluate_chunk
from service.studies.crew import CrewLost, WorkerLost

# A scheduler that does not answer is asked again after this time.
_CONNECT_SECONDS = 3.0
# How long the outcome of a finished chunk may take from its worker to here.
_FETCH_SECONDS = 60.0
# How often an error inside a worker process, above all its end, makes the scheduler try elsewhere.
_RETRIES = 2
# How many workers there are is asked again after this time.
_SIZE_SECONDS = 2.0


class Cluster:
    """The workers of a scheduler. address: such as tcp://host:8786, or tls:// with the certificates Dask is told of."""

    def __init__(self, address: str) -> None:
        self._address = address
        self._lock = threading.Lock()
        self._client: Client | None = None
        self._next_try = 0.0
        self._size = 1
        self._next_size = 0.0
        self._is_closed = False

    @property
    def size(self) -> int:
        """How many chunks are computed at the same time; at least 1."""
        client = self._connected()
        if client is not None and time.monotonic() >= self._next_size:
            self._next_size = time.monotonic() + _SIZE_SECONDS
            try:
                self._size = max(1, sum(client.nthreads().values()))
            except Exception:
                self._size = 1
        return self._size

    @property
    def is_reachable(self) -> bool:
        """Whether the scheduler answers."""
        return self._connected() is not None

    def submit(self, work: bytes, cases: FloatArray, accuracy: float | None, seconds: float) -> Future[ChunkOutcome]:
        """Have a chunk computed. Its time is limited case by case in the worker, which nobody can end from here."""
        outcome: Future[ChunkOutcome] = Future()
        client = self._connected()
        if client is None:
            outcome.set_exception(CrewLost())
            return outcome
        try:
            # Not pure: a chunk that is handed in again is computed again, whatever became of it before.
            started = client.submit(evaluate_chunk, work, cases, accuracy, pure=False, retries=_RETRIES)
        except Exception:
            # The connection was lost between the question and the call.
            outcome.set_exception(CrewLost())
            return outcome
        started.add_done_callback(lambda done: _hand_over(done, outcome))
        outcome.add_done_callback(lambda done: _give_up(started) if done.cancelled() else None)
        return outcome

    def close(self) -> None:
        """Let go of the scheduler; it drops what nobody waits for."""
        with self._lock:
            self._is_closed = True
            if self._client is not None:
                self._client.close(timeout=_CONNECT_SECONDS)
                self._client = None

    def _connected(self) -> Client | None:
        """The connection, made anew where it is lost for good; None while there is none."""
        with self._lock:
            if self._client is not None and self._client.status != "closed":
                return self._client if self._client.status == "running" else None
            if self._is_closed or time.monotonic() < self._next_try:
                return None
            self._next_try = time.monotonic() + _CONNECT_SECONDS
            try:
                self._client = Client(self._address, timeout=_CONNECT_SECONDS, set_as_default=False)
            except OSError:
                self._client = None
            return self._client


def _give_up(started: DaskFuture[ChunkOutcome]) -> None:
    """Have a chunk dropped that nobody waits for. One that runs goes on to its end."""
    if started.client.status == "running":
        started.cancel()


def _hand_over(done: DaskFuture[ChunkOutcome], outcome: Future[ChunkOutcome]) -> None:
    """Pass on how a chunk ended, in the words of crews. Nobody waits for one that was cancelled."""
    if not outcome.set_running_or_notify_cancel():
        return
    if done.status not in ("finished", "error"):
        outcome.set_exception(CrewLost())
        return
    try:
        outcome.set_result(done.result(timeout=_FETCH_SECONDS))
    except (KilledWorker, MemoryError):
        outcome.set_exception(WorkerLost())
    except BaseException as error:
        # Where the chunk itself ended in an error it is that; otherwise the outcome was lost on its way.
        outcome.set_exception(error if done.status == "error" else CrewLost())
