"""What has changed since a moment: the feed that live progress is told from.

Every change of a job carries the moment it was made, by the database's clock. Transactions take
effect in another order than that of their moments, so a reader looks back a little further than
to the last it saw, and tells whole states: told twice they do no harm.
"""

from __future__ import annotations

from datetime import datetime
from functools import lru_cache
from typing import Any, Final

from sqlalchemy import Select, func, select, tuple_
from sqlalchemy.orm import Session

from service.contracts.progress import Priority, Progress, State
from service.contracts.quantities import Contract
from service.store.order import word_of
from service.store.session import Store
from service.store.tables import DesignRow, JobRow

#: How far back of the last change seen a reader looks again: longer than transactions take.
OVERLAP_US: Final = 5_000_000


class Change(Contract):
    """Where a design stood after a change; ``changed_us`` is µs since 1970."""

    changed_us: int
    id: str
    owner: str
    name: str
    state: State
    priority: Priority
    progress: Progress
    attempts: int
    failure: str | None
    started_at: datetime | None
    finished_at: datetime | None
    batch_id: str | None
    batch_line: int | None
    answered_by: str | None


def since(
    store: Store,
    *,
    owner: str | None,
    batch_id: str | None = None,
    design_id: str | None = None,
    after_us: int,
    overlap_us: int = OVERLAP_US,
    limit: int,
    after_id: str | None = None,
) -> list[Change]:
    """Changes after a moment in their order, each design as it stands now.

    Parameters
    ----------
    store : Store
    owner : str or None
        Whose designs; None for everybody's.
    batch_id, design_id : str, optional
        Only of that batch, or that design.
    after_us, overlap_us : int
        Moment in µs since 1970, and how far before it to look again.
    limit : int
        How many at the most. If so many come, ask again with the last one's moment and id.
    after_id : str, optional
        Go on after this design of the moment `after_us`; nothing is looked at again then.
    """
    query = _of(owner, batch_id, design_id).order_by(JobRow.changed_at, JobRow.design_id)
    if after_id is None:
        query = query.where(JobRow.changed_at > after_us - overlap_us)
    else:
        query = query.where(tuple_(JobRow.changed_at, JobRow.design_id) > (after_us, after_id))
    return _read(store, query.limit(limit))


def latest(
    store: Store,
    *,
    owner: str,
    batch_id: str | None = None,
    design_id: str | None = None,
    limit: int,
) -> list[Change]:
    """The designs that changed last, in the order of their changes.

    Parameters
    ----------
    store : Store
    owner : str
        Whose designs.
    batch_id, design_id : str, optional
        Only of that batch, or that design.
    limit : int
        How many at the most.
    """
    query = _of(owner, batch_id, design_id).order_by(
        JobRow.changed_at.desc(), JobRow.design_id.desc()
    )
    return _read(store, query.limit(limit))[::-1]


def newest(store: Store, owner: str | None = None) -> int:
    """Moment of the last change in µs since 1970; 0 where nothing is stored."""
    query = select(func.max(JobRow.changed_at))
    if owner is not None:
        query = query.where(JobRow.owner == owner)

    def work(session: Session) -> int:
        return session.scalar(query) or 0

    return store.read(work)


#: What a change is told from. Not the whole design: its request is large, and is not told.
_COLUMNS: Final = (
    JobRow.changed_at,
    JobRow.design_id,
    JobRow.owner,
    DesignRow.name,
    JobRow.state,
    JobRow.priority,
    JobRow.progress,
    JobRow.step,
    JobRow.attempts,
    JobRow.failure,
    JobRow.started_at,
    JobRow.finished_at,
    JobRow.batch_id,
    DesignRow.batch_line,
    DesignRow.answered_by,
)


def _of(owner: str | None, batch_id: str | None, design_id: str | None) -> Select[*tuple[Any, ...]]:
    query = select(*_COLUMNS).join(DesignRow, DesignRow.id == JobRow.design_id)
    if owner is not None:
        query = query.where(JobRow.owner == owner)
    if batch_id is not None:
        query = query.where(JobRow.batch_id == batch_id)
    if design_id is not None:
        query = query.where(JobRow.design_id == design_id)
    return query


def _read(store: Store, query: Select[*tuple[Any, ...]]) -> list[Change]:
    return [_change(*row) for row in store.read(lambda session: session.execute(query).all())]


# A reader looks at the last few seconds again and again, and what has not changed is the same.
@lru_cache(maxsize=10_000)
def _change(
    changed_us: int,
    design_id: str,
    owner: str,
    name: str,
    state: State,
    priority: int,
    fraction: float,
    step: str,
    attempts: int,
    failure: str | None,
    started_at: datetime | None,
    finished_at: datetime | None,
    batch_id: str | None,
    batch_line: int | None,
    answered_by: str | None,
) -> Change:
    return Change(
        changed_us=changed_us,
        id=design_id,
        owner=owner,
        name=name,
        state=state,
        priority=word_of(priority),
        progress=Progress(fraction=fraction, step=step),
        attempts=attempts,
        failure=failure,
        started_at=started_at,
        finished_at=finished_at,
        batch_id=batch_id,
        batch_line=batch_line,
        answered_by=answered_by,
    )
