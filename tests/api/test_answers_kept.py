"""Asking again costs no work."""

from __future__ import annotations

import httpx
import pytest

from service.kept import Kept
from service.settings import Settings
from tests.api.client import open_client
from tests.api.halden_reach import Json, sight_port_bar, slab

pytestmark = pytest.mark.anyio


def ask_plane(problem: Json, count: int = 41) -> Json:
    """A plane of the problem."""
    axis = {"from": 0, "to": 40, "count": count}
    return {"problem": problem, "evaluate": {"grids": [{"x": axis, "y": axis, "z": 5}]}}


async def finished(client: httpx.AsyncClient) -> int:
    """How many computations there were."""
    count: int = (await client.get("/v1/diagnostics")).json()["work"]["finished"]
    return count


async def test_same_request_is_answered_from_memory(client: httpx.AsyncClient) -> None:
    first = await client.post("/v1/fields", json=ask_plane(sight_port_bar()))
    assert "compute;dur=" in first.headers["server-timing"]
    before = await finished(client)
    second = await client.post("/v1/fields", json=ask_plane(sight_port_bar()))
    assert second.content == first.content
    assert second.headers["etag"] == first.headers["etag"]
    assert second.headers["server-timing"] == 'cache;desc="hit"'
    assert await finished(client) == before
    cache = (await client.get("/v1/diagnostics")).json()["caches"]["answers"]
    assert (cache["hits"], cache["misses"]) == (1, 1)
    assert 0 < cache["size"] <= cache["limit"]


async def test_other_call_of_the_same_bytes_is_another_request(client: httpx.AsyncClient) -> None:
    question = {"problem": sight_port_bar(), "evaluate": {"points": [{"at": [20, 30, 5]}]}}
    fields = await client.post("/v1/fields", json=question)
    convergence = await client.post("/v1/convergence", json=question)
    assert fields.headers["etag"] != convergence.headers["etag"]
    assert "series" in convergence.json()["points"][0]


async def test_errors_are_not_kept(client: httpx.AsyncClient) -> None:
    question = {"problem_id": "0" * 64, "evaluate": {"extremes": True}}
    assert (await client.post("/v1/fields", json=question)).status_code == 422
    assert (await client.get("/v1/diagnostics")).json()["caches"]["answers"]["size"] == 0


async def test_prepared_problem_is_kept_for_other_questions(client: httpx.AsyncClient) -> None:
    await client.post("/v1/problems", json=sight_port_bar())
    for count in (5, 6, 7):
        await client.post("/v1/fields", json=ask_plane(sight_port_bar(), count))
    solutions = (await client.get("/v1/diagnostics")).json()["caches"]["solutions"]
    assert (solutions["hits"], solutions["misses"], solutions["size"]) == (3, 1, 1)


async def test_eigenvalues_are_kept_between_problems(client: httpx.AsyncClient) -> None:
    """Two problems on the same lines, other data: the second finds the roots of the first."""
    await client.post("/v1/fields", json=ask_plane(sight_port_bar()))
    before = (await client.get("/v1/diagnostics")).json()["caches"]
    warmer = sight_port_bar()
    warmer["faces"]["x_low"]["value"] = 31
    await client.post("/v1/fields", json=ask_plane(warmer))
    after = (await client.get("/v1/diagnostics")).json()["caches"]
    assert after["eigenvalues"]["misses"] == before["eigenvalues"]["misses"]
    # Whoever keeps the eigenfunctions has no need to ask for the eigenvalues again.
    assert after["eigenfunctions"]["hits"] > before["eigenfunctions"]["hits"]
    for name in ("eigenvalues", "eigenfunctions", "eigen_integrals"):
        assert after[name]["size"] <= after[name]["limit"]


async def test_answers_that_do_not_fit_are_not_kept(settings: Settings) -> None:
    async with open_client(settings.model_copy(update={"answer_cache_bytes": 1_000})) as client:
        for _ in range(2):
            answer = await client.post("/v1/fields", json=ask_plane(slab()))
            assert "compute" in answer.headers["server-timing"]


def test_kept_things_give_way_to_newer_ones_by_use_and_weight() -> None:
    kept: Kept[bytes] = Kept(10, len)
    kept.keep("a", b"aaaa")
    kept.keep("b", b"bbbb")
    assert kept.get("a") == b"aaaa"
    kept.keep("c", b"cccc")
    assert kept.get("b") is None
    assert kept.get("a") == b"aaaa"
    kept.keep("a", b"a")
    kept.keep("d", b"ddddd")
    assert (kept.get("c"), kept.get("d")) == (b"cccc", b"ddddd")
    kept.keep("e", b"e" * 11)
    assert kept.get("e") is None
    report = kept.report()
    assert (report.size, report.limit) == (10, 10)
    assert report.hits == 4
