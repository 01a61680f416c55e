"""How a job changes hands or ends: under its fence, and with those that wait for it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Final

from sqlalchemy import ColumnElement, Update, bindparam, select, update
from sqlalchemy.orm import Session

from service.contracts.request import DesignRequest
from service.store import answers
from service.store.clock import now
from service.store.tables import JobRow

_LONGEST_FAILURE: Final = 500
#: The step of a job that no worker survived.
ASIDE_STEP: Final = "set aside"

#: A change of a job that its worker still has.
HELD: Final = update(JobRow).where(
    JobRow.design_id == bindparam("key"),
    JobRow.fence == bindparam("under"),
    JobRow.state == "running",
)
_END: Final = HELD.values(
    state=bindparam("end"),
    step=bindparam("end_step"),
    finished_at=bindparam("moment"),
    failure=bindparam("reason"),
    lease_until=None,
)


@dataclass(frozen=True, slots=True)
class ClaimedJob:
    """A job a worker has taken, and the fence it must write under."""

    design_id: str
    request: DesignRequest
    fence: int
    attempt: int
    worker: str
    batch_id: str | None = None


def held(design_id: str, fence: int) -> tuple[ColumnElement[bool], ...]:
    """That a job is still with the claim that had this fence."""
    return (JobRow.design_id == design_id, JobRow.fence == fence, JobRow.state == "running")


def change_held(
    session: Session, change: Update, design_id: str, fence: int, values: Mapping[str, object]
) -> bool:
    """Change a job under its fence, by a change of `HELD`; False if it is no longer the worker's.

    Parameters
    ----------
    session : Session
    change : Update
        Made once and not at every use, for making a statement takes longer than running it.
    design_id : str
    fence : int
    values : mapping
        What the statement leaves open.
    """
    given = {"key": design_id, "under": fence, **values}
    return session.connection().execute(change, given).rowcount == 1


def end_held(
    session: Session, design_id: str, fence: int, state: str, moment: datetime, reason: str | None
) -> bool:
    """End a claimed job; False if it was taken away, or its end stored already."""
    values = {"end": state, "end_step": state, "moment": moment, "reason": reason}
    return change_held(session, _END, design_id, fence, values)


def ended_by(session: Session, design_id: str, fence: int, state: str) -> bool:
    """Whether a job was ended by this very claim: a commit whose answer was lost."""
    query = select(JobRow.design_id).where(
        JobRow.design_id == design_id, JobRow.fence == fence, JobRow.state == state
    )
    return session.scalar(query) is not None


def fail_held(session: Session, design_id: str, fence: int, reason: str) -> bool:
    """End a claimed job without a result; False if it was taken away."""
    moment, reason = now(session), reason[:_LONGEST_FAILURE]
    if not end_held(session, design_id, fence, "failed", moment, reason):
        return ended_by(session, design_id, fence, "failed")
    answers.share_failure(session, design_id, reason, moment)
    return True


def cancel_held(session: Session, design_id: str, fence: int) -> bool:
    """End a claimed job whose cancelling was seen; False if it was taken away."""
    if not end_held(session, design_id, fence, "cancelled", now(session), None):
        return ended_by(session, design_id, fence, "cancelled")
    answers.hand_on(session, design_id)
    return True


def cancel_locked(session: Session, job: JobRow, moment: datetime) -> None:
    """End a job as cancelled, and let the next of those that wait for it be planned."""
    job.fence += 1
    job.lease_until = None
    job.state, job.finished_at, job.step = "cancelled", moment, "cancelled"
    session.flush()
    answers.hand_on(session, job.design_id)


def give_back(session: Session, job: JobRow, moment: datetime, step: str) -> None:
    """Let a job wait again, or end it if it was cancelled meanwhile."""
    if job.cancel_wanted:
        cancel_locked(session, job, moment)
        return
    job.fence += 1
    job.lease_until = None
    job.state, job.progress, job.step = "queued", 0.0, step


def set_aside(session: Session, job: JobRow, moment: datetime, reason: str) -> None:
    """End a job that no worker survives, and those that would kill theirs in the same way."""
    job.fence += 1
    job.lease_until = None
    job.state, job.finished_at, job.step = "failed", moment, ASIDE_STEP
    job.failure = reason[:_LONGEST_FAILURE]
    session.flush()
    answers.share_failure(session, job.design_id, job.failure, moment)
