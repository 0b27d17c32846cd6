"""Results with names: against closed forms, against the calls that tell the same, and wrong requests for them."""

# The table reads best with one request a line.
# ruff: noqa: E501

from __future__ import annotations

import json
import math
from typing import Any

import httpx
import numpy as np
import pytest
from pydantic import TypeAdapter

from service.core import Field, Solution, solve
from service.core.errors import CoreError
from service.core.mixed import MixedSolution
from service.models.problem import Problem
from service.models.results import Results
from service.refusals import RequestRefused
from service.settings import Settings
from service.translation.collector import Collector
from service.translation.problem import ReadProblem, read_problem
from service.translation.results import ReadResults, estimate_results, evaluate_results, read_results
from tests.api.halden_reach import Json, block, changed, sight_port_bar, slab
from tests.api.test_mixed import stub
from tests.api.test_stacks import plate, uniform_plate
from tests.api.test_varying import FALLING, lawful
from tests.api.wrong_requests import Wrong, check_wrong

pytestmark = pytest.mark.anyio

RESULTS: TypeAdapter[Any] = TypeAdapter(Results)
EPSILON = float(np.finfo(float).eps)


def read(problem: Json, *results: Json) -> tuple[ReadResults, ReadProblem]:
    """Results of a problem, read. Raises RequestRefused."""
    known = read_problem(Problem.model_validate(problem), Settings(), ("problem",))
    collector = Collector(known.units)
    wanted = read_results(collector, RESULTS.validate_python(list(results)), known, Settings())
    collector.raise_if_any()
    return wanted, known


def ask(problem: Json, *results: Json, relative: float | None = None) -> dict[str, tuple[float, float]]:
    """Value and bound of each result, by its name."""
    wanted, known = read(problem, *results)
    found = evaluate_results(wanted, known, solve(known.body), relative=relative, keep_going=lambda: None)
    names = [info.name for info in wanted.infos]
    return dict(zip(names, zip(found.values.tolist(), found.bounds.tolist(), strict=True), strict=True))


def result(kind: str, name: str | None = None, **more: Any) -> Json:
    """A result, called by its kind if nothing else is said."""
    return {"result": kind, "name": name or kind, **more}


def check(found: tuple[float, float], expected: float, most: float | None = None) -> None:
    """A value within its bound of what it should be, but for rounding of that; and a bound that is not too wide."""
    value, bound = found
    assert abs(value - expected) <= bound + 8 * EPSILON * abs(expected)
    assert bound <= (1e-6 * abs(expected) if most is None else most)


def test_slab_is_a_resistance() -> None:
    """By hand: 60 K over 25 mm of 130 W/(m K), 40 by 60 mm: 2.4 K/mm, 312 kW/m^2, 748.8 W."""
    found = ask(
        slab(20, 80),
        result("potential", at=["middle", "low", "5 mm"]),
        result("gradient", at=[1, 2, 3]),
        result("gradient", "up", at=[1, 2, 3], along="z"),
        result("gradient", "across", at=[1, 2, 3], along="x"),
        result("flux", at=[1, 2, 3]),
        result("flux", "down", at=[1, 2, 3], along="z"),
        result("mean", face="x_low"),
        result("mean", "part", face="x_low", y=[0, 7], z=[0, "10 mm"]),
        result("highest"),
        result("lowest"),
        result("highest", "highest below", box={"z": [0, 15]}),
        result("lowest", "lowest of side", face="y_high", x=[0, 10], z=[20, 25]),
        result("inflow", face="z_high"),
        result("inflow", "quarter", face="z_high", x=[0, 20], y=[30, "end"]),
        result("flow", z=10),
        result("flow", "half", z=10, x=["begin", 20]),
        result("difference", "drop", of="highest", less="lowest"),
        result("ratio", "resistance", of="drop", over="inflow"),
        result("ratio", "share", of="quarter", over="inflow"),
        result("difference", "three", of="inflow", less="quarter"),
        result("difference", "level again", of="highest", less="drop"),
    )
    expected = {
        "potential": 32, "gradient": 2.4, "up": 2.4, "across": 0, "flux": 312e3, "down": -312e3, "mean": 50, "part": 32,
        "highest": 80, "lowest": 20, "highest below": 56, "lowest of side": 68, "inflow": 748.8, "quarter": 187.2,
        "flow": -748.8, "half": -374.4, "drop": 60, "resistance": 60 / 748.8, "share": 0.25, "three": 561.6,
        "level again": 20,
    }  # fmt: skip
    assert list(found) == list(expected)
    for name, value in expected.items():
        check(found[name], value, 1e-6 if value == 0 else None)


