"""POST /v1/convergence."""

from __future__ import annotations

import httpx
import pytest

from service.models.convergence_answer import ConvergenceAnswer
from service.settings import Settings
from tests.api.client import open_client
from tests.api.halden_reach import Json, sight_port_bar

pytestmark = pytest.mark.anyio


def bar_driven_at_its_end() -> Json:
    """The sight-port bar with all its sides at 30 degC, so that the series runs along z alone."""
    bar = sight_port_bar()
    for face in ("x_high", "y_low", "y_high"):
        bar["faces"][face] = {"condition": "held", "value": 30}
    return bar


async def test_convergence_shows_why_a_number_can_be_trusted(client: httpx.AsyncClient) -> None:
    question = {
        "problem": bar_driven_at_its_end(),
        "evaluate": {"points": [{"name": "deep", "at": [20, 30, 40]}, {"at": [20, 30, "1 um"]}]},
        "accuracy": {"absolute": "1e-6 K"},
    }
    answer = (await client.post("/v1/convergence", json=question)).json()
    ConvergenceAnswer.model_validate(answer)
    deep, shallow = answer["points"]
    assert deep["name"] == "deep"
    fields = await client.post("/v1/fields", json=question)
    for point, field in zip(answer["points"], fields.json()["points"], strict=True):
        assert abs(point["value"] - field["potential"]) <= point["error_bound"] + field["error_bound"]
        assert point["error_bound"] <= 1e-6
    # Far from the driven end the series settles after some terms, beside it it never does in practice.
    assert deep["agreement"] <= deep["agreement_bound"]
    assert deep["series"][-1]["error"] < 1e-6
    assert deep["terms_needed"] < 64
    assert shallow["series"][-1]["error"] > 1.0
    assert [step["terms"] for step in deep["series"]] == sorted(step["terms"] for step in deep["series"])
    for step in deep["series"]:
        assert step["tail_bound"] is None or step["error"] <= step["tail_bound"] + deep["error_bound"]
    assert deep["time_steps"][0]["error"] > deep["time_steps"][-1]["error"]
    assert 1 <= deep["tenfold_tighter"]["cost_ratio"] < 2


async def test_cut_series_overshoots_a_jump_however_many_terms_it_has(client: httpx.AsyncClient) -> None:
    overshoots = []
    for terms in (16, 64):
        question = {
            "problem": sight_port_bar(),
            "evaluate": {"points": [{"at": [20, 30, 40]}], "overshoot_terms": terms},
        }
        answer = (await client.post("/v1/convergence", json=question)).json()
        (end,) = [entry for entry in answer["overshoot"] if entry["face"] == "z_low"]
        assert end["terms"] == terms
        overshoots.append(end["overshoot"])
    # Wilbraham's 8.95 % on each of two sides that meet in a corner; it does not go away.
    assert all(0.05 < value < 0.25 for value in overshoots)


async def test_overshoot_that_would_take_too_much_memory_is_left_out(settings: Settings) -> None:
    question = {
        "problem": sight_port_bar(),
        "evaluate": {"points": [{"at": [20, 30, 40]}], "overshoot_terms": 4096},
    }
    async with open_client(settings.model_copy(update={"memory_bytes": 1_000_000})) as client:
        answer = (await client.post("/v1/convergence", json=question)).json()
    ConvergenceAnswer.model_validate(answer)
    assert answer["overshoot"] == []
    assert [remark["code"] for remark in answer["warnings"]] == ["overshoot-left-out"]
