"""The tables. Rows never leave the store: what goes out is a contract."""

from __future__ import annotations

from datetime import UTC, datetime

from sqlalchemy import (
    BigInteger,
    CheckConstraint,
    DateTime,
    Dialect,
    Float,
    ForeignKey,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    String,
    Text,
    TypeDecorator,
    UniqueConstraint,
    text,
)
from sqlalchemy.orm import DeclarativeBase, Mapped, mapped_column

from service.store.clock import microseconds

#: Longest idempotency key.
KEY_LENGTH = 200
LABEL_LENGTH = 40
#: Longest name of an owner.
OWNER_LENGTH = 60

#: What may be claimed. Written out, for a parameter would hide a partial index from a planner.
CLAIMABLE_SQL = "state = 'queued' AND waits_for IS NULL"
RUNNING_SQL = "state = 'running'"

_STATES = ("queued", "running", "done", "failed", "cancelled")


class Moment(TypeDecorator[datetime]):
    """A time in UTC on every database; SQLite keeps no time zone, so it is put back."""

    impl = DateTime(timezone=True)
    cache_ok = True

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        """Refuse a time without a zone: it would be read as another moment elsewhere."""
        if value is None:
            return None
        if value.tzinfo is None:
            raise ValueError("a stored time needs its zone")
        value = value.astimezone(UTC)
        return value.replace(tzinfo=None) if dialect.name == "sqlite" else value

    def process_result_value(self, value: datetime | None, dialect: Dialect) -> datetime | None:  # noqa: ARG002  # the base class fixes the signature
        """Give every time its zone."""
        if value is None:
            return None
        return value.replace(tzinfo=UTC) if value.tzinfo is None else value.astimezone(UTC)


class Base(DeclarativeBase):
    """Root of the tables; constraints carry predictable names, so that migrations find them."""

    metadata = MetaData(
        naming_convention={
            "ix": "ix_%(table_name)s_%(column_0_N_name)s",
            "uq": "uq_%(table_name)s_%(column_0_N_name)s",
            "ck": "ck_%(table_name)s_%(constraint_name)s",
            "fk": "fk_%(table_name)s_%(column_0_N_name)s",
            "pk": "pk_%(table_name)s",
        }
    )


def _partial(name: str, where: str, *columns: str) -> Index:
    """An index over the rows that a condition holds for."""
    return Index(name, *columns, sqlite_where=text(where), postgresql_where=text(where))


class BatchRow(Base):
    """Many designs accepted together. Never changed."""

    __tablename__ = "batches"
    __table_args__ = (
        UniqueConstraint("owner", "idempotency_key"),
        Index(None, "owner", "created_at", "id"),
    )

    id: Mapped[str] = mapped_column(String(32), primary_key=True)
    owner: Mapped[str] = mapped_column(String(OWNER_LENGTH))
    name: Mapped[str] = mapped_column(String(120))
    priority: Mapped[int] = mapped_column(Integer)
    size: Mapped[int] = mapped_column(Integer)
    content_hash: Mapped[str] = mapped_column(String(64))
    idempotency_key: Mapped[str | None] = mapped_column(String(KEY_LENGTH))
    recompute: Mapped[bool] = mapped_column(default=False)
    created_at: Mapped[datetime] = mapped_column(Moment)


class DesignRow(Base):
    """A design: the request as accepted, and whose stored result answers it if not its own."""

    __tablename__ = "designs"
    __table_args__ = (
        UniqueConstraint("owner", "idempotency_key"),
        Index(None, "created_at", "id"),
        Index(None, "owner", "created_at", "id"),
        Index(None, "batch_id", "batch_line"),
    )

    id: Mapped[str] = mapped_column(String(32), primary_key=True)
    owner: Mapped[str] = mapped_column(String(OWNER_LENGTH), default="local")
    name: Mapped[str] = mapped_column(String(120))
    request: Mapped[str] = mapped_column(Text)
    content_hash: Mapped[str] = mapped_column(String(64), index=True)
    idempotency_key: Mapped[str | None] = mapped_column(String(KEY_LENGTH))
    batch_id: Mapped[str | None] = mapped_column(ForeignKey("batches.id"))
    #: Place in the batch, from 1.
    batch_line: Mapped[int | None] = mapped_column(Integer)
    #: The design of the same request whose result answers this one; that one has its own.
    answered_by: Mapped[str | None] = mapped_column(ForeignKey("designs.id"))
    recompute: Mapped[bool] = mapped_column(default=False)
    created_at: Mapped[datetime] = mapped_column(Moment)


