"""A page as the tests read it: its tags, tables and words."""

from __future__ import annotations

from collections.abc import Iterator
from html.parser import HTMLParser
from typing import Any

import httpx
import pytest

from service.contracts.candidate import PlannedDesign
from service.contracts.request import DesignRequest
from service.doorbell import Doorbell
from service.intake import submit
from service.settings import Settings
from service.store import jobs
from service.store.session import Store


class Page(HTMLParser):
    """The parts of a page that the tests look at."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.tables: list[list[list[str]]] = []
        self.words = ""
        self._cell = False
        self.feed(html)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag == "table":
            self.tables.append([])
        elif tag == "tr":
            self.tables[-1].append([])
        elif tag in {"td", "th"}:
            self.tables[-1][-1].append("")
            self._cell = True

    def handle_endtag(self, tag: str) -> None:
        if tag in {"td", "th", "tr", "table"}:
            self._cell = False

    def handle_data(self, data: str) -> None:
        self.words += data
        if self._cell:
            self.tables[-1][-1][-1] += data

    def attributes(self, name: str) -> Iterator[str]:
        for _, attributes in self.tags:
            value = attributes.get(name)
            if value is not None:
                yield value


def finished(
    store: Store, settings: Settings, request: DesignRequest, planned: PlannedDesign
) -> str:
    """Store a design that is done; whatever waits before it makes room."""
    for job in iter(lambda: jobs.claim(store, "tests", lease_s=600.0), None):
        jobs.fail(store, job, "makes room for the design that is looked at")
    design_id = submit(store, Doorbell(settings), request, None).design_id
    claimed = jobs.claim(store, "tests", lease_s=600.0)
    assert claimed is not None
    assert jobs.finish(store, claimed, planned)
    return design_id


def read(wire: httpx.Client, address: str) -> Page:
    answer = wire.get(address, headers={"Accept": "text/html"})
    assert answer.status_code == 200, answer.text
    assert answer.headers["content-type"] == "text/html; charset=utf-8"
    return Page(answer.text)


def same(shown: str, given: float | None) -> None:
    """The number shown is the number given, to the digits shown."""
    text = shown.strip().replace("−", "-").replace("\u00a0", " ")
    if given is None:
        assert text == "–"
    elif text == "> 100":
        assert given >= 100.0
    else:
        digits = len(text.partition(".")[2])
        assert float(text) == pytest.approx(given, abs=0.5000001 * 10.0**-digits)


def point_matches(row: list[str], point: dict[str, Any]) -> None:
    for shown, field in zip(
        row,
        ("frequency_mhz", "resistance_ohm", "reactance_ohm", "reflection", "swr"),
        strict=True,
    ):
        same(shown, point[field])


def table_headed(page: Page, *first: str) -> list[list[str]]:
    """The table whose first cells read so."""
    found = [each for each in page.tables if each and each[0][: len(first)] == list(first)]
    assert len(found) == 1, [each[0] for each in page.tables]
    return found[0]
