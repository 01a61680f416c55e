"""The schema and its migrations: Alembic, configured in code, run by itself on first start."""

from __future__ import annotations

import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Final

from alembic import command
from alembic.config import Config
from alembic.runtime.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import Connection, Engine, text

from service.errors import SchemaMismatch
from service.store.connection import WRITES

_HERE: Final = Path(__file__).resolve().parent

#: PostgreSQL's advisory lock that lets one process migrate while the others wait: the letters
#: "span" as a number.
_MIGRATION_LOCK: Final = 0x7370616E

# Alembic keeps its migration context in a module, so that one process migrates one at a time.
_one_at_a_time: Final = threading.Lock()


def upgrade(engine: Engine, revision: str = "head") -> None:
    """Bring a database up to a revision; processes that start together do it once.

    Raises
    ------
    SchemaMismatch
        If the database is at a revision this release does not know.
    """
    with _one_at_a_time:
        # A look first: what is up to date already must not wait for writers.
        with engine.connect().execution_options(**{WRITES: False}) as connection:
            if revision == "head" and _current(connection) == scripts().get_current_head():
                return
        with _migrating(engine) as connection:
            _refuse_unknown(connection)
            command.upgrade(_config(connection), revision)


def downgrade(engine: Engine, revision: str) -> None:
    """Take a database back to an earlier revision, or to ``base``, which is empty."""
    with _one_at_a_time, _migrating(engine) as connection:
        command.downgrade(_config(connection), revision)


def scripts() -> ScriptDirectory:
    """The migrations of this release."""
    return ScriptDirectory.from_config(_config(None))


@contextmanager
def _migrating(engine: Engine) -> Iterator[Connection]:
    """A transaction to migrate in, alone; on SQLite with foreign keys looked at at its end.

    SQLite alters a table by making another in its place, and would take the rows that refer to
    the old one for orphans.
    """
    with engine.connect() as connection:
        _enforce_foreign_keys(connection, enforced=False)
        try:
            with connection.begin():
                _alone(connection)
                yield connection
                _refuse_orphans(connection)
        finally:
            _enforce_foreign_keys(connection, enforced=True)


def _enforce_foreign_keys(connection: Connection, *, enforced: bool) -> None:
    if connection.dialect.name == "sqlite" and not connection.invalidated:
        # Past SQLAlchemy, for inside a transaction it has no effect.
        cursor = connection.connection.cursor()
        cursor.execute(f"PRAGMA foreign_keys = {'ON' if enforced else 'OFF'}")
        cursor.close()


def _refuse_orphans(connection: Connection) -> None:
    if connection.dialect.name != "sqlite":
        return
    orphans = connection.exec_driver_sql("PRAGMA foreign_key_check").all()
    if orphans:
        raise SchemaMismatch(
            f"The migration would leave {len(orphans)} rows without what they refer to, the first "
            f"in the table {orphans[0][0]}. Nothing was changed; restore a backup."
        )


def _alone(connection: Connection) -> None:
    # SQLite's writers are alone from BEGIN IMMEDIATE on. On PostgreSQL a migration may take
    # longer than any other statement, and so may the wait for another process's.
    if connection.dialect.name == "postgresql":
        connection.execute(text("SET LOCAL statement_timeout = 0"))
        connection.execute(text("SET LOCAL lock_timeout = 0"))
        connection.execute(text(f"SELECT pg_advisory_xact_lock({_MIGRATION_LOCK})"))


def _refuse_unknown(connection: Connection) -> None:
    current = _current(connection)
    known = {script.revision for script in scripts().walk_revisions()}
    if current is not None and current not in known:
        raise SchemaMismatch(
            f"The database is at revision {current}, which this release does not know. "
            "Run a newer release, or restore a backup made by this one."
        )


def _current(connection: Connection) -> str | None:
    return MigrationContext.configure(connection).get_current_revision()


def _config(connection: Connection | None) -> Config:
    config = Config()
    config.set_main_option("script_location", str(_script_location()).replace("%", "%%"))
    config.attributes["connection"] = connection
    return config


def _script_location() -> Path:
    """Inside an installed wheel the migrations lie beside this file, else in the checkout."""
    installed = _HERE / "migrations"
    return installed if installed.is_dir() else _HERE.parents[1] / "migrations"
