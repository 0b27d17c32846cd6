"""Conductivity that varies with the potential, and faces that radiate, over the wire."""

from __future__ import annotations

import copy
from typing import Any

import httpx
import pytest
from scipy.optimize import brentq

from service.models.fields_answer import FieldsAnswer
from service.models.flux_totals_answer import FluxTotalsAnswer
from tests.api.client import check_problem_document, pointers
from tests.api.halden_reach import ask_points, changed, sight_port_bar, slab

pytestmark = pytest.mark.anyio

Json = dict[str, Any]
SIGMA = 5.670374419e-8  # W/(m^2 K^4), CODATA 2018
FALLING: Json = {"law": "linear", "reference": 20, "per_degree": -0.0005}
TABLE: Json = {"law": "table", "potential": [0, 400, "1273.15 K"], "factor": [1.01, 0.81, 0.51]}


def lawful(problem: Json, law: Json = FALLING) -> Json:
    problem = copy.deepcopy(problem)
    problem["body"]["conductivity_law"] = law
    return problem


def plate(**face: Any) -> Json:
    """A plate of 25 mm that is heated from below and gives off heat above."""
    problem = slab()
    problem["faces"]["z_low"] = {"condition": "flux", "inflow": "20 kW/m^2"}
    problem["faces"]["z_high"] = {"condition": "film", "coefficient": "10 W/(m^2 K)", "ambient": 20} | face
    return problem


@pytest.mark.parametrize("law", [FALLING, TABLE], ids=["linear", "table"])
async def test_slab_carries_the_conductivity_at_its_mean_temperature(client: httpx.AsyncClient, law: Json) -> None:
    """k = 130 W/(m K) at 20 degC and a tenth less at 220, by both laws: flux 0.9 k 360 K / 25 mm."""
    question = ask_points(lawful(slab(40, 400), law), [1, 2, 12.5], quantities=["potential", "flux"])
    answer = (await client.post("/v1/fields", json=question)).json()
    FieldsAnswer.model_validate(answer)
    (point,) = answer["points"]
    assert point["flux"]["z"] == pytest.approx(-130 * 0.9 * 360 / 0.025, rel=1e-9)
    # The middle: 1 - 0.0005 (u - 20) is the root of the mean of the squares at both ends.
    factor = (0.5 * (0.99**2 + 0.81**2)) ** 0.5
    assert point["potential"] == pytest.approx(20 + (1 - factor) / 0.0005, abs=point["error_bound"] + 1e-9)
    assert "iteration" not in answer["certificate"]


@pytest.mark.parametrize("own", [None, 130, "200 W/(m K)", {"x": 260, "y": 95, "z": 130}])
async def test_table_of_conductivities_is_what_the_body_conducts(client: httpx.AsyncClient, own: Any) -> None:
    """The same slab with the table's own numbers; one that conducts twice as well along x has them along x."""
    twice = 2 if isinstance(own, dict) else 1
    values: list[float | str] = [131.3 * twice, 105.3 * twice, f"{0.663 * twice} W/(cm K)"]
    law = {"law": "table", "potential": TABLE["potential"], "conductivity": values}
    problem = changed(lawful(slab(40, 400), law), "body/conductivity", ... if own is None else own)
    question = ask_points(problem, [1, 2, 12.5], quantities=["potential", "flux"])
    answer = (await client.post("/v1/fields", json=question)).json()
    (point,) = answer["points"]
    assert point["flux"]["z"] == pytest.approx(-130 * 0.9 * 360 / 0.025, rel=1e-9)
    factor = (0.5 * (0.99**2 + 0.81**2)) ** 0.5
    assert point["potential"] == pytest.approx(20 + (1 - factor) / 0.0005, abs=point["error_bound"] + 1e-9)


