"""The request form over HTTP: shown, checked, refused with its faults, and submitted."""

from __future__ import annotations

import re
from typing import Any

import httpx
import pytest

from service.contracts.request import parse_request
from service.store import designs
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.pages import Page, read
from tests.service.samples import request_json, sample_request

WRITTEN = {
    "name": "Boat shed",
    "shown-list": "amateur-region-2",
    "list": "amateur-region-2",
    "band-40m-take": "yes",
    "band-15m-take": "yes",
    "unit": "ft",
    "span": "80",
    "height": "33",
    "ground": "average",
    "wire-0-size": "12",
    "wire-0-unit": "awg",
    "steady": "yes",
    "key": "0123456789abcdef",
}


def send(wire: httpx.Client, do: str, **changes: str) -> httpx.Response:
    entries = {**WRITTEN, "do": do, **{k.replace("_", "-"): v for k, v in changes.items()}}
    return wire.post("/new", data=entries, headers={"Accept": "text/html"})


def controls(page: Page) -> list[dict[str, str | None]]:
    kinds = ("input", "select")
    return [a for tag, a in page.tags if tag in kinds and a.get("type") != "hidden"]


def form_entries(page: Page) -> dict[str, str]:
    """What a browser would send of a page's form, but for its selections."""
    return {
        attributes["name"] or "": attributes.get("value") or ""
        for tag, attributes in page.tags
        if tag == "input"
        and (attributes.get("type") not in {"checkbox", "radio"} or "checked" in attributes)
    }


def test_every_field_has_its_label_and_what_describes_it_is_there(wire: httpx.Client) -> None:
    page = read(wire, "/new")
    labels, ids = set(page.attributes("for")), set(page.attributes("id"))
    for each in controls(page):
        assert each.get("type") == "radio" or each["id"] in labels, each
        assert set((each.get("aria-describedby") or "").split()) <= ids, each


def test_bands_of_the_list_are_shown_with_their_edges(wire: httpx.Client) -> None:
    words = " ".join(read(wire, "/new").words.split())
    assert "40m 7.000 – 7.200 MHz" in words
    assert "60m 5.3515 – 5.3665 MHz" in words


def test_a_form_sent_is_a_design_stored_and_its_page_shown(
    wire: httpx.Client, wire_store: Store
) -> None:
    answer = send(wire, "submit", key="a form of its own")
    assert answer.status_code == 303
    address = answer.headers["location"]
    request = designs.get(wire_store, address.rpartition("/")[2]).request
    assert request.name == "Boat shed"
    assert [band.name for band in request.bands] == ["40m", "15m"]
    assert request.site.span_m == 24.384
    assert wire.get(address).status_code == 200


def test_a_form_sent_twice_is_one_design(wire: httpx.Client) -> None:
    first, second = (send(wire, "submit", key="twice").headers["location"] for _ in range(2))
    assert first == second


def test_a_form_gone_back_to_and_changed_is_another_design(wire: httpx.Client) -> None:
    first = send(wire, "submit", key="gone back to").headers["location"]
    second = send(wire, "submit", key="gone back to", span="90").headers["location"]
    assert first != second


def test_each_form_shown_has_a_key_of_its_own_and_keeps_it(wire: httpx.Client) -> None:
    first, second = (form_entries(read(wire, "/new"))["key"] for _ in range(2))
    assert len(first) == 32
    assert first != second
    assert form_entries(Page(send(wire, "check", key=first).text))["key"] == first


def test_faults_are_told_in_the_words_of_the_api_beside_their_fields_and_at_the_top(
    wire: httpx.Client, wire_store: Store
) -> None:
    before = designs.count(wire_store)
    answer = send(wire, "submit", span="wide", wire_0_size="41", band_40m_limit="0.5")
    assert answer.status_code == 422
    page = Page(answer.text)
    wrong = {each["id"]: each for each in controls(page) if each.get("aria-invalid") == "true"}
    assert set(wrong) == {"span", "wire-0-size", "band-40m-limit"}
    links = [
        (a["href"] or "")[1:] for tag, a in page.tags if tag == "a" and "#" in (a["href"] or "")
    ]
    assert set(wrong) < set(links)
    api = wire.post(
        "/v1/designs",
        content=request_json(
            bands=[{"name": "40m", "low_mhz": 7.0, "high_mhz": 7.3, "swr_limit": 0.5}],
            site={"span_m": "wide", "height_m": 10.0},
            stock={"conductors": [{"awg": 41}]},
        ),
        headers={"Content-Type": "application/json"},
    )
    words = " ".join(page.words.split())
    for fault in api.json()["faults"]:
        said = f"{fault['reason'][:1].upper()}{fault['reason'][1:]} {fault['remedy']}"
        assert said in words
        assert fault["reason"] in words
    assert designs.count(wire_store) == before


def test_the_focus_goes_to_the_summary_of_faults(wire: httpx.Client) -> None:
    page = Page(send(wire, "submit", span="").text)
    focused = [a for _, a in page.tags if "autofocus" in a]
    assert [each["id"] for each in focused] == ["summary"]
    assert focused[0]["role"] == "alert"
    assert focused[0]["tabindex"] == "-1"


def test_what_was_written_stays_written(wire: httpx.Client) -> None:
    page = Page(send(wire, "submit", span="wide", name="<Boat> & shed").text)
    entries = form_entries(page)
    assert entries["span"] == "wide"
    assert entries["name"] == "<Boat> & shed"
    assert entries["band-40m-take"] == "yes"
    assert entries["unit"] == "ft"


