"""Batches in the store: accepted whole and once, followed, cancelled, planned again."""

from __future__ import annotations

import sqlite3
import threading
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from typing import TypeVar

import pytest
from sqlalchemy import func, select, update
from sqlalchemy.exc import OperationalError
from sqlalchemy.orm import Session

from service.contracts.progress import Progress
from service.errors import BatchNotFound, KeyReused, SchemaMismatch
from service.store import batch_entry, batches, designs, jobs
from service.store.session import Store
from service.store.tables import BatchRow, DesignRow, JobRow, ResultRow
from tests.service.queueing import (
    LEASE_S,
    at_work,
    batch,
    batch_request,
    changed_at,
    forget_changes,
    line_of,
    numbered,
    plan_next,
    planned,
    single,
    take,
    taken,
)

T = TypeVar("T")

THREE = ("one", "two", "three")


def rows(store: Store) -> tuple[int, int, int]:
    """How many batches, designs and jobs there are."""

    def count(session: Session) -> tuple[int, int, int]:
        found = [
            session.scalar(select(func.count()).select_from(table)) or 0
            for table in (BatchRow, DesignRow, JobRow)
        ]
        return found[0], found[1], found[2]

    return store.read(count)


def states(store: Store, batch_id: str) -> list[str]:
    return [item.state for item in batches.items(store, batch_id, limit=99).items]


def fail_next(store: Store) -> None:
    assert jobs.fail(store, take(store), "in words")


# ------------------------------------------------------------------------ accepting
def test_an_accepted_batch_holds_its_designs_in_the_order_of_lines(store: Store) -> None:
    batch_id = batch(store, *THREE, owner="ann", priority="urgent")
    found = batches.get(store, batch_id, "ann")
    assert (found.name, found.owner, found.priority, found.size) == ("A batch", "ann", "urgent", 3)
    assert (found.counts.queued, found.progress, found.finished_at) == (3, 0.0, None)
    items = batches.items(store, batch_id, limit=9).items
    assert [(item.line, item.batch_line, item.name) for item in items] == [
        (1, 1, "one"),
        (2, 2, "two"),
        (3, 3, "three"),
    ]
    assert {(item.batch_id, item.priority, item.state) for item in items} == {
        (batch_id, "urgent", "queued")
    }
    design = designs.get(store, items[1].id)
    assert (design.name, design.batch_id, design.batch_line) == ("two", batch_id, 2)


def test_the_same_batch_under_one_key_is_one_batch(store: Store) -> None:
    first = batches.submit(store, batch_request(*THREE), idempotency_key="key")
    again = batches.submit(store, batch_request(*THREE), idempotency_key="key")
    assert (first.created, again.created) == (True, False)
    assert again.batch_id == first.batch_id
    assert rows(store) == (1, 3, 3)


@pytest.mark.parametrize(
    "other",
    [
        batch_request("one", "two"),
        batch_request("two", "one", "three"),
        batch_request(*THREE, priority="urgent"),
        batch_request(*THREE, recompute=True),
    ],
    ids=["shorter", "in another order", "more urgent", "to be planned anew"],
)
def test_another_batch_under_the_same_key_is_refused(store: Store, other: object) -> None:
    batches.submit(store, batch_request(*THREE), idempotency_key="key")
    with pytest.raises(KeyReused):
        batches.submit(store, other, idempotency_key="key")  # type: ignore[arg-type]  # a parameter
    assert rows(store) == (1, 3, 3)


def test_two_owners_may_use_the_same_key(store: Store) -> None:
    for owner in ("ann", "bob"):
        request = batch_request(*THREE)
        assert batches.submit(store, request, idempotency_key="key", owner=owner).created
    assert rows(store) == (2, 6, 6)


