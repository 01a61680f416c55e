"""The API on the wire: submit, list, look, take away."""

from __future__ import annotations

import re
from typing import Any
from urllib.parse import urlparse

import httpx
import pytest

from service.contracts.band_lists import BAND_LISTS
from service.contracts.progress import Design
from service.contracts.report import FeedReport
from service.contracts.request import parse_request
from service.exports.csv_table import feed_report_csv
from service.store import designs
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.samples import request_json, sample_planned, sample_request

JSON = {"Content-Type": "application/json"}


def submitted(wire: httpx.Client, key: str | None = None, **changes: object) -> httpx.Response:
    headers = JSON if key is None else JSON | {"Idempotency-Key": key}
    answer = wire.post("/v1/designs", content=request_json(**changes), headers=headers)
    assert answer.status_code == 202, answer.text
    return answer


def test_a_request_is_accepted_with_the_address_of_its_design(wire: httpx.Client) -> None:
    answer = submitted(wire, name="Accepted")
    body = wire.get(answer.headers["location"]).json()
    assert body["id"] == answer.json()["id"]
    assert (body["name"], body["state"], body["result"]) == ("Accepted", "queued", None)


def test_the_stored_request_is_the_one_sent_with_its_defaults(wire: httpx.Client) -> None:
    body = submitted(wire, bands="amateur-region-2: 40m, 15m").json()
    expected = sample_request(bands="amateur-region-2: 40m, 15m")
    assert parse_request(httpx.Response(200, json=body["request"]).content) == expected


def test_the_same_key_and_request_give_the_same_design(
    wire: httpx.Client, wire_store: Store
) -> None:
    first = submitted(wire, key="once")
    before = designs.count(wire_store)
    again = submitted(wire, key="once")
    assert again.headers["location"] == first.headers["location"]
    assert designs.count(wire_store) == before


def test_without_a_key_each_request_is_a_design_of_its_own(wire: httpx.Client) -> None:
    assert submitted(wire).json()["id"] != submitted(wire).json()["id"]


def test_links_lead_through_every_design_once_newest_first(wire: httpx.Client) -> None:
    everything = wire.get("/v1/designs", params={"limit": 100}).json()["designs"]
    assert len(everything) > 4
    assert [d["created_at"] for d in everything] == sorted(
        (d["created_at"] for d in everything), reverse=True
    )
    seen: list[str] = []
    address = "/v1/designs?limit=3"
    while address:
        answer = wire.get(address)
        page = answer.json()["designs"]
        assert len(page) <= 3
        seen += [each["id"] for each in page]
        address = answer.links.get("next", {}).get("url", "")
    assert seen == [each["id"] for each in everything]


def test_a_line_of_the_list_tells_state_and_bands(wire: httpx.Client, stored: Stored) -> None:
    listed = {each["id"]: each for each in wire.get("/v1/designs?limit=100").json()["designs"]}
    for state in ("done", "running", "queued", "cancelled"):
        line = listed[getattr(stored, state)]
        assert (line["state"], line["bands"]) == (state, ["40m", "15m", "20m"])


def test_a_done_design_comes_with_the_result_as_it_was_stored(
    wire: httpx.Client, stored: Stored
) -> None:
    design = Design.model_validate_json(wire.get(f"/v1/designs/{stored.done}").content)
    assert design.result == sample_planned(design.request).result


def test_candidates_and_reports_are_those_of_the_result(wire: httpx.Client, stored: Stored) -> None:
    address = f"/v1/designs/{stored.done}/candidates"
    planned = sample_planned(sample_request(name="Invented station"))
    candidates = wire.get(address).json()["candidates"]
    assert [each["rank"] for each in candidates] == [1, 2]
    for candidate, report in zip(candidates, planned.reports, strict=True):
        assert wire.get(f"{address}/{candidate['rank']}").json() == candidate
        found = wire.get(f"{address}/{candidate['rank']}/report")
        assert FeedReport.model_validate_json(found.content) == report


def test_the_csv_is_a_file_of_the_same_report(wire: httpx.Client, stored: Stored) -> None:
    address = f"/v1/designs/{stored.done}/candidates/2/report"
    answer = wire.get(f"{address}.csv")
    assert answer.headers["content-type"].startswith("text/csv")
    assert f"feed-impedance-{stored.done}-2.csv" in answer.headers["content-disposition"]
    report = FeedReport.model_validate_json(wire.get(address).content)
    assert answer.text == feed_report_csv(report)


def test_band_lists_are_given_with_their_sources(wire: httpx.Client) -> None:
    lists = {each["name"]: each for each in wire.get("/v1/band-lists").json()["band_lists"]}
    assert list(lists) == list(BAND_LISTS)
    for name, each in BAND_LISTS.items():
        assert lists[name]["source"] == each.source
        assert [(b["name"], b["low_mhz"], b["high_mhz"]) for b in lists[name]["bands"]] == [
            (b.name, b.low_mhz, b.high_mhz) for b in each.bands
        ]


