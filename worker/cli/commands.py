"""The commands a planner types.

Exit statuses: 0 done; 1 an unexpected fault; 2 the request or the command was refused;
3 the design failed or was cancelled; 4 the service or the database does not answer; 5 it took
too long; 6 it was stopped before its end.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated, Final

import typer
from rich.console import Console

from service.contracts.band_lists import BAND_LISTS
from service.contracts.candidate import PlannedDesign
from service.contracts.progress import Design, DesignSummary
from service.contracts.report import FeedReport
from service.contracts.request import DesignRequest, parse_request
from service.errors import Fault, RequestRefused, SpanwrightError, StoreUnavailable
from service.settings import SettingRefused
from worker.cli import batch_commands, queue_commands, tables, wire_commands
from worker.cli.client import HERE, ServiceClient, ServiceUnreachable
from worker.cli.exit_status import ExitStatus
from worker.cli.progress_bar import progress_bar
from worker.cli.standing import demo_request, serve_until_stopped, standing_service
from worker.engine.errors import EngineError
from worker.planning import plan as plan_request

app = typer.Typer(
    name="spanwright",
    help="Plan multiband and harmonic wire dipoles.",
    epilog=(
        "Exit status: 0 done, 2 refused, 3 a design failed, 4 the service or the database does "
        "not answer, 5 it took too long, 6 stopped before its end."
    ),
    no_args_is_help=True,
    pretty_exceptions_enable=False,
)

out: Final = Console()
err: Final = Console(stderr=True)

RequestFile = Annotated[
    str, typer.Argument(metavar="FILE", help="Design request as JSON; - reads standard input.")
]
AsJson = Annotated[bool, typer.Option("--json", help="Print JSON for scripts, not tables.")]
Address = Annotated[
    str,
    typer.Option("--service", envvar="SPANWRIGHT_SERVICE", help="Address of the service."),
]
DesignId = Annotated[str, typer.Argument(metavar="DESIGN", help="Identifier of a design.")]
Rank = Annotated[
    int | None,
    typer.Option("--report", metavar="RANK", help="Show the feed-impedance report of this rank."),
]
Patience = Annotated[float, typer.Option("--patience", metavar="S", help="Wait at most so long.")]


@app.command()
def plan(file: RequestFile, report: Rank = None, as_json: AsJson = False) -> None:
    """Plan a request here and now, without a service, and print the candidates."""
    request = _read_request(file)
    with progress_bar(err, "planning") as show:
        planned = plan_request(request, show)
    if as_json:
        _print_json(planned)
        return
    tables.show_result(out, planned.result, planned.reports)
    if report is not None:
        tables.show_report(out, _of_rank(planned.reports, report))


@app.command()
def submit(
    file: RequestFile,
    key: Annotated[
        str | None,
        typer.Option(help="Idempotency key: sending it again gives the same design."),
    ] = None,
    priority: Annotated[
        str, typer.Option(help="How soon it is wanted: urgent, ordinary or when-idle.")
    ] = "ordinary",
    recompute: Annotated[
        bool, typer.Option("--recompute", help="Plan anew where a stored result would answer.")
    ] = False,
    service: Address = HERE,
    as_json: AsJson = False,
) -> None:
    """Submit a request to a running service and print the design's identifier."""
    request = _read_request(file)
    with ServiceClient(service) as client:
        design = client.submit(request, key, priority=priority, recompute=recompute)
    if as_json:
        out.print_json(design.model_dump_json(include={"id", "name", "state"}))
    else:
        out.print(design.id)


@app.command()
def wait(
    design: DesignId,
    service: Address = HERE,
    patience_s: Patience = 600.0,
    as_json: AsJson = False,
) -> None:
    """Wait until a design has ended, showing how far it is, then show it."""
    with ServiceClient(service) as client:
        ended = _waited(client, design, patience_s)
        _show_ended(client, ended, None, as_json=as_json)


@app.command()
def show(
    design: DesignId, report: Rank = None, service: Address = HERE, as_json: AsJson = False
) -> None:
    """Show a stored design: its candidates, or one candidate's feed-impedance report."""
    with ServiceClient(service) as client:
        _show_ended(client, client.design(design), report, as_json=as_json)


@app.command("list")
def list_designs(
    most: Annotated[int, typer.Option(min=1, max=100, help="How many.")] = 20,
    service: Address = HERE,
    as_json: AsJson = False,
) -> None:
    """List stored designs, newest first."""
    with ServiceClient(service) as client:
        designs = client.designs(most)
    if as_json:
        for each in designs:
            out.print_json(each.model_dump_json(include=set(DesignSummary.model_fields)))
    else:
        tables.show_designs(out, designs)


