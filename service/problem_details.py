"""Errors as documents of RFC 9457. The only file that chooses a status code."""

from __future__ import annotations

import logging
import uuid
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any
from urllib.parse import quote

from fastapi import FastAPI, Request, Response
from fastapi.exceptions import RequestValidationError
from pydantic_core import to_json
from starlette.exceptions import HTTPException

from service import refusals
from service.core import errors as core
from service.refusals import Issue, Path
from service.validation_sentences import issues_of

MEDIA_TYPE = "application/problem+json"
TYPES_PATH = "/problem-types/"
# An answer with more than these helps nobody; `detail` says how many there were.
MOST_ERRORS_SHOWN = 50

logger = logging.getLogger("service")


@dataclass(frozen=True)
class ProblemType:
    """One kind of error: the last part of its address, its status and its fixed title."""

    name: str
    status: int
    title: str


_TYPES = (
    ProblemType("malformed-body", 400, "The request body is not well-formed JSON"),
    ProblemType("not-found", 404, "There is nothing at this address"),
    ProblemType("method-not-allowed", 405, "This address does not take this method"),
    ProblemType("not-acceptable", 406, "The answer has no form that the client accepts"),
    ProblemType("body-too-large", 413, "The request body is too long"),
    ProblemType("unsupported-media-type", 415, "The request body is not of a kind that is read here"),
    ProblemType("invalid-request", 422, "Some fields of the request cannot be used"),
    ProblemType("not-physical", 422, "This cannot be solved as it stands"),
    ProblemType("no-steady-state", 422, "There is no steady state"),
    ProblemType("outside-body", 422, "A place lies outside the body"),
    ProblemType("outside-law", 422, "The potential leaves the range of the conductivity law"),
    ProblemType("accuracy-not-reached", 422, "The accuracy asked for cannot be promised"),
    ProblemType("too-costly", 422, "The request passes a limit of the server"),
    ProblemType("time-limit", 422, "The time for one request was over before the answer was complete"),
    ProblemType("bad-request", 400, "The request cannot be served"),
    ProblemType("internal-error", 500, "Something failed inside the service"),
    ProblemType("queue-full", 503, "The service is busy"),
    ProblemType("not-ready", 503, "The service is not ready"),
    ProblemType("store-busy", 503, "The store is held by another process"),
    ProblemType("store-full", 507, "The store is full"),
    ProblemType("wrong-state", 409, "The study is not in a state for this"),
)
TYPES: dict[str, ProblemType] = {kind.name: kind for kind in _TYPES}

_TYPE_OF_EXCEPTION: dict[type[Exception], str] = {
    refusals.MalformedBody: "malformed-body",
    refusals.UnsupportedMediaType: "unsupported-media-type",
    refusals.BodyTooLarge: "body-too-large",
    refusals.NotAcceptable: "not-acceptable",
    refusals.RequestRefused: "invalid-request",
    refusals.UnknownProblem: "not-found",
    refusals.TooCostly: "too-costly",
    refusals.QueueFull: "queue-full",
    refusals.StoreBusy: "store-busy",
    refusals.StoreFull: "store-full",
    refusals.UnknownStudy: "not-found",
    refusals.WrongState: "wrong-state",
    core.NotPhysical: "not-physical",
    core.NoSteadyState: "no-steady-state",
    core.OutsideBody: "outside-body",
    core.OutsideLaw: "outside-law",
    core.TooManyPanels: "too-costly",
    core.AccuracyNotReached: "accuracy-not-reached",
    core.Interrupted: "time-limit",
}
_TYPE_OF_STATUS = {404: "not-found", 405: "method-not-allowed", 406: "not-acceptable", 413: "body-too-large"}


def pointer(path: Path) -> str:
    """A path of keys and indices as a JSON pointer in a URI fragment: #/problem/faces/z_low."""
    parts = (str(part).replace("~", "~0").replace("/", "~1") for part in path)
    return "#" + "".join("/" + quote(part, safe="~!$&'()*+,;=:@?") for part in parts)


