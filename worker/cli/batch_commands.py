"""Batches: many requests submitted, followed and taken away as one."""

from __future__ import annotations

import sys
import uuid
from collections.abc import Iterable
from contextlib import ExitStack
from pathlib import Path
from typing import Annotated, Any, BinaryIO, Final

import typer
from pydantic import BaseModel
from rich.console import Console
from typer.core import TyperGroup

from service.contracts.batch import Batch, BatchRequest
from service.errors import Fault, RequestRefused
from worker.cli import batch_lines
from worker.cli.batch_client import BatchClient
from worker.cli.batch_file import read_batch
from worker.cli.client import HERE, ServiceUnreachable
from worker.cli.exit_status import ExitStatus
from worker.cli.progress_bar import progress_bar

out: Final = Console()
err: Final = Console(stderr=True)

_HELP_WORDS: Final = ("--help", "--install-completion", "--show-completion")

BatchId = Annotated[str, typer.Argument(metavar="BATCH", help="Identifier of a batch.")]
AsJson = Annotated[bool, typer.Option("--json", help="Print JSON for scripts, not tables.")]
Address = Annotated[
    str, typer.Option("--service", envvar="SPANWRIGHT_SERVICE", help="Address of the service.")
]
Patience = Annotated[float, typer.Option("--patience", metavar="S", help="Wait at most so long.")]

#: A batch may take as long as the night.
_PATIENCE_S: Final = 12 * 3600.0


class _SubmitsByDefault(TyperGroup):
    """Takes what is no verb for what to submit, so that ``batch FILE`` submits a file."""

    def parse_args(self, ctx: Any, args: list[str]) -> list[str]:  # noqa: ANN401  # of a kind typer keeps to itself
        if args and args[0] not in self.commands and args[0] not in _HELP_WORDS:
            args = ["submit", *args]
        return super().parse_args(ctx, args)


verbs = typer.Typer(
    cls=_SubmitsByDefault,
    no_args_is_help=True,
    help="Submit many requests at once, and follow them as one.",
    epilog="'spanwright batch FILE' is short for 'spanwright batch submit FILE'.",
)


def add_to(app: typer.Typer) -> None:
    """Add these commands to an application."""
    app.add_typer(verbs, name="batch")


@verbs.command()
def submit(
    file: Annotated[
        str,
        typer.Argument(
            metavar="FILE",
            help="A batch as JSON, or one design request a line; - reads standard input.",
        ),
    ],
    name: Annotated[str | None, typer.Option(help="Name of the batch.")] = None,
    priority: Annotated[
        str | None, typer.Option(help="How soon it is wanted: urgent, ordinary or when-idle.")
    ] = None,
    recompute: Annotated[
        bool, typer.Option("--recompute", help="Plan anew where a stored result would answer.")
    ] = False,
    key: Annotated[
        str | None, typer.Option(help="Idempotency key: sent again, it is one batch.")
    ] = None,
    wait: Annotated[bool, typer.Option("--wait", help="Wait until all of it has ended.")] = False,
    patience_s: Patience = _PATIENCE_S,
    service: Address = HERE,
    as_json: AsJson = False,
) -> None:
    """Submit a batch, all of it or nothing, and print its identifier."""
    request = read_batch(file, name=name, priority=priority, recompute=recompute or None)
    with BatchClient(service) as client:
        batch = _submitted(client, request, key or uuid.uuid4().hex)
        if wait:
            err.print(f"Batch {batch.id} is accepted.", highlight=False)
            _show_ended(client, _waited(client, batch.id, patience_s), as_json=as_json)
        elif as_json:
            _print_json([batch])
        else:
            out.print(batch.id)


@verbs.command()
def show(batch: BatchId, service: Address = HERE, as_json: AsJson = False) -> None:
    """Show where a batch stands, and the reasons of its first failures."""
    with BatchClient(service) as client:
        _show(client, client.batch(batch), as_json=as_json)


@verbs.command("list")
def list_batches(
    most: Annotated[int, typer.Option(min=1, max=100, help="How many.")] = 20,
    service: Address = HERE,
    as_json: AsJson = False,
) -> None:
    """List batches, newest first."""
    with BatchClient(service) as client:
        batches = client.batches(most)
    if as_json:
        _print_json(batches)
    else:
        batch_lines.show_batches(out, batches)