def test_a_check_tells_the_size_of_the_search_and_stores_nothing(
    wire: httpx.Client, wire_store: Store
) -> None:
    before = designs.count(wire_store)
    answer = send(wire, "check")
    assert answer.status_code == 200
    assert re.search(r"About [\d\u202f]+ combinations: 1 way to hang the wire", answer.text)
    assert "= 24.384 m" in answer.text
    assert designs.count(wire_store) == before


@pytest.mark.parametrize("do", ["check", "submit"])
def test_ticks_count_for_the_list_that_is_shown_whatever_list_is_chosen_next(
    wire: httpx.Client, do: str
) -> None:
    answer = send(wire, do, list="amateur-region-1", span="wide")
    assert "7.000 – 7.300 MHz" in answer.text


def test_another_list_is_shown_with_what_was_ticked(wire: httpx.Client) -> None:
    page = Page(send(wire, "show-list", list="broadcast-region-1").text)
    assert "5.900 – 6.200 MHz" in page.words
    entries = form_entries(page)
    assert (entries["own-0-name"], entries["own-0-high"]) == ("40m", "7.3")


@pytest.mark.parametrize(
    ("do", "field"), [("add-band", "own-1-low"), ("add-conductor", "wire-1-size")]
)
def test_a_row_is_added_without_scripts(wire: httpx.Client, do: str, field: str) -> None:
    assert field in form_entries(Page(send(wire, do).text))


def test_a_stored_design_fills_the_form(wire: httpx.Client, stored: Stored) -> None:
    page = read(wire, f"/new?from={stored.done}")
    assert f"/new?from={stored.done}" in set(
        read(wire, f"/designs/{stored.done}").attributes("href")
    )
    entries = form_entries(page)
    assert entries["name"] == "Invented station"
    assert (entries["wire-0-size"], entries["wire-1-size"]) == ("12", "1.5")


def test_starting_from_a_design_that_is_not_there_is_refused(wire: httpx.Client) -> None:
    answer = wire.get(f"/new?from={'0' * 32}", headers={"Accept": "text/html"})
    assert answer.status_code == 404


def test_live_checking_says_what_the_page_would_say(wire: httpx.Client) -> None:
    wrong = wire.post("/new/check", data={**WRITTEN, "span": "wide"}).json()
    assert [fault["field"] for fault in wrong["faults"]] == ["span"]
    assert wrong["faults"][0]["said"] in " ".join(
        Page(send(wire, "submit", span="wide").text).words.split()
    )
    assert wrong["standing"] == "One thing is missing or wrong."
    right = wire.post("/new/check", data=WRITTEN).json()
    assert right["faults"] == []
    assert right["shown"]["span"] == "= 24.384 m"
    assert right["standing"].startswith("About ")


@pytest.mark.parametrize("address", ["/new", "/new/check"])
@pytest.mark.parametrize(
    ("body", "media_type"),
    [
        (b"span=24", "text/plain"),
        (b"{}", "application/json"),
        (b"no form", "application/x-www-form-urlencoded"),
        (b"a=" + 70_000 * b"b", "application/x-www-form-urlencoded"),
    ],
)
def test_what_is_no_form_is_refused(
    wire: httpx.Client, address: str, body: bytes, media_type: str
) -> None:
    answer = wire.post(address, content=body, headers={"Content-Type": media_type})
    assert answer.status_code == 422
    assert answer.json()["faults"][0]["code"] == "form-unreadable"


# ---------------------------------------------------------------- the check of the API
def check(wire: httpx.Client, body: str, media_type: str = "application/json") -> httpx.Response:
    return wire.post("/v1/designs/check", content=body, headers={"Content-Type": media_type})


def test_a_request_is_checked_without_being_stored(wire: httpx.Client, wire_store: Store) -> None:
    before = designs.count(wire_store)
    answer = check(wire, request_json())
    assert answer.status_code == 200
    estimate: dict[str, Any] = answer.json()
    assert (estimate["ways"], estimate["transformers"], estimate["bands"]) == (2, 2, 3)
    assert estimate["longest_wire_m"] == parse_request(request_json()).site.longest_wire_m
    assert designs.count(wire_store) == before


def test_a_check_refuses_what_a_submission_refuses(wire: httpx.Client) -> None:
    body = request_json(site={"span_m": 2.0, "height_m": 10.0})
    submitted = wire.post(
        "/v1/designs", content=body, headers={"Content-Type": "application/json"}
    ).json()
    checked = check(wire, body)
    assert checked.status_code == 422
    assert checked.json()["faults"] == submitted["faults"]
    assert check(wire, body, "text/plain").status_code == 415


def test_the_form_of_the_largest_request_keeps_within_its_weight(wire: httpx.Client) -> None:
    conductors = [{"awg": n, "item_code": f"W-{n}", "price_per_m": 1.5} for n in range(8, 20)]
    own = [{"name": f"own {n}", "low_mhz": 5.0 + n, "high_mhz": 5.1 + n} for n in range(12)]
    request = sample_request(stock={"conductors": conductors}, bands=own)
    answer = wire.post(
        "/v1/designs",
        content=request.canonical_json(),
        headers={"Content-Type": "application/json"},
    )
    page = wire.get(f"/new?from={answer.json()['id']}")
    assert 60_000 < len(page.content) < 150_000
