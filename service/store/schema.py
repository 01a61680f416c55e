"""The schema and its migrations: Alembic, configured in code, run by itself on first start."""

from __future__ import annotations

from pathlib import Path
from typing import Final

from alembic import command
from alembic.config import Config
from alembic.runtime.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import Connection, Engine, text

from service.errors import SchemaMismatch

_HERE: Final = Path(__file__).resolve().parent

#: PostgreSQL's advisory lock that lets one process migrate while the others wait: the letters
#: "span" as a number.
_MIGRATION_LOCK: Final = 0x7370616E


def upgrade(engine: Engine, revision: str = "head") -> None:
    """Bring a database up to a revision; processes that start together do it once.

    Raises
    ------
    SchemaMismatch
        If the database is at a revision this release does not know.
    """
    with engine.connect() as connection, connection.begin():
        # SQLite's writers are alone from BEGIN IMMEDIATE on.
        if connection.dialect.name == "postgresql":
            connection.execute(text(f"SELECT pg_advisory_xact_lock({_MIGRATION_LOCK})"))
        _refuse_unknown(connection)
        command.upgrade(_config(connection), revision)


def downgrade(engine: Engine, revision: str) -> None:
    """Take a database back to an earlier revision, or to ``base``, which is empty."""
    with engine.connect() as connection, connection.begin():
        command.downgrade(_config(connection), revision)


def scripts() -> ScriptDirectory:
    """The migrations of this release."""
    return ScriptDirectory.from_config(_config(None))


def _refuse_unknown(connection: Connection) -> None:
    current = MigrationContext.configure(connection).get_current_revision()
    known = {script.revision for script in scripts().walk_revisions()}
    if current is not None and current not in known:
        raise SchemaMismatch(
            f"The database is at revision {current}, which this release does not know. "
            "Run a newer release, or restore a backup made by this one."
        )


def _config(connection: Connection | None) -> Config:
    config = Config()
    config.set_main_option("script_location", str(_script_location()).replace("%", "%%"))
    config.attributes["connection"] = connection
    return config


def _script_location() -> Path:
    """Inside an installed wheel the migrations lie beside this file, else in the checkout."""
    installed = _HERE / "migrations"
    return installed if installed.is_dir() else _HERE.parents[1] / "migrations"
