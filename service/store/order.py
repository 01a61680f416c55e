"""The order of work: three priorities, fair shares between owners and between batches, ageing.

Turns are shared between the owners who have something waiting: at each priority the owner who
has been served least comes next. Among the jobs of one owner a batch is a flow that starts where
the queue has come to and steps by one a job; his single designs together are one more flow. So
batches take turns, and a single design goes about next. One claim in eight takes the job that
has waited longest of all, once that is long, so that nothing waits for ever.
"""

from __future__ import annotations

import random
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import Any, Final

from sqlalchemy import (
    ColumnElement,
    Executable,
    bindparam,
    case,
    func,
    select,
    text,
    tuple_,
    update,
)
from sqlalchemy.dialects import postgresql, sqlite
from sqlalchemy.engine import CursorResult
from sqlalchemy.exc import OperationalError
from sqlalchemy.orm import InstrumentedAttribute, Session

from service.contracts.progress import Priority
from service.store.tables import CLAIMABLE_SQL, RUNNING_SQL, DesignRow, JobRow, ShareRow

PRIORITIES: Final[Mapping[Priority, int]] = {"urgent": 0, "ordinary": 100, "when-idle": 200}
ORDINARY: Final = PRIORITIES["ordinary"]
_WORDS: Final[Mapping[int, Priority]] = {number: word for word, number in PRIORITIES.items()}

#: A job that has waited so long may be taken out of turn.
AGED_S: Final = 60.0
#: One claim in so many looks for such a job first.
ONE_IN: Final = 8

#: A share that another process keeps locked is waited for so long: it may be frozen.
_SHARE_PATIENCE_MS: Final = 250
_LOCK_NOT_AVAILABLE: Final = "55P03"

#: That a job may be claimed, and that one is claimed; no parameter in either, so that planners
#: see the partial indexes.
CLAIMABLE: Final = text(CLAIMABLE_SQL)
RUNNING: Final = text(RUNNING_SQL)

_JOB: Final = (
    select(JobRow, DesignRow)
    .join(DesignRow, DesignRow.id == JobRow.design_id)
    .where(CLAIMABLE)
    .limit(1)
    .with_for_update(of=JobRow, skip_locked=True)
)
_FIRST_OF_SHARE: Final = _JOB.where(
    JobRow.owner == bindparam("owner"), JobRow.priority == bindparam("priority")
).order_by(JobRow.position, JobRow.design_id)
_LONGEST_WAITING: Final = _JOB.where(JobRow.queued_at < bindparam("before")).order_by(
    JobRow.queued_at, JobRow.position, JobRow.design_id
)
_SOMETHING_WAITS: Final = (
    select(JobRow.design_id)
    .where(CLAIMABLE, JobRow.owner == ShareRow.owner, JobRow.priority == ShareRow.priority)
    .exists()
)
_ORDER: Final = (ShareRow.priority, ShareRow.served, ShareRow.owner)
_WAITING_SHARES: Final = select(*_ORDER).where(_SOMETHING_WAITS).order_by(*_ORDER).limit(1)


@dataclass(frozen=True, slots=True)
class Next:
    """The job to be claimed, locked, with its design."""

    job: JobRow
    design: DesignRow
    in_turn: bool


@dataclass(frozen=True, slots=True)
class Place:
    """Where the queue of one owner at one priority has come to."""

    owner: str
    priority: int
    at: int
    singles_at: int
    #: Turns he is taken to have had: none can be saved up while nothing waits.
    served: int

    def single(self) -> int:
        """Position for a single design."""
        return max(self.at, self.singles_at) + 1

    def of_batch(self, index: int) -> int:
        """Position for a job of a batch by its index, from 0."""
        return self.at + 1 + index


def word_of(priority: int) -> Priority:
    """A priority in words; what an earlier release stored between the steps is ordinary."""
    return _WORDS.get(priority, "ordinary")


def next_job(session: Session, moment: datetime) -> Next | None:
    """The next job in order, locked for the one who asks, or None if none is free.

    Parameters
    ----------
    session : Session
    moment : datetime
        The present, from which `AGED_S` is counted back.
    """
    if _is_for_the_aged():
        aged = _longest_waiting(session, moment - timedelta(seconds=AGED_S))
        if aged is not None:
            return aged
    for priority, owner in _waiting_shares(session):
        first = session.execute(
            _FIRST_OF_SHARE, {"owner": owner, "priority": priority}
        ).one_or_none()
        # None where other claimers hold all that this share has waiting.
        if first is not None:
            return Next(first[0], first[1], in_turn=True)
    # Nothing should be left; whatever is must not wait for ever.
    return _longest_waiting(session, moment)


