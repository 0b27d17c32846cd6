"""What a request would cost, known before it starts, and the refusal when it is too much."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Protocol

from service.models import evaluate as models
from service.refusals import Path, TooCostly
from service.settings import Settings


class Notes(Protocol):
    """Where sentences about fields are kept."""

    def add(self, path: Path, detail: str, code: str) -> None:
        """Note what is wrong with a field."""


class Estimate(Protocol):
    """What the solver says a grid costs."""

    @property
    def multiplications(self) -> float:
        """Multiplications, about."""

    @property
    def bytes(self) -> float:
        """Working memory, about."""


def check_count(notes: Notes, path: Path, what: str, count: int, limit: int) -> None:
    """Note a list that is too long."""
    if count > limit:
        notes.add(path, f"There are {count} {what}; at most {limit} are allowed in one request.", "too-many")


def check_grid_points(notes: Notes, grids: Sequence[models.Grid], limit: int) -> None:
    """Note grids that have more places than allowed, each alone or all together."""
    counts = [math.prod(_places(axis) for axis in (grid.x, grid.y, grid.z)) for grid in grids]
    for index, count in enumerate(counts):
        if count > limit:
            detail = f"The grid has {count} places; at most {limit} are allowed in one request."
            notes.add(("evaluate", "grids", index), detail, "too-many")
    if sum(counts) > limit and max(counts) <= limit:
        detail = f"The grids have {sum(counts)} places together; at most {limit} are allowed in one request."
        notes.add(("evaluate", "grids"), detail, "too-many")


def _places(axis: float | str | list[float | str] | models.EvenAxis | models.LayerAxis) -> int:
    if isinstance(axis, models.EvenAxis | models.LayerAxis):
        return axis.count
    return len(axis) if isinstance(axis, list) else 1


def check_answer(size: int, limit: int) -> None:
    """Raise TooCostly for an answer of more bytes than allowed."""
    if size > limit:
        raise TooCostly(
            f"The answer would take up to {size} bytes; at most {limit} are sent. Ask for fewer places, or "
            "for the binary form of the answer, which is smaller.",
            size,
            limit,
        )


def check_work(estimates: Sequence[Estimate], settings: Settings) -> None:
    """Raise TooCostly when these, one after the other, take more work or memory than allowed."""
    work = sum(estimate.multiplications for estimate in estimates)
    memory = max((estimate.bytes for estimate in estimates), default=0.0)
    if work > settings.cost_multiplications:
        raise TooCostly(
            f"The request would take about {work:.2g} multiplications; at most "
            f"{settings.cost_multiplications:.2g} are allowed. Ask for fewer places, less accuracy or the "
            "potential alone.",
            work,
            settings.cost_multiplications,
        )
    if memory > settings.memory_bytes:
        raise TooCostly(
            f"The request would take about {memory:.2g} bytes of memory; at most {settings.memory_bytes:.2g} "
            "are allowed. Ask for fewer places at once.",
            memory,
            settings.memory_bytes,
        )


def check_preparation(estimate: Estimate, settings: Settings) -> None:
    """Raise TooCostly when making a problem ready, before anything is asked of it, takes more than allowed."""
    for amount, limit, what in (
        (estimate.multiplications, settings.cost_multiplications, "multiplications"),
        (estimate.bytes, settings.memory_bytes, "bytes of memory"),
    ):
        if amount > limit:
            raise TooCostly(
                f"The problem alone would take about {amount:.2g} {what} before anything is asked of it; at most "
                f"{limit:.2g} are allowed. Give fewer readings on faces that are held or have a film, or a "
                "conductivity that does not vary.",
                amount,
                limit,
            )


def check_pairs(work: float, limit: float) -> None:
    """Raise TooCostly when all pairs of pads take more multiplications than allowed."""
    if work > limit:
        raise TooCostly(
            f"The request would take about {work:.2g} multiplications; at most {limit:.2g} are allowed. Ask for "
            "fewer pads, for pads on parallel faces, or for no peaks.",
            work,
            limit,
        )


# What making one case ready takes beside the work on its results, in multiplications: about two milliseconds.
CASE_OVERHEAD = 2e6


def check_cases(count: int, a_case: Sequence[Estimate], settings: Settings) -> None:
    """Raise TooCostly when so many cases take more than one request may; a study takes them."""
    advice = "send it as a study to POST /v1/studies, or ask for fewer cases."
    if count > settings.cases:
        raise TooCostly(
            f"The request would take up to {count} cases; at most {settings.cases} are computed while a client waits: "
            + advice,
            count,
            settings.cases,
        )
    work = count * (CASE_OVERHEAD + sum(estimate.multiplications for estimate in a_case))
    if work > settings.cases_multiplications:
        raise TooCostly(
            f"The request would take up to {count} cases and about {work:.2g} multiplications; at most "
            f"{settings.cases_multiplications:.2g} are allowed while a client waits: {advice}",
            work,
            settings.cases_multiplications,
        )
