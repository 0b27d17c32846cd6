"""Tolerances over HTTP: stack-ups by hand, samples against exact distributions, and what is refused."""

from __future__ import annotations

import math
from typing import Any

import httpx
import numpy as np
import pytest
from scipy import stats

from service.models.tolerances_answer import TolerancesAnswer
from service.settings import Settings
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import Json, slab

pytestmark = pytest.mark.anyio

# A slab of 25 mm between 20 and 80 degC, 130 W/(m K): the middle is their mean, 312 kW/m^2 flow through it.
MIDDLE: Json = {"name": "middle", "result": "potential", "at": ["middle", "middle", "middle"]}
FLUX: Json = {"name": "flux", "result": "flux", "at": ["middle", "middle", 10], "along": "z"}
LOW: Json = {"name": "low", "at": "/problem/faces/z_low/value"}
HIGH: Json = {"name": "high", "at": "/problem/faces/z_high/value"}
THICKNESS: Json = {"name": "thickness", "at": "/problem/body/size/z"}


def question(*numbers: Json, results: tuple[Json, ...] = (MIDDLE,), **more: Any) -> Json:
    """A question about the slab."""
    return {"problem": slab(20, 80), "results": list(results), "numbers": list(numbers)} | more


async def tolerances(client: httpx.AsyncClient, asked: Json) -> Json:
    """The answer to a question about tolerances."""
    answer = await client.post("/v1/tolerances", json=asked)
    assert answer.status_code == 200, answer.text
    TolerancesAnswer.model_validate(answer.json())
    found: Json = answer.json()
    return found


async def test_stack_up_of_a_linear_result(client: httpx.AsyncClient) -> None:
    """The middle is half of each end: 50 with + (1.5 + 0.4) and - (0.5 + 0.4) in the worst case."""
    numbers = (LOW | {"plus": "3 K", "minus": 1}, HIGH | {"plus_minus": 0.8}, THICKNESS | {"relative": 0.02})
    found = await tolerances(client, question(*numbers, limits=[{"result": "middle", "at_most": 52}]))
    assert [(number["plus"], number["minus"]) for number in found["numbers"]] == [(3, 1), (0.8, 0.8), (0.5, 0.5)]
    (stack_up,) = found["stack_ups"]
    assert stack_up["nominal"] == pytest.approx(50, rel=1e-7)
    assert (stack_up["first_order_low"], stack_up["first_order_high"]) == (pytest.approx(49.1), pytest.approx(51.9))
    # The middle of 19 to 23 is 21; halves of 2 and 0.8, by half.
    assert stack_up["middle"] == pytest.approx(50.5, rel=1e-7)
    assert stack_up["root_sum_square"] == pytest.approx(math.hypot(1, 0.4), rel=1e-7)
    assert stack_up["standard_deviation"] == pytest.approx(math.hypot(1, 0.4) / 3, rel=1e-7)
    highest = {number["name"]: number["value"] for number in stack_up["highest"]["numbers"]}
    assert (highest["low"], highest["high"]) == (23, 80.8)
    assert stack_up["highest"]["value"] == pytest.approx(51.9, abs=1e-7)
    assert stack_up["bend"] == pytest.approx(0, abs=1e-6)
    assert [entry["number"] for entry in stack_up["contributions"]] == ["low", "high", "thickness"]
    low, high, thickness = stack_up["contributions"]
    assert (low["low"], low["high"], high["low"], high["high"]) == (
        pytest.approx(0.5), pytest.approx(1.5), pytest.approx(0.4), pytest.approx(0.4)
    )  # fmt: skip
    assert (low["at_low_end"], low["at_high_end"]) == (pytest.approx(49.5), pytest.approx(51.5))
    assert low["square_share"] == pytest.approx(1 / 1.16, rel=1e-7)
    assert (thickness["square_share"], thickness["unit"]) == (pytest.approx(0, abs=1e-12), "K/mm")
    (limit,) = found["limits"]
    assert limit["first_order_margin"] == pytest.approx(0.1, abs=1e-6)
    assert limit["root_sum_square_margin"] == pytest.approx(1.5 - math.hypot(1, 0.4), abs=1e-6)
    assert limit["margin"] == pytest.approx(0.1, abs=1e-6)
    assert abs(limit["margin"] - 0.1) <= limit["error_bound"] + 1e-12
    assert (limit["held"], limit["root_sum_square_held"], found["all_held"]) == ("yes", "yes", "yes")
    assert found["warnings"] == found["failures"] == []
    assert "probability" not in limit
    assert "propagation" not in found


