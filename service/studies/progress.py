"""How a study stands, as clients see it, and its progress as a stream of events."""

from __future__ import annotations

import asyncio
import time
from collections.abc import AsyncIterator, Callable
from datetime import UTC, datetime
from typing import Any

from fastapi.sse import format_sse_event
from pydantic_core import to_json

from service.refusals import UnknownStudy
from service.studies.store import Study

# How often a stream and a client who waits look for news.
LOOK_EVERY_SECONDS = 0.2
# A stream without news says so much in this time, lest something between here and the client closes it.
_SIGN_OF_LIFE_SECONDS = 15.0

ADDRESS = "/v1/studies"

ShowStudy = Callable[[str], tuple[Study, dict[str, Any]]]


def study_shown(
    study: Study, failures: list[dict[str, Any]], workers: int, *, waits_for_cluster: bool
) -> dict[str, Any]:
    """A study as clients see it. failures: the first cases that failed. workers: chunks computed at the same time."""
    address = f"{ADDRESS}/{study.study_id}"
    return {
        "study_id": study.study_id,
        "study": study.name,
        "state": study.state,
        "waits_for_cluster": waits_for_cluster and study.state == "running",
        "created": _time_shown(study.created),
        "started": _time_shown(study.started),
        "ended": _time_shown(study.ended),
        "progress": progress_shown(study, workers),
        "failures": failures,
        "fault": study.fault,
        "results": f"{address}/results",
        "answer": f"{address}/answer" if study.state == "finished" else None,
    }


def progress_shown(study: Study, workers: int) -> dict[str, Any]:
    """How far a study is."""
    # How many cases there are was estimated when the study came in.
    expected = study.done if study.state == "finished" else max(study.expected, study.done)
    seconds_left = None
    if study.state == "running" and study.done:
        seconds_left = round((expected - study.done) * study.seconds / study.done / workers, 1)
    return {
        "cases_done": study.done,
        "cases_failed": study.failed,
        "cases_expected": expected,
        "seconds_left": seconds_left,
    }


def _time_shown(seconds: float | None) -> str | None:
    """A time of the clock as RFC 3339 writes it, in UTC."""
    if seconds is None:
        return None
    return datetime.fromtimestamp(seconds, UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")


async def events(study_id: str, show: ShowStudy, last_seen: int) -> AsyncIterator[bytes]:
    """News of a study until it is over: each event is how it stands, under the number of its revision.

    last_seen: the revision a client knows already, 0 for none. It takes up a stream that broke where it was, since an
    event makes all before it needless.
    """
    said = time.monotonic()
    while True:
        try:
            study, shown = await asyncio.to_thread(show, study_id)
        except UnknownStudy:
            # Deleted since.
            return
        if study.revision > last_seen:
            last_seen, said = study.revision, time.monotonic()
            yield format_sse_event(data_str=to_json(shown).decode(), event=study.state, id=str(study.revision))
        if study.is_over:
            return
        if time.monotonic() - said > _SIGN_OF_LIFE_SECONDS:
            said = time.monotonic()
            yield format_sse_event(comment="no news")
        await asyncio.sleep(LOOK_EVERY_SECONDS)
