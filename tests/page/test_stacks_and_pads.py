"""Stacks, axes without ends, pads, faces with several conditions and resistances on the page."""

from __future__ import annotations

import csv
import io
import json
import re
from pathlib import Path

import pytest
from playwright.sync_api import Page, expect

from tests.page.acts import compute, load_example, press_compute, sent
from tests.page.conftest import DESKTOP, PHONE
from tests.page.test_access import FAULTS_OF_CONTRAST, FAULTS_OF_STRUCTURE

EXAMPLES = Path(__file__).resolve().parents[2] / "openapi_examples"


@pytest.mark.parametrize(
    ("words", "call", "file"),
    [
        ("cold side glows", "fields", "fields_glowing_brick"),
        ("Power module", "pads", "pads_power_module"),
        ("Thermal probes", "pads", "pads_floor_slab"),
        ("Bus-bar", "flows", "flux_totals_bus_bar"),
    ],
)
def test_examples_are_those_of_the_description(page: Page, words: str, call: str, file: str) -> None:
    load_example(page, words)
    described = json.loads((EXAMPLES / f"{file}.json").read_text())["request"]["problem"]
    shown = sent(page, call)["problem"]
    assert {**shown, "units": None} == {**described, "units": None}


def test_section_through_a_stack_shows_both_sides_of_its_interfaces(page: Page) -> None:
    load_example(page, "Power module")
    with page.expect_response("**/v1/fields") as caught:
        compute(page)
    grids = caught.value.json()["grids"]
    assert [grid["name"] for grid in grids] == ["layer 0", "layer 1", "layer 2", "layer 3"]
    names = page.locator("#picture .annotation-text").all_text_contents()
    assert names == ["base", "solder", "ceramic", "copper"]
    # Heights are written where layers meet, however thin they are.
    heights = page.locator("#picture .ytick text").all_text_contents()
    assert heights == ["0", "3", "3.08", "3.71", "3.73"]
    # Across the contact below the ceramic the temperature steps; the picture holds both sides of it.
    drawn = page.evaluate(
        "document.getElementById('picture').data.filter(({ type }) => type === 'heatmap').map(({ z }) => z)"
    )
    assert len(drawn) == 4
    middle = len(drawn[1][-1]) // 4
    assert drawn[2][0][middle] - drawn[1][-1][middle] > 1
    assert abs(drawn[1][0][middle] - drawn[0][-1][middle]) < 1e-4
    expect(page.locator("#picture-caption")).to_contain_text("Firm lines are contacts")


def test_stack_stands_on_its_first_layer(page: Page) -> None:
    load_example(page, "Power module")
    for face, place in (("z_low", "bottom"), ("z_high", "top"), ("y_low", "front"), ("x_low", "left")):
        expect(page.get_by_role("group", name=face)).to_contain_text(f"{face} {place}")
    sketch = page.locator("#sketch")
    expect(sketch).to_have_accessible_name(
        re.compile("x runs to the right, z up, y to the back.*z_high .top.: given inflow")
    )
    heights = dict(
        sketch.locator(".face-label-name").evaluate_all(
            "names => names.map((name) => [name.textContent, name.getBoundingClientRect().top])"
        )
    )
    assert heights["z_high"] < heights["x_low"] < heights["z_low"]
    compute(page)
    expect(page.locator("#flows tbody")).to_contain_text("z_low bottom")
    # A body of one material lies along z.
    load_example(page, "hot spot")
    expect(page.get_by_role("group", name="z_low")).to_contain_text("z_low left end")


def test_layers_are_added_and_removed(page: Page) -> None:
    load_example(page, "hot spot")
    page.get_by_label("Body", exact=True).select_option("stack")
    expect(page.locator("#size-z")).to_have_count(0)
    expect(page.get_by_role("group", name="Layer 0")).to_be_visible()
    page.get_by_label("Layer 0: Name").fill("brick")
    page.get_by_label("Layer 1: Thickness").fill("20")
    page.get_by_label("Layer 1: All ways").fill("0.2")
    page.get_by_label("Layer 1: Joined to the layer below").select_option("resistance")
    expect(page.locator("#layer-1-contact-unit")).to_have_text("m² K/W")
    page.get_by_label("Layer 1: Contact resistance").fill("20 cm^2 K/W")
    page.get_by_role("button", name="Add a layer on top").click()
    expect(page.locator("#layer-2-name")).to_be_focused()
    page.get_by_role("button", name="Remove Layer 2").click()
    compute(page)
    expect(page.locator("#answer-body")).to_contain_text("from below brick 300 mm, layer 1 20 mm")
    body = sent(page, "fields")["problem"]["body"]
    assert body["layers"][1] == {"thickness": 20, "conductivity": 0.2, "contact_resistance_below": "20 cm^2 K/W"}
    assert "z" not in body["size"]


