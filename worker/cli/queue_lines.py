"""The queue as the command line prints it."""

from __future__ import annotations

from rich.console import Console
from rich.text import Text

from service.contracts import formats
from service.contracts.queue_view import QueueView, QueueWorker, RunningDesign
from worker.cli.plain_table import plain_table


def show_queue(console: Console, queue: QueueView) -> None:
    """Print what waits and runs by priority and owner, and who works at what."""
    oldest = ""
    if queue.oldest_wait_s is not None:
        oldest = f", the longest for {duration(queue.oldest_wait_s)}"
    console.print(Text(f"{queue.waiting:,} waiting{oldest}; {queue.running:,} running"))
    if queue.shares:
        _show_shares(console, queue)
    if queue.workers:
        _show_workers(console, queue)
    else:
        console.print(Text("No worker is there: 'spanwright serve' or 'spanwright drain' is one."))
    for design in queue.left:
        console.print(
            Text(f"Its worker is gone, it waits again when its lease ends: {_design(design)}")
        )


def duration(seconds: float) -> str:
    """A time as one says it: ``12 s``, ``3 min``, ``5 h 20 min``, ``3 d 4 h``."""
    if seconds < 100.0:
        return f"{seconds:.0f} s"
    minutes = round(seconds / 60.0)
    if minutes < 100:
        return f"{minutes} min"
    hours, minutes = divmod(minutes, 60)
    if hours < 48:
        return f"{hours} h {minutes} min"
    days, hours = divmod(hours, 24)
    return f"{days} d {hours} h"


def _show_shares(console: Console, queue: QueueView) -> None:
    table = plain_table("Waiting and running")
    for title in ("priority", "owner", "waiting", "running", "longest wait"):
        left = title in ("priority", "owner")
        table.add_column(title, overflow="fold", justify="left" if left else "right")
    for share in queue.shares:
        wait = "–" if share.oldest_wait_s is None else duration(share.oldest_wait_s)
        owner = Text(share.owner)
        table.add_row(share.priority, owner, f"{share.waiting:,}", f"{share.running:,}", wait)
    console.print(table)


def _show_workers(console: Console, queue: QueueView) -> None:
    table = plain_table("Workers")
    for title in ("worker", "engine", "seen", "at"):
        table.add_column(title, overflow="fold")
    for worker in queue.workers:
        table.add_row(
            Text(f"{worker.name} ({worker.carrier})"),
            Text(worker.engine_version),
            f"{duration(worker.seen_s)} ago",
            Text(_work(worker)),
        )
    console.print(table)


def _work(worker: QueueWorker) -> str:
    return "\n".join(map(_design, worker.works_on)) or "nothing"


def _design(design: RunningDesign) -> str:
    attempt = f", attempt {design.attempts}" if design.attempts > 1 else ""
    line = f", line {design.batch_line} of batch {design.batch_id}" if design.batch_id else ""
    return (
        f"{design.name} ({design.id}){line}{attempt}: "
        f"{formats.share(design.progress.fraction)} after {duration(design.running_s)}"
    )
