"""Commands that solve wires by themselves, without a request or a service."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated, Any, Final

import typer
from pydantic import ValidationError
from rich.console import Console

from service.contracts.refusals import refusal_of
from service.contracts.stock import Conductor
from service.contracts.sweep import Sweep, SweepRequest
from service.exports.sweep_table import sweep_csv
from service.plots import sweep_plot
from worker.cli import tables
from worker.cli.exit_status import ExitStatus
from worker.cli.impedance_lines import filter_lines
from worker.sweeping import sweep as sweep_wire

out: Final = Console()
err: Final = Console(stderr=True)

Number = float | None


def add_to(app: typer.Typer) -> None:
    """Add these commands to an application."""
    app.command()(sweep)
    app.command()(impedance)


def impedance() -> None:
    """Filter wires to impedances: one JSON object a line in, one a line out, order kept.

    In: frequency_hz, length_m, radius_m; optional height_m, relative_permittivity,
    conductivity_s_per_m ("inf": perfect ground), feed_fraction, gap_m, material,
    temperature_c, id. Out: resistance_ohm, reactance_ohm, estimated_error_ohm, unknowns,
    gap_m and the id. A bad line is answered by a problem on its own line, and the exit
    status is then 3.
    """
    if filter_lines(sys.stdin.buffer, sys.stdout):
        sys.exit(ExitStatus.FAILED)


def sweep(  # each parameter is an option of the command
    low: Annotated[float, typer.Option("--from", help="Start, MHz or m.")],
    high: Annotated[float, typer.Option("--to", help="End, MHz or m.")],
    along: Annotated[str, typer.Option(help="What is swept: frequency or length.")] = "frequency",
    points: Annotated[int, typer.Option(help="How many points.")] = 41,
    length_m: Annotated[Number, typer.Option(help="Length, sweeping frequency.")] = None,
    frequency_mhz: Annotated[Number, typer.Option(help="Frequency, sweeping length.")] = None,
    awg: Annotated[int | None, typer.Option(help="Wire size by ASTM B258.")] = None,
    diameter_mm: Annotated[Number, typer.Option(help="Wire diameter.")] = None,
    material: Annotated[str, typer.Option(help="Metal of the wire.")] = "hard-drawn-copper",
    sleeve_mm: Annotated[Number, typer.Option(help="Thickness of the insulation.")] = None,
    sleeve_permittivity: Annotated[float, typer.Option(help="Of the insulation.")] = 2.3,
    sleeve_loss_tangent: Annotated[float, typer.Option(help="Of the insulation.")] = 0.0,
    temperature_c: Annotated[float, typer.Option(help="Of the metal.")] = 20.0,
    height_m: Annotated[Number, typer.Option(help="Height over ground.")] = None,
    ground: Annotated[str | None, typer.Option(help="A ground class.")] = None,
    permittivity: Annotated[Number, typer.Option(help="Relative, of the ground.")] = None,
    conductivity: Annotated[Number, typer.Option(help="Of the ground, S/m.")] = None,
    feed_fraction: Annotated[float, typer.Option(help="Place of the feed; 0.5: centre.")] = 0.5,
    reference_ohm: Annotated[float, typer.Option(help="The SWR's reference.")] = 50.0,
    ratio: Annotated[float, typer.Option(help="Transformer, antenna side to line side.")] = 1.0,
    line: Annotated[str | None, typer.Option(help="Feed line.")] = None,
    line_m: Annotated[Number, typer.Option(help="Length of the feed line.")] = None,
    csv: Annotated[Path | None, typer.Option(help="Write the points to this CSV file.")] = None,
    plot: Annotated[Path | None, typer.Option(help="Write a drawing to this SVG file.")] = None,
    as_json: Annotated[bool, typer.Option("--json", help="Print JSON, not a table.")] = False,
) -> None:
    """Sweep one wire along frequency or length: R, X and SWR as table, CSV and drawing."""
    said: dict[str, Any] = {
        "along": along,
        "low": low,
        "high": high,
        "points": points,
        "length_m": length_m,
        "frequency_mhz": frequency_mhz,
        "conductor": {"awg": awg, "diameter_mm": diameter_mm, "material": material},
        "ground": ground or "free-space",
        "height_m": height_m,
        "feed_fraction": feed_fraction,
        "temperature_c": temperature_c,
        "reference_ohm": reference_ohm,
        "transformer_ratio": ratio,
    }
    if sleeve_mm is not None:
        said["conductor"]["insulation"] = {
            "thickness_mm": sleeve_mm,
            "relative_permittivity": sleeve_permittivity,
            "loss_tangent": sleeve_loss_tangent,
        }
    if permittivity is not None or conductivity is not None:
        said["ground"] = {
            "relative_permittivity": permittivity,
            "conductivity_s_per_m": conductivity,
        }
    if line is not None or line_m is not None:
        said["feed_line"] = {"line": line, "length_m": line_m}
    try:
        request = SweepRequest.model_validate(said)
    except ValidationError as error:
        raise refusal_of(error) from error
    _hand_out(sweep_wire(request), csv, plot, as_json=as_json)


def _hand_out(found: Sweep, csv: Path | None, plot: Path | None, *, as_json: bool) -> None:
    if as_json:
        sys.stdout.write(found.model_dump_json(indent=2) + "\n")
    else:
        tables.show_sweep(out, found)
    if csv is not None:
        csv.write_text(sweep_csv(found), encoding="utf-8", newline="")
        err.print(f"Points written to {csv}", highlight=False)
    if plot is not None:
        plot.write_text(sweep_plot(found, _wire_in_words(found.request)), encoding="utf-8")
        err.print(f"Drawing written to {plot}", highlight=False)


def _wire_in_words(request: SweepRequest) -> str:
    conductor: Conductor = request.conductor
    fixed = (
        f"{request.length_m:g} m of" if request.length_m else f"at {request.frequency_mhz:g} MHz,"
    )
    return f"{fixed} {conductor.label}"
