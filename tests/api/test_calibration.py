"""Unknowns from readings over HTTP: against closed forms, planted values and tiny problems; and what is refused."""

from __future__ import annotations

import math

import httpx
import numpy as np
import pytest

from service.models.calibration_answer import CalibrationAnswer
from service.openapi import load_examples
from service.settings import Settings
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import Json, changed

pytestmark = pytest.mark.anyio

INSULATED: Json = {"condition": "insulated"}
FILM_AT, CONDUCTIVITY_AT = "/problem/faces/z_high/coefficient", "/problem/body/conductivity"

# A wall of 50 mm that is given 3 kW/m^2 at z = 0 and cooled by a film at its end: T = T_a + q / h + q (d - z) / k.
INFLOW, DEPTH, AMBIENT = 3000.0, 0.05, 30.0
PLACES = [5, 20, 35, 48]
FILM, CONDUCTIVITY = 120.0, 1.8


def wall_readings(film: float = FILM, conductivity: float = CONDUCTIVITY) -> np.ndarray:
    depths = DEPTH - np.array(PLACES) / 1000
    return AMBIENT + INFLOW / film + INFLOW * depths / conductivity


def wall(spread: float = 0.5, seed: int | None = None, **more: object) -> Json:
    """A question about the film and the conductivity of the wall; with a seed the readings have errors."""
    noise = np.zeros(len(PLACES)) if seed is None else np.random.default_rng(seed).standard_normal(len(PLACES))
    readings = wall_readings() + spread * noise
    return {
        "problem": {
            "potential": "temperature",
            "units": {"length": "mm", "potential": "degC"},
            "body": {"size": {"x": 10, "y": 10, "z": 50}, "conductivity": 1},
            "faces": dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), INSULATED)
            | {
                "z_low": {"condition": "flux", "inflow": INFLOW},
                "z_high": {"condition": "film", "coefficient": 60, "ambient": AMBIENT},
            },
        },
        "results": [{"name": f"couple {at}", "result": "potential", "at": ["middle", "middle", at]} for at in PLACES]
        + [{"name": "hot side", "result": "mean", "face": "z_low"}],
        "unknowns": [
            {"name": "film", "at": FILM_AT, "low": 10, "high": 1000},
            {"name": "conductivity", "at": CONDUCTIVITY_AT, "low": 0.2, "high": 20},
        ],
        "readings": [
            {"result": f"couple {at}", "value": float(value), "standard_uncertainty": spread}
            for at, value in zip(PLACES, readings, strict=True)
        ],
        **more,
    }


async def calibrated(client: httpx.AsyncClient, question: Json) -> tuple[Json, list[str]]:
    """What the readings say, and the codes of all warnings."""
    answer = await client.post("/v1/calibration", json=question)
    assert answer.status_code == 200, answer.text
    CalibrationAnswer.model_validate(answer.json())
    found: Json = answer.json()["calibration"]
    return found, [warning["code"] for warning in answer.json()["warnings"]]


async def test_a_wall_has_the_film_and_the_conductivity_of_a_straight_line(client: httpx.AsyncClient) -> None:
    found, warnings = await calibrated(client, wall(seed=4))
    assert warnings == []
    # The same as a straight line through the readings: intercept q / h, slope q / k.
    columns = np.column_stack((np.ones(4), DEPTH - np.array(PLACES) / 1000)) * INFLOW
    readings = np.array([reading["value"] for reading in wall(seed=4)["readings"]])
    resistances = np.linalg.lstsq(columns, readings - AMBIENT)[0]
    covariance = 0.5**2 * np.linalg.inv(columns.T @ columns)
    for index, unknown in enumerate(found["unknowns"]):
        value, spread = 1 / resistances[index], math.sqrt(covariance[index, index]) / resistances[index] ** 2
        assert abs(unknown["value"] - value) < 2e-4 * spread
        assert unknown["standard_uncertainty"] == pytest.approx(spread, rel=1e-4)
        factor = math.exp(found["coverage_factor"] * spread / value)
        assert unknown["interval"] == pytest.approx({"low": value / factor, "high": value * factor}, rel=1e-4)
    expected = covariance[0, 1] / math.sqrt(covariance[0, 0] * covariance[1, 1])
    assert found["correlation"][0][1] == pytest.approx(expected, abs=1e-4)
    left = readings - AMBIENT - columns @ resistances
    assert found["consistency"]["chi_squared"] == pytest.approx(float(left @ left) / 0.25, rel=1e-4)
    assert found["consistency"]["degrees_of_freedom"] == 2
    # The hot side, where nobody read, with the uncertainty of the line there.
    at_hot = np.array([1.0, DEPTH]) * INFLOW
    hot = found["results"][-1]
    assert hot["value"] == pytest.approx(AMBIENT + at_hot @ resistances, abs=1e-3)
    assert hot["standard_uncertainty"] == pytest.approx(math.sqrt(at_hot @ covariance @ at_hot), rel=1e-4)