def test_units_are_those_of_the_problem() -> None:
    wanted, _ = read(
        slab(20, 80),
        *(result("potential", at=[0, 0, 0]), result("gradient", at=[0, 0, 0]), result("flux", at=[0, 0, 0])),
        *(result("mean", face="x_low"), result("inflow", face="x_low"), result("reach", face="z_low", fraction=0.5)),
        result("difference", of="potential", less="mean"),
        result("ratio", of="difference", over="inflow"),
        result("ratio", "per flux", of="difference", over="flux"),
        result("ratio", "plain", of="difference", over="difference"),
        result("ratio", "twice", of="gradient", over="per flux"),
    )
    units = {info.name: (info.measure.unit, info.measure.difference_unit) for info in wanted.infos}
    assert units == {
        "potential": ("degC", "K"),
        "gradient": ("K/mm", "K/mm"),
        "flux": ("W/m^2", "W/m^2"),
        "mean": ("degC", "K"),
        "inflow": ("W", "W"),
        "reach": ("mm", "mm"),
        "difference": ("K", "K"),
        "ratio": ("K/W", "K/W"),
        "per flux": ("K/(W/m^2)", "K/(W/m^2)"),
        "plain": ("1", "1"),
        "twice": ("(K/mm)/(K/(W/m^2))", "(K/mm)/(K/(W/m^2))"),
    }


def test_other_units_tell_the_same() -> None:
    """The slab of above in inches, degF and kilowatts."""
    problem = changed(
        slab("20 degC", "80 degC"), "units", {"length": "in", "potential": "degF", "flow": "kW", "flux": "W/cm^2"}
    )
    problem["body"]["size"] = {"x": "40 mm", "y": "60 mm", "z": "25 mm"}
    problem["body"]["conductivity"] = {"x": "95 W/(m K)", "y": "95 W/(m K)", "z": "130 W/(m K)"}
    found = ask(
        problem,
        result("potential", at=["low", "low", "middle"]),
        result("gradient", at=["low", "low", "middle"]),
        result("flux", at=["low", "low", "middle"]),
        result("inflow", face="z_high"),
        result("highest"),
        result("difference", of="highest", less="potential"),
    )
    check(found["potential"], 122.0)
    check(found["gradient"], 108 / (25 / 25.4))
    check(found["flux"], 31.2)
    check(found["inflow"], 0.7488)
    check(found["difference"], 54.0)


def test_gradient_at_the_side_of_a_square_prism_is_that_of_published_torsion() -> None:
    """0.675 times the side and half the generation over the conductivity: the stress in a twisted square bar.

    Timoshenko and Goodier, Theory of Elasticity, table of torsion of rectangular bars (k for b / a = 1).
    """
    held, closed = {"condition": "held", "value": 0}, {"condition": "insulated"}
    problem: Json = {
        "potential": "temperature",
        "body": {"size": {"x": 1, "y": 1, "z": 1}, "conductivity": 1},
        "faces": dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), held) | {"z_low": closed, "z_high": closed},
        "sources": [{"density": 1}],
    }
    found = ask(problem, result("gradient", at=["middle", "low", 0.3]), result("highest"))
    assert found["gradient"][0] == pytest.approx(0.675 * 0.5, abs=2.5e-4)
    assert found["highest"][0] == pytest.approx(0.07367, abs=5e-6)


def slope_by_differences(solution: Solution, place: list[float], axis: int, step: float) -> float:
    """The slope of the potential along an axis, by a central difference of fourth order."""
    moved = np.array([place] * 4, dtype=float)
    moved[:, axis] += step * np.array([-2.0, -1.0, 1.0, 2.0])
    field: Field = solution.field_at(moved, tolerance=1e-11 * solution.span)
    return float(field.potential @ np.array([1.0, -8.0, 8.0, -1.0])) / (12 * step)


