"""create_app(settings): joins routes, error documents, limits and the static page."""

from __future__ import annotations

import asyncio
from collections.abc import AsyncIterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import asynccontextmanager

from fastapi import FastAPI
from starlette.middleware.cors import CORSMiddleware

from service import __version__, openapi, problem_details
from service.middleware import BodyLimit, Counting, LastResort, SecurityHeaders
from service.routes import (
    best_values,
    calibration,
    cases,
    convergence,
    fields,
    flux_totals,
    health,
    limits,
    pads,
    pages,
    problems,
    reach,
    resistances,
    sensitivities,
    sizing,
    studies,
    tolerances,
)
from service.settings import Settings
from service.state import open_state

_TAGS = [
    {"name": "problems", "description": "Check and store a problem."},
    {"name": "answers", "description": "Questions about a problem."},
    {"name": "decisions", "description": "What follows from a field: limits, tolerances, sizes, unknowns."},
    {"name": "studies", "description": "Questions of many cases, as jobs that outlive a request."},
    {"name": "operation", "description": "Health, caches and counts."},
]


def create_app(settings: Settings | None = None) -> FastAPI:
    """The service for some settings, those of the environment by default.

    The store is opened and the worker's threads start with the app's lifespan.
    """
    settings = Settings() if settings is None else settings

    @asynccontextmanager
    async def lifespan(app: FastAPI) -> AsyncIterator[None]:
        # Files and processes are waited for in a thread, one of its own: whatever hangs must not keep it from ending.
        loop = asyncio.get_running_loop()
        with ThreadPoolExecutor(1, thread_name_prefix="opening and closing") as own:
            app.state.service = await loop.run_in_executor(own, open_state, settings)
            try:
                yield
            finally:
                await loop.run_in_executor(own, app.state.service.close)

    app = FastAPI(
        title="Stillfield",
        summary="Steady potential fields in rectangular bodies, with an error bound on every number.",
        description=openapi.DESCRIPTION,
        version=__version__,
        lifespan=lifespan,
        docs_url=None,
        redoc_url=None,
        openapi_tags=_TAGS,
        redirect_slashes=False,
    )
    openapi.install(app)
    problem_details.install(app)
    answering = (problems, fields, flux_totals, convergence, pads, resistances, reach)
    deciding = (limits, sensitivities, tolerances, sizing, best_values, calibration, cases)
    for module in (*answering, *deciding, studies, health, pages):
        app.include_router(module.router)
    pages.mount_files(app)

    # The last one added is the outermost.
    app.add_middleware(BodyLimit, limit=settings.body_bytes)
    if settings.cors_origins:
        app.add_middleware(
            CORSMiddleware,
            allow_origins=settings.cors_origins,
            allow_methods=["GET", "POST", "DELETE"],
            allow_headers=["Content-Type", "If-None-Match", "Last-Event-ID", "Prefer"],
            expose_headers=["ETag", "Location", "Preference-Applied", "Retry-After", "Server-Timing"],
        )
    app.add_middleware(LastResort)
    app.add_middleware(SecurityHeaders)
    app.add_middleware(Counting, count=lambda: app.state.service.metrics.count)
    return app
