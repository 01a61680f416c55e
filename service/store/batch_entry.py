"""How batches enter the queue: accepted whole in one transaction, or put in again."""

from __future__ import annotations

import uuid
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from itertools import chain
from typing import Any

from sqlalchemy import Executable, bindparam, insert, or_, select, update
from sqlalchemy.exc import IntegrityError
from sqlalchemy.orm import Session

from service.contracts.batch import BatchHeading, BatchRequest, batch_hash
from service.contracts.progress import LOCAL_OWNER
from service.errors import BatchNotFound, KeyReused
from service.store import answers, order, workers
from service.store.clock import now
from service.store.order import PRIORITIES, Place, word_of
from service.store.reading import is_identifier
from service.store.session import Store
from service.store.tables import BatchRow, DesignRow, JobRow


@dataclass(frozen=True, slots=True)
class Submitted:
    """What came of a submission: the batch, and whether it is new."""

    batch_id: str
    created: bool


@dataclass(frozen=True, slots=True)
class _Item:
    """One design as it will be stored: its line, and what it waits for or is answered by."""

    design_id: str
    line: int
    name: str
    request: str
    content_hash: str


def submit(
    store: Store,
    request: BatchRequest,
    *,
    idempotency_key: str | None,
    owner: str = LOCAL_OWNER,
) -> Submitted:
    """Accept a batch: all its designs and their jobs, in one transaction.

    Identical designs are planned once, and those with a stored result are done at once.

    Raises
    ------
    KeyReused
        If the owner used the key for a different batch.
    StoreUnavailable
        If the database stays away; with a key it is safe to send again.
    """
    items = [
        _Item(uuid.uuid4().hex, line, design.name, design.canonical_json(), design.content_hash())
        for line, design in enumerate(request.designs, 1)
    ]
    heading = BatchHeading(
        name=request.name, priority=request.priority, recompute=request.recompute
    )
    return _accept(store, heading, items, owner, idempotency_key)


def rerun_all(store: Store, batch_id: str, *, idempotency_key: str | None = None) -> Submitted:
    """Accept a batch again as a new one, to be planned anew whatever is stored.

    Raises
    ------
    BatchNotFound
    """
    if not is_identifier(batch_id):
        raise BatchNotFound(batch_id)

    def read(session: Session) -> tuple[BatchRow, list[_Item]]:
        batch = session.get(BatchRow, batch_id)
        if batch is None:
            raise BatchNotFound(batch_id)
        query = (
            select(DesignRow.batch_line, DesignRow.name, DesignRow.request, DesignRow.content_hash)
            .where(DesignRow.batch_id == batch_id)
            .order_by(DesignRow.batch_line)
        )
        return batch, [
            _Item(uuid.uuid4().hex, line or 0, name, text, content_hash)
            for line, name, text, content_hash in session.execute(query)
        ]

    batch, items = store.read(read)
    heading = BatchHeading(name=batch.name, priority=word_of(batch.priority), recompute=True)
    return _accept(store, heading, items, batch.owner, idempotency_key)


def rerun_failed(store: Store, batch_id: str) -> int:
    """Let wait again the designs of a batch that failed or were cancelled; says how many.

    Raises
    ------
    BatchNotFound
    """
    if not is_identifier(batch_id):
        raise BatchNotFound(batch_id)

    def work(session: Session) -> int:
        batch = session.get(BatchRow, batch_id)
        if batch is None:
            raise BatchNotFound(batch_id)
        jobs = (
            select(DesignRow.content_hash, JobRow.design_id, DesignRow.batch_line)
            .join(DesignRow, DesignRow.id == JobRow.design_id)
            .where(JobRow.batch_id == batch_id)
            .order_by(DesignRow.batch_line)
        )
        failed = jobs.where(JobRow.state.in_(("failed", "cancelled"))).with_for_update(of=JobRow)
        ended = session.execute(failed).all()
        if not ended:
            return 0
        # What is under way already is planned for those that are the same.
        under_way = jobs.where(
            JobRow.state.in_(("queued", "running")),
            JobRow.waits_for.is_(None),
            JobRow.cancel_wanted.is_(False),
        )
        moment = now(session)
        place = order.place_for(session, batch.owner, batch.priority)
        leaders = _leaders(chain(session.execute(under_way).all(), ended))
        again = [
            {"key": design_id, "position": place.of_batch(index)}
            | _waiting(design_id, leaders[content_hash])
            for index, (content_hash, design_id, _line) in enumerate(ended)
        ]
        session.connection().execute(_requeue(moment), again)
        order.enter(session, place)
        return len(again)

    return store.write(work)


