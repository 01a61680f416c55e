"""A look at the whole queue: what waits, what runs, and which workers are there."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from service.contracts.progress import Progress
from service.contracts.queue_view import QueueShare, QueueView, QueueWorker, RunningDesign
from service.store import workers
from service.store.clock import now
from service.store.order import CLAIMABLE, RUNNING, word_of
from service.store.session import Store
from service.store.tables import DesignRow, JobRow


@dataclass(frozen=True, slots=True)
class _Jobs:
    at: datetime
    shares: tuple[QueueShare, ...]
    running: tuple[RunningDesign, ...]


def view(store: Store) -> QueueView:
    """The queue at this moment."""
    found = store.read(_jobs)
    # Read after the jobs: whoever holds one of them announced himself before.
    alive = workers.alive(store)
    names = {each.name for each in alive}
    waits = [each.oldest_wait_s for each in found.shares if each.oldest_wait_s is not None]
    return QueueView(
        at=found.at,
        waiting=sum(each.waiting for each in found.shares),
        running=sum(each.running for each in found.shares),
        oldest_wait_s=max(waits, default=None),
        shares=found.shares,
        workers=tuple(_worker(each, found) for each in alive),
        left=tuple(each for each in found.running if each.worker not in names),
    )


def _jobs(session: Session) -> _Jobs:
    moment = now(session)
    at_work = session.execute(
        select(JobRow, DesignRow.name, DesignRow.batch_line)
        .join(DesignRow, DesignRow.id == JobRow.design_id)
        .where(RUNNING)
        .order_by(JobRow.started_at, JobRow.design_id)
    ).all()
    running = Counter((row[0].priority, row[0].owner) for row in at_work)
    waiting: Counter[tuple[int, str]] = Counter()
    oldest: dict[tuple[int, str], datetime] = {}
    # One by one, for each of the two conditions has an index and both together have none.
    for waits in ((CLAIMABLE,), (JobRow.waits_for.is_not(None), JobRow.state == "queued")):
        query = select(JobRow.priority, JobRow.owner, func.count(), func.min(JobRow.queued_at))
        query = query.where(*waits).group_by(JobRow.priority, JobRow.owner)
        for priority, owner, number, since in session.execute(query):
            share = (priority, owner)
            waiting[share] += number
            oldest[share] = min(oldest.get(share, since), since)
    return _Jobs(
        moment,
        tuple(
            QueueShare(
                owner=share[1],
                priority=word_of(share[0]),
                waiting=waiting[share],
                running=running[share],
                oldest_wait_s=_since(oldest[share], moment) if share in oldest else None,
            )
            for share in sorted(waiting | running)
        ),
        tuple(_running(moment, *row) for row in at_work),
    )


def _running(moment: datetime, job: JobRow, name: str, batch_line: int | None) -> RunningDesign:
    return RunningDesign(
        id=job.design_id,
        name=name,
        owner=job.owner,
        priority=word_of(job.priority),
        batch_id=job.batch_id,
        batch_line=batch_line,
        worker=job.worker,
        attempts=job.attempts,
        running_s=_since(job.started_at or moment, moment),
        progress=Progress(fraction=job.progress, step=job.step),
    )


def _worker(each: workers.Worker, found: _Jobs) -> QueueWorker:
    return QueueWorker(
        name=each.name,
        host=each.host,
        pid=each.pid,
        carrier=each.carrier,
        engine_version=each.engine_version,
        started_at=each.started_at,
        seen_s=_since(each.seen_at, found.at),
        works_on=tuple(design for design in found.running if design.worker == each.name),
    )


def _since(then: datetime, moment: datetime) -> float:
    """Seconds from then to a moment; a clock that was set back makes none of them negative."""
    return max(0.0, (moment - then).total_seconds())
