"""Batches sent to the service of the tests, and the work of a worker on them."""

from __future__ import annotations

import uuid
from typing import Any, Final

import httpx

from service.store import batches, jobs
from service.store.session import Store
from tests.service.samples import request_json, sample_planned

LINES: Final = {"Content-Type": "application/x-ndjson"}


def lines(*names: str, **changes: object) -> bytes:
    """One request a line; names differ, so that no two are the same."""
    return b"".join(request_json(name=name, **changes).encode() + b"\n" for name in names)


def posted(wire: httpx.Client, body: bytes, **query: object) -> httpx.Response:
    asked: dict[str, Any] = {"params": query, "content": body, "headers": LINES, "timeout": 60.0}
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
