"""Mean, largest and centre potential of pads over HTTP, pads with a total flow, and wrong requests about them."""

# The table reads best with one request a line.
# ruff: noqa: E501

from __future__ import annotations

import json
import math
from typing import Any

import httpx
import pytest

from service.settings import Settings
from tests.api.client import check_problem_document, open_client
from tests.api.halden_reach import Json, changed, sight_port_bar
from tests.api.wrong_requests import Wrong, check_wrong

pytestmark = pytest.mark.anyio

INSULATED = {"condition": "insulated"}
SIDES = ("x_low", "x_high", "y_low", "y_high")


def plate(*patches: Json, **more: Any) -> Json:
    """A plate on a cooled base with pads on top."""
    inflow = {"map": "patches", "background": 0, "patches": list(patches) or [VALVE, DRIVER]}
    return {
        "units": {"length": "mm"},
        "body": {"size": {"x": 30, "y": 20, "z": 4}, "conductivity": 150},
        "faces": dict.fromkeys(SIDES, INSULATED)
        | {
            "z_low": {"condition": "film", "coefficient": 8000, "ambient": 25},
            "z_high": {"condition": "flux", "inflow": inflow},
        },
    } | more


VALVE = {"name": "valve", "x": [5, 11], "y": [4, 9], "flow": 30}
DRIVER = {"name": "driver", "x": [24, 30], "y": [15, 20], "value": "0.4 W/mm^2"}


async def ask(client: httpx.AsyncClient, problem: Json, **more: Any) -> Json:
    answer = await client.post("/v1/pads", json={"problem": problem, **more})
    assert answer.status_code == 200, answer.text
    found: Json = answer.json()
    return found


async def test_total_flow_is_spread_over_its_patch(client: httpx.AsyncClient) -> None:
    """30 W on 30 mm^2 is 1 W/mm^2; 0.4 W/mm^2 on 30 mm^2 is 12 W."""
    as_density = {key: value for key, value in VALVE.items() if key != "flow"} | {"value": "1 W/mm^2"}
    found, other = await ask(client, plate()), await ask(client, plate(as_density, DRIVER))
    for pad, same, flow in zip(found["pads"], other["pads"], (30, 12), strict=True):
        assert pad["area"] == pytest.approx(30)
        assert pad["flow"]["value"] == pytest.approx(flow, rel=1e-14)
        assert pad["mean"]["value"] == pytest.approx(same["mean"]["value"], rel=1e-13)


async def test_pads_are_what_fields_say_of_them(client: httpx.AsyncClient) -> None:
    found = await ask(client, plate())
    valve, driver = found["pads"]
    assert (valve["name"], valve["face"], valve["patch"]) == ("valve", "z_high", 0)
    assert valve["rectangle"] == {"x": [5, 11], "y": [4, 9]}
    assert valve["centre"]["at"] == [8, 6.5, 4]
    axes = {"x": {"from": 5, "to": 11, "count": 41}, "y": {"from": 4, "to": 9, "count": 41}, "z": 4}
    evaluate = {"means": [{"face": "z_high", "patch": "valve"}], "points": [{"at": [8, 6.5, 4]}], "grids": [axes]}
    fields = (await client.post("/v1/fields", json={"problem": plate(), "evaluate": evaluate})).json()
    bound = fields["certificate"]["error_bound"]
    for key, value in (("mean", fields["means"][0]["value"]), ("centre", fields["points"][0]["potential"])):
        assert valve[key]["value"] == pytest.approx(value, abs=valve[key]["error_bound"] + bound)
    on_grid = max(entry for row in fields["grids"][0]["potential"] for column in row for entry in column)
    largest = valve["largest"]
    assert on_grid - bound <= largest["value"] + largest["error_bound"]
    # The highest place of the grid is within 0.1 mm of the largest.
    assert largest["value"] == pytest.approx(on_grid, abs=0.02)
    # The driver stands in a corner, where heat is slowest to leave.
    assert driver["largest"]["at"] == pytest.approx([30, 20, 4])
    for pad in found["pads"]:
        assert pad["centre"]["value"] <= pad["largest"]["value"] + pad["largest"]["error_bound"]


async def test_pads_that_tile_a_face_are_the_uniform_load(client: httpx.AsyncClient) -> None:
    tiles = [{"x": [x, x + 10], "y": [y, y + 5], "flow": 3} for x in (0, 10, 20) for y in (0, 5, 10, 15)]
    found = await ask(client, plate(*tiles))
    area = 600e-6
    by_hand = 25 + 36 * (1 / (8000 * area) + 4e-3 / (150 * area))
    for pad in found["pads"]:
        for key in ("mean", "largest", "centre"):
            assert pad[key]["value"] == pytest.approx(by_hand, abs=pad[key]["error_bound"] + 1e-11)


