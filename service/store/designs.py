"""Designs: accepted once, listed newest first, shown with what came of them."""

from __future__ import annotations

import uuid
from dataclasses import dataclass

from sqlalchemy import Select, and_, func, or_, select
from sqlalchemy.exc import IntegrityError
from sqlalchemy.orm import Session

from service.contracts.candidate import Candidate
from service.contracts.progress import LOCAL_OWNER, Design, DesignSummary, Priority
from service.contracts.report import FeedReport
from service.contracts.request import DesignRequest
from service.errors import CandidateNotFound, DesignNotFound, KeyReused, ResultNotReady
from service.store import answers, order, workers
from service.store.clock import now
from service.store.order import PRIORITIES
from service.store.packing import unpack
from service.store.reading import (
    read_request,
    read_result,
    refuse_malformed,
    summary_fields,
    summary_of,
)
from service.store.session import Store
from service.store.tables import DesignRow, JobRow, ReportRow, ResultRow


@dataclass(frozen=True, slots=True)
class Submitted:
    """What came of a submission: the design, and whether it is new."""

    design_id: str
    created: bool


@dataclass(frozen=True, slots=True)
class DesignPage:
    """Some designs, newest first, and where the next page starts, if there is one."""

    designs: tuple[DesignSummary, ...]
    next_before: str | None


def submit(
    store: Store,
    request: DesignRequest,
    *,
    idempotency_key: str | None,
    owner: str = LOCAL_OWNER,
    priority: Priority = "ordinary",
    recompute: bool = False,
) -> Submitted:
    """Accept a request: the design and its queued job, in one transaction.

    Where the result of an identical request is stored, of the engine that works today, the
    design is done at once.

    Parameters
    ----------
    store : Store
    request : DesignRequest
    idempotency_key : str or None
        With a key the same request of an owner is accepted once however often it is sent.
    owner : str
    priority : Priority
    recompute : bool
        Plan anew even where a stored result would answer.

    Raises
    ------
    KeyReused
        If the owner used the key for a different request.
    StoreUnavailable
        If the database stays away; with a key it is safe to send again.
    """
    # Drawn outside the transaction: run again after a commit whose answer was lost, it then
    # finds its own row.
    design_id = uuid.uuid4().hex
    # Written out before the transaction, which holds up every other writer of SQLite.
    content, content_hash = request.canonical_json(), request.content_hash()

    def work(session: Session) -> Submitted:
        earlier = _earlier(session, design_id, owner, idempotency_key)
        if earlier is not None:
            return _same(earlier, content_hash, idempotency_key, design_id)
        moment = now(session)
        design = DesignRow(
            id=design_id,
            owner=owner,
            name=request.name,
            request=content,
            content_hash=content_hash,
            idempotency_key=idempotency_key,
            recompute=recompute,
            created_at=moment,
        )
        session.add(design)
        session.flush()
        place = order.place_for(session, owner, PRIORITIES[priority])
        job = JobRow(
            design_id=design_id,
            owner=owner,
            state="queued",
            priority=place.priority,
            position=place.single(),
            queued_at=moment,
            fence=0,
            cancel_wanted=False,
        )
        session.add(job)
        version = None if recompute else workers.engine_version(session)
        stored = version and answers.stored_answer(session, content_hash, version)
        if stored:
            session.flush()
            answers.answer(session, design_id, stored, moment)
            return Submitted(design_id, created=True)
        session.flush()
        order.enter(session, place, single_at=job.position)
        return Submitted(design_id, created=True)

    try:
        return store.write(work)
    except IntegrityError:
        # Two senders with one key at the same moment: the other one was first.
        return store.write(work)


