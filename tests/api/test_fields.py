"""POST /v1/fields."""

from __future__ import annotations

import httpx
import numpy as np
import pytest

from service.core import Body, FaceMap, Film, Grid, Held, Inflow, Insulated, Patch, Rectangle, solve
from service.models.fields_answer import FieldsAnswer
from tests.api.client import check_problem_document, pointers
from tests.api.halden_reach import ask_points, block, changed, sight_port_bar, slab

pytestmark = pytest.mark.anyio


async def test_values_are_those_of_the_solver_in_millimetres(client: httpx.AsyncClient) -> None:
    """The bar written out for the solver: lengths in mm, flows in W."""
    body = Body(
        (40.0, 60.0, np.inf),
        (0.095, 0.095, 0.130),
        {
            "x_low": Held(FaceMap.uniform(30.0)),
            "x_high": Film(850e-6, FaceMap.uniform(24.0)),
            "y_low": Insulated(),
            "y_high": Inflow(FaceMap.uniform(1.5e-3)),
            "z_low": Held(FaceMap.patches((40.0, 60.0), 30.0, [Patch(Rectangle(5, 35, 10, 50), 640.0)])),
        },
    )
    grid = Grid(np.linspace(0, 40, 5), np.array([7.0, 30.0]), np.array([0.0, 0.04, 20.0]))
    expected = solve(body).field(grid, tolerance=1e-6, with_flux=True)
    question = {
        "problem": sight_port_bar(),
        "evaluate": {
            "grids": [{"x": {"from": 0, "to": 40, "count": 5}, "y": [7, 30], "z": [0, "40 um", 20]}],
            "quantities": ["potential", "flux"],
        },
        "accuracy": {"absolute": "1 uK"},
    }
    assert expected.flux is not None
    answer = (await client.post("/v1/fields", json=question)).json()
    FieldsAnswer.model_validate(answer)
    (found,) = answer["grids"]
    assert found["shape"] == [5, 2, 3]
    assert found["axes"] == {"x": [0, 10, 20, 30, 40], "y": [7, 30], "z": [0, 0.04, 20]}
    # The same problem up to one rounding of each coefficient.
    np.testing.assert_allclose(found["potential"], expected.potential, rtol=0, atol=1e-9)
    assert found["error_bound"] <= 1e-6
    for axis in range(3):
        # W/mm^2 are MW/m^2; no place of this grid lies on a jump.
        np.testing.assert_allclose(
            np.array(found["flux"]["xyz"[axis]], dtype=float), 1e6 * expected.flux[axis], rtol=1e-9, atol=1e-3
        )


@pytest.mark.parametrize(
    ("axes", "shape"),
    [
        ({"x": [1, 2], "y": [3, 4, 5], "z": [6, 7]}, [2, 3, 2]),
        ({"x": [1, 2], "y": [3, 4, 5], "z": 6}, [2, 3, 1]),
        ({"x": 1, "y": {"from": 0, "to": 60, "count": 4}, "z": 6}, [1, 4, 1]),
        ({"x": 1, "y": 2, "z": "1 cm"}, [1, 1, 1]),
    ],
    ids=["box", "plane", "line", "point"],
)
async def test_grid_with_fixed_axes_is_a_plane_a_line_or_a_point(
    client: httpx.AsyncClient, axes: dict[str, object], shape: list[int]
) -> None:
    question = {"problem": slab(), "evaluate": {"grids": [{"name": "cut", **axes}]}}
    (found,) = (await client.post("/v1/fields", json=question)).json()["grids"]
    assert found["name"] == "cut"
    assert found["shape"] == shape
    assert np.shape(found["potential"]) == tuple(shape)


