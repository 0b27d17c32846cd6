"""Resistances between pads and the equivalent network, in all forms, and wrong requests about them."""

# The table reads best with one request a line.
# ruff: noqa: E501

from __future__ import annotations

import csv
import io
import json
import math
from typing import Any

import httpx
import numpy as np
import pytest

from service.settings import Settings
from tests.api.client import check_problem_document, open_client
from tests.api.halden_reach import Json, changed
from tests.api.wrong_requests import Wrong, check_wrong

pytestmark = pytest.mark.anyio

INSULATED = {"condition": "insulated"}
PATCHES: list[Json] = [
    {"name": "valve A", "x": [5, 11], "y": [4, 9], "flow": 30},
    {"name": "valve, B", "x": [11, 17], "y": [4, 9], "flow": 12},
    {"name": 'driver "C"', "x": [24, 30], "y": [15, 20], "value": "2 W/cm^2"},
]


def plate(**more: Any) -> Json:
    """Three pads on a plate that stands on a cooled base."""
    return {
        "units": {"length": "mm"},
        "body": {"size": {"x": 30, "y": 20, "z": 4}, "conductivity": {"in_plane": 180, "through": 120}},
        "faces": dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), INSULATED)
        | {
            "z_low": {"condition": "film", "coefficient": 8000, "ambient": 25},
            "z_high": {"condition": "flux", "inflow": {"map": "patches", "background": 0, "patches": PATCHES}},
        },
    } | more


async def ask(client: httpx.AsyncClient, problem: Json, **evaluate: Any) -> Json:
    answer = await client.post("/v1/resistances", json={"problem": problem, "evaluate": evaluate})
    assert answer.status_code == 200, answer.text
    found: Json = answer.json()
    return found


def solved(resistors: list[tuple[int, int, float]], count: int) -> Any:
    """Rises of the nodes of a network per unit flow, by nodal analysis."""
    balance = np.zeros((count, count))
    for first, second, value in resistors:
        for node in (first, second):
            if node:
                balance[node - 1, node - 1] += 1 / value
        if first and second:
            balance[first - 1, second - 1] -= 1 / value
            balance[second - 1, first - 1] -= 1 / value
    return np.linalg.inv(balance)


async def test_matrix_is_what_each_pad_raises_alone(client: httpx.AsyncClient) -> None:
    """Means of the same body with one pad fed at a time, by the call for fields."""
    found = await ask(client, plate())
    matrix, bound = np.array(found["mean"]["value"]), np.array(found["mean"]["error_bound"])
    assert [pad["name"] for pad in found["pads"]] == [patch["name"] for patch in PATCHES]
    assert [pad["area"] for pad in found["pads"]] == pytest.approx([30, 30, 30])
    means = [{"face": "z_high", "patch": index} for index in range(3)]
    for fed in range(3):
        patches = [
            {
                **{key: value for key, value in patch.items() if key not in ("value", "flow")},
                "flow": float(index == fed),
            }
            for index, patch in enumerate(PATCHES)
        ]
        problem = changed(plate(), "faces/z_high/inflow/patches", patches)
        answer = await client.post("/v1/fields", json={"problem": problem, "evaluate": {"means": means}})
        for row, mean in enumerate(answer.json()["means"]):
            slack = bound[row, fed] + mean["error_bound"]
            assert matrix[row, fed] == pytest.approx(mean["value"] - 25, abs=slack)
    assert (matrix == matrix.T).all()
    certificate = found["certificate"]
    assert 0 <= certificate["agreement"] <= certificate["agreement_bound"]
    assert certificate["checked_entries"] >= 6
    assert certificate["error_bound"] == bound.max() < 1e-8


async def test_peaks_lie_above_the_means_and_are_what_the_call_for_pads_says(client: httpx.AsyncClient) -> None:
    found = await ask(client, plate(), peaks=True)
    peak, mean = np.array(found["peak"]["value"]), np.array(found["mean"]["value"])
    assert (peak > mean).all()
    patches = [
        PATCHES[0] | {"flow": 1},
        *({key: value for key, value in patch.items() if key != "value"} | {"flow": 0} for patch in PATCHES[1:]),
    ]
    problem = changed(plate(), "faces/z_high/inflow/patches", patches)
    pads = (await client.post("/v1/pads", json={"problem": problem})).json()["pads"]
    for row, pad in enumerate(pads):
        slack = pad["largest"]["error_bound"] + found["peak"]["error_bound"][row][0]
        assert peak[row, 0] == pytest.approx(pad["largest"]["value"] - 25, abs=slack)