async def test_a_single_degree_of_freedom_is_told_as_one(client: httpx.AsyncClient) -> None:
    question = wall(seed=4)
    question["readings"] = question["readings"][:3]
    found, _ = await calibrated(client, question)
    assert "with 1 degree of freedom, which chance" in found["consistency"]["sentence"]


async def test_planted_values_lie_in_their_intervals_in_nearly_all_trials(client: httpx.AsyncClient) -> None:
    hits = {"film": 0, "conductivity": 0}
    for seed in range(12):
        found, _ = await calibrated(client, wall(seed=100 + seed, starts=1))
        for unknown in found["unknowns"]:
            true = {"film": FILM, "conductivity": CONDUCTIVITY}[unknown["name"]]
            hits[unknown["name"]] += unknown["interval"]["low"] <= true <= unknown["interval"]["high"]
    # Fewer than 10 of 12 at 95 % come in two of a hundred such tests.
    assert min(hits.values()) >= 10


async def test_a_wall_between_a_held_side_and_a_film_knows_their_ratio_only(client: httpx.AsyncClient) -> None:
    question = wall()
    question["problem"]["faces"]["z_low"] = {"condition": "held", "value": 200}
    # T = T_a + (200 - T_a) (k + h (d - z)) / (k + h d)
    shape = (CONDUCTIVITY + FILM * (DEPTH - np.array(PLACES) / 1000)) / (CONDUCTIVITY + FILM * DEPTH)
    for reading, value in zip(question["readings"], AMBIENT + (200 - AMBIENT) * shape, strict=True):
        reading["value"] = float(value)
    question["results"].append({"name": "heat", "result": "inflow", "face": "z_low"})
    answer = (await client.post("/v1/calibration", json=question)).json()
    found = answer["calibration"]
    (group,) = found["known_together"]
    assert (group["numbers"], group["form"], group["factors"]) == (["film", "conductivity"], "product", [1, -1])
    assert group["expression"] == "film / conductivity"
    assert group["value"] == pytest.approx(FILM / CONDUCTIVITY, rel=1e-5)
    assert 0 < group["standard_uncertainty"] < 0.05 * group["value"]
    assert not group["are_told"]
    assert [unknown["standard_uncertainty"] for unknown in found["unknowns"]] == [None, None]
    assert found["unknowns"][0]["interval"] == {"low": 10, "high": 1000}
    assert found["correlation"] == [[None, None], [None, None]]
    # Readings without errors agree too closely, which is said as well.
    warning, other = answer["warnings"]
    assert (warning["code"], other["code"]) == ("told-together", "too-close")
    assert '"film" and "conductivity" apart' in warning["message"]
    # The heat follows the conductivity, the temperatures do not.
    assert found["results"][-1]["standard_uncertainty"] is None
    assert found["results"][-2]["standard_uncertainty"] is not None

    question["unknowns"][1]["known_before"] = {"value": CONDUCTIVITY, "standard_uncertainty": 0.1}
    found, warnings = await calibrated(client, question)
    assert warnings == ["too-close"]
    conductivity = found["unknowns"][1]
    assert conductivity["standard_uncertainty"] == pytest.approx(0.1, rel=0.01)
    assert conductivity["known_before_part"] == pytest.approx(1.0, abs=1e-3)


