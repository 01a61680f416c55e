"""How a wire would hang, its voltages, and how far to stay away, as the command line prints them.

What a report of an earlier release does not hold is left out.
"""

from __future__ import annotations

from collections.abc import Iterator

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from service.contracts import formats
from service.contracts.exposure import (
    BandExposure,
    ExposureDistance,
    LimitsTold,
    limits_told,
    population_in_words,
    standard_in_words,
)
from service.contracts.hanging import HungSpan, HungState
from service.contracts.report import FeedReport
from worker.cli.plain_table import plain_table


def hanging_lines(span: HungSpan | None) -> Iterator[RenderableType]:
    """Tension, sag and safety factor in words, then the weathers and what to cut."""
    if span is None:
        return
    yield Text("\nHanging it", style="bold")
    yield Text(_span_in_words(span))
    yield _weathers(span)
    yield _cutting(span)
    yield Text("near: on the side from which the place of the feed is counted.")
    for caution in span.cautions:
        yield Text(f"Caution: {caution}")


def voltage_and_exposure(report: FeedReport) -> Iterator[RenderableType]:
    """Peak voltages at ends and feed, then distances, a row a band."""
    if any(band.stress and band.stress.ends_peak_v for band in report.bands):
        yield _voltages(report)
        yield Text("Ends against earth; the place of the feed is counted from the near end.\n")
    told = {band.name: band.exposure for band in report.bands if band.exposure is not None}
    limits = limits_told(told.values())
    if limits:
        yield _distances(told, limits)
        yield Text(_exposure_in_words(told, limits))


def _span_in_words(span: HungSpan) -> str:
    strung, lowest = span.as_strung(), span.lowest()
    aim = "" if span.as_wanted else " (the nearest to what was asked for)"
    met = "" if span.safety_factor >= span.safety_factor_wanted else ", not met"
    low = (
        ""
        if lowest is None or lowest.lowest_m is None
        else f"Lowest {formats.metres(lowest.lowest_m)} m over ground ({lowest.weather}). "
    )
    return (
        f"Strung with {formats.newtons(strung.wire_tension_n)} N at "
        f"{formats.celsius(strung.temperature_c)} °C in still air{aim}, sag "
        f"{formats.metres(strung.sag_m)} m. Safety factor "
        f"{formats.safety_factor(span.safety_factor)} ({span.weakest}); "
        f"{formats.safety_factor(span.safety_factor_wanted)} asked for{met}. {low}"
        f"Breaking load: wire {formats.newtons(span.wire_breaking_n)} N, rope "
        f"{formats.newtons(span.rope_breaking_n)} N. Rope to each support: "
        f"{formats.metres(span.tail_m)} m. Strength: {span.strength_source}."
    )


def _weathers(span: HungSpan) -> Table:
    table = plain_table("Weather")
    table.collapse_padding = True
    table.add_column("weather", overflow="fold")
    titles = ["°C", "wind\nPa", "ice\nmm", "wire\nN", "rope\nN", "sag\nm", "swing\nm"]
    if span.lowest() is not None:
        titles += ["lowest\nm", "mean\nm"]
    for title in titles:
        # What is too wide for its column is folded, never cut short.
        table.add_column(title, justify="right", vertical="bottom", overflow="fold")
    for state in span.states:
        table.add_row(state.weather, *_weather_cells(state))
    return table


def _weather_cells(state: HungState) -> tuple[str, ...]:
    cells = (
        formats.celsius(state.temperature_c),
        formats.pascals(state.wind_pa),
        formats.ice_mm(state.ice_mm),
        formats.newtons(state.wire_tension_n),
        formats.newtons(state.rope_tension_n),
        formats.metres(state.sag_m),
        formats.metres(state.swing_m),
    )
    if state.lowest_m is None or state.mean_height_m is None:
        return cells
    return (*cells, formats.metres(state.lowest_m), formats.metres(state.mean_height_m))


def _cutting(span: HungSpan) -> Table:
    table = plain_table("Cutting list")
    for title in ("leg", "as planned m", "with wraps and allowance m"):
        table.add_column(title, justify="left" if title == "leg" else "right")
    for leg in span.cutting:
        table.add_row(leg.leg, formats.metres(leg.electrical_m), formats.metres(leg.cut_m))
    table.add_row("both", "", formats.metres(span.wire_total_m))
    return table


def _voltages(report: FeedReport) -> Table:
    table = plain_table("Peak voltage, V, band centres")
    for title in ("band", "near end", "feed point", "far end"):
        table.add_column(title, justify="left" if title == "band" else "right")
    for band in report.bands:
        if band.stress is None or band.stress.ends_peak_v is None:
            table.add_row(band.name, "–", "–", "–")
            continue
        near_v, far_v = band.stress.ends_peak_v
        peaks_v = (near_v, band.stress.voltage_peak_v, far_v)
        table.add_row(band.name, *(formats.volts(each) for each in peaks_v))
    return table


def _distances(told: dict[str, BandExposure], limits: tuple[LimitsTold, ...]) -> Table:
    table = plain_table("How far people must stay from every part of the wire, m")
    table.add_column("band", vertical="bottom")
    for each in limits:
        heading = f"{standard_in_words(each.standard)}\n{population_in_words(each.population)}"
        table.add_column(heading, justify="right")
    for name, found in told.items():
        table.add_row(name, *(_distance(found.distance(each)) for each in limits))
    return table


def _distance(found: ExposureDistance | None) -> str:
    if found is None:
        return "–"
    said = [
        words
        for words, holds in (("peak", found.not_averaged), ("near", found.in_near_field))
        if holds
    ]
    return " ".join([*said, formats.metres(found.distance_m)])


def _exposure_in_words(told: dict[str, BandExposure], limits: tuple[LimitsTold, ...]) -> str:
    powers = dict.fromkeys(
        f"At {each.peak_power_w:g} W, on for {each.duty_percent:g} % of the time: "
        f"{each.average_power_w:g} W on average. "
        for each in told.values()
    )
    averaged = formats.listed(
        [
            f"{formats.minutes(each.averaging_min)} ({standard_in_words(each.standard)}, "
            f"{population_in_words(each.population)})"
            for each in limits
        ]
    )
    return (
        f"{''.join(powers)}Averaged over {averaged}. near: it lies in the near field, where a "
        "formula is no more than a guide: measure, or stay further away. peak: one of its limits "
        "allows no pauses."
    )
