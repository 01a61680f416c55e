"""Every page by the rules of WCAG 2.2 AA, in a wide window and in a hand, and by keyboard."""

from __future__ import annotations

from typing import Any

import pytest
from playwright.sync_api import Page

from service.contracts.batch import BatchRequest
from service.doorbell import Doorbell
from service.intake import submit, submit_batch
from service.settings import Settings
from service.store import filing
from service.store.session import Store
from tests.browser.axe import violations
from tests.browser.conftest import NARROW, WIDE, NewPage
from tests.service.conftest import Stored
from tests.service.pages import finished
from tests.service.samples import FULL, sample_planned, sample_request

PAGES = [
    "/",
    "/?name=nothing+so",
    "/new",
    "/new?from={full}",
    "/batches",
    "/batches/{batch}",
    "/designs/{done}",
    "/designs/{running}",
    "/designs/{queued}",
    "/designs/{cancelled}",
    "/designs/{full}",
    "/designs/{done}/candidates/1",
    "/designs/{full}/candidates/1",
    "/designs/{done}/candidates/1/what-if",
    "/compare?with={done}:1",
    "/compare?with={done}:1&with={full}:2&with={full}:1",
    "/designs/00000000000000000000000000000000",
    "/problems/request-refused",
]


@pytest.fixture(scope="module")
def names(wire_store: Store, wire_settings: Settings, stored: Stored) -> dict[str, str]:
    """What stands in the addresses: designs in each state, a full one, and a batch."""
    queued = submit(
        wire_store, Doorbell(wire_settings), sample_request(name="Waiting design"), None
    ).design_id
    filing.put_labels(wire_store, queued, ("club", "spring"))
    request = sample_request(**FULL)
    batch = submit_batch(
        wire_store,
        Doorbell(wire_settings),
        BatchRequest(designs=(sample_request(name="Shed 1"), sample_request(name="Shed 2"))),
        None,
    ).batch_id
    return {
        "done": stored.done,
        "running": stored.running,
        "cancelled": stored.cancelled,
        "full": finished(wire_store, wire_settings, request, sample_planned(request)),
        "queued": submit(
            wire_store, Doorbell(wire_settings), sample_request(name="Last in the queue"), None
        ).design_id,
        "batch": batch,
    }


@pytest.mark.parametrize("window", [WIDE, NARROW], ids=["wide", "narrow"])
@pytest.mark.parametrize("address", PAGES)
def test_no_page_breaks_a_rule_of_accessibility_or_is_wider_than_its_window(
    new_page: NewPage, names: dict[str, str], address: str, window: dict[str, int]
) -> None:
    page = new_page(viewport=window)
    page.goto(address.format(**names))
    assert violations(page) == []
    assert page.evaluate("document.documentElement.scrollWidth") <= window["width"]


@pytest.mark.parametrize("window", [WIDE, NARROW], ids=["wide", "narrow"])
def test_a_refused_form_breaks_no_rule_either(new_page: NewPage, window: dict[str, int]) -> None:
    page = new_page(viewport=window)
    page.goto("/new")
    page.get_by_label("Span between the supports").fill("wide")
    page.get_by_label("Size").fill("41")
    page.get_by_role("button", name="Submit for planning").click()
    page.get_by_role("alert").wait_for()
    assert violations(page) == []
    assert page.evaluate("document.documentElement.scrollWidth") <= window["width"]


def test_the_first_key_leads_past_the_head_to_the_content(page: Page) -> None:
    page.goto("/new")
    page.keyboard.press("Tab")
    skip = page.get_by_role("link", name="To the content")
    box = skip.bounding_box()
    assert box is not None
    assert box["x"] >= 0.0  # it comes into view once it has the focus
    page.keyboard.press("Enter")
    page.keyboard.press("Tab")
    inside = "document.getElementById('main').contains(document.activeElement)"
    assert page.evaluate(inside)


def outlined(page: Page) -> Any:  # noqa: ANN401  # whatever the page answers
    return page.evaluate("getComputedStyle(document.activeElement).outlineStyle !== 'none'")


def test_whatever_has_the_focus_shows_it(page: Page) -> None:
    page.goto("/new")
    seen = set()
    for _ in range(100):
        page.keyboard.press("Tab")
        if page.evaluate("document.activeElement === document.body"):
            break  # past the last of them
        seen.add(page.evaluate("document.activeElement.id || document.activeElement.textContent"))
        assert outlined(page), seen
    assert {"name", "list", "band-40m-take", "own-0-name", "span", "Submit for planning"} <= seen


def test_the_fault_in_the_summary_leads_to_its_field(page: Page) -> None:
    page.goto("/new")
    page.get_by_role("button", name="Submit for planning").click()
    summary = page.get_by_role("alert")
    summary.wait_for()
    assert page.evaluate("document.activeElement.id") == "summary"
    summary.get_by_role("link", name="Span between the supports").click()
    assert page.evaluate("document.activeElement.id") == "span"
    described = page.get_by_label("Span between the supports")
    assert described.get_attribute("aria-invalid") == "true"


def test_on_paper_there_is_nothing_to_press(new_page: NewPage, names: dict[str, str]) -> None:
    page = new_page()
    page.emulate_media(media="print")
    for address in ("/", "/designs/{full}", "/batches/{batch}"):
        page.goto(address.format(**names))
        for each in (*page.locator("button").all(), *page.locator(".mast nav").all()):
            assert not each.is_visible(), address


def test_nothing_moves_for_those_who_asked_for_stillness(new_page: NewPage) -> None:
    page = new_page(reduced_motion="reduce")
    page.goto("/")
    moving = page.evaluate("document.getAnimations().length")
    assert moving == 0
