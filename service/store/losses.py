"""What lost workers left is put right: their jobs wait again, or are set aside."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Final

from sqlalchemy import ColumnElement, Select, select, update
from sqlalchemy.dialects import postgresql, sqlite
from sqlalchemy.orm import Session

from service.store import answers
from service.store.clock import now
from service.store.endings import give_back, set_aside
from service.store.order import RUNNING
from service.store.session import Store
from service.store.tables import JobRow, TallyRow

#: Name of the tally of leases that ran out before their worker was heard of.
EXPIRIES: Final = "lease-expiries"
#: Jobs taken away in one transaction, so that it stays short.
_AT_ONCE: Final = 200


@dataclass(frozen=True, slots=True)
class Swept:
    """What a sweep put right: jobs given back to the queue, set aside, and cancelled."""

    returned: int
    set_aside: int
    cancelled: int


def sweep(store: Store, max_attempts: int) -> Swept:
    """Put right what lost workers left: their jobs wait again, or are set aside.

    Idempotent, so any process may do it at any time and no one need lead.
    """

    def expired(moment: datetime) -> ColumnElement[bool]:
        return JobRow.lease_until < moment

    swept = _take_away(store, expired, max_attempts, EXPIRIES)
    if store.read(_any_stranded):
        store.write(answers.release_stranded)
    return swept


def bury(store: Store, worker: str, max_attempts: int) -> Swept:
    """Take away what a worker held that is known to be dead, without awaiting its lease.

    Only for whoever has seen the process end, and names workers so that none shares a name.
    """
    return _take_away(store, lambda _: JobRow.worker == worker, max_attempts, None)


def _any_stranded(session: Session) -> bool:
    return session.scalar(answers.STRANDED.limit(1)) is not None


def _take_away(
    store: Store,
    whose: Callable[[datetime], ColumnElement[bool]],
    max_attempts: int,
    tally: str | None,
) -> Swept:
    """Take running jobs away from their workers, who can no longer write: the fence rises."""

    def query(session: Session) -> Select[JobRow]:
        return select(JobRow).where(RUNNING, whose(now(session)))

    # A reading first, so that a sweep that finds nothing does not hold up writers.
    if store.read(lambda session: session.scalar(query(session).limit(1))) is None:
        return Swept(0, 0, 0)

    def work(session: Session) -> Swept:
        done: Counter[str] = Counter()
        lost = query(session).limit(_AT_ONCE).with_for_update(skip_locked=True)
        for job in session.scalars(lost).all():
            if job.attempts >= max_attempts and not job.cancel_wanted:
                set_aside(session, job, now(session), _lost_too_often(job))
            else:
                give_back(session, job, now(session), "waiting again: its worker was lost")
            done[job.state] += 1
        if tally is not None and done:
            session.flush()
            _count(session, tally, done.total())
        return Swept(done["queued"], done["failed"], done["cancelled"])

    return store.write(work)


def _count(session: Session, name: str, number: int) -> None:
    insert: Any = (
        postgresql.insert if session.get_bind().dialect.name == "postgresql" else sqlite.insert
    )
    session.execute(insert(TallyRow).values(name=name, count=0).on_conflict_do_nothing())
    session.execute(
        update(TallyRow)
        .where(TallyRow.name == name)
        .values(count=TallyRow.count + number)
        .execution_options(synchronize_session=False)
    )


def _lost_too_often(job: JobRow) -> str:
    times = "once" if job.attempts == 1 else f"{job.attempts} times"
    return (
        f"The worker was lost {times} while planning this design (last: {job.worker}). It was "
        "set aside; the worker's log tells more. Try a smaller request."
    )