async def test_one_reading_tells_resistances_in_series(client: httpx.AsyncClient) -> None:
    question = wall(1.0, starts=1)
    question["readings"] = question["readings"][:1]
    answer = (await client.post("/v1/calibration", json=question)).json()
    (group,) = answer["calibration"]["known_together"]
    assert (group["expression"], group["holds"]) == ("1 / film + 0.045 / conductivity", "throughout")
    assert group["value"] == pytest.approx(1 / FILM + 0.045 / CONDUCTIVITY, rel=1e-3)
    assert group["standard_uncertainty"] == pytest.approx(1 / INFLOW, rel=1e-3)
    assert "1 / film + 0.045 / conductivity is 0.03333," in answer["warnings"][0]["message"]
    assert all(place["holds"] for place in group["places"])


async def test_a_combination_that_bends_is_told_near_its_place(client: httpx.AsyncClient) -> None:
    # The temperature difference over the depth and the film hangs on both by no simple form.
    question = wall(0.5, starts=1)
    question["unknowns"][1] = {"name": "depth", "at": "/problem/body/size/z", "low": 50, "high": 150}
    question["problem"]["faces"]["x_high"] = {"condition": "film", "coefficient": 20, "ambient": AMBIENT}
    question["readings"] = [question["readings"][3] | {"value": 38}]
    answer = (await client.post("/v1/calibration", json=question)).json()
    (group,) = answer["calibration"]["known_together"]
    assert group["holds"] == "near"
    assert {place["holds"] for place in group["places"]} == {True, False}
    message = answer["warnings"][0]["message"]
    assert "What they tell is that near film = " in message
    assert " only: `places` has other values that meet the readings." in message
    found = {unknown["name"]: unknown["value"] for unknown in answer["calibration"]["unknowns"]}
    assert group["near"] == [found[name] for name in group["numbers"]]


async def test_readings_that_ranges_keep_from_being_met_tell_nothing(client: httpx.AsyncClient) -> None:
    question = wall(0.5, starts=1)
    question["readings"] = [question["readings"][0] | {"value": 30.5}]
    found, warnings = await calibrated(client, question)
    assert found["consistency"]["chi_squared"] > 100
    assert found["known_together"] == []
    assert "not-met" in warnings


@pytest.mark.parametrize(("own", "shared"), [(0.5, 1e30), (0.5, 1e60), (1e-10, 0.4), (1e60, 0.4), (0.5, 1e-60)])
async def test_shared_errors_of_any_size_are_answered(client: httpx.AsyncClient, own: float, shared: float) -> None:
    question = wall(own, starts=1)
    question["shared_errors"] = [{"results": ["couple 5", "couple 20"], "standard_uncertainty": shared}]
    found, warnings = await calibrated(client, question)
    assert (own < 1e-6) == ("coarse" in warnings)
    assert all(unknown["is_told"] == (own < 1) for unknown in found["unknowns"])


