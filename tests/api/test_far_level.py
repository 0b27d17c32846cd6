"""What the potential comes to far away, where no face says it, and pads with a given inflow beside held ones."""

from __future__ import annotations

from typing import Any

import httpx
import pytest

from tests.api.halden_reach import Json

pytestmark = pytest.mark.anyio

PAD = {"name": "hatch", "x": [0, 100], "y": [0, 100], "condition": "held"}


def ground(value: Any, unit: str, *others: Json, **body: Any) -> Json:
    """A hatch held at a temperature on the ground, insulated beside it."""
    mixed = {"condition": "mixed", "background": {"condition": "insulated"}, "pads": [PAD | {"value": value}, *others]}
    return {
        "units": {"length": "mm", "potential": unit},
        "body": {"size": {"x": "infinite", "y": "infinite", "z": "semi-infinite"}, "conductivity": 1.5, **body},
        "faces": {"z_low": mixed},
    }


async def totals(client: httpx.AsyncClient, problem: Json) -> Json:
    answer = await client.post("/v1/flux-totals", json={"problem": problem})
    assert answer.status_code == 200, answer.text
    found: Json = answer.json()
    return found


async def test_flow_of_a_pad_does_not_depend_on_the_zero_of_the_scale(client: httpx.AsyncClient) -> None:
    celsius = await totals(client, ground(40, "degC", far_level=10))
    kelvin = await totals(client, ground("40 degC", "K", far_level="10 degC"))
    # A square held on an insulated half-space lets in 2 pi C k L dT, C = 0.366788 (square plate's capacitance in units
    # of 4 pi eps0 L; J. Appl. Phys. 95 (2004) 3798 prints 0.3667874).
    expected = 2 * 3.14159265358979 * 0.366788 * 1.5 * 0.1 * 30
    for found in (celsius, kelvin):
        inflow = found["faces"]["z_low"]
        assert abs(inflow["inflow"] - expected) <= inflow["error_bound"] + 1e-5 * expected
        assert found["warnings"] == []


async def test_a_level_far_away_that_is_left_out_is_zero_and_said(client: httpx.AsyncClient) -> None:
    (warning,) = (await totals(client, ground(40, "degC")))["warnings"]
    assert warning["code"] == "far-level-assumed"
    assert "0 degC" in warning["message"]


async def test_a_level_far_away_beside_a_face_that_fixes_it_is_refused(client: httpx.AsyncClient) -> None:
    problem = ground(40, "degC", far_level=10)
    problem["faces"]["z_low"]["background"] = {"condition": "film", "coefficient": 5, "ambient": 12}
    answer = await client.post("/v1/flux-totals", json={"problem": problem})
    assert answer.status_code == 422
    (error,) = answer.json()["errors"]
    assert error["pointer"] == "#/problem/body/far_level"
    assert "fixes the level" in error["detail"]


async def test_a_pad_with_a_given_inflow_stands_beside_a_held_one(client: httpx.AsyncClient) -> None:
    die = {"name": "die", "x": [200, 300], "y": [0, 100], "condition": "flux", "flow": "3 W"}
    request = {"problem": ground(40, "degC", die, far_level=10)}
    answer = (await client.post("/v1/pads", json=request)).json()
    hatch, fed = answer["pads"]
    assert hatch["mean"] == {"value": 40, "error_bound": 0}
    assert fed["flow"] == {"value": pytest.approx(3, rel=1e-12), "error_bound": 0}
    # Alone it would rise by 0.473201 q L / k on average (mean over a square pad on a half-space); beside the held pad,
    # which takes flow from it and is warmer than the ground, it is off that by less than the hatch's own rise there.
    alone = 0.473201 * 3 / (1.5 * 0.1)
    assert 10 + 0.9 * alone < fed["mean"]["value"] < 10 + alone + 30


@pytest.mark.parametrize(
    ("pad", "field", "sentence"),
    [
        ({"inflow": 3, "flow": 2}, "flow", "not both"),
        ({}, "inflow", "either"),
        ({"inflow": "3 W"}, "inflow", "W/m"),
    ],
)
async def test_a_pad_with_a_given_inflow_has_one_of_two_fields(
    client: httpx.AsyncClient, pad: Json, field: str, sentence: str
) -> None:
    die = {"name": "die", "x": [200, 300], "y": [0, 100], "condition": "flux"} | pad
    answer = await client.post("/v1/pads", json={"problem": ground(40, "degC", die)})
    assert answer.status_code == 422
    (error,) = answer.json()["errors"]
    assert error["pointer"] == f"#/problem/faces/z_low/pads/1/{field}"
    assert sentence in error["detail"]
