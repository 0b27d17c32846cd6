"""Stacks of layers over HTTP: what they answer, both sides of their interfaces, and wrong requests about them."""

# The table reads best with one request a line.
# ruff: noqa: E501

from __future__ import annotations

import json
from typing import Any

import httpx
import pytest

from tests.api.halden_reach import Json, changed
from tests.api.wrong_requests import Wrong, check_wrong

pytestmark = pytest.mark.anyio

INSULATED = {"condition": "insulated"}
SIDES = ("x_low", "x_high", "y_low", "y_high")

# Thicknesses in um, conductivities, and contact conductances below in W/(m^2 K).
LAYERS: list[Json] = [
    {"name": "base", "thickness": "3 mm", "conductivity": 390},
    {"name": "solder", "thickness": "80 um", "conductivity": 57, "contact_conductance_below": "200 kW/(m^2 K)"},
    {"name": "ceramic", "thickness": "0.63 mm", "conductivity": {"in_plane": 24, "through": 18}},
    {"name": "track", "thickness": "5 um", "conductivity": {"x": 390, "y": 390, "z": 350}},
]


def plate(**faces: Json) -> Json:
    """The plate under the furnace controls: a stack with insulated sides, held below, with a pad on top."""
    pads = {"map": "patches", "background": 0, "patches": [{"name": "valve", "x": [5, 11], "y": [4, 9], "flow": 30}]}
    return {
        "units": {"length": "mm"},
        "body": {"size": {"x": 30, "y": 20}, "layers": LAYERS},
        "faces": dict.fromkeys(SIDES, INSULATED)
        | {"z_low": {"condition": "held", "value": 40}, "z_high": {"condition": "flux", "inflow": pads}}
        | faces,
    }


def uniform_plate(flux: float) -> Json:
    """The same with the same flux, W/m^2, everywhere on top, so that each layer is a resistance in a row."""
    return plate(z_high={"condition": "flux", "inflow": flux})


async def ask(client: httpx.AsyncClient, problem: Json, **evaluate: Any) -> Json:
    answer = await client.post("/v1/fields", json={"problem": problem, "evaluate": evaluate})
    assert answer.status_code == 200, answer.text
    found: Json = answer.json()
    return found


async def test_layers_are_resistances_in_a_row_under_a_uniform_flux(client: httpx.AsyncClient) -> None:
    """Rise of each interface by hand: flux times the sum of thickness / conductivity and 1 / contact below it."""
    flux = 5e4
    rises = [3e-3 / 390, 1 / 200e3, 80e-6 / 57, 0.63e-3 / 18, 5e-6 / 350]
    heights = [3.0, 3.0, 3.08, 3.71, 3.715]
    points = [
        {"at": [12, 7, height]} | ({"side": "above"} if index == 1 else {}) for index, height in enumerate(heights)
    ]
    found = await ask(client, uniform_plate(flux), points=points, quantities=["potential", "flux"])
    level = 40.0
    for rise, point, height in zip(rises, found["points"], heights, strict=True):
        level += flux * rise
        assert point["at"][2] == pytest.approx(height, rel=1e-15)
        assert point["potential"] == pytest.approx(level, abs=point["error_bound"] + 1e-12 * level)
        assert point["flux"]["z"] == pytest.approx(-flux, abs=point["flux_error_bound"] + 1e-12 * flux)


@pytest.mark.parametrize("resistance", ["5 mm^2 K/W", 5e-6, "5e-6 (m^2 K)/W"])
async def test_contact_resistance_is_one_over_a_conductance(client: httpx.AsyncClient, resistance: str | float) -> None:
    points = [{"at": [8, 6.5, 3.5]}]
    solder = {key: value for key, value in LAYERS[1].items() if key != "contact_conductance_below"}
    given = changed(plate(), "body/layers/1", solder | {"contact_resistance_below": resistance})
    (one,) = (await ask(client, plate(), points=points))["points"]
    (other,) = (await ask(client, given, points=points))["points"]
    assert one["potential"] == pytest.approx(other["potential"], rel=1e-13)


async def test_contact_resistance_of_zero_is_a_perfect_bond(client: httpx.AsyncClient) -> None:
    asked = [{"interface": 2, "at": [[8, 6.5]]}]
    bonded = changed(plate(), "body/layers/2/contact_resistance_below", 0)
    one, other = (await ask(client, plate(), interfaces=asked), await ask(client, bonded, interfaces=asked))
    assert one["interfaces"] == other["interfaces"]


