"""Every way to fail ends in one well-formed error document."""

from __future__ import annotations

import logging
import re

import httpx
import pytest

from service.problem_details import TYPES, pointer
from service.settings import Settings
from service.translation.solving import Solver
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import ask_points, changed, sight_port_bar, slab

pytestmark = pytest.mark.anyio


@pytest.mark.parametrize("path", ["/nowhere", "/v1", "/v1/fields/", "/static/nowhere.js", "/problem-types/none"])
async def test_unknown_address(client: httpx.AsyncClient, path: str) -> None:
    document = check_problem_document(await client.get(path), 404)
    assert document["type"] == "/problem-types/not-found"


@pytest.mark.parametrize(
    ("method", "path", "allowed"),
    [
        ("GET", "/v1/fields", "POST"),
        ("DELETE", "/v1/problems", "POST"),
        ("PUT", "/v1/flux-totals", "POST"),
        ("POST", "/health/live", "GET"),
        ("BREW", "/v1/convergence", "POST"),
    ],
)
async def test_wrong_method_is_told_the_right_one(
    client: httpx.AsyncClient, method: str, path: str, allowed: str
) -> None:
    answer = await client.request(method, path)
    document = check_problem_document(answer, 405)
    assert answer.headers["allow"] == allowed
    assert document["detail"] == f"Use {allowed} here."


async def test_every_type_has_an_address_that_describes_it(client: httpx.AsyncClient) -> None:
    for name, kind in TYPES.items():
        described = (await client.get(f"/problem-types/{name}")).json()
        assert described == {"type": f"/problem-types/{name}", "title": kind.title, "status": kind.status}


async def test_unforeseen_failure_says_nothing_of_itself_and_is_logged(
    settings: Settings, monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture
) -> None:
    def fail(*_: object) -> None:
        raise ZeroDivisionError("the inside story")

    monkeypatch.setattr(Solver, "of_question", fail)
    async with open_client(settings) as client:
        with caplog.at_level(logging.ERROR):
            answer = await client.post("/v1/fields", json=ask_points(slab(), [1, 1, 1]))
        document = check_problem_document(answer, 500)
        assert "inside story" not in answer.text
        assert "ZeroDivision" not in answer.text
        assert re.fullmatch(r"urn:uuid:[0-9a-f-]{36}", document["instance"])
        (record,) = caplog.records
        assert document["instance"] in record.message
        assert record.exc_info is not None
        # The failure has the headers of every answer and is counted.
        assert answer.headers["x-content-type-options"] == "nosniff"
        assert 'route="/v1/fields",status="500"' in (await client.get("/metrics")).text
        assert (await client.get("/health/live")).status_code == 200


async def test_solver_errors_point_into_the_request(client: httpx.AsyncClient) -> None:
    problem = changed(slab(), "faces/z_low", {"condition": "flux", "inflow": 5})
    problem = changed(problem, "faces/z_high", {"condition": "insulated"})
    document = check_problem_document(await client.post("/v1/fields", json=ask_points(problem, [1, 1, 1])), 422)
    assert document["type"] == "/problem-types/no-steady-state"
    assert pointers(document) == ["#/problem/faces"]


async def test_many_errors_are_counted_and_the_first_shown(client: httpx.AsyncClient) -> None:
    places: list[list[float | str]] = [[99, 30, 5]] * 200
    document = check_problem_document(await client.post("/v1/fields", json=ask_points(sight_port_bar(), *places)), 422)
    assert document["detail"].startswith("200 fields")
    assert len(document["errors"]) == 50


def test_pointer_escapes_what_keys_may_hold() -> None:
    assert pointer(()) == "#"
    assert pointer(("faces", "z_low", "patches", 1)) == "#/faces/z_low/patches/1"
    assert pointer(("a/b", "c~d", "e f", "ü")) == "#/a~1b/c~0d/e%20f/%C3%BC"
