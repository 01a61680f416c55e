"""Who works: processes that claim jobs announce themselves, are seen, and say goodbye."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import Final, Literal

from sqlalchemy import ColumnElement, bindparam, delete, or_, select, update
from sqlalchemy.orm import Session

from service.store.clock import now
from service.store.order import RUNNING
from service.store.session import Store
from service.store.tables import JobRow, WorkerRow

#: What carries the rings to a worker: the supervisor, Celery, or a command that drains.
Carrier = Literal["embedded", "celery", "drain"]

#: A worker that was not seen for so long is taken for gone, unless a lease of its runs on.
ALIVE_S: Final = 60.0
#: What is known of a worker is kept for so long after it was last seen.
_KEPT: Final = timedelta(days=1)
_LONGEST_NAME: Final = 120

_CLAIMED: Final = (
    update(WorkerRow)
    .where(WorkerRow.name == bindparam("worker"))
    .values(last_claim_at=bindparam("moment"))
)


@dataclass(frozen=True, slots=True)
class Worker:
    """One process that claims jobs."""

    name: str
    host: str
    pid: int
    carrier: str
    engine_version: str
    started_at: datetime
    seen_at: datetime
    last_claim_at: datetime | None


def announce(
    store: Store, name: str, *, host: str, pid: int, carrier: Carrier, engine_version: str
) -> None:
    """Tell that a worker is there; a worker that is known already is as if it had come anew."""

    def work(session: Session) -> None:
        moment = now(session)
        session.execute(delete(WorkerRow).where(WorkerRow.seen_at < moment - _KEPT))
        session.merge(
            WorkerRow(
                name=name,
                host=host[:_LONGEST_NAME],
                pid=pid,
                carrier=carrier,
                engine_version=engine_version,
                started_at=moment,
                seen_at=moment,
                last_claim_at=None,
                ended_at=None,
            )
        )

    store.write(work)


def touch(store: Store, name: str) -> None:
    """Tell that a worker is still there; one that was taken for gone is there again."""
    store.write(
        lambda session: _set(session, name, seen_at=now(session), ended_at=None),
        outlives_machine=False,
    )


def goodbye(store: Store, name: str) -> None:
    """Tell that a worker has ended, by itself or as its supervisor saw it."""
    store.write(lambda session: _set(session, name, ended_at=now(session)))


def claimed(session: Session, name: str, moment: datetime) -> None:
    """Note within a claiming transaction that a worker has taken a job."""
    session.connection().execute(_CLAIMED, {"worker": name, "moment": moment})


def alive(store: Store, within_s: float = ALIVE_S) -> list[Worker]:
    """Workers that are there, newest first: seen so lately, or holding a lease that runs."""

    def work(session: Session) -> list[Worker]:
        moment = now(session)
        rows = session.scalars(
            select(WorkerRow)
            .where(WorkerRow.ended_at.is_(None), _lives(moment, within_s))
            .order_by(WorkerRow.started_at.desc(), WorkerRow.name)
        )
        return [
            Worker(
                name=row.name,
                host=row.host,
                pid=row.pid,
                carrier=row.carrier,
                engine_version=row.engine_version,
                started_at=row.started_at,
                seen_at=row.seen_at,
                last_claim_at=row.last_claim_at,
            )
            for row in rows
        ]

    return store.read(work)


def engine_version(session: Session) -> str | None:
    """Engine version of the newest worker that is there; None where there is none."""
    return session.scalar(
        select(WorkerRow.engine_version)
        .where(WorkerRow.ended_at.is_(None), _lives(now(session), ALIVE_S))
        .order_by(WorkerRow.started_at.desc(), WorkerRow.name)
        .limit(1)
    )


def _lives(moment: datetime, within_s: float) -> ColumnElement[bool]:
    holds = (
        select(JobRow.design_id)
        .where(RUNNING, JobRow.lease_until > moment, JobRow.worker == WorkerRow.name)
        .exists()
    )
    return or_(WorkerRow.seen_at > moment - timedelta(seconds=within_s), holds)


def _set(session: Session, name: str, **values: datetime | None) -> None:
    session.execute(
        update(WorkerRow)
        .where(WorkerRow.name == name)
        .values(**values)
        .execution_options(synchronize_session=False)
    )
