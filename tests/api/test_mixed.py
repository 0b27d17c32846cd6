"""Faces with several conditions over HTTP: flows and levels of pads, resistances between them, and wrong requests."""

# The table reads best with one request a line.
# ruff: noqa: E501

from __future__ import annotations

import json
import math
from typing import Any

import httpx
import numpy as np
import pytest

from tests.api.client import check_problem_document, pointers
from tests.api.halden_reach import Json, changed
from tests.api.wrong_requests import Wrong, check_wrong

pytestmark = pytest.mark.anyio

INSULATED = {"condition": "insulated"}
FEED = {"name": "feed", "x": [5, 25], "y": [10, 50], "condition": "held", "flow": 1200}
RETURN = {"name": "return", "x": [55, 75], "y": [10, 50], "condition": "held", "value": 0}
LUG = {"name": "lug", "x": [35, 45], "y": [0, 8], "condition": "film", "coefficient": "400 S/cm^2", "ambient": 0}


def stub(*pads: Json, **background: Any) -> Json:
    """A bus-bar stub with clamped contacts on one face."""
    mixed = {"condition": "mixed", "background": background or INSULATED, "pads": list(pads) or [FEED, RETURN, LUG]}
    return {
        "potential": "electric_potential",
        "units": {"length": "mm", "potential": "mV", "flow": "A"},
        "body": {"size": {"x": 80, "y": 60, "z": 25}, "conductivity": "56 MS/m"},
        "faces": dict.fromkeys(("x_low", "x_high", "y_low", "y_high", "z_low"), INSULATED) | {"z_high": mixed},
    }


async def ask(client: httpx.AsyncClient, call: str, problem: Json, evaluate: Json | None = None, **more: Any) -> Json:
    content = {"problem": problem} | ({} if evaluate is None else {"evaluate": evaluate}) | more
    answer = await client.post(f"/v1/{call}", json=content)
    assert answer.status_code == 200, answer.text
    found: Json = answer.json()
    return found


async def test_flows_of_pads_balance_and_levels_are_found(client: httpx.AsyncClient) -> None:
    patches = [{"face": "z_high", "patch": name} for name in ("feed", "return", "lug")]
    found = await ask(client, "flux-totals", stub(), {"patches": patches})
    feed, back, lug = found["patches"]
    assert feed["inflow"] == 1200
    assert feed["potential"]["value"] > 100 * feed["potential"]["error_bound"] > 0
    assert back["potential"] == {"value": 0, "error_bound": 0}
    total = feed["inflow"] + back["inflow"] + lug["inflow"]
    assert total == pytest.approx(0, abs=back["error_bound"] + lug["error_bound"])
    # A film lets in its coefficient times area times the difference of its means.
    by_hand = -400e4 * 80e-6 * lug["potential"]["value"] * 1e-3
    assert lug["inflow"] == pytest.approx(by_hand, rel=1e-9)
    assert found["balance"]["closed"]


async def test_certificate_tells_how_well_flows_are_known(client: httpx.AsyncClient) -> None:
    """Both levels are given, so that no potential in the answer is off at all, but the flows are."""
    problem = stub({**RETURN, "name": "feed", "x": [5, 25], "value": 1}, RETURN)
    evaluate = {"faces": ["z_high"], "patches": [{"face": "z_high", "patch": name} for name in ("feed", "return")]}
    found = await ask(client, "flux-totals", problem, evaluate)
    certificate, flows = found["certificate"], found["patches"]
    assert certificate["error_bound"] == 0
    assert certificate["flow_error_bound"] == max(flow["error_bound"] for flow in flows) > 0
    size = sum(abs(flow["inflow"]) for flow in flows)
    assert certificate["flow_accuracy_asked"] == pytest.approx(1e-5 * size, rel=1e-12)
    assert found["warnings"] == []