WINDOW = block(z_low=sight_port_bar()["faces"]["z_low"])


@pytest.mark.parametrize(
    ("problem", "place"),
    [(sight_port_bar(), [10, 25, 7]), (plate(), [9, 7, 3.3]), (plate(), [9, 7, 3.04]), (lawful(WINDOW), [10, 25, 7])],
    ids=["bar", "ceramic", "solder", "block under a law"],
)  # fmt: skip
def test_gradient_is_the_slope_of_the_potential(problem: Json, place: list[float]) -> None:
    relative = 1e-9
    asked = [result("gradient", axis, at=place, along=axis) for axis in "xyz"]
    found = ask(problem, *asked, result("gradient", "size", at=place), relative=relative)
    solution = solve(read(problem, *asked)[1].body)
    slopes = [slope_by_differences(solution, place, axis, 0.01) for axis in range(3)]
    for axis, slope in zip("xyz", slopes, strict=True):
        assert found[axis][0] == pytest.approx(slope, abs=1e-5 * math.hypot(*slopes))
    assert found["size"][0] == pytest.approx(math.hypot(*slopes), rel=1e-5)
    assert found["size"][1] == pytest.approx(math.hypot(*(found[axis][1] for axis in "xyz")), rel=1e-9)


def test_layers_and_sides_of_interfaces() -> None:
    """The plate under a uniform flux, whose layers are resistances in a row."""
    flux, first, contact, solder = 5e4, 3e-3 / 390, 1 / 200e3, 80e-6 / 57
    found = ask(
        uniform_plate(flux),
        result("highest", "base", layer="base"),
        result("lowest", "solder, low", layer="solder"),
        result("highest", "solder, high", layer=1),
        result("potential", "below", at=[5, 5, 3]),
        result("potential", "above", at=[5, 5, 3], side="above"),
        result("gradient", "in base", at=[5, 5, 3], along="z"),
        result("gradient", "in solder", at=[5, 5, 3], along="z", side="above"),
        result("difference", "step", of="solder, low", less="base"),
        relative=1e-10,
    )
    expected = {
        "base": 40 + flux * first,
        "solder, low": 40 + flux * (first + contact),
        "solder, high": 40 + flux * (first + contact + solder),
        "below": 40 + flux * first,
        "above": 40 + flux * (first + contact),
        "in base": flux / 390 / 1000,
        "in solder": flux / 57 / 1000,
        "step": flux * contact,
    }
    for name, value in expected.items():
        assert abs(found[name][0] - value) <= found[name][1] + 1e-13 * abs(value), name
        assert found[name][1] <= 1e-6 * abs(value), name


def test_gradient_under_a_law_is_flux_over_the_conductivity_there() -> None:
    """k = 130 (1 - 0.0005 (u - 20)) from 40 to 400: the flux is that of the mean factor 0.9."""
    problem = lawful(slab(40, 400))
    found = ask(
        problem,
        result("gradient", "hot end", at=[1, 1, "high"], along="z"),
        result("gradient", "cold end", at=[1, 1, "low"], along="z"),
        result("flux", at=[1, 1, "middle"], along="z"),
        result("highest", box={"z": [5, 12.5]}),
    )
    check(found["flux"], -130 * 0.9 * 360 / 0.025)
    check(found["hot end"], 360 / 25 * 0.9 / 0.81)
    check(found["cold end"], 360 / 25 * 0.9 / 0.99)
    check(found["highest"], 20 + (1 - math.sqrt(0.5 * (0.99**2 + 0.81**2))) / 0.0005)
    assert FALLING["per_degree"] == -0.0005


