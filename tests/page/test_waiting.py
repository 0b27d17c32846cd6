"""Long answers, answers that do not come, and presses that come too fast."""

from __future__ import annotations

import re
from collections.abc import Sized

import pytest
from playwright.sync_api import Page, Route, expect

from tests.page.acts import compute, press_compute
from tests.page.conftest import Watched

STATUS = "#status"


@pytest.fixture
def held_back(page: Page) -> list[Route]:
    """Requests of the page, caught on their way; they wait for as long as a test does not go on with them."""
    caught: list[Route] = []
    page.route("**/v1/*", lambda route: caught.append(route))
    return caught


def wait_for(page: Page, caught: Sized, count: int) -> None:
    for _ in range(400):
        if len(caught) >= count:
            return
        page.wait_for_timeout(25)
    raise AssertionError(f"{len(caught)} came, {count} were expected")


def test_waiting_is_shown_and_can_be_cancelled(page: Page, held_back: list[Route]) -> None:
    press_compute(page)
    expect(page.locator(STATUS)).to_have_text("Computing.")
    expect(page.get_by_role("progressbar", name="Computing")).to_be_visible()
    expect(page.locator("#results")).to_have_attribute("aria-busy", "true")
    expect(page.locator("#seconds")).to_have_text(re.compile("[1-9][0-9]* s"), timeout=10_000)
    page.get_by_role("button", name="Cancel").click()
    expect(page.locator(STATUS)).to_contain_text("Cancelled.")
    expect(page.get_by_role("progressbar")).to_be_hidden()
    expect(page.get_by_role("button", name="Compute")).to_be_focused()
    expect(page.get_by_role("alert")).to_be_hidden()
    page.unroute("**/v1/*")
    compute(page)


def test_repeated_presses_leave_one_request_under_way(page: Page, held_back: list[Route]) -> None:
    given_up: list[str] = []
    page.on("requestfailed", lambda request: given_up.append(request.failure or ""))
    for press in range(1, 5):
        press_compute(page)
        wait_for(page, held_back, 3 * press)
    # The browser tells of them a moment later.
    wait_for(page, given_up, 9)
    assert given_up == ["net::ERR_ABORTED"] * 9
    for route in held_back[-3:]:
        route.continue_()
    expect(page.locator(STATUS)).to_have_text("Computed. The answer is shown.")
    assert len(held_back) == 12
    expect(page.get_by_role("alert")).to_be_hidden()


def test_no_answer_is_told_in_a_sentence(page: Page, watched: Watched) -> None:
    watched.expected.append("Failed to load resource: net::ERR_CONNECTION_REFUSED")
    page.route("**/v1/*", lambda route: route.abort("connectionrefused"))
    press_compute(page)
    alert = page.get_by_role("alert")
    expect(alert).to_contain_text("The service cannot be reached")
    expect(alert).to_contain_text("what you have typed is kept")
    # All calls failed in the same way, of which once is enough.
    expect(alert.get_by_role("heading")).to_have_count(1)
    page.unroute("**/v1/*")
    compute(page)


def test_busy_service_says_how_long_to_wait(page: Page, watched: Watched) -> None:
    watched.expected.append("Failed to load resource: the server responded with a status of 503")
    document = {"title": "The service is busy", "status": 503, "detail": "All workers are busy."}
    page.route(
        "**/v1/*",
        lambda route: route.fulfill(status=503, headers={"Retry-After": "7"}, json=document),
    )
    press_compute(page)
    expect(page.get_by_role("alert")).to_contain_text("The service is busy")
    expect(page.get_by_role("alert")).to_contain_text("It asks to wait 7 s.")
