"""Workers tell that they are there; who is silent for long is taken for gone."""

from __future__ import annotations

from datetime import timedelta

from sqlalchemy import select, update
from sqlalchemy.orm import Session

from service.store import jobs, workers
from service.store.session import Store
from service.store.tables import WorkerRow
from tests.service.queueing import LEASE_S, at_work, single


def silent_for(store: Store, name: str, seconds: float) -> None:
    def work(session: Session) -> None:
        row = session.get_one(WorkerRow, name)
        row.seen_at -= timedelta(seconds=seconds)

    store.write(work)


def names(store: Store) -> list[str]:
    return [worker.name for worker in workers.alive(store)]


def test_a_worker_that_announced_itself_is_there(store: Store) -> None:
    workers.announce(store, "anna", host="here", pid=42, carrier="celery", engine_version="0.1")
    (worker,) = workers.alive(store)
    assert (worker.name, worker.host, worker.pid) == ("anna", "here", 42)
    assert (worker.carrier, worker.engine_version) == ("celery", "0.1")
    assert worker.last_claim_at is None
    assert worker.started_at == worker.seen_at


def test_a_worker_that_said_goodbye_is_gone(store: Store) -> None:
    at_work(store, name="anna")
    at_work(store, name="bert")
    workers.goodbye(store, "anna")
    assert names(store) == ["bert"]


def test_a_worker_that_was_silent_for_long_is_taken_for_gone_until_it_is_seen_again(
    store: Store,
) -> None:
    at_work(store, name="anna")
    silent_for(store, "anna", workers.ALIVE_S + 5.0)
    assert names(store) == []
    workers.touch(store, "anna")
    assert names(store) == ["anna"]


def test_a_worker_that_holds_a_lease_is_there_however_long_its_job_takes(store: Store) -> None:
    at_work(store, name="anna")
    single(store, "long")
    job = jobs.claim(store, "anna", LEASE_S)
    assert job is not None
    silent_for(store, "anna", workers.ALIVE_S + 5.0)
    assert names(store) == ["anna"]
    jobs.release(store, job)
    assert names(store) == []


def test_a_claim_is_noted_with_its_worker(store: Store) -> None:
    at_work(store, name="anna")
    single(store, "design")
    jobs.claim(store, "anna", LEASE_S)
    (worker,) = workers.alive(store)
    assert worker.last_claim_at is not None


def test_the_newest_worker_comes_first_and_tells_the_engine(store: Store) -> None:
    at_work(store, "0.1", name="anna")
    at_work(store, "0.2", name="bert")
    assert names(store) == ["bert", "anna"]
    assert store.read(workers.engine_version) == "0.2"
    workers.goodbye(store, "bert")
    assert store.read(workers.engine_version) == "0.1"


def test_no_worker_tells_no_engine(store: Store) -> None:
    assert store.read(workers.engine_version) is None


def test_a_worker_is_forgotten_a_day_after_it_was_last_seen(store: Store) -> None:
    at_work(store, name="anna")
    at_work(store, name="bert")
    silent_for(store, "anna", 86_400.0 + 5.0)
    silent_for(store, "bert", 86_400.0 - 60.0)
    at_work(store, name="cora")
    kept = store.read(lambda session: session.scalars(select(WorkerRow.name)).all())
    assert sorted(kept) == ["bert", "cora"]


def test_a_worker_announced_again_is_there_again(store: Store) -> None:
    at_work(store, name="anna")
    workers.goodbye(store, "anna")
    store.write(lambda session: session.execute(update(WorkerRow).values(engine_version="old")))
    at_work(store, "0.2", name="anna")
    (worker,) = workers.alive(store)
    assert worker.engine_version == "0.2"
