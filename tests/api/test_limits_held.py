"""Limits over HTTP: what holds, by how much, and what no error can turn over."""

from __future__ import annotations

import math

import httpx
import pytest

from service.models.limits_answer import LimitsAnswer
from tests.api.client import check_problem_document, pointers
from tests.api.halden_reach import Json, block, sight_port_bar, slab
from tests.api.test_mixed import stub

pytestmark = pytest.mark.anyio

MIDDLE = {"name": "middle", "result": "potential", "at": ["middle", "middle", "middle"]}


async def held(client: httpx.AsyncClient, problem: Json, results: list[Json], limits: list[Json]) -> Json:
    """The answer to a question about limits."""
    answer = await client.post("/v1/limits", json={"problem": problem, "results": results, "limits": limits})
    assert answer.status_code == 200, answer.text
    LimitsAnswer.model_validate(answer.json())
    found: Json = answer.json()
    return found


async def test_a_slab_between_20_and_80_has_50_in_its_middle(client: httpx.AsyncClient) -> None:
    found = await held(
        client,
        slab(20, 80),
        [MIDDLE],
        [
            {"result": "middle", "at_most": 60, "name": "warm"},
            {"result": "middle", "at_most": "323 K"},
            {"result": "middle", "at_most": 70, "at_least": 45},
        ],
    )
    assert [limit["held"] for limit in found["limits"]] == ["yes", "no", "yes"]
    assert [limit["margin"] for limit in found["limits"]] == pytest.approx([10, -0.15, 5], abs=1e-7)
    assert all(0 < limit["error_bound"] < 1e-6 for limit in found["limits"])
    assert found["limits"][0]["name"] == "warm"
    assert found["limits"][1]["at_most"] == pytest.approx(49.85)
    assert found["all_held"] == "no"
    assert found["results"] == [
        {"name": "middle", "unit": "degC", "value": pytest.approx(50), "error_bound": found["limits"][0]["error_bound"]}
    ]


async def test_without_limits_the_results_alone_are_told(client: httpx.AsyncClient) -> None:
    found = await held(client, slab(20, 80), [MIDDLE], [])
    assert [result["value"] for result in found["results"]] == pytest.approx([50])
    assert (found["limits"], found["all_held"]) == ([], "yes")


async def test_a_limit_at_the_value_itself_is_undecided(client: httpx.AsyncClient) -> None:
    found = await held(client, slab(20, 80), [MIDDLE], [{"result": "middle", "at_most": 50}])
    assert found["limits"][0]["held"] == found["all_held"] == "undecided"
    assert abs(found["limits"][0]["margin"]) <= found["limits"][0]["error_bound"]


async def test_what_the_usual_accuracy_leaves_open_is_looked_at_more_closely(client: httpx.AsyncClient) -> None:
    # In the middle of a section that is held at 0 on three sides and at 100 on the fourth: a quarter, by symmetry.
    problem = block(z_low={"condition": "insulated"}, z_high={"condition": "insulated"})
    problem["body"]["size"] = {"x": 40, "y": 40, "z": 25}
    for face, value in {"x_low": 100, "x_high": 0, "y_low": 0, "y_high": 0}.items():
        problem["faces"][face] = {"condition": "held", "value": value}
    usual = (await held(client, problem, [MIDDLE], [{"result": "middle", "at_most": 50}]))["limits"][0]["error_bound"]
    near = 25 + 0.2 * usual
    found = (await held(client, problem, [MIDDLE], [{"result": "middle", "at_most": near}]))["limits"][0]
    assert found["held"] == "yes"
    assert found["error_bound"] <= found["margin"] == pytest.approx(0.2 * usual, rel=1e-2)


async def test_results_of_every_kind_can_be_limited(client: httpx.AsyncClient) -> None:
    area, k, length = 40e-3 * 60e-3, 130, 25e-3
    flux = k * 60 / length
    results: list[Json] = [
        {"name": "hot", "result": "mean", "face": "z_high"},
        {"name": "cold", "result": "lowest"},
        {"name": "drop", "result": "difference", "of": "hot", "less": "cold"},
        {"name": "heat", "result": "inflow", "face": "z_high"},
        {"name": "resistance", "result": "ratio", "of": "drop", "over": "heat"},
        {"name": "steep", "result": "gradient", "at": [20, 30, 10], "along": "z"},
        {"name": "load", "result": "flux", "at": [20, 30, 10]},
        {"name": "through", "result": "flow", "z": 10},
    ]
    limits = [
        {"result": "hot", "at_most": "81 degC"},
        {"result": "drop", "at_most": "61 K"},
        {"result": "heat", "at_most": "1 kW"},
        {"result": "resistance", "at_most": "0.1 K/W"},
        {"result": "steep", "at_most": "3 K/mm"},
        {"result": "load", "at_most": "400 kW/m^2"},
        {"result": "through", "at_least": "-1 kW"},
    ]
    found = await held(client, slab(20, 80), results, limits)
    heat = flux * area
    expected = [1, 1, 1000 - heat, 0.1 - 60 / heat, 3 - 2.4, 400e3 - flux, 1000 - heat]
    assert [limit["margin"] for limit in found["limits"]] == pytest.approx(expected, rel=1e-6)
    assert [limit["held"] == "yes" for limit in found["limits"]] == [margin > 0 for margin in expected]
    assert [result["unit"] for result in found["results"]] == ["degC", "degC", "K", "W", "K/W", "K/mm", "W/m^2", "W"]


