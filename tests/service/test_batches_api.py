"""Batches on the wire: accepted whole, or refused whole with every fault by its line."""

from __future__ import annotations

import asyncio
import json
import threading
from collections.abc import Iterable, Iterator
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import httpx
import pytest
from starlette.requests import Request

from service.api import batch_body
from service.contracts.batch import (
    LARGEST_BATCH_BYTES,
    MOST_FAULTS,
    MOST_IN_BATCH,
    BatchRequest,
    parse_batch_lines,
)
from service.store import batches, designs, workers
from service.store.session import Store
from tests.service.batches_sent import LINES, fresh, lines, posted
from tests.service.conftest import Stored
from tests.service.samples import request_fields, request_json, sample_planned, sample_request
from tests.service.test_problems import problem

JSON = {"Content-Type": "application/json"}


def test_lines_are_accepted_with_the_address_of_their_batch(wire: httpx.Client) -> None:
    answer = posted(wire, lines("a", "b"), name="Two by lines", priority="urgent", recompute="true")
    assert answer.status_code == 202
    batch = wire.get(answer.headers["location"]).json()
    assert (batch["name"], batch["priority"], batch["recompute"]) == (
        "Two by lines",
        "urgent",
        True,
    )
    assert (batch["size"], batch["counts"]["queued"], batch["progress"]) == (2, 2, 0.0)


def test_one_document_is_accepted_as_the_same_batch_in_lines_would_be(wire: httpx.Client) -> None:
    document = {
        "name": "Two in one document",
        "priority": "when-idle",
        "designs": [request_fields(name=name) for name in ("first", "second")],
    }
    answer = wire.post("/v1/batches", content=json.dumps(document), headers=JSON)
    assert answer.status_code == 202, answer.text
    listed = wire.get(f"{answer.headers['location']}/designs").json()["designs"]
    assert [(each["line"], each["name"]) for each in listed] == [(1, "first"), (2, "second")]
    assert {each["priority"] for each in listed} == {"when-idle"}


def test_the_query_goes_over_what_a_document_says(wire: httpx.Client) -> None:
    document = {"name": "said inside", "priority": "urgent", "designs": [request_fields()]}
    answer = wire.post(
        "/v1/batches?name=said+outside&recompute=true", content=json.dumps(document), headers=JSON
    )
    batch = answer.json()
    assert batch["name"] == "said outside"
    assert (batch["priority"], batch["recompute"]) == ("urgent", True)


def test_a_body_without_a_length_is_read_as_it_comes(wire: httpx.Client) -> None:
    def parts() -> Iterator[bytes]:
        whole = lines("streamed", "in", "parts")
        for start in range(0, len(whole), 100):
            yield whole[start : start + 100]

    answer = wire.post("/v1/batches", content=parts(), headers=LINES)
    assert (answer.status_code, answer.json()["size"]) == (202, 3)


def test_as_many_designs_as_are_allowed_are_accepted(wire: httpx.Client, wire_store: Store) -> None:
    body = lines(*(f"of many {index}" for index in range(MOST_IN_BATCH)))
    answer = posted(wire, body)
    assert answer.json()["size"] == MOST_IN_BATCH
    batches.cancel(wire_store, answer.json()["id"])  # so that it is not in the others' way


def test_one_design_too_many_refuses_the_batch(wire: httpx.Client, wire_store: Store) -> None:
    before = designs.count(wire_store)
    body = problem(posted(wire, lines(*map(str, range(MOST_IN_BATCH + 1)))), 422)
    assert body["faults"][-1]["reason"] == f"a batch holds at most {MOST_IN_BATCH} designs."
    assert designs.count(wire_store) == before


def test_every_fault_is_named_by_its_line_and_nothing_is_stored(
    wire: httpx.Client, wire_store: Store
) -> None:
    before = designs.count(wire_store)
    body = lines("good") + lines("thin", bands=[]) + lines("good too") + lines("low", power_w=-1)
    found = problem(posted(wire, body, priority="at once"), 422)["faults"]
    assert [fault["field"] for fault in found] == [
        "priority",
        "line 2: bands",
        "line 4: power_w",
    ]
    assert designs.count(wire_store) == before
    assert all(fault["reason"] and fault["remedy"] for fault in found)


def test_every_fault_of_a_document_is_named_by_its_place(wire: httpx.Client) -> None:
    document = {"designs": [request_fields(), request_fields(power_w=-1)], "colour": "red"}
    answer = wire.post("/v1/batches?priority=at+once", content=json.dumps(document), headers=JSON)
    fields = [fault["field"] for fault in problem(answer, 422)["faults"]]
    assert sorted(fields) == ["colour", "designs[1].power_w", "priority"]


def test_of_very_many_faults_the_first_are_named_and_the_others_counted(
    wire: httpx.Client,
) -> None:
    number = MOST_FAULTS + 23
    body = problem(posted(wire, lines(*map(str, range(number)), bands=[])), 422)
    assert len(body["faults"]) == MOST_FAULTS
    assert body["detail"].startswith(f"{number} faults")
    assert "and 23 more" in body["detail"]


def test_a_line_that_is_no_json_is_named(wire: httpx.Client) -> None:
    found = problem(posted(wire, lines("good") + b'{"bands":\n'), 400)["faults"]
    assert [(fault["field"], fault["value"], fault["code"]) for fault in found] == [
        ("line 2: request", '{"bands":', "json-invalid")
    ]


