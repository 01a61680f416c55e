"""The verdict: what the store holds in the end, held against what the executions told."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from service.store import designs
from service.store.session import Store
from service.store.tables import BatchRow, DesignRow, JobRow, ResultRow
from tests.chaos.record import Record, note_of


@dataclass(frozen=True, slots=True)
class Verdict:
    """Totals of a run, and every promise that was broken, in words."""

    accepted: int
    done: int
    executions: int
    refused_late: int
    violations: tuple[str, ...]


def judge(
    store: Store,
    record: Record,
    accepted: int,
    singles: Mapping[str, str],
    batches: Mapping[str, str],
) -> Verdict:
    """Hold what was accepted, by key, against the store and the record.

    Lost is what was accepted and is not done; stored twice what more than one execution was
    told to have stored, or whose result is of another execution than the one that ended it.
    """
    rows = store.read(_rows)
    states = Counter(state for _, _, state, _ in rows)
    violations = [
        *_of_acceptance(store, rows, accepted, singles, batches),
        *(f"lost: {design_id} is {state}" for design_id, _, state, _ in rows if state != "done"),
        *_of_results(store, rows, record),
    ]
    steps = record.look()
    return Verdict(
        accepted=accepted,
        done=states["done"],
        executions=sum(step.what == "claimed" for step in steps),
        refused_late=sum(step.what == "refused" for step in steps),
        violations=tuple(violations),
    )


_Row = tuple[str, str | None, str, int]


def _rows(session: Session) -> list[_Row]:
    query = select(DesignRow.id, DesignRow.idempotency_key, JobRow.state, JobRow.fence).join(
        JobRow, JobRow.design_id == DesignRow.id
    )
    return [(row[0], row[1], row[2], row[3]) for row in session.execute(query)]


def _of_acceptance(
    store: Store,
    rows: list[_Row],
    accepted: int,
    singles: Mapping[str, str],
    batches: Mapping[str, str],
) -> list[str]:
    kept = {key: design_id for design_id, key, _, _ in rows if key is not None}
    query = select(BatchRow.idempotency_key, BatchRow.id)
    kept_batches = store.read(lambda session: {row[0]: row[1] for row in session.execute(query)})
    violations = []
    if len(rows) != accepted:
        violations.append(f"{accepted} designs were accepted, {len(rows)} are stored")
    if kept != singles:
        violations.append("the designs stored under keys are not the ones accepted")
    if kept_batches != batches:
        violations.append("the batches stored under keys are not the ones accepted")
    return violations


def _of_results(store: Store, rows: list[_Row], record: Record) -> list[str]:
    results = store.read(lambda session: session.scalar(select(func.count(ResultRow.design_id))))
    violations = [] if results == len(rows) else [f"{len(rows)} designs have {results} results"]
    stored, refused = Counter[str](), Counter[tuple[str, int]]()
    for step in record.look():
        if step.what == "stored":
            stored[step.design_id] += 1
        elif step.what == "refused":
            refused[step.design_id, step.fence] += 1
    violations += [
        f"{each} was stored {times} times" for each, times in stored.items() if times > 1
    ]
    for design_id, _, state, fence in rows:
        if refused[design_id, fence]:
            violations.append(f"{design_id}: the execution that ended it was refused")
        result = designs.get(store, design_id).result if state == "done" else None
        if result is not None and result.notes != (note_of(design_id, fence),):
            violations.append(f"{design_id}: its result is of another execution: {result.notes}")
    return violations
