"""Describing a body, and what is said about what cannot be used."""

from __future__ import annotations

import re

import pytest
from playwright.sync_api import Page, expect

from tests.page.acts import compute, load_example, press_compute, sent


def expect_mistake(page: Page, field: str, words: str) -> None:
    """A sentence stands beside the field, is tied to it, and is repeated in the summary with a way there."""
    beside = page.locator(f"#{field}-mistake")
    expect(beside).to_be_visible()
    expect(beside).to_contain_text(words)
    expect(page.locator(f"#{field}")).to_have_attribute("aria-invalid", "true")
    assert f"{field}-mistake" in (page.locator(f"#{field}").get_attribute("aria-describedby") or "")
    summary = page.get_by_role("alert")
    expect(summary).to_contain_text(words)
    expect(summary.locator(f"a[href='#{field}']")).to_be_visible()


def test_bar_has_no_far_end(page: Page) -> None:
    load_example(page, "hot spot")
    expect(page.get_by_role("group", name="z_high")).to_be_visible()
    expect(page.locator("#size-z")).to_have_value("300")
    page.get_by_label("Body", exact=True).select_option("bar")
    expect(page.get_by_role("group", name="z_high")).to_have_count(0)
    expect(page.locator("#size-z")).to_have_count(0)
    sketch = page.locator("#sketch")
    expect(sketch).to_have_accessible_name(re.compile("goes on to the right without end"))
    expect(sketch).not_to_contain_text("z_high")
    # What was typed for the far end is still there when it is wanted again.
    page.get_by_label("Body", exact=True).select_option("block")
    expect(page.locator("#z_high-coefficient")).to_have_value("14 W/(m^2 K)")
    expect(sketch).to_contain_text("z_high")


@pytest.mark.parametrize(
    ("field", "typed", "words"),
    [
        ("size-x", "-40", "it has to be greater than zero"),
        ("size-y", "", "This field is required."),
        ("conductivity-z", "3 kg", 'The unit "kg" does not measure thermal conductivity'),
        ("x_high-coefficient", "fast", "does not begin with a number"),
        ("z_low-held-value", "30 mm", "wanted is a temperature such as degC"),
        ("z_low-held-patch-0-value", "1,5", "decimals with a point"),
        ("z_low-held-patch-0-x-from", "-5", "lie in the face"),
        ("plane-position", "-1", "lies outside the body"),
        ("edge-gap", "1 kg", "does not measure length"),
    ],
)
def test_mistake_stands_beside_its_field(page: Page, field: str, typed: str, words: str) -> None:
    page.locator(f"#{field}").fill(typed)
    press_compute(page)
    expect(page.get_by_role("alert")).to_be_focused()
    expect_mistake(page, field, words)


def test_no_mistake_stays_behind_once_it_is_right(page: Page) -> None:
    page.locator("#size-x").fill("-40")
    press_compute(page)
    expect(page.get_by_role("alert")).to_be_visible()
    page.locator("#size-x").fill("40")
    compute(page)
    expect(page.locator(".mistake:visible")).to_have_count(0)
    expect(page.get_by_role("alert")).to_be_hidden()


def test_mistake_in_a_folded_part_is_unfolded(page: Page) -> None:
    page.get_by_text("Units of bare numbers").click()
    page.locator("#unit-flux").fill("kg")
    page.get_by_text("Units of bare numbers").click()
    expect(page.locator("#unit-flux")).to_be_hidden()
    press_compute(page)
    expect_mistake(page, "unit-flux", "heat flux")


def test_link_of_the_summary_leads_to_the_field(page: Page) -> None:
    page.locator("#size-x").fill("0")
    press_compute(page)
    page.get_by_role("alert").get_by_role("link", name="Length x").click()
    expect(page.locator("#size-x")).to_be_focused()
    page.keyboard.type("4")
    expect(page.locator("#size-x-mistake")).to_be_hidden()


def test_several_mistakes_are_all_named(page: Page) -> None:
    page.locator("#size-x").fill("-40")
    page.locator("#size-y").fill("none")
    page.locator("#z_low-held-patch-0-value").fill("3 kg")
    press_compute(page)
    expect(page.get_by_role("alert").get_by_role("listitem")).to_have_count(3)


def test_readings_are_pasted_as_csv(page: Page) -> None:
    page.locator("#x_low-held-kind").select_option("samples")
    page.locator("#x_low-held-csv").fill("y/z,0,30\n0,30,30\n60,40,35\n")
    page.locator("#x_low-held-hold").check()
    compute(page)
    page.locator("#x_low-held-csv").fill("y/z,0,30\n0,30,30\n60,40,hot\n")
    press_compute(page)
    expect_mistake(page, "x_low-held-csv", "Row 3, column 3 has to be a reading")


def test_face_follows_a_formula(page: Page) -> None:
    load_example(page, "hot spot")
    page.locator("#z_low-held-kind").select_option("formula")
    page.locator("#z_low-held-expression").fill("1480 + 60*exp(-((x-115)/40)^2)*sin(pi*y/114)")
    compute(page)
    expect(page.locator("#flows")).to_contain_text("held, by a formula")
    expect(page.locator("#extremes")).to_contain_text("1540")
    page.locator("#z_low-held-expression").fill("1480 + 60*w")
    press_compute(page)
    expect_mistake(page, "z_low-held-expression", "w")