@pytest.mark.parametrize("units", [{}, {"potential": "degF"}, {"length": "inch", "flux": "kW/m^2"}])
async def test_radiating_face_balances_what_flows_in_whatever_the_units(client: httpx.AsyncClient, units: Json) -> None:
    """20 kW/m^2 = 10 W/(m^2 K) (T - 293.15 K) + 0.8 sigma (T^4 - (293.15 K)^4)."""
    problem = plate(emissivity=0.8, ambient="20 degC")
    problem["body"]["size"] = {"x": "40 mm", "y": "60 mm", "z": "25 mm"}
    problem["units"] |= units
    question = {
        "problem": problem,
        "evaluate": {"points": [{"at": ["20 mm", "30 mm", "25 mm"]}], "quantities": ["potential", "flux"]},
    }
    answer = (await client.post("/v1/fields", json=question)).json()
    FieldsAnswer.model_validate(answer)
    kelvin = brentq(lambda t: 10 * (t - 293.15) + 0.8 * SIGMA * (t**4 - 293.15**4) - 20e3, 300, 3000, xtol=1e-11)
    expected = (kelvin - 273.15) * 1.8 + 32 if "potential" in units else kelvin - 273.15
    (point,) = answer["points"]
    assert point["potential"] == pytest.approx(expected, abs=point["error_bound"] + 1e-9)
    assert point["flux"]["z"] == pytest.approx(20 if "flux" in units else 20e3, rel=1e-6)
    iteration = answer["certificate"]["iteration"]
    assert iteration["steps"] >= 1
    assert 0 <= iteration["residual"] < 1e-2
    assert answer["certificate"]["method"].endswith("film faces iterated")


async def test_face_may_radiate_alone(client: httpx.AsyncClient) -> None:
    question = ask_points(plate(coefficient=0, emissivity=1), [20, 30, 25])
    (point,) = (await client.post("/v1/fields", json=question)).json()["points"]
    assert point["potential"] == pytest.approx((20e3 / SIGMA + 293.15**4) ** 0.25 - 273.15, abs=1e-6)


async def test_flows_and_means_and_extremes_of_a_body_with_a_law(client: httpx.AsyncClient) -> None:
    problem = lawful(plate(coefficient="100 W/(m^2 K)"))
    totals = (await client.post("/v1/flux-totals", json={"problem": problem, "evaluate": {}})).json()
    FluxTotalsAnswer.model_validate(totals)
    assert totals["faces"]["z_low"]["inflow"] == pytest.approx(20e3 * 0.04 * 0.06, rel=1e-12)
    assert totals["balance"]["closed"]
    evaluate = {"extremes": True, "means": [{"face": "z_high"}, {"face": "x_low"}]}
    answer = (await client.post("/v1/fields", json={"problem": problem, "evaluate": evaluate})).json()
    cold, side = (mean["value"] for mean in answer["means"])
    assert cold == pytest.approx(220.0, abs=1e-5)
    assert answer["extremes"]["lowest"]["value"] == pytest.approx(cold, abs=1e-5)
    assert cold < side < answer["extremes"]["highest"]["value"]


async def test_accuracy_is_less_by_default_where_a_face_is_iterated_and_can_be_asked_for(
    client: httpx.AsyncClient,
) -> None:
    problem = lawful(sight_port_bar(), {"law": "linear", "reference": 30, "per_degree": -0.0004})
    problem["body"]["size"]["z"] = 25
    problem["faces"]["z_high"] = {"condition": "insulated"}
    usual = (await client.post("/v1/fields", json=ask_points(problem, [20, 30, 5]))).json()
    assert usual["certificate"]["accuracy_asked"] == pytest.approx(1e-4 * 616, rel=0.05)
    question = ask_points(problem, [20, 30, 5]) | {"accuracy": {"absolute": "1 mK"}}
    finer = (await client.post("/v1/fields", json=question)).json()
    bound = usual["points"][0]["error_bound"]
    assert finer["points"][0]["error_bound"] <= 1e-3 < bound
    assert abs(finer["points"][0]["potential"] - usual["points"][0]["potential"]) <= bound + 1e-3


async def test_field_that_leaves_the_table_is_refused_with_its_place(client: httpx.AsyncClient) -> None:
    document = check_problem_document(
        await client.post("/v1/fields", json=ask_points(lawful(plate(), TABLE), [1, 1, 1])), 422
    )
    assert document["type"] == "/problem-types/outside-law"
    assert pointers(document) == ["#/problem/body/conductivity_law"]
    assert "reaches about 2" in document["detail"]
    assert "on face" in document["detail"]
    assert "ends at 1000" in document["detail"]


