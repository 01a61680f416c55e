"""Identical requests are planned once; a stored result answers those of its engine only."""

from __future__ import annotations

import pytest
from sqlalchemy import func, select, update

from service.store import batches, claiming, designs, jobs
from service.store.session import Store
from service.store.tables import DesignRow, JobRow, ResultRow
from tests.service.queueing import (
    LEASE_S,
    VERSION,
    at_work,
    batch,
    batch_request,
    line_of,
    plan_next,
    planned,
    single,
    take,
    taken,
)

NEWER = "0.1-invented"


def results(store: Store) -> int:
    return store.read(lambda session: session.scalar(select(func.count(ResultRow.design_id))) or 0)


def none_left(store: Store, version: str | None = VERSION) -> bool:
    return jobs.claim(store, "another", LEASE_S, version) is None


# ------------------------------------------------------------------------- at submit
def test_an_identical_request_is_answered_at_once_from_the_stored_result(store: Store) -> None:
    at_work(store)
    single(store, "same")
    first = plan_next(store)
    second = designs.get(store, single(store, "same"))
    assert (second.state, second.answered_by, second.attempts) == ("done", first, 0)
    assert second.progress.fraction == 1.0
    assert second.finished_at is not None
    assert none_left(store)


def test_what_is_answered_shows_the_result_its_candidates_and_its_reports(store: Store) -> None:
    at_work(store)
    single(store, "same")
    first = plan_next(store)
    second = single(store, "same")
    assert designs.get(store, second).result == designs.get(store, first).result
    assert designs.get(store, second).result is not None
    assert designs.candidate(store, second, 1) == designs.candidate(store, first, 1)
    assert designs.report(store, second, 1) == designs.report(store, first, 1)
    assert results(store) == 1


def test_an_answer_names_the_design_that_has_the_result_not_another_answered_one(
    store: Store,
) -> None:
    at_work(store)
    single(store, "same")
    first = plan_next(store)
    single(store, "same")
    assert designs.get(store, single(store, "same")).answered_by == first


def test_another_request_is_not_answered(store: Store) -> None:
    at_work(store)
    single(store, "same")
    plan_next(store)
    assert designs.get(store, single(store, "other")).state == "queued"


def test_a_request_to_be_planned_anew_is_not_answered(store: Store) -> None:
    at_work(store)
    single(store, "same")
    first = plan_next(store)
    again = single(store, "same", recompute=True)
    assert designs.get(store, again).state == "queued"
    assert plan_next(store) == again
    assert designs.get(store, again).answered_by is None
    assert first != again
    assert results(store) == 2


def test_a_result_of_another_engine_answers_nothing(store: Store) -> None:
    at_work(store)
    single(store, "same")
    plan_next(store)
    at_work(store, NEWER, name="newer")
    second = single(store, "same")
    assert designs.get(store, second).state == "queued"
    assert take(store, NEWER).design_id == second


def test_the_engine_asked_about_is_that_of_the_newest_worker_there(store: Store) -> None:
    at_work(store, NEWER, name="older")
    at_work(store, VERSION, name="newest")
    single(store, "same")
    first = plan_next(store)
    assert designs.get(store, single(store, "same")).answered_by == first


def test_where_no_worker_is_there_the_request_waits_and_is_answered_at_its_claim(
    store: Store,
) -> None:
    single(store, "same")
    first = plan_next(store)
    second = single(store, "same")
    assert designs.get(store, second).state == "queued"
    assert none_left(store)
    design = designs.get(store, second)
    assert (design.state, design.answered_by, design.attempts) == ("done", first, 0)


# -------------------------------------------------------------------------- at claim
def test_a_claim_answers_what_it_can_and_goes_on_to_what_must_be_planned(store: Store) -> None:
    answered = [single(store, "same") for _ in range(3)]
    other = single(store, "other")
    first = take(store)
    assert jobs.finish(store, first, planned(first))
    assert take(store).design_id == other
    assert [designs.get(store, each).answered_by for each in answered[1:]] == [
        first.design_id,
        first.design_id,
    ]


