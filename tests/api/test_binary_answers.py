"""The binary form of an answer."""

from __future__ import annotations

import io
import json

import httpx
import numpy as np
import pytest

from service.media import ARRAYS, ARRAYS_FORM, JSON_FORM, choose_form
from service.refusals import NotAcceptable
from service.settings import Settings
from tests.api.client import check_problem_document, open_client
from tests.api.halden_reach import sight_port_bar

QUESTION = {
    "problem": sight_port_bar(),
    "evaluate": {
        "grids": [
            {"name": "end", "x": {"from": 0, "to": 40, "count": 9}, "y": [0, 10, 30], "z": [0, 5]},
            {"x": 20, "y": 30, "z": [0, 1, 2]},
        ],
        "points": [{"at": [20, 30, 5]}],
        "quantities": ["potential", "flux"],
    },
}


@pytest.mark.anyio
async def test_binary_form_holds_the_numbers_of_the_json_form(client: httpx.AsyncClient) -> None:
    plain = (await client.post("/v1/fields", json=QUESTION)).json()
    binary = await client.post("/v1/fields", json=QUESTION, headers={"Accept": ARRAYS})
    assert binary.headers["content-type"] == ARRAYS
    assert binary.headers["vary"] == "Accept"
    assert "answer.npz" in binary.headers["content-disposition"]
    with np.load(io.BytesIO(binary.content), allow_pickle=False) as archive:
        arrays = dict(archive.items())
    document = json.loads(str(arrays["answer"]))
    for index, grid in enumerate(plain["grids"]):
        shown = document["grids"][index]
        assert shown["shape"] == grid["shape"]
        for name, axis in grid["axes"].items():
            np.testing.assert_array_equal(arrays[shown["axes"][name]], axis)
        np.testing.assert_array_equal(arrays[shown["potential"]], grid["potential"])
        for name, component in grid["flux"].items():
            # null in JSON is NaN in binary.
            expected = np.array(component, dtype=float)
            assert arrays[shown["flux"][name]].dtype == np.float64
            np.testing.assert_array_equal(arrays[shown["flux"][name]], expected)
    assert np.isnan(arrays["grids_0_flux_x"]).any()
    for key in ("problem_id", "units", "certificate", "warnings", "points"):
        assert document[key] == plain[key]


@pytest.mark.anyio
async def test_binary_form_is_the_same_bytes_each_time(settings: Settings) -> None:
    contents = []
    for _ in range(2):
        async with open_client(settings) as client:
            answer = await client.post("/v1/fields", json=QUESTION, headers={"Accept": ARRAYS})
            contents.append((answer.content, answer.headers["etag"]))
    assert contents[0] == contents[1]


@pytest.mark.anyio
async def test_forms_have_tags_of_their_own(client: httpx.AsyncClient) -> None:
    tags = {
        (await client.post("/v1/fields", json=QUESTION, headers={"Accept": accept})).headers["etag"]
        for accept in (ARRAYS, "application/json")
    }
    assert len(tags) == 2


@pytest.mark.parametrize(
    ("accept", "form"),
    [
        (None, JSON_FORM),
        ("*/*", JSON_FORM),
        ("application/*", JSON_FORM),
        ("application/json", JSON_FORM),
        (ARRAYS, ARRAYS_FORM),
        (f"{ARRAYS}, application/json;q=0.5", ARRAYS_FORM),
        (f"{ARRAYS};q=0.2, application/json", JSON_FORM),
        (f"{ARRAYS}, */*;q=0.1", ARRAYS_FORM),
        (f"application/json;q=0, {ARRAYS.upper()}", ARRAYS_FORM),
        ("application/json;q=0, */*", ARRAYS_FORM),
        ("text/html, application/xhtml+xml, */*;q=0.8", JSON_FORM),
    ],
)
def test_form_is_the_one_the_client_likes_best(accept: str | None, form: object) -> None:
    assert choose_form(accept) is form


@pytest.mark.parametrize("accept", ["text/html", "application/json;q=0", "image/*", "application/json;q=x"])
def test_client_that_takes_neither_is_told_what_there_is(accept: str) -> None:
    with pytest.raises(NotAcceptable, match="application/json or application/vnd"):
        choose_form(accept)


@pytest.mark.anyio
async def test_client_that_takes_neither_gets_a_problem_document(client: httpx.AsyncClient) -> None:
    answer = await client.post("/v1/fields", json=QUESTION, headers={"Accept": "text/csv"})
    check_problem_document(answer, 406)
