"""How far a face reaches over HTTP: distances in the declared length, reasons, and what is refused."""

from __future__ import annotations

import math

import httpx
import pytest

from service.models.reach_answer import ReachAnswer
from tests.api.client import check_problem_document, pointers
from tests.api.halden_reach import Json, block, changed, sight_port_bar, slab

pytestmark = pytest.mark.anyio


async def reach(client: httpx.AsyncClient, problem: Json, face: str, **more: object) -> Json:
    """The answer to a question about reach."""
    answer = await client.post("/v1/reach", json={"problem": problem, "evaluate": {"face": face} | more})
    assert answer.status_code == 200, answer.text
    ReachAnswer.model_validate(answer.json())
    found: Json = answer.json()["reach"]
    return found


async def test_a_slab_halves_in_its_middle(client: httpx.AsyncClient) -> None:
    found = await reach(client, slab(20, 80), "z_low", fractions=[0.5, 0.2])
    assert (found["reference"], found["largest"]["value"]) == (80, 60)
    for reached in (*found["worst"], *found["on_axis"]):
        assert abs(reached["distance"] - 25 * (1 - reached["fraction"])) <= reached["error_bound"] < 1e-5
        assert (reached["left"], reached["reason"]) == (None, None)
    rate = math.pi / 60 * math.sqrt(95 / 130)
    assert found["decay"]["rates"][0]["length"] is None
    assert found["decay"]["rates"][1]["rate"] == pytest.approx(rate)
    assert found["decay"]["length"] == pytest.approx(1 / rate)
    assert found["decay"]["reason"].startswith("The sides are insulated, so the mean over the section does not decay;")
    alone = await reach(client, slab(20, 80), "z_low", fractions=[0.5], modes=1)
    assert [mode["length"] for mode in alone["decay"]["rates"]] == [None]
    assert alone["decay"]["length"] == pytest.approx(1 / rate)


async def test_what_never_falls_below_is_null_with_a_reason(client: httpx.AsyncClient) -> None:
    film = {"condition": "film", "coefficient": "2600 W/(m^2 K)", "ambient": 80}
    found = await reach(client, slab() | {"faces": slab()["faces"] | {"z_high": film}}, "z_low", fractions=[0.1])
    (reached,) = found["worst"]
    # k / h = 50 mm: 50 / (25 + 50) of it is left.
    assert (reached["distance"], reached["error_bound"], reached["at"]) == (None, None, None)
    assert found["on_axis"][0]["at"] is None
    assert reached["left"] == pytest.approx(2 / 3)
    assert reached["reason"] == "At the opposite face z_high, 25 mm away, 0.667 of it is left."


async def test_lengths_and_rates_are_in_the_declared_unit(client: httpx.AsyncClient) -> None:
    problem = sight_port_bar()
    in_mm = await reach(client, problem, "z_low", fractions=[0.1])
    metres = changed(problem, "units/length", "m")
    metres["body"]["size"] = {"x": "40 mm", "y": "60 mm", "z": "semi-infinite"}
    metres["faces"]["z_low"]["value"]["patches"] = [{"x": ["5 mm", "35 mm"], "y": ["10 mm", "50 mm"], "value": 640}]
    in_m = await reach(client, metres, "z_low", fractions=[0.1])
    assert in_m["worst"][0]["distance"] == pytest.approx(in_mm["worst"][0]["distance"] / 1000, rel=1e-7)
    assert in_m["decay"]["rates"][0]["rate"] == pytest.approx(in_mm["decay"]["rates"][0]["rate"] * 1000)
    assert in_m["decay"]["length"] == pytest.approx(1 / in_m["decay"]["rates"][0]["rate"])


async def test_a_uniform_change_of_an_inflow_is_per_declared_unit(client: httpx.AsyncClient) -> None:
    problem = slab()
    problem["faces"]["z_low"] = {"condition": "insulated"}
    problem["units"]["flux"] = "kW/m^2"
    found = await reach(client, problem, "z_low", fractions=[0.5], change="uniform")
    assert found["reference"] is None
    # 1 kW/m^2 through 25 mm of 130 W/(m K)
    assert found["largest"]["value"] == pytest.approx(1000 * 0.025 / 130)
    assert found["worst"][0]["distance"] == pytest.approx(12.5)


async def test_three_fractions_and_ten_rates_unless_others_are_asked_for(client: httpx.AsyncClient) -> None:
    found = await reach(client, sight_port_bar(), "z_low")
    assert [reached["fraction"] for reached in found["worst"]] == [0.5, 0.1, 0.01]
    rates = [mode["rate"] for mode in found["decay"]["rates"]]
    assert len(rates) == 10
    assert rates == sorted(rates)


@pytest.mark.parametrize(
    ("problem", "evaluate", "pointer", "sentence"),
    [
        (slab(), {"face": "up"}, "#/evaluate/face", "is wanted here"),
        (sight_port_bar(), {"face": "z_high"}, "#/evaluate/face", "has no face z_high"),
        (slab(), {"face": "z_low", "fractions": [1]}, "#/evaluate/fractions/0", "The number has to be at most 0.999"),
        (slab(), {"face": "z_low", "fractions": [0]}, "#/evaluate/fractions/0", "The number has to be at least 1e-06"),
        (slab(), {"face": "z_low", "fractions": []}, "#/evaluate/fractions", "At least 1"),
        (slab(), {"face": "z_low", "modes": 1000}, "#/evaluate/modes", "The number has to be at most 100"),
        (slab(), {"face": "x_low"}, "#/evaluate/face", "disturbs nothing: its data are at the level of the others."),
        (block(), {"face": "x_low"}, "#/evaluate/face", "Ask for the reach of a uniform change of them."),
    ],
)
async def test_what_has_no_reach_is_refused(
    client: httpx.AsyncClient, problem: Json, evaluate: Json, pointer: str, sentence: str
) -> None:
    answer = await client.post("/v1/reach", json={"problem": problem, "evaluate": evaluate})
    document = check_problem_document(answer, 422)
    assert pointers(document) == [pointer]
    assert sentence in document["errors"][0]["detail"]