async def test_an_extreme_says_where_it_was_found(client: httpx.AsyncClient) -> None:
    problem = sight_port_bar()
    problem["body"]["size"]["z"] = 80
    problem["faces"]["z_high"] = {"condition": "flux", "inflow": "20 kW/m^2"}
    results: list[Json] = [MIDDLE, {"name": "end", "result": "highest", "face": "z_high"}]
    found = await held(client, problem, results, [{"result": "end", "at_most": 60}])
    assert "at" not in found["results"][0]
    at = found["results"][1]["at"]
    assert at[2] == 80
    question = {"problem": problem, "evaluate": {"points": [{"at": at}]}}
    there = (await client.post("/v1/fields", json=question)).json()["points"][0]
    bound = found["results"][1]["error_bound"] + there["error_bound"]
    assert there["potential"] == pytest.approx(found["results"][1]["value"], rel=0, abs=bound)


async def test_wrong_limits_are_pointed_at(client: httpx.AsyncClient) -> None:
    question = {
        "problem": slab(20, 80),
        "results": [MIDDLE],
        "limits": [
            {"result": "centre", "at_most": 60},
            {"result": "middle", "at_most": "60 W"},
            {"result": "middle", "at_most": 10, "at_least": 20},
        ],
    }
    document = check_problem_document(await client.post("/v1/limits", json=question), 422)
    assert pointers(document) == ["#/limits/0/result", "#/limits/1/at_most", "#/limits/2/at_least"]
    assert document["errors"][0]["detail"] == 'There is no result "centre"; there are "middle".'
    nothing = question | {"limits": [{"result": "middle"}]}
    document = check_problem_document(await client.post("/v1/limits", json=nothing), 422)
    assert document["errors"][0]["detail"] == "Give `at_most`, `at_least` or both."


async def test_a_result_without_a_finite_value_is_pointed_at(client: httpx.AsyncClient) -> None:
    question = {
        "problem": sight_port_bar(),
        "results": [
            MIDDLE | {"at": [20, 30, 5]},
            {"name": "in", "result": "inflow", "face": "z_low", "patch": "window"},
        ],
        "limits": [{"result": "in", "at_most": 60}],
    }
    document = check_problem_document(await client.post("/v1/limits", json=question), 422)
    assert pointers(document) == ["#/results/1"]
    assert "edge_gap" in document["errors"][0]["detail"]
    question["results"][1]["edge_gap"] = "10 um"  # type: ignore[index]
    answer = await client.post("/v1/limits", json=question)
    assert answer.status_code == 200, answer.text
    assert math.isfinite(answer.json()["limits"][0]["margin"])


async def test_a_stored_problem_is_answered_alike(client: httpx.AsyncClient) -> None:
    stored = (await client.post("/v1/problems", json=slab(20, 80))).json()["problem_id"]
    question = {"results": [MIDDLE], "limits": [{"result": "middle", "at_most": 60}]}
    by_id = await client.post("/v1/limits", json=question | {"problem_id": stored})
    by_problem = await client.post("/v1/limits", json=question | {"problem": slab(20, 80)})
    assert by_id.json() == by_problem.json()


async def test_places_in_a_body_with_a_mixed_face(client: httpx.AsyncClient) -> None:
    """The level of a place is as POST /v1/fields tells it."""
    point = {"points": [{"at": [40, 30, 12]}]}
    fields = (await client.post("/v1/fields", json={"problem": stub(), "evaluate": point})).json()
    place = {"name": "place", "result": "potential", "at": [40, 30, 12]}
    answer = await held(client, stub(), [place], [{"result": "place", "at_most": 1000}])
    (told,) = fields["points"]
    (result,) = answer["results"]
    assert abs(result["value"] - told["potential"]) <= result["error_bound"] + told["error_bound"]
    assert answer["all_held"] == "yes"