def test_conductivity_follows_a_table_and_a_face_radiates(page: Page) -> None:
    load_example(page, "cold side glows")
    expect(page.get_by_label("Temperature and factor")).to_have_value("20, 1\n600, 1.21\n1200, 1.5\n1600, 1.71")
    page.get_by_label("With the temperature the conductivity").select_option("conductivities")
    # The table says all of it.
    expect(page.locator("#conductivity-all")).to_have_count(0)
    page.get_by_label("Temperature and conductivity").fill("20, 1.4\n600; 1.694\n1200 2.1\n1600, 2.394 W/(m K)\n")
    body = sent(page, "fields")["problem"]["body"]
    law = {"law": "table", "potential": [20, 600, 1200, 1600], "conductivity": [1.4, 1.694, 2.1, "2.394 W/(m K)"]}
    assert body == {"size": {"x": 230, "y": 114, "z": 300}, "conductivity_law": law}
    compute(page)
    expect(page.locator("#answer-body")).to_contain_text("conductivity varying with the temperature")
    expect(page.locator("#flows")).to_contain_text("to 45 °C and radiation, emissivity 0.85")
    expect(page.locator("#certificate")).to_contain_text("Film faces were iterated in")
    page.get_by_label("z_high: Emissivity").fill("1.85")
    press_compute(page)
    expect_mistake(page, "z_high-emissivity", "1")
    page.get_by_label("z_high: Emissivity").fill("0.85")
    page.locator("#law-table").fill("20, 1.4\n600, none\n")
    press_compute(page)
    expect_mistake(page, "law-table", "does not begin with a number")


def test_conductivity_falls_linearly(page: Page) -> None:
    load_example(page, "cold side glows")
    page.get_by_label("With the temperature the conductivity").select_option("linear")
    page.get_by_label("As given at a temperature of").fill("20")
    page.get_by_label("Part gained per unit").fill("-0.0004")
    expect(page.locator("#law-per-degree-unit")).to_have_text("1/K")
    law = sent(page, "fields")["problem"]["body"]["conductivity_law"]
    assert law == {"law": "linear", "reference": 20, "per_degree": -0.0004}
    compute(page)
    expect(page.locator("#answer-body")).to_contain_text("conductivity 1.4 W/(m K), varying with the temperature")
    page.locator("#law-reference").fill("3 kg")
    press_compute(page)
    expect_mistake(page, "law-reference", "does not measure temperature")


def test_stack_asks_for_no_emissivity_and_no_law(page: Page) -> None:
    load_example(page, "cold side glows")
    page.get_by_label("Body", exact=True).select_option("stack")
    expect(page.get_by_label("z_high: Emissivity")).to_have_count(0)
    expect(page.locator("#law-kind")).to_have_count(0)
    assert "emissivity" not in sent(page, "fields")["problem"]["faces"]["z_high"]


def test_imbalance_of_an_insulated_body_is_explained(page: Page) -> None:
    load_example(page, "Electrode stub")
    page.locator("#z_high-condition").select_option("insulated")
    press_compute(page)
    expect(page.get_by_role("alert")).to_contain_text("There is no steady state")
    expect(page.get_by_role("alert")).to_contain_text("add up to 600")
    expect(page.locator("#faces-mistake")).to_be_visible()


def test_source_in_a_box(page: Page) -> None:
    load_example(page, "hot spot")
    page.get_by_role("button", name="Add a source").click()
    page.get_by_label("Source 1: Where").select_option("box")
    page.get_by_label("Source 1: Heat generated per volume").fill("200 kW/m^3")
    page.get_by_label("Source 1: z from").fill("100")
    page.get_by_label("Source 1: z to").fill("150")
    compute(page)
    # 200 kW/m^3 in 230 x 114 x 50 mm.
    expect(page.locator("#flows .verdict")).to_contain_text("262.2 W are generated inside")


def test_patches_are_added_and_removed(page: Page) -> None:
    page.get_by_role("button", name="Add a patch on z_low").click()
    expect(page.locator("#z_low-held-patch-1-name")).to_be_focused()
    page.get_by_role("button", name="Remove z_low, patch 1").click()
    expect(page.get_by_role("group", name="Patch 1")).to_have_count(1)
    expect(page.locator("#z_low-held-patch-0-name")).to_have_value("")


def test_other_physics_brings_its_words_and_units(page: Page) -> None:
    page.get_by_label("Physics").select_option("hydraulic_head")
    expect(page.get_by_label("Hydraulic conductivity: Along x")).to_be_visible()
    expect(page.locator("#conductivity-x-unit")).to_have_text("m/s")
    expect(page.get_by_label("x_high: Leakance")).to_be_visible()
    # Lengths mean the same whatever is computed.
    expect(page.locator("#size-x-unit")).to_have_text("mm")


def test_declared_unit_shows_beside_every_field_and_typing_keeps_its_place(page: Page) -> None:
    page.get_by_text("Units of bare numbers").click()
    page.locator("#unit-length").fill("cm")
    # From here on the keyboard goes where the person looks.
    page.locator("#size-x").click()
    expect(page.locator("#size-x")).to_be_focused()
    expect(page.locator("#size-x-unit")).to_have_text("cm")
    expect(page.get_by_role("group", name="x_high")).to_contain_text("x = 40 cm")
    page.locator("#size-x").fill("4")
    page.locator("#x_low-held-value").click()
    page.keyboard.press("End")
    page.keyboard.type("0")
    expect(page.locator("#x_low-held-value")).to_have_value("300")


def test_what_is_typed_survives_a_reload(page: Page) -> None:
    page.locator("#size-x").fill("44")
    page.reload()
    expect(page.locator("#size-x")).to_have_value("44")