async def test_what_follows_in_proportion_is_found_in_two_waves(client: httpx.AsyncClient) -> None:
    question = wall()
    question["problem"]["body"]["conductivity"] = CONDUCTIVITY
    question["problem"]["faces"]["z_high"]["coefficient"] = FILM
    question["unknowns"] = [
        {"name": "load", "scale": "/problem/faces/z_low/inflow", "low": 0, "high": 10},
        {"name": "ambient", "at": "/problem/faces/z_high/ambient", "low": "0 degC", "high": "350 K"},
    ]
    question["shared_errors"] = [{"results": ["couple 5", "couple 20"], "standard_uncertainty": "0.4 K"}]
    found, warnings = await calibrated(client, question)
    assert found["linear"]
    assert warnings == ["too-close"]
    # One in the middle, two ends of each, three off all axes; and the solution.
    assert found["case_count"] == 9
    load, ambient = found["unknowns"]
    assert (load["value"], load["unit"]) == (pytest.approx(1.0, abs=1e-9), "1")
    assert (ambient["value"], ambient["unit"]) == (pytest.approx(AMBIENT, abs=1e-6), "degC")
    assert ambient["unit_of_uncertainty"] == "K"
    assert ambient["interval"]["high"] < 350 - 273.15
    columns = np.column_stack((wall_readings() - AMBIENT, np.ones(4)))
    covariance = np.diag(np.full(4, 0.25))
    covariance[:2, :2] += 0.16
    expected = np.sqrt(np.diag(np.linalg.inv(columns.T @ np.linalg.solve(covariance, columns))))
    found_spreads = [unknown["standard_uncertainty"] for unknown in found["unknowns"]]
    assert found_spreads == pytest.approx(expected.tolist(), rel=1e-6)
    for unknown in found["unknowns"]:
        assert sum(unknown["shares"]) + unknown["shared_shares"][0]["part"] == pytest.approx(1.0)


async def test_readings_of_means_flows_and_differences_count_as_well(client: httpx.AsyncClient) -> None:
    question = wall()
    question["results"] += [
        {"name": "cold side", "result": "mean", "face": "z_high"},
        {"name": "drop", "result": "difference", "of": "hot side", "less": "cold side"},
        {"name": "heat", "result": "inflow", "face": "z_high"},
    ]
    question["starts"] = 1
    question["unknowns"].append({"name": "load", "at": "/problem/faces/z_low/inflow", "low": 500, "high": 9000})
    question["readings"] = [
        {"result": "cold side", "value": "328.15 K", "standard_uncertainty": "0.1 K"},
        {"result": "drop", "value": INFLOW * DEPTH / CONDUCTIVITY, "standard_uncertainty": 0.1},
        {"result": "heat", "value": "-300 mW", "standard_uncertainty": "6 mW"},
    ]
    found, _ = await calibrated(client, question)
    values = [unknown["value"] for unknown in found["unknowns"]]
    assert values == pytest.approx([FILM, CONDUCTIVITY, INFLOW], rel=1e-4)
    # Every one hangs on the heat, which is known to two parts in a hundred.
    for unknown, value in zip(found["unknowns"], values, strict=True):
        assert unknown["standard_uncertainty"] / value == pytest.approx(0.02, rel=0.1)
    assert found["consistency"]["verdict"] == "untested"
    assert "no more readings than they determine" in found["consistency"]["sentence"]
    assert found["readings"][0]["value"] == pytest.approx(55.0)


async def test_a_contradiction_is_said_and_a_wrong_reading_named(client: httpx.AsyncClient) -> None:
    question = wall(0.2, starts=1)
    question["readings"][2]["value"] += 4
    found, warnings = await calibrated(client, question)
    assert found["consistency"]["verdict"] == "contradiction"
    assert found["consistency"]["probability"] < 1e-6
    assert "contradiction" in warnings
    assert found["readings"][2]["is_outlier"]
    relative, warnings = await calibrated(client, question | {"uncertainties": "relative"})
    assert relative["consistency"]["scaled_by"] == pytest.approx(
        math.sqrt(found["consistency"]["chi_squared"] / 2), rel=1e-6
    )
    assert relative["coverage_factor"] == pytest.approx(4.3027, abs=1e-3)
    assert "contradiction" not in warnings


async def test_an_unknown_at_the_end_of_its_range_is_warned_of(client: httpx.AsyncClient) -> None:
    question = wall(starts=1)
    question["unknowns"][0]["high"] = 100
    found, warnings = await calibrated(client, question)
    assert (found["unknowns"][0]["value"], found["unknowns"][0]["at_end"]) == (100, "high")
    assert "at-end" in warnings


async def test_results_less_certain_than_their_readings_are_warned_of(client: httpx.AsyncClient) -> None:
    question = wall(1e-5, starts=1, accuracy={"absolute": "1 mK"})
    found, warnings = await calibrated(client, question)
    assert found["readings"][0]["error_bound"] > 1e-6
    assert "coarse" in warnings


