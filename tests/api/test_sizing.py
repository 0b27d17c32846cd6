"""Sizing over HTTP against walls and bars with closed forms, and what is refused."""

from __future__ import annotations

import math

import httpx
import pytest

from service.models.sizing_answer import SizingAnswer
from service.settings import Settings
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import Json, block, sight_port_bar, slab

pytestmark = pytest.mark.anyio

SURFACE = {"name": "surface", "result": "mean", "face": "z_low"}
MIDDLE = {"name": "middle", "result": "potential", "at": ["middle", "middle", "middle"]}
HELD: Json = {"condition": "held", "value": 0}


async def sized(client: httpx.AsyncClient, problem: Json, results: list[Json], **more: object) -> Json:
    """What is found for a question about sizing."""
    found, _ = await sized_with_remarks(client, problem, results, **more)
    return found


async def sized_with_remarks(
    client: httpx.AsyncClient, problem: Json, results: list[Json], **more: object
) -> tuple[Json, dict[str, str]]:
    """What is found for a question about sizing, and its warnings by their codes."""
    answer = await client.post("/v1/sizing", json={"problem": problem, "results": results} | more)
    assert answer.status_code == 200, answer.text
    SizingAnswer.model_validate(answer.json())
    found: Json = answer.json()["sizing"]
    remarks = {warning["code"]: warning["message"] for warning in answer.json()["warnings"]}
    assert "looked-at-places" in remarks
    return found, remarks


def wall() -> Json:
    """A wall that is hot behind and gives off heat through a film in front."""
    problem = slab(20, 800)
    problem["body"]["conductivity"] = "1.2 W/(m K)"
    problem["faces"]["z_low"] = {"condition": "film", "coefficient": "9 W/(m^2 K)", "ambient": 25}
    return problem


THICKNESS: Json = {"name": "thickness", "at": "/problem/body/size/z", "low": "1 cm", "high": "5 m"}


FILM: Json = {"name": "film", "at": "/problem/faces/z_low/coefficient"}
FIVE: list[Json] = [
    {"name": "film", "at": "/problem/faces/z_low/coefficient", "plus_minus": 1},
    {"name": "ambient", "at": "/problem/faces/z_low/ambient", "plus_minus": 1},
    {"name": "behind", "at": "/problem/faces/z_high/value", "plus_minus": 1},
    {"name": "conductivity", "at": "/problem/body/conductivity", "relative": 0.1},
    {"name": "width", "at": "/problem/body/size/x", "plus_minus": 1},
]


def check_edge(edge: Json, expected: float, within: float = 1e-6, kind: str = "limit") -> None:
    """Fail unless an edge is where it should be to its bound, and that bound is worth having."""
    assert edge["kind"] == kind
    assert abs(edge["value"] - expected) <= edge["error_bound"] < within * abs(expected)


async def test_thickness_of_a_wall_for_a_surface_temperature(client: httpx.AsyncClient) -> None:
    limits = [{"result": "surface", "at_most": "60 degC"}]
    found = await sized(client, wall(), [SURFACE], number=THICKNESS, limits=limits, sizes=[2500, "3 m"])
    # 1 / (1 + h d / k) of 775 K is left.
    expected = 1000 * 1.2 / 9 * (775 / 35 - 1)
    assert found["number"] == {"name": "thickness", "unit": "mm", "low": 10, "high": 5000, "as_it_stands": 25}
    assert found["holds"] == "somewhere"
    (interval,) = found["intervals"]
    check_edge(interval["low"], expected)
    assert (interval["low"]["limit"], interval["low"]["result"]) == (0, "surface")
    assert abs(interval["low"]["slope"] + 775 * 0.0075 / (775 / 35) ** 2) <= interval["low"]["slope_error_estimate"]
    assert interval["low"]["slope_error_estimate"] < 1e-4
    assert (interval["high"]["kind"], interval["high"]["value"]) == ("range", 5000)
    assert [(size["value"], size["held"]) for size in found["sizes"]["each"]] == [(2500, "no"), (3000, "yes")]
    assert (found["sizes"]["least"], found["sizes"]["greatest"]) == (3000, 3000)
    assert found["case_count"] < 60


