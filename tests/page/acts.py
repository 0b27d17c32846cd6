"""What a person does on the page."""

from __future__ import annotations

import json
from typing import Any

from playwright.sync_api import Page, expect


def press_compute(page: Page) -> None:
    """Ask for an answer, without waiting for it."""
    page.get_by_role("button", name="Compute").click()


def compute(page: Page) -> None:
    """Ask for an answer and wait until it is shown."""
    press_compute(page)
    expect(page.get_by_role("status").first).to_have_text("Computed. The answer is shown.", timeout=20_000)


def load_example(page: Page, words: str) -> None:
    """Start from the example whose title contains some words."""
    options = page.locator("#example option").all_text_contents()
    (title,) = [option for option in options if words in option]
    page.get_by_label("Start from an example").select_option(label=title)
    page.get_by_role("button", name="Load").click()


def sent(page: Page, call: str) -> dict[str, Any]:
    """The request that the page shows for a call."""
    page.locator("details.request").evaluate("element => { element.open = true }")
    page.get_by_label("Call", exact=True).select_option(call)
    request: dict[str, Any] = json.loads(page.locator("#request-text").text_content() or "")
    return request


def answer_now(page: Page) -> None:
    """Ask the question about numbers and wait until its answer is shown."""
    page.get_by_role("button", name="Answer now").click()
    expect(page.get_by_role("status").first).to_have_text("Answered. The answer is shown.", timeout=20_000)
