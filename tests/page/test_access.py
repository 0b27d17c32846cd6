"""The page for everyone: by keyboard, by ear, on a phone, on paper."""

from __future__ import annotations

import pytest
from playwright.sync_api import Page, expect

from tests.page.acts import compute
from tests.page.conftest import DESKTOP, PHONE, TABLET

# Every control and figure has a name; ids are unique; headings go down one step at a time.
FAULTS_OF_STRUCTURE = """() => {
    const faults = [];
    const named = (element) => element.getAttribute("aria-label")?.trim()
        || [...(element.labels ?? [])].map((label) => label.textContent.trim()).join("")
        || (element.tagName === "BUTTON" && element.textContent.trim());
    const controls = "input, select, textarea, button, [role=img], [role=region]";
    for (const control of document.querySelectorAll(controls)) {
        if (!named(control)) faults.push(`no name: ${control.outerHTML.slice(0, 120)}`);
    }
    for (const image of document.querySelectorAll("img")) {
        if (!image.hasAttribute("alt")) faults.push("image without alt");
    }
    const ids = [...document.querySelectorAll("main [id], header [id], footer [id]")]
        .filter((element) => !element.closest("#picture > *"))
        .map((element) => element.id);
    for (const id of ids) if (ids.filter((other) => other === id).length > 1) faults.push(`id twice: ${id}`);
    for (const element of document.querySelectorAll("[aria-describedby], [aria-labelledby], label[for]")) {
        for (const name of ["aria-describedby", "aria-labelledby", "for"]) {
            for (const id of (element.getAttribute(name) ?? "").split(" ").filter(Boolean)) {
                if (!document.getElementById(id)) faults.push(`${name} points nowhere: ${id}`);
            }
        }
    }
    let last = 1;
    for (const heading of document.querySelectorAll("h1, h2, h3, h4, h5, h6")) {
        const level = Number(heading.tagName[1]);
        if (level > last + 1) faults.push(`heading skips a level: ${heading.textContent}`);
        last = level;
    }
    for (const table of document.querySelectorAll("table")) {
        if (!table.caption) faults.push("table without caption");
        if ([...table.querySelectorAll("th")].some((head) => !head.scope)) faults.push("head without scope");
    }
    for (const element of document.querySelectorAll("[tabindex]")) {
        if (element.tabIndex > 0) faults.push("tabindex changes the order");
    }
    return faults;
}"""

# Contrast of every visible text against what is painted behind it, by WCAG 2: 4.5, or 3 for large text.
FAULTS_OF_CONTRAST = """() => {
    const parse = (colour) => {
        const [r, g, b, a = 1] = colour.match(/[\\d.]+/g).map(Number);
        return { rgb: [r, g, b], a };
    };
    const luminance = (rgb) => {
        const [r, g, b] = rgb.map((value) => {
            const part = value / 255;
            return part <= 0.04045 ? part / 12.92 : ((part + 0.055) / 1.055) ** 2.4;
        });
        return 0.2126 * r + 0.7152 * g + 0.0722 * b;
    };
    const behind = (element) => {
        for (let here = element; here; here = here.parentElement) {
            const { rgb, a } = parse(getComputedStyle(here).backgroundColor);
            if (a === 1) return rgb;
        }
        return [255, 255, 255];
    };
    const faults = [];
    let checked = 0;
    const walker = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
    while (walker.nextNode()) {
        const element = walker.currentNode.parentElement;
        const text = walker.currentNode.textContent.trim();
        if (!text || !element.checkVisibility() || element.closest("svg, option")) continue;
        const style = getComputedStyle(element);
        const size = parseFloat(style.fontSize);
        const isLarge = size >= 24 || (size >= 18.66 && Number(style.fontWeight) >= 700);
        const pair = [luminance(parse(style.color).rgb), luminance(behind(element))].sort((a, b) => b - a);
        const contrast = (pair[0] + 0.05) / (pair[1] + 0.05);
        checked += 1;
        if (contrast < (isLarge ? 3 : 4.5)) faults.push(`${contrast.toFixed(2)}: ${text.slice(0, 40)}`);
    }
    return { checked, faults };
}"""


def test_structure_is_told_to_those_who_listen(page: Page) -> None:
    assert page.locator("html").get_attribute("lang") == "en"
    assert page.title()
    for role in ("banner", "main", "contentinfo", "navigation"):
        expect(page.get_by_role(role)).to_have_count(1)
    expect(page.get_by_role("heading", level=1)).to_have_count(1)
    assert page.evaluate(FAULTS_OF_STRUCTURE) == []
    compute(page)
    assert page.evaluate(FAULTS_OF_STRUCTURE) == []