async def test_profile_intervals_are_those_of_the_line(client: httpx.AsyncClient) -> None:
    found, _ = await calibrated(client, wall(2.0, starts=1, profile_intervals=True))
    columns = np.column_stack((np.ones(4), DEPTH - np.array(PLACES) / 1000)) * INFLOW
    covariance = 2.0**2 * np.linalg.inv(columns.T @ columns)
    for index, unknown in enumerate(found["unknowns"]):
        # In the resistances all is linear, and the interval of a number is that of its inverse.
        middle = 1 / [FILM, CONDUCTIVITY][index]
        reach = found["coverage_factor"] * math.sqrt(covariance[index, index])
        ends = {"low": 1 / (middle + reach), "high": 1 / (middle - reach)}
        assert unknown["profile_interval"] == pytest.approx(ends, rel=5e-3)


# --- maps ---


def tile(spread: float = 0.3, seed: int = 1) -> Json:
    """A thin tile of which the heat load is looked for, read on a grid of probes."""
    table = [[2000, 3000, 2500], [3000, 6000, 4000], [2000, 3500, 2500]]
    problem = {
        "potential": "temperature",
        "units": {"length": "mm", "potential": "degC"},
        "body": {"size": {"x": 40, "y": 60, "z": 10}, "conductivity": 2},
        "faces": dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), INSULATED)
        | {
            "z_low": {"condition": "film", "coefficient": 200, "ambient": 20},
            "z_high": {
                "condition": "flux",
                "inflow": {"map": "samples", "x": [0, 20, "4 cm"], "y": [0, 30, 60], "table": table},
            },
        },
    }
    places = [[x, y, 9] for x in (5, 20, 35) for y in (5, 30, 55)]
    return {
        "problem": problem,
        "results": [
            {"name": f"probe {index}", "result": "potential", "at": place} for index, place in enumerate(places)
        ]
        + [{"name": "heat", "result": "inflow", "face": "z_high"}],
        "smooth_map": {"name": "load", "map": "/problem/faces/z_high/inflow", "typical": "5 kW/m^2"},
        "readings": [
            {"result": f"probe {index}", "value": 0.0, "standard_uncertainty": spread} for index in range(len(places))
        ],
    }


async def read_off(client: httpx.AsyncClient, question: Json, seed: int) -> Json:
    """The question with readings of its problem as it stands, with errors, and its map forgotten."""
    asked = {key: question[key] for key in ("problem", "results")}
    limits = [{"result": "heat", "at_least": 0}]
    answer = (await client.post("/v1/limits", json=asked | {"limits": limits})).json()
    random = np.random.default_rng(seed)
    for reading, result in zip(question["readings"], answer["results"], strict=False):
        reading["value"] = result["value"] + reading["standard_uncertainty"] * random.standard_normal()
    return changed(question, "problem/faces/z_high/inflow/table", [[1000] * 3] * 3)


async def test_a_planted_map_is_found_in_two_waves(client: httpx.AsyncClient) -> None:
    planted = tile()
    table = np.array(planted["problem"]["faces"]["z_high"]["inflow"]["table"])
    inside = []
    for seed in range(4):
        found, warnings = await calibrated(client, await read_off(client, tile(), seed))
        assert found["linear"]
        assert found["case_count"] == 14
        # One set in twenty has a reading that looks wrong.
        assert set(warnings) <= {"outlier"}
        load = found["smooth_map"]
        assert load["axes"] == {"x": [0, 20, 40], "y": [0, 30, 60]}
        inside.append((np.array(load["low"]) <= table) & (table <= np.array(load["high"])))
        # Heat that comes in has to be told well: all of it passes the probes.
        heat = found["results"][-1]
        assert heat["value"] == pytest.approx(0.02 * 0.03 * (table * [[1], [2], [1]] * [1, 2, 1]).sum() / 4, rel=0.02)
    assert np.mean(inside) >= 0.9


