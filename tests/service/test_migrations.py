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
from service.store.packing import unpack
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


# ------------------------------------------------------------- what is stored already
FIRST = "20261201_designs_and_jobs"
BATCHES = "20261202_batches_and_shares"
DONE, LATER, SOONER = "a" * 32, "b" * 32, "c" * 32
MOMENT = "2026-12-01 12:00:00"


def store_in_the_first_form(engine: Engine) -> None:
    """Store a design that is done, with its report, and two that wait, the second sent first."""
    designs = "INSERT INTO designs VALUES (:id, 'A name', '{}', :hash, :key, :moment)"
    jobs = (
        "INSERT INTO jobs (design_id, state, priority, position, attempts, fence, cancel_wanted,"
        " progress, step) VALUES (:id, :state, 100, :position, 1, 2, :no, 1.0, 'a step')"
    )
    with engine.begin() as connection:
        for id_, key, state, position in (
            (DONE, "key", "done", 1_764_000_000_000_001),
            (LATER, None, "queued", 1_764_000_000_000_009),
            (SOONER, None, "queued", 1_764_000_000_000_005),
        ):
            given = {"id": id_, "hash": f"hash of {id_[0]}", "key": key, "moment": MOMENT}
            connection.execute(text(designs), given)
            connection.execute(
                text(jobs), {"id": id_, "state": state, "position": position, "no": False}
            )
        stored = {"id": DONE, "text": "the résult", "moment": MOMENT}
        connection.execute(text("INSERT INTO results VALUES (:id, '0.1', :text, :moment)"), stored)
        connection.execute(text("INSERT INTO reports VALUES (:id, 1, 'report 1')"), stored)
        connection.execute(text("INSERT INTO reports VALUES (:id, 2, 'report 2')"), stored)


def rows(engine: Engine, query: str) -> list[tuple[object, ...]]:
    with engine.connect() as connection:
        return [tuple(row) for row in connection.execute(text(query))]


def test_what_was_stored_before_batches_keeps_its_order_and_its_results(engine: Engine) -> None:
    schema.upgrade(engine, FIRST)
    store_in_the_first_form(engine)
    schema.upgrade(engine, BATCHES)
    assert rows(engine, "SELECT design_id, position, owner FROM jobs ORDER BY position") == [
        (DONE, 1, "local"),
        (SOONER, 2, "local"),
        (LATER, 3, "local"),
    ]
    shares = "SELECT owner, priority, served, at, singles_at FROM shares"
    assert rows(engine, shares) == [("local", 100, 0, 0, 3)]
    ((content_hash, result),) = rows(engine, "SELECT content_hash, result FROM results")
    assert content_hash == "hash of a"
    assert isinstance(result, bytes)
    assert unpack(result) == "the résult"
    reports = rows(engine, "SELECT report FROM reports ORDER BY rank")
    assert [unpack(report) for (report,) in reports if isinstance(report, bytes)] == [
        "report 1",
        "report 2",
    ]


def test_taken_back_what_another_result_answers_has_a_copy_and_results_are_plain(
    engine: Engine,
) -> None:
    schema.upgrade(engine, FIRST)
    store_in_the_first_form(engine)
    schema.upgrade(engine, BATCHES)
    with engine.begin() as connection:
        # Answered by another's result, and under the key another owner uses too.
        answer = "UPDATE designs SET answered_by = :done, idempotency_key = 'key', owner = 'ann'"
        given = {"done": DONE, "later": LATER}
        connection.execute(text(answer + " WHERE id = :later"), given)
    schema.downgrade(engine, FIRST)
    assert rows(engine, "SELECT design_id, result FROM results ORDER BY design_id") == [
        (DONE, "the résult"),
        (LATER, "the résult"),
    ]
    assert rows(engine, f"SELECT rank, report FROM reports WHERE design_id = '{LATER}'") == [  # noqa: S608  # an identifier of ours
        (1, "report 1"),
        (2, "report 2"),
    ]
    assert rows(engine, "SELECT idempotency_key FROM designs ORDER BY id") == [
        ("key",),
        (None,),
        (None,),
    ]


def test_a_migration_that_would_leave_rows_without_their_design_changes_nothing(
    engine: Engine,
) -> None:
    if engine.dialect.name != "sqlite":
        # PostgreSQL never lets such a row in.
        return
    schema.upgrade(engine, FIRST)
    store_in_the_first_form(engine)
    raw = engine.raw_connection()
    raw.execute("PRAGMA foreign_keys = OFF")
    raw.execute("INSERT INTO reports VALUES ('of no design', 1, 'a report')")
    raw.close()
    engine.dispose()
    with pytest.raises(SchemaMismatch, match="Nothing was changed"):
        schema.upgrade(engine, BATCHES)
    assert rows(engine, "SELECT version_num FROM alembic_version") == [(FIRST,)]


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
