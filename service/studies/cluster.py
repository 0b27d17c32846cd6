"""A Dask cluster as crew. Its scheduler remembers nothing over a crash of its own; the store of studies does."""

from __future__ import annotations

import contextlib
import threading
from concurrent.futures import Future

from distributed import Client, KilledWorker
from distributed import Future as DaskFuture

from service.analysis.evaluations import FloatArray
from service.studies.chunk_work import ChunkOutcome, evaluate_chunk
from service.studies.crew import CrewLost, WorkerLost

# How long a scheduler may take to answer before it counts as lost.
_CONNECT_SECONDS = 3.0
# How often the connection and the number of workers are looked at.
_LOOK_EVERY_SECONDS = 0.5
# How long the outcome of a finished chunk may take from its worker to here.
_FETCH_SECONDS = 60.0
# How often an error inside a worker process, above all its end, makes the scheduler try elsewhere.
_RETRIES = 2


class Cluster:
    """The workers of a scheduler. address: such as tcp://host:8786, or tls:// with the certificates Dask is told of."""

    def __init__(self, address: str) -> None:
        self._address = address
        self._lock = threading.Lock()
        self._client: Client | None = None
        self._size = 1
        self._closing = threading.Event()
        self._keeper: threading.Thread | None = None

    @property
    def size(self) -> int:
        """How many chunks are computed at the same time; at least 1."""
        return self._size

    @property
    def is_reachable(self) -> bool:
        """Whether the scheduler answers."""
        client = self._client
        return client is not None and client.status == "running"

    def submit(self, work: bytes, cases: FloatArray, accuracy: float | None, seconds: float) -> Future[ChunkOutcome]:
        """Have a chunk computed. Its time is limited case by case in the worker, which nobody can end from here."""
        self._keep_connected()
        outcome: Future[ChunkOutcome] = Future()
        client = self._client
        if client is None or client.status != "running":
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
        self._closing.set()
        if self._keeper is not None:
            self._keeper.join()

    def _keep_connected(self) -> None:
        with self._lock:
            if self._keeper is None:
                self._keeper = threading.Thread(target=self._keep, name="cluster", daemon=True)
                self._keeper.start()

    def _keep(self) -> None:
        """Connect, look how many workers there are, and connect anew where the connection is lost for good."""
        while not self._closing.is_set():
            client = self._client
            if client is None or client.status == "closed":
                with contextlib.suppress(OSError):
                    self._client = Client(self._address, timeout=_CONNECT_SECONDS, set_as_default=False)
            elif client.status == "running":
                with contextlib.suppress(Exception):
                    self._size = max(1, sum(client.nthreads().values()))
            self._closing.wait(_LOOK_EVERY_SECONDS)
        if self._client is not None:
            self._client.close(timeout=_CONNECT_SECONDS)


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
