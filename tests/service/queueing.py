"""Work put into the queue and taken out again, for tests of its order and of its answers."""

from __future__ import annotations

from datetime import timedelta

from sqlalchemy import select, update
from sqlalchemy.orm import Session

from service.contracts.batch import BatchRequest
from service.contracts.candidate import PlannedDesign
from service.contracts.progress import LOCAL_OWNER, Priority
from service.store import batches, designs, jobs, workers
from service.store.jobs import ClaimedJob
from service.store.session import Store
from service.store.tables import DesignRow, JobRow, ShareRow
from tests.service.samples import sample_planned, sample_request

LEASE_S = 600.0
VERSION = "0.0-invented"  # that of the invented plannings
WORKER = "worker"


def single(
    store: Store,
    name: str,
    *,
    owner: str = LOCAL_OWNER,
    priority: Priority = "ordinary",
    recompute: bool = False,
) -> str:
    """Submit one design; its identifier."""
    return designs.submit(
        store,
        sample_request(name=name),
        idempotency_key=None,
        owner=owner,
        priority=priority,
        recompute=recompute,
    ).design_id


def batch_request(
    *names: str, priority: Priority = "ordinary", recompute: bool = False
) -> BatchRequest:
    """A batch of designs that differ by their names."""
    wanted = tuple(sample_request(name=name) for name in names)
    return BatchRequest(name="A batch", priority=priority, recompute=recompute, designs=wanted)


def batch(
    store: Store,
    *names: str,
    owner: str = LOCAL_OWNER,
    priority: Priority = "ordinary",
    recompute: bool = False,
) -> str:
    """Submit a batch of designs that differ by their names; its identifier."""
    request = batch_request(*names, priority=priority, recompute=recompute)
    return batches.submit(store, request, idempotency_key=None, owner=owner).batch_id


def numbered(word: str, count: int) -> list[str]:
    """Names that differ."""
    return [f"{word} {number}" for number in range(1, count + 1)]


def take(store: Store, version: str | None = VERSION) -> ClaimedJob:
    """Claim the next job; there is one."""
    job = jobs.claim(store, WORKER, LEASE_S, version)
    assert job is not None
    return job


def taken(store: Store, count: int) -> list[str]:
    """Names of the next jobs in the order they are claimed."""
    return [take(store).request.name for _ in range(count)]


def planned(job: ClaimedJob, version: str = VERSION) -> PlannedDesign:
    """What a worker might hand in, of an engine of some version."""
    plan = sample_planned(job.request, 1)
    result = plan.result.model_copy(update={"engine_version": version})
    return plan.model_copy(update={"result": result})


def plan_next(store: Store, version: str = VERSION) -> str:
    """Claim the next job and finish it; its design's identifier."""
    job = take(store, version)
    assert jobs.finish(store, job, planned(job, version))
    return job.design_id


def at_work(store: Store, version: str = VERSION, name: str = WORKER) -> None:
    """Announce a worker with an engine of that version."""
    workers.announce(store, name, host="here", pid=1, carrier="embedded", engine_version=version)


def waited_longer(store: Store, design_id: str, seconds: float) -> None:
    """Let a job have begun to wait earlier than it did."""

    def work(session: Session) -> None:
        job = session.get_one(JobRow, design_id)
        job.queued_at -= timedelta(seconds=seconds)

    store.write(work)


def served(store: Store, owner: str, priority: int = 100) -> int:
    """Turns an owner has had."""
    query = select(ShareRow.served).where(ShareRow.owner == owner, ShareRow.priority == priority)
    return store.read(lambda session: session.scalars(query).one())


def changed_at(store: Store, design_id: str) -> int:
    """Moment of a job's last change."""
    query = select(JobRow.changed_at).where(JobRow.design_id == design_id)
    return store.read(lambda session: session.scalars(query).one())


def line_of(store: Store, batch_id: str, line: int) -> str:
    """Identifier of the design in a line of a batch."""
    query = select(DesignRow.id).where(DesignRow.batch_id == batch_id, DesignRow.batch_line == line)
    return store.read(lambda session: session.scalars(query).one())


def forget_changes(store: Store) -> None:
    """Let every job have changed long ago."""
    store.write(lambda session: session.execute(update(JobRow).values(changed_at=1)))
