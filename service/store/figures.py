"""Figures of the queue for those who watch over it: depth, waits, runs, attempts, losses."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Final

from sqlalchemy import ColumnElement, TextClause, func, select, tuple_
from sqlalchemy.orm import InstrumentedAttribute, Session

from service.contracts.progress import Priority, State
from service.store.clock import now
from service.store.endings import ASIDE_STEP
from service.store.losses import EXPIRIES
from service.store.order import CLAIMABLE, RUNNING, word_of
from service.store.session import Store
from service.store.tables import JobRow, ResultRow, TallyRow

#: What ended so lately may still be joined by what ended before it and commits later.
_SETTLED_US: Final = 5_000_000


_OF_ENDED: Final[tuple[InstrumentedAttribute[Any], ...]] = (
    JobRow.changed_at,
    JobRow.design_id,
    JobRow.state,
    JobRow.priority,
    JobRow.attempts,
    JobRow.step,
    JobRow.queued_at,
    JobRow.started_at,
    JobRow.finished_at,
    ResultRow.map_error_percent,
)


@dataclass(frozen=True, slots=True)
class Depth:
    """How much waits and runs.

    ``claimable`` leaves out what waits for an identical design; ``oldest_wait_s`` is that of
    the claimable job that has waited longest, 0 where none waits.
    """

    by_state: Mapping[tuple[State, Priority], int]
    claimable: int
    oldest_wait_s: float


@dataclass(frozen=True, slots=True)
class Ended:
    """A job that ended; ``wait_s`` and ``run_s`` are None where no worker took it up."""

    changed_us: int
    design_id: str
    state: State
    priority: Priority
    attempts: int
    answered: bool
    set_aside: bool
    wait_s: float | None
    run_s: float | None
    map_error_percent: float | None


def depth(store: Store) -> Depth:
    """How many jobs wait and run, by priority."""

    def work(session: Session) -> Depth:
        by_state: Counter[tuple[State, Priority]] = Counter()
        _add(session, by_state, "queued", CLAIMABLE)
        claimable = by_state.total()
        _add(session, by_state, "queued", JobRow.waits_for.is_not(None), JobRow.state == "queued")
        _add(session, by_state, "running", RUNNING)
        oldest = session.scalar(select(func.min(JobRow.queued_at)).where(CLAIMABLE))
        wait_s = 0.0 if oldest is None else (now(session) - oldest).total_seconds()
        return Depth(by_state, claimable, max(0.0, wait_s))

    return store.read(work)


def ended_since(
    store: Store, *, after_us: int, after_id: str = "", limit: int = 1000
) -> list[Ended]:
    """Jobs that ended after a moment, each told once to whoever goes on from the last told.

    What ended within the last few seconds is left for the next time, so that what takes effect
    late is not missed.
    """

    def work(session: Session) -> list[Ended]:
        settled = int(now(session).timestamp() * 1e6) - _SETTLED_US
        rows = session.execute(
            select(*_OF_ENDED)
            .outerjoin(ResultRow, ResultRow.design_id == JobRow.design_id)
            .where(
                JobRow.state.in_(("done", "failed", "cancelled")),
                tuple_(JobRow.changed_at, JobRow.design_id) > (after_us, after_id),
                JobRow.changed_at <= settled,
            )
            .order_by(JobRow.changed_at, JobRow.design_id)
            .limit(limit)
        )
        return [_ended(*row) for row in rows]

    return store.read(work)


def lease_expiries(store: Store) -> int:
    """How many leases ran out before their worker was heard of, since the database was made."""
    query = select(TallyRow.count).where(TallyRow.name == EXPIRIES)
    return store.read(lambda session: session.scalar(query) or 0)


def _add(
    session: Session,
    counts: Counter[tuple[State, Priority]],
    state: State,
    *which: ColumnElement[bool] | TextClause,
) -> None:
    query = select(JobRow.priority, func.count()).where(*which).group_by(JobRow.priority)
    for priority, number in session.execute(query):
        counts[state, word_of(priority)] += number


def _ended(
    changed_us: int,
    design_id: str,
    state: State,
    priority: int,
    attempts: int,
    step: str,
    queued_at: datetime,
    started_at: datetime | None,
    finished_at: datetime | None,
    map_error_percent: float | None,
) -> Ended:
    return Ended(
        changed_us=changed_us,
        design_id=design_id,
        state=state,
        priority=word_of(priority),
        attempts=attempts,
        answered=state == "done" and map_error_percent is None,
        set_aside=state == "failed" and step == ASIDE_STEP,
        wait_s=_seconds(queued_at, started_at),
        run_s=_seconds(started_at, finished_at),
        map_error_percent=map_error_percent,
    )


def _seconds(start: datetime | None, end: datetime | None) -> float | None:
    return None if start is None or end is None else max(0.0, (end - start).total_seconds())