SOME: list[Json] = [
    result("potential", at=[20, 30, 5]),
    result("potential", "on top", at=["middle", "high", 12]),
    result("flux", at=[20, 30, 5], along="z"),
    result("gradient", at=[7, 30, 5]),
    result("mean", face="z_low", patch="window"),
    result("mean", "side", face="x_high", y=[0, 60], z=[0, 40]),
    result("mean", "strip", face="x_high", y=[10, 20], z=[0, 40]),
    result("highest", face="x_high"),
    result("lowest", box={"x": [10, 30], "z": [1, 20]}),
    result("inflow", face="z_low", patch="window", edge_gap="10 um"),
    result("inflow", "cooled", face="x_high", y=[0, 60], z=[0, 40]),
    result("flow", z=10),
    result("reach", face="z_low", fraction=0.1),
]


async def test_results_are_what_the_calls_about_fields_and_flows_tell(client: httpx.AsyncClient) -> None:
    problem = sight_port_bar()
    found = ask(problem, *SOME)
    evaluate = {
        "points": [{"at": [20, 30, 5]}, {"at": [20, 60, 12]}],
        "quantities": ["potential", "flux"],
        "means": [{"face": "z_low", "patch": "window"}, {"face": "x_high", "y": [0, 60], "z": [0, 40]}],
    }
    fields = (await client.post("/v1/fields", json={"problem": problem, "evaluate": evaluate})).json()
    patches = [{"face": "z_low", "patch": "window"}, {"face": "x_high", "y": [0, 60], "z": [0, 40]}]
    totals = {"faces": [], "patches": patches, "planes": [{"z": 10}], "edge_gap": "10 um"}
    flows = (await client.post("/v1/flux-totals", json={"problem": problem, "evaluate": totals})).json()
    gapped = flows["patches"][0]["with_gap"]
    reach = {"face": "z_low", "fractions": [0.1]}
    reached = (await client.post("/v1/reach", json={"problem": problem, "evaluate": reach})).json()["reach"]
    for name, told, bound in (
        ("potential", fields["points"][0]["potential"], fields["points"][0]["error_bound"]),
        ("on top", fields["points"][1]["potential"], fields["points"][1]["error_bound"]),
        ("flux", fields["points"][0]["flux"]["z"], fields["points"][0]["flux_error_bound"]),
        ("mean", fields["means"][0]["value"], fields["means"][0]["error_bound"]),
        ("side", fields["means"][1]["value"], fields["means"][1]["error_bound"]),
        ("inflow", gapped["inflow"], gapped["error_bound"]),
        ("cooled", flows["patches"][1]["inflow"], flows["patches"][1]["error_bound"]),
        ("flow", flows["planes"][0]["flow"], flows["planes"][0]["error_bound"]),
        ("reach", reached["worst"][0]["distance"], reached["worst"][0]["error_bound"]),
    ):
        value, off = found[name]
        assert abs(value - told) <= bound + off, name
        assert bound / 3 <= off <= 3 * bound, name


def test_results_are_the_same_alone_as_beside_others() -> None:
    together = ask(sight_port_bar(), *SOME)
    for one in SOME:
        ((value, bound),) = ask(sight_port_bar(), one).values()
        other, other_bound = together[one["name"]]
        assert abs(value - other) <= bound + other_bound


def test_accuracy_that_cannot_be_promised_gives_way_for_that_result_alone() -> None:
    asked = [result("potential", at=[20, 30, 5]), result("mean", face="z_low"), result("highest")]
    problem = block(z_low={"condition": "held", "value": 40}, z_high={"condition": "flux", "inflow": "5 kW/m^2"})
    problem["faces"]["x_high"] = {"condition": "film", "coefficient": 100, "ambient": 20}
    (value, bound), (mean, mean_bound), (highest, _) = ask(problem, *asked, relative=1e-14).values()
    assert mean == pytest.approx(40, rel=1e-12)
    assert mean_bound <= 1e-9
    assert 1e-14 * 20 < bound < 1e-9
    coarse = ask(problem, *asked, relative=1e-6)
    assert abs(coarse["potential"][0] - value) <= coarse["potential"][1] + bound
    assert highest == pytest.approx(40, abs=1e-6) or highest > 40


