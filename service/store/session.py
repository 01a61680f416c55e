"""One way to the database: a scope that commits or rolls back, and is run again where it must be.

SQLite is opened with a write-ahead log and full synchronisation; whoever means to write says so
from the start (BEGIN IMMEDIATE), for a reader that turns writer is refused without waiting.
"""

from __future__ import annotations

import logging
import random
import sqlite3
import time
from collections.abc import Callable
from typing import Final, TypeVar

from sqlalchemy import Connection, Engine, create_engine, event
from sqlalchemy.engine.interfaces import DBAPIConnection
from sqlalchemy.exc import InterfaceError, OperationalError
from sqlalchemy.orm import Session
from sqlalchemy.pool import ConnectionPoolEntry

from service.errors import StoreUnavailable
from service.settings import Settings
from service.store.schema import upgrade

T = TypeVar("T")

_log = logging.getLogger(__name__)

#: A transaction that meets a database that is away is tried again for about so long.
PATIENCE_S: Final = 30.0
_FIRST_PAUSE_S: Final = 0.05
_LONGEST_PAUSE_S: Final = 2.0
_SQLITE_BUSY_MS: Final = 10_000
_SQLITE_PRIMARY_CODE: Final = 0xFF
_SQLITE_PASSING: Final = (
    sqlite3.SQLITE_BUSY,
    sqlite3.SQLITE_LOCKED,
    sqlite3.SQLITE_IOERR,
    sqlite3.SQLITE_CANTOPEN,
)


class Store:
    """The database of one process.

    Parameters
    ----------
    engine : Engine
    patience_s : float
        How long a transaction is tried again while the database is away.
    """

    def __init__(self, engine: Engine, patience_s: float = PATIENCE_S) -> None:
        self._engine = engine
        self._patience_s = patience_s

    @property
    def is_sqlite(self) -> bool:
        """Whether the database is SQLite, which has one writer at a time and no SKIP LOCKED."""
        return self._engine.dialect.name == "sqlite"

    def read(self, work: Callable[[Session], T]) -> T:
        """Run a transaction that only reads; it may be run more than once."""
        return self._run(work, writes=False)

    def write(self, work: Callable[[Session], T]) -> T:
        """Run a transaction that writes, whole or not at all; it may be run more than once.

        Raises
        ------
        StoreUnavailable
            If the database stays away longer than the store's patience.
        """
        return self._run(work, writes=True)

    def close(self) -> None:
        """Give back every connection."""
        self._engine.dispose()

    def _run(self, work: Callable[[Session], T], *, writes: bool) -> T:
        give_up_at = time.monotonic() + self._patience_s
        pause_s = _FIRST_PAUSE_S
        while True:
            try:
                return self._once(work, writes=writes)
            except (OperationalError, InterfaceError) as error:
                if not _will_pass(error):
                    raise
                if time.monotonic() + pause_s > give_up_at:
                    raise StoreUnavailable(
                        f"The database did not answer within {self._patience_s:.0f} s."
                    ) from error
                _log.warning("the database is away or busy, trying again: %s", error.orig)
            time.sleep(pause_s * random.uniform(0.5, 1.0))  # noqa: S311  # jitter, no secret
            pause_s = min(2.0 * pause_s, _LONGEST_PAUSE_S)

    def _once(self, work: Callable[[Session], T], *, writes: bool) -> T:
        options = {"spanwright_writes": writes}
        with (
            self._engine.connect().execution_options(**options) as connection,
            Session(connection, expire_on_commit=False) as session,
            session.begin(),
        ):
            return work(session)


def _will_pass(error: OperationalError | InterfaceError) -> bool:
    """Whether the database is away or busy; a mistake in our own SQL must not be tried again.

    psycopg tells the two apart by class, sqlite3 only by its error code.
    """
    code = getattr(error.orig, "sqlite_errorcode", None)
    return code is None or code & _SQLITE_PRIMARY_CODE in _SQLITE_PASSING


def open_store(settings: Settings, patience_s: float = PATIENCE_S) -> Store:
    """Open the database of the settings, bringing its schema up to date first.

    Raises
    ------
    StoreUnavailable
        If the database does not answer.
    SchemaMismatch
        If it was made by a newer release.
    """
    engine = make_engine(settings.database_url)
    try:
        upgrade(engine)
    except OperationalError as error:
        engine.dispose()
        raise StoreUnavailable(f"The database cannot be opened: {error.orig}") from error
    except BaseException:
        engine.dispose()
        raise
    return Store(engine, patience_s)


def make_engine(database_url: str) -> Engine:
    """An engine for either database, with what each needs set on every connection."""
    if not database_url.startswith("sqlite"):
        return create_engine(database_url, pool_pre_ping=True)
    engine = create_engine(database_url)
    event.listen(engine, "connect", _prepare_sqlite)
    event.listen(engine, "begin", _begin_sqlite)
    return engine


def _prepare_sqlite(connection: DBAPIConnection, _entry: ConnectionPoolEntry) -> None:
    # The driver must not begin transactions by itself: _begin_sqlite does.
    connection.isolation_level = None
    cursor = connection.cursor()
    for pragma in (
        f"busy_timeout = {_SQLITE_BUSY_MS}",
        "journal_mode = WAL",
        "synchronous = FULL",
        "foreign_keys = ON",
    ):
        cursor.execute(f"PRAGMA {pragma}")
    cursor.close()


def _begin_sqlite(connection: Connection) -> None:
    writes = connection.get_execution_options().get("spanwright_writes", True)
    connection.exec_driver_sql("BEGIN IMMEDIATE" if writes else "BEGIN")
