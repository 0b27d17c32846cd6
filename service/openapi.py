"""The OpenAPI document: examples of openapi_examples/, our error documents in place of the stock ones."""

from __future__ import annotations

import json
from collections.abc import Mapping
from functools import lru_cache
from pathlib import Path
from typing import Any

from fastapi import FastAPI
from fastapi.openapi.models import Example
from fastapi.openapi.utils import get_openapi
from pydantic import BaseModel

from service.media import ARRAYS
from service.models.problem_details import ProblemDetails
from service.problem_details import MEDIA_TYPE, document
from service.refusals import Issue

# Beside the package in a checkout, in an installation and in the image.
EXAMPLES = Path(__file__).resolve().parent.parent / "openapi_examples"

_PROBLEM_SCHEMA = "#/components/schemas/ProblemDetails"

# For each status a description, and an error that ends in it: its type and its sentence.
_ERRORS = {
    400: ("The body is not JSON as it has to be.", "malformed-body", "The body is empty; a JSON object is wanted."),
    404: ("There is nothing at this address.", "not-found", "No problem is stored under this id."),
    406: (
        "The answer has no form that the client accepts.",
        "not-acceptable",
        f"Answers are application/json or {ARRAYS}; name one of them in Accept, or leave it out.",
    ),
    409: (
        "The study is not in a state for this.",
        "wrong-state",
        "The study is running; it has an answer when it is finished.",
    ),
    413: ("The body is too long.", "body-too-large", "The body is longer than 2097152 bytes."),
    415: (
        "The body is not application/json.",
        "unsupported-media-type",
        "The body has to be sent with the header Content-Type: application/json.",
    ),
    422: (
        "Fields of the request cannot be used, no such body or steady state exists, or a limit of the server "
        "is passed; `type` tells which.",
        "invalid-request",
        "One field of the request cannot be used; see `errors`.",
    ),
    503: (
        "The service is busy; Retry-After tells when to try again.",
        "queue-full",
        "All 4 workers are busy and 32 requests wait; try again later.",
    ),
    507: (
        "The store is full.",
        "store-full",
        "The problem needs 2048 bytes and 512 are free; send the problem with each question instead of its id.",
    ),
}

_ISSUE = Issue(
    ("problem", "body", "size", "x"), 'The unit "kg" does not measure length; wanted is a length such as mm.', "unit"
)

DESCRIPTION = """
Steady potential fields (temperature, electric potential, concentration, hydraulic head) in rectangular
bodies, with an error bound on every number.

A **problem** is a block, a body without ends along some of its axes, or a stack of layers, with what is known
on its faces and what is generated inside. Send it with each question, or store it once and name its
`problem_id`. A bare number is in the declared unit of its kind; a text such as `"25 mm"` carries its own. An
inflow is positive into the body, a flux component along its axis. Every error is a document of RFC 9457 with
a pointer to each field at fault.

**Decisions** read named `results` off the field, hold them against `limits`, and vary `numbers` of the request that
JSON pointers lead to. What takes many cases is sent as a **study**, which outlives the request and the service.

The numbers are those of the model that was typed in. Hot surfaces burn and live conductors kill whatever a calculation
says: check against measurement, keep the margins of the trade, and follow local codes and licensed practice.
"""


@lru_cache(maxsize=1)
def load_examples() -> dict[str, dict[str, Any]]:
    """All example files by name: {"summary", "description", "method", "path", "request", "answer"} each."""
    return {file.stem: json.loads(file.read_text(encoding="utf-8")) for file in sorted(EXAMPLES.glob("*.json"))}


def body_examples(path: str) -> dict[str, Example]:
    """The example requests of one call, as OpenAPI shows them."""
    return {
        name: {
            "summary": example["summary"],
            "description": example["description"],
            "value": example["request"],
        }
        for name, example in load_examples().items()
        if example["path"] == path
    }


def answer_examples(path: str) -> dict[str, Any]:
    """The answers to the example requests of one call, as content of a response."""
    return {
        "application/json": {
            "examples": {
                name: {"summary": example["summary"], "value": example["answer"]}
                for name, example in load_examples().items()
                if example["path"] == path
            }
        }
    }


def error_responses(*statuses: int) -> dict[int | str, dict[str, Any]]:
    """Descriptions of error answers, as problem documents only."""
    responses: dict[int | str, dict[str, Any]] = {}
    for status in statuses:
        description, kind, detail = _ERRORS[status]
        example = document(kind, detail, (_ISSUE,) if kind == "invalid-request" else ())
        responses[status] = {
            "description": description,
            "content": {MEDIA_TYPE: {"schema": {"$ref": _PROBLEM_SCHEMA}, "example": example}},
        }
    return responses


def answer_responses(
    path: str, model: type[BaseModel], texts: Mapping[str, str] | None = None
) -> dict[int | str, dict[str, Any]]:
    """Descriptions of the answers of a call that takes a question.

    texts: descriptions of its other forms by their media types.
    """
    other_forms = {
        media_type: {"schema": {"type": "string", "description": description}}
        for media_type, description in (texts or {}).items()
    }
    return {
        200: {
            "model": model,
            "description": "The answer. `ETag` names its content, `Server-Timing` tells where the time went.",
            "content": {
                **answer_examples(path),
                ARRAYS: {
                    "schema": {
                        "type": "string",
                        "format": "binary",
                        "description": "The same with arrays as entries of a ZIP archive of .npy files "
                        "(numpy.load); the entry `answer` is the JSON with the name of an entry in place of "
                        "each array. NaN stands for null.",
                    }
                },
                **other_forms,
            },
        },
        **error_responses(400, 406, 413, 415, 422, 503),
    }


def install(app: FastAPI) -> None:
    """Make the app serve this document."""

    def openapi() -> dict[str, Any]:
        if app.openapi_schema is None:
            app.openapi_schema = _document(app)
        return app.openapi_schema

    app.openapi = openapi  # type: ignore[method-assign]


def _document(app: FastAPI) -> dict[str, Any]:
    document = get_openapi(
        title=app.title,
        version=app.version,
        summary=app.summary,
        description=app.description,
        routes=app.routes,
        tags=app.openapi_tags,
    )
    for item in document["paths"].values():
        for operation in item.values():
            _drop_stock_errors(operation["responses"])
    schemas = document["components"]["schemas"]
    # The stock error documents: ours are declared on every call.
    for name in ("HTTPValidationError", "ValidationError"):
        schemas.pop(name, None)
    details = ProblemDetails.model_json_schema(ref_template="#/components/schemas/{model}")
    schemas.update(details.pop("$defs"))
    schemas["ProblemDetails"] = details
    return document


def _drop_stock_errors(responses: dict[str, Any]) -> None:
    """Take out the framework's 422 where a call declares none of its own: its parameters cannot fail."""
    if "application/json" in responses.get("422", {}).get("content", {}):
        del responses["422"]
