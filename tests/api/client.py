"""A client of an app in this process, and what every error document has to be."""

from __future__ import annotations

import re
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from typing import Any

import httpx

from service.app import create_app
from service.models.problem_details import ProblemDetails
from service.problem_details import TYPES
from service.settings import Settings


@asynccontextmanager
async def open_client(settings: Settings) -> AsyncIterator[httpx.AsyncClient]:
    """A client of an app with these settings; the transport runs no lifespan, so it is run here."""
    app = create_app(settings)
    transport = httpx.ASGITransport(app)
    async with (
        app.router.lifespan_context(app),
        httpx.AsyncClient(transport=transport, base_url="http://stillfield.test") as client,
    ):
        yield client


def check_problem_document(response: httpx.Response, status: int) -> dict[str, Any]:
    """The error document of a response, after checking that it is one, of a known type, with this status."""
    assert response.status_code == status, response.text
    assert response.headers["content-type"] == "application/problem+json"
    document: dict[str, Any] = response.json()
    details = ProblemDetails.model_validate(document)
    kind = TYPES[details.type.removeprefix("/problem-types/")]
    assert (details.title, details.status) == (kind.title, status)
    assert kind.status == status
    assert details.detail.endswith(".")
    for error in details.errors or []:
        assert re.fullmatch(r"#(/[^/]+)*", error.pointer)
        assert error.detail.endswith(".")
    return document


def pointers(document: dict[str, Any]) -> list[str]:
    """The fields an error document points at."""
    return [error["pointer"] for error in document.get("errors", [])]