async def test_pads_that_tile_the_face_share_the_resistance_of_the_plate(client: httpx.AsyncClient) -> None:
    """A flow shared by area over tiles is the uniform flow, whose rise is c / (k A) + 1 / (h A), by hand."""
    tiles = [
        {"face": "z_high", "x": [x, x + 15], "y": [y, y + 10], "name": f"{x} {y}"} for x in (0, 15) for y in (0, 10)
    ]
    found = await ask(client, plate(), pads=tiles)
    area = 30e-3 * 20e-3
    by_hand = 4e-3 / (120 * area) + 1 / (8000 * area)
    shared = np.array(found["mean"]["value"]).sum(axis=1) / 4
    assert shared == pytest.approx(np.full(4, by_hand), rel=1e-12)
    assert found["network"]["to_environment"] == pytest.approx(np.full(4, 1 / by_hand / 4), rel=1e-9)
    assert found["units"]["resistance"] == "K/W"
    assert found["units"]["conductance"] == "W/K"


async def test_network_gives_the_matrix_back(client: httpx.AsyncClient) -> None:
    found = await ask(client, plate())
    network, count = found["network"], 3
    resistors = [(i + 1, j + 1, 1 / network["between"][i][j]) for i in range(count) for j in range(i + 1, count)]
    resistors += [(i + 1, 0, 1 / network["to_environment"][i]) for i in range(count)]
    rises = np.array(found["mean"]["value"])
    assert solved(resistors, count) == pytest.approx(rises, rel=1e-9)
    assert network["negative"] == 0
    # From pad to pad: what a unit of flow from one to the other raises between them.
    for i in range(count):
        for j in range(count):
            by_hand = rises[i, i] + rises[j, j] - 2 * rises[i, j]
            assert found["pairs"]["value"][i][j] == pytest.approx(by_hand, rel=1e-12)


async def test_pads_on_several_faces_are_symmetric(client: httpx.AsyncClient) -> None:
    pads = [
        {"face": "z_high", "patch": "valve A"},
        {"face": "x_low", "y": [4, 9], "z": [1, 3], "name": "flange"},
        {"face": "x_high", "name": "end"},
    ]
    found = await ask(client, plate(), pads=pads)
    matrix = np.array(found["mean"]["value"])
    assert (matrix == matrix.T).all()
    assert (matrix > 0).all()
    assert [pad.get("rectangle") for pad in found["pads"]] == [
        {"x": [5, 11], "y": [4, 9]},
        {"y": [4, 9], "z": [1, 3]},
        None,
    ]
    assert found["pads"][2]["area"] == pytest.approx(80)


async def test_table_is_csv_with_quoted_names(client: httpx.AsyncClient) -> None:
    found = await ask(client, plate())
    answer = await client.post("/v1/resistances", json={"problem": plate()}, headers={"Accept": "text/csv"})
    assert answer.status_code == 200
    assert answer.headers["content-type"] == "text/csv; charset=utf-8"
    assert "resistances.csv" in answer.headers["content-disposition"]
    assert answer.content.endswith(b"\r\n")
    head, *rows = csv.reader(io.StringIO(answer.text, newline=""), strict=True)
    names = [patch["name"] for patch in PATCHES]
    assert head == ["mean rise per unit flow [K/W]", *names]
    assert [row[0] for row in rows] == names
    assert [[float(entry) for entry in row[1:]] for row in rows] == found["mean"]["value"]


@pytest.mark.parametrize("name", ["=HYPERLINK(1)", "+1", "-2", "@SUM(A1)", "\t=1"])
async def test_name_that_a_spreadsheet_would_run_is_marked_as_a_text(client: httpx.AsyncClient, name: str) -> None:
    problem = changed(plate(), "faces/z_high/inflow/patches/1/name", name)
    answer = await client.post("/v1/resistances", json={"problem": problem}, headers={"Accept": "text/csv"})
    head, *rows = csv.reader(io.StringIO(answer.text, newline=""), strict=True)
    assert head[2] == rows[1][0] == f"'{name}"
    assert head[1] == rows[0][0] == PATCHES[0]["name"]


