"""Identical requests are planned once: stored results answer them, and so will those to come.

A design may be answered by the stored result of another with the same content hash and the same
engine version. Identical designs of one batch wait for the first of them (``waits_for``) and
share its fate, except that a cancelled one hands its place to the next.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from datetime import datetime
from itertools import islice
from typing import Final

from sqlalchemy import bindparam, func, select, update
from sqlalchemy.orm import Session, aliased

from service.store.tables import DesignRow, JobRow, ResultRow

#: Hashes asked for in one statement.
_CHUNK: Final = 500

#: Steps as a planner reads them.
ANSWERED_STEP: Final = "done: answered by the stored result of the same request"

#: The design that has the result of a design: another one's, or its own.
SOURCE: Final = func.coalesce(DesignRow.answered_by, DesignRow.id)

_NEWEST_RESULT: Final = (
    select(ResultRow.design_id)
    .where(
        ResultRow.content_hash == bindparam("hash"),
        ResultRow.engine_version == bindparam("version"),
    )
    .order_by(ResultRow.created_at.desc())
    .limit(1)
)
_SHARE: Final = (
    update(JobRow)
    .where(JobRow.waits_for == bindparam("leader"), JobRow.state == "queued")
    .values(state="done", progress=1.0, step=ANSWERED_STEP, finished_at=bindparam("moment"))
)

_leader: Final = aliased(JobRow)
#: Jobs that wait for one that has ended.
STRANDED: Final = (
    select(JobRow.design_id)
    .join(_leader, _leader.design_id == JobRow.waits_for)
    .where(
        JobRow.waits_for.is_not(None),
        JobRow.state == "queued",
        _leader.state.in_(("done", "failed", "cancelled")),
    )
)


def stored_answer(session: Session, content_hash: str, engine_version: str) -> str | None:
    """The design whose stored result answers a request, the newest if there are several."""
    asked = {"hash": content_hash, "version": engine_version}
    return session.connection().scalar(_NEWEST_RESULT, asked)


def stored_answers(
    session: Session, content_hashes: Collection[str], engine_version: str
) -> Mapping[str, str]:
    """Content hashes that a stored result answers, each with the design that has it."""
    found: dict[str, str] = {}
    hashes = iter(content_hashes)
    while chunk := list(islice(hashes, _CHUNK)):
        query = (
            select(ResultRow.content_hash, ResultRow.design_id)
            .where(ResultRow.content_hash.in_(chunk), ResultRow.engine_version == engine_version)
            .order_by(ResultRow.created_at)
        )
        found.update((row[0], row[1]) for row in session.execute(query))
    return found


def answer(session: Session, design_id: str, answered_by: str, moment: datetime) -> None:
    """End a waiting job, and those that wait for it, by the stored result of another design."""
    session.execute(
        update(JobRow)
        .where(JobRow.design_id == design_id)
        .values(
            state="done",
            finished_at=moment,
            progress=1.0,
            step=ANSWERED_STEP,
            fence=JobRow.fence + 1,
        )
        .execution_options(synchronize_session=False)
    )
    session.execute(
        update(DesignRow)
        .where(DesignRow.id == design_id)
        .values(answered_by=answered_by)
        .execution_options(synchronize_session=False)
    )
    share_result(session, design_id, moment, answered_by)


def share_result(
    session: Session, design_id: str, moment: datetime, answered_by: str | None = None
) -> None:
    """Answer the designs that waited for one that is done, by its result or by its answer's."""
    ended = session.connection().execute(_SHARE, {"leader": design_id, "moment": moment})
    if ended.rowcount:
        waited = select(JobRow.design_id).where(
            JobRow.waits_for == design_id, JobRow.state == "done"
        )
        session.execute(
            update(DesignRow)
            .where(DesignRow.id.in_(waited))
            .values(answered_by=answered_by or design_id)
            .execution_options(synchronize_session=False)
        )


def share_failure(session: Session, design_id: str, reason: str, moment: datetime) -> None:
    """Fail the designs that waited for one that failed: the same request would fail again."""
    session.execute(
        update(JobRow)
        .where(JobRow.waits_for == design_id, JobRow.state == "queued")
        .values(state="failed", failure=reason, step="failed", finished_at=moment)
        .execution_options(synchronize_session=False)
    )


def hand_on(session: Session, design_id: str) -> None:
    """Let the first that waited for a cancelled design be planned, and the others wait for it."""
    waiting = (JobRow.waits_for == design_id, JobRow.state == "queued")
    first = session.scalar(
        select(JobRow.design_id)
        .where(*waiting)
        .order_by(JobRow.position, JobRow.design_id)
        .limit(1)
        .with_for_update()
    )
    if first is None:
        return
    change = update(JobRow).execution_options(synchronize_session=False)
    session.execute(change.where(JobRow.design_id == first).values(waits_for=None, step=""))
    session.execute(change.where(*waiting).values(waits_for=first))


def release_stranded(session: Session) -> None:
    """Let wait by themselves the jobs that wait for one that has ended; none should be."""
    session.execute(
        update(JobRow)
        .where(JobRow.design_id.in_(STRANDED))
        .values(waits_for=None)
        .execution_options(synchronize_session=False)
    )