def get(store: Store, design_id: str) -> Design:
    """One design with its request and, once done, its result.

    Raises
    ------
    DesignNotFound
        If there is no such design.
    """
    refuse_malformed(design_id)

    def work(session: Session) -> Design:
        found = session.execute(
            select(DesignRow, JobRow, ResultRow.result)
            .join(JobRow, JobRow.design_id == DesignRow.id)
            .outerjoin(ResultRow, ResultRow.design_id == answers.SOURCE)
            .where(DesignRow.id == design_id)
        ).one_or_none()
        if found is None:
            raise DesignNotFound(design_id)
        design, job, stored = found
        # Outer-joined, so None until the design is done.
        result: bytes | None = stored
        return Design(
            **summary_fields(design, job),
            request=read_request(design_id, design.request),
            result=None if result is None else read_result(design_id, result),
        )

    return store.read(work)


def page(store: Store, *, limit: int, before: str | None, owner: str | None = None) -> DesignPage:
    """Designs newest first.

    Parameters
    ----------
    store : Store
    limit : int
        How many at the most.
    before : str or None
        Identifier of a design: the page starts after it.
    owner : str, optional
        Only his; by default everybody's.

    Raises
    ------
    DesignNotFound
        If ``before`` names no design.
    """
    if before is not None:
        refuse_malformed(before)

    def work(session: Session) -> DesignPage:
        query = (
            select(DesignRow, JobRow)
            .join(JobRow, JobRow.design_id == DesignRow.id)
            .order_by(DesignRow.created_at.desc(), DesignRow.id.desc())
            .limit(limit + 1)
        )
        if owner is not None:
            query = query.where(DesignRow.owner == owner)
        if before is not None:
            query = _older_than(session, query, before)
        rows = session.execute(query).all()
        designs = tuple(summary_of(row) for row in rows[:limit])
        more = len(rows) > limit
        return DesignPage(designs, designs[-1].id if more else None)

    return store.read(work)


def candidate(store: Store, design_id: str, rank: int) -> Candidate:
    """One candidate of a design by its rank.

    Raises
    ------
    DesignNotFound, ResultNotReady, CandidateNotFound
    """
    design = get(store, design_id)
    if design.result is None:
        raise ResultNotReady(design_id, design.state)
    for each in design.result.candidates:
        if each.rank == rank:
            return each
    raise CandidateNotFound(design_id, rank, len(design.result.candidates))


def report(store: Store, design_id: str, rank: int) -> FeedReport:
    """The feed-impedance report of one candidate of a design.

    Raises
    ------
    DesignNotFound, ResultNotReady, CandidateNotFound
    """
    refuse_malformed(design_id)

    def work(session: Session) -> bytes | None:
        query = (
            select(ReportRow.report)
            .join(DesignRow, ReportRow.design_id == answers.SOURCE)
            .where(DesignRow.id == design_id, ReportRow.rank == rank)
        )
        return session.scalars(query).one_or_none()

    stored = store.read(work)
    if stored is None:
        candidate(store, design_id, rank)  # says which of the three it is
        raise CandidateNotFound(design_id, rank, 0)
    return FeedReport.model_validate_json(unpack(stored))


def count(store: Store) -> int:
    """How many designs are stored."""
    return store.read(lambda session: session.scalar(select(func.count(DesignRow.id))) or 0)


def _earlier(session: Session, design_id: str, owner: str, key: str | None) -> DesignRow | None:
    same = DesignRow.id == design_id
    if key is not None:
        same = or_(same, and_(DesignRow.owner == owner, DesignRow.idempotency_key == key))
    return session.scalars(select(DesignRow).where(same)).one_or_none()


def _same(earlier: DesignRow, content_hash: str, key: str | None, own_id: str) -> Submitted:
    if earlier.content_hash != content_hash:
        raise KeyReused(key or "")
    return Submitted(earlier.id, created=earlier.id == own_id)


def _older_than(
    session: Session, query: Select[DesignRow, JobRow], before: str
) -> Select[DesignRow, JobRow]:
    moment = session.scalars(select(DesignRow.created_at).where(DesignRow.id == before)).first()
    if moment is None:
        raise DesignNotFound(before)
    return query.where(
        or_(
            DesignRow.created_at < moment,
            and_(DesignRow.created_at == moment, DesignRow.id < before),
        )
    )
