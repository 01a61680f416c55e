"""Batches: accepted whole, followed as a whole and line by line, cancelled, planned again."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Final

from sqlalchemy import Select, and_, case, func, or_, select, update
from sqlalchemy.orm import Session

from service.contracts.batch import Batch, BatchCounts, BatchItem
from service.contracts.candidate import DesignResult
from service.contracts.progress import State
from service.errors import BatchNotFound
from service.store import answers
from service.store.batch_entry import Submitted, rerun_all, rerun_failed, submit
from service.store.clock import now
from service.store.order import word_of
from service.store.packing import unpack
from service.store.reading import is_identifier, read_result, summary_fields
from service.store.session import Store
from service.store.tables import BatchRow, DesignRow, JobRow, ResultRow

__all__ = [
    "BatchPage",
    "ItemPage",
    "ItemResult",
    "Submitted",
    "cancel",
    "get",
    "items",
    "page",
    "rerun_all",
    "rerun_failed",
    "results",
    "submit",
]

#: Designs read in one reading while results are streamed.
_CHUNK: Final = 50


@dataclass(frozen=True, slots=True)
class BatchPage:
    """Some batches, newest first, and where the next page starts, if there is one."""

    batches: tuple[Batch, ...]
    next_before: str | None


@dataclass(frozen=True, slots=True)
class ItemPage:
    """Some designs of a batch by line, and after which line the next page starts, if any."""

    items: tuple[BatchItem, ...]
    next_after_line: int | None


@dataclass(frozen=True, slots=True)
class ItemResult:
    """One design of a batch with its stored result, packed; None if it is not done."""

    item: BatchItem
    packed: bytes | None

    @property
    def result_json(self) -> str | None:
        """The result in JSON as it was written, not read again."""
        return None if self.packed is None else unpack(self.packed)

    def read(self) -> DesignResult | None:
        """The result as a contract.

        Raises
        ------
        SchemaMismatch
            If it was stored by a release with another contract.
        """
        return None if self.packed is None else read_result(self.item.id, self.packed)


def get(store: Store, batch_id: str, owner: str) -> Batch:
    """One batch of an owner, and where it stands.

    Raises
    ------
    BatchNotFound
        If this owner has no such batch.
    """
    if not is_identifier(batch_id):
        raise BatchNotFound(batch_id)

    def work(session: Session) -> Batch:
        row = session.get(BatchRow, batch_id)
        if row is None or row.owner != owner:
            raise BatchNotFound(batch_id)
        return _with_standing(session, [row])[0]

    return store.read(work)


def page(store: Store, *, owner: str, limit: int, before: str | None) -> BatchPage:
    """Batches of an owner, newest first; ``before`` is the batch after which the page starts.

    Raises
    ------
    BatchNotFound
        If ``before`` names no batch of this owner.
    """
    if before is not None and not is_identifier(before):
        raise BatchNotFound(before)

    def work(session: Session) -> BatchPage:
        query = (
            select(BatchRow)
            .where(BatchRow.owner == owner)
            .order_by(BatchRow.created_at.desc(), BatchRow.id.desc())
            .limit(limit + 1)
        )
        if before is not None:
            query = _older_than(session, query, before, owner)
        rows = session.scalars(query).all()
        batches = tuple(_with_standing(session, rows[:limit]))
        return BatchPage(batches, batches[-1].id if len(rows) > limit else None)

    return store.read(work)


def items(
    store: Store,
    batch_id: str,
    *,
    state: State | None = None,
    limit: int,
    after_line: int = 0,
) -> ItemPage:
    """Designs of a batch by line, all or those in one state."""

    def work(session: Session) -> ItemPage:
        query = (
            select(DesignRow, JobRow)
            .join(JobRow, JobRow.design_id == DesignRow.id)
            .where(DesignRow.batch_id == batch_id, DesignRow.batch_line > after_line)
            .order_by(DesignRow.batch_line)
            .limit(limit + 1)
        )
        if state is not None:
            query = query.where(JobRow.state == state)
        rows = session.execute(query).all()
        found = tuple(_item(row[0], row[1]) for row in rows[:limit])
        return ItemPage(found, found[-1].line if len(rows) > limit else None)

    return store.read(work)


def results(store: Store, batch_id: str) -> Iterator[ItemResult]:
    """Every design of a batch in the order of lines, each with its result if it is done.

    Read in chunks, each a reading of its own, so that no transaction lasts as long as whoever
    listens takes.
    """
    after_line = 0

    def work(session: Session) -> Sequence[ItemResult]:
        query = (
            select(DesignRow, JobRow, ResultRow.result)
            .join(JobRow, JobRow.design_id == DesignRow.id)
            .outerjoin(ResultRow, ResultRow.design_id == answers.SOURCE)
            .where(DesignRow.batch_id == batch_id, DesignRow.batch_line > after_line)
            .order_by(DesignRow.batch_line)
            .limit(_CHUNK)
        )
        return [ItemResult(_item(row[0], row[1]), row[2]) for row in session.execute(query)]

    while chunk := store.read(work):
        yield from chunk
        after_line = chunk[-1].item.line


def cancel(store: Store, batch_id: str) -> None:
    """Cancel what has not ended of a batch: at once what waits, and soon what runs.

    Raises
    ------
    BatchNotFound
    """
    if not is_identifier(batch_id):
        raise BatchNotFound(batch_id)

    def work(session: Session) -> None:
        if session.get(BatchRow, batch_id) is None:
            raise BatchNotFound(batch_id)
        waits = JobRow.state == "queued"
        # In one statement, so that none slips through that is just being claimed or given back.
        session.execute(
            update(JobRow)
            .where(JobRow.batch_id == batch_id, JobRow.state.in_(("queued", "running")))
            .values(
                cancel_wanted=True,
                state=case((waits, "cancelled"), else_=JobRow.state),
                step=case((waits, "cancelled"), else_=JobRow.step),
                finished_at=case((waits, now(session)), else_=JobRow.finished_at),
            )
            .execution_options(synchronize_session=False)
        )

    store.write(work)


def _with_standing(session: Session, rows: Sequence[BatchRow]) -> list[Batch]:
    """Batches with how many of their designs are in each state."""
    query = (
        select(
            BatchRow.id,
            JobRow.state,
            func.count(),
            func.sum(JobRow.progress),
            func.max(JobRow.finished_at),
        )
        .where(JobRow.batch_id == BatchRow.id, BatchRow.id.in_([row.id for row in rows]))
        .group_by(BatchRow.id, JobRow.state)
    )
    counts: dict[str, dict[str, int]] = {row.id: {} for row in rows}
    under_way = dict.fromkeys(counts, 0.0)
    last: dict[str, datetime] = {}
    for batch_id, state, number, progress, finished_at in session.execute(query):
        counts[batch_id][state] = number
        if state == "running":
            under_way[batch_id] = float(progress)
        if finished_at is not None:
            last[batch_id] = max(last.get(batch_id, finished_at), finished_at)
    return [
        _batch(row, BatchCounts(**counts[row.id]), under_way[row.id], last.get(row.id))
        for row in rows
    ]


def _batch(row: BatchRow, counts: BatchCounts, under_way: float, last: datetime | None) -> Batch:
    ended = counts.done + counts.failed + counts.cancelled
    return Batch(
        id=row.id,
        name=row.name,
        owner=row.owner,
        priority=word_of(row.priority),
        recompute=row.recompute,
        size=row.size,
        created_at=row.created_at,
        finished_at=last if counts.queued + counts.running == 0 else None,
        counts=counts,
        progress=min(1.0, (ended + under_way) / row.size),
    )


def _item(design: DesignRow, job: JobRow) -> BatchItem:
    return BatchItem(**summary_fields(design, job), line=design.batch_line or 0)


def _older_than(
    session: Session, query: Select[BatchRow], before: str, owner: str
) -> Select[BatchRow]:
    earlier = session.get(BatchRow, before)
    if earlier is None or earlier.owner != owner:
        raise BatchNotFound(before)
    moment = earlier.created_at
    return query.where(
        or_(
            BatchRow.created_at < moment,
            and_(BatchRow.created_at == moment, BatchRow.id < before),
        )
    )
