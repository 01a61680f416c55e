"""Refusals on the wire: problem documents (RFC 9457), their status and their words."""

from __future__ import annotations

import logging
from typing import Any

import httpx
import pytest

from service.contracts.request import LARGEST_REQUEST_BYTES, parse_request
from service.errors import RequestRefused
from service.store import designs
from tests.service.conftest import Stored
from tests.service.samples import request_json

JSON = {"Content-Type": "application/json"}
BROWSER = {"Accept": "text/html,application/xhtml+xml;q=0.9,*/*;q=0.8"}


def problem(answer: httpx.Response, status: int) -> dict[str, Any]:
    assert answer.status_code == status, answer.text
    assert answer.headers["content-type"] == "application/problem+json"
    body: dict[str, Any] = answer.json()
    assert body["status"] == status
    assert body["instance"] == answer.request.url.path
    assert body["title"]
    assert body["detail"]
    return body


def band(low_mhz: float, high_mhz: float, name: str = "40m") -> dict[str, object]:
    return {"name": name, "low_mhz": low_mhz, "high_mhz": high_mhz}


@pytest.mark.parametrize(
    ("changes", "field", "value", "code"),
    [
        ({"bands": [band(7.2, 7.0)]}, "bands[0].low_mhz", "7.2", "edges-swapped"),
        ({"bands": [band(0.08, 0.11)]}, "bands[0].low_mhz", "0.08", "greater-than-equal"),
        ({"bands": [band(999.0, 1001.0)]}, "bands[0].high_mhz", "1001.0", "less-than-equal"),
        (
            {"bands": [band(7.0, 7.1), band(7.1, 7.2)]},
            "bands[1].name",
            "40m",
            "band-names-overlap",
        ),
        (
            {"site": {"span_m": 5.0, "height_m": 5.0}},
            "site.span_m",
            "5.0",
            "span-too-short",
        ),
        (
            {
                "bands": [band(430.0, 440.0, "70cm")],
                "stock": {"conductors": [{"diameter_mm": 50.0}]},
            },
            "stock.conductors[0]",
            "50.00 mm",
            "diameter-breaks-thin-wire",
        ),
    ],
)
def test_a_request_that_breaks_the_contract_is_answered_422_with_field_value_and_remedy(
    wire: httpx.Client, changes: dict[str, Any], field: str, value: str, code: str
) -> None:
    text = request_json(**changes)
    body = problem(wire.post("/v1/designs", content=text, headers=JSON), 422)
    faults = [fault for fault in body["faults"] if fault["code"] == code]
    assert [(fault["field"], fault["value"]) for fault in faults] == [(field, value)]
    with pytest.raises(RequestRefused) as refused:
        parse_request(text)
    words = [(fault.reason, fault.remedy) for fault in refused.value.faults]
    assert [(fault["reason"], fault["remedy"]) for fault in body["faults"]] == words


def test_a_refused_request_is_not_stored(wire: httpx.Client) -> None:
    before = wire.get("/v1/designs").json()
    problem(wire.post("/v1/designs", content=request_json(bands=[]), headers=JSON), 422)
    assert wire.get("/v1/designs").json() == before


def test_malformed_json_is_answered_400(wire: httpx.Client) -> None:
    body = problem(wire.post("/v1/designs", content=b'{"bands": [', headers=JSON), 400)
    assert body["faults"][0]["code"] == "json-invalid"


def test_an_empty_body_is_answered_400(wire: httpx.Client) -> None:
    problem(wire.post("/v1/designs", content=b"", headers=JSON), 400)


def test_a_request_too_large_is_answered_413(wire: httpx.Client) -> None:
    big = b" " * (LARGEST_REQUEST_BYTES + 1)
    body = problem(wire.post("/v1/designs", content=big, headers=JSON), 413)
    assert body["faults"][0]["code"] == "request-too-large"


def test_a_request_of_exactly_the_limit_is_read(wire: httpx.Client) -> None:
    text = request_json().encode().ljust(LARGEST_REQUEST_BYTES)
    assert wire.post("/v1/designs", content=text, headers=JSON).status_code == 202


@pytest.mark.parametrize(
    "headers",
    [
        {"Content-Type": "application/x-www-form-urlencoded"},
        {"Content-Type": "text/plain"},
        {},
        JSON | {"Content-Encoding": "gzip"},
    ],
)
def test_a_body_of_another_kind_is_answered_415(
    wire: httpx.Client, headers: dict[str, str]
) -> None:
    body = problem(wire.post("/v1/designs", content=request_json(), headers=headers), 415)
    assert body["faults"][0]["remedy"].startswith("Send the request")


def test_a_missing_design_is_answered_404_on_every_path(wire: httpx.Client) -> None:
    nowhere = "/v1/designs/0000000000"
    for path in ("", "/candidates", "/candidates/1", "/candidates/1/report"):
        body = problem(wire.get(nowhere + path), 404)
        assert body["faults"][0]["value"] == "0000000000", path
    problem(wire.get(f"{nowhere}/candidates/1/report.csv"), 404)
    problem(wire.post(f"{nowhere}/cancel"), 404)


