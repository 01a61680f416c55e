"""Claiming: a worker takes the next job in order, and what needs no planning is answered."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import timedelta
from enum import Enum
from typing import Final

from sqlalchemy import bindparam, select, update
from sqlalchemy.orm import Session

from service.errors import SchemaMismatch
from service.store import answers, order, workers
from service.store.clock import now
from service.store.endings import ClaimedJob, fail_held
from service.store.reading import read_request
from service.store.session import Store
from service.store.tables import JobRow

#: Jobs answered by stored results in one claiming transaction, so that it stays short.
_MOST_ANSWERED: Final = 100

# Made once, for making a statement takes longer than running it.
_ANY_QUEUED: Final = select(JobRow.design_id).where(order.CLAIMABLE).limit(1)
_CLAIM: Final = (
    update(JobRow)
    .where(JobRow.design_id == bindparam("key"))
    .values(
        state="running",
        worker=bindparam("by"),
        fence=bindparam("next_fence"),
        attempts=bindparam("attempt"),
        lease_until=bindparam("until"),
        started_at=bindparam("start"),
        progress=0.0,
        step="taken up by a worker",
    )
)


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
    return store.read(lambda session: session.scalar(_ANY_QUEUED) is not None)


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
            if engine_version is not None and not found.recompute:
                stored = answers.stored_answer(session, found.content_hash, engine_version)
                if stored is not None:
                    answers.answer(session, found.design_id, stored, moment)
                    continue
            taken = _Taken(
                found.design_id, found.request, found.fence + 1, found.attempts + 1, found.batch_id
            )
            claimed = {
                "key": taken.design_id,
                "by": worker,
                "next_fence": taken.fence,
                "attempt": taken.attempt,
                "until": moment + timedelta(seconds=lease_s),
                "start": found.started_at or moment,
            }
            session.connection().execute(_CLAIM, claimed)
            workers.claimed(session, worker, moment)
            order.charge(session, found)
            return taken
        return _NothingTaken.MORE_TO_LOOK_AT

    while (taken := store.write(work, outlives_machine=False)) is not _NothingTaken.NONE_WAITS:
        if isinstance(taken, _NothingTaken):
            continue
        try:
            request = read_request(taken.design_id, taken.request)
        except SchemaMismatch as error:
            # Every worker would find it unreadable, and it would hold up the queue for ever.
            _fail(store, taken, error.detail)
            continue
        return ClaimedJob(
            taken.design_id, request, taken.fence, taken.attempt, worker, taken.batch_id
        )
    return None


def _fail(store: Store, taken: _Taken, reason: str) -> None:
    store.write(lambda session: fail_held(session, taken.design_id, taken.fence, reason))