def document(
    kind: str, detail: str, issues: tuple[Issue, ...] = (), extra: Mapping[str, Any] | None = None
) -> dict[str, Any]:
    """The error document of one type."""
    problem_type = TYPES[kind]
    content: dict[str, Any] = {
        "type": TYPES_PATH + problem_type.name,
        "title": problem_type.title,
        "status": problem_type.status,
        "detail": detail,
    }
    if issues:
        content["errors"] = [
            {"pointer": pointer(issue.path), "detail": issue.detail, "code": issue.code}
            for issue in issues[:MOST_ERRORS_SHOWN]
        ]
    return content | dict(extra or {})


def problem_response(
    kind: str,
    detail: str,
    issues: tuple[Issue, ...] = (),
    extra: Mapping[str, Any] | None = None,
    headers: Mapping[str, str] | None = None,
) -> Response:
    """The error document of one type, as a response."""
    return Response(
        to_json(document(kind, detail, issues, extra)),
        status_code=TYPES[kind].status,
        media_type=MEDIA_TYPE,
        headers=dict(headers or {}),
    )


def install(app: FastAPI) -> None:
    """Make every failure that is foreseen end in one of these documents; see middleware.LastResort for the
    rest.
    """
    app.add_exception_handler(refusals.Refusal, _on_refusal)
    app.add_exception_handler(core.CoreError, _on_core_error)
    app.add_exception_handler(RequestValidationError, _on_validation)
    app.add_exception_handler(HTTPException, _on_http_exception)


async def _on_refusal(_: Request, error: Exception) -> Response:
    assert isinstance(error, refusals.Refusal)
    kind = _TYPE_OF_EXCEPTION[type(error)]
    extra: dict[str, Any] = {}
    headers: dict[str, str] = {}
    if isinstance(error, refusals.TooCostly):
        extra = {"estimate": error.estimate, "limit": error.limit}
    if isinstance(error, refusals.QueueFull | refusals.StoreBusy):
        headers["Retry-After"] = str(error.retry_after_seconds)
    return problem_response(kind, error.detail, error.issues, extra, headers)


async def _on_core_error(_: Request, error: Exception) -> Response:
    """An error of the solver. Its `field` is a path in the request by the time it comes here."""
    assert isinstance(error, core.CoreError)
    kind = _TYPE_OF_EXCEPTION.get(type(error), "not-physical")
    issues = (Issue(error.field, error.message, kind),) if error.field else ()
    extra: dict[str, Any] = {}
    if isinstance(error, core.NoSteadyState):
        extra["imbalance"] = error.imbalance
    if isinstance(error, core.TooManyPanels):
        extra |= {"estimate": error.needed, "limit": error.allowed}
    if isinstance(error, core.AccuracyNotReached):
        extra["bound"] = error.bound
    return problem_response(kind, error.message, issues, extra)


async def _on_validation(_: Request, error: Exception) -> Response:
    assert isinstance(error, RequestValidationError)
    refused = refusals.RequestRefused(issues_of(error.errors(), error.body))
    return await _on_refusal(_, refused)


async def _on_http_exception(request: Request, error: Exception) -> Response:
    """What the framework itself raises: unknown paths and methods above all."""
    assert isinstance(error, HTTPException)
    kind = _TYPE_OF_STATUS.get(error.status_code, "bad-request" if error.status_code < 500 else "internal-error")
    headers = error.headers or {}
    details = {
        "not-found": "No such address; the calls are described at /docs.",
        "method-not-allowed": f"Use {headers.get('Allow', 'another method').replace(', ', ' or ')} here.",
    }
    return problem_response(kind, details.get(kind, TYPES[kind].title + "."), headers=headers)


def unforeseen_response(method: str, path: str, error: Exception) -> Response:
    """The document of a failure nobody foresaw: its own text stays in the log."""
    occurrence = uuid.uuid4().urn
    logger.error("%s %s failed, %s", method, path, occurrence, exc_info=error)
    return problem_response(
        "internal-error",
        "The request could not be answered. The failure was logged under the name in `instance`.",
        extra={"instance": occurrence},
    )