async def test_list_of_resistors_solves_to_the_matrix(client: httpx.AsyncClient) -> None:
    found = await ask(client, plate())
    answer = await client.post("/v1/resistances", json={"problem": plate()}, headers={"Accept": "text/plain"})
    assert answer.headers["content-type"] == "text/plain; charset=utf-8"
    lines = answer.text.splitlines()
    comments = [line for line in lines if line.startswith("*")]
    assert '* node 3: driver "C"' in comments
    assert any("K/W" in line for line in comments)
    resistors = []
    for line in lines[len(comments) :]:
        name, first, second, value = line.split()
        assert name == f"R{first}_{second}"
        resistors.append((int(first), int(second), float(value)))
    assert len(resistors) == 6
    assert solved(resistors, 3) == pytest.approx(np.array(found["mean"]["value"]), rel=1e-9)


async def test_name_with_a_line_break_stays_in_its_comment(client: httpx.AsyncClient) -> None:
    pads = [{"face": "z_high", "patch": 0, "name": "A\nR9_0 9 0 1"}]
    question = {"problem": plate(), "evaluate": {"pads": pads}}
    answer = await client.post("/v1/resistances", json=question, headers={"Accept": "text/plain"})
    assert [line[0] for line in answer.text.splitlines()] == ["*"] * 6 + ["R"]


async def test_matrix_comes_in_binary(client: httpx.AsyncClient) -> None:
    headers = {"Accept": "application/vnd.stillfield.npz"}
    answer = await client.post("/v1/resistances", json={"problem": plate()}, headers=headers)
    with np.load(io.BytesIO(answer.content)) as archive:
        text = json.loads(str(archive["answer"]))
        assert archive[text["mean"]["value"]].shape == (3, 3)
        assert archive[text["network"]["to_environment"]].shape == (3,)


async def test_accuracy_is_of_the_rise_for_one_unit_of_flow(client: httpx.AsyncClient) -> None:
    problem = plate() | {"units": {"length": "mm", "flow": "mW"}}
    content = {"problem": problem, "accuracy": {"absolute": "1e-9 K"}}
    found = (await client.post("/v1/resistances", json=content)).json()
    assert found["units"]["resistance"] == "K/W"
    assert found["certificate"]["accuracy_asked"] == pytest.approx(1e-6, rel=1e-12)


@pytest.mark.parametrize(
    ("declared", "inverse", "factor"), [("K/mW", "mW/K", 1e-3), ("delta_degF hour/Btu", "Btu/(delta_degF hour)", None)]
)
async def test_unit_of_resistances_can_be_declared(
    client: httpx.AsyncClient, declared: str, inverse: str, factor: float | None
) -> None:
    whole = await ask(client, plate())
    found = await ask(client, plate() | {"units": {"length": "mm", "resistance": declared}})
    assert (found["units"]["resistance"], found["units"]["conductance"]) == (declared, inverse)
    # A Btu is 1055.056 J.
    factor = factor or 1.8 * 1055.056 / 3600
    for key in ("value", "error_bound"):
        assert np.array(found["mean"][key]) == pytest.approx(factor * np.array(whole["mean"][key]), rel=1e-9)
    between = np.array(found["network"]["between"])
    assert between == pytest.approx(np.array(whole["network"]["between"]) / factor, rel=1e-9)
    texts = [
        (
            await client.post("/v1/resistances", json={"problem": problem}, headers={"Accept": "text/plain"})
        ).text.splitlines()[2:]
        for problem in (plate(), plate() | {"units": {"length": "mm", "resistance": declared}})
    ]
    assert texts[0][0] == texts[1][0] == "* values in K/W, the coherent SI unit of potential per flow"
    ours, theirs = ([float(line.split()[3]) for line in text if line[0] == "R"] for text in texts)
    assert ours == pytest.approx(theirs, rel=1e-12)


