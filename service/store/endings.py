"""How a job changes hands or ends: under its fence, and with those that wait for it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Final

from sqlalchemy import ColumnElement, select, update
from sqlalchemy.engine import CursorResult
from sqlalchemy.orm import Session

from service.contracts.request import DesignRequest
from service.store import answers
from service.store.clock import now
from service.store.tables import JobRow

_LONGEST_FAILURE: Final = 500


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
    session: Session,
    design_id: str,
    fence: int,
    values: Mapping[str, Any],
    *also: ColumnElement[bool],
) -> bool:
    """Change a job under its fence; False if it is no longer the worker's."""
    changed = session.execute(
        update(JobRow)
        .where(*held(design_id, fence), *also)
        .values(**values)
        .execution_options(synchronize_session=False)
    )
    return isinstance(changed, CursorResult) and changed.rowcount == 1


def ended_by(session: Session, design_id: str, fence: int, state: str) -> bool:
    """Whether a job was ended by this very claim: a commit whose answer was lost."""
    query = select(JobRow.design_id).where(
        JobRow.design_id == design_id, JobRow.fence == fence, JobRow.state == state
    )
    return session.scalar(query) is not None


def fail_held(session: Session, design_id: str, fence: int, reason: str) -> bool:
    """End a claimed job without a result; False if it was taken away."""
    moment, reason = now(session), reason[:_LONGEST_FAILURE]
    values = {"state": "failed", "failure": reason, "finished_at": moment, "step": "failed"}
    if not change_held(session, design_id, fence, values | {"lease_until": None}):
        return ended_by(session, design_id, fence, "failed")
    answers.share_failure(session, design_id, reason, moment)
    return True


def cancel_held(session: Session, design_id: str, fence: int) -> bool:
    """End a claimed job whose cancelling was seen; False if it was taken away."""
    values = {"state": "cancelled", "finished_at": now(session), "step": "cancelled"}
    if not change_held(session, design_id, fence, values | {"lease_until": None}):
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
    job.state, job.finished_at, job.step = "failed", moment, "set aside"
    job.failure = reason[:_LONGEST_FAILURE]
    session.flush()
    answers.share_failure(session, job.design_id, job.failure, moment)