@app.command()
def bands(
    name: Annotated[str | None, typer.Argument(help="One list; all without it.")] = None,
) -> None:
    """Show the ready-made band lists by ITU Region."""
    if name is not None and name not in BAND_LISTS:
        fault = Fault(
            "name",
            name,
            "there is no band list of this name.",
            "Choose one of " + ", ".join(BAND_LISTS) + ".",
            "band-list-unknown",
        )
        raise RequestRefused([fault])
    tables.show_band_lists(out, BAND_LISTS.values() if name is None else [BAND_LISTS[name]])


@app.command()
def serve(
    workers: Annotated[
        bool, typer.Option("--workers/--no-workers", help="Whether workers run here too.")
    ] = True,
) -> None:
    """Run the API, the pages and the workers on this machine until stopped."""

    def announce(address: str) -> None:
        err.print(f"Spanwright serves at {address} (Ctrl-C stops it).")

    serve_until_stopped(announce, workers=workers)


@app.command()
def demo() -> None:
    """Start a service here, submit the demonstration station, and show what comes back."""
    with standing_service() as address, ServiceClient(address) as client:
        err.print(f"A service stands at {address}; submitting the demonstration station.")
        request = demo_request()
        design = client.submit(request, key=f"demo-{request.content_hash()[:32]}")
        ended = _waited(client, design.id, patience_s=600.0)
        _show_ended(client, ended, None, as_json=False)
    err.print(
        "The design is stored. See it as a page: run 'spanwright serve' and open its address."
    )


batch_commands.add_to(app)
queue_commands.add_to(app)
wire_commands.add_to(app)


def main() -> None:
    """Run the command; refusals are printed with their remedies, not as tracebacks."""
    try:
        app()
    except SettingRefused as error:
        for fault in error.faults:
            err.print(str(fault), markup=False, highlight=False, soft_wrap=True)
        sys.exit(ExitStatus.REFUSED)
    except (ServiceUnreachable, StoreUnavailable) as error:
        _end(error, ExitStatus.UNREACHABLE)
    except RequestRefused as error:
        _end(error, ExitStatus.REFUSED)
    except SpanwrightError as error:
        _end(error, ExitStatus.FAILED)
    except EngineError as error:
        err.print(f"The planning failed: {error}.", markup=False)
        sys.exit(ExitStatus.FAILED)
    except TimeoutError as error:
        err.print(f"It took too long: {error}. It goes on; wait for it again.", markup=False)
        sys.exit(ExitStatus.TOO_LONG)


def _end(error: SpanwrightError, status: ExitStatus) -> None:
    tables.show_error(err, error)
    sys.exit(status)


def _read_request(file: str) -> DesignRequest:
    try:
        text = sys.stdin.read() if file == "-" else Path(file).read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        fault = Fault(
            "FILE",
            file,
            f"it cannot be read: {getattr(error, 'strerror', None) or error}.",
            "Name a design request as a UTF-8 JSON file.",
            "file-unreadable",
        )
        raise RequestRefused([fault]) from error
    return parse_request(text)


def _waited(client: ServiceClient, design_id: str, patience_s: float) -> Design:
    with progress_bar(err, "planning") as show:
        return client.wait(
            design_id,
            lambda now: show(now.fraction, now.step or "waiting for a worker"),
            patience_s,
        )


def _show_ended(
    client: ServiceClient, design: Design, report: int | None, *, as_json: bool
) -> None:
    if design.result is None and design.state in ("failed", "cancelled"):
        raise SpanwrightError(f"Design {design.id} {design.state}: {design.failure or 'no result'}")
    if report is not None:
        chosen = client.report(design.id, report)
        if as_json:
            _print_json(chosen)
        else:
            tables.show_report(out, chosen)
    elif as_json:
        _print_json(design)
    elif design.result is None:
        tables.show_designs(out, [design])
    else:
        ranks = [each.rank for each in design.result.candidates]
        reports = [client.report(design.id, rank) for rank in ranks]
        out.print(f"{design.name}  ({design.id})", markup=False, highlight=False)
        tables.show_result(out, design.result, reports)


def _of_rank(reports: tuple[FeedReport, ...], rank: int) -> FeedReport:
    if not 1 <= rank <= len(reports):
        fault = Fault(
            "--report",
            str(rank),
            f"there are {len(reports)} candidate(s).",
            f"Ask for a rank from 1 to {len(reports)}.",
            "candidate-not-found",
        )
        raise RequestRefused([fault])
    return reports[rank - 1]


def _print_json(value: PlannedDesign | Design | FeedReport) -> None:
    # Plain, not through the console: a script must get every digit and no line breaks.
    sys.stdout.write(value.model_dump_json(indent=2) + "\n")
