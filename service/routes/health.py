"""Whether the service lives and is ready, what it is doing, and counts for a scraper.

Never limited, never queued.
"""

from __future__ import annotations

import asyncio
from typing import Any

from fastapi import APIRouter, Request, Response
from prometheus_client import CONTENT_TYPE_LATEST

from service import __version__
from service.models.operation import Diagnostics, Health
from service.openapi import error_responses
from service.problem_details import TYPES, problem_response
from service.state import state_of

router = APIRouter(tags=["operation"])

READY_WITHIN_SECONDS = 2.0
_NOT_READY = "The store of problems or that of studies does not answer."


@router.get("/health/live", summary="Whether the process answers", response_model=Health)
async def live() -> dict[str, str]:
    """Answers as long as the process takes requests at all."""
    return {"status": "ok"}


@router.get(
    "/health/ready",
    summary="Whether questions can be answered",
    response_model=Health,
    responses={503: error_responses(503)[503] | {"description": _NOT_READY}},
)
async def ready(request: Request) -> Any:
    """Answers ok when the stores can be read, within two seconds; otherwise 503."""
    state = state_of(request)
    try:
        async with asyncio.timeout(READY_WITHIN_SECONDS):
            await asyncio.to_thread(state.store.report)
            await asyncio.to_thread(state.studies.report)
    except Exception:
        return problem_response("not-ready", _NOT_READY)
    return {"status": "ok"}


@router.get("/v1/diagnostics", summary="What the service is doing", response_model=Diagnostics)
async def diagnostics(request: Request) -> dict[str, Any]:
    """Hits and misses of everything that is kept, how busy the worker is, how full the stores are."""
    state = state_of(request)
    store = await asyncio.to_thread(state.store.report)
    return {
        "version": __version__,
        "caches": state.metrics.caches(),
        "work": state.metrics.work(),
        "store": {"problems": store.problems, "size": store.size, "limit": store.limit},
        "studies": await asyncio.to_thread(state.metrics.studies),
    }


@router.get(
    "/metrics",
    summary="Counts for a scraper",
    response_class=Response,
    responses={200: {"content": {"text/plain": {"schema": {"type": "string"}}}, "description": "Counts as text."}},
)
async def metrics(request: Request) -> Response:
    """Requests, times, caches and work in the text form of Prometheus."""
    return Response(state_of(request).metrics.text(), media_type=CONTENT_TYPE_LATEST)


@router.get("/problem-types/{name}", include_in_schema=False, response_model=None)
async def problem_type(name: str) -> Response | dict[str, Any]:
    """What the address in an error's `type` stands for."""
    found = TYPES.get(name)
    if found is None:
        return problem_response("not-found", "There is no such type of error.")
    return {"type": f"/problem-types/{found.name}", "title": found.title, "status": found.status}
