"""The queue: a look at it, and a process that empties it. Both go to the database itself."""

from __future__ import annotations

import sys
from contextlib import closing
from typing import Annotated, Final

import typer
from rich.console import Console

from service import journal
from service.settings import settings_here
from service.store import queue_view
from service.store.session import open_store
from worker.cli import queue_lines
from worker.cli.draining import drain_here
from worker.cli.exit_status import ExitStatus
from worker.cli.progress_bar import progress_bar

out: Final = Console()
err: Final = Console(stderr=True)


def add_to(app: typer.Typer) -> None:
    """Add these commands to an application."""
    app.command()(queue)
    app.command()(drain)


def queue(
    as_json: Annotated[bool, typer.Option("--json", help="Print JSON, not tables.")] = False,
) -> None:
    """Show what waits and runs by priority and owner, and which workers are at what.

    It reads the database named by SPANWRIGHT_DATABASE_URL, so it works without a service.
    """
    with closing(open_store(settings_here())) as store:
        seen = queue_view.view(store)
    if as_json:
        sys.stdout.write(seen.model_dump_json(indent=2) + "\n")
    else:
        queue_lines.show_queue(out, seen)


def drain() -> None:
    """Run jobs in this process until none waits, showing how far it is, then end.

    It works on the database named by SPANWRIGHT_DATABASE_URL, beside other workers if there
    are any. Ctrl-C or SIGTERM gives back the job under way. Exit status: 0 nothing waits any
    more; 2 a setting is refused; 3 nothing waits, but some of the designs run here failed;
    4 the database does not answer; 6 stopped before the queue was empty; 75 a design would not
    stop when it was cancelled or took too long, and ended this process: drain again.
    """
    settings = settings_here()
    journal.set_up(settings)
    with closing(open_store(settings)) as store, progress_bar(err, "looking") as show:
        drained = drain_here(store, settings, show)
    err.print(drained.in_words(), highlight=False)
    if drained.stopped:
        raise typer.Exit(ExitStatus.STOPPED)
    if drained.failed:
        raise typer.Exit(ExitStatus.FAILED)