async def test_film_coefficient_over_decades_for_a_value(client: httpx.AsyncClient) -> None:
    problem = wall()
    problem["body"]["size"]["z"] = 300
    film = {"name": "film", "at": "/problem/faces/z_low/coefficient", "low": 0.1, "high": "1e5 W/(m^2 K)"}
    target = {"result": "surface", "equals": "333.15 K"}
    found = await sized(client, problem, [SURFACE], number=film | {"spread": "logarithmic"}, target=target)
    (solution,) = found["solutions"]
    # h (60 - 25) = k (800 - 60) / d
    check_edge(solution, 1.2 * 740 / 0.3 / 35, kind="target")
    assert found["spacing"] is None
    assert found["spacing_ratio"] == pytest.approx(1e6 ** (1 / 32))
    assert (found["holds"], found["intervals"], found["sizes"], solution["limit"]) == (None, [], None, None)


async def test_thickness_of_a_wall_that_generates(client: httpx.AsyncClient) -> None:
    # Both faces held: g d^2 / (8 k) above them in the middle.
    problem = slab(0, 0)
    problem["body"]["conductivity"] = 0.4
    problem["sources"] = [{"density": "2 MW/m^3"}]
    number = {"name": "thickness", "at": "/problem/body/size/z", "low": 0.1, "high": 100, "spread": "logarithmic"}
    found = await sized(client, problem, [MIDDLE], number=number, limits=[{"result": "middle", "at_most": 30}])
    (interval,) = found["intervals"]
    check_edge(interval["high"], 1000 * math.sqrt(30 * 8 * 0.4 / 2e6))


async def test_a_probe_is_moved_to_where_a_square_bar_has_decayed(client: httpx.AsyncClient) -> None:
    # The first mode of a bar with held sides falls by a factor e over a / (pi sqrt 2).
    end: Json = {"condition": "held", "value": {"map": "formula", "expression": "sin(pi*x/40)*sin(pi*y/40)"}}
    problem = block()
    problem["body"] = {"size": {"x": 40, "y": 40, "z": "semi-infinite"}, "conductivity": 95}
    problem["faces"] = dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), HELD) | {"z_low": end}
    probe = {"name": "probe", "result": "potential", "at": [20, 20, 1]}
    number = {"name": "depth", "at": "/results/0/at/2", "low": 0.5, "high": 40}
    found = await sized(client, problem, [probe], number=number, target={"result": "probe", "equals": math.exp(-1)})
    (solution,) = found["solutions"]
    check_edge(solution, 40 / (math.pi * math.sqrt(2)), within=1e-5, kind="target")


async def test_where_limits_hold_nowhere_the_nearest_is_told(client: httpx.AsyncClient) -> None:
    limits = [{"result": "surface", "at_least": 10}, {"result": "surface", "at_most": 40}]
    found = await sized(client, wall(), [SURFACE], number=THICKNESS, limits=limits)
    assert (found["holds"], found["intervals"]) == ("nowhere", [])
    assert (found["nearest"]["value"], found["nearest"]["limit"]) == (5000, 1)
    assert found["spacing"] == pytest.approx(4990 / 32)
    assert abs(found["nearest"]["margin"] - (15 - 775 / 38.5)) <= found["nearest"]["error_bound"]


async def test_a_part_of_the_range_without_a_body_is_named(client: httpx.AsyncClient) -> None:
    # The window reaches to 35 mm: a narrower bar has no place for it.
    probe = {"name": "probe", "result": "potential", "at": ["middle", 30, 10]}
    number = {"name": "width", "at": "/problem/body/size/x", "low": 20, "high": 60}
    found = await sized(client, sight_port_bar(), [probe], number=number, limits=[{"result": "probe", "at_least": 100}])
    (invalid,) = found["invalid"]
    assert invalid["low"] == 20
    assert 0 <= 35 - invalid["high"] <= invalid["error_bound"] < 1e-4
    assert "patch" in invalid["message"]
    (interval,) = found["intervals"]
    assert interval["low"]["kind"] == "invalid"
    assert interval["low"]["value"] == pytest.approx(35, abs=1e-4)