def codes(found: Json) -> list[tuple[str, str]]:
    """Codes of warnings and where they point."""
    return [(remark["code"], remark["where"]) for remark in found["warnings"]]


async def test_what_bends_is_computed(client: httpx.AsyncClient) -> None:
    """The flux goes as 1 / thickness: 20 % off is 62 kW/m^2 of 312 to first order, 78 and 52 in truth.

    With a limit between the two the safe verdict leads, and the other is named.
    """
    limits = [{"result": "flux", "at_least": "-380 kW/m^2"}]
    found = await tolerances(client, question(THICKNESS | {"plus_minus": 5}, results=(FLUX,), limits=limits))
    (stack_up,) = found["stack_ups"]
    assert stack_up["nominal"] == pytest.approx(-312000)
    assert (stack_up["first_order_low"], stack_up["first_order_high"]) == (
        pytest.approx(-374400), pytest.approx(-249600)
    )  # fmt: skip
    assert (stack_up["lowest"]["value"], stack_up["highest"]["value"]) == (
        pytest.approx(-390000), pytest.approx(-260000)
    )  # fmt: skip
    assert stack_up["bend"] == pytest.approx(390000 - 374400)
    (limit,) = found["limits"]
    assert (limit["held"], limit["margin"]) == ("no", pytest.approx(-10000))
    assert limit["first_order_margin"] == pytest.approx(5600)
    # 5.6 is within the 15.6 that first order is off.
    assert limit["root_sum_square_held"] == "undecided"
    assert found["all_held"] == "no"
    assert codes(found) == [
        ("bends", "#/stack_ups/0"), ("verdicts-differ", "#/limits/0"), ("undecided", "#/limits/0")
    ]  # fmt: skip


def plate(left: float) -> Json:
    """A plate of 60 mm by 30 by 4 under a film, with a device of 10 mm and 40 W whose left side is at `left`."""
    problem = slab(0, 0)
    problem["body"] = {"size": {"x": 60, "y": 30, "z": 4}, "conductivity": 180}
    device = {"name": "device", "x": [left, left + 10], "y": [10, 20], "flow": 40}
    inflow = {"map": "patches", "background": 0, "patches": [device]}
    film = {"condition": "film", "coefficient": 3000, "ambient": 30}
    problem["faces"] |= {"z_low": {"condition": "flux", "inflow": inflow}, "z_high": film}
    return problem


DEVICE: Json = {"name": "device", "result": "mean", "face": "z_low", "patch": "device"}
PLACE: Json = {"name": "place", "shift": [f"/problem/faces/z_low/inflow/patches/0/x/{end}" for end in (0, 1)]}
FILM: Json = {"name": "film", "at": "/problem/faces/z_high/coefficient", "relative": 0.05}


async def test_part_in_the_middle_is_worst_at_the_edges(client: httpx.AsyncClient) -> None:
    """Where the slope is nothing by symmetry the worst is what the cases at the ends say, not the nominal."""
    limits = [{"result": "device", "at_most": 52}]
    asked = question(PLACE | {"plus_minus": 24}, FILM, results=(DEVICE,), limits=limits) | {"problem": plate(25)}
    found = await tolerances(client, asked)
    rows = [[-24, 2850], [24, 2850], [0, 2850], [0, 3150]]
    numbers = [{"name": "place", "shift": PLACE["shift"]}, {"name": "film", "at": FILM["at"]}]
    table = {"problem": plate(25), "results": [DEVICE], "numbers": numbers, "cases": {"table": "list", "rows": rows}}
    cases = (await client.post("/v1/cases", json=table)).json()["columns"][0]["values"]
    (stack_up,) = found["stack_ups"]
    assert stack_up["highest"]["value"] == pytest.approx(max(cases), abs=1e-6)
    assert stack_up["lowest"]["value"] == pytest.approx(min(cases), abs=1e-6)
    assert [contribution["number"] for contribution in stack_up["contributions"]] == ["place", "film"]
    (limit,) = found["limits"]
    assert (limit["held"], limit["margin"]) == ("no", pytest.approx(52 - max(cases), abs=1e-6))
    assert limit["first_order_margin"] > 2
    assert {code for code, _ in codes(found)} == {"bends", "verdicts-differ", "undecided"}


