"""The OpenAPI document is complete and true."""

from __future__ import annotations

from typing import Any

import httpx
import pytest

pytestmark = pytest.mark.anyio

CALLS = {
    ("post", "/v1/problems"),
    ("get", "/v1/problems/{problem_id}"),
    ("post", "/v1/fields"),
    ("post", "/v1/flux-totals"),
    ("post", "/v1/convergence"),
    ("post", "/v1/pads"),
    ("post", "/v1/resistances"),
    ("post", "/v1/reach"),
    ("post", "/v1/limits"),
    ("post", "/v1/sensitivities"),
    ("post", "/v1/tolerances"),
    ("post", "/v1/sizing"),
    ("post", "/v1/best-values"),
    ("post", "/v1/calibration"),
    ("post", "/v1/cases"),
    ("post", "/v1/studies"),
    ("get", "/v1/studies"),
    ("get", "/v1/studies/{study_id}"),
    ("delete", "/v1/studies/{study_id}"),
    ("get", "/v1/studies/{study_id}/results"),
    ("get", "/v1/studies/{study_id}/answer"),
    ("get", "/v1/studies/{study_id}/progress"),
    ("post", "/v1/studies/{study_id}/cancel"),
    ("get", "/v1/diagnostics"),
    ("get", "/health/live"),
    ("get", "/health/ready"),
    ("get", "/metrics"),
}


@pytest.fixture
async def document(client: httpx.AsyncClient) -> dict[str, Any]:
    loaded: dict[str, Any] = (await client.get("/openapi.json")).json()
    return loaded


def operations(document: dict[str, Any]) -> dict[tuple[str, str], dict[str, Any]]:
    return {(method, path): operation for path, item in document["paths"].items() for method, operation in item.items()}


def fields(document: dict[str, Any]) -> list[tuple[str, dict[str, Any]]]:
    return [
        (f"{name}.{field}", schema)
        for name, model in document["components"]["schemas"].items()
        for field, schema in model.get("properties", {}).items()
    ]


async def test_every_call_is_described(document: dict[str, Any]) -> None:
    assert document["openapi"].startswith("3.1")
    assert set(operations(document)) == CALLS
    for call, operation in operations(document).items():
        assert operation["summary"], call
        assert operation["description"], call
        for status, response in operation["responses"].items():
            assert response["description"], (call, status)


async def test_errors_are_problem_documents_only(document: dict[str, Any]) -> None:
    for call, operation in operations(document).items():
        for status, response in operation["responses"].items():
            if int(status) >= 400:
                assert list(response["content"]) == ["application/problem+json"], (call, status)
                schema = response["content"]["application/problem+json"]["schema"]
                assert schema == {"$ref": "#/components/schemas/ProblemDetails"}
    schemas = document["components"]["schemas"]
    assert "HTTPValidationError" not in schemas
    assert {"ProblemDetails", "FieldError"} <= set(schemas)


async def test_calls_with_a_body_say_how_they_can_fail(document: dict[str, Any]) -> None:
    for (method, path), operation in operations(document).items():
        if method == "post" and "requestBody" in operation:
            assert {"400", "406", "413", "415", "422", "503"} <= set(operation["responses"]), path


async def test_every_field_has_a_description(document: dict[str, Any]) -> None:
    schemas = document["components"]["schemas"]

    def described(schema: dict[str, Any]) -> bool:
        """By itself, or by the model it refers to where both would say the same."""
        referred = schemas.get(schema.get("$ref", "").rpartition("/")[2], {})
        return bool(schema.get("description") or referred.get("description"))

    assert [name for name, schema in fields(document) if not described(schema)] == []


async def test_every_field_that_is_no_object_has_an_example(document: dict[str, Any]) -> None:
    def is_object(schema: dict[str, Any]) -> bool:
        """An object, a list of objects or a constant: its own fields have the examples."""
        return "$ref" in str(schema) or "const" in schema

    missing = [
        name
        for name, schema in fields(document)
        if not (schema.get("examples") or schema.get("example") or is_object(schema))
    ]
    assert missing == []


async def test_every_reference_leads_somewhere(document: dict[str, Any]) -> None:
    found: list[str] = []

    def walk(value: Any) -> None:
        if isinstance(value, dict):
            if isinstance(value.get("$ref"), str):
                found.append(value["$ref"])
            for entry in value.values():
                walk(entry)
        elif isinstance(value, list):
            for entry in value:
                walk(entry)

    walk(document)
    names = {f"#/components/schemas/{name}" for name in document["components"]["schemas"]}
    assert set(found) <= names


async def test_question_calls_show_examples(document: dict[str, Any]) -> None:
    for path in ("/v1/problems", "/v1/fields", "/v1/flux-totals", "/v1/convergence", "/v1/pads", "/v1/resistances"):
        content = document["paths"][path]["post"]["requestBody"]["content"]["application/json"]
        for example in content["examples"].values():
            assert example["summary"]
            assert example["value"]
        assert content["examples"], path
