"""Tables of cases over HTTP, and the numbers they vary by pointers into the request."""

from __future__ import annotations

import dataclasses
from typing import Any

import httpx
import numpy as np
import pytest

from service.media import ARRAYS
from service.models.cases_answer import CasesAnswer
from service.settings import Settings
from service.translation.analysis import Prepared, prepare
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import Json, block, changed, sight_port_bar, slab

pytestmark = pytest.mark.anyio

MIDDLE = {"name": "middle", "result": "potential", "at": ["middle", "middle", "middle"]}
PROBE = {"name": "probe", "result": "potential", "at": [10, 20, 5]}


async def ask(client: httpx.AsyncClient, question: Json) -> Json:
    """The answer to a question about cases."""
    answer = await client.post("/v1/cases", json=question)
    assert answer.status_code == 200, answer.text
    CasesAnswer.model_validate(answer.json())
    found: Json = answer.json()
    return found


async def values(client: httpx.AsyncClient, problem: Json, number: Json, rows: list[Any], result: Json = PROBE) -> Any:
    """A result for some values of one number."""
    cases = {"table": "list", "rows": [[row] for row in rows]}
    question = {"problem": problem, "results": [result], "numbers": [{"name": "n"} | number], "cases": cases}
    found = await ask(client, question)
    assert found["failures"] == []
    return found["columns"][0]["values"]


async def potential(client: httpx.AsyncClient, problem: Json, at: list[Any]) -> float:
    """The potential at a place, by the call for fields."""
    question = {"problem": problem, "evaluate": {"points": [{"at": at}]}}
    found: float = (await client.post("/v1/fields", json=question)).json()["points"][0]["potential"]
    return found


@pytest.mark.parametrize(
    ("path", "value"),
    [
        ("body/size/x", 44),
        ("body/size/y", "5.5 cm"),
        ("body/conductivity/z", 60),
        ("faces/x_high/coefficient", "2 kW/(m^2 K)"),
        ("faces/x_high/ambient", 31),
        ("faces/y_high/inflow", "4 kW/m^2"),
        ("faces/z_low/value/patches/0/value", "900 K"),
        ("faces/z_low/value/patches/0/x/1", 30),
        ("faces/z_low/value/background", 15),
    ],
)
async def test_a_number_pointed_to_takes_the_value_of_the_case(
    client: httpx.AsyncClient, path: str, value: float | str
) -> None:
    problem = sight_port_bar()
    found = await values(client, problem, {"at": f"/problem/{path}"}, [value])
    expected = await potential(client, changed(problem, path, value), [10, 20, 5])
    assert found[0] == pytest.approx(expected, abs=2e-6)


async def test_numbers_move_and_scale_what_they_point_to(client: httpx.AsyncClient) -> None:
    problem = sight_port_bar()
    pad = "/problem/faces/z_low/value/patches/0/x"
    moved = await values(client, problem, {"shift": [f"{pad}/0", f"{pad}/1"]}, [0, "2 mm"])
    shifted = changed(problem, "faces/z_low/value/patches/0/x", [7, 37])
    assert moved == pytest.approx([await potential(client, each, [10, 20, 5]) for each in (problem, shifted)], abs=2e-6)

    scaled = await values(client, problem, {"scale": "/problem/faces/z_low/value", "about": "30 degC"}, [1, 0.5])
    halved = changed(problem, "faces/z_low/value/patches/0/value", 335)
    assert scaled == pytest.approx([await potential(client, each, [10, 20, 5]) for each in (problem, halved)], abs=2e-6)

    along = await values(client, problem, {"shift": ["/results/0/at/0", "/results/0/at/1"]}, [0, 5])
    assert along[1] == pytest.approx(await potential(client, problem, [15, 25, 5]), abs=2e-6)

    conductivity = await values(client, problem, {"scale": "/problem/body/conductivity"}, [2])
    doubled = changed(problem, "body/conductivity", {"x": 190, "y": 190, "z": 260})
    assert conductivity == pytest.approx([await potential(client, doubled, [10, 20, 5])], abs=2e-6)


