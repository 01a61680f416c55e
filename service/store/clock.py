"""The clock of the queue: the database's own where it has one, so that workers agree."""

from __future__ import annotations

from datetime import UTC, datetime

from sqlalchemy import func, select
from sqlalchemy.orm import Session


def now(session: Session) -> datetime:
    """The present moment in UTC, by PostgreSQL's clock, or by this machine's for SQLite."""
    if session.get_bind().dialect.name == "postgresql":
        moment = session.scalar(select(func.clock_timestamp()))
        if isinstance(moment, datetime):
            return moment.astimezone(UTC)
    return datetime.now(UTC)