def _accept(
    store: Store, heading: BatchHeading, items: Sequence[_Item], owner: str, key: str | None
) -> Submitted:
    # Drawn and written out outside the transaction: run again after a commit whose answer was
    # lost it finds its own row, and it holds up other writers of SQLite for less.
    batch_id = uuid.uuid4().hex
    content_hash = batch_hash(heading, (item.content_hash for item in items))
    stored = {} if heading.recompute else _stored(store, items)

    def work(session: Session) -> Submitted:
        earlier = _earlier(session, batch_id, owner, key)
        if earlier is not None:
            if earlier.content_hash != content_hash:
                raise KeyReused(key or "")
            return Submitted(earlier.id, created=earlier.id == batch_id)
        moment = now(session)
        place = order.place_for(session, owner, PRIORITIES[heading.priority])
        batch = BatchRow(
            id=batch_id,
            owner=owner,
            name=heading.name,
            priority=place.priority,
            size=len(items),
            content_hash=content_hash,
            idempotency_key=key,
            recompute=heading.recompute,
            created_at=moment,
        )
        session.add(batch)
        session.flush()
        connection = session.connection()
        connection.execute(insert(DesignRow), _design_rows(batch, items, stored))
        connection.execute(insert(JobRow), _job_rows(batch, items, stored, place))
        order.enter(session, place)
        return Submitted(batch_id, created=True)

    try:
        return store.write(work)
    except IntegrityError:
        # Two senders with one key at the same moment: the other one was first.
        return store.write(work)


def _stored(store: Store, items: Sequence[_Item]) -> Mapping[str, str]:
    """Content hashes that a result of today's engine answers, each with the design that has it."""

    def work(session: Session) -> Mapping[str, str]:
        version = workers.engine_version(session)
        if version is None:
            return {}
        return answers.stored_answers(session, {each.content_hash for each in items}, version)

    return store.read(work)


def _earlier(session: Session, batch_id: str, owner: str, key: str | None) -> BatchRow | None:
    same = BatchRow.id == batch_id
    if key is not None:
        same = or_(same, (BatchRow.owner == owner) & (BatchRow.idempotency_key == key))
    return session.scalars(select(BatchRow).where(same)).one_or_none()


def _design_rows(
    batch: BatchRow, items: Sequence[_Item], stored: Mapping[str, str]
) -> list[dict[str, Any]]:
    return [
        {
            "id": item.design_id,
            "owner": batch.owner,
            "name": item.name,
            "request": item.request,
            "content_hash": item.content_hash,
            "idempotency_key": None,
            "batch_id": batch.id,
            "batch_line": item.line,
            "answered_by": stored.get(item.content_hash),
            "recompute": batch.recompute,
            "created_at": batch.created_at,
        }
        for item in items
    ]


def _job_rows(
    batch: BatchRow, items: Sequence[_Item], stored: Mapping[str, str], place: Place
) -> list[dict[str, Any]]:
    leaders = _leaders((item.content_hash, item.design_id, item.line) for item in items)
    common = {
        "owner": batch.owner,
        "batch_id": batch.id,
        "priority": batch.priority,
        "queued_at": batch.created_at,
        "attempts": 0,
        "fence": 0,
        "cancel_wanted": False,
    }
    done = {
        "state": "done",
        "waits_for": None,
        "progress": 1.0,
        "step": answers.ANSWERED_STEP,
        "finished_at": batch.created_at,
    }
    queued = {"state": "queued", "progress": 0.0, "finished_at": None}
    return [
        common
        | {"design_id": item.design_id, "position": place.of_batch(index)}
        | (
            done
            if item.content_hash in stored
            else queued | _waiting(item.design_id, leaders[item.content_hash])
        )
        for index, item in enumerate(items)
    ]


def _leaders(
    designs: Iterable[tuple[str, str, int | None]],
) -> dict[str, tuple[str, int | None]]:
    """For each content hash the design that is planned for all that share it, and its line."""
    leaders: dict[str, tuple[str, int | None]] = {}
    for content_hash, design_id, line in designs:
        leaders.setdefault(content_hash, (design_id, line))
    return leaders


def _waiting(design_id: str, leader: tuple[str, int | None]) -> dict[str, Any]:
    if leader[0] == design_id:
        return {"waits_for": None, "step": ""}
    return {"waits_for": leader[0], "step": f"planned together with line {leader[1]}, the same"}


def _requeue(moment: datetime) -> Executable:
    return (
        update(JobRow)
        .where(JobRow.design_id == bindparam("key"))
        .values(
            state="queued",
            position=bindparam("position"),
            waits_for=bindparam("waits_for"),
            step=bindparam("step"),
            queued_at=moment,
            attempts=0,
            cancel_wanted=False,
            progress=0.0,
            failure=None,
            worker=None,
            lease_until=None,
            started_at=None,
            finished_at=None,
        )
    )