async def test_a_formula_and_a_table_of_readings_are_scaled_about_a_level(client: httpx.AsyncClient) -> None:
    for value in (
        {"map": "formula", "expression": "30 + 100*sin(pi*x/40)"},
        {"map": "samples", "x": [0, 20, 40], "y": [0, 60], "table": [[30, 30], [130, 90], [30, 30]]},
    ):
        problem = block(z_low={"condition": "held", "value": value})
        found = await values(client, problem, {"scale": "/problem/faces/z_low/value", "about": 30}, [0, 1, 2], PROBE)
        assert found[0] == pytest.approx(30, abs=1e-6)
        assert found[2] - 30 == pytest.approx(2 * (found[1] - 30), rel=1e-7)


async def test_several_pointers_take_one_value(client: httpx.AsyncClient) -> None:
    found = await values(
        client, slab(20, 20), {"at": ["/problem/faces/z_low/value", "/problem/faces/z_high/value"]}, [20, 35], MIDDLE
    )
    assert found == pytest.approx([20, 35])


async def test_the_middle_stays_in_the_middle_of_a_body_that_grows(client: httpx.AsyncClient) -> None:
    problem = slab(20, 80)
    problem["faces"]["z_high"] = {"condition": "film", "coefficient": 1000, "ambient": 80}
    found = await values(client, problem, {"at": "/problem/body/size/z"}, [25, 130], MIDDLE)
    # In series: the body to its middle, the other half and the film, by hand.
    expected = [20 + 60 * (length / 260) / (length / 130 + 1e-3) for length in (0.025, 0.130)]
    assert found == pytest.approx(expected, rel=1e-7)


QUESTION: Json = {
    "problem": slab(20, 80),
    "results": [MIDDLE],
    "numbers": [
        {"name": "low", "at": "/problem/faces/z_low/value"},
        {"name": "thickness", "at": "/problem/body/size/z"},
    ],
}


@pytest.mark.parametrize(
    "cases",
    [
        {"table": "list", "rows": [[10, 20], [10, 30], [30, 20], ["303.15 K", "3 cm"]]},
        {"table": "grid", "values": [[10, 30], {"from": 20, "to": "30 mm", "count": 2}]},
        {"table": "csv", "csv": "\ufeffthickness;low\n20;10\n30;10,0\n20;30\n30;3e1\n"},
    ],
)
async def test_tables_of_every_kind_mean_the_same(client: httpx.AsyncClient, cases: Json) -> None:
    limits = [{"result": "middle", "at_most": 50}]
    found = await ask(client, QUESTION | {"cases": cases, "limits": limits})
    assert found["case_count"] == 4
    assert [column["values"] for column in found["numbers"]] == [[10, 10, 30, 30], [20, 30, 20, 30]]
    assert [column["unit"] for column in found["numbers"]] == ["degC", "mm"]
    assert found["columns"][0]["values"] == pytest.approx([45, 45, 55, 55])
    assert found["limits"][0]["margins"] == pytest.approx([5, 5, -5, -5])
    assert found["limits"][0]["held"] == ["yes", "yes", "no", "no"]


async def test_a_design_fills_the_ranges_and_comes_again_with_its_seed(client: httpx.AsyncClient) -> None:
    design = {"table": "design", "method": "latin_hypercube", "count": 12, "low": [0, 20], "high": [40, "3 cm"]}
    found = await ask(client, QUESTION | {"cases": design | {"seed": 5}})
    low, thickness = (np.array(column["values"]) for column in found["numbers"])
    assert sorted(np.floor(low / 40 * 12)) == sorted(np.floor((thickness - 20) / 10 * 12)) == list(range(12))
    assert found["columns"][0]["values"] == pytest.approx((low + 80) / 2)
    again = await ask(client, QUESTION | {"cases": design | {"seed": 5}})
    assert again["numbers"] == found["numbers"]


