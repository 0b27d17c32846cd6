"""What comes back about stored problems and about the service itself."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.models.answers import ProblemId, Remark, Units
from service.models.base import Model
from service.models.problem import Problem


class ProblemAnswer(Model):
    """A stored problem."""

    problem_id: ProblemId
    problem: Problem = Field(description="The problem as it is stored: what was posted, defaults filled in.")
    units: Units = Field(description="The unit of each kind of quantity, those left out filled in.")
    warnings: list[Remark] = Field(description="What to be aware of; often empty.")


class CacheState(Model):
    """How one cache does."""

    hits: int = Field(description="How often something was found.", examples=[120])
    misses: int = Field(description="How often it was not.", examples=[14])
    size: int = Field(description="How full it is: entries, or bytes for answers.", examples=[14])
    limit: int = Field(description="How full it may get.", examples=[64])


class WorkState(Model):
    """How busy the worker is."""

    threads: int = Field(description="Computations at the same time.", examples=[4])
    running: int = Field(description="Computations now.", examples=[1])
    waiting: int = Field(description="Requests that wait for a thread.", examples=[0])
    queue_length: int = Field(description="Requests that may wait.", examples=[32])
    finished: int = Field(description="Computations since the start.", examples=[250])
    turned_away: int = Field(description="Requests answered 503 since the start.", examples=[0])
    interrupted: int = Field(description="Computations stopped since the start.", examples=[0])
    seconds: float = Field(description="Time spent computing since the start, s.", examples=[12.7])


class StoreState(Model):
    """How full the store of problems is."""

    problems: int = Field(description="Problems stored.", examples=[17])
    size: int = Field(description="Their size, bytes.", examples=[23117])
    limit: int = Field(description="Size allowed, bytes.", examples=[536870912])


class StudiesState(Model):
    """How the studies do."""

    waiting: int = Field(description="Studies that wait to be run.", examples=[0])
    running: int = Field(description="Studies that run.", examples=[1])
    finished: int = Field(description="Studies with an answer.", examples=[12])
    cancelled: int = Field(description="Studies that were cancelled.", examples=[0])
    failed: int = Field(description="Studies that failed.", examples=[0])
    size: int = Field(description="Their size, with what running ones may come to, bytes.", examples=[1203455])
    limit: int = Field(description="Size allowed, bytes.", examples=[1073741824])
    cases: int = Field(description="Cases computed for studies since the start.", examples=[20000])
    failed_cases: int = Field(description="Those of them that failed.", examples=[3])
    seconds: float = Field(description="Time workers spent on them, s.", examples=[61.2])


class Diagnostics(Model):
    """What the service is doing."""

    version: str = Field(description="Release of the service.", examples=["0.1.0"])
    caches: dict[str, CacheState] = Field(
        description="What is kept for the next request, by name.",
        examples=[{"answers": {"hits": 120, "misses": 14, "size": 80211, "limit": 67108864}}],
    )
    work: WorkState = Field(description="How busy the worker is.")
    store: StoreState = Field(description="How full the store of problems is.")
    studies: StudiesState | None = Field(
        description="How the studies do; null while their store cannot be reached.",
    )


class Health(Model):
    """Whether the service is well."""

    status: Literal["ok"] = Field(description="Always ok; otherwise an error document comes.", examples=["ok"])
