"""Best values over HTTP against closed forms and symmetric placings, and what is refused."""

from __future__ import annotations

import httpx
import pytest

from service.models.best_values_answer import BestValuesAnswer
from service.settings import Settings
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import Json, changed, slab

pytestmark = pytest.mark.anyio

PATCHES = "/problem/faces/z_high/inflow/patches"
INSULATED: Json = {"condition": "insulated"}


async def best(client: httpx.AsyncClient, question: Json, *warned: str) -> Json:
    """The answer to a question about best values. warned: codes of its warnings, one of a local search if left out."""
    answer = await client.post("/v1/best-values", json=question)
    assert answer.status_code == 200, answer.text
    BestValuesAnswer.model_validate(answer.json())
    assert [warning["code"] for warning in answer.json()["warnings"]] == list(warned or ("local-search",))
    found: Json = answer.json()["best_values"]
    return found


def wall() -> Json:
    """The least heat through a wall whose surface may not be too warm: how thick, and how well cooled."""
    problem = slab(20, 800)
    problem["body"]["conductivity"] = "0.5 W/(m K)"
    problem["faces"]["z_low"] = {"condition": "film", "coefficient": 25, "ambient": 25}
    return {
        "problem": problem,
        "results": [
            {"name": "surface", "result": "mean", "face": "z_low"},
            {"name": "loss", "result": "flux", "at": ["middle", "middle", "middle"], "along": "z"},
        ],
        "numbers": [
            {"name": "thickness", "at": "/problem/body/size/z", "low": 10, "high": "60 cm"},
            {"name": "film", "at": "/problem/faces/z_low/coefficient", "low": 5, "high": 50},
        ],
        "goal": {"maximise": ["loss"]},
        "limits": [{"name": "touch", "result": "surface", "at_most": 60}],
    }


def strip(*starts: float) -> Json:
    """Pads of 4 mm across a strip of 40 mm that is cooled from below, which may be moved along it."""
    pads = [
        {"name": f"pad {index}", "x": [start, start + 4], "y": [0, 5], "flow": 1} for index, start in enumerate(starts)
    ]
    return {
        "problem": {
            "potential": "temperature",
            "units": {"length": "mm"},
            "body": {"size": {"x": 40, "y": 5, "z": 2}, "conductivity": 20},
            "faces": dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), INSULATED)
            | {
                "z_low": {"condition": "film", "coefficient": 500, "ambient": 20},
                "z_high": {"condition": "flux", "inflow": {"map": "patches", "background": 0, "patches": pads}},
            },
        },
        "results": [{"name": f"pad {i}", "result": "mean", "face": "z_high", "patch": i} for i in range(len(pads))],
        "numbers": [
            {
                "name": f"pad {index}",
                "shift": [f"{PATCHES}/{index}/x/0", f"{PATCHES}/{index}/x/1"],
                "low": -start,
                "high": 36 - start,
            }
            for index, start in enumerate(starts)
        ],
        "goal": {"minimise": [f"pad {index}" for index in range(len(pads))]},
        "apart": [{"rectangles": [f"{PATCHES}/{index}" for index in range(len(pads))], "gap": 1}],
    }


async def test_least_heat_through_a_wall_with_a_limit(client: httpx.AsyncClient) -> None:
    found = await best(client, wall())
    case = found["best"]
    # As thick as can be; the film as weak as the limit lets it: h (60 - 25) = k (800 - 60) / d.
    film = 0.5 * 740 / 0.6 / 35
    assert [number["value"] for number in case["numbers"]] == pytest.approx([600, film], rel=1e-6)
    assert [number["at_end"] for number in case["numbers"]] == ["high", None]
    assert case["goal"]["value"] == pytest.approx(-35 * film, rel=1e-6)
    assert abs(case["goal"]["value"] + 35 * film) <= case["goal"]["search_error_estimate"] + 35 * film * 1e-7
    assert case["goal"]["as_it_stands"] == pytest.approx(-775 / (1 / 25 + 0.025 / 0.5))
    assert case["goal"]["improvement"] == pytest.approx(case["goal"]["value"] - case["goal"]["as_it_stands"])
    (limit,) = case["limits"]
    assert (limit["name"], limit["held"], limit["binds"], case["all_held"]) == ("touch", "yes", True, "yes")
    assert limit["error_bound"] <= limit["margin"] < 1e-4
    assert [result["name"] for result in case["results"]] == ["surface", "loss"]
    assert found["complete"]
    assert found["same_goal_count"] == len(found["searches"]) == 4


async def test_two_pads_take_half_of_a_strip_each(client: httpx.AsyncClient) -> None:
    # Mirrored in the middle each pad has one half to itself, with the same half mirrored beyond the end.
    found = await best(client, strip(2, 12) | {"starts": 1})
    case = found["best"]
    middles = sorted(4 - shift + number["value"] for shift, number in zip((0, -10), case["numbers"], strict=True))
    assert middles == pytest.approx([10, 30], abs=0.02)
    assert case["goal"]["leading"] == ["pad 0", "pad 1"]
    assert case["apart"] == [
        {
            "least_distance": pytest.approx(16, abs=0.04),
            "gap": 1,
            "beyond_gap": pytest.approx(15, abs=0.04),
            "between": [0, 1],
        }
    ]


