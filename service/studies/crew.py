"""Who computes chunks: the interface of the processes of this machine and of a cluster."""

from __future__ import annotations

from concurrent.futures import Future
from typing import Protocol

from service.analysis.evaluations import FloatArray
from service.studies.chunk_work import ChunkOutcome


class CrewLost(Exception):
    """The whole crew is out of reach for a moment. Nothing is known about the chunk; hand it in again."""


class WorkerLost(Exception):
    """A process that computed this chunk ended, of itself or for lack of memory."""


class TimeOver(Exception):
    """The chunk took longer than its cases may."""


class Crew(Protocol):
    """Computes chunks. A future of it ends in one of the three exceptions above where there is no outcome."""

    @property
    def size(self) -> int:
        """How many chunks are computed at the same time; at least 1."""

    @property
    def is_reachable(self) -> bool:
        """Whether it can take chunks at the moment."""

    def submit(self, work: bytes, cases: FloatArray, accuracy: float | None, seconds: float) -> Future[ChunkOutcome]:
        """Have a chunk computed. seconds: how long that may take."""

    def close(self) -> None:
        """Stop what is running and let the workers go."""