async def test_interface_is_seen_from_both_sides(client: httpx.AsyncClient) -> None:
    at = [[8, 6.5], [20, 15]]
    asked = [{"interface": "base/solder", "at": at, "name": "die bond"}, {"interface": 2, "at": at}]
    found = await ask(
        client,
        plate(),
        interfaces=asked,
        points=[{"at": [8, 6.5, 3]}, {"at": [8, 6.5, 3], "side": "above"}],
    )
    bond, joint = found["interfaces"]
    assert (bond["name"], bond["interface"], bond["layer_below"], bond["layer_above"]) == (
        "die bond",
        1,
        "base",
        "solder",
    )
    assert (bond["z"], bond["contact_conductance"]) == (3.0, pytest.approx(200e3))
    assert (joint["layer_below"], joint["layer_above"], joint["contact_conductance"]) == ("solder", "ceramic", None)
    bound = found["certificate"]["error_bound"]
    for index in range(len(at)):
        # The step is what flows down through the contact, over its conductance.
        assert bond["step"][index] == pytest.approx(-bond["flux"][index] / 200e3, abs=bond["step_error_bound"][index])
        difference = bond["potential_above"][index] - bond["potential_below"][index]
        assert bond["step"][index] == pytest.approx(difference, abs=2 * bound + bond["step_error_bound"][index])
        assert bond["step"][index] > 1e3 * bond["step_error_bound"][index]
        assert (joint["step"][index], joint["step_error_bound"][index]) == (0, 0)
        assert joint["potential_above"][index] == pytest.approx(joint["potential_below"][index], abs=2 * bound)
    below, above = found["points"]
    assert below["potential"] == pytest.approx(bond["potential_below"][0], abs=2 * bound)
    assert above["potential"] == pytest.approx(bond["potential_above"][0], abs=2 * bound)
    assert below["at"] == above["at"] == [8, 6.5, 3]


async def test_grid_across_an_interface_is_read_on_the_side_that_is_named(client: httpx.AsyncClient) -> None:
    grid = {"x": [8, 20], "y": 6.5, "z": [1, 3, 3.05]}
    found = await ask(client, plate(), grids=[grid, grid | {"side": "above"}])
    low, high = found["grids"]
    assert low["axes"] == high["axes"]
    for index in range(2):
        assert low["potential"][index][0][0] == high["potential"][index][0][0]
        assert high["potential"][index][0][1] - low["potential"][index][0][1] > 1e3 * low["error_bound"]


async def test_grid_through_a_layer_reaches_from_side_to_side(client: httpx.AsyncClient) -> None:
    grids = [{"x": 8, "y": 6.5, "z": {"layer": layer, "count": 3}} for layer in ("base", 1, "track")]
    at = [{"interface": 1, "at": [[8, 6.5]]}]
    found = await ask(client, plate(), grids=grids, interfaces=at)
    heights = [grid["axes"]["z"] for grid in found["grids"]]
    assert heights == [pytest.approx([0, 1.5, 3]), pytest.approx([3, 3.04, 3.08]), pytest.approx([3.71, 3.7125, 3.715])]
    base, solder = (grid["potential"][0][0] for grid in found["grids"][:2])
    bound = 2 * found["certificate"]["error_bound"]
    assert base[2] == pytest.approx(found["interfaces"][0]["potential_below"][0], abs=bound)
    assert solder[0] == pytest.approx(found["interfaces"][0]["potential_above"][0], abs=bound)


async def test_decimal_heights_meet_the_interfaces_they_name(client: httpx.AsyncClient) -> None:
    """0.1 + 0.2 is not 0.3 in binary; a height written in decimal is still that of the interface, or the top."""
    layers = [{"thickness": thickness, "conductivity": 1} for thickness in (0.1, 0.2, 0.6, 0.1)]
    problem = changed(plate(), "body/layers", layers)
    asked = [{"at": [1, 1, z], "side": "above"} for z in (0.1, 0.3, 0.9)] + [{"at": [1, 1, "1000 um"]}]
    found = await ask(client, problem, points=asked)
    assert [point["at"][2] for point in found["points"]] == pytest.approx([0.1, 0.3, 0.9, 1.0], rel=1e-15)


async def test_flow_of_a_pad_reaches_the_held_face_through_every_interface(client: httpx.AsyncClient) -> None:
    planes = [{"z": 3}, {"z": 3.08}, {"z": 3.71}, {"z": 3.712}]
    answer = await client.post("/v1/flux-totals", json={"problem": plate(), "evaluate": {"planes": planes}})
    assert answer.status_code == 200, answer.text
    found = answer.json()
    assert found["balance"]["closed"]
    assert found["faces"]["z_high"]["inflow"] == pytest.approx(30, rel=1e-14)
    for plane in found["planes"]:
        assert plane["flow"] == pytest.approx(-30, abs=plane["error_bound"] + 1e-13)


