"""Batches on the wire: accepted whole or refused whole, followed, taken away, run again."""

from __future__ import annotations

import asyncio
import csv
import io
import json
import threading
import uuid
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
from service.contracts.candidate import DesignResult
from service.store import batches, designs, jobs, workers
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.samples import request_fields, request_json, sample_planned, sample_request
from tests.service.test_problems import problem

JSON = {"Content-Type": "application/json"}
LINES = {"Content-Type": "application/x-ndjson"}


def lines(*names: str, **changes: object) -> bytes:
    """One request a line; names differ, so that no two are the same."""
    return b"".join(request_json(name=name, **changes).encode() + b"\n" for name in names)


def posted(wire: httpx.Client, body: bytes, **query: object) -> httpx.Response:
    asked: dict[str, Any] = {"params": query, "content": body, "headers": LINES}
    return wire.post("/v1/batches", **asked)


def accepted(wire: httpx.Client, *names: str, **query: object) -> str:
    answer = posted(wire, lines(*names), **query)
    assert answer.status_code == 202, answer.text
    batch_id: str = answer.json()["id"]
    return batch_id


def fresh(*names: str) -> tuple[str, ...]:
    """Names that no other test has used."""
    return tuple(f"{name} {uuid.uuid4().hex[:8]}" for name in names)


def planned(store: Store, batch_id: str, fail: int | None = None) -> None:
    """Do the work of a worker on a batch; the design on one line fails."""
    waiting = {each.id: each.line for each in batches.items(store, batch_id, limit=500).items}
    while waiting:
        job = jobs.claim(store, "worker of the tests", lease_s=600.0)
        assert job is not None, "the batch waits and cannot be claimed"
        line = waiting.pop(job.design_id, None)
        if line is not None and line == fail:
            assert jobs.fail(store, job, "=Invented failure")
        else:
            assert jobs.finish(store, job, sample_planned(job.request))


@pytest.fixture(scope="module")
def done(wire: httpx.Client, wire_store: Store) -> str:
    """A batch of three designs, the second of which failed."""
    batch_id = accepted(wire, "=1+1", "second", "third", name="Invented batch")
    planned(wire_store, batch_id, fail=2)
    return batch_id


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


def test_links_lead_through_every_batch_once_newest_first(wire: httpx.Client, done: str) -> None:
    for name in fresh("p", "q", "r"):
        accepted(wire, name, name=name)
    everything = wire.get("/v1/batches?limit=100").json()["batches"]
    seen: list[str] = []
    address = "/v1/batches?limit=2"
    while address:
        answer = wire.get(address)
        assert len(answer.json()["batches"]) <= 2
        seen += [each["id"] for each in answer.json()["batches"]]
        address = answer.links.get("next", {}).get("url", "")
    assert seen == [each["id"] for each in everything]
    assert done in seen


def test_a_batch_tells_how_many_are_in_each_state(wire: httpx.Client, done: str) -> None:
    batch = wire.get(f"/v1/batches/{done}").json()
    assert batch["counts"] == {"queued": 0, "running": 0, "done": 2, "failed": 1, "cancelled": 0}
    assert batch["progress"] == 1.0
    assert batch["finished_at"] is not None


def test_links_lead_through_the_designs_of_one_state(wire: httpx.Client, done: str) -> None:
    first = wire.get(f"/v1/batches/{done}/designs?state=done&limit=1")
    assert [each["line"] for each in first.json()["designs"]] == [1]
    second = wire.get(first.links["next"]["url"])
    assert [each["line"] for each in second.json()["designs"]] == [3]
    assert "next" not in second.links
    failed = wire.get(f"/v1/batches/{done}/designs?state=failed").json()["designs"]
    assert [(each["line"], each["failure"]) for each in failed] == [(2, "=Invented failure")]


