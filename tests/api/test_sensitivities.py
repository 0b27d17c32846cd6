"""Derivatives over HTTP, against closed forms and against differences of twenty-digit values."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import httpx
import mpmath
import pytest

from service.models.sensitivities_answer import SensitivitiesAnswer
from service.settings import Settings
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import Json, block, changed, slab
from tests.core.reference.cases import Case, Cells, Wall, walls
from tests.core.reference.high_precision import HighPrecision

pytestmark = pytest.mark.anyio

INSULATED = {"condition": "insulated"}

# What is promised wherever the values allow it.
PROMISED = 1e-6


async def sensitivities(client: httpx.AsyncClient, problem: Json, results: list[Json], numbers: list[Json]) -> Json:
    """The answer to a question about derivatives."""
    question = {"problem": problem, "results": results, "numbers": numbers}
    answer = await client.post("/v1/sensitivities", json=question)
    assert answer.status_code == 200, answer.text
    SensitivitiesAnswer.model_validate(answer.json())
    found: Json = answer.json()
    return found


def check(answer: Json, expected: dict[tuple[str, str], float], promised: float = PROMISED) -> None:
    """Each derivative is off by no more than it says, which is a part in a million or nothing beside the values."""
    derivatives = {(entry["result"], entry["number"]): entry for entry in answer["derivatives"]}
    assert set(derivatives) == set(expected)
    for pair, exact in expected.items():
        entry = derivatives[pair]
        assert abs(entry["derivative"] - exact) <= entry["error_estimate"], (pair, entry, exact)
        if exact != 0:
            assert entry["error_estimate"] <= promised * abs(exact), (pair, entry, exact)


# --- a plane wall ---

THICKNESS, K, H, AMBIENT, HOT = 0.025, 130.0, 850.0, 24.0, 80.0


def wall() -> Json:
    """A wall of 25 mm: held at 80 degC in front, a film behind."""
    film = {"condition": "film", "coefficient": "850 W/(m^2 K)", "ambient": 24}
    problem = slab(HOT, 0)
    problem["faces"]["z_high"] = film
    return problem


def film_side(thickness: Any, k: Any, h: Any, ambient: Any, hot: Any) -> Any:
    """Level of the side behind a film: what is left of the excess is Bi = h L / k to one."""
    return ambient + (hot - ambient) / (1 + h * thickness / k)


def flux_through(thickness: Any, k: Any, h: Any, ambient: Any, hot: Any) -> Any:
    return (hot - ambient) / (thickness / k + 1 / h)


WALL_NUMBERS: list[Json] = [
    {"name": "thickness", "at": "/problem/body/size/z"},
    {"name": "conductivity", "at": "/problem/body/conductivity/z"},
    {"name": "film", "at": "/problem/faces/z_high/coefficient"},
    {"name": "ambient", "at": "/problem/faces/z_high/ambient"},
    {"name": "hot", "at": "/problem/faces/z_low/value"},
]
WALL_NOMINAL = (THICKNESS, K, H, AMBIENT, HOT)


def gradient(function: Callable[..., Any]) -> list[float]:
    """By differences of 40 digits."""
    with mpmath.workdps(40):
        nominal = tuple(mpmath.mpf(number) for number in WALL_NOMINAL)
        return [
            float(mpmath.diff(function, nominal, tuple(int(other == number) for other in range(5))))
            for number in range(5)
        ]


async def test_plane_wall(client: httpx.AsyncClient) -> None:
    """Level of the cooled side, flux through it and flow into it, by everything; thickness in mm."""
    results: list[Json] = [
        {"name": "cool side", "result": "potential", "at": ["middle", "middle", "high"]},
        {"name": "flux", "result": "flux", "at": ["middle", "middle", 10], "along": "z"},
        {"name": "flow", "result": "flow", "z": 10},
        {"name": "front", "result": "mean", "face": "z_low"},
        {"name": "drop", "result": "difference", "of": "front", "less": "cool side"},
        {"name": "per flow", "result": "ratio", "of": "drop", "over": "flow"},
    ]
    answer = await sensitivities(client, wall(), results, WALL_NUMBERS)
    formulas: dict[str, Callable[..., Any]] = {
        "cool side": film_side,
        "flux": flux_through,
        "flow": lambda *numbers: flux_through(*numbers) * mpmath.mpf("0.0024"),
        "drop": lambda *numbers: numbers[4] - film_side(*numbers),
        "front": lambda *numbers: numbers[4],
        "per flow": lambda thickness, k, *_: thickness / k / mpmath.mpf("0.0024"),
    }
    expected = {}
    for name, formula in formulas.items():
        for number, slope in zip(WALL_NUMBERS, gradient(formula), strict=True):
            expected[name, number["name"]] = slope * (1e-3 if number["name"] == "thickness" else 1)
    check(answer, expected)
    units = {(entry["result"], entry["number"]): entry["unit"] for entry in answer["derivatives"]}
    assert units["cool side", "film"] == "K/(W/(m^2 K))"
    assert units["cool side", "thickness"] == "K/mm"
    assert units["cool side", "ambient"] == "1"
    assert units["flow", "hot"] == "W/K"
    assert units["per flow", "conductivity"] == "(K/W)/(W/(m K))"
    affine = {(entry["result"], entry["number"]) for entry in answer["derivatives"] if entry["affine"]}
    assert {("flux", "ambient"), ("flux", "hot"), ("cool side", "hot"), ("per flow", "thickness")} <= affine
    assert not {("flux", "film"), ("cool side", "thickness"), ("flow", "conductivity")} & affine
    assert answer["case_count"] <= 1 + 10 * len(WALL_NUMBERS)


async def test_per_cent_and_ranks_of_a_wall(client: httpx.AsyncClient) -> None:
    """The flux (hot - ambient) / (L / k + 1 / h): relative to L and k by the part of L / k, to h by that of 1 / h."""
    results: list[Json] = [
        {"name": "flux", "result": "flux", "at": ["middle", "middle", 10], "along": "z"},
        {"name": "cool side", "result": "potential", "at": ["middle", "middle", "high"]},
        {"name": "front", "result": "mean", "face": "z_low"},
    ]
    table = (await sensitivities(client, wall(), results, WALL_NUMBERS))["derivatives"]
    found = {(entry["result"], entry["number"]): entry for entry in table}
    wall_part = (THICKNESS / K) / (THICKNESS / K + 1 / H)
    flux = flux_through(*WALL_NOMINAL)
    for name, part, rank in (("film", 1 - wall_part, 1), ("thickness", -wall_part, 2), ("conductivity", wall_part, 2)):
        entry = found["flux", name]
        assert entry["relative"] == pytest.approx(part, rel=1e-6)
        assert entry["per_cent"] == pytest.approx(part * flux / 100, rel=1e-6)
        assert entry["rank"] in (rank, rank + (rank > 1))
    # Temperatures in degC have no per cent, as numbers and as results; what does nothing has no rank.
    assert (found["flux", "hot"]["per_cent"], found["flux", "hot"]["rank"]) == (None, None)
    assert found["cool side", "film"]["relative"] is None
    slope = found["cool side", "film"]["derivative"]
    assert found["cool side", "film"]["per_cent"] == pytest.approx(slope * H / 100)
    assert found["front", "film"]["rank"] is None


async def test_second_derivative_of_a_wall(client: httpx.AsyncClient) -> None:
    """d^2 q / d h^2 = -2 (hot - ambient) (k / L) / (k / L + h)^3 times k / L."""
    results: list[Json] = [{"name": "flux", "result": "flux", "at": ["middle", "middle", 10], "along": "z"}]
    (entry,) = (await sensitivities(client, wall(), results, WALL_NUMBERS[2:3]))["derivatives"]
    c = K / THICKNESS
    exact = -2 * (HOT - AMBIENT) * c**2 / (c + H) ** 3
    assert abs(entry["second_derivative"] - exact) <= entry["second_error_estimate"] <= 1e-3 * abs(exact)


async def test_radiating_wall(client: httpx.AsyncClient) -> None:
    """k (hot - u) / L = eps sigma (u^4 - a^4), by the implicit function theorem; temperatures in kelvin."""
    problem = changed(wall(), "units/potential", "K")
    problem["faces"]["z_low"]["value"] = 900
    problem["faces"]["z_high"] = {"condition": "film", "coefficient": 0, "ambient": 300, "emissivity": 0.8}
    problem["body"]["conductivity"] = {"x": 2, "y": 2, "z": 2}
    results: list[Json] = [{"name": "cool side", "result": "potential", "at": ["middle", "middle", "high"]}]
    numbers: list[Json] = [
        {"name": "emissivity", "at": "/problem/faces/z_high/emissivity"},
        {"name": "hot", "at": "/problem/faces/z_low/value"},
        {"name": "ambient", "at": "/problem/faces/z_high/ambient"},
        {"name": "conductivity", "scale": "/problem/body/conductivity"},
    ]
    answer = await sensitivities(client, problem, results, numbers)
    sigma, c = 5.670374419e-8, 2 / 0.025
    u = float(mpmath.findroot(lambda u: c * (900 - u) - 0.8 * sigma * (u**4 - 300**4), 700))
    slope = c + 4 * 0.8 * sigma * u**3
    expected = {
        "emissivity": -sigma * (u**4 - 300**4) / slope,
        "hot": c / slope,
        "ambient": 4 * 0.8 * sigma * 300**3 / slope,
        "conductivity": c * (900 - u) / slope,
    }
    check(answer, {("cool side", name): exact for name, exact in expected.items()})


# --- decay along a bar ---


async def test_decay_along_a_bar(client: httpx.AsyncClient) -> None:
    """sin(pi x / a) sin(pi y / b) exp(-gamma z), gamma^2 kz = pi^2 (kx / a^2 + ky / b^2): by place and conductivity."""
    cold = {"condition": "held", "value": 0}
    problem = block(**dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), cold))
    problem["body"]["size"]["z"] = "semi-infinite"
    del problem["faces"]["z_high"]
    problem["faces"]["z_low"] = {
        "condition": "held",
        "value": {"map": "formula", "expression": "100 * sin(pi * x / 40) * sin(pi * y / 60)"},
    }
    results: list[Json] = [{"name": "probe", "result": "potential", "at": [14, 21, 9]}]
    numbers: list[Json] = [
        {"name": "place", "at": "/results/0/at/2"},
        {"name": "along", "at": "/problem/body/conductivity/z"},
        {"name": "across", "scale": ["/problem/body/conductivity/x", "/problem/body/conductivity/y"]},
        {"name": "height", "scale": "/problem/faces/z_low/value"},
    ]
    gamma = math.pi * math.sqrt(95 / 130 * (1 / 40**2 + 1 / 60**2))
    u = 100 * math.sin(math.pi * 14 / 40) * math.sin(math.pi * 21 / 60) * math.exp(-gamma * 9)
    expected = {
        "place": -gamma * u,
        "along": u * gamma * 9 / (2 * 130),
        "across": -u * gamma * 9 / 2,
        "height": u,
    }
    answer = await sensitivities(client, problem, results, numbers)
    check(answer, {("probe", name): exact for name, exact in expected.items()})


# --- an independent solver of twenty digits ---

BLOCK = {
    "width": 0.04,
    "height": 0.025,
    "film": 850.0,
    "across": 95.0,
    "pad": 0.0,
    "probe": 0.011,
}


def by_reference(**numbers: float) -> Any:
    """The potential at a probe by `HighPrecision`, which shares no code with the core."""
    n = BLOCK | numbers
    pad = (0.008 + n["pad"], 0.03 + n["pad"], 0.012, 0.045, 1e5)
    case = Case(
        (n["width"], 0.06, n["height"]),
        (n["across"], 95.0, 130.0),
        walls(x_low="D", x_high=Wall("R", 24.0, n["film"]), z_low=Wall("N", Cells(0.0, (pad,))), y_high="D"),
    )
    return HighPrecision(case).potential((0.013, 0.021, n["probe"]))


def block_with_pad() -> Json:
    """The same body for the service, in metres."""
    cold = {"condition": "held", "value": 0}
    return {
        "potential": "temperature",
        "units": {"length": "m", "potential": "degC"},
        "body": {"size": {"x": 0.04, "y": 0.06, "z": 0.025}, "conductivity": {"x": 95, "y": 95, "z": 130}},
        "faces": {
            "x_low": cold,
            "x_high": {"condition": "film", "coefficient": 850, "ambient": 24},
            "y_low": INSULATED,
            "y_high": cold,
            "z_low": {
                "condition": "flux",
                "inflow": {
                    "map": "patches",
                    "background": 0,
                    "patches": [{"x": [0.008, 0.03], "y": [0.012, 0.045], "value": 1e5, "name": "pad"}],
                },
            },
            "z_high": INSULATED,
        },
    }


PATCH = "/problem/faces/z_low/inflow/patches/0"
PAD: Json = {"name": "pad", "shift": [f"{PATCH}/x/0", f"{PATCH}/x/1"]}
LOAD: Json = {"name": "load", "at": f"{PATCH}/value"}
BLOCK_NUMBERS: list[Json] = [
    {"name": "width", "at": "/problem/body/size/x"},
    {"name": "height", "at": "/problem/body/size/z"},
    {"name": "film", "at": "/problem/faces/x_high/coefficient"},
    {"name": "across", "at": "/problem/body/conductivity/x"},
    PAD,
    {"name": "probe", "at": "/results/0/at/2"},
]


async def test_block_with_a_pad_against_twenty_digits(client: httpx.AsyncClient) -> None:
    """Sizes, coefficient, conductivity, place of the pad and of the probe."""
    results: list[Json] = [{"name": "probe", "result": "potential", "at": [0.013, 0.021, 0.011]}]
    answer = await sensitivities(client, block_with_pad(), results, BLOCK_NUMBERS)
    expected = {}
    for name, nominal in BLOCK.items():
        # Central differences of twenty digits: the step leaves parts in 10^10.
        low, high = (nominal + side * 1e-5 * (nominal or 0.01) for side in (-1, 1))
        expected["probe", name] = float(
            (by_reference(**{name: high}) - by_reference(**{name: low})) / (mpmath.mpf(high) - mpmath.mpf(low))
        )
    check(answer, expected)


# --- kinks, limits and what is refused ---


async def test_two_places_that_compete_make_a_kink(client: httpx.AsyncClient) -> None:
    """Two equal pads, mirror images: the hottest of both rises with the load of either and does not fall with it."""
    problem = block(x_low=INSULATED, x_high=INSULATED, y_low=INSULATED, y_high=INSULATED)
    pads = [{"x": x, "y": [20, 40], "value": 50000, "name": name} for x, name in (([4, 16], "A"), ([24, 36], "B"))]
    problem["faces"]["z_low"] = {
        "condition": "flux",
        "inflow": {"map": "patches", "background": 0, "patches": pads},
    }
    results: list[Json] = [{"name": "hottest", "result": "highest", "face": "z_low"}]
    numbers: list[Json] = [{"name": "A", "at": "/problem/faces/z_low/inflow/patches/0/value"}]
    (entry,) = (await sensitivities(client, problem, results, numbers))["derivatives"]
    assert not entry["smooth"]
    assert entry["second_derivative"] is None
    assert 0 < entry["below"] < entry["above"]
    assert entry["derivative"] - entry["error_estimate"] <= entry["below"]
    assert entry["derivative"] + entry["error_estimate"] >= entry["above"]
    # The levels are linear in the loads: twice the load of both is twice the rise of the hottest.
    rise = (await client.post("/v1/limits", json={
        "problem": problem, "results": results, "limits": [{"result": "hottest", "at_most": 99}],
    })).json()["results"][0]["value"] - 30  # fmt: skip
    assert (entry["below"] + entry["above"]) * 50000 == pytest.approx(rise, rel=1e-5)


async def test_pad_at_the_edge_is_moved_inwards(client: httpx.AsyncClient) -> None:
    problem = block_with_pad()
    problem["faces"]["z_low"]["inflow"]["patches"][0]["x"] = [0, 0.022]
    results: list[Json] = [{"name": "probe", "result": "potential", "at": [0.013, 0.021, 0.011]}]
    answer = await sensitivities(client, problem, results, [PAD])
    assert answer["numbers"][0]["varied"] == "above"
    assert answer["derivatives"][0]["smooth"]


async def test_number_that_cannot_be_varied_says_why(client: httpx.AsyncClient) -> None:
    """A pad as wide as the body."""
    problem = block_with_pad()
    problem["faces"]["z_low"]["inflow"]["patches"][0]["x"] = [0, 0.04]
    results: list[Json] = [{"name": "probe", "result": "potential", "at": [0.013, 0.021, 0.011]}]
    answer = await sensitivities(client, problem, results, [LOAD, PAD])
    assert "reason" not in answer["numbers"][0]
    assert answer["numbers"][1]["reason"]["message"].startswith("/problem/faces/z_low/inflow/patches/0")
    load, pad = answer["derivatives"]
    assert load["derivative"] is not None
    assert (pad["derivative"], pad["error_estimate"], pad["smooth"]) == (None, None, False)


async def test_step_is_read_in_the_unit_of_differences(client: httpx.AsyncClient) -> None:
    results: list[Json] = [{"name": "cool side", "result": "potential", "at": ["middle", "middle", "high"]}]
    numbers = [WALL_NUMBERS[0] | {"step": "100 um"}, WALL_NUMBERS[3] | {"step": "2 K"}]
    answer = await sensitivities(client, wall(), results, numbers)
    slopes = gradient(film_side)
    check(answer, {("cool side", "thickness"): slopes[0] * 1e-3, ("cool side", "ambient"): slopes[3]})


@pytest.mark.parametrize(
    ("number", "pointer"),
    [
        ({"name": "x", "at": "/problem/body/size/w"}, "#/numbers/0/at"),
        ({"name": "x", "at": "/problem/body/size/z", "step": 0}, "#/numbers/0/step"),
        ({"name": "x", "at": "/problem/body/size/z", "step": "2 K"}, "#/numbers/0/step"),
        ({"name": "x", "at": "/problem/body/size/z", "shift": "/problem/body/size/z"}, "#/numbers/0"),
    ],
)
async def test_mistakes_are_pointed_at(client: httpx.AsyncClient, number: Json, pointer: str) -> None:
    results: list[Json] = [{"name": "cool side", "result": "potential", "at": ["middle", "middle", "high"]}]
    question = {"problem": wall(), "results": results, "numbers": [number]}
    document = check_problem_document(await client.post("/v1/sensitivities", json=question), 422)
    assert pointers(document) == [pointer]


async def test_too_many_cases_are_refused_before_they_are_computed(settings: Settings) -> None:
    """Ten for each number and 49 more for all, at the most; a study takes them."""
    results: list[Json] = [{"name": "cool side", "result": "potential", "at": ["middle", "middle", "high"]}]
    question = {"problem": wall(), "results": results, "numbers": WALL_NUMBERS}
    async with open_client(settings.model_copy(update={"cases": 80})) as client:
        document = check_problem_document(await client.post("/v1/sensitivities", json=question), 422)
    assert document["type"].endswith("too-costly")
    assert (document["estimate"], document["limit"]) == (99, 80)


async def test_cost_is_that_of_the_accuracy_cases_are_asked_for(settings: Settings) -> None:
    """Asking for 1e-12 oneself changes nothing, since derivatives ask for as much; 1e-14 costs more."""
    results: list[Json] = [{"name": "cool side", "result": "potential", "at": [0.02, 0.03, "high"]}]
    question: Json = {"problem": block_with_pad(), "results": results, "numbers": [LOAD]}
    costs = []
    async with open_client(settings.model_copy(update={"cases_multiplications": 1e8})) as client:
        for more in ({}, {"accuracy": {"relative": 1e-12}}, {"accuracy": {"relative": 1e-14}}):
            document = check_problem_document(await client.post("/v1/sensitivities", json=question | more), 422)
            costs.append(document["estimate"])
    assert costs[0] == costs[1] < costs[2]


@pytest.mark.parametrize(("thickness", "conductivity"), [(5e-3, 0.5), (5e-4, 0.5), (5e-5, 0.01), (5e-3, 0.001)])
async def test_place_in_a_layer_of_microns(client: httpx.AsyncClient, thickness: float, conductivity: float) -> None:
    """100 K over 100 mm, a film of microns, and 100 mm again: the slope inside it is that of its own resistance."""
    problem = slab(0, 100)
    outer = {"thickness": 100.0, "conductivity": 1.0}
    layers = [outer, {"thickness": thickness, "conductivity": conductivity}, outer]
    problem["body"] = {"size": {"x": 40, "y": 60}, "layers": layers}
    results: list[Json] = [{"name": "probe", "result": "potential", "at": ["middle", "middle", 100 + thickness / 2]}]
    (entry,) = (await sensitivities(client, problem, results, [{"name": "place", "at": "/results/0/at/2"}]))[
        "derivatives"
    ]
    exact = 100 / (200 + thickness / conductivity) / conductivity
    assert abs(entry["derivative"] - exact) <= entry["error_estimate"]
    assert entry["error_estimate"] <= 1e-2 * exact