def test_text_can_be_read(page: Page) -> None:
    page.locator("#size-x").fill("-1")
    page.get_by_role("button", name="Compute").click()
    expect(page.get_by_role("alert")).to_be_visible()
    wrong = page.evaluate(FAULTS_OF_CONTRAST)
    page.locator("#size-x").fill("40")
    compute(page)
    page.locator("#size-x").fill("41")
    page.evaluate("for (const details of document.querySelectorAll('details')) details.open = true")
    right = page.evaluate(FAULTS_OF_CONTRAST)
    assert (wrong["faults"], right["faults"]) == ([], [])
    assert right["checked"] > 150


def test_ink_on_the_picture_can_be_read_in_every_physics(page: Page) -> None:
    worst = page.evaluate(
        """async () => {
            const { PHYSICS } = await import("/static/words.js");
            const luminance = (hex) => [1, 3, 5].map((at) => parseInt(hex.slice(at, at + 2), 16) / 255)
                .map((part) => (part <= 0.04045 ? part / 12.92 : ((part + 0.055) / 1.055) ** 2.4))
                .reduce((sum, part, index) => sum + part * [0.2126, 0.7152, 0.0722][index], 0);
            const ink = luminance("#1b2730");
            const scales = Object.values(PHYSICS).map(({ scale }) => scale.map(luminance));
            return {
                contrast: Math.min(...scales.flat().map((colour) => (colour + 0.05) / (ink + 0.05))),
                darkens: scales.every((scale) => scale.slice(1).every((next, index) => next < scale[index])),
            };
        }"""
    )
    assert worst["contrast"] >= 4.5
    # So the order of the values also reads in grey.
    assert worst["darkens"]


def test_keyboard_alone_is_enough(page: Page) -> None:
    page.keyboard.press("Tab")
    expect(page.get_by_role("link", name="Skip to the form")).to_be_focused()
    page.keyboard.press("Enter")
    wanted = ["name", "size-x", "x_low-condition", "z_low-held-patch-0-value", "plane-position", "compute"]
    reached: list[str] = []
    for _ in range(80):
        page.keyboard.press("Tab")
        reached.append(page.evaluate("document.activeElement.id"))
        if reached[-1] == "size-x":
            page.keyboard.type("42")
        if reached[-1] == "compute":
            break
    assert [name for name in reached if name in wanted] == wanted
    page.keyboard.press("Enter")
    expect(page.locator("#status")).to_have_text("Computed. The answer is shown.", timeout=20_000)
    expect(page.locator("#answer-body")).to_contain_text("42 mm")
    # Reading goes on from the answer's heading to what can be done with it.
    expect(page.locator("#answer-title")).to_be_focused()
    page.keyboard.press("Tab")
    expect(page.get_by_role("link", name="certificate")).to_be_focused()


def test_enter_in_a_field_computes(page: Page) -> None:
    page.locator("#plane-position").fill("10")
    page.keyboard.press("Enter")
    expect(page.get_by_role("heading", name="Temperature on the plane z = 10 mm")).to_be_visible()


@pytest.mark.parametrize("watched", [PHONE, TABLET, DESKTOP], indirect=True, ids=["phone", "tablet", "desk"])
def test_nothing_sticks_out_sideways(page: Page) -> None:
    widths = "[document.documentElement.scrollWidth, window.innerWidth]"
    assert page.evaluate("document.documentElement.scrollWidth <= window.innerWidth"), page.evaluate(widths)
    compute(page)
    page.evaluate("for (const details of document.querySelectorAll('details')) details.open = true")
    assert page.evaluate("document.documentElement.scrollWidth <= window.innerWidth"), page.evaluate(widths)
    box = page.locator("#picture .main-svg").first.bounding_box()
    assert box is not None
    assert box["x"] >= 0
    assert box["x"] + box["width"] <= page.evaluate("window.innerWidth")


def test_paper_holds_the_answer_and_the_cautions_without_the_form(page: Page) -> None:
    compute(page)
    page.emulate_media(media="print")
    expect(page.locator("#form")).to_be_hidden()
    for part in ("#picture", "#flows", "#certificate", "#cautions", "#answer-body"):
        expect(page.locator(part)).to_be_visible()


def test_cautions_are_on_the_page_from_the_start(page: Page) -> None:
    cautions = page.get_by_role("contentinfo")
    for words in ("Hot and cold surfaces", "Live conductors", "Local codes", "licensed practitioner"):
        expect(cautions).to_contain_text(words)
