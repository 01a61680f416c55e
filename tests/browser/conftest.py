"""A browser on this machine, looking at the running service of the wire tests.

Playwright drives the Chromium that is installed; it brings none of its own.
"""

from __future__ import annotations

import shutil
from collections.abc import Callable, Iterator
from contextlib import ExitStack
from typing import Any

import httpx
import pytest
from playwright.sync_api import Browser, Page, sync_playwright

from tests.service.conftest import stored, wire, wire_settings, wire_store

__all__ = ["browser", "new_page", "page", "stored", "wire", "wire_settings", "wire_store"]

WIDE = {"width": 1280, "height": 900}
NARROW = {"width": 360, "height": 740}

#: Opens a page of its own; takes what a browser's context takes.
NewPage = Callable[..., Page]


@pytest.fixture(scope="module")
def browser(wire: httpx.Client) -> Iterator[Browser]:
    """Chromium without a window; it ends before the service does."""
    del wire  # it runs first, and ends last
    chromium = shutil.which("chromium") or shutil.which("chromium-browser")
    if chromium is None:
        pytest.skip("install chromium to look at the pages with a browser")
    with sync_playwright() as playwright:
        # Chromium's own sandbox needs rights that containers withhold; the pages are ours.
        opened = playwright.chromium.launch(executable_path=chromium, args=["--no-sandbox"])
        yield opened
        opened.close()


@pytest.fixture
def new_page(browser: Browser, wire: httpx.Client) -> Iterator[NewPage]:
    """Pages whose scripts and policies have nothing to complain of, but for refusals asked for."""
    complaints: list[str] = []
    with ExitStack() as contexts:

        def open_one(**options: Any) -> Page:  # noqa: ANN401  # handed on as they are
            given = {"base_url": str(wire.base_url), "viewport": WIDE} | options
            context = browser.new_context(**given)
            contexts.callback(context.close)
            context.set_default_timeout(10_000)
            page = context.new_page()
            page.on("pageerror", lambda error: complaints.append(str(error)))
            page.on(
                "console",
                lambda said: (
                    complaints.append(said.text)
                    if said.type == "error" and "Failed to load resource" not in said.text
                    else None
                ),
            )
            return page

        yield open_one
    assert not complaints


@pytest.fixture
def page(new_page: NewPage) -> Page:
    """One page of a wide window."""
    return new_page()
