"""POST /v1/problems and GET /v1/problems/{id}."""

from __future__ import annotations

import httpx
import pytest

from service.models.operation import ProblemAnswer
from service.settings import Settings
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import Json, block, changed, sight_port_bar, slab

pytestmark = pytest.mark.anyio


async def test_same_problem_posted_twice_is_one_problem(client: httpx.AsyncClient) -> None:
    first = await client.post("/v1/problems", json=sight_port_bar())
    second = await client.post("/v1/problems", json=sight_port_bar())
    assert (first.status_code, second.status_code) == (201, 200)
    assert first.json() == second.json()
    assert first.headers["location"] == f"/v1/problems/{first.json()['problem_id']}"


async def test_id_stands_for_the_content_and_not_for_its_spelling(client: httpx.AsyncClient) -> None:
    problem = sight_port_bar()
    respelt = dict(reversed(problem.items())) | {"sources": []}
    respelt = changed(respelt, "body/size/x", 40.0)
    ids = [(await client.post("/v1/problems", json=given)).json()["problem_id"] for given in (problem, respelt)]
    assert ids[0] == ids[1]
    other = await client.post("/v1/problems", json=changed(problem, "body/size/x", 40.5))
    assert other.status_code == 201
    assert other.json()["problem_id"] != ids[0]


async def test_stored_problem_comes_back_with_all_its_units(client: httpx.AsyncClient) -> None:
    posted = await client.post("/v1/problems", json=sight_port_bar())
    answer = await client.get(posted.headers["location"])
    assert answer.status_code == 200
    ProblemAnswer.model_validate(answer.json())
    assert answer.json() == posted.json()
    stored = answer.json()["problem"]
    assert stored["faces"]["x_high"]["coefficient"] == "850 W/(m^2 K)"
    assert answer.json()["units"] == {
        "length": "mm",
        "potential": "degC",
        "potential_difference": "K",
        "conductivity": "W/(m K)",
        "film_coefficient": "W/(m^2 K)",
        "flux": "W/m^2",
        "density": "W/m^3",
        "flow": "W",
    }


async def test_client_that_has_the_problem_is_told_so(client: httpx.AsyncClient) -> None:
    posted = await client.post("/v1/problems", json=sight_port_bar())
    address, etag = posted.headers["location"], posted.headers["etag"]
    for tag in (etag, f"W/{etag}", f'"another", {etag}', "*"):
        unchanged = await client.get(address, headers={"If-None-Match": tag})
        assert (unchanged.status_code, unchanged.content) == (304, b"")
        assert unchanged.headers["etag"] == etag
    assert (await client.get(address, headers={"If-None-Match": '"another"'})).status_code == 200


async def test_unknown_id_is_not_found(client: httpx.AsyncClient) -> None:
    check_problem_document(await client.get(f"/v1/problems/{'0' * 64}"), 404)
    asked = await client.post("/v1/fields", json={"problem_id": "0" * 64, "evaluate": {"points": [{"at": [1, 1, 1]}]}})
    assert pointers(check_problem_document(asked, 422)) == ["#/problem_id"]


async def test_problem_survives_a_restart(settings: Settings) -> None:
    async with open_client(settings) as client:
        problem_id = (await client.post("/v1/problems", json=slab())).json()["problem_id"]
    async with open_client(settings) as client:
        question = {"problem_id": problem_id, "evaluate": {"points": [{"at": [20, 30, 12.5]}]}}
        answer = await client.post("/v1/fields", json=question)
        assert answer.json()["points"][0]["potential"] == pytest.approx(50, abs=1e-6)
        assert (await client.post("/v1/problems", json=slab())).status_code == 200


async def test_full_store_refuses_new_problems_and_keeps_the_old(settings: Settings) -> None:
    async with open_client(settings.model_copy(update={"store_bytes": 1_000})) as client:
        first = await client.post("/v1/problems", json=slab())
        assert first.status_code == 201
        check_problem_document(await client.post("/v1/problems", json=sight_port_bar()), 507)
        assert (await client.post("/v1/problems", json=slab())).status_code == 200
        assert (await client.get(first.headers["location"])).status_code == 200


async def test_flows_that_cannot_balance_are_found_when_the_problem_is_posted(
    client: httpx.AsyncClient,
) -> None:
    faces = {name: {"condition": "insulated"} for name in block()["faces"]}
    heated = block(**faces) | {"sources": [{"density": "2 MW/m^3"}]}
    document = check_problem_document(await client.post("/v1/problems", json=heated), 422)
    assert document["type"] == "/problem-types/no-steady-state"
    assert pointers(document) == ["#/faces"]
    # 2 MW/m^3 in 40 x 60 x 25 mm
    assert document["imbalance"] == pytest.approx(120.0, rel=1e-12)


async def test_imbalance_is_stated_in_the_declared_unit_of_flow(client: httpx.AsyncClient) -> None:
    faces = {name: {"condition": "insulated"} for name in block()["faces"]}
    heated = block(**faces) | {"sources": [{"density": "2 MW/m^3"}]}
    document = (await client.post("/v1/problems", json=changed(heated, "units/flow", "kW"))).json()
    assert document["imbalance"] == pytest.approx(0.12, rel=1e-12)


async def test_open_level_is_remarked(client: httpx.AsyncClient) -> None:
    faces: dict[str, Json] = {name: {"condition": "insulated"} for name in block()["faces"]}
    faces["x_low"] = {"condition": "flux", "inflow": 100}
    faces["x_high"] = {"condition": "flux", "inflow": -100}
    answer = (await client.post("/v1/problems", json=block(**faces))).json()
    assert [(remark["code"], remark["where"]) for remark in answer["warnings"]] == [("level-pinned", "#/problem/faces")]


async def test_problem_is_refused_to_a_client_that_takes_no_json(client: httpx.AsyncClient) -> None:
    answer = await client.post("/v1/problems", json=slab(), headers={"Accept": "text/html"})
    check_problem_document(answer, 406)
