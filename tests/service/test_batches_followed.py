"""Batches on the wire once accepted: followed, taken away, cancelled, run again."""

from __future__ import annotations

import csv
import io
import json
from typing import Any

import httpx
import pytest

from service.contracts.batch import BatchRequest
from service.contracts.candidate import DesignResult
from service.store import batches, jobs
from service.store.session import Store
from tests.service.batches_sent import accepted, fresh, planned
from tests.service.conftest import Stored
from tests.service.samples import sample_planned, sample_request
from tests.service.test_problems import problem


@pytest.fixture(scope="module")
def done(wire: httpx.Client, wire_store: Store) -> str:
    """A batch of three designs, the second of which failed."""
    batch_id = accepted(wire, "=1+1", "second", "third", name="Invented batch")
    planned(wire_store, batch_id, fail=2)
    return batch_id


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


def test_the_design_of_a_batch_names_its_batch_and_line(
    wire: httpx.Client, done: str, stored: Stored
) -> None:
    item = wire.get(f"/v1/batches/{done}/designs?state=failed").json()["designs"][0]
    design = wire.get(f"/v1/designs/{item['id']}").json()
    assert (design["batch_id"], design["batch_line"]) == (done, 2)
    assert wire.get(f"/v1/designs/{stored.done}").json()["batch_id"] is None
