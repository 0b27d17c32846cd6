"""Results with names, limits, and questions about numbers on the page."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from playwright.sync_api import Page, expect

from tests.page.acts import answer_now, compute, load_example, press_compute, sent
from tests.page.conftest import DESKTOP, PHONE
from tests.page.test_access import FAULTS_OF_CONTRAST, FAULTS_OF_STRUCTURE

EXAMPLES = Path(__file__).resolve().parents[2] / "openapi_examples"
FILM = "film coefficient of face z high"


# The mean of the brick's readings over its hot side, by the trapezoidal rule: they are bilinear between.
HOT_MEAN = (1480 + 1485 + 1483 + 1488 + 2 * (1492 + 1496 + 1501 + 1494) + 4 * 1540) / 16


def cold_mean(thickness: float, film: float = 14) -> float:
    """The mean of the brick's cold side in degC, in closed form: means follow the field of one dimension."""
    return 45 + (HOT_MEAN - 45) / (1 + film * thickness / 1000 / 2.1)


def add_result(page: Page, what: str, where: str | None = None, **typed: str) -> None:
    """Name a result by what it is and where; typed: further fields by the last part of their ids."""
    page.get_by_role("button", name="Add a result").click()
    card = page.locator("#results-fields fieldset").last
    card.get_by_label("What").select_option(label=what)
    if where is not None:
        card.get_by_label("Where").select_option(label=where)
    for part, text in typed.items():
        card.locator(f"input[id$='-{part}']").fill(text)


def add_number(page: Page, name: str, **typed: str) -> None:
    """Choose a number of the problem by its plain name; typed: its fields by the last part of their ids."""
    page.get_by_role("button", name="Add a number").click()
    card = page.locator("#decision-fields fieldset.patch").last
    card.get_by_label("Which").select_option(label=name)
    for part, text in typed.items():
        card.locator(f"input[id$='-{part}']").fill(text)


def name_brick_results(page: Page) -> None:
    """The mean of a brick's cold side and its heat loss: cheap to compute many times."""
    load_example(page, "hot spot (block")
    add_result(page, "mean temperature of a face or pad", "face z high", name="cold side")
    add_result(page, "heat flow through a plane", position="0", name="loss")


def limit(page: Page, result: str, **sides: str) -> None:
    page.get_by_role("button", name="Add a limit").click()
    card = page.locator("#limits-fields fieldset").last
    card.get_by_label("Result").select_option(label=result)
    for side, text in sides.items():
        card.get_by_label(side.replace("_", " ").capitalize()).fill(text)


def shapes(page: Page, index: int = 0) -> list[dict[str, Any]]:
    """What is drawn over a picture of an answer: bands and lines."""
    picture = page.locator("#decision .chart").nth(index)
    expect(picture.locator(".main-svg").first).to_be_visible()
    found: list[dict[str, Any]] = picture.evaluate("element => element.layout.shapes")
    return found


@pytest.mark.parametrize(
    ("words", "call", "file"),
    [
        ("hold its limits", "limits", "limits_power_module"),
        ("thicknesses and coolings", "decision", "cases_crown_brick"),
        ("A hundred crown bricks", "decision", "studies_crown_bricks"),
        ("what matters", "decision", "sensitivities_sight_port"),
        ("as it is made", "decision", "tolerances_crown_brick"),
        ("how thick", "decision", "sizing_crown_brick"),
        ("whatever its tolerances", "decision", "sizing_crown_brick_tolerances"),
        ("where do its parts go", "decision", "best_values_cold_plate"),
        ("from thermocouples", "decision", "calibration_throat_block"),
        ("heat load from probes", "decision", "calibration_burner_tile"),
    ],
)
def test_examples_ask_what_the_description_asks(page: Page, words: str, call: str, file: str) -> None:
    described = json.loads((EXAMPLES / f"{file}.json").read_text())["request"]
    described = described.get("question", described)
    load_example(page, words)
    expect(page.locator("#status")).to_contain_text("Example loaded")
    shown = sent(page, call)
    for request in (shown, described):
        # The page names the units that are usual, and the quantiles that its picture of a distribution is drawn from.
        del request["problem"]["units"]
        request.pop("quantiles", None)
        request.setdefault("limits", [])
    assert shown == described


