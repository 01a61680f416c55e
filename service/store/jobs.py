"""The queue of record: who works on what, until when, and what came of it.

Only here do jobs change state::

    queued ──claim──▶ running ──finish──▶ done
      ▲ │                │ │ └──fail────▶ failed
      │ └──cancel────────┼─┴─────────────▶ cancelled
      └─returned or lost─┘

Every claim raises the job's fence, and so does taking a job away from a worker that was not
heard of. A worker writes under the fence it was given: what arrives late changes nothing.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import datetime, timedelta
from enum import Enum
from typing import Any, Final

from sqlalchemy import ColumnElement, Select, func, select, update
from sqlalchemy.engine import CursorResult
from sqlalchemy.orm import Session

from service.contracts.candidate import PlannedDesign
from service.contracts.progress import Progress
from service.contracts.request import DesignRequest
from service.errors import DesignNotFound, SchemaMismatch
from service.store.clock import now
from service.store.designs import read_request, refuse_malformed
from service.store.session import Store
from service.store.tables import DesignRow, JobRow, ReportRow, ResultRow

_LONGEST_FAILURE: Final = 500
_LONGEST_STEP: Final = 200

#: The next job in order, with its design, locked for the one who asks.
_NEXT: Final = (
    select(JobRow, DesignRow)
    .join(DesignRow, DesignRow.id == JobRow.design_id)
    .where(JobRow.state == "queued", JobRow.cancel_wanted.is_(False))
    .order_by(JobRow.priority, JobRow.position, JobRow.design_id)
    .limit(1)
    .with_for_update(of=JobRow, skip_locked=True)
)


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
        while (found := session.execute(_NEXT).one_or_none()) is not None:
            job, design = found
            moment = now(session)
            try:
                request = read_request(design)
            except SchemaMismatch as error:
                # It would be found unreadable by every worker, and hold up the queue for ever.
                _set_aside(job, moment, error.detail)
                session.flush()
                continue
            job.state = "running"
            job.fence += 1
            job.attempts += 1
            job.worker = worker
            job.lease_until = moment + timedelta(seconds=lease_s)
            job.started_at = job.started_at or moment
            job.progress, job.step = 0.0, "taken up by a worker"
            return ClaimedJob(job.design_id, request, job.fence, job.attempts, worker)
        return None

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
    # Written out before the transaction, which holds up every other writer of SQLite.
    result = planned.result.model_dump_json()
    reports = [(each.rank, each.model_dump_json()) for each in planned.reports]

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
                result=result,
                created_at=moment,
            )
        )
        session.add_all(
            ReportRow(design_id=job.design_id, rank=rank, report=report) for rank, report in reports
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
        held = session.scalars(select(JobRow).where(*_held(job)).with_for_update()).one_or_none()
        if held is None:
            return False
        held.attempts -= 1
        _give_back(held, now(session), "waiting again: its worker was stopped")
        return True

    return store.write(work)


def cancel(store: Store, design_id: str) -> None:
    """Cancel a design: at once while it waits, at the worker's next heartbeat while it runs.

    Raises
    ------
    DesignNotFound
        If there is no such design. One that has ended is left as it is.
    """
    refuse_malformed(design_id)

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
    """Put right what lost workers left: their jobs wait again, or are set aside.

    Idempotent, so any process may do it at any time and no one need lead.
    """

    def expired(moment: datetime) -> ColumnElement[bool]:
        return JobRow.lease_until < moment

    return _take_away(store, expired, max_attempts)


def bury(store: Store, worker: str, max_attempts: int) -> Swept:
    """Take away what a worker held that is known to be dead, without awaiting its lease.

    Only for whoever has seen the process end, and names workers so that none shares a name.
    """
    return _take_away(store, lambda _: JobRow.worker == worker, max_attempts)


def depth(store: Store) -> Mapping[str, int]:
    """How many jobs are in each state."""
    query = select(JobRow.state, func.count()).group_by(JobRow.state)

    def work(session: Session) -> dict[str, int]:
        return {row[0]: row[1] for row in session.execute(query)}

    return store.read(work)


def _take_away(
    store: Store, whose: Callable[[datetime], ColumnElement[bool]], max_attempts: int
) -> Swept:
    """Take running jobs away from their workers, who can no longer write: the fence rises."""

    def query(session: Session) -> Select[JobRow]:
        return select(JobRow).where(JobRow.state == "running", whose(now(session)))

    # A reading first, so that a sweep that finds nothing does not hold up writers.
    if store.read(lambda session: session.scalar(query(session).limit(1))) is None:
        return Swept(0, 0, 0)

    def work(session: Session) -> Swept:
        done: Counter[str] = Counter()
        for job in session.scalars(query(session).with_for_update(skip_locked=True)).all():
            if job.attempts >= max_attempts and not job.cancel_wanted:
                _set_aside(job, now(session), _lost_too_often(job))
            else:
                _give_back(job, now(session), "waiting again: its worker was lost")
            done[job.state] += 1
        return Swept(done["queued"], done["failed"], done["cancelled"])

    return store.write(work)


def _lost_too_often(job: JobRow) -> str:
    times = "once" if job.attempts == 1 else f"{job.attempts} times"
    return (
        f"The worker was lost {times} while planning this design (last: {job.worker}). It was "
        "set aside; the worker's log tells more. Try a smaller request."
    )


def _give_back(job: JobRow, moment: datetime, step: str) -> None:
    """Let a job wait again, or end it if it was cancelled meanwhile."""
    job.fence += 1
    job.lease_until = None
    if job.cancel_wanted:
        job.state, job.finished_at, job.step = "cancelled", moment, "cancelled"
    else:
        job.state, job.progress, job.step = "queued", 0.0, step


def _set_aside(job: JobRow, moment: datetime, reason: str) -> None:
    job.fence += 1
    job.lease_until = None
    job.state, job.finished_at, job.step = "failed", moment, "set aside"
    job.failure = reason[:_LONGEST_FAILURE]


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
