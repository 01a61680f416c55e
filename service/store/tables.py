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
    MetaData,
    String,
    Text,
    TypeDecorator,
)
from sqlalchemy.orm import DeclarativeBase, Mapped, mapped_column

#: Longest identifier and idempotency key.
KEY_LENGTH = 200

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


class DesignRow(Base):
    """A design: the request as accepted. Never changed."""

    __tablename__ = "designs"
    __table_args__ = (Index(None, "created_at", "id"),)

    id: Mapped[str] = mapped_column(String(32), primary_key=True)
    name: Mapped[str] = mapped_column(String(120))
    request: Mapped[str] = mapped_column(Text)
    content_hash: Mapped[str] = mapped_column(String(64), index=True)
    idempotency_key: Mapped[str | None] = mapped_column(String(KEY_LENGTH), unique=True)
    created_at: Mapped[datetime] = mapped_column(Moment)


class JobRow(Base):
    """The work on a design: the queue of record."""

    __tablename__ = "jobs"
    __table_args__ = (
        CheckConstraint("state IN ({})".format(", ".join(f"'{s}'" for s in _STATES)), name="state"),
        Index(None, "state", "priority", "position"),
        Index(None, "state", "lease_until"),
    )

    design_id: Mapped[str] = mapped_column(ForeignKey("designs.id"), primary_key=True)
    state: Mapped[str] = mapped_column(String(10))
    priority: Mapped[int] = mapped_column(Integer)
    #: Place in the queue among jobs of one priority: the moment of submission in µs.
    position: Mapped[int] = mapped_column(BigInteger)
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


class ResultRow(Base):
    """The stored result of a design: one at most, immutable."""

    __tablename__ = "results"

    design_id: Mapped[str] = mapped_column(ForeignKey("designs.id"), primary_key=True)
    engine_version: Mapped[str] = mapped_column(String(40))
    result: Mapped[str] = mapped_column(Text)
    created_at: Mapped[datetime] = mapped_column(Moment)


class ReportRow(Base):
    """The feed-impedance report of one candidate of a design."""

    __tablename__ = "reports"

    design_id: Mapped[str] = mapped_column(ForeignKey("designs.id"), primary_key=True)
    rank: Mapped[int] = mapped_column(Integer, primary_key=True)
    report: Mapped[str] = mapped_column(Text)