async def test_shares_of_what_bends_from_no_slope_are_not_told(client: httpx.AsyncClient) -> None:
    asked = question(PLACE | {"plus_minus": 24}, results=(DEVICE,)) | {"problem": plate(25)}
    found = await tolerances(client, asked)
    (contribution,) = found["stack_ups"][0]["contributions"]
    assert (contribution["square_share"], contribution["variance_share"]) == (None, None)
    assert codes(found) == [("bends", "#/stack_ups/0")]
    assert "all_held" not in found


async def test_result_that_does_not_vary(client: httpx.AsyncClient) -> None:
    """What flows in flows out, whatever the film is: no shares and no indices of it."""
    loss = {"name": "loss", "result": "inflow", "face": "z_high"}
    asked = question(FILM, results=(loss,), variance_indices={"count": 16}) | {"problem": plate(20)}
    found = await tolerances(client, asked)
    (contribution,) = found["stack_ups"][0]["contributions"]
    assert (contribution["square_share"], contribution["variance_share"]) == (None, None)
    (indices,) = found["variance_indices"]["results"][0]["numbers"]
    assert indices["total"] == {"value": None, "low": None, "high": None}
    assert codes(found) == [("does-not-vary", "#/stack_ups/0")]


async def test_zone_that_leaves_what_is_possible(client: httpx.AsyncClient) -> None:
    """A thickness of 25 mm give or take 30: the number and the end are named, and no limit is said to hold."""
    limits = [{"result": "middle", "at_most": 90}]
    found = await tolerances(client, question(THICKNESS | {"plus_minus": 30}, limits=limits))
    (limit,) = found["limits"]
    assert (limit["held"], found["all_held"]) == ("undecided", "undecided")
    (failure,) = found["failures"]
    # The lower end; half-way, at 10 mm, there is a slab.
    assert failure["count"] == 1
    assert found["stack_ups"][0]["contributions"][0]["at_low_end"] is None
    remark = found["warnings"][0]
    assert (remark["code"], remark["where"]) == ("zone-without-result", "#/numbers/0")
    assert '"thickness" at the lower end of its tolerance zone, -5 mm' in remark["message"]


async def test_margin_within_its_bound_is_undecided_with_advice(client: httpx.AsyncClient) -> None:
    """The middle of 20 + 1 and 80 against a limit of 50.5 degC."""
    limits = [{"result": "middle", "at_most": 50.5}]
    found = await tolerances(client, question(LOW | {"plus_minus": 1}, limits=limits))
    assert found["limits"][0]["held"] == "undecided"
    assert ("undecided", "#/limits/0") in codes(found)
    assert "accuracy" in found["warnings"][0]["message"]


async def test_samples_beyond_the_zones_are_named(client: httpx.AsyncClient) -> None:
    """Half of a zone is one standard deviation: one sample of three lies outside."""
    distribution = {"shape": "normal", "sigmas": 1}
    asked = question(LOW | {"plus_minus": 1, "distribution": distribution}, samples={"method": "random", "count": 50})
    assert codes(await tolerances(client, asked)) == [("samples-beyond", "#/propagation/results/0")]


async def test_correlations_add_up_or_cancel(client: httpx.AsyncClient) -> None:
    numbers = (LOW | {"plus_minus": 3}, HIGH | {"plus_minus": 3})
    for coefficient, expected in ((1, 3), (-1, 0), (0.28, math.sqrt(2 * 1.5**2 * 1.28))):
        correlations = [{"numbers": ["low", "high"], "coefficient": coefficient}]
        found = await tolerances(client, question(*numbers, correlations=correlations))
        # Rounding of the slopes is squared at a coefficient of -1.
        assert found["stack_ups"][0]["root_sum_square"] == pytest.approx(expected, rel=1e-7, abs=1e-6)


