"""Questions of the page as studies: begun, followed, cancelled, saved and found again."""

from __future__ import annotations

import csv
import io
import json

import pytest
from playwright.sync_api import Page, expect

from tests.page.conftest import PHONE
from tests.page.test_questions import add_number, cold_mean, limit, name_brick_results

CASES = 12
THICKNESSES = [200 + 200 * index / (CASES - 1) for index in range(CASES)]
HELD = sum(cold_mean(thickness) <= 500 for thickness in THICKNESSES)


def ask_for_cases(page: Page, values: str) -> None:
    """Hand in a table of cases over the thickness of a brick as a study."""
    name_brick_results(page)
    limit(page, "cold side", at_most="500")
    page.locator("#question").select_option("cases")
    add_number(page, "length along z", values=values)
    page.get_by_role("button", name="Answer as a study").click()
    expect(page.locator("#study-title")).to_be_focused()


@pytest.mark.parametrize("watched", [PHONE], indirect=True, ids=["phone"])
def test_study_runs_to_its_end_and_is_found_again(page: Page) -> None:
    ask_for_cases(page, f"200 to 400 in {CASES}")
    study = page.locator("#study")
    expect(page.locator("#study-state")).to_contain_text(f"Finished. {CASES} cases", timeout=40_000)
    expect(page.get_by_role("progressbar", name="Cases done")).to_be_hidden()
    # The answer is that of the call, and the table has all cases.
    expect(page.locator("#decision")).to_contain_text(f"Holds for certain in {HELD} of {CASES} cases")
    expect(page.locator("#decision .chart .main-svg").first).to_be_visible()
    study.get_by_text("Cases so far").click()
    expect(page.locator("#study-table tbody tr")).to_have_count(CASES)
    assert page.evaluate("document.documentElement.scrollWidth <= window.innerWidth")
    # Saved as a table it holds what the page shows.
    with page.expect_download() as saved:
        study.get_by_role("link", name="CSV").click()
    rows = list(csv.reader(io.StringIO(saved.value.path().read_text())))
    assert [float(row[1]) for row in rows[1:]] == pytest.approx(THICKNESSES)
    with page.expect_download() as saved:
        study.get_by_role("link", name="JSON lines").click()
    assert len([json.loads(line) for line in saved.value.path().read_text().splitlines()]) >= CASES
    # The page forgets nothing of it.
    page.reload()
    expect(study).to_be_hidden()
    page.get_by_text("Studies begun on this page").click()
    page.get_by_role("button", name="Results of many cases: Halden Reach, crown brick with a hot spot").first.click()
    expect(page.locator("#study-state")).to_contain_text("Finished.")
    expect(page.locator("#decision")).to_contain_text(f"Holds for certain in {HELD} of {CASES} cases")


def test_study_shows_its_progress_and_is_cancelled(page: Page) -> None:
    ask_for_cases(page, "200 to 400 in 20000")
    state = page.locator("#study-state")
    expect(state).to_contain_text("Running. ", timeout=40_000)
    expect(state).to_contain_text("of about 20\N{NARROW NO-BREAK SPACE}000 cases")
    expect(state).to_contain_text("left.", timeout=40_000)
    bar = page.get_by_role("progressbar", name="Cases done")
    assert 0 < bar.evaluate("bar => bar.value / bar.max") < 1
    page.get_by_role("button", name="Cancel the study").click()
    expect(state).to_contain_text("Cancelled.")
    expect(state).to_contain_text("they are kept")
    expect(bar).to_be_hidden()
    page.get_by_text("Cases so far").click()
    assert page.locator("#study-table tbody tr").count() > 0


def test_what_takes_too_long_to_wait_for_becomes_a_study(page: Page) -> None:
    name_brick_results(page)
    page.locator("#question").select_option("cases")
    add_number(page, "length along z", values="200 to 400 in 20001")
    page.get_by_role("button", name="Answer now").click()
    expect(page.locator("#study-title")).to_be_focused()
    expect(page.get_by_role("alert")).to_be_hidden()
    page.get_by_role("button", name="Cancel the study").click()
    expect(page.locator("#study-state")).to_contain_text("Cancelled.")


def test_mistake_in_a_study_stands_beside_its_field(page: Page) -> None:
    name_brick_results(page)
    page.locator("#question").select_option("cases")
    add_number(page, "length along z", values="200; 3 kg")
    page.get_by_role("button", name="Answer as a study").click()
    expect(page.locator("#decision-fields .mistake:visible")).to_contain_text("does not measure length")
    expect(page.locator("#study")).to_be_hidden()
