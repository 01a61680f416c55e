"""What the command line prints for people: the same figures and words as the page."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Final

from rich.console import Console
from rich.table import Table
from rich.text import Text

from service.contracts import formats
from service.contracts.band_lists import BandList
from service.contracts.candidate import DesignResult, TradeOff
from service.contracts.progress import DesignSummary
from service.contracts.report import FeedReport, MatchingPart, ReportPoint
from service.contracts.sweep import Sweep, SweepPoint
from service.errors import RequestRefused, SpanwrightError
from worker.cli.candidate_lines import candidate_in_full
from worker.cli.hanging_lines import hanging_lines, voltage_and_exposure
from worker.cli.plain_table import plain_table

#: Lines of the trade-off that are printed; --json has all of them.
_MOST_TRADED: Final = 8


def show_result(console: Console, result: DesignResult, reports: Iterable[FeedReport]) -> None:
    """Print the ranking, then each candidate with its bands and its reasons."""
    by_rank = {report.rank: report for report in reports}
    console.print(_ranking(result))
    for candidate in result.candidates:
        console.print(candidate_in_full(candidate, by_rank.get(candidate.rank)))
    for chosen in result.sets:
        console.print(Text(f"\nA set of {len(chosen.ranks)} dipoles", style="bold"))
        console.print(
            Text(
                f"{chosen.required_served} of {chosen.required_total} required bands served, "
                f"{formats.share(chosen.weighted_served)} of the width by weight. {chosen.why}"
            )
        )
    if result.relax:
        console.print(Text("\nWhat to relax", style="bold"))
    for each in result.relax:
        console.print(Text(f"- {each}"))
    if result.trade_off:
        console.print(Text())
        console.print(_trade_off(result.trade_off))
    for note in result.notes:
        console.print(Text(f"Note: {note}"))
    map_error = (
        f", read from maps off by {result.map_error_percent:.2g} % of |Z| at most"
        if result.map_error_percent
        else ""
    )
    console.print(
        f"{result.combinations:,} combinations of length, conductor and transformer compared "
        f"from {result.solves:,} solutions in {result.search_s:.1f} s{map_error}; {result.ground}; "
        f"engine {result.engine_version}.",
        style="dim",
    )


def show_report(console: Console, report: FeedReport) -> None:
    """Print a feed-impedance report: edges and centre of each band, then resonances."""
    table = plain_table("Feed-impedance report, candidate " + str(report.rank))
    with_line = any(band.centre.transmitter_swr is not None for band in report.bands)
    far_end = ("SWR at tx", "loss dB") if with_line else ()
    for title in ("band", "at", "MHz", "R Ω", "X Ω", "|Γ|", "SWR", *far_end):
        table.add_column(title, justify="left" if title in ("band", "at") else "right")
    for band in report.bands:
        for place, point in (("low", band.low), ("centre", band.centre), ("high", band.high)):
            table.add_row(band.name if place == "low" else "", place, *_point_cells(point))
        table.add_section()
    console.print(table)
    console.print(_stress(report))
    for told in (*voltage_and_exposure(report), *hanging_lines(report.hanging)):
        console.print(told)
    lines = plain_table("Resonances of the wire")
    for title in ("order", "kind", "MHz", "R Ω"):
        lines.add_column(title, justify="left" if title == "kind" else "right")
    for each in report.resonances:
        kind = "resonance" if each.kind == "series" else "anti-resonance"
        frequency = formats.mhz(each.frequency_mhz)
        lines.add_row(str(each.order), kind, frequency, formats.ohms(each.resistance_ohm))
    console.print(lines)
    found = report.provenance
    matched = any(band.matching for band in report.bands)
    console.print(
        f"R and X at the feed point; |Γ| and SWR behind the "
        f"{formats.ratio(report.transformer_ratio)} transformer"
        f"{' and the matching network' if matched else ''} against "
        f"{formats.ohms(report.reference_ohm)} Ω"
        f"{'; SWR at tx and loss: at the transmitter end of the feed line' if with_line else ''}."
        "\n"
        f"{found.model}; source gap {found.source_gap_mm:.3g} mm; {found.ground}; "
        f"{found.conductor_loss}; estimated error {found.largest_error_ohm:.2g} Ω at most, "
        f"{found.map_error_percent:.2g} % between solved points.\n"
        f"Not modelled: {'; '.join(found.not_modelled)}."
    )
    for caution in report.cautions:
        console.print(f"Caution: {caution}")


def show_designs(console: Console, designs: Iterable[DesignSummary]) -> None:
    """Print the list of stored designs, newest first."""
    table = plain_table("Stored designs")
    for title in ("id", "name", "bands", "state", "submitted (UTC)"):
        table.add_column(title, overflow="fold")
    for design in designs:
        state: str = design.state
        if state == "running":
            state = f"running, {formats.share(design.progress.fraction)}"
        submitted = f"{design.created_at:%Y-%m-%d %H:%M}"
        table.add_row(design.id, Text(design.name), Text(", ".join(design.bands)), state, submitted)
    console.print(table)


def show_sweep(console: Console, found: Sweep) -> None:
    """Print a sweep: a line a point, then its resonances and what it rests on."""
    along_frequency = found.request.along == "frequency"
    with_line = found.request.feed_line is not None
    table = plain_table("")
    for title in ("MHz" if along_frequency else "length m", "R Ω", "X Ω", "|Γ|", "SWR"):
        table.add_column(title, justify="right")
    for title in ("SWR at transmitter", "line loss dB") if with_line else ():
        table.add_column(title, justify="right")
    for point in found.points:
        swept = (
            formats.edge_mhz(point.frequency_mhz) if along_frequency else f"{point.length_m:.3f}"
        )
        cells = [swept, *_electrical_cells(point)]
        if point.transmitter_swr is not None and point.line_loss_db is not None:
            cells += [formats.swr(point.transmitter_swr), f"{point.line_loss_db:.2f}"]
        table.add_row(*cells)
    console.print(table)
    for each in found.crossings:
        kind = "Resonance" if each.kind == "series" else "Anti-resonance"
        where = f"{formats.mhz(each.at)} MHz" if along_frequency else f"{formats.metres(each.at)} m"
        console.print(f"{kind} at {where}, {formats.ohms(each.resistance_ohm)} Ω", highlight=False)
    worst_ohm = max(point.error_ohm for point in found.points)
    console.print(
        f"{found.model}; source gap {found.source_gap_mm:.3g} mm; {found.ground}; estimated error "
        f"{worst_ohm:.2g} Ω at most.\nNot modelled: {'; '.join(found.not_modelled)}.",
        highlight=False,
    )


def show_band_lists(console: Console, lists: Iterable[BandList]) -> None:
    """Print ready-made band lists with their edges and sources."""
    for each in lists:
        table = plain_table(f"{each.name}: {each.title}")
        for title in ("band", "low MHz", "high MHz", "edges from"):
            table.add_column(title, justify="left" if title in ("band", "edges from") else "right")
        for band in each.bands:
            obtained = "text read" if band.obtained == "read" else "memory, check"
            table.add_row(
                band.name, formats.edge_mhz(band.low_mhz), formats.edge_mhz(band.high_mhz), obtained
            )
        console.print(table)
        console.print(Text(f"{each.source}. National rules may allow less.", style="dim"))


def show_error(console: Console, error: SpanwrightError) -> None:
    """Print a refusal or a failure: what, where, and the remedy."""
    console.print(Text(error.title + ".", style="bold"))
    if not error.faults:
        console.print(Text(error.detail))
    for fault in error.faults:
        given = f" (given: {fault.value})" if fault.value else ""
        console.print(Text(f"  {fault.field}: {fault.reason}{given}"))
        console.print(Text(f"    {fault.remedy}"))
    if isinstance(error, RequestRefused) and error.untold:
        console.print(Text(f"  And {error.untold:,} faults more."))


def _ranking(result: DesignResult) -> Table:
    table = plain_table("Candidates, best first")
    for title in ("rank", "length m", "conductor", "ratio", "required", "width", "worst SWR"):
        table.add_column(title, justify="left" if title == "conductor" else "right")
    for each in result.candidates:
        table.add_row(
            str(each.rank),
            formats.metres(each.length_m),
            each.conductor,
            formats.ratio(each.transformer_ratio),
            f"{each.required_served} of {each.required_total}",
            formats.share(each.weighted_served),
            formats.swr(each.swr_worst),
        )
    table.caption = (
        "required: required bands served whole; width: part of all bands within the limit, by "
        "weight; worst SWR: over the bands served whole. Below, bands in brackets are wished for; "
        "MHz and off: the resonance used and how far it lies from the band's centre; low, mid, "
        "high: SWR at edges and centre."
    )
    return table


def _trade_off(front: Sequence[TradeOff]) -> Table:
    table = plain_table("What the best wires trade")
    table.padding = (0, 1, 0, 0)
    with_loss = any(each.loss_db is not None for each in front)
    with_cost = any(each.cost is not None for each in front)
    known = (["loss"] if with_loss else []) + (["cost"] if with_cost else [])
    for title in ("rank", "m", "ratio", "req.", "width", "SWR", *known):
        table.add_column(title, justify="right")
    table.add_column("conductor")
    for each in front[:_MOST_TRADED]:
        cells = [
            "–" if each.rank is None else str(each.rank),
            formats.metres(each.length_m),
            formats.ratio(each.transformer_ratio),
            str(each.required_served),
            formats.share(each.weighted_served),
            formats.swr(each.swr_worst),
        ]
        if with_loss:
            cells.append("–" if each.loss_db is None else formats.decibels(each.loss_db))
        if with_cost:
            cells.append("–" if each.cost is None else formats.money(each.cost))
        table.add_row(*cells, each.conductor)
    table.caption = "m: length; req.: required bands served; SWR: the worst; loss: of the line, dB."
    if len(front) > _MOST_TRADED:
        table.caption += f" The first {_MOST_TRADED} of {len(front)}; --json has all of them."
    return table


def _stress(report: FeedReport) -> Table:
    """Voltage and current at the feed, and the parts of each band's network, where it has one."""
    matched = any(band.matching for band in report.bands)
    powers = [band.stress.power_w for band in report.bands if band.stress]
    at_power = f" at {powers[0]:g} W" if powers else ""
    table = plain_table(f"Voltage (peak) and current (rms){at_power}, band centres")
    table.add_column("band")
    table.add_column("feed point", justify="right")
    for title in ("series part", "shunt part", "loss dB") if matched else ():
        table.add_column(title, justify="right")
    for band in report.bands:
        cells = [band.name, "–"]
        if band.stress is not None:
            cells[1] = _stressed(band.stress.voltage_peak_v, band.stress.current_rms_a)
        if band.matching is not None:
            parts = {each.place: each for each in band.matching.parts}
            shunt = _part(parts.get("shunt"), f", {band.matching.shunt_at} side")
            cells += [_part(parts.get("series")), shunt, formats.decibels(band.matching.loss_db)]
        elif matched:
            cells += ["none", "none", "–"]
        table.add_row(*cells)
    return table


def _part(part: MatchingPart | None, side: str = "") -> str:
    if part is None:
        return "none"
    value = f"{formats.component(part.value)} {part.unit}{side}"
    return f"{value}\n{_stressed(part.voltage_peak_v, part.current_rms_a)}"


def _stressed(voltage_v: float, current_a: float) -> str:
    return f"{formats.volts(voltage_v)} V, {formats.amperes(current_a)} A"


def _point_cells(point: ReportPoint) -> tuple[str, ...]:
    cells = (formats.edge_mhz(point.frequency_mhz), *_electrical_cells(point))
    if point.transmitter_swr is None or point.line_loss_db is None:
        return cells
    return (*cells, formats.swr(point.transmitter_swr), formats.decibels(point.line_loss_db))


def _electrical_cells(point: ReportPoint | SweepPoint) -> tuple[str, ...]:
    return (
        formats.ohms(point.resistance_ohm),
        formats.ohms(point.reactance_ohm),
        formats.reflection(point.reflection),
        formats.swr(point.swr),
    )
