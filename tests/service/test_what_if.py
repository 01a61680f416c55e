"""What-ifs over HTTP: the API, the page, and storing what was found."""

from __future__ import annotations

import re
from collections.abc import Iterator
from typing import Any

import httpx
import pytest

from service.api.app import create_app
from service.contracts.request import DesignRequest
from service.contracts.what_if import WhatIf, WhatIfBand, WhatIfRequest
from service.errors import BenchBusy, BenchTooSlow, Fault, RequestRefused
from service.settings import Settings
from service.store import designs
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.pages import Page, finished, same
from tests.service.samples import FULL, sample_planned, sample_request
from tests.service.serving import served


class InventedBench:
    """Answers from an invented report, or meets what it is told to."""

    def __init__(self) -> None:
        self.asked: list[WhatIfRequest] = []
        self.meets: Exception | None = None

    def try_wire(self, asked: WhatIfRequest) -> WhatIf:
        self.asked.append(asked)
        if self.meets is not None:
            raise self.meets
        reports = sample_planned(
            sample_request(bands=[b.model_dump() for b in asked.bands])
        ).reports
        return WhatIf(
            engine_version="0.0-invented",
            request=asked,
            bands=tuple(
                WhatIfBand(
                    name=band.name,
                    service="partly served",
                    served_fraction=0.375,
                    swr_limit=2.0,
                    swr_worst=round(3.456 + 0.1 * index, 4),
                    resonance_mhz=None if index else band.centre.frequency_mhz,
                    low=band.low,
                    centre=band.centre,
                    high=band.high,
                    grid=band.grid,
                    gain_dbi=None if index == 1 else 5.55 + index,
                    take_off_deg=None if index == 1 else 37.25,
                    radiated_fraction=None if index == 1 else 0.7725,
                )
                for index, band in enumerate(reports[1].bands)
            ),
        )


@pytest.fixture
def bench() -> InventedBench:
    return InventedBench()


@pytest.fixture
def tried(
    wire_settings: Settings, wire_store: Store, stored: Stored, bench: InventedBench
) -> Iterator[httpx.Client]:
    del stored
    with served(create_app(wire_settings, wire_store, bench)) as client:
        yield client


@pytest.fixture
def without(wire_settings: Settings, wire_store: Store, stored: Stored) -> Iterator[httpx.Client]:
    del stored
    with served(create_app(wire_settings, wire_store)) as client:
        yield client


QUESTION: dict[str, Any] = {
    "bands": ["amateur-region-1: 40m"],
    "length_m": 20.4,
    "conductor": {"awg": 12},
    "height_m": 11.0,
}


def page_of(answer: httpx.Response, status: int = 200) -> Page:
    assert answer.status_code == status
    return Page(answer.text)


def test_the_api_hands_the_question_on_and_gives_the_answer(
    tried: httpx.Client, bench: InventedBench
) -> None:
    answer = tried.post("/v1/what-if", json=QUESTION)
    assert answer.status_code == 200
    assert WhatIf.model_validate_json(answer.text).request == bench.asked[0]
    assert bench.asked[0].bands[0].low_mhz == 7.0


@pytest.mark.parametrize(
    ("meets", "status", "code"),
    [
        (BenchBusy("Others wait."), 503, "what-if-busy"),
        (BenchTooSlow(8.0), 504, "what-if-too-slow"),
        (
            RequestRefused(
                [Fault("height_m", "1", "too low.", "Hang it higher.", "wire-not-covered")]
            ),
            422,
            "request-refused",
        ),
    ],
)
def test_what_the_bench_meets_is_a_problem_of_its_own(
    tried: httpx.Client, bench: InventedBench, meets: Exception, status: int, code: str
) -> None:
    bench.meets = meets
    answer = tried.post("/v1/what-if", json=QUESTION)
    assert answer.status_code == status
    assert answer.json()["type"] == f"/problems/{code}"
    assert ("retry-after" in answer.headers) is (status == 503)
    assert tried.get(f"/problems/{code}").status_code == 200


def test_without_a_bench_the_api_says_that_it_has_none(without: httpx.Client) -> None:
    answer = without.post("/v1/what-if", json=QUESTION)
    assert answer.status_code == 501
    assert answer.json()["type"] == "/problems/what-if-not-here"


