"""POST /v1/flux-totals."""

from __future__ import annotations

import httpx
import pytest

from service.models.flux_totals_answer import FluxTotalsAnswer
from tests.api.client import check_problem_document
from tests.api.halden_reach import block, changed, sight_port_bar, slab

pytestmark = pytest.mark.anyio

# 130 W/(m K) * 60 K / 25 mm * 40 mm * 60 mm
SLAB_FLOW = 748.8


async def test_flow_through_a_slab(client: httpx.AsyncClient) -> None:
    question = {
        "problem": slab(),
        "evaluate": {
            "patches": [{"face": "z_high", "x": [0, 20], "y": [0, "end"], "name": "half"}],
            "planes": [{"z": 10}, {"z": 10, "x": [0, 10], "name": "quarter"}, {"x": "2 cm"}],
        },
    }
    answer = (await client.post("/v1/flux-totals", json=question)).json()
    FluxTotalsAnswer.model_validate(answer)
    faces = {face: total["inflow"] for face, total in answer["faces"].items()}
    assert faces["z_high"] == pytest.approx(SLAB_FLOW, rel=1e-9)
    assert faces["z_low"] == pytest.approx(-SLAB_FLOW, rel=1e-9)
    assert [faces[face] for face in ("x_low", "x_high", "y_low", "y_high")] == [0, 0, 0, 0]
    (half,) = answer["patches"]
    assert half["inflow"] == pytest.approx(SLAB_FLOW / 2, rel=1e-9)
    assert (half["name"], half["rectangle"]) == ("half", {"x": [0, 20], "y": [0, 60]})
    whole, quarter, across = answer["planes"]
    # Heat goes from z_high to z_low, against the axis.
    assert whole["flow"] == pytest.approx(-SLAB_FLOW, rel=1e-9)
    assert quarter["flow"] == pytest.approx(-SLAB_FLOW / 4, rel=1e-9)
    assert (quarter["axis"], quarter["position"]) == ("z", 10)
    assert across["flow"] == pytest.approx(0, abs=1e-6)
    assert across["position"] == 20
    for total in (half, whole, quarter, answer["faces"]["z_low"]):
        assert 0 < total["error_bound"] < 1e-3
    assert answer["warnings"] == []


async def test_books_are_closed(client: httpx.AsyncClient) -> None:
    problem = changed(slab(), "faces/z_high", {"condition": "film", "coefficient": 500, "ambient": 80})
    problem["sources"] = [{"x": [0, 10], "density": "2 MW/m^3"}]
    balance = (await client.post("/v1/flux-totals", json={"problem": problem})).json()["balance"]
    # 2 MW/m^3 in 10 x 60 x 25 mm
    assert balance["generation"] == pytest.approx(30, rel=1e-12)
    assert balance["closed"] is True
    assert abs(balance["residual"]) <= balance["error_bound"]
    assert balance["unbounded_faces"] == []


async def test_total_beside_a_jump_is_null_with_its_cause(client: httpx.AsyncClient) -> None:
    """The window at 640 degC borders on 30 degC inside the face: its own inflow has no finite value."""
    question = {
        "problem": sight_port_bar(),
        "evaluate": {"faces": ["z_low"], "patches": [{"face": "z_low", "patch": "window"}]},
    }
    answer = (await client.post("/v1/flux-totals", json=question)).json()
    FluxTotalsAnswer.model_validate(answer)
    assert list(answer["faces"]) == ["z_low"]
    (window,) = answer["patches"]
    assert window["inflow"] is None
    assert window["error_bound"] is None
    assert "with_gap" not in window
    lines = {cause["line"]: cause for cause in window["unbounded"]}
    assert len(lines) == 4
    # k J L / pi with k = sqrt(95 * 130) W/(m K), J = 610 K: along x 30 mm, along y 40 mm.
    expected = {
        0.030 * 610 * (95 * 130) ** 0.5 / 3.141592653589793,
        0.040 * 610 * (95 * 130) ** 0.5 / 3.141592653589793,
    }
    assert sorted({round(cause["coefficient"], 6) for cause in lines.values()}) == [
        pytest.approx(value, rel=1e-6) for value in sorted(expected)
    ]
    assert all(cause["largest_jump"] == pytest.approx(610) for cause in lines.values())
    assert ("unbounded-total", "#/patches/0") in {(remark["code"], remark["where"]) for remark in answer["warnings"]}


