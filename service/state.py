"""What the routes of one app share: settings, store, worker, studies, solutions and answers kept, and the counts of
it all.
"""

from __future__ import annotations

import sqlite3
from dataclasses import dataclass

from fastapi import Request

from service.kept import Kept
from service.metrics import Metrics
from service.settings import Settings
from service.store import ProblemStore
from service.studies.sending import Sending
from service.studies.studies import Studies
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
    studies: Studies
    sending: Sending
    answers: Kept[KeptAnswer]
    metrics: Metrics

    def close(self) -> None:
        """Stop the work and let go of the files."""
        self.worker.close()
        self.sending.close()
        self.studies.close()
        self.store.close()


def open_state(settings: Settings) -> State:
    """A fresh state: the store's file is opened, the threads are ready, and studies that were not finished go on.

    Raises RuntimeError with a sentence for whoever starts the service when that cannot be.
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
    studies = Studies(settings, solver)
    studies.resume()
    metrics = Metrics(worker, studies, solver.kept, answers)
    return State(settings, store, worker, solver, studies, Sending(settings.studies_sent), answers, metrics)


def state_of(request: Request) -> State:
    """The state of the app that serves a request."""
    state = request.app.state.service
    assert isinstance(state, State)
    return state
