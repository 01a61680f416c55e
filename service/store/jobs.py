"""The queue of record: who works on what, until when, and what came of it.

Jobs change state only here, in `losses` and in `batches`::

    queued ──claim──▶ running ──finish──▶ done
      ▲ │                │ │ └──fail────▶ failed
      │ └──cancel────────┼─┴─────────────▶ cancelled
      └─returned or lost─┘

Every claim raises the job's fence, and so does taking a job away from a worker that was not
heard of. A worker writes under the fence it was given: what arrives late changes nothing.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import timedelta
from enum import Enum
from typing import Final

from sqlalchemy import func, insert, select
from sqlalchemy.orm import Session

from service.contracts.candidate import PlannedDesign
from service.contracts.progress import Progress
from service.errors import DesignNotFound, SchemaMismatch
from service.store import answers, order, workers
from service.store.clock import now
from service.store.endings import (
    ClaimedJob,
    cancel_held,
    cancel_locked,
    change_held,
    ended_by,
    fail_held,
    give_back,
    held,
)
from service.store.losses import Swept, bury, sweep
from service.store.packing import pack
from service.store.reading import read_request, refuse_malformed
from service.store.session import Store
from service.store.tables import DesignRow, JobRow, ReportRow, ResultRow

__all__ = [
    "Beat",
    "ClaimedJob",
    "Swept",
    "any_queued",
    "bury",
    "cancel",
    "claim",
    "depth",
    "fail",
    "finish",
    "heartbeat",
    "release",
    "stop_cancelled",
    "sweep",
]

_LONGEST_STEP: Final = 200
#: Jobs answered by stored results in one claiming transaction, so that it stays short.
_MOST_ANSWERED: Final = 100


class Beat(Enum):
    """What a heartbeat learns."""

    RENEWED = "renewed"
    CANCELLED = "cancelled"
    LOST = "lost"


@dataclass(frozen=True, slots=True)
class _Taken:
    """What a claiming transaction took, its request not yet read."""

    design_id: str
    request: str
    fence: int
    attempt: int
    batch_id: str | None


class _NothingTaken(Enum):
    NONE_WAITS = "none waits"
    MORE_TO_LOOK_AT = "more to look at"


def any_queued(store: Store) -> bool:
    """Whether a job could be claimed; a reading, so that the idle do not hold up writers."""
    query = select(JobRow.design_id).where(order.CLAIMABLE).limit(1)
    return store.read(lambda session: session.scalar(query) is not None)


def claim(
    store: Store, worker: str, lease_s: float, engine_version: str | None = None
) -> ClaimedJob | None:
    """Take the next job in order, or None if none is free.

    Two workers never take the same: PostgreSQL passes over locked rows, SQLite lets one
    writer in at a time. On the way, jobs that a stored result answers are ended by it.

    Parameters
    ----------
    store : Store
    worker : str
        Name of the worker, for the record.
    lease_s : float
        The worker loses the job if it is not heard of for so long.
    engine_version : str, optional
        Version of the worker's engine: only results of the same answer for it. None where it
        has no engine of its own; nothing is answered then.
    """

    def work(session: Session) -> _Taken | _NothingTaken:
        moment = now(session)
        for _ in range(_MOST_ANSWERED):
            found = order.next_job(session, moment)
            if found is None:
                return _NothingTaken.NONE_WAITS
            job, design = found.job, found.design
            if engine_version is not None and not design.recompute:
                stored = answers.stored_answer(session, design.content_hash, engine_version)
                if stored is not None:
                    answers.answer(job, design, stored, moment)
                    session.flush()
                    answers.share_result(session, design.id, moment, stored)
                    continue
            job.state, job.worker = "running", worker
            job.fence += 1
            job.attempts += 1
            job.lease_until = moment + timedelta(seconds=lease_s)
            job.started_at = job.started_at or moment
            job.progress, job.step = 0.0, "taken up by a worker"
            session.flush()
            workers.claimed(session, worker, moment)
            order.charge(session, found)
            return _Taken(design.id, design.request, job.fence, job.attempts, job.batch_id)
        return _NothingTaken.MORE_TO_LOOK_AT

    while (taken := store.write(work, outlives_machine=False)) is not _NothingTaken.NONE_WAITS:
        if isinstance(taken, _NothingTaken):
            continue
        try:
            request = read_request(taken.design_id, taken.request)
        except SchemaMismatch as error:
            # Every worker would find it unreadable, and it would hold up the queue for ever.
            _fail(store, taken.design_id, taken.fence, error.detail)
            continue
        return ClaimedJob(
            taken.design_id, request, taken.fence, taken.attempt, worker, taken.batch_id
        )
    return None


def heartbeat(store: Store, job: ClaimedJob, progress: Progress, lease_s: float) -> Beat:
    """Renew the lease of a job, store its progress, and learn whether to go on."""

    def work(session: Session) -> Beat:
        renewed = change_held(
            session,
            job.design_id,
            job.fence,
            {
                "lease_until": now(session) + timedelta(seconds=lease_s),
                "progress": progress.fraction,
                "step": progress.step[:_LONGEST_STEP],
            },
            JobRow.cancel_wanted.is_(False),
        )
        if renewed:
            return Beat.RENEWED
        still_mine = session.scalar(select(JobRow.design_id).where(*held(job.design_id, job.fence)))
        return Beat.LOST if still_mine is None else Beat.CANCELLED

    return store.write(work, outlives_machine=False)


def finish(store: Store, job: ClaimedJob, planned: PlannedDesign) -> bool:
    """Store the result of a job, if it is still the worker's; else store nothing.

    Safe to run again after a commit whose answer was lost: it then finds its own result.

    Returns
    -------
    bool
        False if the job was taken away in the meantime.
    """
    # Written out and packed before the transaction, which holds up every other writer of SQLite.
    result = pack(planned.result.model_dump_json())
    reports = [
        {"design_id": job.design_id, "rank": each.rank, "report": pack(each.model_dump_json())}
        for each in planned.reports
    ]
    content_hash = select(DesignRow.content_hash).where(DesignRow.id == job.design_id)

    def work(session: Session) -> bool:
        moment = now(session)
        values = {"state": "done", "finished_at": moment, "progress": 1.0, "step": "done"}
        if not change_held(session, job.design_id, job.fence, values | {"lease_until": None}):
            return ended_by(session, job.design_id, job.fence, "done")
        session.execute(
            insert(ResultRow).values(
                design_id=job.design_id,
                content_hash=content_hash.scalar_subquery(),
                engine_version=planned.result.engine_version,
                map_error_percent=planned.result.map_error_percent,
                result=result,
                created_at=moment,
            )
        )
        if reports:
            session.execute(insert(ReportRow), reports)
        answers.share_result(session, job.design_id, moment)
        return True

    return store.write(work)


def fail(store: Store, job: ClaimedJob, reason: str) -> bool:
    """End a job that cannot succeed, with its reason in words; False if it was taken away."""
    return _fail(store, job.design_id, job.fence, reason)


def stop_cancelled(store: Store, job: ClaimedJob) -> bool:
    """End a job whose cancelling its worker has seen; False if it was taken away."""
    return store.write(lambda session: cancel_held(session, job.design_id, job.fence))


def release(store: Store, job: ClaimedJob) -> bool:
    """Give a job back unharmed, as a worker does that is asked to stop; it costs no attempt."""

    def work(session: Session) -> bool:
        mine = select(JobRow).where(*held(job.design_id, job.fence)).with_for_update()
        row = session.scalars(mine).one_or_none()
        if row is None:
            return False
        row.attempts -= 1
        give_back(session, row, now(session), "waiting again: its worker was stopped")
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
            cancel_locked(session, job, now(session))
        elif job.state == "running":
            job.cancel_wanted = True

    store.write(work)


def depth(store: Store) -> Mapping[str, int]:
    """How many jobs are in each state."""
    query = select(JobRow.state, func.count()).group_by(JobRow.state)

    def work(session: Session) -> dict[str, int]:
        return {row[0]: row[1] for row in session.execute(query)}

    return store.read(work)


def _fail(store: Store, design_id: str, fence: int, reason: str) -> bool:
    return store.write(lambda session: fail_held(session, design_id, fence, reason))