def test_limits_from_what_is_typed(page: Page) -> None:
    load_example(page, "hot spot (block")
    add_result(page, "highest temperature in a part", "face z high")
    # Without a name it is called by what it is.
    expect(page.locator("#results-fields input[id$='-name']")).to_have_attribute("placeholder", "highest, z high")
    compute(page)
    sheet = page.locator("#limits-sheet")
    expect(sheet).to_contain_text("531.3095")
    expect(sheet.get_by_role("heading")).to_have_text("Results")
    # Where it is stands beside it.
    expect(sheet).to_contain_text("z = 300 mm")
    limit(page, "highest, z high", at_most="500")
    with page.expect_response("**/v1/limits") as caught:
        compute(page)
    (answered,) = caught.value.json()["limits"]
    expect(sheet).to_contain_text("One limit does not hold")
    assert answered["held"] == "no"
    expect(sheet.get_by_role("row").nth(1)).to_contain_text(f"not heldby {abs(answered['margin']):.6f} K")
    page.get_by_label("Limit 1: At most").fill("550")
    compute(page)
    expect(sheet).to_contain_text("All limits hold")


@pytest.mark.parametrize(
    ("field", "typed", "words"),
    [
        ("limit-0-at-most", "3 kg", "does not measure temperature"),
        ("limit-0-at-least", "600", "no value holds both"),
        ("limit-0-at-most", "", "Give"),
    ],
)
def test_mistake_in_a_limit_stands_beside_its_field(page: Page, field: str, typed: str, words: str) -> None:
    name_brick_results(page)
    limit(page, "cold side", at_most="500")
    page.locator(f"#{field}").fill(typed)
    press_compute(page)
    expect(page.get_by_role("alert")).to_be_visible()
    expect(page.locator("#limits-fields .mistake:visible")).to_contain_text(words)
    expect(page.locator("#limits-fields [aria-invalid]")).to_have_count(1)


def test_numbers_are_chosen_by_plain_names(page: Page) -> None:
    load_example(page, "Power module")
    add_result(page, "highest temperature in a part", "solder")
    page.locator("#question").select_option("sensitivities")
    add_number(page, "thickness of solder")
    add_number(page, "shift of valve A along x")
    add_number(page, "factor on both conductivities of ceramic")
    expect(page.locator("#decision-fields")).to_contain_text("Now 80 µm.")
    pads = "/problem/faces/z_high/inflow/patches/0/x"
    asked = sent(page, "decision")
    assert asked["numbers"] == [
        {"name": "thickness of solder", "at": "/problem/body/layers/1/thickness"},
        {"name": "shift of valve A along x", "shift": [f"{pads}/0", f"{pads}/1"]},
        {"name": "factor on both conductivities of ceramic", "scale": "/problem/body/layers/2/conductivity"},
    ]
    assert asked["results"] == [{"name": "highest, solder", "result": "highest", "layer": "solder"}]
    # A layer that is called otherwise is so in every list at once.
    page.get_by_label("Layer 1: Name").fill("solder film")
    expect(page.get_by_label("Number 1: Which").locator("option:checked")).to_have_text("thickness of solder film")
    # Whoever wants to may type a pointer.
    add_number(page, "a place in the request")
    page.get_by_label("Number 4: Pointer into the request").fill("/problem/nowhere")
    page.get_by_role("button", name="Answer now").click()
    expect(page.locator("#decision-fields .mistake:visible")).to_contain_text('There is no "nowhere"')


def test_bars_rank_what_matters(page: Page) -> None:
    name_brick_results(page)
    page.locator("#question").select_option("sensitivities")
    add_number(page, FILM)
    add_number(page, "surroundings of face z high")
    add_number(page, "thermal conductivity")
    with page.expect_response("**/v1/sensitivities") as caught:
        answer_now(page)
    loss = {one["number"]: one["derivative"] for one in caught.value.json()["derivatives"] if one["result"] == "loss"}
    page.locator("#sensitivities-result").select_option(label="loss")
    bars = page.locator("#decision .chart")
    expect(bars.locator(".main-svg").first).to_be_visible()
    drawn = bars.evaluate("({ data: [{ x, y }] }) => y.map((name, index) => [name.replaceAll('<br>', ' '), x[index]])")
    # A hundredth of 14 W/(m^2 K) and of 2.1 W/(m K), but one kelvin; the strongest stands last, on top.
    changes = {FILM: 0.14, "surroundings of face z high": 1, "thermal conductivity": 0.021}
    effects = sorted((change * loss[number] for number, change in changes.items()), key=abs)
    assert [size for _, size in drawn] == pytest.approx(effects)
    assert drawn[-1][0] == "thermal conductivity 1 %, 0.021 W/(m K) more"