def test_bounds_of_differences_and_ratios_hold_all_that_their_parts_may_be() -> None:
    """A coarse accuracy, against an exact one: the true ratio lies within the bound, which is the least that does."""
    asked = [
        result("potential", "a", at=[20, 30, 3]),
        result("potential", "b", at=[20, 30, 12]),
        result("difference", "d", of="a", less="b"),
        result("inflow", "q", face="x_high", y=[0, 60], z=[0, 40]),
        result("ratio", "r", of="d", over="q"),
    ]
    rough, exact = ask(sight_port_bar(), *asked, relative=1e-3), ask(sight_port_bar(), *asked, relative=1e-11)
    assert rough["d"][1] == pytest.approx(rough["a"][1] + rough["b"][1], rel=1e-9)
    (d, d_bound), (q, q_bound), (r, bound) = rough["d"], rough["q"], rough["r"]
    extremes = [(d + i * d_bound) / (q + j * q_bound) for i in (-1, 1) for j in (-1, 1)]
    assert bound == pytest.approx(max(abs(extreme - r) for extreme in extremes), rel=1e-9)
    assert abs(r - exact["r"][0]) <= bound + exact["r"][1]


def test_ratio_to_what_may_be_zero_has_no_finite_bound() -> None:
    """The divisor is the difference of two places so near to each other that a coarse accuracy cannot tell them."""
    asked = [
        result("potential", "a", at=[20, 30, 12]),
        result("potential", "b", at=[20, 30, 12.000001]),
        result("difference", "step", of="a", less="b"),
        result("ratio", of="a step", over="step"),
        result("ratio", "other way", of="step", over="a step"),
    ]
    asked.insert(0, result("difference", "a step", of="first", less="second"))
    asked[:0] = [result("potential", "first", at=[20, 30, 5]), result("potential", "second", at=[20, 30, 9])]
    found = ask(sight_port_bar(), *asked, relative=1e-3)
    assert 0 < abs(found["step"][0]) < found["step"][1]
    assert found["ratio"][1] == math.inf
    assert math.isfinite(found["other way"][1])


def test_pads_of_a_mixed_face_are_told_as_by_its_own_answers() -> None:
    wanted, known = read(
        stub(),
        result("inflow", "back", face="z_high", patch="return"),
        result("mean", "level", face="z_high", patch="feed"),
        result("highest"),
        result("potential", "middle", at=["middle", "middle", "middle"]),
        result("difference", "drop", of="level", less="middle"),
        result("ratio", of="drop", over="back"),
    )
    solution = solve(known.body)
    assert isinstance(solution, MixedSolution)
    found = evaluate_results(wanted, known, solution, relative=None, keep_going=lambda: None)
    feed, back, _ = solution.pads()
    assert found.values[0] == back.flow.value
    assert (found.values[1], found.bounds[1]) == (feed.potential.value, feed.potential.error_bound)
    assert abs(found.values[2] - feed.potential.value) <= found.bounds[2]
    assert found.values[5] == pytest.approx((found.values[1] - found.values[3]) / found.values[0])
    assert np.isfinite(found.bounds).all()


def insulated_but(**faces: Json) -> Json:
    """A block through whose sides nothing flows."""
    closed = {"condition": "insulated"}
    return block(**(dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), closed) | faces))


HARDLY_COOLED = insulated_but(
    z_low={"condition": "held", "value": 80}, z_high={"condition": "film", "coefficient": 0.1, "ambient": 20}
)


@pytest.mark.parametrize(
    ("problem", "asked", "sentence"),
    [
        (sight_port_bar(), result("inflow", face="z_low", patch="window"), ", because held values jump at: "),
        (sight_port_bar(), result("inflow", face="z_low", patch="window"), ". Give `edge_gap`."),
        (sight_port_bar(), result("flux", at=[5, 30, 0]), ", because it lies on a line where the data of faces jump"),
        (sight_port_bar(), result("gradient", at=[5, 30, 0]), "; choose a place beside it."),
        (HARDLY_COOLED, result("reach", face="z_low", fraction=0.5), ", because the disturbance never falls to 0.5"),
    ],
)
def test_result_without_a_finite_value_is_refused(problem: Json, asked: Json, sentence: str) -> None:
    with pytest.raises(RequestRefused) as refused:
        ask(problem, result("highest", "first"), asked)
    (issue,) = refused.value.issues
    assert (issue.path, issue.code) == (("results", 1), "no-finite-value")
    assert issue.detail.startswith(f'The result "{asked["result"]}" has no finite value, because ')
    assert sentence in issue.detail


