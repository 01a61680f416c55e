"""A look at the queue: what waits and runs, whose it is, and who works."""

from __future__ import annotations

from service.store import jobs, queue_view, workers
from service.store.session import Store
from tests.service.queueing import (
    LEASE_S,
    WORKER,
    at_work,
    batch,
    line_of,
    single,
    take,
    waited_longer,
)


def test_an_empty_queue_shows_nothing(store: Store) -> None:
    seen = queue_view.view(store)
    assert (seen.waiting, seen.running, seen.oldest_wait_s) == (0, 0, None)
    assert (seen.shares, seen.workers, seen.left) == ((), (), ())


def test_what_waits_is_told_by_priority_and_owner(store: Store) -> None:
    batch(store, "a", "b", "c", owner="anna", priority="when-idle")
    single(store, "d", owner="bert")
    single(store, "e", owner="anna", priority="urgent")
    seen = queue_view.view(store)
    found = [(each.priority, each.owner, each.waiting, each.running) for each in seen.shares]
    assert found == [
        ("urgent", "anna", 1, 0),
        ("ordinary", "bert", 1, 0),
        ("when-idle", "anna", 3, 0),
    ]
    assert (seen.waiting, seen.running) == (5, 0)


def test_designs_that_are_planned_together_all_wait(store: Store) -> None:
    batch(store, "the same", "the same", "another")
    assert [each.waiting for each in queue_view.view(store).shares] == [3]


def test_the_longest_wait_is_told_of_each_share_and_of_all(store: Store) -> None:
    waited_longer(store, single(store, "old"), 1000.0)
    waited_longer(store, single(store, "older", owner="anna"), 2000.0)
    single(store, "new", owner="anna")
    seen = queue_view.view(store)
    waits = {each.owner: each.oldest_wait_s or 0.0 for each in seen.shares}
    assert 2000.0 <= waits["anna"] < 2060.0
    assert 1000.0 <= waits["local"] < 1060.0
    assert seen.oldest_wait_s == waits["anna"]


def test_the_longest_wait_is_that_of_the_design_planned_for_others(store: Store) -> None:
    batch_id = batch(store, "the same", "the same")
    waited_longer(store, line_of(store, batch_id, 1), 1000.0)
    assert (queue_view.view(store).oldest_wait_s or 0.0) >= 1000.0


def test_a_worker_is_shown_with_what_it_is_at(store: Store) -> None:
    at_work(store)
    at_work(store, name="idle one")
    batch_id = batch(store, "in hand", "waits")
    job = take(store)
    seen = queue_view.view(store)
    works_on = {each.name: each.works_on for each in seen.workers}
    assert works_on["idle one"] == ()
    (design,) = works_on[WORKER]
    assert (design.id, design.name, design.attempts) == (job.design_id, "in hand", 1)
    assert (design.batch_id, design.batch_line) == (batch_id, 1)
    assert [(each.waiting, each.running) for each in seen.shares] == [(1, 1)]
    assert seen.left == ()


def test_what_has_ended_is_not_shown(store: Store) -> None:
    jobs.cancel(store, single(store, "cancelled"))
    assert queue_view.view(store).shares == ()


def test_a_design_whose_worker_has_gone_is_told_apart(store: Store) -> None:
    at_work(store)
    single(store, "left behind")
    jobs.claim(store, WORKER, LEASE_S)
    workers.goodbye(store, WORKER)
    seen = queue_view.view(store)
    assert [each.name for each in seen.left] == ["left behind"]
    assert (seen.workers, seen.running) == ((), 1)