def test_every_combination_of_two_numbers_is_drawn_as_a_map(page: Page) -> None:
    name_brick_results(page)
    limit(page, "cold side", at_most="500")
    page.locator("#question").select_option("cases")
    add_number(page, "length along z", values="200; 300; 400")
    add_number(page, FILM, values="10 to 20 in 3")
    answer_now(page)
    expected = [[cold_mean(thickness, film) for thickness in (200, 300, 400)] for film in (10, 15, 20)]
    held = sum(value <= 500 for row in expected for value in row)
    expect(page.locator("#decision")).to_contain_text(f"Holds for certain in {held} of 9 cases")
    page.locator("#cases-shown").select_option(label="cold side over both")
    drawn = page.locator("#decision .chart")
    expect(drawn.locator(".main-svg").first).to_be_visible()
    tinted, _, heavy, _ = drawn.evaluate("({ data }) => data")
    assert [value for row in tinted["z"] for value in row] == pytest.approx(
        [value for row in expected for value in row]
    )
    assert (heavy["contours"]["start"], heavy["contours"]["end"]) == (500, 500)


def test_sizing_is_drawn_with_its_limit_and_where_it_holds(page: Page) -> None:
    name_brick_results(page)
    limit(page, "cold side", at_most="500")
    page.locator("#question").select_option("sizing")
    add_number(page, "length along z", low="150", high="600")
    with page.expect_response("**/v1/sizing") as caught:
        answer_now(page)
    (interval,) = caught.value.json()["sizing"]["intervals"]
    edges = [interval[end]["value"] for end in ("low", "high")]
    assert cold_mean(edges[0]) == pytest.approx(500, abs=1e-6)
    assert edges[1] == 600
    bands = [[shape["x0"], shape["x1"]] for shape in shapes(page) if shape["type"] == "rect"]
    assert bands == [edges]
    assert [shape["y0"] for shape in shapes(page) if shape["type"] == "line" and shape["y0"] == shape["y1"]] == [500]
    curve = page.locator("#decision .chart").evaluate("({ data: [{ x, y }] }) => ({ x, y })")
    assert curve["y"] == pytest.approx([cold_mean(place) for place in curve["x"]])
    expect(page.locator("#decision")).to_contain_text("All limits hold in one interval")
    # After a change the answer is marked as that of an earlier question.
    page.get_by_label("Limit 1: At most").fill("501")
    expect(page.locator("#decision-stale")).to_be_visible()


def test_limits_that_exclude_each_other_are_named(page: Page) -> None:
    name_brick_results(page)
    # Of the range up to 600 mm the cold side has less than 400 degC beyond 463 mm, and the loss 170 W below 320 mm.
    limit(page, "cold side", at_most="400")
    limit(page, "loss", at_least="170")
    page.locator("#question").select_option("sizing")
    add_number(page, "length along z", low="150", high="600", count="9")
    answer_now(page)
    decision = page.locator("#decision")
    expect(decision).to_contain_text("Nowhere in the range do all limits hold")
    expect(decision).to_contain_text("Each of them holds elsewhere in the range, but not all at once.")


def test_sizing_tells_the_corner_of_tolerances_that_ends_an_interval(page: Page) -> None:
    name_brick_results(page)
    limit(page, "cold side", at_most="500")
    page.locator("#question").select_option("sizing")
    add_number(page, "length along z", low="150", high="600", count="5")
    page.get_by_label("Number 1: Tolerance").select_option("even")
    page.get_by_label("Number 1: Plus and minus").fill("2")
    add_number(page, FILM)
    page.get_by_label("Number 2: Tolerance").select_option("relative")
    page.get_by_label("Number 2: Part, such as 0.05").fill("0.1")
    with page.expect_response("**/v1/sizing") as caught:
        answer_now(page)
    (interval,) = caught.value.json()["sizing"]["intervals"]
    # A thinner brick that is cooled less is the hottest.
    assert cold_mean(interval["low"]["value"] - 2, 12.6) == pytest.approx(500, abs=1e-6)
    decision = page.locator("#decision")
    expect(decision).to_contain_text("All limits hold in one interval, with all tolerances")
    expect(decision.get_by_role("table").first).to_contain_text(f"{FILM} = 12.6 W/(m² K)")


def test_tolerances_are_drawn_against_the_limit(page: Page) -> None:
    name_brick_results(page)
    limit(page, "cold side", at_most="540")
    page.locator("#question").select_option("tolerances")
    add_number(page, FILM)
    page.get_by_label("Number 1: Tolerance").select_option("relative")
    page.get_by_label("Number 1: Part, such as 0.05").fill("0.25")
    page.get_by_label("Number 1: Spread").select_option("uniform")
    page.get_by_label("Samples").select_option("random")
    page.get_by_label("How many").fill("100")
    with page.expect_response("**/v1/tolerances") as caught:
        answer_now(page)
    answer = caught.value.json()
    (held,) = answer["limits"]
    assert held["held"] == answer["all_held"] == "no"
    expect(page.locator("#decision")).to_contain_text("One limit does not hold in the worst case")
    expect(page.locator("#decision")).to_contain_text(f"{100 * held['probability']['value']:.3g} %")
    lines = [[shape["x0"] for shape in shapes(page, index)] for index in (0, 1)]
    assert lines == [[540], [540]]
    pieces = (
        page.locator("#decision .chart")
        .nth(1)
        .evaluate("({ data: [{ width, y }] }) => width.map((wide, index) => wide * y[index])")
    )
    # The areas are parts of the samples, one piece of them cut at the limit.
    assert sum(pieces) == pytest.approx(1)
    stack = answer["stack_ups"][0]
    worst = page.locator("#decision .chart").first.evaluate(
        "({ data }) => data.find(({ y }) => y[0] === 'worst case,<br>computed').x"
    )
    assert worst == [stack["lowest"]["value"], stack["highest"]["value"]]


