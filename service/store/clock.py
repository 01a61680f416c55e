"""The clock of the queue: the database's own where it has one, so that workers agree."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import Final

from sqlalchemy import BigInteger, func, select
from sqlalchemy.ext.compiler import compiles
from sqlalchemy.orm import Session
from sqlalchemy.sql.compiler import SQLCompiler
from sqlalchemy.sql.functions import FunctionElement

_CLOCK: Final = select(func.clock_timestamp())


def now(session: Session) -> datetime:
    """The present moment in UTC, by PostgreSQL's clock, or by this machine's for SQLite."""
    if session.get_bind().dialect.name == "postgresql":
        moment = session.connection().scalar(_CLOCK)
        if isinstance(moment, datetime):
            return moment.astimezone(UTC)
    return datetime.now(UTC)


class microseconds(FunctionElement[int]):  # noqa: N801  # an SQL function is named as one
    """The present moment in µs since 1970, by the clock of the database (SQLite's tells ms)."""

    name = "microseconds"
    type = BigInteger()
    inherit_cache = True


@compiles(microseconds, "postgresql")
def _postgresql(_element: microseconds, _compiler: SQLCompiler, **_: object) -> str:
    return "CAST(EXTRACT(EPOCH FROM clock_timestamp()) * 1000000 AS BIGINT)"


@compiles(microseconds, "sqlite")
def _sqlite(_element: microseconds, _compiler: SQLCompiler, **_: object) -> str:
    # A Julian date is told in days; 2440587.5 is 1970-01-01.
    return "CAST(ROUND((julianday('now') - 2440587.5) * 86400000.0) AS INTEGER) * 1000"