async def test_a_map_that_was_found_can_be_put_into_the_request(client: httpx.AsyncClient) -> None:
    question = await read_off(client, tile(), 1)
    found, _ = await calibrated(client, question)
    filled = changed(question, "problem/faces/z_high/inflow/table", found["smooth_map"]["table"])
    again, _ = await calibrated(client, filled)
    for first, second in zip(found["readings"], again["readings"], strict=True):
        assert first["computed"] == pytest.approx(second["computed"], abs=1e-5)


async def test_a_map_beside_a_conductivity_needs_to_know_it(client: httpx.AsyncClient) -> None:
    question = await read_off(client, tile(), 2) | {"starts": 1}
    question["unknowns"] = [{"name": "film", "at": "/problem/faces/z_low/coefficient", "low": 50, "high": 800}]
    found, warnings = await calibrated(client, question)
    assert found["smooth_map"]["not_told_from"] == ["film"]
    assert not found["unknowns"][0]["is_told"]
    assert "not-told-from-map" in warnings
    question["unknowns"][0]["known_before"] = {"value": 200, "standard_uncertainty": 10}
    found, _ = await calibrated(client, question)
    assert found["settled"]
    table = np.array(tile()["problem"]["faces"]["z_high"]["inflow"]["table"])
    load = found["smooth_map"]
    assert ((np.array(load["low"]) <= table) & (table <= np.array(load["high"]))).mean() >= 0.8


async def test_entries_far_from_all_probes_are_open(client: httpx.AsyncClient) -> None:
    question = tile()
    question["results"] = [{"name": "probe 0", "result": "potential", "at": [5, 5, 9]}]
    question["readings"] = question["readings"][:1]
    found, warnings = await calibrated(client, question)
    assert found["smooth_map"]["open_count"] == 9
    assert "open-entries" in warnings
    assert found["consistency"]["verdict"] == "untested"


# --- refusals ---


@pytest.mark.parametrize(
    ("path", "value", "pointer", "sentence"),
    [
        ("unknowns/0/high", 5, "#/unknowns/0/high", "`high` has to be greater than `low`."),
        ("unknowns/0/low", "3 m", "#/unknowns/0/low", "m"),
        ("unknowns/0/spacing", "logarithmic", "#/unknowns/0/low", "a `low` greater than zero"),
        ("unknowns/0/at", "/problem/faces/z_high/nothing", "#/unknowns/0/at", 'There is no "nothing"'),
        ("unknowns/1/name", "film", "#/unknowns/1/name", "Another number has this name"),
        ("unknowns/1/known_before/value", "3 m", "#/unknowns/1/known_before/value", "m"),
        ("readings/0/standard_uncertainty", -1, "#/readings/0/standard_uncertainty", "greater than zero"),
        ("readings/0/standard_uncertainty", "1 W", "#/readings/0/standard_uncertainty", "W"),
        ("readings/0/standard_uncertainty", 1e-60, "#/readings/0/standard_uncertainty", "has to be at least 1e-13"),
        ("readings/1/value", 1e20, "#/readings/1/standard_uncertainty", "has to be at least 1e-13"),
        ("readings/2/result", "couple 7", "#/readings/2/result", 'There is no result "couple 7"'),
        ("readings", [], "#/readings", "At least 1"),
        ("shared_errors/0/results/1", "hot side", "#/shared_errors/0/results/1", "no reading"),
        ("uncertainties", "relative", "#/uncertainties", "more readings than unknowns"),
        ("starts", 0, "#/starts", "at least 1"),
    ],
)  # fmt: skip
async def test_wrong_questions_are_pointed_at(
    client: httpx.AsyncClient, path: str, value: object, pointer: str, sentence: str
) -> None:
    question = wall()
    question["unknowns"][0]["low"] = 10 if "spacing" not in path else -10
    question["unknowns"][1]["known_before"] = {"value": 2, "standard_uncertainty": 1}
    question["shared_errors"] = [{"results": ["couple 5", "couple 20"], "standard_uncertainty": 1}]
    if path == "uncertainties":
        question["readings"], question["shared_errors"] = question["readings"][:1], []
    document = check_problem_document(await client.post("/v1/calibration", json=changed(question, path, value)), 422)
    assert pointers(document) == [pointer]
    assert sentence in document["errors"][0]["detail"]


