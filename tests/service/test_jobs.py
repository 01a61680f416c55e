"""The queue of record: each job is done once, whoever dies, freezes or comes late."""

from __future__ import annotations

import sqlite3
import threading
import time
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from datetime import UTC, datetime, timedelta
from typing import TypeVar

import pytest
from sqlalchemy import func, select, text, update
from sqlalchemy.exc import IntegrityError, OperationalError
from sqlalchemy.orm import Session

from service.contracts.candidate import PlannedDesign
from service.contracts.progress import Progress
from service.settings import Settings
from service.store import designs, jobs, order
from service.store.jobs import Beat, ClaimedJob, Swept
from service.store.session import Store, open_store
from service.store.tables import DesignRow, JobRow, ReportRow, ResultRow
from tests.service.queueing import changed_at, forget_changes
from tests.service.samples import sample_planned, sample_request

T = TypeVar("T")

LEASE_S = 60.0
MOST = 3
SOME = Progress(fraction=0.25, step="looking")


@pytest.fixture
def second_store(settings: Settings) -> Iterator[Store]:
    """The same database, as another process would have it open."""
    store = open_store(settings, patience_s=5.0)
    yield store
    store.close()


def submitted(store: Store, name: str = "A design") -> str:
    return designs.submit(store, sample_request(name=name), idempotency_key=None).design_id


def claimed(store: Store, worker: str = "first") -> ClaimedJob:
    job = jobs.claim(store, worker, LEASE_S)
    assert job is not None
    return job


def submitted_and_claimed(store: Store) -> ClaimedJob:
    submitted(store)
    return claimed(store)


def planned(job: ClaimedJob, note: str = "") -> PlannedDesign:
    plan = sample_planned(job.request)
    return plan.model_copy(update={"result": plan.result.model_copy(update={"notes": (note,)})})


def let_leases_run_out(store: Store) -> None:
    long_ago = datetime(2020, 1, 1, tzinfo=UTC)
    running = update(JobRow).where(JobRow.state == "running")
    store.write(lambda session: session.execute(running.values(lease_until=long_ago)))


def stored(store: Store) -> tuple[int, int]:
    """How many results and how many reports there are."""
    return store.read(
        lambda session: (
            session.scalar(select(func.count()).select_from(ResultRow)) or 0,
            session.scalar(select(func.count()).select_from(ReportRow)) or 0,
        )
    )


def state(store: Store, job: ClaimedJob) -> str:
    return designs.get(store, job.design_id).state


def lose_the_answer_to_one_commit(store: Store, monkeypatch: pytest.MonkeyPatch) -> None:
    once, left = store._once, [True]

    def unheard(work: Callable[[Session], T], *, writes: bool, synced: bool = True) -> T:
        result = once(work, writes=writes, synced=synced)
        if writes and left:
            left.clear()
            raise OperationalError("COMMIT", None, sqlite3.InterfaceError("connection lost"))
        return result

    monkeypatch.setattr(store, "_once", unheard)


# ------------------------------------------------------------------------- claiming
def test_jobs_are_claimed_in_the_order_they_were_submitted(store: Store) -> None:
    sent = [submitted(store, f"Design {number}") for number in range(5)]
    assert [claimed(store).design_id for _ in sent] == sent


def test_nothing_is_claimed_from_an_empty_queue(store: Store) -> None:
    assert not jobs.any_queued(store)
    assert jobs.claim(store, "first", LEASE_S) is None


def test_a_claim_counts_an_attempt_and_says_who_is_at_it(store: Store) -> None:
    job = submitted_and_claimed(store)
    design = designs.get(store, job.design_id)
    assert (design.state, design.attempts, job.attempt) == ("running", 1, 1)
    assert design.started_at is not None
    assert job.request == sample_request(name="A design")
    assert not jobs.any_queued(store)


def test_two_claimers_never_get_the_same_job(store: Store, second_store: Store) -> None:
    number, claimers = 40, 4
    for index in range(number):
        submitted(store, f"Design {index}")
    gate = threading.Barrier(claimers)

    def claim_all(index: int) -> list[str]:
        own = (store, second_store)[index % 2]
        gate.wait()
        got = []
        while (job := jobs.claim(own, f"claimer {index}", LEASE_S)) is not None:
            got.append(job.design_id)
        return got

    with ThreadPoolExecutor(claimers) as pool:
        got = [design_id for each in pool.map(claim_all, range(claimers)) for design_id in each]
    assert len(got) == number
    assert len(set(got)) == number


