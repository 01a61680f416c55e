"""One way to the database: a scope that commits or rolls back, and is run again if need be."""

from __future__ import annotations

import logging
import random
import sqlite3
import time
from collections.abc import Callable
from concurrent.futures import Future
from threading import Lock, Thread
from typing import Final, TypeVar

from sqlalchemy import Engine, select
from sqlalchemy.exc import DBAPIError, InterfaceError, OperationalError
from sqlalchemy.exc import TimeoutError as PoolExhausted
from sqlalchemy.orm import Session

from service.errors import StoreUnavailable
from service.settings import Settings
from service.store.connection import SYNCED, WRITES, make_engine
from service.store.schema import upgrade

T = TypeVar("T")

_log = logging.getLogger(__name__)

#: A transaction that meets a database that is away is tried again for about so long.
PATIENCE_S: Final = 30.0
#: Whoever asks only whether the database answers waits for so long.
PING_S: Final = 2.0
_FIRST_PAUSE_S: Final = 0.05
_LONGEST_PAUSE_S: Final = 2.0
_SQLITE_PRIMARY_CODE: Final = 0xFF
_SQLITE_PASSING: Final = (
    sqlite3.SQLITE_BUSY,
    sqlite3.SQLITE_LOCKED,
    sqlite3.SQLITE_IOERR,
    sqlite3.SQLITE_FULL,
    sqlite3.SQLITE_CANTOPEN,
    sqlite3.SQLITE_PROTOCOL,
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
        self._pinging = Lock()

    def read(self, work: Callable[[Session], T]) -> T:
        """Run a transaction that only reads; it may be run more than once."""
        return riding_out(lambda: self._once(work, writes=False), self._patience_s)

    def write(self, work: Callable[[Session], T], *, outlives_machine: bool = True) -> T:
        """Run a transaction that writes, whole or not at all; it may be run more than once.

        Where the answer to its commit was lost it is run again although it took effect, so it
        must find out by itself what it has done already.

        Parameters
        ----------
        work : callable
        outlives_machine : bool
            False for what is worth nothing once the processes of this machine are gone, as the
            claim of one of them: SQLite then does not wait for the disk, and a loss of power
            may undo it. PostgreSQL, whose clients live elsewhere, always waits.

        Raises
        ------
        StoreUnavailable
            If the database stays away longer than the store's patience.
        """
        return riding_out(
            lambda: self._once(work, writes=True, synced=outlives_machine), self._patience_s
        )

    def ping(self, patience_s: float = PING_S) -> None:
        """Ask the database for an answer, without the patience that work is given.

        Raises
        ------
        StoreUnavailable
            If it does not answer in time, be it that a connection hangs.
        """
        # One at a time, so that a database that hangs does not use up connections and threads.
        if not self._pinging.acquire(timeout=patience_s):
            raise StoreUnavailable("The database has not answered since it was last asked.")
        # From a thread of its own, for a database that is frozen keeps whoever asks it.
        answered: Future[None] = Future()
        Thread(target=self._ask, args=(answered, patience_s), name="ping", daemon=True).start()
        try:
            answered.result(patience_s)
        except TimeoutError as error:
            raise StoreUnavailable(
                f"The database did not answer within {patience_s:g} s."
            ) from error

    def close(self) -> None:
        """Give back every connection."""
        self._engine.dispose()

    def _ask(self, answered: Future[None], patience_s: float) -> None:
        try:
            riding_out(
                lambda: self._once(lambda session: session.scalar(select(1)), writes=False),
                patience_s,
            )
        except BaseException as error:  # noqa: BLE001  # handed over to whoever asked
            answered.set_exception(error)
        else:
            answered.set_result(None)
        finally:
            self._pinging.release()

    def _once(self, work: Callable[[Session], T], *, writes: bool, synced: bool = True) -> T:
        options = {WRITES: writes, SYNCED: synced}
        with (
            self._engine.connect().execution_options(**options) as connection,
            Session(connection, expire_on_commit=False) as session,
            session.begin(),
        ):
            return work(session)


def open_store(settings: Settings, patience_s: float = PATIENCE_S) -> Store:
    """Open the database of the settings, bringing its schema up to date first.

    Raises
    ------
    StoreUnavailable
        If the database does not answer within the patience.
    SchemaMismatch
        If it was made by a newer release.
    """
    engine = make_engine(settings.database_url)
    try:
        riding_out(lambda: upgrade(engine), patience_s)
    except BaseException:
        engine.dispose()
        raise
    return Store(engine, patience_s)


def riding_out(transaction: Callable[[], T], patience_s: float) -> T:
    """Run a transaction, again and again while the database is away or busy, but not for ever.

    Raises
    ------
    StoreUnavailable
        If the patience is at its end.
    """
    give_up_at = time.monotonic() + patience_s
    pause_s = _FIRST_PAUSE_S
    while True:
        try:
            return transaction()
        except PoolExhausted as error:
            # Every connection of this process has been in use for the pool's own patience.
            raise StoreUnavailable("Too much is asked of the database at once.") from error
        except DBAPIError as error:
            if not _will_pass(error):
                raise
            if time.monotonic() + pause_s > give_up_at:
                raise StoreUnavailable(
                    f"The database did not answer within {patience_s:.0f} s."
                ) from error
            # Once a transaction: an outage has many of them, each of which tries many times.
            level = logging.WARNING if pause_s == _FIRST_PAUSE_S else logging.DEBUG
            _log.log(level, "the database is away or busy, trying again: %s", error.orig)
        time.sleep(pause_s * random.uniform(0.5, 1.0))  # noqa: S311  # jitter, no secret
        pause_s = min(2.0 * pause_s, _LONGEST_PAUSE_S)


def _will_pass(error: DBAPIError) -> bool:
    """Whether the database is away or busy; a mistake in our own SQL must not be tried again.

    psycopg tells the two apart by class, sqlite3 only by its error code. Whatever else ended
    the connection passes with it, as when PostgreSQL has given up a transaction that was idle
    for too long, because its process was frozen.
    """
    if error.connection_invalidated:
        return True
    code = getattr(error.orig, "sqlite_errorcode", None)
    if code is not None:
        return code & _SQLITE_PRIMARY_CODE in _SQLITE_PASSING
    return isinstance(error, OperationalError | InterfaceError)