@pytest.mark.parametrize(
    ("path", "value", "pointer", "sentence"),
    [
        ("smooth_map/map", "/problem/faces/z_low", "#/smooth_map/map", "no map of `samples`"),
        ("smooth_map/map", "/problem/faces/z_high/flow", "#/smooth_map/map", 'There is no "flow"'),
        ("smooth_map/typical", -1, "#/smooth_map/typical", "greater than zero"),
        ("smooth_map/typical", "5 K", "#/smooth_map/typical", "K"),
        ("smooth_map/departure", 0, "#/smooth_map/departure", "greater than zero"),
        ("smooth_map", None, "#", "Give `unknowns`, a `smooth_map` or both."),
        ("uncertainties", "relative", "#", "uncertainties have to be given"),
    ],
)
async def test_wrong_maps_are_pointed_at(
    client: httpx.AsyncClient, path: str, value: object, pointer: str, sentence: str
) -> None:
    document = check_problem_document(await client.post("/v1/calibration", json=changed(tile(), path, value)), 422)
    assert pointers(document) == [pointer]
    assert sentence in document["errors"][0]["detail"]


async def test_a_map_without_size_or_with_gaps_or_changed_twice_is_refused(client: httpx.AsyncClient) -> None:
    at = "problem/faces/z_high/inflow"
    nothing = changed(changed(tile(), f"{at}/table", [[0] * 3] * 3), "smooth_map/typical", ...)
    gaps = changed(changed(tile(), f"{at}/table/1/1", None), f"{at}/fill_missing", "smooth")
    twice = tile() | {"unknowns": [{"name": "load", "scale": f"/{at}", "low": 0.5, "high": 2}]}
    for question, pointer, sentence in (
        (nothing, "#/smooth_map/typical", "give a `typical` size"),
        (gaps, "#/smooth_map/map", "must not be missing"),
        (twice, "#/smooth_map/map", "changes this map already"),
    ):
        document = check_problem_document(await client.post("/v1/calibration", json=question), 422)
        assert pointers(document) == [pointer]
        assert sentence in document["errors"][0]["detail"]


async def test_ranges_without_any_body_are_refused_with_the_reason(client: httpx.AsyncClient) -> None:
    question = wall()
    question["unknowns"] = [{"name": "depth", "at": "/problem/body/size/z", "low": 1, "high": 30}]
    document = check_problem_document(await client.post("/v1/calibration", json=question), 422)
    assert pointers(document) == ["#/unknowns"]
    assert "No start has results." in document["errors"][0]["detail"]


async def test_too_many_cases_are_sent_to_a_study(settings: Settings) -> None:
    async with open_client(settings.model_copy(update={"cases": 100})) as client:
        document = check_problem_document(await client.post("/v1/calibration", json=wall()), 422)
        assert "send it as a study" in document["detail"]
        answer = await client.post("/v1/calibration", json=tile())
        assert answer.status_code == 200


@pytest.mark.parametrize("name", [name for name in load_examples() if name.startswith("calibration")])
async def test_numbers_of_examples_come_out_to_five_digits(client: httpx.AsyncClient, name: str) -> None:
    example = load_examples()[name]
    found, _ = await calibrated(client, example["request"])
    expected = example["answer"]["calibration"]
    for kind in ("value", "standard_uncertainty"):
        for part in ("unknowns", "results"):
            assert [one[kind] for one in found[part]] == pytest.approx([one[kind] for one in expected[part]], rel=1e-5)
    if expected["smooth_map"] is not None:
        for key in ("table", "standard_uncertainties", "resolved_lengths"):
            np.testing.assert_allclose(found["smooth_map"][key], expected["smooth_map"][key], rtol=1e-4)
