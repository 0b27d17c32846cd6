"""Tables of readings: as lists, as text, with missing entries."""

from __future__ import annotations

from typing import Any

import httpx
import numpy as np
import pytest

from service.translation.readings import Readings, ReadingsError, fill_smoothly, readings_of_csv
from tests.api.client import check_problem_document, pointers
from tests.api.halden_reach import Json, ask_points, block

CSV = "x\\y,0,30,60\n0,30,32,31\n20,35,44,36\n40,30,33,31\n"
TABLE = [[30, 32, 31], [35, 44, 36], [30, 33, 31]]


def held_by(**samples: Any) -> Json:
    """A block whose lower end is held at readings."""
    return block(z_low={"condition": "held", "value": {"map": "samples", **samples}})


@pytest.mark.parametrize(
    "text",
    [
        CSV,
        CSV.replace("\n", "\r\n"),
        CSV.replace(",", ";"),
        CSV.replace(",", "\t"),
        "\n" + CSV + "\n\n",
        CSV.replace("x\\y", ""),
        CSV.replace("44", " 44.0 ").replace("20,", "2e1,"),
        "x;0;30,0;60\n0;30;32;31\n20;35;44,0;36\n40;30;33;31",
    ],
    ids=[
        "commas",
        "returns",
        "semicolons",
        "tabs",
        "blank lines",
        "free corner",
        "spellings",
        "decimal commas",
    ],
)
def test_csv_is_read_with_axes_in_its_first_row_and_column(text: str) -> None:
    readings = readings_of_csv(text)
    assert readings.first_axis == [0, 20, 40]
    assert readings.second_axis == [0, 30, 60]
    np.testing.assert_array_equal(readings.table, TABLE)


@pytest.mark.parametrize("entry", ["", " ", "-", "NaN", "n/a"])
def test_empty_entry_is_a_missing_reading(entry: str) -> None:
    assert np.isnan(readings_of_csv(CSV.replace("44", entry)).table[1, 1])


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        (CSV.replace("44", "hot"), "Row 3, column 3 has to be a reading"),
        (CSV.replace("44", "1e999"), "Row 3, column 3 has to be a reading"),
        (CSV.replace("44", "4_4"), "Row 3, column 3 has to be a reading"),
        (CSV.replace("20,", "middle,"), "Row 3, column 1 has to be a place"),
        (CSV.replace(",60\n", ",end\n"), "Row 1, column 4 has to be a place"),
        (CSV.replace("44,", ""), "Row 3 has 3 entries; the first row has 4."),
        ('x,0,30\n0,"1,2\n', "leave quotation marks out"),
        ("", "needs a first row"),
    ],
)
def test_unreadable_csv_is_refused_with_row_and_column(text: str, sentence: str) -> None:
    with pytest.raises(ReadingsError, match=sentence):
        readings_of_csv(text)


def test_smooth_filling_reproduces_bilinear_readings() -> None:
    """A table linear along each axis solves the discrete equation, so missing entries are found exactly."""
    first, second = [0.0, 1.0, 4.0, 9.0], [0.0, 2.0, 3.0, 7.0, 8.0]
    whole = 3.0 + 2.0 * np.array(first)[:, None] - np.array(second)[None, :]
    table = whole.copy()
    table[1, 1] = table[1, 2] = table[2, 3] = np.nan
    filled = fill_smoothly(Readings(first, second, table)).table
    np.testing.assert_allclose(filled, whole, rtol=0, atol=1e-12)


def test_smooth_filling_stays_between_the_readings_around() -> None:
    rng = np.random.default_rng(7)
    table = rng.uniform(20, 40, (6, 9))
    table[rng.random(table.shape) < 0.4] = np.nan
    filled = fill_smoothly(Readings(list(range(6)), list(range(9)), table)).table
    assert np.isfinite(filled).all()
    assert filled.min() >= np.nanmin(table)
    assert filled.max() <= np.nanmax(table)
    np.testing.assert_array_equal(filled[~np.isnan(table)], table[~np.isnan(table)])


def test_table_without_any_reading_cannot_be_filled() -> None:
    with pytest.raises(ReadingsError, match="no reading at all"):
        fill_smoothly(Readings([0, 1], [0, 1], np.full((2, 2), np.nan)))


@pytest.mark.anyio
async def test_table_and_text_are_the_same_readings(client: httpx.AsyncClient) -> None:
    by_table = held_by(x=[0, "2 cm", 40], y=[0, 30, 60], table=TABLE)
    by_text = held_by(csv=CSV)
    places: list[list[float | str]] = [[20, 30, 0], [10, 15, 0], [10, 15, 3]]
    answers = [
        (await client.post("/v1/fields", json=ask_points(problem, *places))).json() for problem in (by_table, by_text)
    ]
    assert answers[0]["points"] == answers[1]["points"]
    values = [point["potential"] for point in answers[0]["points"]]
    # On the face the readings themselves, and between them bilinear: the mean of 30, 32, 35, 44.
    assert values[:2] == pytest.approx([44, 35.25], abs=1e-6)


@pytest.mark.anyio
async def test_readings_in_declared_units_of_flux(client: httpx.AsyncClient) -> None:
    """Uniform readings of 5 W/cm^2 on a face are 50 kW/m^2 on 40 x 60 mm: 120 W."""
    problem = block(
        z_low={
            "condition": "flux",
            "inflow": {"map": "samples", "x": [0, 40], "y": [0, 60], "table": [[5, 5], [5, 5]]},
        }
    )
    problem["units"]["flux"] = "W/cm^2"
    answer = (await client.post("/v1/flux-totals", json={"problem": problem})).json()
    assert answer["faces"]["z_low"]["inflow"] == pytest.approx(120, rel=1e-12)


@pytest.mark.anyio
async def test_missing_reading_is_filled_only_on_request_and_remarked(client: httpx.AsyncClient) -> None:
    holed = [[30, 32, 31], [35, None, 36], [30, 33, 31]]
    refused = held_by(x=[0, 20, 40], y=[0, 30, 60], table=holed)
    document = check_problem_document(await client.post("/v1/problems", json=refused), 422)
    assert pointers(document) == ["#/faces/z_low/value"]
    filled = held_by(x=[0, 20, 40], y=[0, 30, 60], table=holed, fill_missing="smooth")
    answer = (await client.post("/v1/fields", json=ask_points(filled, [20, 30, 0]))).json()
    # Weights across are 30/20, along 20/30: (1.5 (32 + 33) + (35 + 36) / 1.5) / (2 (1.5 + 1 / 1.5)).
    expected = (1.5 * 65 + 71 / 1.5) / (2 * (1.5 + 1 / 1.5))
    assert answer["points"][0]["potential"] == pytest.approx(expected, abs=1e-6)
    assert [(remark["code"], remark["where"]) for remark in answer["warnings"]] == [
        ("readings-filled", "#/problem/faces/z_low/value")
    ]


@pytest.mark.anyio
async def test_outermost_reading_is_held_to_the_edge_only_on_request(client: httpx.AsyncClient) -> None:
    short = {"x": [10, 30], "y": [0, 60], "table": [[31, 31], [35, 35]]}
    check_problem_document(await client.post("/v1/problems", json=held_by(**short)), 422)
    answer = await client.post(
        "/v1/fields", json=ask_points(held_by(**short, beyond="hold"), [5, 30, 0], [20, 30, 0], [38, 30, 0])
    )
    values = [point["potential"] for point in answer.json()["points"]]
    assert values == pytest.approx([31, 33, 35], abs=1e-6)
