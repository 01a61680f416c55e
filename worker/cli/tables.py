"""What the command line prints for people: the same figures and words as the page."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Final

from rich.box import SIMPLE_HEAD
from rich.console import Console, Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from service.contracts import formats
from service.contracts.band_lists import BandList
from service.contracts.candidate import BandOutcome, Candidate, DesignResult
from service.contracts.progress import DesignSummary
from service.contracts.report import BandReport, FeedReport, ReportPoint
from service.contracts.sweep import Sweep, SweepPoint
from service.errors import SpanwrightError

_SERVICE_STYLE: Final = {"served": "bold", "partly served": "", "unserved": "dim"}
_LEVELS: Final = "▁▂▃▄▅▆▇█"


def show_result(console: Console, result: DesignResult, reports: Iterable[FeedReport]) -> None:
    """Print the ranking, then each candidate with its bands and its reasons."""
    by_rank = {report.rank: report for report in reports}
    console.print(_ranking(result))
    for candidate in result.candidates:
        console.print(_candidate(candidate, by_rank.get(candidate.rank)))
    for note in result.notes:
        console.print(Text(f"Note: {note}"))
    console.print(
        f"{result.combinations:,} combinations of length, conductor and transformer compared "
        f"from {result.solves:,} solutions in {result.search_s:.1f} s; {result.ground}; "
        f"engine {result.engine_version}.",
        style="dim",
    )


def show_report(console: Console, report: FeedReport) -> None:
    """Print a feed-impedance report: edges and centre of each band, then resonances."""
    table = _table("Feed-impedance report, candidate " + str(report.rank))
    for title in ("band", "at", "MHz", "R Ω", "X Ω", "|Γ|", "SWR"):
        table.add_column(title, justify="left" if title in ("band", "at") else "right")
    for band in report.bands:
        for place, point in (("low", band.low), ("centre", band.centre), ("high", band.high)):
            table.add_row(band.name if place == "low" else "", place, *_point_cells(point))
        table.add_section()
    console.print(table)
    lines = _table("Resonances of the wire")
    for title in ("order", "kind", "MHz", "R Ω"):
        lines.add_column(title, justify="left" if title == "kind" else "right")
    for each in report.resonances:
        kind = "resonance" if each.kind == "series" else "anti-resonance"
        frequency = formats.mhz(each.frequency_mhz)
        lines.add_row(str(each.order), kind, frequency, formats.ohms(each.resistance_ohm))
    console.print(lines)
    found = report.provenance
    console.print(
        f"R and X at the feed point; |Γ| and SWR behind the "
        f"{formats.ratio(report.transformer_ratio)} transformer against "
        f"{formats.ohms(report.reference_ohm)} Ω.\n"
        f"{found.model}; source gap {found.source_gap_mm:.3g} mm; {found.ground}; "
        f"{found.conductor_loss}; estimated error {found.largest_error_ohm:.2g} Ω at most, "
        f"{found.map_error_percent:.2g} % between solved points.\n"
        f"Not modelled: {'; '.join(found.not_modelled)}."
    )
    for caution in report.cautions:
        console.print(f"Caution: {caution}")


def show_designs(console: Console, designs: Iterable[DesignSummary]) -> None:
    """Print the list of stored designs, newest first."""
    table = _table("Stored designs")
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
    table = _table("")
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
        table = _table(f"{each.name}: {each.title}")
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


def swr_strip(band: BandReport, limit: float) -> str:
    """The SWR across a band as a strip of blocks: full height is twice the limit or more."""
    points = band.grid[:: max(1, len(band.grid) // 10)]
    top = 2.0 * limit - 1.0
    cells = []
    for point in points:
        height = min(1.0, (point.swr - 1.0) / top)
        cells.append(_LEVELS[min(len(_LEVELS) - 1, int(height * len(_LEVELS)))])
    return "".join(cells)


def _ranking(result: DesignResult) -> Table:
    table = _table("Candidates, best first")
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


def _candidate(candidate: Candidate, report: FeedReport | None) -> RenderableType:
    strips = {band.name: band for band in report.bands} if report else {}
    table = Table(box=None, pad_edge=False, padding=(0, 1, 0, 0))
    for title in ("band", "service", "order", "MHz", "off kHz", "off %", "low", "mid", "high"):
        left = title in ("band", "service")
        table.add_column(title, justify="left" if left else "right", no_wrap=True)
    table.add_column("SWR across", no_wrap=True)
    for each in candidate.bands:
        strip = swr_strip(strips[each.name], each.swr_limit) if each.name in strips else ""
        table.add_row(*_band_cells(each), strip, style=_SERVICE_STYLE[each.service])
    heading = Text(f"{candidate.rank}.  {_wire_in_words(candidate)}", style="bold")
    reasons = [Text(f"{each.name}: {each.reason}") for each in candidate.bands]
    body: list[RenderableType] = [table, Text(), Text(candidate.why), Text(candidate.compromise)]
    body += [Text(), *reasons]
    return Group(Text(), heading, Padding(Group(*body), (0, 0, 0, 4)))


def _wire_in_words(candidate: Candidate) -> str:
    code = f" [{candidate.item_code}]" if candidate.item_code else ""
    return f"{formats.metres(candidate.length_m)} m of {candidate.conductor}{code}"


def _band_cells(each: BandOutcome) -> tuple[str, ...]:
    worked = each.order is not None
    return (
        each.name if each.required else f"({each.name})",
        each.service.removesuffix(" served"),
        str(each.order) if worked else "–",
        formats.mhz(each.resonance_mhz or 0.0) if worked else "–",
        formats.khz(each.offset_khz or 0.0) if worked else "–",
        formats.percent(each.offset_percent or 0.0) if worked else "–",
        formats.swr(each.swr_low),
        formats.swr(each.swr_centre),
        formats.swr(each.swr_high),
    )


def _point_cells(point: ReportPoint) -> tuple[str, ...]:
    return (formats.edge_mhz(point.frequency_mhz), *_electrical_cells(point))


def _electrical_cells(point: ReportPoint | SweepPoint) -> tuple[str, ...]:
    return (
        formats.ohms(point.resistance_ohm),
        formats.ohms(point.reactance_ohm),
        formats.reflection(point.reflection),
        formats.swr(point.swr),
    )


def _table(title: str) -> Table:
    return Table(
        title=title,
        title_justify="left",
        title_style="bold",
        caption_justify="left",
        box=SIMPLE_HEAD,
        pad_edge=False,
    )
