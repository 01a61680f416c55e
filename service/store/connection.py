"""Connections to either database, with what each needs set on every one of them.

SQLite is opened with a write-ahead log and full synchronisation; whoever means to write says so
from the start (BEGIN IMMEDIATE), for a reader that turns writer is refused without waiting.
PostgreSQL is told how long a statement may take and how long a lock may be held by a client
that has fallen silent, so that a frozen worker cannot keep its job from the others.
"""

from __future__ import annotations

from typing import Final

from sqlalchemy import Connection, Engine, create_engine, event
from sqlalchemy.engine.interfaces import DBAPIConnection
from sqlalchemy.exc import ArgumentError
from sqlalchemy.pool import ConnectionPoolEntry

from service.settings import SettingRefused

#: Name of the execution option that says whether a transaction is going to write.
WRITES: Final = "spanwright_writes"
#: Name of the execution option that says whether a commit waits until the disk has it.
SYNCED: Final = "spanwright_synced"

SQLITE_BUSY_MS: Final = 10_000

_POSTGRESQL: Final = {
    "connect_timeout": 5,
    "keepalives_idle": 10,
    "keepalives_interval": 5,
    "keepalives_count": 3,
    "options": " ".join(
        (
            "-c lock_timeout=10s",
            "-c statement_timeout=30s",
            "-c idle_in_transaction_session_timeout=20s",
        )
    ),
}


def make_engine(database_url: str) -> Engine:
    """An engine for a database of either kind.

    Raises
    ------
    SettingRefused
        If the URL cannot be read, or its driver is not installed.
    """
    if not database_url.startswith("sqlite"):
        return _postgresql_engine(database_url)
    engine = create_engine(database_url)
    event.listen(engine, "connect", _prepare_sqlite)
    event.listen(engine, "begin", _begin_sqlite)
    return engine


def _postgresql_engine(database_url: str) -> Engine:
    # Whatever is wrong is told without the URL and without its cause, for it holds a password.
    try:
        return create_engine(database_url, pool_pre_ping=True, connect_args=_POSTGRESQL)
    except ModuleNotFoundError:
        reason = "the driver of PostgreSQL is not installed; it comes with spanwright[postgres]"
    except (ArgumentError, ValueError):
        reason = "it cannot be read; signs such as / @ : in a password are written as %2F %40 %3A"
    raise SettingRefused({"database_url": reason})


def _prepare_sqlite(connection: DBAPIConnection, _entry: ConnectionPoolEntry) -> None:
    # The driver must not begin transactions by itself: _begin_sqlite does.
    connection.isolation_level = None
    cursor = connection.cursor()
    for pragma in (
        f"busy_timeout = {SQLITE_BUSY_MS}",
        "journal_mode = WAL",
        "synchronous = FULL",
        "foreign_keys = ON",
    ):
        cursor.execute(f"PRAGMA {pragma}")
    cursor.close()


def _begin_sqlite(connection: Connection) -> None:
    options = connection.get_execution_options()
    writes, synced = options.get(WRITES, True), options.get(SYNCED, True)
    # Past SQLAlchemy, which would first begin a transaction, and inside one it has no effect.
    cursor = connection.connection.cursor()
    cursor.execute(f"PRAGMA synchronous = {'FULL' if synced else 'NORMAL'}")
    cursor.close()
    connection.exec_driver_sql("BEGIN IMMEDIATE" if writes else "BEGIN")