def test_a_claim_by_another_engine_answers_nothing(store: Store) -> None:
    single(store, "same")
    plan_next(store)
    second = single(store, "same")
    assert take(store, NEWER).design_id == second


def test_a_claim_that_knows_no_engine_answers_nothing(store: Store) -> None:
    single(store, "same")
    plan_next(store)
    second = single(store, "same")
    assert take(store, None).design_id == second


def test_a_claim_does_not_answer_what_is_to_be_planned_anew(store: Store) -> None:
    single(store, "same")
    plan_next(store)
    again = single(store, "same", recompute=True)
    assert take(store).design_id == again


def test_answers_beyond_what_one_transaction_gives_are_given_in_the_next(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(claiming, "_MOST_ANSWERED", 2)
    same = [single(store, "same") for _ in range(6)]
    other = single(store, "other")
    plan_next(store)
    assert take(store).design_id == other
    assert {designs.get(store, each).state for each in same} == {"done"}


# ------------------------------------------------------------------- inside one batch
def test_identical_designs_of_a_batch_are_planned_once(store: Store) -> None:
    batch_id = batch(store, "same", "other", "same", "same")
    assert jobs.any_queued(store)
    first, other = take(store), take(store)
    assert (first.request.name, other.request.name) == ("same", "other")
    assert not jobs.any_queued(store)
    assert none_left(store)
    assert jobs.finish(store, first, planned(first))
    items = batches.items(store, batch_id, limit=9).items
    assert [item.state for item in items] == ["done", "running", "done", "done"]
    assert [item.answered_by for item in items] == [None, None, first.design_id, first.design_id]
    assert designs.get(store, items[3].id).result == designs.get(store, first.design_id).result
    assert results(store) == 1


def test_identical_designs_are_planned_once_even_where_all_is_to_be_planned_anew(
    store: Store,
) -> None:
    batch(store, "same", "same", recompute=True)
    plan_next(store)
    assert none_left(store)
    assert results(store) == 1


def test_what_waits_for_an_identical_design_says_so(store: Store) -> None:
    batch_id = batch(store, "other", "same", "same")
    assert "line 2" in designs.get(store, line_of(store, batch_id, 3)).progress.step


def test_identical_designs_share_the_failure_of_the_one_that_was_planned(store: Store) -> None:
    batch_id = batch(store, "same", "same")
    assert jobs.fail(store, take(store), "in words")
    items = batches.items(store, batch_id, limit=9).items
    assert [(item.state, item.failure) for item in items] == [("failed", "in words")] * 2


def test_a_deadly_request_kills_no_more_workers_for_being_sent_twice_in_a_batch(
    store: Store,
) -> None:
    batch_id = batch(store, "deadly", "deadly")
    for _ in range(3):
        jobs.bury(store, take(store).worker, max_attempts=3)
    items = batches.items(store, batch_id, limit=9).items
    assert [item.state for item in items] == ["failed", "failed"]
    assert all("lost 3 times" in (item.failure or "") for item in items)
    assert none_left(store)


@pytest.mark.parametrize("while_it", ["waits", "runs", "is lost"])
def test_a_cancelled_design_hands_its_place_to_an_identical_one(
    store: Store, while_it: str
) -> None:
    batch_id = batch(store, "same", "same", "same")
    if while_it == "waits":
        jobs.cancel(store, line_of(store, batch_id, 1))
    else:
        job = take(store)
        jobs.cancel(store, job.design_id)
        if while_it == "runs":
            assert jobs.stop_cancelled(store, job)
        else:
            jobs.bury(store, job.worker, max_attempts=3)
    second = take(store)
    assert second.design_id == line_of(store, batch_id, 2)
    assert none_left(store)
    assert jobs.finish(store, second, planned(second))
    items = batches.items(store, batch_id, limit=9).items
    assert [item.state for item in items] == ["cancelled", "done", "done"]
    assert items[2].answered_by == second.design_id


def test_cancelling_what_waits_for_an_identical_design_leaves_the_others(store: Store) -> None:
    batch_id = batch(store, "same", "same", "same")
    jobs.cancel(store, line_of(store, batch_id, 2))
    plan_next(store)
    items = batches.items(store, batch_id, limit=9).items
    assert [item.state for item in items] == ["done", "cancelled", "done"]
    assert items[1].answered_by is None


def test_cancelling_a_design_that_answers_others_changes_nothing(store: Store) -> None:
    at_work(store)
    single(store, "same")
    first = plan_next(store)
    second = single(store, "same")
    jobs.cancel(store, first)
    assert designs.get(store, first).state == "done"
    assert designs.get(store, second).result is not None


def test_identical_designs_planned_again_are_planned_once_again(store: Store) -> None:
    batch_id = batch(store, "same", "same")
    jobs.fail(store, take(store), "in words")
    assert batches.rerun_failed(store, batch_id) == 2
    plan_next(store)
    assert none_left(store)
    assert [item.state for item in batches.items(store, batch_id, limit=9).items] == ["done"] * 2


def test_a_design_put_in_again_waits_for_an_identical_one_that_is_under_way(store: Store) -> None:
    batch_id = batch(store, "same", "same", "same")
    jobs.cancel(store, line_of(store, batch_id, 2))
    first = take(store)
    assert batches.rerun_failed(store, batch_id) == 1
    assert none_left(store)
    assert jobs.finish(store, first, planned(first))
    items = batches.items(store, batch_id, limit=9).items
    assert [item.answered_by for item in items] == [None, first.design_id, first.design_id]


def test_a_batch_sent_again_is_answered_at_once(store: Store) -> None:
    at_work(store)
    batch(store, "one", "two")
    done = [plan_next(store) for _ in range(2)]
    again = batches.get(store, batch(store, "two", "new", "one"), "local")
    assert (again.counts.done, again.counts.queued) == (2, 1)
    items = batches.items(store, again.id, limit=9).items
    assert [item.answered_by for item in items] == [done[1], None, done[0]]
    assert taken(store, 1) == ["new"]


def test_a_batch_sent_again_is_not_answered_by_results_of_another_engine(store: Store) -> None:
    batch(store, "one")
    plan_next(store)
    at_work(store, NEWER)
    again = batches.get(store, batch(store, "one"), "local")
    assert (again.counts.done, again.counts.queued) == (0, 1)


def test_a_batch_answered_whole_is_finished_at_once(store: Store) -> None:
    at_work(store)
    batch(store, "one")
    plan_next(store)
    submitted = batches.submit(store, batch_request("one"), idempotency_key=None)
    found = batches.get(store, submitted.batch_id, "local")
    assert (found.progress, found.finished_at) == (1.0, found.created_at)
    streamed = [each.read() for each in batches.results(store, submitted.batch_id)]
    assert streamed[0] is not None


def test_what_waits_for_a_design_that_has_ended_is_set_free_by_a_sweep(store: Store) -> None:
    batch_id = batch(store, "same", "same")
    first, second = (line_of(store, batch_id, line) for line in (1, 2))
    # No code does this; were there a fault in it, the second would wait for ever.
    store.write(
        lambda session: session.execute(
            update(JobRow).where(JobRow.design_id == first).values(state="cancelled")
        )
    )
    assert none_left(store)
    jobs.sweep(store, 3)
    assert take(store).design_id == second


def test_the_hash_of_a_design_is_kept_with_its_result(store: Store) -> None:
    single(store, "same")
    plan_next(store)
    query = select(ResultRow.content_hash == DesignRow.content_hash).join(
        DesignRow, DesignRow.id == ResultRow.design_id
    )
    assert store.read(lambda session: session.scalars(query).all()) == [True]