async def test_tighter_accuracy_refines_flows_and_says_where_it_is_not_reached(client: httpx.AsyncClient) -> None:
    problem = stub({**RETURN, "name": "feed", "x": [5, 25], "value": 1}, RETURN)
    evaluate = {"faces": [], "patches": [{"face": "z_high", "patch": 0}]}
    found = await ask(client, "flux-totals", problem, evaluate, accuracy={"absolute": "1e-9 mV"})
    (flow,) = found["patches"]
    size = 2 * abs(flow["inflow"])
    assert found["certificate"]["flow_accuracy_asked"] == pytest.approx(1e-9 * size, rel=1e-5)
    assert flow["error_bound"] > found["certificate"]["flow_accuracy_asked"]
    (warning,) = found["warnings"]
    assert (warning["code"], warning["where"]) == ("accuracy-not-reached", "#/patches/0")
    assert " A, wider than the accuracy asked for" in warning["message"]
    pads = await ask(client, "pads", problem, {"pads": [{"face": "z_high", "patch": 0}]}, accuracy={"relative": 6e-3})
    assert pads["warnings"] == []
    pads = await ask(client, "pads", problem, {"pads": [{"face": "z_high", "patch": 0}]}, accuracy={"relative": 1e-9})
    assert [warning["where"] for warning in pads["warnings"]] == ["#/pads/0/flow"]


async def test_flux_that_is_poorly_known_beside_a_pad_is_warned_of(client: httpx.AsyncClient) -> None:
    """On a pad bounds are as large as fluxes; well off it they are small, and in a corner next to nothing flows."""
    problem = stub({**RETURN, "name": "feed", "x": [5, 25], "value": 1}, RETURN)

    def question(*places: list[float]) -> Json:
        return {"points": [{"at": place} for place in places], "quantities": ["flux"]}

    found = await ask(client, "fields", problem, question([15, 30, 25], [40, 30, 0], [0, 0, 0]))
    (warning,) = found["warnings"]
    assert (warning["code"], warning["where"]) == ("flux-poorly-known", "#/points")
    assert warning["message"].startswith("At 1 of 3 places the bound of the flux is more than a tenth")
    on_pad, off_it, _ = found["points"]
    assert on_pad["flux_error_bound"] > 0.1 * abs(on_pad["flux"]["z"])
    assert off_it["flux_error_bound"] < 0.1 * abs(off_it["flux"]["x"])
    assert (await ask(client, "fields", problem, question([40, 30, 0])))["warnings"] == []


async def test_bound_of_a_single_held_pad_is_that_of_its_rise(client: httpx.AsyncClient) -> None:
    problem = changed(stub(RETURN), "faces/z_low", {"condition": "held", "value": 0})
    found = await ask(client, "resistances", problem)
    certificate, mean = found["certificate"], found["mean"]
    assert certificate["error_bound"] == mean["error_bound"][0][0] > 0
    assert certificate["accuracy_asked"] == pytest.approx(1e-5 * mean["value"][0][0], rel=1e-12)


async def test_pads_are_told_by_the_call_for_pads(client: httpx.AsyncClient) -> None:
    totals = await ask(client, "flux-totals", stub(), {"patches": [{"face": "z_high", "patch": 0}]})
    found = await ask(client, "pads", stub())
    feed, back, lug = found["pads"]
    (known,) = totals["patches"]
    for key in ("mean", "largest", "centre"):
        slack = feed[key]["error_bound"] + known["potential"]["error_bound"]
        assert feed[key]["value"] == pytest.approx(known["potential"]["value"], abs=slack)
        assert back[key]["value"] == pytest.approx(0, abs=back[key]["error_bound"])
    assert feed["flow"] == {"value": 1200, "error_bound": 0}
    assert (
        lug["centre"]["value"] <= lug["largest"]["value"] + lug["largest"]["error_bound"] + lug["centre"]["error_bound"]
    )