@pytest.mark.parametrize(
    ("law", "sentence"),
    [
        (TABLE, "The face z_high is held at 2200; the conductivity law holds from 0 to 1000."),
        (FALLING, "The face z_high is held at 2200; the conductivity law holds below 2018."),
        (FALLING | {"per_degree": 1e-3, "reference": 5000}, "holds above 4001."),
    ],
)
async def test_held_value_beyond_the_law_points_to_its_face(
    client: httpx.AsyncClient, law: Json, sentence: str
) -> None:
    low = 4500 if "above" in sentence else 40
    question = ask_points(lawful(slab(low, 2200), law), [1, 1, 1])
    document = check_problem_document(await client.post("/v1/fields", json=question), 422)
    assert pointers(document) == ["#/problem/faces/z_high"]
    assert sentence in document["detail"]


@pytest.mark.parametrize(
    ("call", "evaluate", "sentence"),
    [
        ("convergence", {"points": [{"at": [1, 1, 1]}]}, "How series and integral converge is told where the"),
        ("reach", {"face": "z_low"}, "How far a face reaches is told where the conductivity does not vary"),
    ],
)
async def test_what_a_law_leaves_open_is_named(
    client: httpx.AsyncClient, call: str, evaluate: Json, sentence: str
) -> None:
    for problem in (lawful(slab(40, 400)), plate(emissivity=0.8)):
        answer = await client.post(f"/v1/{call}", json={"problem": problem, "evaluate": evaluate})
        document = check_problem_document(answer, 422)
        assert pointers(document) == ["#/evaluate"]
        assert document["errors"][0]["detail"].startswith(sentence)


LAW = "problem/body/conductivity_law"
CONDUCTIVITIES: Json = {"law": "table", "potential": [0, 400, 1000], "conductivity": [95, 0, 60]}
STACK = [{"thickness": 10, "conductivity": 95}, {"thickness": 15, "conductivity": 20}]
WRONG: dict[str, tuple[Json, str]] = {
    "law of an unknown kind": (changed({"problem": lawful(slab())}, f"{LAW}/law", "cubic"), f"#/{LAW}/law"),
    "slope as a text": (
        changed({"problem": lawful(slab())}, f"{LAW}/per_degree", "-0.001 1/K"),
        f"#/{LAW}/per_degree",
    ),
    "reference that is no temperature": (
        changed({"problem": lawful(slab())}, f"{LAW}/reference", "20 mm"),
        f"#/{LAW}/reference",
    ),
    "table that does not increase": (
        changed({"problem": lawful(slab(), TABLE)}, f"{LAW}/potential", [0, 400, 300]),
        f"#/{LAW}/potential",
    ),
    "factor of zero": (changed({"problem": lawful(slab(), TABLE)}, f"{LAW}/factor", [1, 0, 1]), f"#/{LAW}/factor/1"),
    "table of uneven lists": (changed({"problem": lawful(slab(), TABLE)}, f"{LAW}/factor", [1, 1]), f"#/{LAW}"),
    "factors and conductivities": (
        changed({"problem": lawful(slab(), TABLE)}, f"{LAW}/conductivity", [3, 2, 1]),
        f"#/{LAW}/conductivity",
    ),
    "table of potentials alone": (changed({"problem": lawful(slab(), TABLE)}, f"{LAW}/factor", ...), f"#/{LAW}/factor"),
    "conductivity of zero": ({"problem": lawful(slab(), CONDUCTIVITIES)}, f"#/{LAW}/conductivity/1"),
    "fewer conductivities than potentials": (
        changed({"problem": lawful(slab(), CONDUCTIVITIES)}, f"{LAW}/conductivity", [3, 2]),
        f"#/{LAW}/conductivity",
    ),
    "conductivity in metres": (
        changed(
            changed({"problem": lawful(slab(), CONDUCTIVITIES)}, f"{LAW}/conductivity", ["3 m", 2, 2]),
            "problem/body/conductivity",
            ...,
        ),
        f"#/{LAW}/conductivity/0",
    ),
    "emissivity above one": (
        {"problem": plate(emissivity=1.2)},
        "#/problem/faces/z_high/emissivity",
    ),
    "emissivity of a voltage": (
        changed(
            {"problem": plate(emissivity=0.8, coefficient="1 S/m^2", ambient="0 V")},
            "problem/potential",
            "electric_potential",
        ),
        "#/problem/faces/z_high/emissivity",
    ),
    "coefficient of zero without radiation": (
        {"problem": plate(coefficient=0)},
        "#/problem/faces/z_high/coefficient",
    ),
    "surroundings below absolute zero": (
        {"problem": plate(emissivity=0.8, ambient=-300)},
        "#/problem/faces/z_high/ambient",
    ),
    "more taken out than radiation gives": (
        {"problem": changed(plate(emissivity=0.8, coefficient=0), "faces/z_low/inflow", -500)},
        "#/problem/faces/z_high",
    ),
    "colder than absolute zero": (
        {"problem": changed(plate(emissivity=0.8, coefficient=5), "faces/z_low/inflow", -1e5)},
        "#/problem/faces/z_high",
    ),
    "colder than absolute zero where most is taken out": (
        {
            "problem": changed(
                changed(plate(emissivity=0.8, coefficient=0), "body/conductivity", 0.1),
                "faces/z_low/inflow",
                {"map": "patches", "background": 0, "patches": [{"x": [18, 22], "y": [28, 32], "value": "-40 kW/m^2"}]},
            )
        },
        "#/problem/faces/z_high",
    ),
    "held below absolute zero": ({"problem": slab(-400)}, "#/problem/faces/z_low/value"),
    "held below absolute zero in another unit": ({"problem": slab("-1 K")}, "#/problem/faces/z_low/value"),
    "readings below absolute zero": (
        {"problem": slab({"map": "samples", "csv": ",0,60\n0,1,2\n40,3,-274"})},  # type: ignore[arg-type]
        "#/problem/faces/z_low/value",
    ),
    "formula below absolute zero": (
        {"problem": slab({"map": "formula", "expression": "-20*x"})},  # type: ignore[arg-type]
        "#/problem/faces/z_low/value",
    ),
    "slope beyond all digits": (
        changed({"problem": lawful(plate())}, f"{LAW}/per_degree", 1e59),
        f"#/{LAW}/per_degree",
    ),
    "factor beyond all digits": (
        changed(changed({"problem": lawful(plate())}, f"{LAW}/per_degree", 1e59), f"{LAW}/reference", 0),
        f"#/{LAW}",
    ),
    "law of a stack": (
        changed(
            changed({"problem": lawful(slab())}, "problem/body/layers", STACK), "problem/body/size", {"x": 40, "y": 60}
        ),
        "#/problem/body/conductivity",
    ),
}