def test_the_lines_of_results_are_the_stored_results_in_order(
    wire: httpx.Client, done: str
) -> None:
    answer = wire.get(f"/v1/batches/{done}/results")
    assert answer.headers["content-type"] == "application/x-ndjson"
    found = [json.loads(line) for line in answer.text.splitlines()]
    assert [(each["line"], each["state"]) for each in found] == [
        (1, "done"),
        (2, "failed"),
        (3, "done"),
    ]
    assert found[1]["result"] is None
    for each in (found[0], found[2]):
        expected = sample_planned(sample_request(name=each["name"])).result
        assert DesignResult.model_validate_json(json.dumps(each["result"])) == expected


def test_the_table_of_results_has_a_row_for_each_candidate_and_each_failure(
    wire: httpx.Client, done: str
) -> None:
    answer = wire.get(f"/v1/batches/{done}/results.csv")
    assert answer.headers["content-type"].startswith("text/csv")
    assert f"candidates-{done}.csv" in answer.headers["content-disposition"]
    rows = list(csv.DictReader(io.StringIO(answer.text, newline="")))
    assert [(row["line"], row["rank"]) for row in rows] == [
        *(("1", "1"), ("1", "2"), ("2", ""), ("3", "1"), ("3", "2"))
    ]
    best = sample_planned(sample_request()).result.candidates[0]
    assert float(rows[0]["length_m"]) == best.length_m
    assert float(rows[0]["swr_worst"]) == pytest.approx(best.swr_worst, abs=1e-3)
    assert rows[0]["item_code"] == best.item_code
    assert rows[0]["bands"].split("; ")[0].startswith("40m ")


def test_no_cell_of_the_table_runs_as_a_formula(wire: httpx.Client, done: str) -> None:
    text = wire.get(f"/v1/batches/{done}/results.csv").text
    rows = list(csv.DictReader(io.StringIO(text, newline="")))
    assert rows[0]["name"] == "'=1+1"
    assert rows[2]["failure"] == "'=Invented failure"
    assert not [cell for row in rows for cell in row.values() if cell.startswith(("=", "+", "@"))]


def test_results_are_told_before_the_batch_has_ended(wire: httpx.Client) -> None:
    batch_id = accepted(wire, *fresh("waits"))
    (line,) = wire.get(f"/v1/batches/{batch_id}/results").text.splitlines()
    assert (json.loads(line)["state"], json.loads(line)["result"]) == ("queued", None)


def test_identical_designs_of_a_batch_are_answered_by_the_first(
    wire: httpx.Client, wire_store: Store
) -> None:
    (name,) = fresh("twins")
    batch_id = accepted(wire, name, name)
    first, second = batches.items(wire_store, batch_id, limit=2).items
    while batches.get(wire_store, batch_id, "local").finished_at is None:
        job = jobs.claim(wire_store, "worker of the tests", lease_s=600.0)
        assert job is not None
        assert jobs.finish(wire_store, job, sample_planned(job.request))
    found = [json.loads(t) for t in wire.get(f"/v1/batches/{batch_id}/results").text.splitlines()]
    assert [each["answered_by"] for each in found] == [None, first.id]
    assert found[1]["id"] == second.id
    assert found[1]["result"] == found[0]["result"]


def test_cancelling_a_batch_ends_what_waits_and_leaves_what_is_done(
    wire: httpx.Client, done: str
) -> None:
    batch_id = accepted(wire, *fresh("c", "d"))
    answer = wire.post(f"/v1/batches/{batch_id}/cancel")
    assert (answer.status_code, answer.json()["counts"]["cancelled"]) == (202, 2)
    assert wire.post(f"/v1/batches/{done}/cancel").json()["counts"]["done"] == 2


def test_what_failed_or_was_cancelled_waits_again_in_its_batch(
    wire: httpx.Client, wire_store: Store
) -> None:
    batch_id = accepted(wire, *fresh("one", "two", "three"))
    planned(wire_store, batch_id, fail=2)
    answer = wire.post(f"/v1/batches/{batch_id}/rerun?part=failed")
    assert answer.headers["location"] == f"/v1/batches/{batch_id}"
    counts = answer.json()["counts"]
    assert (answer.status_code, counts["done"], counts["queued"]) == (202, 2, 1)