@verbs.command("designs")
def list_designs(
    batch: BatchId,
    state: Annotated[
        str | None, typer.Option(help="Only: queued, running, done, failed or cancelled.")
    ] = None,
    service: Address = HERE,
    as_json: AsJson = False,
) -> None:
    """List the designs of a batch by line, each with where it stands."""
    with BatchClient(service) as client:
        items = client.items(batch, state)
        if as_json:
            _print_json(items)
        else:
            batch_lines.show_items(out, items)


@verbs.command()
def wait(
    batch: BatchId,
    patience_s: Patience = _PATIENCE_S,
    service: Address = HERE,
    as_json: AsJson = False,
) -> None:
    """Wait until a batch has ended, showing how far it is; status 3 if not all of it is done."""
    with BatchClient(service) as client:
        _show_ended(client, _waited(client, batch, patience_s), as_json=as_json)


@verbs.command()
def results(
    batch: BatchId,
    as_table: Annotated[
        bool, typer.Option("--csv", help="One candidate a row, rather than JSON lines.")
    ] = False,
    output: Annotated[
        Path | None, typer.Option("--output", "-o", help="Write to this file.")
    ] = None,
    service: Address = HERE,
) -> None:
    """Fetch the results of a batch as they stand: one design a line as JSON, or a CSV table."""
    with BatchClient(service) as client, ExitStack() as opened:
        file: BinaryIO | None = None
        for part in client.results(batch, as_table=as_table):
            # Opened late, so that a refusal leaves no empty file.
            file = file or (opened.enter_context(_writing(output)) if output else sys.stdout.buffer)
            file.write(part)


@verbs.command()
def cancel(batch: BatchId, service: Address = HERE, as_json: AsJson = False) -> None:
    """Cancel what has not ended of a batch."""
    with BatchClient(service) as client:
        _show(client, client.cancel_batch(batch), as_json=as_json)


@verbs.command()
def rerun(
    batch: BatchId,
    everything: Annotated[
        bool, typer.Option("--all", help="All of it planned anew, as a new batch.")
    ] = False,
    service: Address = HERE,
    as_json: AsJson = False,
) -> None:
    """Run again what failed or was cancelled of a batch, and print the batch that runs."""
    with BatchClient(service) as client:
        again = client.rerun_batch(batch, everything=everything)
    if as_json:
        _print_json([again])
    else:
        out.print(again.id)


def _submitted(client: BatchClient, request: BatchRequest, key: str) -> Batch:
    try:
        return client.submit_batch(request, key)
    except ServiceUnreachable as error:
        # It may have been accepted all the same, if only the answer was lost.
        error.detail += f" Sent again with '--key {key}', the batch is accepted once."
        raise


def _waited(client: BatchClient, batch_id: str, patience_s: float) -> Batch:
    with progress_bar(err, "planning") as show_progress:

        def seen(batch: Batch) -> None:
            counts = batch.counts
            ended = counts.done + counts.failed + counts.cancelled
            failed = f", {counts.failed:,} failed" if counts.failed else ""
            show_progress(batch.progress, f"{ended:,} of {batch.size:,}{failed}")

        return client.wait_batch(batch_id, seen, patience_s)


def _show_ended(client: BatchClient, batch: Batch, *, as_json: bool) -> None:
    _show(client, batch, as_json=as_json)
    if batch.counts.done < batch.size:
        raise typer.Exit(ExitStatus.FAILED)


def _show(client: BatchClient, batch: Batch, *, as_json: bool) -> None:
    if as_json:
        _print_json([batch])
    else:
        failed = client.items(batch.id, "failed") if batch.counts.failed else ()
        batch_lines.show_batch(out, batch, failed)


def _writing(output: Path) -> BinaryIO:
    try:
        return output.open("wb")
    except OSError as error:
        fault = Fault(
            "--output",
            str(output),
            f"it cannot be written: {error.strerror or error}.",
            "Name a file in a folder that is there and may be written to.",
            "file-unwritable",
        )
        raise RequestRefused([fault]) from error


def _print_json(values: Iterable[BaseModel]) -> None:
    # Plain, not through the console: a script must get one object a line.
    for value in values:
        sys.stdout.write(value.model_dump_json() + "\n")
