"""Figures of the queue: what waits and runs, what came of what ended, which leases ran out."""

from __future__ import annotations

from datetime import UTC, datetime

from sqlalchemy import update

from service.store import figures, jobs
from service.store.session import Store
from service.store.tables import JobRow
from tests.service.queueing import (
    at_work,
    batch,
    plan_next,
    single,
    take,
    waited_longer,
)


def let_leases_run_out(store: Store) -> None:
    long_ago = datetime(2020, 1, 1, tzinfo=UTC)
    running = update(JobRow).where(JobRow.state == "running")
    store.write(lambda session: session.execute(running.values(lease_until=long_ago)))


def settle(store: Store) -> None:
    """Let what ended have ended a while ago."""
    earlier = update(JobRow).values(changed_at=JobRow.changed_at - 60_000_000)
    store.write(lambda session: session.execute(earlier))


def test_the_depth_tells_what_waits_and_runs_by_priority(store: Store) -> None:
    single(store, "urgent", priority="urgent")
    batch(store, "one", "two", "two")
    take(store)
    depth = figures.depth(store)
    assert depth.by_state == {("running", "urgent"): 1, ("queued", "ordinary"): 3}
    assert depth.claimable == 2


def test_the_oldest_wait_is_that_of_the_job_that_waits_longest(store: Store) -> None:
    assert figures.depth(store).oldest_wait_s == 0.0
    waited_longer(store, single(store, "one"), 100.0)
    single(store, "two", priority="urgent")
    assert 100.0 <= figures.depth(store).oldest_wait_s < 130.0


def test_what_ended_is_told_once_with_its_wait_its_run_and_its_map_error(store: Store) -> None:
    at_work(store)
    waited_longer(store, single(store, "same"), 10.0)
    done = plan_next(store)
    answered = single(store, "same")
    single(store, "broken")
    broken = take(store).design_id
    let_leases_run_out(store)
    jobs.sweep(store, max_attempts=1)
    single(store, "waits")
    settle(store)
    ended = {each.design_id: each for each in figures.ended_since(store, after_us=0)}
    assert set(ended) == {done, answered, broken}
    assert (ended[done].state, ended[done].attempts, ended[done].answered) == ("done", 1, False)
    wait_s, run_s = ended[done].wait_s, ended[done].run_s
    assert wait_s is not None
    assert run_s is not None
    assert 10.0 <= wait_s < 40.0
    assert 0.0 <= run_s < 30.0
    assert ended[done].map_error_percent == 0.0173
    assert (ended[answered].answered, ended[answered].wait_s) == (True, None)
    assert (ended[broken].state, ended[broken].map_error_percent) == ("failed", None)
    last = list(ended.values())[-1]
    later = figures.ended_since(store, after_us=last.changed_us, after_id=last.design_id)
    assert later == []


def test_what_ended_is_told_in_parts_that_leave_nothing_out(store: Store) -> None:
    for name in ("one", "two", "three"):
        single(store, name)
        plan_next(store)
    store.write(lambda session: session.execute(update(JobRow).values(changed_at=1000)))
    told: list[str] = []
    after_us, after_id = 0, ""
    while part := figures.ended_since(store, after_us=after_us, after_id=after_id, limit=1):
        told += [each.design_id for each in part]
        after_us, after_id = part[-1].changed_us, part[-1].design_id
    assert len(told) == 3
    assert len(set(told)) == 3


def test_what_ended_just_now_is_left_for_the_next_time(store: Store) -> None:
    single(store, "one")
    plan_next(store)
    assert figures.ended_since(store, after_us=0) == []


def test_leases_that_ran_out_are_counted_for_good(store: Store) -> None:
    assert figures.lease_expiries(store) == 0
    for name in ("one", "two"):
        single(store, name)
        take(store)
    let_leases_run_out(store)
    jobs.sweep(store, max_attempts=3)
    assert figures.lease_expiries(store) == 2
    take(store)
    let_leases_run_out(store)
    jobs.sweep(store, max_attempts=3)
    assert figures.lease_expiries(store) == 3


def test_a_job_taken_from_a_worker_seen_dead_is_no_lease_that_ran_out(store: Store) -> None:
    single(store, "one")
    jobs.bury(store, take(store).worker, max_attempts=3)
    assert figures.lease_expiries(store) == 0
