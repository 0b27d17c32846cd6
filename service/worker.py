"""Computations off the event loop: a bounded pool of threads, a bounded queue and a time limit.

Threads do, because the solver spends its time in matrix products, which release the interpreter. A thread
cannot be stopped from outside, so the work asks `keep_going` between its steps and is stopped there.
"""

from __future__ import annotations

import asyncio
import math
import threading
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import TypeVar

from service.core.errors import Interrupted
from service.refusals import QueueFull

Outcome = TypeVar("Outcome")
KeepGoing = Callable[[], None]

# What to do where the time was over.
ADVICE = "ask for less, or for less accuracy."

Work = Callable[[KeepGoing], Outcome]


@dataclass(frozen=True)
class WorkerReport:
    """How busy the pool is. seconds: time spent in finished work."""

    threads: int
    running: int
    waiting: int
    queue_length: int
    finished: int
    turned_away: int
    interrupted: int
    seconds: float


class Worker:
    """Runs work in threads. time_limit_seconds counts from the moment the work starts."""

    def __init__(self, threads: int, queue_length: int, time_limit_seconds: float) -> None:
        self._pool = ThreadPoolExecutor(threads, thread_name_prefix="solver")
        self._threads = threads
        self._queue_length = queue_length
        self._time_limit = time_limit_seconds
        self._lock = threading.Lock()
        self._pending = 0
        self._running = 0
        self._finished = 0
        self._turned_away = 0
        self._interrupted = 0
        self._seconds = 0.0
        self._closing = threading.Event()

    async def run(self, work: Work[Outcome], advice: str = ADVICE) -> tuple[Outcome, float]:
        """The outcome of the work and the seconds it waited for a thread.

        advice: ends the sentence of Interrupted where the time was over.
        Raises QueueFull when no more may wait, Interrupted when the time was over, and whatever the work
        raises. When the waiting task is cancelled, the work stops at its next step.
        """
        with self._lock:
            if self._pending >= self._threads + self._queue_length:
                self._turned_away += 1
                raise QueueFull(
                    f"All {self._threads} workers are busy and {self._queue_length} requests wait; try again later.",
                    self._retry_after(),
                )
            self._pending += 1
        abandoned = threading.Event()
        queued = time.perf_counter()
        future = self._pool.submit(self._run, work, abandoned, queued, advice)
        waiting = asyncio.wrap_future(future)
        # Whoever waits may go away; the work itself always runs, if only to find that it was given up and to make room.
        waiting.add_done_callback(lambda done: done.cancelled() or done.exception())
        try:
            return await asyncio.shield(waiting)
        except asyncio.CancelledError:
            abandoned.set()
            raise

    def report(self) -> WorkerReport:
        """How busy the pool is now."""
        with self._lock:
            return WorkerReport(
                self._threads,
                self._running,
                self._pending - self._running,
                self._queue_length,
                self._finished,
                self._turned_away,
                self._interrupted,
                self._seconds,
            )

    def close(self) -> None:
        """Stop at the next step of every running work and let the threads end."""
        self._closing.set()
        self._pool.shutdown(wait=True, cancel_futures=True)

    def _run(
        self, work: Work[Outcome], abandoned: threading.Event, queued: float, advice: str
    ) -> tuple[Outcome, float]:
        started = time.perf_counter()
        deadline = started + self._time_limit

        def keep_going() -> None:
            if abandoned.is_set() or self._closing.is_set():
                raise Interrupted("The request was given up before its answer was complete.")
            if time.perf_counter() > deadline:
                raise Interrupted(f"The answer was not complete after {self._time_limit:g} s; {advice}")

        with self._lock:
            self._running += 1
        try:
            keep_going()
            return work(keep_going), started - queued
        except Interrupted:
            with self._lock:
                self._interrupted += 1
            raise
        finally:
            with self._lock:
                self._running -= 1
                self._pending -= 1
                self._finished += 1
                self._seconds += time.perf_counter() - started

    def _retry_after(self) -> int:
        """Seconds after which a place in the queue is likely: the mean time of a work so far times those
        ahead.
        """
        mean = self._seconds / self._finished if self._finished else 1.0
        return max(1, math.ceil(min(mean * self._pending / self._threads, self._time_limit)))
