"""The queue of record: who works on what, until when, and what came of it.

Only here do jobs change state::

    queued ──claim──▶ running ──finish──▶ done
      ▲ │                │ │ └──fail────▶ failed
      │ └──cancel────────┼─┴─────────────▶ cancelled
      └──release, sweep──┘

Every claim raises the job's fence, and so does taking a job away from a worker that was not
heard of. A worker writes under the fence it was given: what arrives late changes nothing.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime, timedelta
from enum import Enum
from typing import Any, Final

from sqlalchemy import ColumnElement, func, select, update
from sqlalchemy.engine import CursorResult
from sqlalchemy.orm import Session

from service.contracts.candidate import PlannedDesign
from service.contracts.progress import Progress
from service.contracts.request import DesignRequest
from service.errors import DesignNotFound
from service.store.clock import now
from service.store.session import Store
from service.store.tables import DesignRow, JobRow, ReportRow, ResultRow

_LONGEST_FAILURE: Final = 500
_LONGEST_STEP: Final = 200


@dataclass(frozen=True, slots=True)
class ClaimedJob:
    """A job a worker has taken, and the fence it must write under."""

    design_id: str
    request: DesignRequest
    fence: int
    attempt: int
    worker: str


class Beat(Enum):
    """What a heartbeat learns."""

    RENEWED = "renewed"
    CANCELLED = "cancelled"
    LOST = "lost"


@dataclass(frozen=True, slots=True)
class Swept:
    """What a sweep put right: jobs given back to the queue, set aside, and cancelled."""

    returned: int
    set_aside: int
    cancelled: int


def any_queued(store: Store) -> bool:
    """Whether a job waits; a reading, so that an idle worker does not hold up writers."""
    query = select(JobRow.design_id).where(JobRow.state == "queued").limit(1)
    return store.read(lambda session: session.scalar(query) is not None)


def claim(store: Store, worker: str, lease_s: float) -> ClaimedJob | None:
    """Take the next job in order, or None if none waits.

    Two workers never take the same: PostgreSQL passes over locked rows, SQLite lets one
    writer in at a time.

    Parameters
    ----------
    store : Store
    worker : str
        Name of the worker, for the record.
    lease_s : float
        The worker loses the job if it is not heard of for so long.
    """

    def work(session: Session) -> ClaimedJob | None:
        job = session.scalars(
            select(JobRow)
            .where(JobRow.state == "queued", JobRow.cancel_wanted.is_(False))
            .order_by(JobRow.priority, JobRow.position, JobRow.design_id)
            .limit(1)
            .with_for_update(skip_locked=True)
        ).one_or_none()
        if job is None:
            return None
        moment = now(session)
        job.state = "running"
        job.fence += 1
        job.attempts += 1
        job.worker = worker
        job.lease_until = moment + timedelta(seconds=lease_s)
        job.started_at = job.started_at or moment
        job.progress, job.step = 0.0, "taken up by a worker"
        request = session.scalars(
            select(DesignRow.request).where(DesignRow.id == job.design_id)
        ).one()
        return ClaimedJob(
            job.design_id,
            DesignRequest.model_validate_json(request),
            job.fence,
            job.attempts,
            worker,
        )

    return store.write(work)


def heartbeat(store: Store, job: ClaimedJob, progress: Progress, lease_s: float) -> Beat:
    """Renew the lease of a job, store its progress, and learn whether to go on."""

    def work(session: Session) -> Beat:
        renewed = _change(
            session,
            job,
            {
                "lease_until": now(session) + timedelta(seconds=lease_s),
                "progress": progress.fraction,
                "step": progress.step[:_LONGEST_STEP],
            },
            JobRow.cancel_wanted.is_(False),
        )
        if renewed:
            return Beat.RENEWED
        still_mine = session.scalar(select(JobRow.design_id).where(*_held(job)))
        return Beat.LOST if still_mine is None else Beat.CANCELLED

    return store.write(work)


def finish(store: Store, job: ClaimedJob, planned: PlannedDesign) -> bool:
    """Store the result of a job, if it is still the worker's; else store nothing.

    Safe to run again after a commit whose answer was lost: it then finds its own result.

    Returns
    -------
    bool
        False if the job was taken away in the meantime.
    """

    def work(session: Session) -> bool:
        moment = now(session)
        done = _change(
            session,
            job,
            {
                "state": "done",
                "finished_at": moment,
                "lease_until": None,
                "progress": 1.0,
                "step": "done",
            },
        )
        if not done:
            return _ended_by(session, job, "done")
        session.add(
            ResultRow(
                design_id=job.design_id,
                engine_version=planned.result.engine_version,
                result=planned.result.model_dump_json(),
                created_at=moment,
            )
        )
        session.add_all(
            ReportRow(design_id=job.design_id, rank=each.rank, report=each.model_dump_json())
            for each in planned.reports
        )
        return True

    return store.write(work)


def fail(store: Store, job: ClaimedJob, reason: str) -> bool:
    """End a job that cannot succeed, with its reason in words; False if it was taken away."""
    return store.write(lambda session: _end(session, job, "failed", reason))


def stop_cancelled(store: Store, job: ClaimedJob) -> bool:
    """End a job whose cancelling its worker has seen; False if it was taken away."""
    return store.write(lambda session: _end(session, job, "cancelled", None))


def release(store: Store, job: ClaimedJob) -> bool:
    """Give a job back unharmed, as a worker does that is asked to stop; it costs no attempt."""

    def work(session: Session) -> bool:
        return _change(session, job, _back_in_queue(job.fence, attempts=job.attempt - 1))

    return store.write(work)


def cancel(store: Store, design_id: str) -> None:
    """Cancel a design: at once while it waits, at the worker's next heartbeat while it runs.

    Raises
    ------
    DesignNotFound
        If there is no such design. One that has ended is left as it is.
    """

    def work(session: Session) -> None:
        job = session.get(JobRow, design_id, with_for_update=True)
        if job is None:
            raise DesignNotFound(design_id)
        if job.state == "queued":
            job.state, job.finished_at, job.step = "cancelled", now(session), "cancelled"
        elif job.state == "running":
            job.cancel_wanted = True

    store.write(work)


def sweep(store: Store, max_attempts: int) -> Swept:
    """Put right what dead workers left: their jobs wait again, or are set aside.

    Idempotent, so any process may do it at any time and no one need lead.
    """
    if not store.read(_any_expired):
        return Swept(0, 0, 0)

    def work(session: Session) -> Swept:
        moment = now(session)
        expired = session.scalars(
            select(JobRow)
            .where(JobRow.state == "running", JobRow.lease_until < moment)
            .with_for_update(skip_locked=True)
        ).all()
        done: Counter[str] = Counter()
        for job in expired:
            done[_take_away(job, moment, max_attempts)] += 1
        return Swept(done["queued"], done["failed"], done["cancelled"])

    return store.write(work)


def depth(store: Store) -> Mapping[str, int]:
    """How many jobs are in each state."""
    query = select(JobRow.state, func.count()).group_by(JobRow.state)

    def work(session: Session) -> dict[str, int]:
        return {row[0]: row[1] for row in session.execute(query)}

    return store.read(work)


def _any_expired(session: Session) -> bool:
    query = select(JobRow.design_id).where(
        JobRow.state == "running", JobRow.lease_until < now(session)
    )
    return session.scalar(query.limit(1)) is not None


def _take_away(job: JobRow, moment: datetime, max_attempts: int) -> str:
    """Move an expired job on; its fence rises, so that its worker can no longer write."""
    job.fence += 1
    job.lease_until = None
    if job.cancel_wanted:
        job.state, job.finished_at, job.step = "cancelled", moment, "cancelled"
    elif job.attempts >= max_attempts:
        job.state, job.finished_at, job.step = "failed", moment, "set aside"
        job.failure = (
            f"The worker was lost {job.attempts} times while planning this design (last: "
            f"{job.worker}). It was set aside; the worker's log tells more. Try a smaller request."
        )
    else:
        job.state, job.progress = "queued", 0.0
        job.step = "waiting again: its worker was lost"
    return job.state


def _held(job: ClaimedJob) -> tuple[ColumnElement[bool], ...]:
    return (
        JobRow.design_id == job.design_id,
        JobRow.fence == job.fence,
        JobRow.state == "running",
    )


def _change(
    session: Session, job: ClaimedJob, values: Mapping[str, Any], *also: ColumnElement[bool]
) -> bool:
    """Change a job under its fence; False if it is no longer the worker's."""
    changed = session.execute(update(JobRow).where(*_held(job), *also).values(**values))
    return isinstance(changed, CursorResult) and changed.rowcount == 1


def _end(session: Session, job: ClaimedJob, state: str, reason: str | None) -> bool:
    values = {
        "state": state,
        "failure": None if reason is None else reason[:_LONGEST_FAILURE],
        "finished_at": now(session),
        "lease_until": None,
        "step": state,
    }
    return _change(session, job, values) or _ended_by(session, job, state)


def _ended_by(session: Session, job: ClaimedJob, state: str) -> bool:
    """Whether the job was ended by this very claim: a commit whose answer was lost."""
    query = select(JobRow.design_id).where(
        JobRow.design_id == job.design_id, JobRow.fence == job.fence, JobRow.state == state
    )
    return session.scalar(query) is not None


def _back_in_queue(fence: int, attempts: int) -> dict[str, Any]:
    return {
        "state": "queued",
        "fence": fence + 1,
        "attempts": attempts,
        "lease_until": None,
        "progress": 0.0,
        "step": "waiting again: its worker was stopped",
    }