async def test_sliver_and_pad_at_the_edge_of_a_thin_layer(client: httpx.AsyncClient) -> None:
    """A sliver of 1 to 1000 and a pad in the corner, on 20 um of copper over ceramic; accuracy as asked."""
    sliver = {"name": "sliver", "x": [10, 20], "y": [7, 7.01], "flow": 1}
    corner = {"name": "corner", "x": [29, 30], "y": [19, 20], "flow": 1}
    problem = plate(sliver, corner)
    problem["body"] = {
        "size": {"x": 30, "y": 20},
        "layers": [
            {"name": "ceramic", "thickness": 0.63, "conductivity": 24},
            {"name": "copper", "thickness": "20 um", "conductivity": 390},
        ],
    }
    found = await ask(client, problem, accuracy={"absolute": "1e-7 K"})
    for pad in found["pads"]:
        for key in ("mean", "largest", "centre"):
            assert pad[key]["error_bound"] <= 1e-7
        assert 25 < pad["mean"]["value"] <= pad["largest"]["value"]
    sliver_found, corner_found = found["pads"]
    assert sliver_found["centre"]["value"] > sliver_found["mean"]["value"]
    assert corner_found["largest"]["at"][:2] == pytest.approx([30, 20])


async def test_usual_accuracy_gives_way_to_what_can_be_promised(client: httpx.AsyncClient) -> None:
    """Micrometres on metres leave fewer digits than usual; an accuracy that was asked for is met or refused."""
    problem = plate({"x": [10, 20], "y": [7, 7.01], "flow": 1})
    problem["body"] = {
        "size": {"x": 30, "y": 20},
        "layers": [
            {"thickness": "1.5 m", "conductivity": 1.7},
            {"thickness": "5 um", "conductivity": 0.2},
            {"thickness": "2 mm", "conductivity": {"in_plane": 24, "through": 0.2}, "contact_conductance_below": 10},
        ],
    }
    found = await ask(client, problem)
    (pad,) = found["pads"]
    asked = found["certificate"]["accuracy_asked"]
    assert pad["centre"]["error_bound"] <= asked
    # What is wider all the same is said to be.
    wider = [f"#/pads/0/{key}" for key in ("mean", "largest") if pad[key]["error_bound"] > asked]
    assert [warning["where"] for warning in found["warnings"]] == wider
    usual = {"accuracy": {"relative": 1e-14}}
    refused = check_problem_document(await client.post("/v1/pads", json={"problem": problem} | usual), 422)
    assert refused["type"] == "/problem-types/accuracy-not-reached"
    assert (await ask(client, problem, accuracy={"absolute": refused["bound"]}))["pads"]


async def test_square_on_a_half_space_is_as_published(client: httpx.AsyncClient) -> None:
    """Centre: 2 ln(1 + sqrt 2) / pi times q a / k, with q = Q / a^2 (Carslaw and Jaeger 1959, section 10.5): 0.561100."""
    problem = {
        "units": {"length": "mm"},
        "body": {"size": {"x": "infinite", "y": "infinite", "z": "semi-infinite"}, "conductivity": 2.5},
        "faces": {"z_low": {"condition": "flux", "inflow": {"map": "patches", "background": 0, "patches": [
            {"x": [-4, 4], "y": [-1, 7], "flow": 3}]}}},
    }  # fmt: skip
    (pad,) = (await ask(client, problem))["pads"]
    by_hand = 2 * math.log(1 + math.sqrt(2)) / math.pi * 3 / (2.5 * 8e-3)
    assert pad["centre"]["value"] == pytest.approx(by_hand, rel=1e-10)
    assert pad["centre"]["at"] == [0, 3, 0]
    assert pad["largest"]["value"] == pytest.approx(by_hand, abs=pad["largest"]["error_bound"])


async def test_pads_are_chosen_by_face_or_name(client: httpx.AsyncClient) -> None:
    problem = plate()
    problem["faces"]["x_low"] = {"condition": "flux", "inflow": {"map": "patches", "background": 0, "patches": [
        {"y": [0, 5], "z": [0, 2], "flow": -1}]}}  # fmt: skip
    whole = await ask(client, problem)
    assert [(pad["face"], pad["patch"]) for pad in whole["pads"]] == [("x_low", 0), ("z_high", 0), ("z_high", 1)]
    face = await ask(client, problem, evaluate={"faces": ["z_high"]})
    assert [pad["name"] for pad in face["pads"]] == ["valve", "driver"]
    named = await ask(
        client, problem, evaluate={"pads": [{"face": "z_high", "patch": "driver"}, {"face": "x_low", "patch": 0}]}
    )
    assert [pad["face"] for pad in named["pads"]] == ["z_high", "x_low"]
    assert named["pads"][1]["flow"]["value"] == pytest.approx(-1)