@pytest.mark.parametrize(
    "samples",
    [
        {"method": "random", "count": 200, "seed": 3},
        {"method": "sobol", "count": 32, "replicates": 6, "seed": 3},
        {"method": "latin_hypercube", "count": 30, "replicates": 6, "seed": 3},
    ],
    ids=lambda samples: str(samples["method"]),
)
async def test_samples_of_a_linear_result_follow_its_distribution(client: httpx.AsyncClient, samples: Json) -> None:
    """Half of two normal ends of deviations 1 and 2: normal about 50."""
    numbers = (
        LOW | {"distribution": {"shape": "normal", "standard_deviation": "1 K"}},
        HIGH | {"plus_minus": 6},
    )
    limits = [{"result": "middle", "at_most": 52}, {"result": "middle", "at_least": 49}]
    asked = question(*numbers, limits=limits, samples=samples, quantiles=[0.1, 0.5], confidence=0.999)
    found = await tolerances(client, asked)
    exact = stats.norm(50, math.sqrt(5) / 2)
    (spread,) = found["propagation"]["results"]
    inside = [
        spread["mean"] | {"exact": 50.0},
        spread["standard_deviation"] | {"exact": exact.std()},
        spread["quantiles"][0] | {"exact": exact.ppf(0.1)},
        spread["quantiles"][1] | {"exact": 50.0},
        found["limits"][0]["probability"] | {"exact": exact.cdf(52)},
        found["limits"][1]["probability"] | {"exact": exact.sf(49)},
        found["propagation"]["all_limits"] | {"exact": exact.cdf(52) - exact.cdf(49)},
    ]
    for entry in inside:
        # Few samples do not tell an end of a quantile far out.
        low, high = (far if entry[end] is None else entry[end] for end, far in (("low", -math.inf), ("high", math.inf)))
        assert low <= entry["exact"] <= high, entry
        assert low <= entry["value"] <= high
    assert all(entry["low"] is not None and entry["high"] is not None for entry in (*inside[:2], *inside[3:]))
    count = samples["count"] * samples.get("replicates", 1)
    assert found["propagation"]["case_count"] == count
    # The derivatives, four places of each number, and the corners.
    assert found["case_count"] == 1 + 2 * 6 + 2 * 4 + 4 + count
    assert found["propagation"]["failures"] == []
    again = await tolerances(client, asked | {"quantiles": [0.5]})
    assert again["propagation"]["results"][0]["mean"] == spread["mean"]


async def test_certain_limits_keep_an_open_interval(client: httpx.AsyncClient) -> None:
    samples = {"method": "sobol", "count": 8, "replicates": 4}
    asked = question(LOW | {"plus_minus": 1}, limits=[{"result": "middle", "at_most": 99}], samples=samples)
    found = await tolerances(client, asked)
    probability = found["limits"][0]["probability"]
    assert (probability["value"], probability["high"]) == (1, 1)
    assert probability["low"] == pytest.approx(0.025 ** (1 / 32))
    # 2.5 % of 32 are none: the samples do not tell the outer quantiles.
    plain = await tolerances(client, asked | {"samples": {"method": "random", "count": 32}})
    first, _, last = plain["propagation"]["results"][0]["quantiles"]
    assert (first["low"], last["high"]) == (None, None)


async def test_failed_cases_are_counted(client: httpx.AsyncClient) -> None:
    """A thickness of 25 mm give or take 20 is no thickness in one case of nine or so."""
    distribution = {"shape": "normal", "standard_deviation": 20}
    found = await tolerances(
        client,
        question(
            THICKNESS | {"plus_minus": 1, "distribution": distribution},
            limits=[{"result": "middle", "at_most": 60}],
            samples={"method": "random", "count": 200, "seed": 1},
        ),
    )
    (failure,) = found["propagation"]["failures"]
    assert stats.binom.ppf(1e-4, 200, stats.norm.cdf(-1.25)) <= failure["count"]
    assert failure["count"] <= stats.binom.ppf(1 - 1e-4, 200, stats.norm.cdf(-1.25))
    assert failure["message"].startswith("/problem/body/size/z")
    probability = found["limits"][0]["probability"]
    # Of what has results all hold; the others might not.
    assert (probability["value"], probability["high"]) == (1, 1)
    assert probability["low"] < 1 - failure["count"] / 200


async def test_variance_indices_of_a_product(client: httpx.AsyncClient) -> None:
    """The flux k dU / L: to first order, and indices that add up to one but for what both do together."""
    numbers = (
        HIGH | {"plus_minus": 30, "distribution": {"shape": "uniform"}},
        {"name": "k", "scale": "/problem/body/conductivity", "plus_minus": 0.5, "distribution": {"shape": "uniform"}},
    )
    found = await tolerances(client, question(*numbers, results=(FLUX,), variance_indices={"count": 256, "seed": 2}))
    # q = c a b with a and b uniform about 1 with deviations s = 0.5 / sqrt 3 both: V = (1 + s^2)^2 - 1.
    square = 0.25 / 3
    first = square / ((1 + square) ** 2 - 1)
    (indices,) = found["variance_indices"]["results"]
    for number in indices["numbers"]:
        assert number["first"]["low"] <= first <= number["first"]["high"]
        assert number["total"]["low"] <= 1 - first <= number["total"]["high"]
        assert number["total"]["value"] == pytest.approx(1 - first, abs=0.05)
    assert found["variance_indices"]["case_count"] == 256 * 4
    shares = {entry["number"]: entry["variance_share"] for entry in found["stack_ups"][0]["contributions"]}
    assert shares == {"high": pytest.approx(0.5), "k": pytest.approx(0.5)}