class JobRow(Base):
    """The work on a design: the queue of record."""

    __tablename__ = "jobs"
    __table_args__ = (
        CheckConstraint("state IN ({})".format(", ".join(f"'{s}'" for s in _STATES)), name="state"),
        # What may be claimed, in the order of one owner and in that of waiting. Partial, so
        # that neither what has ended nor what waits for another is ever passed over.
        _partial("ix_jobs_claimable", CLAIMABLE_SQL, "owner", "priority", "position", "design_id"),
        _partial("ix_jobs_longest_waiting", CLAIMABLE_SQL, "queued_at", "position", "design_id"),
        _partial("ix_jobs_waits_for", "waits_for IS NOT NULL", "waits_for"),
        _partial("ix_jobs_leases", RUNNING_SQL, "lease_until"),
        Index(None, "batch_id", "state"),
        Index(None, "changed_at"),
        Index(None, "owner", "changed_at"),
    )

    design_id: Mapped[str] = mapped_column(ForeignKey("designs.id"), primary_key=True)
    #: Owner and batch are the design's, repeated for the indexes.
    owner: Mapped[str] = mapped_column(String(OWNER_LENGTH), default="local")
    batch_id: Mapped[str | None] = mapped_column(String(32))
    state: Mapped[str] = mapped_column(String(10))
    priority: Mapped[int] = mapped_column(Integer)
    #: Place in the queue among the jobs of one owner and priority.
    position: Mapped[int] = mapped_column(BigInteger)
    #: An identical design of the same batch that is planned for this one too.
    waits_for: Mapped[str | None] = mapped_column(String(32))
    queued_at: Mapped[datetime] = mapped_column(Moment)
    #: Moment of the last change in µs since 1970, by the database's clock; set by every UPDATE.
    changed_at: Mapped[int] = mapped_column(
        BigInteger, default=microseconds(), onupdate=microseconds()
    )
    attempts: Mapped[int] = mapped_column(Integer, default=0)
    #: Rises with every claim and every taking away; what a worker writes must carry it.
    fence: Mapped[int] = mapped_column(Integer, default=0)
    worker: Mapped[str | None] = mapped_column(String(120))
    lease_until: Mapped[datetime | None] = mapped_column(Moment)
    cancel_wanted: Mapped[bool] = mapped_column(default=False)
    progress: Mapped[float] = mapped_column(Float, default=0.0)
    step: Mapped[str] = mapped_column(String(200), default="")
    failure: Mapped[str | None] = mapped_column(String(500))
    started_at: Mapped[datetime | None] = mapped_column(Moment)
    finished_at: Mapped[datetime | None] = mapped_column(Moment)


class ShareRow(Base):
    """The turns of one owner at one priority, and how far his queue has come."""

    __tablename__ = "shares"

    owner: Mapped[str] = mapped_column(String(OWNER_LENGTH), primary_key=True)
    priority: Mapped[int] = mapped_column(Integer, primary_key=True)
    #: Turns taken so far, or passed while nothing of his waited.
    served: Mapped[int] = mapped_column(BigInteger, default=0)
    #: Position of the job claimed last.
    at: Mapped[int] = mapped_column(BigInteger, default=0)
    #: Position of the last design submitted by itself.
    singles_at: Mapped[int] = mapped_column(BigInteger, default=0)


class WorkerRow(Base):
    """A process that claims jobs, as it announced itself."""

    __tablename__ = "workers"

    name: Mapped[str] = mapped_column(String(120), primary_key=True)
    host: Mapped[str] = mapped_column(String(120))
    pid: Mapped[int] = mapped_column(Integer)
    carrier: Mapped[str] = mapped_column(String(20))
    engine_version: Mapped[str] = mapped_column(String(40))
    started_at: Mapped[datetime] = mapped_column(Moment)
    seen_at: Mapped[datetime] = mapped_column(Moment)
    last_claim_at: Mapped[datetime | None] = mapped_column(Moment)
    ended_at: Mapped[datetime | None] = mapped_column(Moment)


class TallyRow(Base):
    """A count of something that leaves no other trace."""

    __tablename__ = "tallies"

    name: Mapped[str] = mapped_column(String(40), primary_key=True)
    count: Mapped[int] = mapped_column(BigInteger, default=0)


class ResultRow(Base):
    """The stored result of a design: one at most, immutable."""

    __tablename__ = "results"
    __table_args__ = (Index(None, "content_hash", "engine_version", "created_at"),)

    design_id: Mapped[str] = mapped_column(ForeignKey("designs.id"), primary_key=True)
    #: The design's, repeated so that an identical request finds its answer.
    content_hash: Mapped[str] = mapped_column(String(64))
    engine_version: Mapped[str] = mapped_column(String(40))
    #: The largest miss of the search's maps, repeated from the result.
    map_error_percent: Mapped[float] = mapped_column(Float)
    #: Packed, as in `packing`.
    result: Mapped[bytes] = mapped_column(LargeBinary)
    created_at: Mapped[datetime] = mapped_column(Moment)


class ReportRow(Base):
    """The feed-impedance report of one candidate of a design."""

    __tablename__ = "reports"

    design_id: Mapped[str] = mapped_column(ForeignKey("designs.id"), primary_key=True)
    rank: Mapped[int] = mapped_column(Integer, primary_key=True)
    report: Mapped[bytes] = mapped_column(LargeBinary)


class LabelRow(Base):
    """A label a planner has put on a design."""

    __tablename__ = "labels"

    design_id: Mapped[str] = mapped_column(ForeignKey("designs.id"), primary_key=True)
    label: Mapped[str] = mapped_column(String(LABEL_LENGTH), primary_key=True, index=True)


class ArchivedRow(Base):
    """A design put away: kept whole, but no longer in the list."""

    __tablename__ = "archived"

    design_id: Mapped[str] = mapped_column(ForeignKey("designs.id"), primary_key=True)
    archived_at: Mapped[datetime] = mapped_column(Moment)