def test_a_question_is_judged_by_the_contract_before_it_is_asked(
    tried: httpx.Client, bench: InventedBench
) -> None:
    answer = tried.post("/v1/what-if", json=QUESTION | {"length_m": -2.0})
    assert answer.status_code == 422
    assert [each["field"] for each in answer.json()["faults"]] == ["length_m"]
    assert (
        tried.post("/v1/what-if", content="{", headers={"Content-Type": "text/plain"}).status_code
        == 415
    )
    huge = tried.post("/v1/what-if", json=QUESTION | {"conductor": {"item_code": "x" * 70_000}})
    assert huge.status_code == 413
    assert not bench.asked


def test_the_page_starts_from_the_candidate_as_planned(
    tried: httpx.Client, bench: InventedBench, stored: Stored
) -> None:
    page = page_of(tried.get(f"/designs/{stored.done}/candidates/2/what-if"))
    candidate = tried.get(f"/v1/designs/{stored.done}/candidates/2").json()
    fields = {a["name"]: a.get("value") for tag, a in page.tags if tag == "input" and "id" in a}
    same(fields["length_m"] or "", candidate["length_m"])
    same(fields["transformer_ratio"] or "", candidate["transformer_ratio"])
    (asked,) = bench.asked
    assert asked.length_m == candidate["length_m"]
    assert asked.height_m == 10.0
    assert asked.ground == "average"
    assert asked.conductor == sample_request().stock.conductors[0]


def test_the_page_asks_about_the_values_of_its_query(
    tried: httpx.Client, bench: InventedBench, stored: Stored
) -> None:
    moved = {
        "length_m": "19.5",
        "height_m": "12.25",
        "ground": "salt-water",
        "conductor": "1",
        "transformer_ratio": "4",
    }
    tried.get(f"/designs/{stored.done}/candidates/1/what-if", params=moved)
    (asked,) = bench.asked
    assert (asked.length_m, asked.height_m, asked.ground) == (19.5, 12.25, "salt-water")
    assert asked.conductor == sample_request().stock.conductors[1]
    assert asked.transformer_ratio == 4.0
    tried.get(
        f"/designs/{stored.done}/candidates/1/what-if", params=moved | {"ground": "free-space"}
    )
    assert (bench.asked[1].ground, bench.asked[1].height_m) == ("free-space", None)


def test_a_design_that_says_more_has_all_of_it_asked(
    tried: httpx.Client, bench: InventedBench, wire_store: Store, wire_settings: Settings
) -> None:
    ground = {"relative_permittivity": 7.0, "conductivity_s_per_m": 0.02}
    site = FULL["site"] | {"ground": ground}
    request = sample_request(name="To be moved", **(FULL | {"site": site}))
    design = finished(wire_store, wire_settings, request, sample_planned(request))
    page = page_of(tried.get(f"/designs/{design}/candidates/1/what-if"))
    (asked,) = bench.asked
    assert asked.ground == request.site.ground
    assert (asked.feed_line, asked.matching) == (request.feed.feed_line, "per-band")
    assert asked.reference_point == "transmitter"
    assert asked.feed_fraction == 0.36
    assert "as in the request" in page.words


def test_the_page_shows_the_figures_of_the_answer_beside_those_planned(
    tried: httpx.Client, bench: InventedBench, stored: Stored
) -> None:
    page = page_of(tried.get(f"/designs/{stored.done}/candidates/1/what-if"))
    planned = tried.get(f"/v1/designs/{stored.done}/candidates/1").json()["bands"]
    answer = bench.try_wire(bench.asked[0])
    (table,) = page.tables
    for row, was, now in zip(table[2:], planned, answer.bands, strict=True):
        assert row[0] == now.name
        assert row[1].startswith(was["service"])
        assert row[2] == "partly served, 37\u00a0%"
        same(row[3], was["swr_worst"])
        same(row[4], now.swr_worst)
        same(row[5], now.centre.resistance_ohm)
        same(row[6], now.centre.reactance_ohm)
        same(row[7], now.resonance_mhz)
        same(row[8], now.gain_dbi)
        same(row[9], now.take_off_deg)
        told = row[10].removesuffix("\u00a0%")
        same(told, None if now.radiated_fraction is None else 100.0 * now.radiated_fraction)
    plots = [a for tag, a in page.tags if tag == "svg" and a.get("role") == "img"]
    assert len(plots) == len(planned)


