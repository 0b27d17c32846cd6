"""Formulas on faces over HTTP: units, coordinates of each face, bounds, and that nothing of a text is ever run."""

from __future__ import annotations

import math
import time
from typing import Any

import httpx
import pytest

from service.models.fields_answer import FieldsAnswer
from tests.api.halden_reach import Json, ask_points, block, changed, sight_port_bar

pytestmark = pytest.mark.anyio


def formula(expression: str) -> Json:
    """A map of a formula."""
    return {"map": "formula", "expression": expression}


async def fields(client: httpx.AsyncClient, question: Json) -> Json:
    """The answer to a question about fields."""
    answer = await client.post("/v1/fields", json=question)
    assert answer.status_code == 200, answer.text
    FieldsAnswer.model_validate(answer.json())
    found: Json = answer.json()
    return found


async def test_coordinates_are_in_the_declared_length_and_values_in_the_declared_unit(
    client: httpx.AsyncClient,
) -> None:
    # sin(pi x / a) sin(pi y / b) on an end whose sides are held decays by sinh.
    held = {"condition": "held", "value": 0}
    names = ("x_low", "x_high", "y_low", "y_high", "z_high")
    problem = block(
        **dict.fromkeys(names, held), z_low={"condition": "held", "value": formula("70*sin(pi*x/4)*sin(pi*y/6)")}
    )
    problem["units"] = {"length": "cm", "potential": "K"}
    problem["body"] = {"size": {"x": 4, "y": 6, "z": 2.5}, "conductivity": 95}
    question = ask_points(problem, [1.7, "22 mm", 0.9], [2, 3, 0])
    found = await fields(client, question)
    gamma = math.pi * math.hypot(1 / 4, 1 / 6)
    shape = math.sin(math.pi * 1.7 / 4) * math.sin(math.pi * 2.2 / 6)
    expected = 70 * shape * math.sinh(gamma * 1.6) / math.sinh(gamma * 2.5)
    for point, value in zip(found["points"], (expected, 70.0), strict=True):
        assert abs(point["potential"] - value) <= point["error_bound"] <= 7e-8


@pytest.mark.parametrize(
    ("face", "expression"),
    [("x_low", "200 + 3*y + 7*z"), ("y_high", "200 + 3*x - 7*z"), ("z_high", "200 + x*y")],
)
async def test_each_face_has_its_own_two_coordinates(client: httpx.AsyncClient, face: str, expression: str) -> None:
    problem = block(**{face: {"condition": "held", "value": formula(expression)}})
    places: dict[str, list[float | str]] = {"x_low": [0, 20, 5], "y_high": [10, 60, 5], "z_high": [10, 20, 25]}
    expected = {"x_low": 295.0, "y_high": 195.0, "z_high": 400.0}[face]
    (point,) = (await fields(client, ask_points(problem, places[face])))["points"]
    assert point["potential"] == pytest.approx(expected, abs=point["error_bound"])


async def test_inflow_of_a_formula_is_in_its_unit(client: httpx.AsyncClient) -> None:
    insulated = {"condition": "insulated"}
    sides = dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), insulated)
    problem = block(
        **sides,
        z_low={"condition": "flux", "inflow": formula("2 + x/40 - 1/2")},
        z_high={"condition": "held", "value": 30},
    )
    problem["units"]["flux"] = "kW/m^2"
    answer = await client.post("/v1/flux-totals", json={"problem": problem, "evaluate": {"faces": ["z_low", "z_high"]}})
    faces = answer.json()["faces"]
    # The mean of 2 kW/m^2 over 40 mm x 60 mm
    assert faces["z_low"]["inflow"] == pytest.approx(2e3 * 0.04 * 0.06, rel=1e-11)
    assert abs(faces["z_low"]["inflow"] + faces["z_high"]["inflow"]) <= faces["z_high"]["error_bound"] + 1e-12


async def test_a_smooth_formula_at_the_default_accuracy_takes_well_under_a_second(client: httpx.AsyncClient) -> None:
    problem = block(z_low={"condition": "held", "value": formula("30 + 600*exp(-((x-20)/8)^2)*sin(pi*y/60)")})
    question = ask_points(problem, [20, 30, 5], [3, 4, 20], quantities=["potential", "flux"])
    started = time.process_time()
    found = await fields(client, question)
    assert time.process_time() - started < 1.0
    assert found["certificate"]["error_bound"] <= 6e-7


async def test_flux_close_to_a_formula_and_on_it_has_a_bound(client: httpx.AsyncClient) -> None:
    problem = block(z_low={"condition": "held", "value": formula("30 + 600*sin(pi*x/40)*sin(pi*y/60)")})
    question = ask_points(problem, [13, 17, 0], [13, 17, 1e-7], quantities=["flux"])
    on_it, beside = (await fields(client, question))["points"]
    gamma = math.pi * math.sqrt((95 / 40**2 + 95 / 60**2) / 130)
    shape = 600 * math.sin(math.pi * 13 / 40) * math.sin(math.pi * 17 / 60)
    for point, z in ((on_it, 0.0), (beside, 1e-7)):
        expected = 130 * gamma * math.cosh(gamma * (25 - z)) / math.sinh(gamma * 25) * shape * 1e3
        assert abs(point["flux"]["z"] - expected) <= point["flux_error_bound"] <= 1e-6 * expected


async def test_problem_with_a_formula_is_kept_under_its_text(client: httpx.AsyncClient) -> None:
    problem = block(z_low={"condition": "held", "value": formula("30 + x")})
    kept = await client.post("/v1/problems", json=problem)
    assert kept.status_code == 201
    again = changed(problem, "faces/z_low/value/expression", "30+x")
    other = await client.post("/v1/problems", json=again)
    assert other.json()["problem_id"] != kept.json()["problem_id"]
    question = {"problem_id": kept.json()["problem_id"], "evaluate": {"points": [{"at": [10, 30, 0]}]}}
    assert (await fields(client, question))["points"][0]["potential"] == pytest.approx(40.0)


async def test_infinite_slope_is_named_with_its_function_and_what_to_give_instead(client: httpx.AsyncClient) -> None:
    problem = block(z_low={"condition": "held", "value": formula("30 + 20*sqrt(x)")})
    answer = await client.post("/v1/problems", json=problem)
    (error,) = answer.json()["errors"]
    assert error["pointer"] == "#/faces/z_low/value/expression"
    assert error["detail"].startswith("The slope of sqrt at character 9 of the expression is infinite where")
    assert error["detail"].endswith("Give the data as readings, closer together towards there.")


@pytest.mark.parametrize(
    "text",
    [
        "__import__('os').getcwd()",
        "().__class__",
        "open(1)",
        "9**9**9**9",
        "x if x else y",
        "exec(x)",
        "x;y",
        "f'{x}'",
        "x:=2",
        "[x for x in y]",
        "lambda: 1",
        "x@y",
        "x//y",
        "\x00",
        "(" * 300,
        "1" * 450,
        "exp(" * 60 + "x" + ")" * 60,
    ],
)
async def test_text_that_is_no_formula_is_answered_with_a_sentence(client: httpx.AsyncClient, text: str) -> None:
    problem: Any = changed(sight_port_bar(), "faces/z_low/value", formula(text))
    answer = await client.post("/v1/problems", json=problem)
    assert answer.status_code == 422, answer.text
    (error,) = answer.json()["errors"]
    assert error["pointer"] == "#/faces/z_low/value/expression"
    assert error["detail"].endswith(".")