async def test_limits_hold_all_over_a_tolerance_zone(client: httpx.AsyncClient) -> None:
    more: Json = {
        "number": THICKNESS | {"plus": "5 mm", "minus": 20, "low": 2000, "count": 5},
        "tolerances": [
            {"name": "conductivity", "at": "/problem/body/conductivity", "relative": 0.1},
            {"name": "film", "at": "/problem/faces/z_low/coefficient", "plus_minus": "1 W/(m^2 K)"},
        ],
        "limits": [{"name": "touch", "result": "surface", "at_most": 60}],
        "sizes": ["3.5 m", "4 m"],
    }
    found, remarks = await sized_with_remarks(client, wall(), [SURFACE], **more)
    (interval,) = found["intervals"]
    # The wall thin, its conductivity high, the film weak.
    expected = 20 + 1000 * 1.32 / 8 * (775 / 35 - 1)
    check_edge(interval["low"], expected)
    assert interval["low"]["name"] == "touch"
    corner = interval["low"]["corner"]
    assert [number["number"] for number in corner] == ["thickness", "conductivity", "film"]
    assert [number["unit"] for number in corner] == ["mm", "W/(m K)", "W/(m^2 K)"]
    assert [number["value"] for number in corner] == pytest.approx([expected - 20, 1.32, 8])
    assert "corner" not in interval["high"]
    assert [size["held"] for size in found["sizes"]["each"]] == ["no", "yes"]
    assert found["sizes"]["each"][0]["corner"][0]["value"] == 3480
    assert found["tolerances"][0] == {"number": "thickness", "unit": "mm", "nominal": None, "plus": 5, "minus": 20}
    assert found["tolerances"][1]["plus"] == pytest.approx(0.12)
    # The nominal case, 6 ends alone and 8 corners.
    assert found["case_count"] % 15 == 0
    assert "15 cases" in remarks["corners-only"]


async def test_a_corner_without_a_body_makes_a_place_invalid_and_is_named(client: httpx.AsyncClient) -> None:
    film = {"name": "film", "at": "/problem/faces/z_low/coefficient", "plus_minus": 1}
    number = THICKNESS | {"low": 1, "high": 5000, "plus_minus": 10, "count": 5}
    limits = [{"result": "surface", "at_most": 60}]
    found = await sized(client, wall(), [SURFACE], number=number, tolerances=[film], limits=limits)
    (invalid,) = found["invalid"]
    assert invalid["high"] == pytest.approx(10, abs=2e-4)
    assert invalid["message"].startswith("With thickness = ")
    assert "film = 9" in invalid["message"]


async def test_limits_that_exclude_each_other_are_named(client: httpx.AsyncClient) -> None:
    limits = [
        {"name": "cool", "result": "surface", "at_most": 50},
        {"name": "warm", "result": "surface", "at_least": 60},
    ]
    found, remarks = await sized_with_remarks(client, wall(), [SURFACE], number=THICKNESS, limits=limits)
    assert found["holds"] == "nowhere"
    # 1 / (1 + h d / k) of 775 K above 25 is 55.
    assert found["nearest"]["value"] == pytest.approx(1000 * 1.2 / 9 * (775 / 30 - 1), rel=1e-6)
    assert {limit["name"] for limit in found["nearest"]["missed"]} == {"cool", "warm"}
    assert all(limit["holds_elsewhere"] for limit in found["nearest"]["missed"])
    assert "They exclude each other" in remarks["nowhere"]
    assert "is missed by 5 K" in remarks["nowhere"]