@pytest.mark.parametrize("headers", [JSON, LINES])
def test_a_batch_of_nothing_is_refused(wire: httpx.Client, headers: dict[str, str]) -> None:
    body = b'{"designs": []}' if headers is JSON else b"\n\n"
    problem(wire.post("/v1/batches", content=body, headers=headers), 422)


@pytest.mark.parametrize("headers", [JSON, LINES])
def test_a_batch_larger_than_the_limit_is_answered_413(
    wire: httpx.Client, headers: dict[str, str]
) -> None:
    part = b" " * (1 << 20)
    count = LARGEST_BATCH_BYTES // len(part) + 8

    def parts() -> Iterator[bytes]:
        for _ in range(count):
            yield part

    answer = wire.post("/v1/batches", content=parts(), headers=headers, timeout=60.0)
    assert problem(answer, 413)["faults"][0]["code"] == "request-too-large"


@pytest.mark.parametrize(
    ("sent", "limit_bytes", "kept_bytes", "heard"), [(8, 1000, 800, 8), (1000, 100, 200, 3)]
)
def test_of_a_body_without_end_little_is_kept_and_no_more_than_twice_the_limit_is_heard(
    monkeypatch: pytest.MonkeyPatch, sent: int, limit_bytes: int, kept_bytes: int, heard: int
) -> None:
    monkeypatch.setattr(batch_body, "LARGEST_BATCH_BYTES", limit_bytes)
    told = 0

    async def receive() -> dict[str, object]:
        nonlocal told
        told += 1
        return {"type": "http.request", "body": b"x" * 100, "more_body": told < sent}

    kept = asyncio.run(batch_body._read(Request({"type": "http"}, receive)))
    assert (told, len(kept)) == (heard, kept_bytes)


@pytest.mark.parametrize(
    "headers",
    [{"Content-Type": "text/plain"}, {}, LINES | {"Content-Encoding": "gzip"}],
)
def test_a_body_of_another_kind_is_answered_415(
    wire: httpx.Client, headers: dict[str, str]
) -> None:
    body = problem(wire.post("/v1/batches", content=lines("a"), headers=headers), 415)
    assert body["faults"][0]["remedy"].startswith("Send the ")


def test_the_same_key_and_batch_give_the_same_batch(wire: httpx.Client, wire_store: Store) -> None:
    headers = LINES | {"Idempotency-Key": "a batch once"}
    first = wire.post("/v1/batches", content=lines("x", "y"), headers=headers)
    before = designs.count(wire_store)
    again = wire.post("/v1/batches", content=lines("x", "y"), headers=headers)
    assert (first.status_code, again.status_code) == (202, 202)
    assert again.headers["location"] == first.headers["location"]
    assert designs.count(wire_store) == before


def test_a_key_sent_with_another_batch_is_answered_422(wire: httpx.Client) -> None:
    headers = LINES | {"Idempotency-Key": "one key, two batches"}
    assert wire.post("/v1/batches", content=lines("x"), headers=headers).status_code == 202
    body = problem(wire.post("/v1/batches", content=lines("z"), headers=headers), 422)
    assert body["type"] == "/problems/idempotency-key-reused"


def test_a_design_is_submitted_with_the_priority_asked_for(wire: httpx.Client) -> None:
    answer = wire.post("/v1/designs?priority=urgent", content=request_json(), headers=JSON)
    assert (answer.status_code, answer.json()["priority"]) == (202, "urgent")
    listed = wire.get("/v1/designs?limit=1").json()["designs"][0]
    assert (listed["priority"], listed["batch_id"]) == ("urgent", None)
    body = problem(
        wire.post("/v1/designs?priority=soon", content=request_json(), headers=JSON), 422
    )
    assert body["faults"][0]["field"] == "priority"


def test_a_stored_result_answers_at_once_unless_planning_anew_is_asked_for(
    wire: httpx.Client, wire_store: Store, stored: Stored
) -> None:
    version = sample_planned(sample_request()).result.engine_version
    workers.announce(
        wire_store, "invented", host="here", pid=1, carrier="drain", engine_version=version
    )
    body = request_json(name="Invented station")
    answered = wire.post("/v1/designs", content=body, headers=JSON).json()
    assert (answered["state"], answered["answered_by"]) == ("done", stored.done)
    anew = wire.post("/v1/designs?recompute=true", content=body, headers=JSON).json()
    assert (anew["state"], anew["answered_by"]) == ("queued", None)
    workers.goodbye(wire_store, "invented")


def test_others_are_answered_while_a_batch_is_parsed(
    wire: httpx.Client, monkeypatch: pytest.MonkeyPatch
) -> None:
    begun, go_on = threading.Event(), threading.Event()

    def slow(given: Iterable[bytes], **said: Any) -> BatchRequest:  # noqa: ANN401  # whatever is said
        begun.set()
        assert go_on.wait(30.0)
        return parse_batch_lines(given, **said)

    monkeypatch.setattr(batch_body, "parse_batch_lines", slow)
    with ThreadPoolExecutor(1) as sender:
        sent = sender.submit(posted, wire, lines(*fresh("slow")))
        try:
            assert begun.wait(30.0)
            assert wire.get("/health/live", timeout=10.0).status_code == 200
            assert not sent.done()
        finally:
            go_on.set()
        assert sent.result().status_code == 202
