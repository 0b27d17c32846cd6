"""What the routes of one app share: settings, store, worker, solutions and answers kept, and the counts of it
all.
"""

from __future__ import annotations

import sqlite3
from dataclasses import dataclass

from fastapi import Request

from service.kept import Kept
from service.metrics import Metrics
from service.settings import Settings
from service.store import ProblemStore
from service.translation.solving import Solver
from service.worker import Worker


@dataclass(frozen=True)
class KeptAnswer:
    """A finished answer as it was sent."""

    body: bytes
    media_type: str
    etag: str
    file_name: str


@dataclass(frozen=True)
class State:
    """Everything one app works with."""

    settings: Settings
    store: ProblemStore
    worker: Worker
    solver: Solver
    answers: Kept[KeptAnswer]
    metrics: Metrics

    def close(self) -> None:
        """Stop the work and let go of the file."""
        self.worker.close()
        self.store.close()


def open_state(settings: Settings) -> State:
    """A fresh state: the store's file is opened and the threads are ready.

    Raises RuntimeError with a sentence for whoever starts the service when the file cannot be opened.
    """
    try:
        store = ProblemStore(settings.store_path, settings.store_bytes)
    except (OSError, sqlite3.Error) as error:
        raise RuntimeError(
            f"The store of problems at {settings.store_path} cannot be opened ({error}); "
            "set STILLFIELD_STORE_PATH to a file that can be written."
        ) from None
    worker = Worker(settings.worker_threads, settings.queue_length, settings.time_limit_seconds)
    solver = Solver(settings, store)
    answers: Kept[KeptAnswer] = Kept(settings.answer_cache_bytes, lambda answer: len(answer.body))
    return State(settings, store, worker, solver, answers, Metrics(worker, solver.kept, answers))


def state_of(request: Request) -> State:
    """The state of the app that serves a request."""
    state = request.app.state.service
    assert isinstance(state, State)
    return state