def charge(session: Session, taken: Next) -> None:
    """Charge the share of a claimed job for the turn: the last thing to do before the commit."""
    job = taken.job
    turn: dict[str, Any] = {"served": ShareRow.served + 1}
    if taken.in_turn:
        turn["at"] = _at_least(ShareRow.at, job.position)
    _change_share(session, job.owner, job.priority, turn)


def place_for(session: Session, owner: str, priority: int) -> Place:
    """Where something new of an owner comes in the queue; makes his share if he has none."""
    query = select(ShareRow.at, ShareRow.singles_at, ShareRow.served, _SOMETHING_WAITS).where(
        ShareRow.owner == owner, ShareRow.priority == priority
    )
    found = session.execute(query).one_or_none()
    if found is None:
        place = Place(owner, priority, 0, 0, _least_served(session, priority))
        session.execute(_new_share(session, place))
        return place
    at, singles_at, served, waits = found
    if not waits:
        served = max(served, _least_served(session, priority))
    return Place(owner, priority, at, singles_at, served)


def enter(session: Session, place: Place, *, single_at: int | None = None) -> None:
    """Note in a share that something new of it waits: the last thing to do before the commit."""
    values: dict[str, Any] = {"served": _at_least(ShareRow.served, place.served)}
    if single_at is not None:
        values["singles_at"] = _at_least(ShareRow.singles_at, single_at)
    _change_share(session, place.owner, place.priority, values)


def _is_for_the_aged() -> bool:
    return random.randrange(ONE_IN) == 0  # noqa: S311  # no secret


def _longest_waiting(session: Session, before: datetime) -> Next | None:
    found = session.execute(_LONGEST_WAITING, {"before": before}).one_or_none()
    return None if found is None else Next(found[0], found[1], in_turn=False)


def _waiting_shares(session: Session) -> Iterator[tuple[int, str]]:
    """Priority and owner of the shares that have something waiting, in the order of turns."""
    query = _WAITING_SHARES
    while (share := session.execute(query).one_or_none()) is not None:
        priority, served, owner = share
        yield priority, owner
        query = _WAITING_SHARES.where(tuple_(*_ORDER) > (priority, served, owner))


def _least_served(session: Session, priority: int) -> int:
    """How far turns have come at a priority: the least of those waiting, or else the most."""
    least, most = session.execute(
        select(
            func.min(case((_SOMETHING_WAITS, ShareRow.served))), func.max(ShareRow.served)
        ).where(ShareRow.priority == priority)
    ).one()
    return int((most or 0) if least is None else least)


def _new_share(session: Session, place: Place) -> Executable:
    insert = postgresql.insert if session.get_bind().dialect.name == "postgresql" else sqlite.insert
    return (
        insert(ShareRow)
        .values(
            owner=place.owner,
            priority=place.priority,
            served=place.served,
            at=place.at,
            singles_at=place.singles_at,
        )
        .on_conflict_do_nothing()
    )


def _at_least(column: InstrumentedAttribute[int], value: int) -> ColumnElement[int]:
    return case((column < value, value), else_=column)


def _change_share(session: Session, owner: str, priority: int, values: Mapping[str, Any]) -> None:
    """Change a share without waiting long for its lock, which a frozen process may hold.

    A change given up for that does little harm: somebody gets a turn more, or two jobs have
    one position.
    """
    mine = (ShareRow.owner == owner, ShareRow.priority == priority)
    change = update(ShareRow).where(*mine).values(**values)
    change = change.execution_options(synchronize_session=False)
    if session.get_bind().dialect.name != "postgresql":
        session.execute(change)
        return
    free = select(ShareRow.owner).where(*mine).with_for_update(skip_locked=True).cte("free")
    changed = session.execute(change.where(ShareRow.owner == free.c.owner))
    if isinstance(changed, CursorResult) and changed.rowcount == 1:
        return
    try:
        with session.begin_nested():
            session.execute(text(f"SET LOCAL lock_timeout = {_SHARE_PATIENCE_MS}"))
            session.execute(change)
            session.execute(text("SET LOCAL lock_timeout = DEFAULT"))
    except OperationalError as error:
        if getattr(error.orig, "sqlstate", None) != _LOCK_NOT_AVAILABLE:
            raise