async def test_slab_between_two_temperatures(client: httpx.AsyncClient) -> None:
    """u = 20 + 60 z / c, q_z = -k 60 K / 25 mm with k = 130 W/(m K)."""
    question = ask_points(
        slab(), [0, 0, 0], [20, 30, 10], [40, 60, 25], quantities=["potential", "flux"], extremes=True
    )
    answer = (await client.post("/v1/fields", json=question)).json()
    FieldsAnswer.model_validate(answer)
    for point, value in zip(answer["points"], (20, 44, 80), strict=True):
        assert point["potential"] == pytest.approx(value, abs=1e-6)
        assert abs(point["potential"] - value) <= point["error_bound"] + 1e-13
        assert point["flux"]["z"] == pytest.approx(-312_000, rel=1e-6)
        assert point["flux"]["x"] == pytest.approx(0, abs=1e-3)
    assert answer["extremes"]["highest"]["value"] == pytest.approx(80, abs=1e-6)
    assert answer["extremes"]["lowest"]["value"] == pytest.approx(20, abs=1e-6)
    assert answer["extremes"]["highest"]["where"] == "face z_high"


async def test_certificate_states_the_largest_bound_of_the_answer(client: httpx.AsyncClient) -> None:
    question = ask_points(sight_port_bar(), [20, 30, 5])
    question["evaluate"]["grids"] = [{"x": [1, 20], "y": 30, "z": [0.001, 5]}]
    answer = (await client.post("/v1/fields", json=question)).json()
    certificate = answer["certificate"]
    bounds = [answer["grids"][0]["error_bound"], answer["points"][0]["error_bound"]]
    assert certificate["error_bound"] >= max(bounds)
    assert certificate["error_bound"] <= certificate["accuracy_asked"]
    assert certificate["agreement"] <= certificate["agreement_bound"]
    assert certificate["checked_places"] > 0


async def test_accuracy_is_a_difference_or_a_part_of_the_span(client: httpx.AsyncClient) -> None:
    asked = {}
    for accuracy in ({"absolute": "1e-3 K"}, {"absolute": 1e-3}, {"relative": 1e-5}):
        question = ask_points(slab(), [20, 30, 10]) | {"accuracy": accuracy}
        answer = (await client.post("/v1/fields", json=question)).json()
        asked[str(accuracy)] = answer["certificate"]["accuracy_asked"]
    # The span of the slab's data is 60 K.
    assert list(asked.values()) == pytest.approx([1e-3, 1e-3, 6e-4], rel=1e-12)


async def test_accuracy_that_cannot_be_promised_is_refused_with_the_bound_reached(
    client: httpx.AsyncClient,
) -> None:
    question = ask_points(sight_port_bar(), [20, 30, 5]) | {"accuracy": {"absolute": "1e-15 K"}}
    document = check_problem_document(await client.post("/v1/fields", json=question), 422)
    assert document["type"] == "/problem-types/accuracy-not-reached"
    assert pointers(document) == ["#/accuracy"]
    assert document["bound"] > 1e-15


async def test_flux_on_a_jump_of_the_data_is_null_and_remarked(client: httpx.AsyncClient) -> None:
    """At (5, 30, 0) the border of the window crosses: the potential is the mean of both, the flux has no
    value.
    """
    question = ask_points(sight_port_bar(), [5, 30, 0], [20, 30, 0], quantities=["potential", "flux"])
    answer = (await client.post("/v1/fields", json=question)).json()
    FieldsAnswer.model_validate(answer)
    on_jump, beside = answer["points"]
    assert on_jump["flux"] == {"x": None, "y": None, "z": None}
    assert None not in beside["flux"].values()
    assert [(remark["code"], remark["where"]) for remark in answer["warnings"]] == [
        ("flux-without-finite-value", "#/points")
    ]


async def test_means_of_a_face_a_patch_and_a_rectangle(client: httpx.AsyncClient) -> None:
    """The window of 30 x 40 mm at 640 degC in an end of 40 x 60 mm at 30 degC is half of it."""
    question = {
        "problem": sight_port_bar(),
        "evaluate": {
            "means": [
                {"face": "z_low"},
                {"face": "z_low", "patch": "window"},
                {"face": "z_low", "patch": 0, "name": "again"},
                {"face": "z_low", "x": [0, 5], "y": [0, "end"], "name": "frame"},
            ]
        },
    }
    answer = (await client.post("/v1/fields", json=question)).json()
    FieldsAnswer.model_validate(answer)
    values = [mean["value"] for mean in answer["means"]]
    assert values == pytest.approx([335, 640, 640, 30], abs=1e-6)
    assert [mean.get("name") for mean in answer["means"]] == [None, "window", "again", "frame"]
    assert answer["means"][1]["rectangle"] == {"x": [5, 35], "y": [10, 50]}
    assert answer["means"][3]["rectangle"] == {"x": [0, 5], "y": [0, 60]}