def test_flow_that_goes_on_without_end_is_refused() -> None:
    side = result("inflow", face="y_high")
    with pytest.raises(RequestRefused) as refused:
        ask(sight_port_bar(), side)
    assert "because it goes on without end" in refused.value.issues[0].detail
    finite = ask(sight_port_bar(), side | {"x": ["begin", "end"], "z": [0, 100]})
    check(finite["inflow"], 1500 * 0.04 * 0.1)


def test_ratio_to_nothing_at_all_is_refused() -> None:
    with pytest.raises(RequestRefused) as refused:
        ask(
            slab(),
            FLOW,
            HERE,
            result("difference", of="potential", less="potential"),
            result("ratio", of="difference", over="inflow"),
        )
    assert refused.value.issues[0].path == ("results", 3)
    assert "because what it is divided by is zero" in refused.value.issues[0].detail


def test_errors_of_the_solver_point_to_the_result() -> None:
    """A gap that leaves nothing of the face is found when the flow is computed."""
    with pytest.raises(CoreError, match="leaves nothing of the face") as refused:
        ask(sight_port_bar(), HERE, result("inflow", face="z_low", patch="window", edge_gap="30 mm"))
    assert refused.value.field == ("results", 1)


def test_estimates_grow_with_what_is_asked() -> None:
    wanted, known = read(sight_port_bar(), *SOME)
    solution = solve(known.body)
    one, _ = read(sight_port_bar(), SOME[0])
    all_of_them = sum(each.multiplications for each in estimate_results(wanted, solution, relative=None))
    point = sum(each.multiplications for each in estimate_results(one, solution, relative=None))
    assert all_of_them > 10 * point > 0


HERE = result("potential", at=[1, 2, 3])
FLOW = result("inflow", face="x_high")
BOX = {"x": [0, 10]}


def wrong(what: str, pointer: str, sentence: str, *results: Json, problem: Json | None = None) -> Wrong:
    """A wrong request: whether limits hold of such results."""
    limits = [{"result": "potential", "at_most": 1}]
    body = {"problem": problem or sight_port_bar(), "results": list(results), "limits": limits}
    return Wrong(what, "/v1/limits", json.dumps(body).encode(), 422, f"#/results/{pointer}", sentence)