async def test_volts_in_thousandths_leave_resistances_in_ohms(client: httpx.AsyncClient) -> None:
    """A rod between a pad that is its whole end and a held end: length over conductivity times area, by hand."""
    problem = plate() | {"potential": "electric_potential", "units": {"length": "mm", "potential": "mV", "flow": "kA"}}
    problem["body"] = problem["body"] | {"conductivity": "56 MS/m"}
    problem["faces"] = problem["faces"] | {"z_low": {"condition": "held", "value": 3}, "z_high": INSULATED}
    question = {"problem": problem, "evaluate": {"pads": [{"face": "z_high"}]}}
    by_hand = 4e-3 / (56e6 * 30e-3 * 20e-3)
    found = await ask(client, problem, **question["evaluate"])
    assert (found["units"]["resistance"], found["units"]["conductance"]) == ("ohm", "S")
    assert found["mean"]["value"][0][0] == pytest.approx(by_hand, rel=1e-9)
    assert found["network"]["to_environment"][0] == pytest.approx(1 / by_hand, rel=1e-9)
    table = await client.post("/v1/resistances", json=question, headers={"Accept": "text/csv"})
    assert table.text.splitlines()[0] == "mean rise per unit flow [ohm],z_high"
    listed = await client.post("/v1/resistances", json=question, headers={"Accept": "text/plain"})
    assert "* values in ohm, the coherent SI unit of potential per flow" in listed.text
    assert float(listed.text.splitlines()[-1].split()[3]) == pytest.approx(by_hand, rel=1e-9)


async def test_resistance_of_a_concentration_is_a_time_over_a_volume(client: httpx.AsyncClient) -> None:
    problem = plate() | {"potential": "concentration", "units": {"length": "mm"}}
    problem["body"] = problem["body"] | {"conductivity": 1e-9}
    problem["faces"] = problem["faces"] | {"z_low": {"condition": "held", "value": 0}, "z_high": INSULATED}
    found = await ask(client, problem, pads=[{"face": "z_high", "x": [1, 2], "y": [1, 2]}])
    assert found["units"]["resistance"] == "s/m^3"
    assert found["units"]["conductance"] == "m^3/s"


async def test_pads_too_much_alike_have_a_matrix_and_no_network(client: httpx.AsyncClient) -> None:
    pads = [{"face": "z_high", "x": [5, 11], "y": [4, 9]}, {"face": "z_high", "x": [5, 11], "y": [4, 9]}]
    found = await ask(client, plate(), pads=pads)
    assert found["network"] is None
    assert [warning["code"] for warning in found["warnings"]] == ["network-not-determined"]
    question = {"problem": plate(), "evaluate": {"pads": pads}}
    answer = await client.post("/v1/resistances", json=question, headers={"Accept": "text/plain"})
    assert "* no network: the pads are too much alike" in answer.text


async def test_bodies_that_let_no_flow_out_have_no_resistances(client: httpx.AsyncClient) -> None:
    patches = [{"x": [0, 10], "y": [0, 20], "flow": 5}, {"x": [20, 30], "y": [0, 20], "flow": -5}]
    problem = changed(plate(), "faces/z_high/inflow/patches", patches)
    problem["faces"]["z_low"] = INSULATED
    document = check_problem_document(await client.post("/v1/resistances", json={"problem": problem}), 422)
    assert document["type"] == "/problem-types/no-steady-state"
    assert document["errors"][0]["pointer"] == "#/evaluate"
    assert "A flow of 1 W into a pad has no way out" in document["detail"]


def wrong(name: str, evaluate: Json, pointer: str, sentence: str, problem: Json | None = None) -> Wrong:
    """A question about the plate or another problem."""
    content = json.dumps({"problem": problem or plate(), "evaluate": evaluate})
    return Wrong(name, "/v1/resistances", content.encode(), 422, pointer, sentence)


PLAIN = plate()
PLAIN["faces"] = PLAIN["faces"] | {"z_high": INSULATED}
BAR = plate()
BAR["body"] = {"size": {"x": 30, "y": 20, "z": "semi-infinite"}, "conductivity": 3}
BAR["faces"] = {face: condition for face, condition in BAR["faces"].items() if face != "z_high"} | {
    "x_low": {"condition": "held", "value": 1}
}