async def test_films_on_the_sides_go_with_the_conductivity_of_each_layer(client: httpx.AsyncClient) -> None:
    ratio = [390, 57, 24, 390]
    film = {"condition": "film", "coefficient": [2 * k for k in ratio], "ambient": 20}
    problem = plate(x_low=film)
    found = await ask(
        client, problem, points=[{"at": [0, 10, z]} for z in (1, 3.05, 3.4)], quantities=["potential", "flux"]
    )
    for point, k in zip(found["points"], ratio, strict=False):
        inflow = 2 * k * (20 - point["potential"])
        slack = point["flux_error_bound"] + 2 * k * point["error_bound"]
        assert point["flux"]["x"] == pytest.approx(inflow, abs=slack)


async def test_layer_split_in_five_changes_nothing(client: httpx.AsyncClient) -> None:
    fifth = LAYERS[2] | {"thickness": "0.126 mm"}
    split = [*LAYERS[:2], *({**fifth, "name": f"sheet {n}"} for n in range(5)), LAYERS[3]]
    asked = [{"at": [8, 6.5, z]} for z in (0.5, 3.04, 3.3, 3.715)]
    whole = await ask(client, plate(), points=asked, quantities=["potential", "flux"])
    parts = await ask(client, changed(plate(), "body/layers", split), points=asked, quantities=["potential", "flux"])
    bound = whole["certificate"]["error_bound"] + parts["certificate"]["error_bound"]
    for one, other in zip(whole["points"], parts["points"], strict=True):
        assert one["potential"] == pytest.approx(other["potential"], abs=bound)
        assert one["flux"]["z"] == pytest.approx(
            other["flux"]["z"], abs=one["flux_error_bound"] + other["flux_error_bound"]
        )


def wrong(name: str, path: str, new: Any, pointer: str, sentence: str, base: Json | None = None) -> Wrong:
    """The plate with one field changed, posted to be stored."""
    return Wrong(name, "/v1/problems", json.dumps(changed(base or plate(), path, new)).encode(), 422, pointer, sentence)


def asked(name: str, evaluate: Json, pointer: str, sentence: str) -> Wrong:
    """A question about the plate."""
    return Wrong(
        name, "/v1/fields", json.dumps({"problem": plate(), "evaluate": evaluate}).encode(), 422, pointer, sentence
    )


FILM = {"condition": "film", "coefficient": 5, "ambient": 20}
ONE_LAYER = changed(plate(), "body/layers", LAYERS[:1])