@pytest.mark.parametrize(
    ("field", "typed", "words"),
    [
        ("layer-1-thickness", "0", "The thickness is 0 mm"),
        ("layer-2-through", "-1", "The conductivity through the plane is -1"),
        ("layer-2-contact", "5 K", "does not measure film coefficient"),
        ("layer-3-name", "base", "Another layer has the same name."),
        ("z_high-flux-patch-0-value", "3 kg", "does not measure heat flow"),
    ],
)
def test_mistake_in_a_layer_stands_beside_its_field(page: Page, field: str, typed: str, words: str) -> None:
    load_example(page, "Power module")
    page.locator(f"#{field}").fill(typed)
    press_compute(page)
    expect(page.locator(f"#{field}-mistake")).to_contain_text(words)
    expect(page.locator(f"#{field}")).to_have_attribute("aria-invalid", "true")


def test_pads_and_resistances_are_told_and_saved(page: Page) -> None:
    load_example(page, "Power module")
    with page.expect_response("**/v1/resistances") as caught:
        compute(page)
    matrix = caught.value.json()["mean"]["value"]
    pads = page.get_by_role("region", name="Pads")
    expect(pads.get_by_role("row").nth(1)).to_contain_text("valve A")
    expect(pads.get_by_role("row").nth(1)).to_contain_text("30.000000 W in")
    # The pad to look after is told in words.
    expect(pads.get_by_text("highest of all pads")).to_have_count(1)
    expect(pads.get_by_role("row").nth(1)).to_contain_text("highest of all pads")
    cells = page.get_by_role("region", name="Matrix of rises").get_by_role("cell")
    expect(cells).to_have_count(9)
    assert [float(cells.nth(index).inner_text()) for index in range(3)] == pytest.approx(matrix[0], rel=1e-6)
    expect(page.locator(".network svg")).to_have_accessible_name(re.compile("Network of 3 pads and 6 resistors"))
    with page.expect_download() as table:
        page.get_by_role("button", name="Save matrix (CSV)").click()
    rows = list(csv.reader(io.StringIO(Path(table.value.path()).read_text())))
    assert [[float(entry) for entry in row[1:]] for row in rows[1:]] == matrix
    with page.expect_download() as resistors:
        page.get_by_role("button", name="Save resistors").click()
    assert resistors.value.suggested_filename == "resistors.txt"
    assert "\nR1_0 1 0 " in Path(resistors.value.path()).read_text()


@pytest.mark.parametrize("watched", [DESKTOP, PHONE], indirect=True, ids=["desk", "phone"])
def test_matrix_of_many_pads_fits_on_the_page(page: Page) -> None:
    load_example(page, "Power module")
    page.evaluate(
        """() => {
            const draft = JSON.parse(sessionStorage.getItem("stillfield draft 4"));
            draft.faces.z_high.data.flux.patches = Array.from({ length: 15 }, (_, index) => ({
                name: "", isTotal: true, value: "2", from: [String(2 * index), "4"], to: [String(2 * index + 1), "9"],
            }));
            sessionStorage.setItem("stillfield draft 4", JSON.stringify(draft));
        }"""
    )
    page.reload()
    compute(page)
    matrix = page.get_by_role("region", name="Matrix of rises")
    expect(matrix.locator("td")).to_have_count(15**2)
    assert matrix.evaluate("region => region.scrollWidth <= region.clientWidth")
    # Without room for numbers a cell still says its own.
    assert re.match(
        r"z_high, pad 3 for z_high, pad 2: [0-9.]+ K/W", matrix.locator("td").nth(31).get_attribute("title") or ""
    )
    colours = matrix.locator("td").evaluate_all("cells => cells.map((cell) => cell.style.background)")
    assert len(set(colours)) > 15


def test_page_without_pads_says_nothing_of_them(page: Page) -> None:
    load_example(page, "hot spot")
    compute(page)
    expect(page.get_by_role("heading", name="Pads")).to_be_hidden()
    expect(page.get_by_role("heading", name="Resistances between pads")).to_be_hidden()
    assert page.locator("#request-kind option[value=pads]").is_disabled()


def test_body_without_a_way_out_says_why_it_has_no_resistances(page: Page) -> None:
    load_example(page, "Power module")
    page.locator("#z_low-condition").select_option("flux")
    page.locator("#z_low-flux-value").fill("-0.11 W/mm^2")
    compute(page)
    expect(page.locator("#resistances")).to_contain_text("has no way out of this body")
    expect(page.get_by_role("button", name="Save resistors")).to_be_hidden()