async def test_resistance_between_held_pads_is_level_over_flow(client: httpx.AsyncClient) -> None:
    """With two clamps alone nothing leads elsewhere: the voltage of the feed over its current is the resistance."""
    totals = await ask(client, "flux-totals", stub(FEED, RETURN), {"patches": [{"face": "z_high", "patch": 0}]})
    found = await ask(client, "resistances", stub(FEED, RETURN))
    level = totals["patches"][0]["potential"]
    pair, bound = found["pairs"]["value"][0][1], found["pairs"]["error_bound"][0][1]
    # Levels are in millivolts.
    assert pair == pytest.approx(1e-3 * level["value"] / 1200, abs=bound + 1e-3 * level["error_bound"] / 1200)
    assert bound < 1e-4 * pair
    assert found["units"]["resistance"] == "ohm"
    assert found["network"]["to_environment"] == [0, 0]
    assert 1 / found["network"]["between"][0][1] == pytest.approx(pair, rel=1e-3)
    assert found["mean"] is None
    assert "no-environment" in [warning["code"] for warning in found["warnings"]]


async def test_square_plate_on_a_half_space_is_as_published(client: httpx.AsyncClient) -> None:
    """Capacity of a square plate 0.366787 in units of 4 pi eps0 L, printed as 0.3667874 (J. Appl. Phys. 95 (2004) 3798).

    A held square on an insulated half-space lets 2 pi k C' L V pass with C' that number, half of both its sides.
    """
    problem = {
        "units": {"length": "mm"},
        "body": {"size": {"x": "infinite", "y": "infinite", "z": "semi-infinite"}, "conductivity": 1.5},
        "faces": {"z_low": {"condition": "mixed", "background": INSULATED, "pads": [
            {"x": [-3, 7], "y": [0, 10], "condition": "held", "value": 40}]}},
    }  # fmt: skip
    found = await ask(
        client, "flux-totals", problem, {"patches": [{"face": "z_low", "patch": 0}]}, accuracy={"relative": 1e-6}
    )
    (pad,) = found["patches"]
    published = 2 * math.pi * 1.5 * 0.3667874 * 10e-3 * 40
    assert pad["inflow"] == pytest.approx(published, abs=pad["error_bound"] + 2e-6 * published)
    assert pad["error_bound"] < 1e-5 * published
    assert found["balance"]["closed"]


async def test_held_pads_with_a_way_out_have_rises_and_a_network(client: httpx.AsyncClient) -> None:
    film = {"condition": "film", "coefficient": "50 S/cm^2", "ambient": 0}
    problem = stub(FEED, RETURN)
    problem["faces"]["z_low"] = film
    found = await ask(client, "resistances", problem, {"peaks": True})
    mean, network = np.array(found["mean"]["value"]), found["network"]
    assert found["peak"] == found["mean"]
    conductances = np.diag(network["to_environment"]) + np.diag(np.sum(network["between"], axis=1)) - network["between"]
    slack = np.abs(conductances) @ found["mean"]["error_bound"] + 2 * np.array(network["between_error_bound"]) @ mean
    assert (np.abs(conductances @ mean - np.eye(2)) <= slack.max()).all()
    assert slack.max() < 0.05
    # The level of the feed, the return held at zero: what is left of its rise.
    totals = await ask(client, "flux-totals", problem, {"patches": [{"face": "z_high", "patch": 0}]})
    level = totals["patches"][0]["potential"]
    millivolts = 1200e3
    by_matrix = millivolts * (mean[0, 0] - mean[0, 1] ** 2 / mean[1, 1])
    slack = millivolts * 4 * np.max(found["mean"]["error_bound"]) + level["error_bound"]
    assert by_matrix == pytest.approx(level["value"], abs=slack)


async def test_held_pads_that_are_left_out_are_part_of_the_environment(client: httpx.AsyncClient) -> None:
    found = await ask(client, "resistances", stub(FEED, RETURN), {"pads": [{"face": "z_high", "patch": "feed"}]})
    whole = await ask(client, "resistances", stub(FEED, RETURN))
    assert 1 / found["network"]["to_environment"][0] == pytest.approx(whole["pairs"]["value"][0][1], rel=1e-4)