TABLE = [
    wrong("no layer at all", "body/layers", [], "#/body/layers", "At least 1 entry"),
    wrong("layers and a size along z", "body/size/z", 3, "#/body/size/z", "The layers say this; leave z out."),
    wrong("layers and a conductivity", "body/conductivity", 3, "#/body/conductivity", "leave conductivity out."),
    wrong("no size along z", "body", {"size": {"x": 30, "y": 20}, "conductivity": 3}, "#/body/size/z", "This field is required, unless `layers` are given."),
    wrong("no conductivity", "body", {"size": {"x": 30, "y": 20, "z": 1}}, "#/body/conductivity", "unless `layers` are given."),
    wrong("thickness of nothing", "body/layers/1/thickness", 0, "#/body/layers/1/thickness", "The thickness is 0 mm; it has to be greater than zero."),
    wrong("thickness in seconds", "body/layers/1/thickness", "3 s", "#/body/layers/1/thickness", "does not measure length"),
    wrong("layer without thickness", "body/layers/1/thickness", ..., "#/body/layers/1/thickness", "This field is required."),
    wrong("endless layer", "body/layers/0/thickness", "semi-infinite", "#/body/layers/0/thickness", "A layer has a finite thickness. Give one that is deep against all the rest"),
    wrong("negative conductivity through", "body/layers/2/conductivity/through", -1, "#/body/layers/2/conductivity/through", "The conductivity through the plane is -1 W/(m K)"),
    wrong("conductivity in the plane alone", "body/layers/2/conductivity/through", ..., "#/body/layers/2/conductivity/through", "This field is required."),
    wrong("negative conductivity along x", "body/layers/3/conductivity/x", -1, "#/body/layers/3/conductivity/x", "The conductivity along x is -1 W/(m K)"),
    wrong("another ratio of y to x", "body/layers/3/conductivity/y", 300, "#/body/layers/3/conductivity", "that ratio has to be the same in all layers"),
    wrong("contact below the stack", "body/layers/0/contact_conductance_below", 5, "#/body/layers/0/contact_conductance_below", "The first layer has nothing below it"),
    wrong("contact that conducts nothing", "body/layers/1/contact_conductance_below", 0, "#/body/layers/1/contact_conductance_below", "it has to be greater than zero"),
    wrong("contact as a resistance", "body/layers/1/contact_conductance_below", "3 m^2 K/W", "#/body/layers/1/contact_conductance_below", "measures one over a film coefficient; write 0.333333333333 W/(m^2 K) instead."),
    wrong("conductance as a contact resistance", "body/layers/2/contact_resistance_below", "2 kW/(m^2 K)", "#/body/layers/2/contact_resistance_below", "measures one over a resistance times area; write 0.0005 m^2 K/W instead."),
    wrong("negative contact resistance", "body/layers/2/contact_resistance_below", -1, "#/body/layers/2/contact_resistance_below", "The contact resistance is -1; it must not be negative."),
    wrong("contact told twice", "body/layers/1/contact_resistance_below", 1, "#/body/layers/1/contact_resistance_below", "not both."),
    wrong("contact resistance below the stack", "body/layers/0/contact_resistance_below", 5, "#/body/layers/0/contact_resistance_below", "The first layer has nothing below it"),
    wrong("generation of a flow", "body/layers/1/generation", "3 W", "#/body/layers/1/generation", "does not measure"),
    wrong("two layers of one name", "body/layers/2/name", "base", "#/body/layers/2/name", "Another layer has the same name."),
    wrong("one coefficient beside unlike layers", "faces/x_low", FILM, "#/faces/x_low/coefficient", "give a list with one coefficient beside each layer"),
    wrong("too few coefficients", "faces/x_low", FILM | {"coefficient": [1, 2]}, "#/faces/x_low/coefficient", "There are 2 coefficients; one is wanted beside each of the 4 layers."),
    wrong("coefficients out of proportion", "faces/x_low", FILM | {"coefficient": [390, 57, 25, 390]}, "#/faces/x_low/coefficient/2", "it is 24 W/(m^2 K)."),
    wrong("coefficients on top", "faces/z_high", FILM | {"coefficient": [390, 57]}, "#/faces/z_high/coefficient", "A list of coefficients is for the sides of a stack"),
    asked("interface of other layers", {"interfaces": [{"interface": "base/track", "at": [[1, 1]]}]}, "#/evaluate/interfaces/0/interface", 'the stack has 1 ("base/solder"), 2 ("solder/ceramic"), 3 ("ceramic/track").'),
    asked("interface below the stack", {"interfaces": [{"interface": 0, "at": [[1, 1]]}]}, "#/evaluate/interfaces/0/interface", "There is no such interface"),
    asked("interface by truth", {"interfaces": [{"interface": True, "at": [[1, 1]]}]}, "#/evaluate/interfaces/0/interface", "The number of an interface"),
    asked("place beside an interface", {"interfaces": [{"interface": 1, "at": [[31, 1]]}]}, "#/evaluate/interfaces/0/at/0/0", "x = 31 mm lies outside the body"),
    asked("place of three coordinates", {"interfaces": [{"interface": 1, "at": [[1, 1, 1]]}]}, "#/evaluate/interfaces/0/at/0", "At most 2 entries"),
    asked("side of no interface", {"points": [{"at": [1, 1, 1], "side": "above"}]}, "#/evaluate/points/0/side", "None of the places lies on an interface"),
    asked("grid through a layer that is not there", {"grids": [{"x": 1, "y": 1, "z": {"layer": "glue", "count": 3}}]}, "#/evaluate/grids/0/z/layer", "There is no such layer; the body has the layers 0 to 3."),
    asked("layer by truth", {"grids": [{"x": 1, "y": 1, "z": {"layer": True, "count": 3}}]}, "#/evaluate/grids/0/z/layer", "The number of a layer"),
    asked("side of places through a layer", {"grids": [{"x": 1, "y": 1, "z": {"layer": 1, "count": 3}, "side": "above"}]}, "#/evaluate/grids/0/side", "leave `side` out"),
    asked("unknown side", {"points": [{"at": [1, 1, 3], "side": "left"}]}, "#/evaluate/points/0/side", 'One of "below" or "above" is wanted here.'),
    wrong("box above the stack", "sources", [{"z": [0, 5], "density": 1}], "#/sources/0/z", "Source 0 reaches from 0 to 5 along z"),
]  # fmt: skip


@pytest.mark.parametrize("wrong", TABLE, ids=lambda wrong: wrong.name)
async def test_wrong_stack_is_answered_with_one_clear_sentence(client: httpx.AsyncClient, wrong: Wrong) -> None:
    await check_wrong(client, wrong)


async def test_interface_of_a_body_of_one_piece_is_none(client: httpx.AsyncClient) -> None:
    content = {"problem": ONE_LAYER, "evaluate": {"interfaces": [{"interface": 1, "at": [[1, 1]]}]}}
    await check_wrong(
        client,
        Wrong("", "/v1/fields", json.dumps(content).encode(), 422, "#/evaluate/interfaces/0/interface", "one piece"),
    )
