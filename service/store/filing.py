"""Labels on designs, designs put away, and the list of designs as one wishes to see it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from sqlalchemy import ColumnElement, Select, delete, exists, func, select, tuple_
from sqlalchemy.orm import Session

from service.contracts.filing import FiledDesign, ListWish
from service.errors import DesignNotFound
from service.store.clock import now
from service.store.reading import refuse_malformed, summary_of
from service.store.session import Store
from service.store.tables import ArchivedRow, DesignRow, JobRow, LabelRow


@dataclass(frozen=True, slots=True)
class Filed:
    """Where one design is filed: its labels, and whether it is put away."""

    labels: tuple[str, ...]
    archived: bool


@dataclass(frozen=True, slots=True)
class ListPage:
    """Some designs in the order wished, and after which design the next page starts, if any."""

    designs: tuple[FiledDesign, ...]
    next_after: str | None


def filed(store: Store, design_id: str) -> Filed:
    """How a design is filed; one that is not there has no labels."""

    def work(session: Session) -> Filed:
        labels = _labels_of(session, [design_id]).get(design_id, ())
        return Filed(labels, session.get(ArchivedRow, design_id) is not None)

    return store.read(work)


def put_labels(store: Store, design_id: str, labels: Sequence[str]) -> None:
    """Give a design these labels and no others.

    Raises
    ------
    DesignNotFound
    """

    def work(session: Session) -> None:
        _refuse_unknown(session, design_id)
        session.execute(delete(LabelRow).where(LabelRow.design_id == design_id))
        session.add_all(LabelRow(design_id=design_id, label=each) for each in labels)

    store.write(work)


def archive(store: Store, design_id: str, *, away: bool) -> None:
    """Put a design away, or bring it back; it is kept whole either way.

    Raises
    ------
    DesignNotFound
    """

    def work(session: Session) -> None:
        _refuse_unknown(session, design_id)
        row = session.get(ArchivedRow, design_id)
        if away and row is None:
            session.add(ArchivedRow(design_id=design_id, archived_at=now(session)))
        elif not away and row is not None:
            session.delete(row)

    store.write(work)


def labels_in_use(store: Store, *, limit: int) -> tuple[str, ...]:
    """Labels that designs carry, in order."""
    query = select(LabelRow.label).distinct().order_by(LabelRow.label).limit(limit)
    return store.read(lambda session: tuple(session.scalars(query)))


def list_page(store: Store, wish: ListWish, *, limit: int, after: str | None) -> ListPage:
    """Designs as wished.

    Parameters
    ----------
    store : Store
    wish : ListWish
    limit : int
        How many at the most.
    after : str or None
        Identifier of a design: the page starts after it in the order wished.

    Raises
    ------
    DesignNotFound
        If ``after`` names no design.
    """

    def work(session: Session) -> ListPage:
        if after is not None:
            _refuse_unknown(session, after)
        rows = session.execute(_ordered(_wished(wish), wish, after).limit(limit + 1)).all()
        shown = [row[0].id for row in rows[:limit]]
        labels = _labels_of(session, shown)
        designs = tuple(
            FiledDesign(
                summary=summary_of(row),
                labels=labels.get(row[0].id, ()),
                archived=wish.archived,
            )
            for row in rows[:limit]
        )
        return ListPage(designs, shown[-1] if len(rows) > limit else None)

    return store.read(work)


def _refuse_unknown(session: Session, design_id: str) -> None:
    refuse_malformed(design_id)
    if session.scalar(select(DesignRow.id).where(DesignRow.id == design_id)) is None:
        raise DesignNotFound(design_id)


def _wished(wish: ListWish) -> Select[DesignRow, JobRow]:
    query = select(DesignRow, JobRow).join(JobRow, JobRow.design_id == DesignRow.id)
    put_away = exists().where(ArchivedRow.design_id == DesignRow.id)
    query = query.where(put_away if wish.archived else ~put_away)
    if wish.name:
        query = query.where(DesignRow.name.icontains(wish.name, autoescape=True))
    if wish.state is not None:
        query = query.where(JobRow.state == wish.state)
    if wish.label:
        labelled = exists().where(LabelRow.design_id == DesignRow.id, LabelRow.label == wish.label)
        query = query.where(labelled)
    if not wish.batches:
        query = query.where(DesignRow.batch_id.is_(None))
    return query


def _ordered(
    query: Select[DesignRow, JobRow], wish: ListWish, after: str | None
) -> Select[DesignRow, JobRow]:
    by: ColumnElement[Any] = func.lower(DesignRow.name)
    if wish.sort == "newest":
        by = DesignRow.created_at.expression
    if after is not None:
        # The database tells where the page before ended: it alone knows how it sorts.
        ended = select(by).where(DesignRow.id == after).scalar_subquery()
        here, there = tuple_(by, DesignRow.id), tuple_(ended, after)
        query = query.where(here > there if wish.sort == "name" else here < there)
    if wish.sort == "name":
        return query.order_by(by, DesignRow.id)
    return query.order_by(by.desc(), DesignRow.id.desc())


def _labels_of(session: Session, designs: Sequence[str]) -> dict[str, tuple[str, ...]]:
    query = (
        select(LabelRow.design_id, LabelRow.label)
        .where(LabelRow.design_id.in_(designs))
        .order_by(LabelRow.label)
    )
    found: dict[str, tuple[str, ...]] = {}
    for design_id, label in session.execute(query):
        found[design_id] = (*found.get(design_id, ()), label)
    return found