async def test_a_number_without_influence_is_told_and_stays_as_it_is(client: httpx.AsyncClient) -> None:
    number = {"name": "width", "at": "/problem/body/size/x", "low": 33, "high": 250}
    limits = [{"result": "surface", "at_most": 60}]
    found, remarks = await sized_with_remarks(client, wall(), [SURFACE], number=number, limits=limits)
    stands = found["number"]["as_it_stands"]
    assert abs(found["nearest"]["value"] - stands) <= found["spacing"]
    assert '"width" has no influence on "surface"' in remarks["no-influence"]
    assert 'Nowhere in the range was limit 0 on "surface" found to hold.' in remarks["nowhere"]
    assert found["case_count"] <= 40
    target = {"result": "surface", "equals": found["nearest"]["margin"] * -1 + 60}
    _, remarks = await sized_with_remarks(client, wall(), [SURFACE], number=number, target=target)
    assert "no-influence" in remarks


async def test_a_value_that_is_not_reached_and_sizes_that_do_not_do_are_told(client: httpx.AsyncClient) -> None:
    target = {"result": "surface", "equals": 40}
    found, remarks = await sized_with_remarks(client, wall(), [SURFACE], number=THICKNESS, target=target)
    assert (found["solutions"], found["nearest"]["value"], found["nearest"]["missed"]) == ([], 5000, [])
    assert "comes nearest at thickness = 5000 mm" in remarks["nowhere"]
    more: Json = {"number": THICKNESS, "limits": [{"result": "surface", "at_most": 60}], "sizes": [100]}
    _, remarks = await sized_with_remarks(client, wall(), [SURFACE], **more)
    assert "no-size-holds" in remarks


async def test_a_hot_spot_narrower_than_the_places_is_found(client: httpx.AsyncClient) -> None:
    # A heater that moves past a probe on a thin plate: felt 1 mm around it only, looked at every 6 mm.
    insulated: Json = {"condition": "insulated"}
    heater = {"name": "heater", "x": [0, 1], "y": [0, 30], "flow": 100}
    problem: Json = {
        "potential": "temperature",
        "units": {"length": "mm"},
        "body": {"size": {"x": 200, "y": 30, "z": 1}, "conductivity": 5},
        "faces": dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), insulated)
        | {
            "z_high": {"condition": "film", "coefficient": 20000, "ambient": 30},
            "z_low": {"condition": "flux", "inflow": {"map": "patches", "background": 0, "patches": [heater]}},
        },
    }
    ends = [f"/problem/faces/z_low/inflow/patches/0/x/{end}" for end in (0, 1)]
    number = {"name": "place", "shift": ends, "low": 0, "high": 190}
    probe = {"name": "probe", "result": "potential", "at": [104.4, 15, 0]}
    above, below = [
        await sized(client, problem, [probe], number=number, limits=[{"result": "probe", side: 200}])
        for side in ("at_least", "at_most")
    ]
    (interval,) = above["intervals"]
    # The heater is felt alike on both sides.
    assert (interval["low"]["value"] + interval["high"]["value"]) / 2 == pytest.approx(103.9, abs=1e-6)
    assert interval["high"]["value"] - interval["low"]["value"] < above["spacing"] / 3
    assert below["holds"] == "somewhere"
    assert [each["low"]["kind"] for each in below["intervals"]] == ["range", "limit"]
    assert below["intervals"][0]["high"]["value"] == pytest.approx(interval["low"]["value"], abs=1e-6)
    # A range in which the heater runs off the plate: the sentence names it.
    far = await sized(
        client, problem, [probe], number=number | {"high": 260}, limits=[{"result": "probe", "at_most": 9}]
    )
    assert 'Patch 0 ("heater") reaches' in far["invalid"][0]["message"]


async def test_no_more_cases_than_allowed(client: httpx.AsyncClient) -> None:
    more: Json = {"number": THICKNESS, "limits": [{"result": "surface", "at_most": 60}], "most_cases": 36}
    found, remarks = await sized_with_remarks(client, wall(), [SURFACE], **more)
    assert found["case_count"] <= 36
    assert not found["complete"]
    assert "cases-used-up" in remarks
    edge = found["intervals"][0]["low"]
    assert abs(edge["value"] - 1000 * 1.2 / 9 * (775 / 35 - 1)) <= edge["error_bound"]