WRONG = [
    wrong("unknown kind", "0/result", 'One of "potential", "gradient", "flux", "mean", "highest", "lowest", "inflow", "flow", "reach", "difference", "ratio" is wanted here.', result("peak")),
    wrong("no kind", "0/result", "The field result is required.", {"name": "a"}),
    wrong("no name", "0/name", "This field is required.", {"result": "highest"}),
    wrong("unknown key", "0/place", "This key is not known here", result("highest", place=[1, 2, 3])),
    wrong("two coordinates", "0/at", "At least 3 entries", result("potential", at=[1, 2])),
    wrong("unknown direction", "0/along", 'One of "x", "y" or "z" is wanted here.', result("flux", at=[1, 2, 3], along="up")),
    wrong("name twice", "2/name", 'Another result is called "potential"; each name is used once.', HERE, FLOW, HERE),
    wrong("outside", "0/at/0", "x = 50 mm lies outside the body, which reaches from 0 to 40 mm.", result("potential", at=[50, 2, 3])),
    wrong("no far side", "0/at/2", "The body has no high side along z, where it does not end; give a length.", result("potential", at=[1, 2, "high"])),
    wrong("no middle", "0/at/2", "The body has no middle along z", result("flux", at=["low", "middle", "middle"])),
    wrong("other unit", "0/at/1", "does not measure length", result("gradient", at=[1, "2 K", 3])),
    wrong("side of nothing", "0/side", "None of the places lies on an interface", result("flux", at=[1, 2, 3], side="above")),
    wrong("face that is not there", "0/face", "has no face z_high", result("mean", face="z_high")),
    wrong("endless mean", "0", "The mean over an endless part is that of the far end; give a finite rectangle.", result("mean", face="x_low")),
    wrong("no such patch", "0/patch", "There is no such patch; the face z_low has the patches 0 to 0.", result("inflow", face="z_low", patch="door")),
    wrong("no such layer", "0/layer", "There is no such layer; the body has no layers.", result("highest", layer=1)),
    wrong("no such layer of a stack", "0/layer", "There is no such layer; the body has the layers 0 to 3.", result("lowest", layer="glue"), problem=plate()),
    wrong("face and box", "0", "Give one of `face`, `layer` and `box` at the most.", result("highest", face="z_low", box=BOX)),
    wrong("patch of no face", "0", "A patch is one of a face; give its `face` as well.", result("highest", patch="window")),
    wrong("intervals of no face", "0", "Intervals belong to a face or a box; give `face`, or put them into `box`.", result("lowest", x=[0, 10])),
    wrong("box outside", "0/box/x", "The interval from 0 to 50 has to have a positive extent and lie between 0 and 40.", result("highest", box={"x": [0, 50]})),
    wrong("box turned round", "0/box/y", "The interval from 20 to 10", result("lowest", box={"y": [20, 10]})),
    wrong("plane of no axis", "0", "Give one length along exactly one axis", result("flow", x=[0, 10])),
    wrong("gap of nothing", "0/edge_gap", "The edge gap is 0 mm; it has to be greater than zero.", result("inflow", face="z_low", edge_gap=0)),
    wrong("fraction of all", "0/fraction", "The number has to be at most 0.999.", result("reach", face="z_low", fraction=1)),
    wrong("reach under a law", "0", "How far a face reaches is told where the conductivity does not vary", result("reach", face="z_low", fraction=0.1), problem=lawful(slab())),
    wrong("reach of a mixed face", "0", "How far a face reaches is told of bodies without mixed faces.", result("reach", face="z_low", fraction=0.1), problem=stub()),
    wrong("difference of nothing", "1/less", 'No result before this one is called "flow".', HERE, result("difference", of="potential", less="flow")),
    wrong("difference of itself", "1/of", 'No result before this one is called "difference".', HERE, result("difference", of="difference", less="potential")),
    wrong("difference of unlike", "2/less", "A heat flow in W cannot be taken off a temperature in degC.", HERE, FLOW, result("difference", of="potential", less="inflow")),
    wrong("difference less a level", "2/less", "A temperature in degC cannot be taken off a difference of temperature in K.", HERE, result("difference", "d", of="potential", less="potential"), result("difference", of="d", less="potential")),
    wrong("ratio of a level", "2/of", "A level in degC has no ratio to anything, since its zero is only agreed on; take a difference of two levels.", HERE, FLOW, result("ratio", of="potential", over="inflow")),
    wrong("no results", "", "", problem=slab()),
]  # fmt: skip
WRONG[-1] = Wrong(**{**WRONG[-1].__dict__, "pointer": "#/results", "sentence": "At least 1 entry"})


@pytest.mark.parametrize("wrong", WRONG, ids=[wrong.name for wrong in WRONG])
async def test_wrong_results_are_refused_with_a_sentence(client: httpx.AsyncClient, wrong: Wrong) -> None:
    await check_wrong(client, wrong)


def test_level_in_kelvin_has_a_ratio() -> None:
    problem = changed(slab("20 degC", "80 degC"), "units/potential", "K")
    wanted, _ = read(problem, HERE, FLOW, result("ratio", of="potential", over="inflow"))
    assert wanted.infos[2].measure.unit == "K/W"


def test_every_field_at_fault_is_told_at_once() -> None:
    with pytest.raises(RequestRefused) as refused:
        read(
            slab(),
            result("potential", at=[-1, "2 K", 99]),
            result("mean", face="z_low", patch=0),
            result("ratio", of="a", over="b"),
        )
    paths = [issue.path[1:] for issue in refused.value.issues]
    assert paths == [(0, "at", 0), (0, "at", 1), (0, "at", 2), (1, "patch"), (2, "of"), (2, "over")]
