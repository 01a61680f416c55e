"""Migrations: they run by themselves, once, in either direction, on both databases."""

from __future__ import annotations

import shutil
import subprocess
import sys
import zipfile
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import ExitStack
from pathlib import Path

import pytest
from alembic.autogenerate import compare_metadata
from alembic.runtime.migration import MigrationContext
from sqlalchemy import Connection, Engine, inspect, text

from service.errors import SchemaMismatch
from service.settings import Settings
from service.store import schema
from service.store.connection import make_engine
from service.store.session import open_store
from service.store.tables import Base

CHECKOUT = Path(__file__).parents[2]
STARTERS = 3
TABLES = {
    "archived",
    "batches",
    "designs",
    "jobs",
    "labels",
    "reports",
    "results",
    "shares",
    "tallies",
    "workers",
}


@pytest.fixture
def engine(empty_database_url: str) -> Iterator[Engine]:
    engine = make_engine(empty_database_url)
    yield engine
    engine.dispose()


def tables(engine: Engine) -> set[str]:
    return set(inspect(engine).get_table_names()) - {"alembic_version"}


def differences(engine: Engine) -> list[object]:
    """What autogenerate would change to bring the database to the tables of the code."""

    def compare(connection: Connection) -> list[object]:
        options = {"compare_type": True, "compare_server_default": True}
        context = MigrationContext.configure(connection, opts=options)
        return list(compare_metadata(context, Base.metadata))

    with engine.connect() as connection:
        return compare(connection)


STARTER = """
import sys
from service.settings import Settings
from service.store.session import open_store
print("ready", flush=True)
sys.stdin.readline()
open_store(Settings(database_url=sys.argv[1])).close()
"""

# A migration that does something before it breaks.
BREAKING = """
import sqlalchemy as sa
from alembic import op

revision = "breaking"
down_revision = {head!r}
branch_labels = depends_on = None


def upgrade():
    op.create_table("half", sa.Column("id", sa.Integer()))
    raise ZeroDivisionError
"""


def test_the_first_start_makes_the_tables(engine: Engine, empty_database_url: str) -> None:
    open_store(Settings(database_url=empty_database_url)).close()
    assert tables(engine) == TABLES


def test_the_migrations_make_exactly_the_tables_of_the_code(engine: Engine) -> None:
    schema.upgrade(engine)
    assert differences(engine) == []


def test_every_migration_can_be_taken_back_and_made_again(engine: Engine) -> None:
    revisions = [script.revision for script in schema.scripts().walk_revisions()][::-1]
    for revision in revisions:
        schema.upgrade(engine, revision)
        schema.downgrade(engine, "-1")
        schema.upgrade(engine, revision)
    assert differences(engine) == []
    schema.downgrade(engine, "base")
    assert tables(engine) == set()
    schema.upgrade(engine)
    assert differences(engine) == []


def test_the_migrations_stand_in_one_line(engine: Engine) -> None:
    schema.upgrade(engine)
    assert len(schema.scripts().get_heads()) == 1


def test_processes_that_start_at_once_migrate_once(engine: Engine, empty_database_url: str) -> None:
    command = [sys.executable, "-c", STARTER, empty_database_url]
    with ExitStack() as stack:
        starters = [
            stack.enter_context(
                subprocess.Popen(
                    command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True, cwd=CHECKOUT
                )
            )
            for _ in range(STARTERS)
        ]
        for starter in starters:
            assert starter.stdout is not None
            assert starter.stdout.readline() == "ready\n"
        for starter in starters:
            assert starter.stdin is not None
            starter.stdin.close()
    assert [starter.returncode for starter in starters] == [0] * STARTERS
    assert differences(engine) == []


def test_a_start_waits_while_another_process_migrates(
    engine: Engine, empty_database_url: str
) -> None:
    settings = Settings(database_url=empty_database_url)
    with ThreadPoolExecutor(1) as pool:
        with engine.begin() as other:
            schema._alone(other)
            start = pool.submit(open_store, settings)
            with pytest.raises(TimeoutError):
                start.result(0.5)
        start.result(10.0).close()
    assert differences(engine) == []


def test_a_migration_that_breaks_leaves_the_database_as_it_was(
    engine: Engine, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    schema.upgrade(engine)
    own = tmp_path / "migrations"
    shutil.copytree(CHECKOUT / "migrations", own)
    head = schema.scripts().get_current_head()
    (own / "versions" / "29991231_breaking.py").write_text(BREAKING.format(head=head))
    monkeypatch.setattr(schema, "_script_location", lambda: own)
    with pytest.raises(ZeroDivisionError):
        schema.upgrade(engine)
    monkeypatch.undo()
    assert differences(engine) == []
    schema.upgrade(engine)


def test_a_database_of_a_newer_release_is_refused_and_left_alone(
    engine: Engine, empty_database_url: str
) -> None:
    schema.upgrade(engine)
    with engine.begin() as connection:
        connection.execute(text("UPDATE alembic_version SET version_num = '20990101_later'"))
    with pytest.raises(SchemaMismatch, match="20990101_later"):
        open_store(Settings(database_url=empty_database_url))
    assert tables(engine) == TABLES


def test_an_installed_wheel_carries_its_migrations(tmp_path: Path) -> None:
    subprocess.run(
        [sys.executable, "-m", "hatchling", "build", "--target", "wheel", "--directory", tmp_path],
        cwd=CHECKOUT,
        check=True,
        capture_output=True,
    )
    (wheel,) = tmp_path.glob("*.whl")
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(tmp_path / "installed")
    program = (
        "from service.store import schema; "
        "from service.store.session import open_store; "
        "from service.settings import Settings; "
        "open_store(Settings(database_url='sqlite:///it.db')).close(); "
        "print(schema.scripts().dir)"
    )
    run = subprocess.run(
        [sys.executable, "-c", program],
        cwd=tmp_path,
        env={"PYTHONPATH": str(tmp_path / "installed")},
        check=True,
        capture_output=True,
        text=True,
    )
    place = Path(run.stdout.strip())
    assert place == tmp_path / "installed" / "service" / "store" / "migrations"
