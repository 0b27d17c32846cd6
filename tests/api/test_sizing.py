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
    """The answer to a question about sizing."""
    answer = await client.post("/v1/sizing", json={"problem": problem, "results": results} | more)
    assert answer.status_code == 200, answer.text
    SizingAnswer.model_validate(answer.json())
    found: Json = answer.json()["sizing"]
    return found


def wall() -> Json:
    """A wall that is hot behind and gives off heat through a film in front."""
    problem = slab(20, 800)
    problem["body"]["conductivity"] = "1.2 W/(m K)"
    problem["faces"]["z_low"] = {"condition": "film", "coefficient": "9 W/(m^2 K)", "ambient": 25}
    return problem


THICKNESS: Json = {"name": "thickness", "at": "/problem/body/size/z", "low": "1 cm", "high": "5 m"}


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


async def test_too_many_cases_are_sent_to_a_study(settings: Settings) -> None:
    question = {"problem": wall(), "results": [SURFACE], "number": THICKNESS | {"count": 200}}
    question |= {"limits": [{"result": "surface", "at_most": 60}]}
    async with open_client(settings.model_copy(update={"cases": 150})) as client:
        document = check_problem_document(await client.post("/v1/sizing", json=question), 422)
        assert "send it as a study" in document["detail"]