def test_a_waiting_design_is_cancelled_at_once(wire: httpx.Client) -> None:
    location = submitted(wire).headers["location"]
    answer = wire.post(f"{location}/cancel")
    assert (answer.status_code, answer.json()["state"]) == (202, "cancelled")


def test_cancelling_a_done_design_leaves_it_done(wire: httpx.Client, stored: Stored) -> None:
    assert wire.post(f"/v1/designs/{stored.done}/cancel").json()["state"] == "done"


@pytest.mark.parametrize(
    "path",
    ["", "/candidates", "/candidates/1", "/candidates/1/report", "/candidates/1/report.csv"],
)
def test_a_reader_who_has_the_answer_is_told_so_without_a_body(
    wire: httpx.Client, stored: Stored, path: str
) -> None:
    address = f"/v1/designs/{stored.done}{path}"
    tag = wire.get(address).headers["etag"]
    for known in (tag, f"W/{tag}", f'"other", {tag}', "*"):
        answer = wire.get(address, headers={"If-None-Match": known})
        assert (answer.status_code, answer.content) == (304, b""), known
        assert answer.headers["etag"] == tag
    assert wire.get(address, headers={"If-None-Match": '"other"'}).status_code == 200


def test_different_reports_have_different_tags(wire: httpx.Client, stored: Stored) -> None:
    address = f"/v1/designs/{stored.done}/candidates"
    tags = [wire.get(f"{address}/{rank}/report").headers["etag"] for rank in (1, 2)]
    assert tags[0] != tags[1]


def test_head_gives_the_headers_of_get_and_no_body(wire: httpx.Client, stored: Stored) -> None:
    address = f"/v1/designs/{stored.done}"
    head, full = wire.head(address), wire.get(address)
    assert head.status_code == 200
    assert head.content == b""
    for name in ("etag", "content-length", "content-type"):
        assert head.headers[name] == full.headers[name]


def test_health_tells_live_and_ready(wire: httpx.Client) -> None:
    assert wire.get("/health/live").json()["status"] == "live"
    assert wire.get("/health/ready").json()["status"] == "ready"


@pytest.mark.parametrize("path", ["/", "/v1/designs", "/v1/nothing", "/static/sheet.css"])
def test_every_answer_carries_the_headers_of_safety(wire: httpx.Client, path: str) -> None:
    headers = wire.get(path).headers
    policy = headers["content-security-policy"]
    assert "default-src 'none'" in policy
    assert "unsafe" not in policy
    assert "http" not in policy  # no other host
    assert headers["x-content-type-options"] == "nosniff"
    assert headers["x-frame-options"] == "DENY"
    assert headers["referrer-policy"] == "same-origin"


def references(part: object) -> list[str]:
    if isinstance(part, dict):
        own = [part["$ref"]] if isinstance(part.get("$ref"), str) else []
        return own + [each for value in part.values() for each in references(value)]
    if isinstance(part, list):
        return [each for value in part for each in references(value)]
    return []


def test_the_description_is_openapi_3_1_and_every_reference_leads_somewhere(
    wire: httpx.Client,
) -> None:
    document: dict[str, Any] = wire.get("/openapi.json").json()
    assert document["openapi"].startswith("3.1.")
    assert document["info"]["title"] == "Spanwright"
    assert len(references(document)) > 20
    for reference in references(document):
        target: Any = document
        for step in reference.removeprefix("#/").split("/"):
            target = target[step]
        assert target


def test_every_operation_is_described_with_its_problems(wire: httpx.Client) -> None:
    document = wire.get("/openapi.json").json()
    for path, operations in document["paths"].items():
        for method, operation in operations.items():
            found = {
                status: content
                for status, answer in operation["responses"].items()
                if not status.startswith("2")
                for content in answer["content"]
            }
            assert set(found.values()) == {"application/problem+json"}, (path, method)
            assert operation["summary"]


def test_every_described_path_without_parameters_is_served(wire: httpx.Client) -> None:
    document = wire.get("/openapi.json").json()
    plain = [
        path
        for path, operations in document["paths"].items()
        if "get" in operations and not re.search(r"[{]", path)
    ]
    assert plain
    for path in plain:
        with wire.stream("GET", path) as answer:  # one of them goes on for ever
            assert answer.status_code == 200, path


def test_the_body_described_for_a_request_takes_text_for_bands(wire: httpx.Client) -> None:
    document = wire.get("/openapi.json").json()
    asked = document["components"]["schemas"]["AskedDesignRequest"]
    assert asked["required"] == ["bands", "site", "stock"]
    assert {"string", "array"} <= {
        each.get("type") for each in asked["properties"]["bands"]["anyOf"]
    }


def test_the_address_of_a_design_is_a_path_of_this_service(wire: httpx.Client) -> None:
    assert urlparse(submitted(wire).headers["location"]).netloc == ""
