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
from functools import cache
from typing import Final

from sqlalchemy import (
    BigInteger,
    ColumnElement,
    Connection,
    Executable,
    Integer,
    String,
    Update,
    bindparam,
    case,
    func,
    select,
    text,
    tuple_,
    update,
)
from sqlalchemy.dialects import postgresql, sqlite
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
    select(
        JobRow.design_id,
        JobRow.owner,
        JobRow.priority,
        JobRow.position,
        JobRow.batch_id,
        JobRow.fence,
        JobRow.attempts,
        JobRow.started_at,
        DesignRow.request,
        DesignRow.content_hash,
        DesignRow.recompute,
    )
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
# Looked up share by share: the limit keeps PostgreSQL from joining with all that waits, and the
# order from taking the other partial index where it has no statistics yet.
_SOMETHING_WAITS: Final = (
    select(JobRow.design_id)
    .where(CLAIMABLE, JobRow.owner == ShareRow.owner, JobRow.priority == ShareRow.priority)
    .order_by(JobRow.position, JobRow.design_id)
    .limit(1)
    .scalar_subquery()
    .is_not(None)
)
_ORDER: Final = (ShareRow.priority, ShareRow.served, ShareRow.owner)
_FIRST_SHARE: Final = select(*_ORDER).where(_SOMETHING_WAITS).order_by(*_ORDER).limit(1)
_NEXT_SHARE: Final = _FIRST_SHARE.where(
    tuple_(*_ORDER)
    > tuple_(
        bindparam("priority", type_=Integer),
        bindparam("served", type_=BigInteger),
        bindparam("owner", type_=String),
    )
)

_MINE: Final = (ShareRow.owner == bindparam("mine"), ShareRow.priority == bindparam("at_priority"))
_UNLOCKED: Final = (
    select(ShareRow.owner).where(*_MINE).with_for_update(skip_locked=True).cte("unlocked")
)


def _at_least(column: InstrumentedAttribute[int], name: str) -> ColumnElement[int]:
    value = bindparam(name, type_=BigInteger)
    return case((column < value, value), else_=column)


_CHARGE: Final = (
    update(ShareRow)
    .where(*_MINE)
    .values(served=ShareRow.served + 1, at=_at_least(ShareRow.at, "place"))
)
_ENTER: Final = (
    update(ShareRow)
    .where(*_MINE)
    .values(
        served=_at_least(ShareRow.served, "turns"),
        singles_at=_at_least(ShareRow.singles_at, "place"),
    )
)


@dataclass(frozen=True, slots=True)
class Next:
    """The job to be claimed, locked, with what its design asks for."""

    design_id: str
    owner: str
    priority: int
    position: int
    batch_id: str | None
    fence: int
    attempts: int
    started_at: datetime | None
    request: str
    content_hash: str
    recompute: bool
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
    connection = session.connection()
    for priority, owner in _waiting_shares(connection):
        mine = {"owner": owner, "priority": priority}
        first = connection.execute(_FIRST_OF_SHARE, mine).one_or_none()
        # None where other claimers hold all that this share has waiting.
        if first is not None:
            return Next(*first, in_turn=True)
    # Nothing should be left; whatever is must not wait for ever.
    return _longest_waiting(session, moment)


def charge(session: Session, taken: Next) -> None:
    """Charge the share of a claimed job for the turn: the last thing to do before the commit."""
    # Out of turn it lies ahead of where the queue has come to.
    place = taken.position if taken.in_turn else 0
    _change_share(session, _CHARGE, taken.owner, taken.priority, {"place": place})


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


def enter(session: Session, place: Place, *, single_at: int = 0) -> None:
    """Note in a share that something new of it waits: the last thing to do before the commit."""
    values = {"turns": place.served, "place": single_at}
    _change_share(session, _ENTER, place.owner, place.priority, values)


def _is_for_the_aged() -> bool:
    return random.randrange(ONE_IN) == 0  # noqa: S311  # no secret


def _longest_waiting(session: Session, before: datetime) -> Next | None:
    found = session.connection().execute(_LONGEST_WAITING, {"before": before}).one_or_none()
    return None if found is None else Next(*found, in_turn=False)


def _waiting_shares(connection: Connection) -> Iterator[tuple[int, str]]:
    """Priority and owner of the shares that have something waiting, in the order of turns."""
    share = connection.execute(_FIRST_SHARE).one_or_none()
    while share is not None:
        priority, served, owner = share
        yield priority, owner
        after = {"priority": priority, "served": served, "owner": owner}
        share = connection.execute(_NEXT_SHARE, after).one_or_none()


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


def _change_share(
    session: Session, change: Update, owner: str, priority: int, values: Mapping[str, int]
) -> None:
    """Change a share without waiting long for its lock, which a frozen process may hold.

    A change given up for that does little harm: somebody gets a turn more, or two jobs have
    one position.
    """
    connection = session.connection()
    given = {"mine": owner, "at_priority": priority, **values}
    if connection.dialect.name != "postgresql":
        connection.execute(change, given)
        return
    if connection.execute(_where_unlocked(change), given).rowcount == 1:
        return
    try:
        with connection.begin_nested():
            connection.execute(text(f"SET LOCAL lock_timeout = {_SHARE_PATIENCE_MS}"))
            connection.execute(change, given)
            connection.execute(text("SET LOCAL lock_timeout = DEFAULT"))
    except OperationalError as error:
        if getattr(error.orig, "sqlstate", None) != _LOCK_NOT_AVAILABLE:
            raise


@cache
def _where_unlocked(change: Update) -> Update:
    return change.where(ShareRow.owner == _UNLOCKED.c.owner)
