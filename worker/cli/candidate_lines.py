"""One candidate as the command line prints it."""

from __future__ import annotations

from typing import Final

from rich.console import Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from service.contracts import formats
from service.contracts.candidate import BandOutcome, Candidate, Departure, Steadiness
from service.contracts.report import BandReport, FeedReport

_SERVICE_STYLE: Final = {"served": "bold", "partly served": "", "unserved": "dim"}
_LEVELS: Final = "▁▂▃▄▅▆▇█"


def candidate_in_full(candidate: Candidate, report: FeedReport | None) -> RenderableType:
    """How the wire hangs, its bands, its reasons, trimming, and how it holds up."""
    strips = {band.name: band for band in report.bands} if report else {}
    at_transmitter = report is not None and report.reference_point == "transmitter"
    table = Table(box=None, pad_edge=False, padding=(0, 1, 0, 0))
    for title in ("band", "service", "order", "MHz", "off kHz", "off %", "low", "mid", "high"):
        left = title in ("band", "service")
        table.add_column(title, justify="left" if left else "right", no_wrap=True)
    table.add_column("SWR across", no_wrap=True)
    for each in candidate.bands:
        strip = ""
        if each.name in strips:
            band = strips[each.name]
            strip = swr_strip(band, each.swr_limit, at_transmitter=at_transmitter)
        table.add_row(*_band_cells(each), strip, style=_SERVICE_STYLE[each.service])
    heading = Text(f"{candidate.rank}.  {_wire_in_words(candidate)}", style="bold")
    reasons = [Text(f"{each.name}: {each.reason}") for each in candidate.bands]
    body: list[RenderableType] = [Text(_hung_in_words(candidate, at_transmitter)), table, Text()]
    body += [Text(candidate.why), Text(candidate.compromise)]
    body += [Text(f"- {each}") for each in candidate.improvements]
    body += [Text(), *reasons]
    if candidate.trims:
        body += [Text(), Text(_trims_in_words(candidate))]
    if candidate.steadiness is not None:
        body += [Text(), *_steadiness(candidate, candidate.steadiness)]
    return Group(Text(), heading, Padding(Group(*body), (0, 0, 0, 4)))


def _hung_in_words(candidate: Candidate, at_transmitter: bool) -> str:
    """Height, place of the feed, loss and cost, where known, and where the limits apply."""
    parts = [] if candidate.height_m is None else [f"{formats.metres(candidate.height_m)} m high"]
    parts.append(f"fed {formats.feed_place(candidate.feed_fraction, candidate.length_m)}")
    if candidate.loss_db is not None:
        parts.append(f"line loss {formats.decibels(candidate.loss_db)} dB at most")
    if candidate.cost is not None:
        parts.append(f"wire for {formats.money(candidate.cost)}")
    where = " SWR limits apply at the transmitter." if at_transmitter else ""
    text = ", ".join(parts)
    return f"{text[:1].upper()}{text[1:]}.{where}"


def _trims_in_words(candidate: Candidate) -> str:
    moved = [
        f"{each.band} {formats.khz_per_cm(each.khz_per_cm)} ({formats.ordinal(each.order)})"
        for each in candidate.trims
    ]
    return f"Trimming, kHz for a cm off the whole length: {', '.join(moved)}."


def _steadiness(candidate: Candidate, held: Steadiness) -> list[RenderableType]:
    """The worst departure in words, and every band in every departure."""
    said = Text(
        f"Fares worst {formats.departed(held.worst)}: {held.required_served} of "
        f"{candidate.required_total} required bands served, "
        f"{formats.share(held.weighted_served)} of the width by weight."
    )
    whats = list(dict.fromkeys(each.what for each in held.departures))
    found = {(each.band, each.what): each for each in held.departures}
    table = Table(box=None, pad_edge=False, padding=(0, 1, 0, 0))
    table.add_column("band", no_wrap=True, vertical="bottom")
    for what in whats:
        first, _, last = what.rpartition(" ")
        table.add_column(f"{first}\n{last}", justify="right")
    for outcome in candidate.bands:
        cells = [found.get((outcome.name, what)) for what in whats]
        if any(cells):
            shown = ["–" if cell is None else _departed(cell) for cell in cells]
            table.add_row(outcome.name, *shown)
    if not table.row_count:
        return [said]
    return [said, table, Text("Worst SWR in the band; * where not all of it is within the limit.")]


def _departed(cell: Departure) -> str:
    return formats.swr(cell.swr_worst) + ("" if cell.served_fraction >= 1.0 else "*")


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


def swr_strip(band: BandReport, limit: float, *, at_transmitter: bool = False) -> str:
    """The SWR across a band as a strip of blocks: full height is twice the limit or more."""
    points = band.grid[:: max(1, len(band.grid) // 10)]
    top = 2.0 * limit - 1.0
    cells = []
    for point in points:
        swr = point.transmitter_swr if at_transmitter and point.transmitter_swr else point.swr
        height = min(1.0, (swr - 1.0) / top)
        cells.append(_LEVELS[min(len(_LEVELS) - 1, int(height * len(_LEVELS)))])
    return "".join(cells)