@pytest.mark.parametrize("database_url", ["postgresql"], indirect=True)
def test_a_claimer_passes_over_the_job_another_is_just_claiming(
    store: Store, second_store: Store
) -> None:
    first, second = submitted(store, "First"), submitted(store, "Second")
    claiming, claimed_meanwhile = threading.Event(), threading.Event()

    def claim_slowly(session: Session) -> bool:
        found = order.next_job(session, datetime.now(UTC))
        assert found is not None
        assert found.design_id == first
        claiming.set()
        return claimed_meanwhile.wait(3.0)

    with ThreadPoolExecutor(1) as pool:
        slow = pool.submit(store.write, claim_slowly)
        assert claiming.wait(5.0)
        assert claimed(second_store).design_id == second
        claimed_meanwhile.set()
        assert slow.result()


def test_urgent_jobs_are_claimed_before_those_submitted_earlier(store: Store) -> None:
    submitted(store, "Ordinary")
    urgent = designs.submit(
        store, sample_request(name="Urgent"), idempotency_key=None, priority="urgent"
    ).design_id
    assert claimed(store).design_id == urgent


def test_a_request_this_release_cannot_read_fails_and_does_not_hold_up_the_queue(
    store: Store,
) -> None:
    unreadable, good = submitted(store, "Old"), submitted(store, "New")
    store.write(
        lambda session: session.execute(
            update(DesignRow).where(DesignRow.id == unreadable).values(request='{"bands": []}')
        )
    )
    assert claimed(store).design_id == good
    page = designs.page(store, limit=9, before=None)
    failure = next(each.failure for each in page.designs if each.id == unreadable)
    assert failure is not None
    assert "another release" in failure


# ------------------------------------------------------------------------ heartbeat
def test_a_heartbeat_renews_the_lease_and_stores_the_progress(store: Store) -> None:
    job = submitted_and_claimed(store)
    let_leases_run_out(store)
    assert jobs.heartbeat(store, job, SOME, LEASE_S) is Beat.RENEWED
    assert jobs.sweep(store, MOST) == Swept(0, 0, 0)
    assert designs.get(store, job.design_id).progress == SOME


def test_a_heartbeat_after_the_job_was_taken_over_is_refused(store: Store) -> None:
    frozen = submitted_and_claimed(store)
    let_leases_run_out(store)
    jobs.sweep(store, MOST)
    second = claimed(store, "second")
    assert second.design_id == frozen.design_id
    jobs.heartbeat(store, second, SOME, LEASE_S)
    assert jobs.heartbeat(store, frozen, Progress(fraction=0.9, step="late"), 0.0) is Beat.LOST
    assert designs.get(store, frozen.design_id).progress == SOME
    assert jobs.sweep(store, MOST) == Swept(0, 0, 0)


def test_a_heartbeat_while_the_job_waits_again_is_refused(store: Store) -> None:
    frozen = submitted_and_claimed(store)
    let_leases_run_out(store)
    jobs.sweep(store, MOST)
    assert jobs.heartbeat(store, frozen, SOME, LEASE_S) is Beat.LOST
    assert state(store, frozen) == "queued"


# --------------------------------------------------------------------------- ending
def test_a_finished_job_is_done_with_its_result_and_its_reports(store: Store) -> None:
    job = submitted_and_claimed(store)
    assert jobs.finish(store, job, planned(job))
    assert state(store, job) == "done"
    assert stored(store) == (1, 2)


def test_the_late_result_of_a_worker_that_lost_its_job_is_refused(store: Store) -> None:
    frozen = submitted_and_claimed(store)
    let_leases_run_out(store)
    jobs.sweep(store, MOST)
    assert not jobs.finish(store, frozen, planned(frozen, "late"))
    assert state(store, frozen) == "queued"
    second = claimed(store, "second")
    assert not jobs.finish(store, frozen, planned(frozen, "late"))
    assert state(store, frozen) == "running"
    assert jobs.finish(store, second, planned(second, "in time"))
    assert not jobs.finish(store, frozen, planned(frozen, "late"))
    result = designs.get(store, frozen.design_id).result
    assert result is not None
    assert result.notes == ("in time",)
    assert stored(store) == (1, 2)


def test_no_other_late_word_of_a_worker_that_lost_its_job_has_effect(store: Store) -> None:
    frozen = submitted_and_claimed(store)
    let_leases_run_out(store)
    jobs.sweep(store, MOST)
    claimed(store, "second")
    assert not jobs.fail(store, frozen, "late")
    assert not jobs.release(store, frozen)
    assert not jobs.stop_cancelled(store, frozen)
    design = designs.get(store, frozen.design_id)
    assert (design.state, design.attempts, design.failure) == ("running", 2, None)