async def test_gap_gives_a_finite_total_that_grows_as_the_coefficient_says(client: httpx.AsyncClient) -> None:
    totals = []
    for gap in ("1 um", "0.1 um"):
        question = {
            "problem": sight_port_bar(),
            "evaluate": {"faces": [], "patches": [{"face": "z_low", "patch": 0}], "edge_gap": gap},
        }
        (window,) = (await client.post("/v1/flux-totals", json=question)).json()["patches"]
        totals.append(window)
    grown = totals[1]["with_gap"]["inflow"] - totals[0]["with_gap"]["inflow"]
    coefficient = sum(cause["coefficient"] for cause in totals[0]["unbounded"])
    # Each factor e adds the coefficient, ten is e to the 2.302585; next comes a term of the order of gap /
    # width.
    assert grown == pytest.approx(2.302585092994046 * coefficient, rel=1e-3)


async def test_flows_are_answered_in_the_declared_unit(client: httpx.AsyncClient) -> None:
    question = {"problem": changed(slab(), "units/flow", "kW")}
    answer = (await client.post("/v1/flux-totals", json=question)).json()
    assert answer["units"]["flow"] == "kW"
    assert answer["faces"]["z_high"]["inflow"] == pytest.approx(SLAB_FLOW / 1000, rel=1e-9)


async def test_too_many_parts_are_refused(client: httpx.AsyncClient) -> None:
    question = {"problem": slab(), "evaluate": {"planes": [{"z": 10}] * 201}}
    document = check_problem_document(await client.post("/v1/flux-totals", json=question), 422)
    assert document["errors"][0]["detail"].startswith("There are 201 patches and planes; at most 200")


async def test_plane_through_the_border_of_a_held_patch_is_null_and_has_a_flow_with_a_gap(
    client: httpx.AsyncClient,
) -> None:
    half = {
        "condition": "held",
        "value": {"map": "patches", "background": 30, "patches": [{"x": [0, 20], "y": [0, 60], "value": 90}]},
    }
    insulated = {"condition": "insulated"}
    problem = block(x_low=insulated, x_high=insulated, y_low=insulated, y_high=insulated, z_high=half)
    question = {"problem": problem, "evaluate": {"planes": [{"x": 20}], "edge_gap": "10 um"}}
    answer = (await client.post("/v1/flux-totals", json=question)).json()
    FluxTotalsAnswer.model_validate(answer)
    (plane,) = answer["planes"]
    assert plane["flow"] is None
    (cause,) = plane["unbounded"]
    assert cause["kind"] == "jump_line"
    # sqrt(95 * 130) W/(m K) * 60 K * 60 mm / pi, from the hot half to the cold one
    assert cause["coefficient"] == pytest.approx(127.345, rel=1e-5)
    assert plane["with_gap"]["flow"] > 0
    (warning,) = [warning for warning in answer["warnings"] if warning["where"] == "#/planes/0"]
    assert warning["message"].endswith("The flow through the rest, without the edge gap, is given beside it.")


async def test_what_a_half_space_carries_off_closes_its_books(client: httpx.AsyncClient) -> None:
    """A pad of 40 W on the floor of a half-space: all of it passes every plane below, and no face takes it up."""
    pad = {"x": [-4, 4], "y": [-2, 2], "flow": 40}
    problem = {
        "units": {"length": "mm"},
        "body": {"size": {"x": "infinite", "y": "infinite", "z": "semi-infinite"}, "conductivity": 2.5},
        "faces": {"z_low": {"condition": "flux", "inflow": {"map": "patches", "background": 0, "patches": [pad]}}},
    }
    answer = (
        await client.post("/v1/flux-totals", json={"problem": problem, "evaluate": {"planes": [{"z": 7}]}})
    ).json()
    FluxTotalsAnswer.model_validate(answer)
    assert answer["faces"]["z_low"]["inflow"] == pytest.approx(40, rel=1e-12)
    assert answer["planes"][0]["flow"] == pytest.approx(40, rel=1e-9)
    balance = answer["balance"]
    assert balance["carried_off"] == pytest.approx(40, rel=1e-9)
    assert balance["closed"] is True


async def test_flow_through_a_plate_without_ends_is_told_per_area(client: httpx.AsyncClient) -> None:
    problem = {
        "units": {"length": "mm"},
        "body": {"size": {"x": "infinite", "y": "infinite", "z": 20}, "conductivity": 2.5},
        "faces": {"z_low": {"condition": "held", "value": 20}, "z_high": {"condition": "flux", "inflow": 3000}},
    }
    answer = (await client.post("/v1/flux-totals", json={"problem": problem})).json()
    FluxTotalsAnswer.model_validate(answer)
    (cause,) = answer["faces"]["z_low"]["unbounded"]
    assert cause["kind"] == "endless_plane"
    # 3000 W/m2 is 3e-3 W on each square millimetre, and leaves below.
    assert cause["coefficient"] == pytest.approx(-3e-3, rel=1e-9)
    assert answer["faces"]["z_low"]["inflow"] is None
    assert answer["balance"]["closed"] is None
    assert any("name a rectangle" in warning["message"] for warning in answer["warnings"])