def test_all_of_a_batch_is_run_again_as_a_new_one_to_be_planned_anew(
    wire: httpx.Client, done: str
) -> None:
    headers = {"Idempotency-Key": "all again"}
    answer = wire.post(f"/v1/batches/{done}/rerun?part=all", headers=headers)
    batch = answer.json()
    assert answer.headers["location"] == f"/v1/batches/{batch['id']}"
    assert batch["id"] != done
    assert (batch["name"], batch["recompute"]) == ("Invented batch", True)
    assert batch["counts"]["queued"] == 3
    again = wire.post(f"/v1/batches/{done}/rerun?part=all", headers=headers)
    assert again.json()["id"] == batch["id"]


@pytest.mark.parametrize("odd", ["0" * 32, "0000000000", "%00", "a" * 500])
def test_a_missing_batch_is_answered_404_on_every_path(wire: httpx.Client, odd: str) -> None:
    for path in ("", "/designs", "/results", "/results.csv"):
        body = problem_at(wire.get(f"/v1/batches/{odd}{path}"))
        assert body["type"] == "/problems/batch-not-found", path
    for path in ("/cancel", "/rerun", "/rerun?part=all"):
        assert problem_at(wire.post(f"/v1/batches/{odd}{path}"))["title"] == "No such batch", path
    assert wire.get("/problems/batch-not-found").status_code == 200


def test_the_batch_of_another_owner_is_not_there(wire: httpx.Client, wire_store: Store) -> None:
    designs_of_anna = (sample_request(name=fresh("of anna")[0]),)
    request = BatchRequest(name="Hers", designs=designs_of_anna)
    hers = batches.submit(wire_store, request, idempotency_key=None, owner="anna").batch_id
    for path in ("", "/designs", "/results", "/results.csv"):
        problem_at(wire.get(f"/v1/batches/{hers}{path}"))
    for path in ("/cancel", "/rerun", "/rerun?part=all"):
        problem_at(wire.post(f"/v1/batches/{hers}{path}"))
    assert hers not in [each["id"] for each in wire.get("/v1/batches?limit=100").json()["batches"]]
    (left,) = batches.page(wire_store, owner="anna", limit=10, before=None).batches
    assert left.counts.queued == 1
    batches.cancel(wire_store, hers)


def problem_at(answer: httpx.Response) -> dict[str, Any]:
    assert answer.status_code == 404, answer.text
    body: dict[str, Any] = answer.json()
    return body


@pytest.mark.parametrize(
    ("path", "field"),
    [
        ("?limit=0", "limit"),
        ("?limit=101", "limit"),
        ("/{id}/designs?limit=501", "limit"),
        ("/{id}/designs?after_line=-1", "after_line"),
        ("/{id}/designs?state=asleep", "state"),
    ],
)
def test_a_query_that_makes_no_sense_is_answered_422_with_its_field(
    wire: httpx.Client, done: str, path: str, field: str
) -> None:
    body = problem(wire.get("/v1/batches" + path.format(id=done)), 422)
    assert [fault["field"] for fault in body["faults"]] == [field]


def test_another_part_than_failed_or_all_is_refused(wire: httpx.Client, done: str) -> None:
    body = problem(wire.post(f"/v1/batches/{done}/rerun?part=some"), 422)
    assert body["faults"][0]["remedy"] == "Choose one of 'failed' or 'all'."


def test_a_reader_who_has_a_batch_is_told_so_without_a_body(wire: httpx.Client, done: str) -> None:
    for path in ("", "/designs"):
        tag = wire.get(f"/v1/batches/{done}{path}").headers["etag"]
        answer = wire.get(f"/v1/batches/{done}{path}", headers={"If-None-Match": tag})
        assert (answer.status_code, answer.content) == (304, b"")


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


def test_the_design_of_a_batch_names_its_batch_and_line(
    wire: httpx.Client, done: str, stored: Stored
) -> None:
    item = wire.get(f"/v1/batches/{done}/designs?state=failed").json()["designs"][0]
    design = wire.get(f"/v1/designs/{item['id']}").json()
    assert (design["batch_id"], design["batch_line"]) == (done, 2)
    assert wire.get(f"/v1/designs/{stored.done}").json()["batch_id"] is None