async def test_pads_that_both_want_one_place_stop_at_the_gap(client: httpx.AsyncClient) -> None:
    question = strip(8, 20)
    question["problem"]["faces"]["x_low"] = {"condition": "held", "value": 20}
    question["problem"]["faces"]["z_low"] = INSULATED
    case = (await best(client, question | {"starts": 1}))["best"]
    ends = sorted([8 + case["numbers"][0]["value"], 20 + case["numbers"][1]["value"]])
    # One at the cooled side, the other 1 mm behind it.
    assert ends == pytest.approx([0, 5], abs=1e-3)
    assert 0 <= case["apart"][0]["beyond_gap"] < 1e-3


async def test_a_search_stops_at_the_cases_it_may_have(client: httpx.AsyncClient) -> None:
    found = await best(client, strip(2, 12) | {"most_cases": 30}, "local-search", "cases-used-up")
    assert not found["complete"]
    assert found["case_count"] <= 30
    assert {search["ended"] for search in found["searches"]} == {"cases used up"}


async def test_rectangles_without_room_have_no_best_values(client: httpx.AsyncClient) -> None:
    question = strip(2, 12)
    question["apart"][0]["gap"] = 39
    found = await best(client, question, "no-best-values")
    assert (found["best"], found["case_count"]) == (None, 0)
    assert found["reason"].startswith("No place was found at which all rectangles")


async def test_cases_without_a_body_are_named(client: httpx.AsyncClient) -> None:
    question = strip(2, 12) | {"apart": []}
    for number in question["numbers"]:
        number["low"], number["high"] = 40, 60
    found = await best(client, question, "no-best-values")
    assert found["best"] is None
    assert found["reason"].startswith("Every case failed")
    assert found["failed_count"] == found["case_count"] > 0
    assert len(found["failures"]) == 1
    assert "/problem/faces/z_high/inflow" in found["failures"][0]["message"]
    assert 'Patch 0 ("pad 0") reaches' in found["failures"][0]["message"]


async def test_limits_that_exclude_each_other_are_named_and_nothing_is_called_better(client: httpx.AsyncClient) -> None:
    question = wall()
    question["limits"].append({"result": "loss", "at_least": 0})
    found = await best(client, question, "limits-missed")
    case = found["best"]
    assert (case["all_held"], case["goal"]["improvement"]) == ("no", None)
    assert [limit["holds_elsewhere"] for limit in case["limits"]] == [True, False]
    answer = (await client.post("/v1/best-values", json=question)).json()
    assert 'In no case was limit 1 on "loss" found to hold.' in answer["warnings"][0]["message"]
    question["limits"] = [{"name": "warm", "result": "surface", "at_least": 70}, *question["limits"][:1]]
    answer = (await client.post("/v1/best-values", json=question)).json()
    assert [limit["margin"] for limit in answer["best_values"]["best"]["limits"]] == pytest.approx([-5, -5], abs=1e-2)
    assert 'Each of "warm" and "touch" holds in some case' in answer["warnings"][0]["message"]


async def test_a_goal_that_does_not_change_is_told(client: httpx.AsyncClient) -> None:
    question = wall()
    question["results"] = [{"name": "behind", "result": "mean", "face": "z_high"}]
    question |= {"goal": {"minimise": ["behind"]}, "limits": []}
    await best(client, question, "local-search", "no-influence")


@pytest.mark.parametrize(
    ("path", "value", "pointer", "sentence"),
    [
        ("goal", {"minimise": ["pad 7"]}, "#/goal/minimise/0", 'There is no result "pad 7"'),
        ("goal", {}, "#/goal", "Give `minimise` or `maximise`, one of them."),
        ("goal", {"minimise": ["pad 0", "heat"]}, "#/goal/minimise/1", "compare results of one unit"),
        ("numbers/1/high", -20, "#/numbers/1/high", "`high` has to be greater than `low`."),
        ("numbers/1/shift/0", f"{PATCHES}/5/x/0", "#/numbers/1/shift/0", 'There is no "5" in'),
        ("limits", [{"result": "pad 0", "at_most": "3 m"}], "#/limits/0/at_most", "m"),
        ("apart/0/gap", -1, "#/apart/0/gap", "must not be negative"),
        ("apart/0/gap", "1 K", "#/apart/0/gap", "K"),
        ("apart/0/rectangles/1", f"{PATCHES}/9", "#/apart/0/rectangles/1", 'There is no "9" in'),
        ("apart/0/rectangles/1", f"{PATCHES}/0", "#/apart/0/rectangles/1", "cannot keep apart from itself"),
        ("apart/0/rectangles/1", "/problem/body", "#/apart/0/rectangles/1", "has no from and to along any axis"),
        ("apart/0/rectangles/1", "/problem/sources/0", "#/apart/0/rectangles/1", "along the same axes as the others"),
        ("problem/faces/z_high/inflow/patches/1/y/1", "end", "#/apart/0/rectangles/1", 'Write "end" as a length'),
        ("most_cases", 0, "#/most_cases", "at least 1"),
    ],
)
async def test_wrong_questions_are_pointed_at(
    client: httpx.AsyncClient, path: str, value: object, pointer: str, sentence: str
) -> None:
    question = strip(2, 12)
    question["problem"]["sources"] = [{"x": [0, 1], "density": 1}]
    question["results"].append({"name": "heat", "result": "inflow", "face": "z_high"})
    question["limits"] = []
    document = check_problem_document(await client.post("/v1/best-values", json=changed(question, path, value)), 422)
    assert pointers(document) == [pointer]
    assert sentence in document["errors"][0]["detail"]


async def test_too_many_cases_are_sent_to_a_study(settings: Settings) -> None:
    async with open_client(settings.model_copy(update={"cases": 999})) as client:
        document = check_problem_document(await client.post("/v1/best-values", json=strip(2, 12)), 422)
        assert "send it as a study" in document["detail"]
