"""Batches as the command line prints them."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Final

from rich.console import Console
from rich.text import Text

from service.contracts import formats
from service.contracts.batch import Batch, BatchCounts, BatchItem
from worker.cli.plain_table import plain_table

_STATES: Final = ("queued", "running", "done", "failed", "cancelled")
#: Failures that are told of one by one below a batch.
_MOST_FAILURES: Final = 10


def show_batch(console: Console, batch: Batch, failed: Iterable[BatchItem] = ()) -> None:
    """Print where a batch stands, and the first of its failures with their reasons."""
    console.print(Text(f"{batch.name}  ({batch.id})", style="bold"))
    anew = ", planned anew" if batch.recompute else ""
    designs = "1 design" if batch.size == 1 else f"{batch.size:,} designs"
    console.print(
        Text(
            f"{designs}, {batch.priority}{anew}; submitted {batch.created_at:%Y-%m-%d %H:%M} UTC"
            + (f", ended {batch.finished_at:%Y-%m-%d %H:%M} UTC" if batch.finished_at else "")
        )
    )
    console.print(Text(f"{formats.share(batch.progress)}: {in_words(batch.counts)}"))
    for number, item in enumerate(failed):
        if number == _MOST_FAILURES:
            left = batch.counts.failed - _MOST_FAILURES
            console.print(Text(f"  and {left:,} more: spanwright batch designs --state failed"))
            break
        console.print(Text(f"  line {item.line}, {item.name}: {item.failure or 'no reason'}"))


def show_batches(console: Console, batches: Iterable[Batch]) -> None:
    """Print the list of batches, newest first."""
    table = plain_table("Batches")
    for title in ("id", "name", "designs", "priority", "state", "submitted (UTC)"):
        table.add_column(title, overflow="fold", justify="right" if title == "designs" else "left")
    for batch in batches:
        ended = batch.finished_at is not None
        state = in_words(batch.counts) if ended else formats.share(batch.progress)
        submitted = f"{batch.created_at:%Y-%m-%d %H:%M}"
        name, size = Text(batch.name), f"{batch.size:,}"
        table.add_row(batch.id, name, size, batch.priority, state, submitted)
    console.print(table)


def show_items(console: Console, items: Iterable[BatchItem]) -> None:
    """Print designs of a batch by line, each with where it stands."""
    table = plain_table("")
    for title in ("line", "id", "name", "state", "tries"):
        right = title in ("line", "tries")
        table.add_column(title, overflow="fold", justify="right" if right else "left")
    for item in items:
        state: str = item.state
        if item.state == "running":
            state = f"running, {formats.share(item.progress.fraction)}"
        elif item.failure is not None:
            state = f"{item.state}: {item.failure}"
        elif item.answered_by is not None:
            state = f"{item.state}, answered by {item.answered_by}"
        table.add_row(str(item.line), item.id, Text(item.name), Text(state), str(item.attempts))
    console.print(table)


def in_words(counts: BatchCounts) -> str:
    """How many are in each state: ``3 queued, 1 running, 12 done``; states of none are left out."""
    numbers = {state: getattr(counts, state) for state in _STATES}
    return ", ".join(f"{number:,} {state}" for state, number in numbers.items() if number)