SHAPES: list[tuple[Json, float, float]] = [
    ({"plus": 3, "minus": 1}, 21.0, 2 / 3),
    ({"plus": 3, "minus": 1, "distribution": {"shape": "normal", "sigmas": 2}}, 21.0, 1.0),
    ({"plus": 3, "minus": 1, "distribution": {"shape": "uniform"}}, 21.0, 4 / math.sqrt(12)),
    # (a^2 + b^2 + c^2 - ab - ac - bc) / 18 with 19, 20 and 23.
    ({"plus": 3, "minus": 1, "distribution": {"shape": "triangular"}}, 62 / 3, math.sqrt(13 / 18)),
    (
        {"plus_minus": 2, "distribution": {"shape": "truncated_normal", "standard_deviation": 2}},
        20.0,
        2 * math.sqrt(0.2911250947),
    ),
    ({"distribution": {"shape": "normal", "standard_deviation": 0.7}}, 20.0, 0.7),
    (
        {"distribution": {"shape": "quantiles", "values": [18, 20, 24], "probabilities": [0, 0.5, 1]}},
        20.5,
        math.sqrt((4 + 16) / 24 + (19**2 + 22**2) / 2 - 20.5**2),
    ),
]


@pytest.mark.parametrize(("spread", "mean", "deviation"), SHAPES)
async def test_distributions_are_read(client: httpx.AsyncClient, spread: Json, mean: float, deviation: float) -> None:
    (number,) = (await tolerances(client, question(LOW | spread)))["numbers"]
    assert (number["mean"], number["standard_deviation"]) == (pytest.approx(mean), pytest.approx(deviation))


async def test_zone_of_a_deviation_or_of_quantiles(client: httpx.AsyncClient) -> None:
    spreads: list[Json] = [
        {"distribution": {"shape": "normal", "standard_deviation": 2, "sigmas": 2.5}},
        {"distribution": {"shape": "quantiles", "values": ["290.15 K", 26], "probabilities": [0, 1]}},
    ]
    found = [(await tolerances(client, question(LOW | spread)))["numbers"][0] for spread in spreads]
    zones = [(number["plus"], number["minus"]) for number in found]
    assert zones == [(5, 5), (pytest.approx(6), pytest.approx(3))]


async def test_lognormal_numbers_are_positive(client: httpx.AsyncClient) -> None:
    """Mean 1, deviation 1: a normal one would be negative in one case of six, and fail."""
    conductivity = {
        "name": "k",
        "scale": "/problem/body/conductivity",
        "distribution": {"shape": "lognormal", "standard_deviation": 1, "sigmas": 0.5},
    }
    samples = {"method": "random", "count": 100}
    found = await tolerances(client, question(conductivity, results=(FLUX,), samples=samples))
    assert found["propagation"]["failures"] == []
    assert found["propagation"]["results"][0]["highest"] < 0