@pytest.mark.parametrize(
    ("moved", "field"),
    [
        ({"length_m": "long"}, "length_m"),
        ({"length_m": ""}, "length_m"),
        ({"height_m": ""}, "height_m"),
        ({"ground": "cheese"}, "ground"),
        ({"conductor": "7"}, "conductor"),
        ({"transformer_ratio": "99"}, "transformer_ratio"),
    ],
)
def test_values_that_break_the_contract_are_told_on_the_page_and_not_asked(
    tried: httpx.Client, bench: InventedBench, stored: Stored, moved: dict[str, str], field: str
) -> None:
    address = f"/designs/{stored.done}/candidates/1/what-if"
    page = page_of(tried.get(address, params=moved), 422)
    assert re.search(rf"\b{field}\b", page.words)
    assert not bench.asked
    # What was typed is still there to be mended.
    typed = [a.get("value") for tag, a in page.tags if tag == "input" and a.get("name") in moved]
    assert not typed or typed[0] == next(iter(moved.values()))
    assert tried.post(address, data=moved).status_code == 422


@pytest.mark.parametrize("meets", [BenchBusy("Others wait."), BenchTooSlow(8.0)])
def test_a_busy_bench_is_told_on_the_page_with_what_to_do(
    tried: httpx.Client, bench: InventedBench, stored: Stored, meets: BenchBusy | BenchTooSlow
) -> None:
    bench.meets = meets
    page = page_of(tried.get(f"/designs/{stored.done}/candidates/1/what-if"), 503)
    assert meets.title in page.words
    assert meets.detail in page.words


def test_without_a_bench_the_page_says_where_there_is_one_and_still_stores(
    without: httpx.Client, stored: Stored, wire_store: Store
) -> None:
    address = f"/designs/{stored.done}/candidates/1/what-if"
    assert "spanwright serve" in page_of(without.get(address)).words
    answer = without.post(address, data={"length_m": "18.75"}, follow_redirects=False)
    assert answer.status_code == 303
    pinned = request_at(wire_store, answer)
    assert pinned.lengths is not None
    assert (pinned.lengths.low_m, pinned.lengths.high_m) == (18.75, 18.75)


def request_at(store: Store, answer: httpx.Response) -> DesignRequest:
    return designs.get(store, answer.headers["location"].removeprefix("/designs/")).request


def test_what_was_found_is_stored_as_a_design_of_that_wire_alone(
    tried: httpx.Client, stored: Stored, wire_store: Store
) -> None:
    address = f"/designs/{stored.done}/candidates/1/what-if"
    moved = {
        "length_m": "19.5",
        "height_m": "12.25",
        "ground": "good",
        "conductor": "1",
        "transformer_ratio": "4",
    }
    answer = tried.post(address, data=moved, follow_redirects=False)
    assert answer.status_code == 303
    pinned, whole = request_at(wire_store, answer), sample_request()
    assert pinned.bands == whole.bands
    assert pinned.lengths is not None
    assert (pinned.lengths.low_m, pinned.lengths.high_m) == (19.5, 19.5)
    assert pinned.stock.choices() == (whole.stock.conductors[1],)
    assert pinned.feed.transformer_ratios == (4.0,)
    assert (pinned.site.height_m, pinned.site.ground) == (12.25, "good")
    assert pinned.site.span_m == whole.site.span_m
    assert (pinned.candidates, pinned.largest_set) == (1, 1)
    assert "moved by hand" in pinned.name
    again = tried.post(address, data=moved, follow_redirects=False)
    assert again.headers["location"] == answer.headers["location"]
    other = tried.post(address, data=moved | {"length_m": "19.6"}, follow_redirects=False)
    assert other.headers["location"] != answer.headers["location"]


def test_a_wire_longer_than_the_span_is_not_stored(tried: httpx.Client, stored: Stored) -> None:
    address = f"/designs/{stored.done}/candidates/1/what-if"
    page = page_of(tried.post(address, data={"length_m": "23.9"}), 422)
    assert "lengths.low_m" in page.words


def test_the_page_of_a_candidate_leads_to_its_what_if(tried: httpx.Client, stored: Stored) -> None:
    page = page_of(tried.get(f"/designs/{stored.done}/candidates/1"))
    assert f"/designs/{stored.done}/candidates/1/what-if" in set(page.attributes("href"))


def test_a_what_if_of_no_candidate_is_refused(tried: httpx.Client, stored: Stored) -> None:
    for design, rank, status in ((stored.done, 9, 404), (stored.running, 1, 409)):
        assert tried.get(f"/designs/{design}/candidates/{rank}/what-if").status_code == status
        assert (
            tried.post(
                f"/designs/{design}/candidates/{rank}/what-if", data={"length_m": "20"}
            ).status_code
            == status
        )