async def test_pads_on_other_faces_are_fed_beside_held_ones(client: httpx.AsyncClient) -> None:
    """A pad on the far side of a body whose only way out is a held pad."""
    problem = stub(RETURN)
    found = await ask(client, "resistances", problem, {"pads": [{"face": "z_low", "x": [5, 25], "y": [10, 50]}]})
    fields = changed(problem, "faces/z_low", {"condition": "flux", "inflow": {"map": "patches", "background": 0, "patches": [
        {"x": [5, 25], "y": [10, 50], "flow": 1}]}})  # fmt: skip
    mean = (await ask(client, "fields", fields, {"means": [{"face": "z_low", "patch": 0}]}))["means"][0]
    slack = found["mean"]["error_bound"][0][0] + 1e-3 * mean["error_bound"]
    assert found["mean"]["value"][0][0] == pytest.approx(1e-3 * mean["value"], abs=slack)


async def test_film_pads_of_the_background_s_coefficient_are_the_plain_face(client: httpx.AsyncClient) -> None:
    film = {"coefficient": "30 S/cm^2", "ambient": 5}
    pads = [{"x": [5, 25], "y": [10, 50], "condition": "film", **film}]
    problem = stub(*pads, condition="film", **film)
    problem["faces"]["x_low"] = {"condition": "held", "value": 20}
    plain = changed(problem, "faces/z_high", {"condition": "film", **film})
    points = {"points": [{"at": [40, 30, 25]}, {"at": [10, 30, 10]}]}
    one, other = await ask(client, "fields", problem, points), await ask(client, "fields", plain, points)
    for here, there in zip(one["points"], other["points"], strict=True):
        assert here["potential"] == pytest.approx(there["potential"], abs=here["error_bound"] + there["error_bound"])


async def test_reach_beside_mixed_faces_is_refused_with_what_to_do(client: httpx.AsyncClient) -> None:
    answer = await client.post("/v1/reach", json={"problem": stub(), "evaluate": {"face": "z_high"}})
    (error,) = check_problem_document(answer, 422)["errors"]
    assert error["pointer"] == "#/evaluate"
    assert error["detail"].startswith("How far a face reaches is told of bodies without mixed faces.")


def wrong(name: str, problem: Json, pointer: str, sentence: str) -> Wrong:
    """A problem to be stored."""
    return Wrong(name, "/v1/problems", json.dumps(problem).encode(), 422, pointer, sentence)


def asked(name: str, problem: Json, evaluate: Json, pointer: str, sentence: str, accuracy: Json | None = None) -> Wrong:
    """A question about resistances."""
    content = {"problem": problem, "evaluate": evaluate} | ({"accuracy": accuracy} if accuracy else {})
    return Wrong(name, "/v1/resistances", json.dumps(content).encode(), 422, pointer, sentence)


PADS = "#/faces/z_high/pads"
TWO_KINDS = stub()
TWO_KINDS["faces"] = TWO_KINDS["faces"] | {"z_low": {"condition": "flux", "inflow": {
    "map": "patches", "background": 0, "patches": [{"name": "fed", "x": [1, 2], "y": [1, 2], "flow": 1}]}}}  # fmt: skip
SIDEWAYS = stub()
SIDEWAYS["faces"] = SIDEWAYS["faces"] | {"x_low": {"condition": "mixed", "background": INSULATED, "pads": [
    {"y": [1, 2], "z": [1, 2], "condition": "held", "value": 0}]}}  # fmt: skip

