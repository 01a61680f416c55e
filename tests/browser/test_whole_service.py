"""A request written on the page and planned by a real worker, watched to its end."""

from __future__ import annotations

import re
from collections.abc import Iterator
from pathlib import Path

import pytest
from playwright.sync_api import expect

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
