"""From what is described to the picture, the flows and the certificate."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest
from playwright.sync_api import Page, expect

from tests.page.acts import compute, load_example, sent

MINUS = "\N{MINUS SIGN}"
EXAMPLES = Path(__file__).resolve().parents[2] / "openapi_examples"


def flow_row(page: Page, name: str) -> str:
    """The text of a row of the table of flows."""
    return page.locator("#flows tbody tr", has_text=name).first.inner_text()


def test_ready_example_computes_at_one_press(page: Page) -> None:
    expect(page.get_by_text("Nothing computed yet")).to_be_visible()
    compute(page)
    expect(page.get_by_role("heading", name="Halden Reach, sight-port bar in a cooled frame")).to_be_focused()
    expect(page.get_by_role("heading", name="Temperature on the plane z = 5 mm")).to_be_visible()
    picture = page.get_by_role("img", name="Heat map with labelled isotherms on the plane z = 5 mm")
    expect(picture).to_be_visible()
    # Isotherms carry their values, and the colours their unit.
    labels = page.locator("#picture .contourlabels text").all_text_contents()
    assert {"100", "200", "450"} <= set(labels)
    expect(page.locator("#picture")).to_contain_text("Temperature, °C")
    # The window held at 640 degC is the hottest place, as far as the search beside it tells.
    expect(page.locator("#extremes")).to_contain_text(re.compile(rf"640\.0+ °C\s*± [0-9.]+e{MINUS}[78] K"))


def test_equal_lengths_are_drawn_equally_long(page: Page) -> None:
    compute(page)
    scales = page.evaluate(
        """() => {
            const { xaxis, yaxis } = document.getElementById("picture")._fullLayout;
            const perLength = (axis) => axis._length / Math.abs(axis.range[1] - axis.range[0]);
            return [perLength(xaxis), perLength(yaxis)];
        }"""
    )
    assert scales[0] == pytest.approx(scales[1], rel=0.02)


def test_picture_holds_the_numbers_of_the_service(page: Page) -> None:
    with page.expect_response("**/v1/fields") as caught:
        compute(page)
    (grid,) = caught.value.json()["grids"]
    drawn = page.evaluate("document.getElementById('picture').data[0].z")
    # Rows run along y, columns along x.
    for column, row in ((0, 0), (84, 0), (13, 57)):
        assert drawn[row][column] == grid["potential"][column][row][0]


def test_picture_has_the_edges_of_patches_where_they_are(page: Page) -> None:
    page.locator("#z_low-held-patch-0-x-to").fill("3.5 cm")
    page.locator("#plane-position").fill("0")
    compute(page)
    (grid,) = sent(page, "fields")["evaluate"]["grids"]
    # Every edge has a place of its own, as it was typed, and one on either side that no eye can tell from it.
    assert {4.98, 5, 5.02, 34.98, "3.5 cm", 35.02} <= set(grid["x"])
    drawn = page.evaluate(
        "(({ x, y, z }) => ({ x, row: z[y.indexOf(30)] }))(document.getElementById('picture').data[0])"
    )
    at = dict(zip(drawn["x"], drawn["row"], strict=True))
    assert drawn["x"] == sorted(drawn["x"])
    assert (at[4.98], at[5.02], at[34.98], at[35.02]) == (30, 640, 640, 30)


def test_picture_outlives_a_turned_phone(page: Page) -> None:
    load_example(page, "Power module")
    compute(page)
    width = "document.getElementById('picture')._fullLayout.width"
    for screen, drawn in ((390, f"() => {width} < 390"), (1280, f"() => {width} > 500")):
        page.set_viewport_size({"width": screen, "height": 844})
        page.wait_for_function(drawn)
        expect(page.locator("#picture .main-svg").first).to_be_visible()
        expect(page.locator("#picture .annotation-text")).to_have_text(["base", "solder", "ceramic", "copper"])
        # The bar of colours lies under a narrow picture and stands beside a wide one.
        bar = page.locator("#picture .cbfills").bounding_box()
        assert bar is not None
        assert (bar["width"] > bar["height"]) == (screen == 390)


def test_place_that_rounding_left_of_zero_is_zero(page: Page) -> None:
    shown = page.evaluate(
        """async () => {
            const { placed } = await import("/static/numbers.js");
            return [placed(-1.77636e-15, 40), placed(1e-6, 40), placed(0, 0), placed(-2.5, 40)];
        }"""
    )
    assert shown == ["0", "0.000001", "0", f"{MINUS}2.5"]


def test_flows_without_finite_value_say_why(page: Page) -> None:
    compute(page)
    assert "no finite value" in flow_row(page, "x_low")
    window = flow_row(page, "window")
    # The strip beside the window's rim is left out, since the example names an edge gap.
    assert "no finite value" in window
    assert re.search(r"22218\.\d", window)
    reasons = page.locator("#flows .reasons")
    expect(reasons).to_contain_text("It goes on without end")
    expect(reasons).to_contain_text("Held values jump by up to 610 K along x = 5 on z_low")
    expect(page.locator("#flows")).to_contain_text("No balance.")


def test_edge_gap_is_offered_where_one_would_help(page: Page) -> None:
    page.get_by_label("Edge gap (optional)").fill("")
    compute(page)
    page.locator("#flows").get_by_role("link", name="edge gap").click()
    assert page.evaluate("location.hash") == "#edge-gap"


def test_reach_of_a_face_is_told(page: Page) -> None:
    with page.expect_response("**/v1/reach") as caught:
        compute(page)
    reach = caught.value.json()["reach"]
    expect(page.get_by_role("heading", name="How far z_low reaches")).to_be_visible()
    rows = page.get_by_role("region", name="Reach").get_by_role("row")
    for row, worst, on_axis in zip((1, 2, 3), reach["worst"], reach["on_axis"], strict=True):
        told = rows.nth(row).get_by_role("cell").all_inner_texts()
        assert [float(text.split()[0]) for text in told] == pytest.approx(
            [worst["distance"], on_axis["distance"]], rel=1e-6
        )
    expect(page.locator("#reach")).to_contain_text(f"{reach['decay']['length']:.4f} mm")
    expect(page.locator("#reach circle")).to_have_count(6)


def test_reach_that_has_no_answer_says_why(page: Page) -> None:
    load_example(page, "hot spot")
    page.locator("#reach-face").select_option("z_low")
    page.get_by_label("What of it is followed").select_option("uniform")
    assert sent(page, "reach")["evaluate"] == {"face": "z_low", "change": "uniform"}
    compute(page)
    expect(page.locator("#reach")).to_contain_text("What a change of 1 K all over z_low does")
    load_example(page, "cold side glows")
    page.locator("#reach-face").select_option("z_low")
    compute(page)
    expect(page.locator("#reach .verdict")).to_contain_text("does not vary")
    page.locator("#reach-face").select_option("not asked")
    compute(page)
    expect(page.get_by_role("heading", name="reaches")).to_be_hidden()


def test_block_has_a_closed_balance(page: Page) -> None:
    load_example(page, "hot spot")
    compute(page)
    expect(page.locator("#flows .verdict.good")).to_contain_text("Balance closed.")
    assert "held, by readings" in flow_row(page, "z_low")
    assert re.search(f"{MINUS}[0-9]+[.][0-9]+", flow_row(page, "z_high"))


def test_certificate_can_be_judged(page: Page) -> None:
    with page.expect_response("**/v1/fields") as caught:
        compute(page)
    certificate = caught.value.json()["certificate"]
    text = page.locator("#certificate").inner_text()
    assert "Within the accuracy asked for." in text
    assert "Both representations agree." in text
    assert certificate["method"] in text
    assert f"{certificate['terms']['time_nodes']} nodes" in text
    (shown,) = re.findall(f"further than ([0-9.e{MINUS}]+) K", text)
    bound = float(shown.replace(MINUS, "-"))
    # Rounded up to two digits, never down.
    assert certificate["error_bound"] <= bound <= 1.1 * certificate["error_bound"]


def test_change_after_an_answer_marks_it_as_old(page: Page) -> None:
    compute(page)
    old = page.get_by_text("The form has changed since.")
    expect(old).to_be_hidden()
    page.locator("#size-x").fill("41")
    expect(old).to_be_visible()
    compute(page)
    expect(old).to_be_hidden()


def test_values_behind_the_picture_can_be_read_and_saved(page: Page) -> None:
    compute(page)
    page.get_by_text("Values behind the picture").click()
    table = page.get_by_role("region", name="Values behind the picture").get_by_role("table")
    expect(table.get_by_role("columnheader", name="40", exact=True)).to_be_visible()
    expect(table.get_by_role("rowheader", name="60", exact=True)).to_be_visible()
    with page.expect_download() as caught:
        page.get_by_role("button", name="Save all values (CSV)").click()
    rows = Path(caught.value.path()).read_text().splitlines()
    (grid,) = sent(page, "fields")["evaluate"]["grids"]
    assert len(rows) == 1 + len(grid["y"])
    assert {len(row.split(",")) for row in rows} == {1 + len(grid["x"])}


def test_picture_is_saved_as_an_image(page: Page) -> None:
    compute(page)
    with page.expect_download() as caught:
        page.get_by_role("button", name="Save picture").click()
    assert caught.value.suggested_filename == "plane_z_5.png"
    assert Path(caught.value.path()).read_bytes().startswith(b"\x89PNG")


def test_plane_along_the_bar_shows_z_to_the_right(page: Page) -> None:
    page.get_by_label("Plane square to").select_option("x")
    page.get_by_label("Plane: at x =").fill("20")
    page.get_by_label("Draw up to z =").fill("90")
    compute(page)
    expect(page.locator("#picture .xtitle")).to_have_text("z, mm")
    expect(page.locator("#picture .ytitle")).to_have_text("y, mm")
    # The hottest place lies in this plane and is marked by a shape.
    expect(page.locator("#picture-caption")).to_contain_text("△ Hottest place of the body")


def test_uniform_field_is_said_to_be_uniform(page: Page) -> None:
    load_example(page, "hot spot")
    page.locator("#z_low-held-kind").select_option("uniform")
    page.locator("#z_low-held-value").fill("45")
    compute(page)
    expect(page.locator("#picture-caption")).to_contain_text("uniform within the bound")


def test_shown_request_can_be_sent_by_a_program(page: Page, address: str) -> None:
    for call, path in (("fields", "/v1/fields"), ("flows", "/v1/flux-totals")):
        request = sent(page, call)
        expect(page.locator("#request-address")).to_have_text(f"POST {address}{path}")
        answer = page.request.post(f"{address}{path}", data=request)
        assert answer.status == 200
        assert answer.json()["potential"] == "temperature"


def test_example_is_the_one_of_the_description(page: Page) -> None:
    described = json.loads((EXAMPLES / "fields_sight_port_plane.json").read_text())["request"]["problem"]
    shown = sent(page, "fields")["problem"]
    # The page writes out the units that the description leaves to be the usual ones.
    assert shown["units"].items() >= described["units"].items()
    assert {**shown, "units": None} == {**described, "units": None}


def test_copied_request_is_the_shown_one(page: Page) -> None:
    page.context.grant_permissions(["clipboard-read", "clipboard-write"])
    request = sent(page, "flows")
    page.get_by_role("button", name="Copy").click()
    expect(page.locator("#copy-status")).to_have_text("Copied.")
    assert json.loads(page.evaluate("navigator.clipboard.readText()")) == request