TABLE = [
    wrong("no pads", changed(stub(), "faces/z_high/pads", []), PADS, "At least 1 entry is wanted here"),
    wrong("no background", changed(stub(), "faces/z_high/background", ...), "#/faces/z_high/background", "This field is required."),
    wrong("held background", stub(condition="held", value=3), "#/faces/z_high/background/condition", 'One of "flux", "film", "insulated" is wanted here.'),
    wrong("background that varies", stub(condition="flux", inflow={"map": "patches"}), "#/faces/z_high/background/inflow", "A number in the declared unit"),
    wrong("pad of no condition", stub(FEED, RETURN | {"condition": "insulated"}), f"{PADS}/1/condition", 'One of "held", "film", "flux" is wanted here.'),
    wrong("value and flow", stub(FEED | {"value": 3}, RETURN), f"{PADS}/0/flow", "Give either `value` or `flow`, not both."),
    wrong("neither", stub(RETURN, {"x": [1, 2], "y": [1, 2], "condition": "held"}), f"{PADS}/1/value", "Give either `value` or `flow`."),
    wrong("flow in volts", stub(FEED | {"flow": "3 V"}, RETURN), f"{PADS}/0/flow", "does not measure current"),
    wrong("film that conducts nothing", stub(RETURN, LUG | {"coefficient": 0}), f"{PADS}/1/coefficient", "it has to be greater than zero"),
    wrong("pads that overlap", stub(FEED, RETURN | {"x": [20, 40]}), f"{PADS}/1", "Pads 0 and 1 of z_high overlap."),
    wrong("pad outside", stub(FEED, RETURN | {"x": [70, 90]}), f"{PADS}/1", "lie in the face"),
    wrong("pad along z", stub(FEED, RETURN | {"z": [1, 2]}), f"{PADS}/1/z", "The face z_high has no extent along z"),
    wrong("two pads of one name", stub(FEED, RETURN | {"name": "feed"}), f"{PADS}/1/name", "Another pad of this face has the same name."),
    wrong("mixed faces askew", SIDEWAYS, "#/faces/x_low", "mixed faces have to be square to one axis"),
    wrong("flows that find no way out", stub(FEED), "#/faces", "add up to 1200 A"),
    asked("held and fed pads", TWO_KINDS, {}, "#/evaluate", "Some pads are held and others are fed a flow"),
    asked("resistance of a film pad", stub(), {"pads": [{"face": "z_high", "patch": "lug"}]}, "#/evaluate/pads/0", "resistances lead to held pads"),
    asked("rectangle of a mixed face", stub(), {"pads": [{"face": "z_high", "x": [1, 2], "y": [1, 2]}]}, "#/evaluate/pads/0", "name one of these by `patch`"),
    asked("absolute accuracy of held pads", stub(), {}, "#/accuracy/absolute", "give the accuracy as `relative`", {"absolute": 1e-3}),
]  # fmt: skip


@pytest.mark.parametrize("wrong", TABLE, ids=lambda wrong: wrong.name)
async def test_wrong_mixed_face_is_answered_with_one_clear_sentence(client: httpx.AsyncClient, wrong: Wrong) -> None:
    await check_wrong(client, wrong)


def row_of(count: int, **condition: Any) -> list[Json]:
    """Pads side by side on the stub."""
    width = 80 / count
    return [{"x": [width * i, width * (i + 0.5)], "y": [10, 50], **condition} for i in range(count)]


async def test_more_pads_than_are_solved_are_refused_by_a_limit(client: httpx.AsyncClient) -> None:
    """On one face by the number that is set; on two by what is solved together, with a type of a limit."""
    held: Json = {"condition": "held", "value": 1}
    answer = await client.post("/v1/pads", json={"problem": stub(*row_of(65, **held))})
    document = check_problem_document(answer, 422)
    assert document["errors"][0]["detail"].startswith("There are 65 held pads and pads behind films; at most 64")
    below = {"condition": "mixed", "background": INSULATED, "pads": row_of(33, **held)}
    problem = changed(stub(*row_of(33, **held)), "faces/z_low", below)
    document = check_problem_document(await client.post("/v1/pads", json={"problem": problem}), 422)
    assert document["type"] == "/problem-types/too-costly"
    assert (document["estimate"], document["limit"]) == (66 * 64, 4096)
    assert "at most 64 are solved together" in document["detail"]