async def test_a_case_that_makes_no_body_fails_in_its_place(client: httpx.AsyncClient) -> None:
    rows = [[20, 25], [20, -1], [20, 30], ["-300 degC", 25]]
    found = await ask(
        client, QUESTION | {"cases": {"table": "list", "rows": rows}, "limits": [{"result": "middle", "at_most": 60}]}
    )
    assert [value is None for value in found["columns"][0]["values"]] == [False, True, False, True]
    assert found["limits"][0]["held"] == ["yes", None, "yes", None]
    assert [failure["case"] for failure in found["failures"]] == [1, 3]
    assert "/problem/body/size/z" in found["failures"][0]["message"]
    assert "absolute zero" in found["failures"][1]["message"]


async def test_columns_come_in_binary(client: httpx.AsyncClient) -> None:
    cases = {"table": "grid", "values": [{"from": 0, "to": 40, "count": 9}, [25]]}
    answer = await client.post("/v1/cases", json=QUESTION | {"cases": cases}, headers={"Accept": ARRAYS})
    assert answer.status_code == 200
    assert answer.headers["content-type"] == ARRAYS


@pytest.mark.parametrize(
    ("number", "pointer", "said"),
    [
        ({"at": "/problem/body/size/w"}, "#/numbers/0/at", 'There is no "w" in /problem/body/size; it has x, y, z.'),
        ({"at": "/problem/faces/z_low"}, "#/numbers/0/at", "/problem/faces/z_low is no single number"),
        ({"at": "/problem/faces/z_low/condition"}, "#/numbers/0/at", "is no number that can be varied"),
        ({"at": "/problem/potential"}, "#/numbers/0/at", "is no number that can be varied"),
        ({"at": "/numbers/0/name"}, "#/numbers/0/at", "Pointers have to begin with /problem or /results."),
        ({"at": "/results/0/at/2"}, "#/numbers/0/at", "is no number that can be varied"),
        ({"at": ["/problem/body/size/x", "/problem/body/size/y"]}, "#/numbers/0/at", "lead to different values"),
        ({"shift": ["/problem/body/size/x", "/problem/faces/z_low/value"]}, "#/numbers/0/shift", "different kinds"),
        ({"scale": "/problem/body/size"}, "#/numbers/0/scale", "is not a map, a table"),
        ({"at": "/problem/body/size/x", "about": 3}, "#/numbers/0", "`about` goes with `scale` only."),
        ({}, "#/numbers/0", "Give exactly one of `at`, `shift` and `scale`."),
    ],
)
async def test_pointers_to_what_is_no_number_are_refused(
    client: httpx.AsyncClient, number: Json, pointer: str, said: str
) -> None:
    question = QUESTION | {"numbers": [{"name": "n"} | number], "cases": {"table": "list", "rows": [[1]]}}
    document = check_problem_document(await client.post("/v1/cases", json=question), 422)
    assert pointers(document) == [pointer]
    assert said in document["errors"][0]["detail"]


async def test_two_numbers_with_one_name_or_one_place_are_refused(client: httpx.AsyncClient) -> None:
    numbers = [
        {"name": "n", "at": "/problem/body/size/x"},
        {"name": "n", "at": "/problem/body/size/y"},
        {"name": "m", "scale": "/problem/body/size/x"},
    ]
    question = QUESTION | {"numbers": numbers, "cases": {"table": "list", "rows": [[1, 2, 3]]}}
    document = check_problem_document(await client.post("/v1/cases", json=question), 422)
    assert pointers(document) == ["#/numbers/1/name", "#/numbers/2/scale"]