def test_senders_of_one_batch_at_the_same_moment_make_one_batch(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    gate, look = threading.Barrier(2), batch_entry._earlier

    def look_at_once(
        session: Session, batch_id: str, owner: str, key: str | None
    ) -> BatchRow | None:
        found = look(session, batch_id, owner, key)
        # Neither goes on before both have looked; SQLite lets in the second one only later.
        with suppress(threading.BrokenBarrierError):
            gate.wait(0.5)
        return found

    monkeypatch.setattr(batch_entry, "_earlier", look_at_once)

    def send(_: int) -> batches.Submitted:
        return batches.submit(store, batch_request(*THREE), idempotency_key="key")

    with ThreadPoolExecutor(2) as pool:
        first, second = pool.map(send, range(2))
    assert first.batch_id == second.batch_id
    assert first.created != second.created
    assert rows(store) == (1, 3, 3)


@pytest.mark.parametrize("key", [None, "key"])
def test_a_batch_whose_commit_was_not_heard_of_is_stored_once(
    store: Store, monkeypatch: pytest.MonkeyPatch, key: str | None
) -> None:
    once, left = store._once, [1, 2]

    def unheard(work: Callable[[Session], T], *, writes: bool, synced: bool = True) -> T:
        result = once(work, writes=writes, synced=synced)
        if writes and left:
            left.pop()
            raise OperationalError("COMMIT", None, sqlite3.InterfaceError("connection lost"))
        return result

    monkeypatch.setattr(store, "_once", unheard)
    assert batches.submit(store, batch_request(*THREE), idempotency_key=key).created
    assert rows(store) == (1, 3, 3)


def test_a_batch_that_cannot_be_stored_whole_is_not_stored_at_all(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    def break_down(*_: object) -> None:
        raise ZeroDivisionError

    monkeypatch.setattr(batch_entry, "_job_rows", break_down)
    with pytest.raises(ZeroDivisionError):
        batch(store, *THREE)
    assert rows(store) == (0, 0, 0)


# ------------------------------------------------------------------------ following
def test_a_batch_counts_its_designs_by_state_and_tells_how_far_it_has_come(store: Store) -> None:
    batch_id = batch(store, *numbered("line", 5))
    plan_next(store)
    fail_next(store)
    running = take(store)
    jobs.heartbeat(store, running, Progress(fraction=0.5, step="half"), LEASE_S)
    jobs.cancel(store, line_of(store, batch_id, 4))
    found = batches.get(store, batch_id, "local")
    counts = found.counts
    assert (counts.done, counts.failed, counts.running) == (1, 1, 1)
    assert (counts.cancelled, counts.queued) == (1, 1)
    assert found.progress == pytest.approx(3.5 / 5.0)
    assert found.finished_at is None


def test_a_batch_is_finished_when_its_last_design_ends(store: Store) -> None:
    batch_id = batch(store, "one", "two")
    plan_next(store)
    last = plan_next(store)
    found = batches.get(store, batch_id, "local")
    assert (found.progress, found.finished_at) == (1.0, designs.get(store, last).finished_at)


def test_a_batch_of_another_owner_is_not_found(store: Store) -> None:
    batch_id = batch(store, *THREE, owner="ann")
    for ask in (
        lambda: batches.get(store, batch_id, "bob"),
        lambda: batches.page(store, owner="bob", limit=9, before=batch_id),
    ):
        with pytest.raises(BatchNotFound):
            ask()
    assert batches.page(store, owner="bob", limit=9, before=None).batches == ()


@pytest.mark.parametrize("unknown", ["0" * 32, "nonsense", "with a \0", "", "é" * 300])
def test_an_unknown_batch_is_refused_everywhere(store: Store, unknown: str) -> None:
    for ask in (
        lambda: batches.get(store, unknown, "local"),
        lambda: batches.page(store, owner="local", limit=1, before=unknown),
        lambda: batches.cancel(store, unknown),
        lambda: batches.rerun_failed(store, unknown),
        lambda: batches.rerun_all(store, unknown),
    ):
        with pytest.raises(BatchNotFound):
            ask()


def test_pages_list_every_batch_once_newest_first(store: Store) -> None:
    sent = [batch(store, name) for name in numbered("batch", 5)]
    moment = batches.get(store, sent[2], "local").created_at
    store.write(
        lambda session: session.execute(
            update(BatchRow).where(BatchRow.id == sent[3]).values(created_at=moment)
        )
    )
    listed: list[str] = []
    before: str | None = None
    while True:
        page = batches.page(store, owner="local", limit=2, before=before)
        listed += [each.id for each in page.batches]
        before = page.next_before
        if before is None:
            break
    assert listed == [sent[4], *sorted(sent[2:4], reverse=True), sent[1], sent[0]]


def test_items_come_page_by_page_all_or_those_in_one_state(store: Store) -> None:
    batch_id = batch(store, *numbered("line", 7))
    plan_next(store)
    fail_next(store)
    fail_next(store)
    first = batches.items(store, batch_id, limit=4)
    second = batches.items(store, batch_id, limit=4, after_line=first.next_after_line or 0)
    assert [item.line for item in (*first.items, *second.items)] == [1, 2, 3, 4, 5, 6, 7]
    assert (first.next_after_line, second.next_after_line) == (4, None)
    failed = batches.items(store, batch_id, state="failed", limit=4)
    assert [item.line for item in failed.items] == [2, 3]
    assert [item.failure for item in failed.items] == ["in words", "in words"]


def test_results_stream_in_the_order_of_lines_whatever_their_number(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(batches, "_CHUNK", 3)
    batch_id = batch(store, *numbered("line", 7))
    single(store, "not of the batch")
    done = [plan_next(store) for _ in range(2)]
    streamed = list(batches.results(store, batch_id))
    assert [each.item.line for each in streamed] == [1, 2, 3, 4, 5, 6, 7]
    for each in streamed:
        assert each.read() == designs.get(store, each.item.id).result
        assert (each.result_json is not None) == (each.item.id in done)


def test_a_result_another_release_stored_is_refused_as_such_and_streamed_as_it_is(
    store: Store,
) -> None:
    batch_id = batch(store, "one")
    plan_next(store)
    store.write(lambda session: session.execute(update(ResultRow).values(result=b"of old")))
    (streamed,) = batches.results(store, batch_id)
    with pytest.raises(SchemaMismatch, match=streamed.item.id):
        streamed.read()


# ----------------------------------------------------------------------- cancelling
def test_a_cancelled_batch_ends_what_waits_at_once_and_what_runs_soon(store: Store) -> None:
    batch_id = batch(store, *numbered("line", 4))
    plan_next(store)
    running = take(store)
    other = single(store, "not of the batch")
    batches.cancel(store, batch_id)
    assert states(store, batch_id) == ["done", "running", "cancelled", "cancelled"]
    assert jobs.heartbeat(store, running, Progress(fraction=0.5, step=""), 9.0) is (
        jobs.Beat.CANCELLED
    )
    assert jobs.stop_cancelled(store, running)
    found = batches.get(store, batch_id, "local")
    assert (found.counts.done, found.counts.cancelled, found.progress) == (1, 3, 1.0)
    assert found.finished_at is not None
    assert take(store).design_id == other


# ------------------------------------------------------------------------ once more
def test_the_failed_and_cancelled_part_of_a_batch_is_planned_again_in_place(store: Store) -> None:
    batch_id = batch(store, *numbered("line", 4))
    done = plan_next(store)
    fail_next(store)
    jobs.cancel(store, line_of(store, batch_id, 3))
    late = take(store)
    assert batches.rerun_failed(store, batch_id) == 2
    items = batches.items(store, batch_id, limit=9).items
    assert [item.state for item in items] == ["done", "queued", "queued", "running"]
    assert [(item.attempts, item.failure, item.finished_at) for item in items[1:3]] == [
        (0, None, None),
        (0, None, None),
    ]
    assert jobs.finish(store, late, planned(late))
    assert taken(store, 2) == ["line 2", "line 3"]
    assert designs.get(store, done).state == "done"
    assert batches.rerun_failed(store, batch_id) == 0


def test_a_worker_that_comes_late_for_a_design_planned_again_is_refused(store: Store) -> None:
    batch_id = batch(store, "one")
    frozen = take(store)
    jobs.bury(store, frozen.worker, max_attempts=1)
    assert batches.rerun_failed(store, batch_id) == 1
    assert not jobs.finish(store, frozen, planned(frozen))
    again = take(store)
    assert again.fence > frozen.fence
    assert again.attempt == 1
    assert not jobs.finish(store, frozen, planned(frozen))


def test_what_is_planned_again_starts_where_the_queue_has_come_to(store: Store) -> None:
    first = batch(store, *numbered("first", 3))
    for _ in range(3):
        fail_next(store)
    batch(store, *numbered("second", 6))
    taken(store, 3)
    batches.rerun_failed(store, first)
    assert sorted(taken(store, 4)) == ["first 1", "first 2", "second 4", "second 5"]


def test_a_whole_batch_is_planned_again_as_a_new_one_whatever_is_stored(store: Store) -> None:
    at_work(store)
    first = batch(store, *THREE, owner="ann", priority="urgent")
    for _ in THREE:
        plan_next(store)
    again = batches.rerun_all(store, first)
    found = batches.get(store, again.batch_id, "ann")
    assert (found.name, found.priority, found.recompute) == ("A batch", "urgent", True)
    assert taken(store, 3) == list(THREE)
    assert states(store, first) == ["done"] * 3


def test_a_batch_sent_to_be_planned_again_twice_under_one_key_is_one(store: Store) -> None:
    first = batch(store, *THREE)
    again = [batches.rerun_all(store, first, idempotency_key="again") for _ in range(2)]
    assert again[0].batch_id == again[1].batch_id
    assert rows(store) == (2, 6, 6)


# --------------------------------------------------------------- moments of changes
def test_every_change_of_a_batch_is_a_change_of_its_designs(store: Store) -> None:
    batch_id = batch(store, "one", "two")
    both = [line_of(store, batch_id, line) for line in (1, 2)]
    for change in (
        lambda: batches.cancel(store, batch_id),
        lambda: batches.rerun_failed(store, batch_id),
    ):
        forget_changes(store)
        change()
        assert min(changed_at(store, each) for each in both) > 1
