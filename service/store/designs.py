"""Designs: accepted once, listed newest first, shown with what came of them."""

from __future__ import annotations

import json
import re
import uuid
from dataclasses import dataclass
from typing import Any, Final

from pydantic import ValidationError
from sqlalchemy import Row, Select, and_, func, or_, select
from sqlalchemy.exc import IntegrityError
from sqlalchemy.orm import Session

from service.contracts.candidate import Candidate, DesignResult
from service.contracts.progress import Design, DesignSummary, Progress
from service.contracts.refusals import faults_of
from service.contracts.report import FeedReport
from service.contracts.request import DesignRequest
from service.errors import (
    CandidateNotFound,
    DesignNotFound,
    KeyReused,
    ResultNotReady,
    SchemaMismatch,
)
from service.store.clock import now
from service.store.session import Store
from service.store.tables import DesignRow, JobRow, ReportRow, ResultRow

#: The priority of ordinary work; smaller comes first.
ORDINARY: Final = 100

_IDENTIFIER: Final = re.compile(r"[0-9a-f]{32}")


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


def submit(store: Store, request: DesignRequest, *, idempotency_key: str | None) -> Submitted:
    """Accept a request: the design and its queued job, in one transaction.

    Parameters
    ----------
    store : Store
    request : DesignRequest
    idempotency_key : str or None
        With a key the same request is accepted once however often it is sent.

    Raises
    ------
    KeyReused
        If the key belongs to a different request.
    StoreUnavailable
        If the database stays away; with a key it is safe to send again.
    """
    # Drawn outside the transaction: run again after a commit whose answer was lost, it then
    # finds its own row.
    design_id = uuid.uuid4().hex

    def work(session: Session) -> Submitted:
        earlier = _earlier(session, design_id, idempotency_key)
        if earlier is not None:
            return _same(earlier, request, idempotency_key, design_id)
        moment = now(session)
        session.add(
            DesignRow(
                id=design_id,
                name=request.name,
                request=request.canonical_json(),
                content_hash=request.content_hash(),
                idempotency_key=idempotency_key,
                created_at=moment,
            )
        )
        session.flush()
        session.add(
            JobRow(
                design_id=design_id,
                state="queued",
                priority=ORDINARY,
                position=int(moment.timestamp() * 1e6),
                cancel_wanted=False,
            )
        )
        session.flush()
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
            .outerjoin(ResultRow, ResultRow.design_id == DesignRow.id)
            .where(DesignRow.id == design_id)
        ).one_or_none()
        if found is None:
            raise DesignNotFound(design_id)
        design, job, stored = found
        # Outer-joined, so None until the design is done.
        result: str | None = stored
        return Design(
            **_summary_fields(design, job),
            request=read_request(design),
            result=None if result is None else _read_result(design_id, result),
        )

    return store.read(work)


def page(store: Store, *, limit: int, before: str | None) -> DesignPage:
    """Designs newest first.

    Parameters
    ----------
    store : Store
    limit : int
        How many at the most.
    before : str or None
        Identifier of a design: the page starts after it.

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
        if before is not None:
            query = _older_than(session, query, before)
        rows = session.execute(query).all()
        designs = tuple(_summary(row) for row in rows[:limit])
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

    def work(session: Session) -> str | None:
        query = select(ReportRow.report).where(
            ReportRow.design_id == design_id, ReportRow.rank == rank
        )
        return session.scalars(query).one_or_none()

    stored = store.read(work)
    if stored is None:
        candidate(store, design_id, rank)  # says which of the three it is
        raise CandidateNotFound(design_id, rank, 0)
    return FeedReport.model_validate_json(stored)


def count(store: Store) -> int:
    """How many designs are stored."""
    return store.read(lambda session: session.scalar(select(func.count(DesignRow.id))) or 0)


def refuse_malformed(design_id: str) -> None:
    """Refuse what cannot be an identifier before any database has to make sense of it.

    Raises
    ------
    DesignNotFound
    """
    if _IDENTIFIER.fullmatch(design_id) is None:
        raise DesignNotFound(design_id)


def read_request(design: DesignRow) -> DesignRequest:
    """The request of a stored design.

    Raises
    ------
    SchemaMismatch
        If it was accepted by a release with another contract.
    """
    try:
        return DesignRequest.model_validate_json(design.request)
    except ValidationError as error:
        raise SchemaMismatch(
            f"The request of design {design.id} was accepted by another release and breaks the "
            f"contract of this one ({faults_of(error)[0]}) Submit it again in today's form."
        ) from error


def _read_result(design_id: str, result: str) -> DesignResult:
    try:
        return DesignResult.model_validate_json(result)
    except ValidationError as error:
        raise SchemaMismatch(
            f"The result of design {design_id} was stored by another release and cannot be read "
            "by this one. Submit the request again."
        ) from error


def _earlier(session: Session, design_id: str, key: str | None) -> DesignRow | None:
    same = DesignRow.id == design_id
    if key is not None:
        same = or_(same, DesignRow.idempotency_key == key)
    return session.scalars(select(DesignRow).where(same)).one_or_none()


def _same(earlier: DesignRow, request: DesignRequest, key: str | None, own_id: str) -> Submitted:
    if earlier.content_hash != request.content_hash():
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


def _summary(row: Row[DesignRow, JobRow]) -> DesignSummary:
    return DesignSummary(**_summary_fields(row[0], row[1]))


def _summary_fields(design: DesignRow, job: JobRow) -> dict[str, Any]:
    return {
        "id": design.id,
        "name": design.name,
        "state": job.state,
        "progress": Progress(fraction=job.progress, step=job.step),
        "attempts": job.attempts,
        "failure": job.failure,
        "created_at": design.created_at,
        "started_at": job.started_at,
        "finished_at": job.finished_at,
        "bands": tuple(band["name"] for band in json.loads(design.request)["bands"]),
    }