@pytest.mark.parametrize(
    ("change", "pointer"),
    [
        ({"numbers": [LOW]}, "#/numbers/0"),
        ({"numbers": [LOW | {"plus_minus": 1, "plus": 2}]}, "#/numbers/0"),
        ({"numbers": [LOW | {"distribution": {"shape": "uniform"}}]}, "#/numbers/0"),
        ({"numbers": [LOW | {"plus_minus": 0}]}, "#/numbers/0"),
        ({"numbers": [LOW | {"plus_minus": 1e-30}]}, "#/numbers/0"),
        (
            {"numbers": [THICKNESS | {"distribution": {"shape": "lognormal", "standard_deviation": "1 km"}}]},
            "#/numbers/0/distribution",
        ),
        ({"numbers": [LOW | {"plus_minus": -1}]}, "#/numbers/0/plus_minus"),
        ({"numbers": [LOW | {"plus_minus": "1 mm"}]}, "#/numbers/0/plus_minus"),
        ({"numbers": [LOW | {"relative": 0.1}]}, "#/numbers/0/relative"),
        ({"numbers": [THICKNESS | {"relative": -0.1}]}, "#/numbers/0/relative"),
        ({"numbers": [LOW | {"plus_minus": 1, "distribution": {"shape": "lognormal"}}]}, "#/numbers/0/distribution"),
        (
            {"numbers": [LOW | {"distribution": {"shape": "normal", "standard_deviation": 0}}]},
            "#/numbers/0/distribution/standard_deviation",
        ),
        (
            {"numbers": [LOW | {"distribution": {"shape": "quantiles", "values": [22, 19], "probabilities": [0, 1]}}]},
            "#/numbers/0/distribution/values",
        ),
        (
            {"numbers": [LOW | {"distribution": {"shape": "quantiles", "values": [21, 22], "probabilities": [0, 1]}}]},
            "#/numbers/0/distribution/values",
        ),
        (
            {"numbers": [LOW | {"distribution": {"shape": "quantiles", "values": [1, 2], "probabilities": [0.1, 1]}}]},
            "#/numbers/0/distribution",
        ),
        ({"correlations": [{"numbers": ["low", "width"], "coefficient": 0.5}]}, "#/correlations/0/numbers"),
        ({"correlations": [{"numbers": ["low", "low"], "coefficient": 0.5}]}, "#/correlations/0/numbers"),
        ({"correlations": [{"numbers": ["low", "high"], "coefficient": 1.5}]}, "#/correlations/0/coefficient"),
        (
            {"correlations": [{"numbers": ["low", "high"], "coefficient": c} for c in (0.5, 0.4)]},
            "#/correlations/1/numbers",
        ),
        (
            {
                "correlations": [
                    {"numbers": [first, second], "coefficient": c}
                    for first, second, c in (
                        ("low", "high", 0.9),
                        ("high", "thickness", 0.9),
                        ("low", "thickness", -0.9),
                    )
                ]
            },
            "#/correlations",
        ),
        (
            {
                "correlations": [{"numbers": ["low", "high"], "coefficient": 0.5}],
                "variance_indices": {"count": 16},
            },
            "#/variance_indices",
        ),
        ({"samples": {"method": "sobol", "count": 100}}, "#/samples"),
        ({"variance_indices": {"count": 100}}, "#/variance_indices"),
        ({"limits": [{"result": "edge", "at_most": 50}]}, "#/limits/0/result"),
        ({"quantiles": [1]}, "#/quantiles/0"),
    ],
)
async def test_mistakes_are_pointed_at(client: httpx.AsyncClient, change: Json, pointer: str) -> None:
    asked = question(*(number | {"plus_minus": 1} for number in (LOW, HIGH, THICKNESS))) | change
    document = check_problem_document(await client.post("/v1/tolerances", json=asked), 422)
    assert pointers(document) == [pointer]


async def test_cases_are_counted_before_they_are_computed(settings: Settings) -> None:
    """Derivatives 49 + 10 a number, the worst case, samples, and the base sample times two more than numbers."""
    asked = question(
        LOW | {"plus_minus": 1},
        samples={"method": "latin_hypercube", "count": 100, "replicates": 5},
        variance_indices={"count": 64},
    )
    async with open_client(settings.model_copy(update={"cases": 700})) as client:
        document = check_problem_document(await client.post("/v1/tolerances", json=asked), 422)
    assert document["estimate"] == 59 + (4 + 2 + 4) + 500 + 64 * 3


async def test_kink_is_worse_on_both_sides(client: httpx.AsyncClient) -> None:
    """The hottest of both ends of a slab at one level rises whichever is raised, and lowers with neither alone."""
    problem = slab(50, 50)
    hottest = {"name": "hottest", "result": "highest"}
    asked = question(LOW | {"plus_minus": 2}, results=(hottest,)) | {"problem": problem}
    found = await tolerances(client, asked)
    (stack_up,) = found["stack_ups"]
    (contribution,) = stack_up["contributions"]
    assert not contribution["smooth"]
    np.testing.assert_allclose([contribution["low"], contribution["high"]], [0, 2], atol=1e-6)
    assert (stack_up["lowest"]["value"], stack_up["highest"]["value"]) == (pytest.approx(50), pytest.approx(52))