def test_a_finish_whose_commit_was_not_heard_of_is_stored_once(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    job = submitted_and_claimed(store)
    lose_the_answer_to_one_commit(store, monkeypatch)
    assert jobs.finish(store, job, planned(job))
    assert stored(store) == (1, 2)
    assert jobs.finish(store, job, planned(job))
    assert stored(store) == (1, 2)


def test_a_failure_whose_commit_was_not_heard_of_is_known_to_be_stored(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    job = submitted_and_claimed(store)
    lose_the_answer_to_one_commit(store, monkeypatch)
    assert jobs.fail(store, job, "in words")
    design = designs.get(store, job.design_id)
    assert (design.state, design.failure) == ("failed", "in words")


def test_a_claim_whose_commit_was_not_heard_of_comes_back_when_its_lease_is_over(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    sent = submitted(store)
    lose_the_answer_to_one_commit(store, monkeypatch)
    assert jobs.claim(store, "first", LEASE_S) is None
    let_leases_run_out(store)
    assert jobs.sweep(store, MOST) == Swept(1, 0, 0)
    assert claimed(store).design_id == sent


def test_a_result_that_cannot_be_stored_leaves_the_job_as_it_was(store: Store) -> None:
    job = submitted_and_claimed(store)
    plan = planned(job)
    twice = plan.model_copy(update={"reports": (plan.reports[0], plan.reports[0])})
    with pytest.raises(IntegrityError):
        jobs.finish(store, job, twice)
    assert state(store, job) == "running"
    assert stored(store) == (0, 0)


def test_a_released_job_waits_again_and_has_used_up_no_attempt(store: Store) -> None:
    job = submitted_and_claimed(store)
    assert jobs.release(store, job)
    design = designs.get(store, job.design_id)
    assert (design.state, design.attempts) == ("queued", 0)
    assert jobs.heartbeat(store, job, SOME, LEASE_S) is Beat.LOST
    again = claimed(store)
    assert (again.design_id, again.attempt) == (job.design_id, 1)
    assert again.fence > job.fence


# ----------------------------------------------------------------------- cancelling
def test_a_waiting_job_is_cancelled_at_once(store: Store) -> None:
    design_id = submitted(store)
    jobs.cancel(store, design_id)
    design = designs.get(store, design_id)
    assert design.state == "cancelled"
    assert design.finished_at is not None
    assert jobs.claim(store, "first", LEASE_S) is None


def test_a_running_job_learns_of_its_cancelling_at_its_heartbeat(store: Store) -> None:
    job = submitted_and_claimed(store)
    jobs.cancel(store, job.design_id)
    assert state(store, job) == "running"
    assert jobs.heartbeat(store, job, SOME, LEASE_S) is Beat.CANCELLED
    assert jobs.stop_cancelled(store, job)
    assert state(store, job) == "cancelled"


def test_a_cancelled_job_that_is_given_back_does_not_wait_for_ever(store: Store) -> None:
    job = submitted_and_claimed(store)
    jobs.cancel(store, job.design_id)
    assert jobs.release(store, job)
    assert state(store, job) == "cancelled"


def test_a_design_that_has_ended_is_not_cancelled(store: Store) -> None:
    job = submitted_and_claimed(store)
    jobs.finish(store, job, planned(job))
    jobs.cancel(store, job.design_id)
    assert state(store, job) == "done"


# ------------------------------------------------------------------------- sweeping
def test_a_sweep_leaves_a_job_whose_lease_runs_to_its_worker(store: Store) -> None:
    job = submitted_and_claimed(store)
    assert jobs.sweep(store, MOST) == Swept(0, 0, 0)
    assert jobs.finish(store, job, planned(job))


def test_a_sweep_gives_a_job_back_whose_lease_ran_out(store: Store) -> None:
    submitted(store)
    job = jobs.claim(store, "first", lease_s=0.05)
    assert job is not None
    time.sleep(0.1)
    assert jobs.sweep(store, MOST) == Swept(1, 0, 0)
    again = claimed(store, "second")
    assert (again.design_id, again.attempt) == (job.design_id, 2)
    assert again.fence == job.fence + 2


def test_a_job_whose_worker_is_lost_too_often_is_set_aside_with_its_cause(store: Store) -> None:
    submitted(store)
    for attempt in range(1, MOST + 1):
        job = claimed(store, f"worker {attempt}")
        let_leases_run_out(store)
        last = attempt == MOST
        assert jobs.sweep(store, MOST) == (Swept(0, 1, 0) if last else Swept(1, 0, 0))
    design = designs.get(store, job.design_id)
    assert design.state == "failed"
    assert design.failure is not None
    assert "lost 3 times" in design.failure
    assert "worker 3" in design.failure
    assert jobs.claim(store, "first", LEASE_S) is None
    assert not jobs.finish(store, job, planned(job))


def test_a_cancelled_job_whose_worker_is_lost_ends_cancelled(store: Store) -> None:
    job = submitted_and_claimed(store)
    jobs.cancel(store, job.design_id)
    let_leases_run_out(store)
    assert jobs.sweep(store, max_attempts=1) == Swept(0, 0, 1)
    assert state(store, job) == "cancelled"


def test_sweeps_at_the_same_moment_count_a_loss_once(store: Store, second_store: Store) -> None:
    for index in range(6):
        submitted(store, f"Design {index}")
        claimed(store)
    let_leases_run_out(store)
    gate = threading.Barrier(4)

    def sweep(index: int) -> int:
        gate.wait()
        return jobs.sweep((store, second_store)[index % 2], MOST).returned

    with ThreadPoolExecutor(4) as pool:
        assert sum(pool.map(sweep, range(4))) == 6


def test_what_a_dead_worker_held_is_given_back_before_its_lease_is_over(store: Store) -> None:
    job = submitted_and_claimed(store)
    submitted(store, "Another")
    other = claimed(store, "alive")
    assert jobs.bury(store, "first", MOST) == Swept(1, 0, 0)
    assert state(store, job) == "queued"
    assert jobs.heartbeat(store, other, SOME, LEASE_S) is Beat.RENEWED
    assert not jobs.finish(store, job, planned(job))


# --------------------------------------------------------------- moments of changes
def cancel_running(store: Store, job: ClaimedJob) -> None:
    jobs.cancel(store, job.design_id)
    jobs.stop_cancelled(store, job)


def lose_lease(store: Store, _: ClaimedJob) -> None:
    let_leases_run_out(store)
    forget_changes(store)
    jobs.sweep(store, MOST)


@pytest.mark.parametrize(
    "change",
    [
        lambda store, job: jobs.heartbeat(store, job, SOME, LEASE_S),
        lambda store, job: jobs.finish(store, job, planned(job)),
        lambda store, job: jobs.fail(store, job, "in words"),
        jobs.release,
        lambda store, job: jobs.bury(store, job.worker, MOST),
        lambda store, job: jobs.bury(store, job.worker, 1),
        cancel_running,
        lose_lease,
    ],
    ids=["beat", "finish", "fail", "release", "bury", "set aside", "cancel", "sweep"],
)
def test_every_change_of_a_job_carries_the_moment_it_was_made(
    store: Store, change: Callable[[Store, ClaimedJob], object]
) -> None:
    job = submitted_and_claimed(store)
    before_us = changed_at(store, job.design_id)
    assert abs(before_us / 1e6 - time.time()) < 30.0
    forget_changes(store)
    change(store, job)
    # SQLite's clock tells milliseconds.
    assert changed_at(store, job.design_id) >= before_us - 1000


def test_claiming_and_cancelling_what_waits_carry_their_moments_too(store: Store) -> None:
    first, second = submitted(store), submitted(store, "Second")
    forget_changes(store)
    claimed(store)
    jobs.cancel(store, second)
    assert changed_at(store, first) > 1
    assert changed_at(store, second) > 1


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_only_what_is_worth_nothing_without_its_machine_does_not_wait_for_the_disk(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    waits: list[bool] = []
    once = store._once

    def watched(work: Callable[[Session], T], *, writes: bool, synced: bool = True) -> T:
        def asked(session: Session) -> T:
            if writes:
                full = 2  # as SQLite numbers it
                waits.append(session.scalar(text("PRAGMA synchronous")) == full)
            return work(session)

        return once(asked, writes=writes, synced=synced)

    monkeypatch.setattr(store, "_once", watched)
    job = submitted_and_claimed(store)
    jobs.heartbeat(store, job, SOME, LEASE_S)
    jobs.finish(store, job, planned(job))
    assert waits == [True, False, False, True]


# --------------------------------------------------------------------------- counts
def test_the_depth_counts_jobs_by_state(store: Store) -> None:
    assert jobs.depth(store) == {}
    done = submitted_and_claimed(store)
    jobs.finish(store, done, planned(done))
    failed = submitted_and_claimed(store)
    jobs.fail(store, failed, "in words")
    submitted_and_claimed(store)
    submitted(store)
    submitted(store)
    assert jobs.depth(store) == {"done": 1, "failed": 1, "running": 1, "queued": 2}


def test_a_failure_in_many_words_is_cut_to_what_can_be_stored(store: Store) -> None:
    job = submitted_and_claimed(store)
    assert jobs.fail(store, job, "long " * 1000)
    failure = designs.get(store, job.design_id).failure
    assert failure is not None
    assert 0 < len(failure) <= 500


def test_the_time_from_start_to_end_is_kept(store: Store) -> None:
    job = submitted_and_claimed(store)
    jobs.finish(store, job, planned(job))
    design = designs.get(store, job.design_id)
    assert design.started_at is not None
    assert design.finished_at is not None
    assert design.created_at <= design.started_at <= design.finished_at
    assert design.finished_at - design.created_at < timedelta(seconds=30)