@pytest.mark.parametrize("odd", ["%00", "%F0%9F%92%A9", "a" * 500, "..%2F..", "%27%20OR%201=1"])
def test_an_odd_identifier_is_only_a_missing_design(wire: httpx.Client, odd: str) -> None:
    assert wire.get(f"/v1/designs/{odd}").status_code == 404


def test_a_missing_candidate_is_answered_404_with_the_ranks_there_are(
    wire: httpx.Client, stored: Stored
) -> None:
    body = problem(wire.get(f"/v1/designs/{stored.done}/candidates/3"), 404)
    assert body["faults"][0]["remedy"] == "Ask for a rank from 1 to 2."


@pytest.mark.parametrize("rank", ["0", "21", "-1", "first"])
def test_a_rank_that_can_be_none_is_answered_422(
    wire: httpx.Client, stored: Stored, rank: str
) -> None:
    body = problem(wire.get(f"/v1/designs/{stored.done}/candidates/{rank}"), 422)
    assert (body["faults"][0]["field"], body["faults"][0]["value"]) == ("rank", rank)


@pytest.mark.parametrize("path", ["candidates", "candidates/1", "candidates/1/report"])
@pytest.mark.parametrize("state", ["queued", "running", "cancelled"])
def test_a_design_without_a_result_is_answered_409_with_its_state(
    wire: httpx.Client, stored: Stored, state: str, path: str
) -> None:
    body = problem(wire.get(f"/v1/designs/{getattr(stored, state)}/{path}"), 409)
    assert f"is {state}" in body["detail"]


@pytest.mark.parametrize("limit", ["0", "101", "many", "1.5"])
def test_a_limit_out_of_range_is_answered_422(wire: httpx.Client, limit: str) -> None:
    body = problem(wire.get("/v1/designs", params={"limit": limit}), 422)
    assert (body["faults"][0]["field"], body["faults"][0]["value"]) == ("limit", limit)


def test_a_key_sent_with_another_request_is_answered_422(wire: httpx.Client) -> None:
    headers = JSON | {"Idempotency-Key": "one key, two requests"}
    assert wire.post("/v1/designs", content=request_json(), headers=headers).status_code == 202
    other = request_json(power_w=50.0)
    body = problem(wire.post("/v1/designs", content=other, headers=headers), 422)
    assert body["type"] == "/problems/idempotency-key-reused"


def test_a_key_too_long_is_answered_422(wire: httpx.Client) -> None:
    headers = JSON | {"Idempotency-Key": "k" * 201}
    body = problem(wire.post("/v1/designs", content=request_json(), headers=headers), 422)
    assert body["faults"][0]["field"] == "Idempotency-Key"


def test_an_unknown_address_is_answered_404_as_a_problem(wire: httpx.Client) -> None:
    assert problem(wire.get("/v1/nothing"), 404)["type"] == "/problems/path-unknown"


def test_a_wrong_method_is_answered_405_with_every_method_allowed(wire: httpx.Client) -> None:
    answer = wire.delete("/v1/designs")
    body = problem(answer, 405)
    assert set(answer.headers["allow"].split(", ")) == {"GET", "HEAD", "POST"}
    assert "POST" in body["faults"][0]["remedy"]


def test_a_browser_is_shown_the_words_of_the_problem_as_a_page(wire: httpx.Client) -> None:
    page = wire.get("/designs/0000000000", headers=BROWSER)
    body = problem(wire.get("/designs/0000000000", headers={"Accept": "application/json"}), 404)
    assert page.status_code == 404
    assert page.headers["content-type"].startswith("text/html")
    assert page.headers["vary"] == "Accept"
    for words in (body["title"], body["faults"][0]["reason"], body["faults"][0]["remedy"]):
        assert words in page.text


def test_a_program_path_answers_json_even_to_a_browser(wire: httpx.Client) -> None:
    problem(wire.get("/v1/designs/0000000000", headers=BROWSER), 404)


def test_an_unexpected_fault_is_logged_and_shows_nothing_of_the_inside(
    wire: httpx.Client, monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture
) -> None:
    def broken(*_: object, **__: object) -> None:
        raise RuntimeError("the secret of the inside")

    monkeypatch.setattr(designs, "get", broken)
    with caplog.at_level(logging.ERROR, "service.api.problems"):
        answer = wire.get("/v1/designs/0000000000")
    body = problem(answer, 500)
    assert "secret" not in answer.text
    record = caplog.records[-1]
    assert body["detail"].split()[-1].rstrip(".") in record.getMessage()
    assert "the secret of the inside" in str(record.exc_info)
    assert answer.headers["x-content-type-options"] == "nosniff"


@pytest.mark.parametrize("path", ["/v1/designs/0000000000", "/v1/nothing"])
def test_each_problem_type_is_explained_where_it_points(wire: httpx.Client, path: str) -> None:
    body = wire.get(path).json()
    page = wire.get(body["type"], headers=BROWSER)
    assert page.status_code == 200
    assert body["title"] in page.text