def posted(name: str, problem: Json, pointer: str, sentence: str) -> Wrong:
    """A problem to be stored."""
    return Wrong(name, "/v1/problems", json.dumps(problem).encode(), 422, pointer, sentence)


def asked(name: str, evaluate: Json, pointer: str, sentence: str, problem: Json | None = None) -> Wrong:
    """A question about pads."""
    content = json.dumps({"problem": problem or plate(), "evaluate": evaluate})
    return Wrong(name, "/v1/pads", content.encode(), 422, pointer, sentence)


ON_PAD = "#/faces/z_high/inflow/patches/0"
HELD = changed(sight_port_bar(), "faces/z_low/value/patches/0/flow", 5)
HELD = changed(HELD, "faces/z_low/value/patches/0/value", ...)
ENDLESS = changed(sight_port_bar(), "faces/y_high/inflow", {
    "map": "patches", "background": 0, "patches": [{"x": [1, 2], "z": [1, "end"], "flow": 1}]})  # fmt: skip

TABLE = [
    posted("flow and density", plate(VALVE | {"value": 1}), f"{ON_PAD}/flow", "Give either `value` or `flow`, not both."),
    posted("neither", plate({"x": [1, 2], "y": [1, 2]}), f"{ON_PAD}/value", "Give either `value` or `flow`."),
    posted("flow as a density", plate(VALVE | {"flow": "3 W/m^2"}), f"{ON_PAD}/flow", "does not measure heat flow"),
    posted("flow into nothing", plate(VALVE | {"x": [5, 5]}), ON_PAD, "it has to have a positive extent"),
    posted("flow on a held face", HELD, "#/faces/z_low/value/patches/0/flow", "Only a face with the condition flux takes a total flow."),
    posted("flow without end", ENDLESS, "#/faces/y_high/inflow/patches/0/flow", "cannot be spread over a patch without end"),
    posted("pads that overlap", plate(VALVE, DRIVER | {"x": [10, 16], "y": [8, 12]}), "#/faces/z_high/inflow/patches/1", "Patches 0 and 1 overlap."),
    asked("pads of a plain problem", {}, "#/evaluate", "The problem has no pads", sight_port_bar()),
    asked("pads of a face without", {"faces": ["z_low"]}, "#/evaluate/faces/0", "The face z_low has no pads"),
    asked("pad of a face without", {"pads": [{"face": "x_low", "patch": 0}]}, "#/evaluate/pads/0/face", "The face x_low has no pads"),
    asked("pad of another name", {"pads": [{"face": "z_high", "patch": "pump"}]}, "#/evaluate/pads/0/patch", "There is no such pad; the face z_high has the pads 0 to 1."),
    asked("pad by truth", {"pads": [{"face": "z_high", "patch": True}]}, "#/evaluate/pads/0/patch", "The number of a patch"),
    asked("face that is not there", {"faces": ["z_high"]}, "#/evaluate/faces/0", "has no face z_high", sight_port_bar()),
]  # fmt: skip


@pytest.mark.parametrize("wrong", TABLE, ids=lambda wrong: wrong.name)
async def test_wrong_pad_is_answered_with_one_clear_sentence(client: httpx.AsyncClient, wrong: Wrong) -> None:
    await check_wrong(client, wrong)


async def test_pads_are_counted(settings: Settings) -> None:
    async with open_client(settings.model_copy(update={"pads": 1})) as client:
        document = check_problem_document(await client.post("/v1/pads", json={"problem": plate()}), 422)
        assert "There are 2 pads; at most 1 are allowed" in document["errors"][0]["detail"]


async def test_place_in_the_middle_of_an_endless_plate_is_told_without_rounding(client: httpx.AsyncClient) -> None:
    """By symmetry the largest potential is at the middle of the pad, which a search finds but for rounding."""
    pad = {"x": [-7, 7], "y": [-9.1, 9.1], "flow": 3}
    problem = {
        "units": {"length": "mm"},
        "body": {"size": {"x": "infinite", "y": "infinite", "z": 5}, "conductivity": 3},
        "faces": {
            "z_low": {"condition": "flux", "inflow": {"map": "patches", "background": 0, "patches": [pad]}},
            "z_high": {"condition": "held", "value": 20},
        },
    }
    found = (await client.post("/v1/pads", json={"problem": problem})).json()
    assert found["pads"][0]["largest"]["at"] == [0, 0, 0]
    evaluate = {"problem": problem, "evaluate": {"extremes": True}}
    assert (await client.post("/v1/fields", json=evaluate)).json()["extremes"]["highest"]["at"] == [0, 0, 0]