@pytest.mark.parametrize("name", WRONG)
async def test_what_is_wrong_is_pointed_at(client: httpx.AsyncClient, name: str) -> None:
    question, pointer = WRONG[name]
    question = {**question, "evaluate": {"points": [{"at": [1, 1, 1]}]}}
    document = check_problem_document(await client.post("/v1/fields", json=question), 422)
    assert pointer in pointers(document)


async def test_absolute_zero_itself_may_be_held_and_radiation_gives_what_it_can(client: httpx.AsyncClient) -> None:
    for zero in (-273.15, "0 K", "-459.67 degF"):
        answer = await client.post("/v1/fields", json=ask_points(slab(zero), [1, 1, 12.5]))
        assert answer.json()["points"][0]["potential"] == pytest.approx((80 - 273.15) / 2, rel=1e-9)
    # 0.8 sigma (T0^4 - T^4) = 300 W/m^2 at the top, and 300 W/m^2 * 25 mm / k less below.
    problem = changed(plate(emissivity=0.8, coefficient=0), "faces/z_low/inflow", -300)
    answer = await client.post("/v1/fields", json=ask_points(problem, [1, 1, 25]))
    (top,) = answer.json()["points"]
    expected = (293.15**4 - 300 / (0.8 * SIGMA)) ** 0.25 - 273.15
    assert abs(top["potential"] - expected) <= top["error_bound"] + 1e-9


async def test_law_of_a_stack_is_refused_with_what_to_do_instead(client: httpx.AsyncClient) -> None:
    problem = lawful(slab())
    problem["body"] = {"size": {"x": 40, "y": 60}, "layers": STACK, "conductivity_law": FALLING}
    document = check_problem_document(await client.post("/v1/problems", json=problem), 422)
    assert pointers(document) == ["#/body/conductivity_law"]
    assert "at its own mean potential" in document["detail"]


async def test_influence_of_pads_needs_a_conductivity_that_does_not_vary(client: httpx.AsyncClient) -> None:
    problem = lawful(plate(coefficient=100))
    question = {"problem": problem, "evaluate": {"pads": [{"face": "z_low", "x": [1, 5], "y": [1, 5]}]}}
    document = check_problem_document(await client.post("/v1/resistances", json=question), 422)
    assert "in proportion to flows only" in document["detail"]