TABLE = [
    wrong("no pads in the problem", {}, "#/evaluate", "The problem has no pads", PLAIN),
    wrong("no pads asked for", {"pads": []}, "#/evaluate/pads", "At least 1 entry is wanted here; there are 0."),
    wrong("pad on a held face", {"pads": [{"face": "x_low", "y": [1, 2], "z": [1, 2]}]}, "#/evaluate/pads/0/face", "The face x_low is held", BAR),
    wrong("pad without end", {"pads": [{"face": "y_low"}]}, "#/evaluate/pads/0", "A pad has to be finite", BAR),
    wrong("pad without end along z", {"pads": [{"face": "y_low", "x": [1, 2], "z": [1, "end"]}]}, "#/evaluate/pads/0", "A pad has to be finite", BAR),
    wrong("pad of another name", {"pads": [{"face": "z_high", "patch": "valve X"}]}, "#/evaluate/pads/0/patch", "the face z_high has the patches 0 to 2."),
    wrong("pad outside", {"pads": [{"face": "z_high", "x": [25, 31], "y": [1, 2]}]}, "#/evaluate/pads/0/x", "The interval from 25 to 31"),
    wrong("pad of nothing", {"pads": [{"face": "z_high", "x": [25, 25], "y": [1, 2]}]}, "#/evaluate/pads/0/x", "positive extent"),
    wrong("misspelt option", {"peakss": True}, "#/evaluate/peakss", 'the nearest one that is known is "peaks"'),
]  # fmt: skip


@pytest.mark.parametrize("wrong", TABLE, ids=lambda wrong: wrong.name)
async def test_wrong_question_is_answered_with_one_clear_sentence(client: httpx.AsyncClient, wrong: Wrong) -> None:
    await check_wrong(client, wrong)


async def test_pads_are_counted_and_forms_are_named(settings: Settings) -> None:
    async with open_client(settings.model_copy(update={"pads": 2})) as client:
        document = check_problem_document(await client.post("/v1/resistances", json={"problem": plate()}), 422)
        assert "There are 3 pads; at most 2 are allowed" in document["errors"][0]["detail"]
        refused = await client.post("/v1/resistances", json={"problem": plate()}, headers={"Accept": "image/png"})
        assert "text/csv or text/plain" in check_problem_document(refused, 406)["detail"]


@pytest.mark.parametrize("evaluate", [{"peaks": True}, {"pads": "askew"}], ids=["peaks", "pads on faces askew"])
async def test_work_is_estimated_before_it_starts(settings: Settings, evaluate: Json) -> None:
    if evaluate.get("pads"):
        strips = [{"face": "x_low", "y": [y, y + 1], "z": [1, 2]} for y in range(15)]
        evaluate = {"pads": [*strips, *({"face": "z_high", "patch": patch} for patch in range(3))]}
    async with open_client(settings.model_copy(update={"cost_multiplications": 2e8})) as client:
        question = {"problem": plate(), "evaluate": evaluate}
        document = check_problem_document(await client.post("/v1/resistances", json=question), 422)
    assert document["type"] == "/problem-types/too-costly"
    assert "Ask for fewer pads" in document["detail"]
    assert document["estimate"] > document["limit"] == 2e8


async def test_square_on_a_half_space_is_as_published(client: httpx.AsyncClient) -> None:
    """Mean rise of a square with a uniform flux on a half-space, side a: 0.473201 / (k a).

    Its double integral of 1 / distance is closed: 4 a^3 (ln(1 + sqrt 2) + (1 - sqrt 2) / 3), over 2 pi k a^4
    (Carslaw and Jaeger, Conduction of Heat in Solids, 2nd ed. 1959, section 10.5, integrated over the square).
    """
    problem = {
        "units": {"length": "mm"},
        "body": {"size": {"x": "infinite", "y": "infinite", "z": "semi-infinite"}, "conductivity": 2.5},
        "faces": {"z_low": INSULATED},
    }
    found = await ask(client, problem, pads=[{"face": "z_low", "x": [-4, 4], "y": [-1, 7]}])
    by_hand = 4 * (math.log(1 + math.sqrt(2)) + (1 - math.sqrt(2)) / 3) / (2 * math.pi * 2.5 * 8e-3)
    assert found["mean"]["value"][0][0] == pytest.approx(by_hand, rel=1e-11)
    assert 2.5 * 8e-3 * by_hand == pytest.approx(0.473201, abs=1e-6)
