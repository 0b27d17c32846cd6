"""Worker processes of this machine, with less priority than the service itself, and limits on time and memory."""

from __future__ import annotations

import multiprocessing
import os
import signal
import sys
import threading
import time
from concurrent.futures import Future
from concurrent.futures import TimeoutError as FutureTimeout
from concurrent.futures.process import BrokenProcessPool

from pebble import ProcessExpired, ProcessPool

from service.analysis.evaluations import FloatArray
from service.studies.chunk_work import ChunkOutcome, evaluate_chunk
from service.studies.crew import CrewLost, TimeOver, WorkerLost

if sys.platform != "win32":
    import resource

# How often a worker looks whether its service still lives.
_LOOK_EVERY_SECONDS = 0.5
# The warning of the process that frees what a killed service has left, as an option of the interpreter.
_QUIET = "ignore:resource_tracker:UserWarning"
# A new process imports the solver before its first chunk.
_START_SECONDS = 60.0


class Pool:
    """Some processes, started with the first chunk.

    memory_bytes: address space of each. niceness: steps of priority they are below this process, so that a request
    that comes in finds a processor at once.
    """

    def __init__(self, workers: int, memory_bytes: int, niceness: int) -> None:
        self._workers = workers
        self._memory_bytes = memory_bytes
        self._niceness = niceness
        self._lock = threading.Lock()
        self._pool: ProcessPool | None = None

    @property
    def size(self) -> int:
        """How many chunks are computed at the same time."""
        return self._workers

    @property
    def is_reachable(self) -> bool:
        """Always; a process that ends is replaced."""
        return True

    def submit(self, work: bytes, cases: FloatArray, accuracy: float | None, seconds: float) -> Future[ChunkOutcome]:
        """Have a chunk computed; cancelling its future ends the process that computes it."""
        with self._lock:
            if self._pool is not None and not self._pool.active:
                # Processes that were ended from outside took a lock of the pool along.
                self._end()
            if self._pool is None:
                _tidy_up_quietly()
                # Started afresh: a copy of a process with threads may hang on a lock that one of them held.
                self._pool = ProcessPool(
                    max_workers=self._workers,
                    initializer=prepare_worker,
                    initargs=(os.getpid(), self._memory_bytes, self._niceness),
                    context=multiprocessing.get_context("spawn"),
                )
            started = self._pool.schedule(
                evaluate_chunk, args=(work, cases, accuracy), timeout=seconds + _START_SECONDS
            )
        outcome: Future[ChunkOutcome] = Future()
        started.add_done_callback(lambda done: _hand_over(done, outcome))
        outcome.add_done_callback(lambda done: started.cancel() if done.cancelled() else None)
        return outcome

    def close(self) -> None:
        """End all processes, whatever they do."""
        with self._lock:
            self._end()

    def _end(self) -> None:
        if self._pool is not None:
            self._pool.stop()
            self._pool.join()
            self._pool = None


def _tidy_up_quietly() -> None:
    """Where a service is killed, a process of the interpreter frees its semaphores. That is no news for the log."""
    if _QUIET not in sys.warnoptions:
        # That process has the options for warnings that stand here when it starts.
        sys.warnoptions.append(_QUIET)


def _hand_over(done: Future[ChunkOutcome], outcome: Future[ChunkOutcome]) -> None:
    """Pass on how a chunk ended, in the words of crews. Nobody waits for one that was cancelled."""
    if done.cancelled() or not outcome.set_running_or_notify_cancel():
        return
    error = done.exception()
    if error is None:
        outcome.set_result(done.result())
    elif isinstance(error, FutureTimeout):
        outcome.set_exception(TimeOver())
    elif isinstance(error, BrokenProcessPool):
        outcome.set_exception(CrewLost())
    elif isinstance(error, ProcessExpired | MemoryError):
        outcome.set_exception(WorkerLost())
    else:
        outcome.set_exception(error)


def prepare_worker(parent: int, memory_bytes: int, niceness: int) -> None:
    """Make this process a worker: less priority, limited memory, and an end when its service ends."""
    # Ctrl-C in a terminal reaches the whole group; the service ends its workers itself.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    if sys.platform != "win32":
        os.nice(niceness)
        resource.setrlimit(resource.RLIMIT_AS, (memory_bytes, memory_bytes))
    threading.Thread(target=_end_with, args=(parent,), daemon=True).start()


def _end_with(parent: int) -> None:
    """A service that is killed cannot end its workers, and they would wait for it for ever."""
    while os.getppid() == parent:
        time.sleep(_LOOK_EVERY_SECONDS)
    os._exit(1)