@pytest.mark.parametrize(
    ("change", "pointer", "sentence"),
    [
        ({"number": THICKNESS | {"at": "/problem/body/size/q"}}, "#/number/at", 'There is no "q" in'),
        ({"number": THICKNESS | {"low": "6 m"}}, "#/number/high", "`high` has to be greater than `low`."),
        ({"number": THICKNESS | {"low": "6 kg"}}, "#/number/low", "kg"),
        ({"number": THICKNESS | {"low": 0, "spread": "logarithmic"}}, "#/number/low", "ends above zero"),
        ({"number": THICKNESS | {"count": 2}}, "#/number/count", "at least 5"),
        ({"limits": [{"result": "hotspot", "at_most": 1}]}, "#/limits/0/result", 'There is no result "hotspot"'),
        ({"limits": [{"result": "surface", "at_most": "1 m"}]}, "#/limits/0/at_most", "m"),
        ({"limits": []}, "#", "Give `limits` or `target`, one of them."),
        ({"target": {"result": "surface", "equals": 60}}, "#", "Give `limits` or `target`, one of them."),
        ({"sizes": [100, "2 s"]}, "#/sizes/1", "s"),
        ({"most_cases": 20}, "#/most_cases", "take 33 cases"),
        ({"tolerances": [FILM]}, "#/tolerances/0", "Give the tolerance by"),
        ({"tolerances": [FILM | {"plus_minus": 1, "relative": 0.1}]}, "#/tolerances/0", "one of them"),
        ({"tolerances": [FILM | {"plus_minus": -1}]}, "#/tolerances/0/plus_minus", "must not be negative"),
        ({"tolerances": [FILM | {"plus_minus": "1 K"}]}, "#/tolerances/0/plus_minus", "K"),
        ({"tolerances": [FILM | {"at": THICKNESS["at"], "plus": 1}]}, "#/tolerances/0/at", "give its own tolerance"),
        ({"tolerances": [FILM | {"name": "thickness", "plus": 1}]}, "#/tolerances/0/name", "has this name already"),
        ({"tolerances": FIVE, "number": THICKNESS | {"plus_minus": 1}}, "#/tolerances", "At most 5 tolerances"),
        ({"tolerances": FIVE, "most_cases": 1000}, "#/most_cases", "take 1419 cases"),
        ({"number": THICKNESS | {"plus_minus": 1, "plus": 2}}, "#/number", "Give `plus_minus`, or `plus` and `minus`."),
    ],
)
async def test_wrong_questions_are_pointed_at(
    client: httpx.AsyncClient, change: Json, pointer: str, sentence: str
) -> None:
    question = {"problem": wall(), "results": [SURFACE], "number": THICKNESS}
    question |= {"limits": [{"result": "surface", "at_most": 60}]} | change
    document = check_problem_document(await client.post("/v1/sizing", json=question), 422)
    assert pointers(document) == [pointer]
    assert sentence in document["errors"][0]["detail"]


async def test_a_value_to_be_met_has_no_sizes(client: httpx.AsyncClient) -> None:
    question = {"problem": wall(), "results": [SURFACE], "number": THICKNESS, "sizes": [100]}
    question |= {"target": {"result": "surface", "equals": 60}}
    document = check_problem_document(await client.post("/v1/sizing", json=question), 422)
    assert "`sizes` are held against limits" in document["errors"][0]["detail"]
    question = question | {"sizes": [], "number": THICKNESS | {"plus_minus": 1}}
    document = check_problem_document(await client.post("/v1/sizing", json=question), 422)
    assert "a value cannot" in document["errors"][0]["detail"]


async def test_too_many_cases_are_sent_to_a_study(settings: Settings) -> None:
    question = {"problem": wall(), "results": [SURFACE], "number": THICKNESS | {"count": 200}}
    question |= {"limits": [{"result": "surface", "at_most": 60}]}
    async with open_client(settings.model_copy(update={"cases": 150})) as client:
        document = check_problem_document(await client.post("/v1/sizing", json=question), 422)
        assert "send it as a study" in document["detail"]
