"""What is stored already when a migration comes keeps its order, its results and its keys."""

from __future__ import annotations

from collections.abc import Iterator

import pytest
from sqlalchemy import Engine, text

from service.errors import SchemaMismatch
from service.store import schema
from service.store.connection import make_engine
from service.store.packing import unpack

FIRST = "20261201_designs_and_jobs"
BATCHES = "20261202_batches_and_shares"
DONE, LATER, SOONER = "a" * 32, "b" * 32, "c" * 32
MOMENT = "2026-12-01 12:00:00"


@pytest.fixture
def engine(empty_database_url: str) -> Iterator[Engine]:
    engine = make_engine(empty_database_url)
    yield engine
    engine.dispose()


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