@pytest.mark.parametrize(
    ("cases", "pointer"),
    [
        ({"table": "list", "rows": [[1, 20], [1]]}, "#/cases/rows/1"),
        ({"table": "list", "rows": [[1, "2 kg"]]}, "#/cases/rows/0/1"),
        ({"table": "csv", "csv": "low,thick\n1,2\n"}, "#/cases/csv"),
        ({"table": "csv", "csv": "low,thickness\n1\n"}, "#/cases/csv"),
        ({"table": "csv", "csv": ""}, "#/cases/csv"),
        ({"table": "grid", "values": [[1]]}, "#/cases/values"),
        ({"table": "design", "method": "random", "count": 5, "low": [0, 3], "high": [1]}, "#/cases/high"),
        ({"table": "design", "method": "random", "count": 5, "low": [0, 30], "high": [1, 20]}, "#/cases/high/1"),
        ({"table": "heap"}, "#/cases/table"),
    ],
)
async def test_wrong_tables_are_pointed_at(client: httpx.AsyncClient, cases: Json, pointer: str) -> None:
    document = check_problem_document(await client.post("/v1/cases", json=QUESTION | {"cases": cases}), 422)
    assert pointers(document) == [pointer]


async def test_long_tables_are_sent_to_studies(settings: Settings) -> None:
    cases = {"table": "grid", "values": [{"from": 0, "to": 1, "count": 20}, {"from": 20, "to": 21, "count": 20}]}
    async with open_client(settings.model_copy(update={"cases": 399})) as client:
        document = check_problem_document(await client.post("/v1/cases", json=QUESTION | {"cases": cases}), 422)
    assert document["type"].endswith("too-costly")
    assert "/v1/studies" in document["detail"]
    huge = {"table": "grid", "values": [{"from": 0, "to": 1, "count": 10**6}, {"from": 20, "to": 21, "count": 10**6}]}
    async with open_client(settings) as client:
        check_problem_document(await client.post("/v1/cases", json=QUESTION | {"cases": huge}), 422)


async def test_faults_of_a_text_are_told_by_its_lines(client: httpx.AsyncClient) -> None:
    text = "low,thickness\n1,20\n\n2\nmuch,20\n"
    document = check_problem_document(
        await client.post("/v1/cases", json=QUESTION | {"cases": {"table": "csv", "csv": text}}), 422
    )
    assert [entry["detail"] for entry in document["errors"]] == [
        "Line 4 of the text has 1 of the 2 entries that the first row has.",
        'Line 5 of the text: "low" has to be a bare number.',
    ]


MANY: Json = {"table": "grid", "values": [{"from": 0, "to": 1, "count": 1500}, [25]]}


async def test_cases_that_would_take_far_too_long_are_sent_to_studies(settings: Settings) -> None:
    # A case takes about two milliseconds: all of them 3 s, and none of those is waited for.
    async with open_client(settings.model_copy(update={"time_limit_seconds": 0.3})) as client:
        document = check_problem_document(await client.post("/v1/cases", json=QUESTION | {"cases": MANY}), 422)
    assert document["type"].endswith("too-costly")
    assert "up to 1500 cases of about" in document["detail"]
    assert "POST /v1/studies" in document["detail"]


async def test_slow_start_of_a_service_refuses_nothing(
    client: httpx.AsyncClient, monkeypatch: pytest.MonkeyPatch
) -> None:
    def slow(*given: Any) -> Prepared:
        return dataclasses.replace(prepare(*given), seconds=100.0)

    monkeypatch.setattr("service.routes.deciding.prepare", slow)
    found = await ask(client, QUESTION | {"cases": {"table": "list", "rows": [[10, 20], [10, 30]]}})
    assert found["columns"][0]["values"] == pytest.approx([45, 45])


async def test_decision_that_takes_too_long_is_sent_to_studies(
    settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("service.routes.deciding.check_time", lambda *_: None)
    async with open_client(settings.model_copy(update={"time_limit_seconds": 0.3})) as client:
        document = check_problem_document(await client.post("/v1/cases", json=QUESTION | {"cases": MANY}), 422)
    assert document["type"].endswith("time-limit")
    assert "POST /v1/studies" in document["detail"]