def test_best_values_are_shown_before_and_after(page: Page) -> None:
    name_brick_results(page)
    limit(page, "cold side", at_most="500")
    page.locator("#question").select_option("best-values")
    add_number(page, "length along z", low="150", high="600")
    page.locator("#best-goal").get_by_label("loss").check()
    page.get_by_label("Best is").select_option("maximise")
    with page.expect_response("**/v1/best-values") as caught:
        answer_now(page)
    best = caught.value.json()["best_values"]["best"]
    assert [one["binds"] for one in best["limits"]] == [True]
    decision = page.locator("#decision")
    expect(decision).to_contain_text("it binds")
    assert cold_mean(best["numbers"][0]["value"]) == pytest.approx(500, abs=1e-4)
    before, after = decision.locator(".chart").evaluate("({ data }) => [data[1].x[0], data[2].x[0]]")
    assert (before, after) == (caught.value.json()["results"][1]["value"], best["goal"]["value"])


def test_readings_are_taken_over_and_calibrate(page: Page) -> None:
    load_example(page, "from thermocouples")
    expect(page.locator("#status")).to_contain_text("Example loaded")
    page.get_by_text("Places and readings from a table").click()
    page.get_by_label("Table").fill("name;x;y;z;read;u\ncouple 6;60;40;50;147.2;0.8\n")
    page.get_by_role("button", name="Take over").click()
    asked = sent(page, "decision")
    assert asked["results"][-1] == {"name": "couple 6", "result": "potential", "at": [60, 40, 50]}
    assert asked["readings"][-1] == {"result": "couple 6", "value": 147.2, "standard_uncertainty": 0.8}
    with page.expect_response("**/v1/calibration") as caught:
        answer_now(page)
    readings = caught.value.json()["calibration"]["readings"]
    spots = page.locator("#decision .chart").first
    expect(spots.locator(".main-svg").first).to_be_visible()
    drawn = spots.evaluate("({ data }) => data.flatMap(({ x }) => x)")
    assert sorted(drawn) == sorted(reading["normalised"] for reading in readings)


def test_numbers_that_cannot_be_told_apart_are_named(page: Page) -> None:
    load_example(page, "from thermocouples")
    expect(page.locator("#status")).to_contain_text("Example loaded")
    answer = json.loads((EXAMPLES / "calibration_throat_block.json").read_text())["answer"]
    answer["calibration"]["known_together"] = [
        {
            "numbers": ["film", "conductivity"],
            "form": "product",
            "factors": [1, -1],
            "expression": "film / conductivity",
            "value": 13.88,
            "standard_uncertainty": 0.12,
            "are_told": False,
            "holds": "near",
            "near": [44.7, 3.22],
            "places": [],
        }
    ]
    page.route("**/v1/calibration", lambda route: route.fulfill(json=answer))
    answer_now(page)
    expect(page.locator("#decision")).to_contain_text("film and conductivity cannot be told apart")
    expect(page.locator("#decision")).to_contain_text("film / conductivity = 13.88 ± 0.12")
    expect(page.locator("#decision")).to_contain_text("near film = 44.7 and conductivity = 3.22")


@pytest.mark.parametrize("watched", [PHONE, DESKTOP], indirect=True, ids=["phone", "desk"])
def test_questions_are_for_everyone(page: Page) -> None:
    name_brick_results(page)
    limit(page, "cold side", at_most="500")
    compute(page)
    page.locator("#question").select_option("sizing")
    add_number(page, "length along z", low="150", high="600")
    answer_now(page)
    expect(page.locator("#decision-title")).to_be_focused()
    expect(page.locator("#decision .chart .main-svg").first).to_be_visible()
    for call in ("cases", "sensitivities", "tolerances", "best-values", "calibration", "sizing"):
        page.locator("#question").select_option(call)
        page.evaluate("for (const details of document.querySelectorAll('details')) details.open = true")
        assert page.evaluate(FAULTS_OF_STRUCTURE) == []
        assert page.evaluate("document.documentElement.scrollWidth <= window.innerWidth")
    assert page.evaluate(FAULTS_OF_CONTRAST)["faults"] == []