async def test_stored_problem_and_problem_in_the_question_answer_alike(client: httpx.AsyncClient) -> None:
    problem_id = (await client.post("/v1/problems", json=sight_port_bar())).json()["problem_id"]
    question = ask_points(sight_port_bar(), [20, 30, 5])
    inline = await client.post("/v1/fields", json=question)
    stored = await client.post("/v1/fields", json={"problem_id": problem_id, "evaluate": question["evaluate"]})
    assert inline.json() == stored.json()
    assert inline.json()["problem_id"] == problem_id


async def test_flux_is_answered_in_the_declared_unit(client: httpx.AsyncClient) -> None:
    problem = changed(slab(), "units/flux", "W/cm^2")
    question = ask_points(problem, [20, 30, 10], quantities=["flux"])
    answer = (await client.post("/v1/fields", json=question)).json()
    assert answer["units"]["flux"] == "W/cm^2"
    assert answer["points"][0]["flux"]["z"] == pytest.approx(-31.2, rel=1e-6)
    assert "potential" not in answer["points"][0]


async def test_bare_lengths_reach_the_solver_digit_for_digit(client: httpx.AsyncClient) -> None:
    """0.1 mm beside the edge of a body in mm: in metres 39.9 mm would be another double."""
    question = ask_points(sight_port_bar(), [39.9, 59.9, 0.1], ["39.9 mm", "59.9 mm", "0.1 mm"])
    first, second = (await client.post("/v1/fields", json=question)).json()["points"]
    assert first["at"] == second["at"] == [39.9, 59.9, 0.1]
    assert first["potential"] == second["potential"]


async def test_potentials_in_kelvin_and_celsius_differ_by_the_offset(client: httpx.AsyncClient) -> None:
    celsius = await client.post("/v1/fields", json=ask_points(slab("293.15 K", 80), [20, 30, 10]))
    kelvin = await client.post(
        "/v1/fields",
        json=ask_points(changed(slab("20 degC", "80 degC"), "units/potential", "K"), [20, 30, 10]),
    )
    at_celsius, at_kelvin = (answer.json()["points"][0]["potential"] for answer in (celsius, kelvin))
    assert at_celsius == pytest.approx(44, abs=1e-6)
    assert at_kelvin == pytest.approx(317.15, abs=1e-6)


@pytest.mark.parametrize(
    ("at", "wrong"),
    [
        ([41, 30, 5], ["#/evaluate/points/0/at/0"]),
        ([-1, 61, 5], ["#/evaluate/points/0/at/0", "#/evaluate/points/0/at/1"]),
        ([20, 30, "-1 um"], ["#/evaluate/points/0/at/2"]),
    ],
)
async def test_point_outside_the_body_is_pointed_at(
    client: httpx.AsyncClient, at: list[float | str], wrong: list[str]
) -> None:
    answer = await client.post("/v1/fields", json=ask_points(sight_port_bar(), at))
    assert pointers(check_problem_document(answer, 422)) == wrong


async def test_bar_has_no_far_end_to_lie_outside_of(client: httpx.AsyncClient) -> None:
    answer = await client.post("/v1/fields", json=ask_points(sight_port_bar(), [20, 30, "10 km"]))
    assert answer.status_code == 200


async def test_body_at_one_level_is_at_that_level_exactly(client: httpx.AsyncClient) -> None:
    answer = (await client.post("/v1/fields", json=ask_points(block(), [20, 30, 5]))).json()
    assert answer["points"][0]["potential"] == 30