def test_axis_without_ends_takes_its_faces_away(page: Page) -> None:
    load_example(page, "hot spot")
    page.get_by_text("Ends along x and y").click()
    page.get_by_label("Along x").select_option("infinite")
    for face in ("x_low", "x_high"):
        expect(page.get_by_role("group", name=face)).to_have_count(0)
    expect(page.locator("#sketch")).to_have_accessible_name(
        re.compile("The body goes on to the back and the other way")
    )
    page.get_by_label("Along x").select_option("semi-infinite")
    expect(page.get_by_role("group", name="x_low")).to_be_visible()
    expect(page.get_by_role("group", name="x_high")).to_have_count(0)
    page.get_by_label("Draw up to x =").fill("500")
    assert sent(page, "fields")["problem"]["body"]["size"] == {"x": "semi-infinite", "y": 114, "z": 300}
    assert sent(page, "fields")["evaluate"]["grids"][0]["x"] == {"from": 0, "to": 500, "count": 81}


def test_several_conditions_on_one_face(page: Page) -> None:
    load_example(page, "Bus-bar")
    compute(page)
    flows = page.locator("#flows tbody")
    expect(flows).to_contain_text("held, 1200 A given")
    expect(flows).to_contain_text("film, 4 MS/m² to 0 mV")
    expect(page.get_by_role("region", name="Pads").get_by_role("row").nth(2)).to_contain_text("0.85568")
    page.get_by_role("button", name="Add a pad on z_high").click()
    expect(page.locator("#z_high-pad-3-name")).to_be_focused()
    page.get_by_role("button", name="Remove z_high, pad 4").click()
    page.get_by_label("z_high, pad 2: Current").fill("3 V")
    press_compute(page)
    expect(page.locator("#z_high-pad-1-value-mistake")).to_contain_text("does not measure current")


def test_pad_with_an_inflow_stands_beside_held_ones(page: Page) -> None:
    load_example(page, "Bus-bar")
    page.get_by_label("z_high, pad 3: Condition").select_option("spread")
    page.get_by_label("z_high, pad 3: Current").fill("-40")
    assert sent(page, "flows")["problem"]["faces"]["z_high"]["pads"][2] == {
        "name": "fuse lug", "x": [35, 45], "y": [0, 8], "condition": "flux", "flow": -40,
    }  # fmt: skip
    compute(page)
    row = page.locator("#flows tbody tr", has_text="fuse lug")
    expect(row).to_contain_text("\N{MINUS SIGN}40 A in all")
    expect(row.get_by_role("cell")).to_have_text("\N{MINUS SIGN}40exact")
    # With the film gone nothing but the held pads takes up a flow, and the resistance between them is all there is.
    expect(page.locator("#resistances")).to_contain_text("Nothing but the pads takes up a flow here.")
    page.get_by_label("z_high, pad 3: Condition").select_option("inflow")
    page.get_by_label("z_high, pad 3: Current inwards").fill("3 A")
    press_compute(page)
    expect(page.locator("#z_high-pad-2-value-mistake")).to_contain_text("does not measure")


def test_ground_has_a_level_far_away(page: Page) -> None:
    load_example(page, "Thermal probes")
    page.get_by_label("Body", exact=True).select_option(label="bar or half-space, no far end along z")
    page.locator("#z_low-condition").select_option("mixed")
    for side, typed in (("x-from", "0"), ("x-to", "100"), ("y-from", "0"), ("y-to", "100"), ("value", "40")):
        page.locator(f"#z_low-pad-0-{side}").fill(typed)
    page.locator("#plane-position").fill("50")
    page.get_by_label("Temperature far away").fill("9.5")
    page.locator("#accuracy-kind").select_option("usual")
    compute(page)
    assert sent(page, "fields")["problem"]["body"]["far_level"] == 9.5
    expect(page.locator("#answer-body")).to_contain_text("Half-space without ends along x and y")
    # A square held on insulated ground lets in 2 pi C k L dT with C = 0.366788.
    watts = 2 * 3.14159265 * 0.366788 * 1.6 * 0.1 * 30.5
    (shown,) = re.findall(r"([0-9.]+)", page.locator("#flows tbody tr td").first.inner_text().split()[0])
    assert float(shown) / 1000 == pytest.approx(watts, rel=1e-4)
    page.locator("#z_low-condition").select_option("held")
    page.locator("#z_low-held-value").fill("12")
    press_compute(page)
    expect(page.locator("#far-level-mistake")).to_contain_text("fixes the level")


@pytest.mark.parametrize("watched", [DESKTOP, PHONE], indirect=True, ids=["desk", "phone"])
@pytest.mark.parametrize("words", ["Power module", "Bus-bar"])
def test_everyone_can_use_it(page: Page, words: str) -> None:
    load_example(page, words)
    compute(page)
    assert page.evaluate(FAULTS_OF_STRUCTURE) == []
    assert page.evaluate(FAULTS_OF_CONTRAST)["faults"] == []
    assert page.evaluate("document.documentElement.scrollWidth <= document.documentElement.clientWidth")
