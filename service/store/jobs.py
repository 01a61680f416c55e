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
from datetime import timedelta
from enum import Enum
from typing import Final

from sqlalchemy import bindparam, func, insert, select
from sqlalchemy.orm import Session

from service.contracts.candidate import PlannedDesign
from service.contracts.progress import Progress
from service.errors import DesignNotFound
from service.store import answers
from service.store.claiming import any_queued, claim
from service.store.clock import now
from service.store.endings import (
    HELD,
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
from service.store.reading import refuse_malformed
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

# Statements of every job are made once, for making one takes longer than running it.
_BEAT: Final = HELD.where(JobRow.cancel_wanted.is_(False)).values(
    lease_until=bindparam("until"),
    progress=bindparam("told_progress"),
    step=bindparam("told_step"),
)
_FINISH: Final = HELD.values(
    state="done", finished_at=bindparam("moment"), progress=1.0, step="done", lease_until=None
)
_STORE_RESULT: Final = insert(ResultRow).values(
    design_id=bindparam("key"),
    content_hash=select(DesignRow.content_hash)
    .where(DesignRow.id == bindparam("key"))
    .scalar_subquery(),
    engine_version=bindparam("version"),
    map_error_percent=bindparam("map_error"),
    result=bindparam("packed"),
    created_at=bindparam("moment"),
)
_STORE_REPORT: Final = insert(ReportRow)


class Beat(Enum):
    """What a heartbeat learns."""

    RENEWED = "renewed"
    CANCELLED = "cancelled"
    LOST = "lost"


def heartbeat(store: Store, job: ClaimedJob, progress: Progress, lease_s: float) -> Beat:
    """Renew the lease of a job, store its progress, and learn whether to go on."""
    told = {"told_progress": progress.fraction, "told_step": progress.step[:_LONGEST_STEP]}

    def work(session: Session) -> Beat:
        until = {"until": now(session) + timedelta(seconds=lease_s)}
        if change_held(session, _BEAT, job.design_id, job.fence, told | until):
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
    stored = {
        "key": job.design_id,
        "version": planned.result.engine_version,
        "map_error": planned.result.map_error_percent,
        "packed": result,
    }

    def work(session: Session) -> bool:
        moment = now(session)
        if not change_held(session, _FINISH, job.design_id, job.fence, {"moment": moment}):
            return ended_by(session, job.design_id, job.fence, "done")
        connection = session.connection()
        connection.execute(_STORE_RESULT, stored | {"moment": moment})
        if reports:
            connection.execute(_STORE_REPORT, reports)
        answers.share_result(session, job.design_id, moment)
        return True

    return store.write(work)


def fail(store: Store, job: ClaimedJob, reason: str) -> bool:
    """End a job that cannot succeed, with its reason in words; False if it was taken away."""
    return store.write(lambda session: fail_held(session, job.design_id, job.fence, reason))


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
