"""A request written on the page and planned by a real worker, watched to its end."""

from __future__ import annotations

import re
from collections.abc import Iterator
from pathlib import Path

import pytest
from playwright.sync_api import Locator, Page, expect

from tests.browser.conftest import NewPage
from worker.cli.standing import standing_service


@pytest.fixture
def address(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[str]:
    """A service with one worker and a database of its own."""
    monkeypatch.setenv("SPANWRIGHT_DATABASE_URL", f"sqlite:///{tmp_path / 'whole.db'}")
    monkeypatch.setenv("SPANWRIGHT_WORKERS", "1")
    monkeypatch.delenv("SPANWRIGHT_REDIS_URL", raising=False)
    with standing_service() as standing:
        yield standing


def test_a_form_sent_becomes_a_wire_on_the_page_that_was_left_open(
    address: str, new_page: NewPage
) -> None:
    page = new_page(base_url=address)
    page.goto("/new")
    page.get_by_label("Name of the design").fill("Harbour shed")
    page.get_by_role("checkbox", name=re.compile("^40m")).check()
    page.get_by_label("Span between the supports").fill("25")
    page.get_by_label("Height over ground").fill("10")
    page.get_by_role("group", name="Conductor 1").get_by_label("Size").fill("12")
    page.get_by_role("button", name="Submit for planning").click()
    expect(page.locator(".state")).to_have_text("done", timeout=60_000)
    # A half wave at 7.1 MHz is 21.1 m, less about five per cent (common practice).
    heading = page.locator(".candidates h3").first
    length = re.search(r"(\d+\.\d+) m of AWG 12", heading.inner_text())
    assert length is not None
    assert float(length[1]) == pytest.approx(0.95 * 21.1, rel=0.03)


def tab_to(page: Page, wanted: Locator) -> None:
    """Press the tabulator until something has the focus."""
    element = wanted.element_handle()
    for _ in range(200):
        if page.evaluate("element => document.activeElement === element", element):
            return
        page.keyboard.press("Tab")
    raise AssertionError(f"no tabulator leads to {wanted}")


def press_on(page: Page, wanted: Locator, key: str = "Enter") -> None:
    tab_to(page, wanted)
    page.keyboard.press(key)


def type_into(page: Page, wanted: Locator, text: str) -> None:
    tab_to(page, wanted)
    page.keyboard.press("Control+A")
    page.keyboard.type(text)


def test_the_whole_journey_is_made_by_keyboard_alone(address: str, new_page: NewPage) -> None:
    page = new_page(base_url=address)
    page.goto("/")
    press_on(page, page.get_by_role("link", name="New design").first)
    type_into(page, page.get_by_label("Name of the design"), "Slipway")
    press_on(page, page.get_by_role("checkbox", name=re.compile("^40m")), "Space")
    press_on(page, page.get_by_role("checkbox", name=re.compile("^15m")), "Space")
    type_into(page, page.get_by_label("Span between the supports"), "25")
    type_into(page, page.get_by_label("Height over ground"), "10")
    type_into(page, page.get_by_role("group", name="Conductor 1").get_by_label("Size"), "12")
    press_on(page, page.get_by_role("button", name="Submit for planning"))
    expect(page.locator(".state")).to_have_text("done", timeout=60_000)

    press_on(page, page.locator(".candidates h3 a").first)
    expect(page.locator("h1")).to_contain_text("of AWG 12")
    press_on(page, page.get_by_role("link", name="Move this wire by hand"))
    type_into(page, page.locator("#length_m"), "20")
    expect(page.locator("form.keep input[name=length_m]")).to_have_value("20", timeout=20_000)

    # And back later, from the list.
    page.goto("/")
    press_on(page, page.get_by_role("link", name="Slipway"))
    press_on(page, page.get_by_label("compare candidate 1"), "Space")
    press_on(page, page.get_by_label("compare candidate 2"), "Space")
    press_on(page, page.get_by_role("button", name="Compare those chosen"))
    expect(page.locator("h1")).to_have_text("Candidates side by side")