async def test_single_pad_without_a_way_out_has_no_resistance(client: httpx.AsyncClient) -> None:
    document = check_problem_document(await client.post("/v1/resistances", json={"problem": stub(RETURN)}), 422)
    assert document["type"] == "/problem-types/no-steady-state"
    assert "A flow of 1 A into the held pad has no way out" in document["detail"]


async def test_touching_pads_have_no_resistance_between_them(client: httpx.AsyncClient) -> None:
    problem = stub(RETURN, {**RETURN, "name": "beside", "x": [75, 79]}, LUG)
    document = check_problem_document(await client.post("/v1/resistances", json={"problem": problem}), 422)
    assert "touch along an edge; the conductance between them has no bound" in document["detail"]


async def test_held_pad_named_twice_is_refused(client: httpx.AsyncClient) -> None:
    twice = {"pads": [{"face": "z_high", "patch": "return"}, {"face": "z_high", "patch": 0}]}
    problem = stub(RETURN, LUG)
    answer = await client.post("/v1/resistances", json={"problem": problem, "evaluate": twice})
    assert pointers(check_problem_document(answer, 422)) == ["#/evaluate/pads/1"]


async def test_pad_too_narrow_for_its_digits_is_refused_where_it_stands(client: httpx.AsyncClient) -> None:
    problem = stub(RETURN, {**FEED, "x": [5, "5.0000000000001 mm"]})
    document = check_problem_document(await client.post("/v1/pads", json={"problem": problem}), 422)
    assert pointers(document) == ["#/problem/faces/z_high/pads/1"]
    assert "too narrow beside its coordinates" in document["detail"]


async def test_middle_of_a_held_pad_is_known_as_well_as_its_level(client: httpx.AsyncClient) -> None:
    """Levels are given or found for whole pads; the bound beside a film's border is that of the film alone."""
    found = await ask(client, "pads", stub())
    feed, back, lug = found["pads"]
    assert feed["centre"]["error_bound"] == feed["mean"]["error_bound"] > 0
    assert feed["centre"]["value"] == feed["mean"]["value"]
    assert (back["centre"]["value"], back["centre"]["error_bound"]) == (0, 0)
    assert lug["centre"]["error_bound"] > feed["centre"]["error_bound"]


async def test_potential_between_pads_next_to_touching_is_between_their_levels(client: httpx.AsyncClient) -> None:
    """Panels do not resolve a gap of 1e-7 mm; that the potential lies between 3 and 100 mV is all that is known."""
    near = {**RETURN, "name": "near", "x": [25.0000001, 45], "value": 3}
    problem = stub({**RETURN, "name": "feed", "x": [5, 25], "value": 100}, near)
    places = [{"at": [x, 30, z]} for x in (15, 25, 26) for z in (0, 12, 25)]
    found = await ask(client, "fields", problem, {"points": places})
    for point in found["points"]:
        assert 3 <= point["potential"] <= 100
        assert point["error_bound"] <= 97
    codes = [(warning["code"], warning["where"]) for warning in found["warnings"]]
    assert ("potential-poorly-known", "#/certificate/error_bound") in codes


async def test_potential_raised_by_generation_through_a_pad_has_an_accuracy_by_default(
    client: httpx.AsyncClient,
) -> None:
    """All that is generated leaves through one held pad, far below which the rise is by hand at least R Q."""
    problem = stub(RETURN) | {"sources": [{"density": "1e6 A/m^3"}]}
    found = await ask(client, "fields", problem, {"points": [{"at": [0, 0, 0]}], "means": [{"face": "z_low"}]})
    (point,), certificate = found["points"], found["certificate"]
    rise = point["potential"]
    # The span is within a few parts in a hundred of the largest rise, in the corner farthest off.
    assert certificate["accuracy_asked"] == pytest.approx(5e-3 * rise, rel=0.1)
    assert 0 < point["error_bound"] <= certificate["accuracy_asked"]
