"""SWR of several wires over one band, one over the other, with their limits."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from markupsafe import Markup

from service.contracts import formats
from service.contracts.report import ReportPoint
from service.plots.drawing import Drawing
from service.plots.labels import place_labels
from service.plots.scales import LinearScale, Point, clipped_runs
from service.plots.swr_panel import (
    BOTTOM,
    HEIGHT,
    LEFT,
    RIGHT,
    WIDTH,
    draw_axes,
    draw_limit,
    say_all_above,
    swr_scale,
    top_of_axis,
)


@dataclass(frozen=True, slots=True)
class Trace:
    """One wire's SWR over a band where its limit applies, under a short label.

    ``look`` numbers its hue and dash, the same wherever the wire is drawn.
    """

    look: int
    label: str
    points: tuple[Point, ...]
    limit: float


def trace_of(
    look: int, label: str, grid: Sequence[ReportPoint], limit: float, *, at_transmitter: bool
) -> Trace:
    """The trace of a report's grid: SWR at the end of the line where the limit applies."""
    points = tuple(
        (
            point.frequency_mhz,
            point.swr
            if not at_transmitter or point.transmitter_swr is None
            else point.transmitter_swr,
        )
        for point in grid
    )
    return Trace(look, label, points, limit)


def overlay_plot(name: str, band: str, traces: Sequence[Trace]) -> Markup:
    """Draw the SWR of up to four wires over one band.

    Parameters
    ----------
    name : str
        Unique in the page.
    band : str
        The band's name.
    traces : sequence of Trace
        At least one; each has a hue, a dash and its label of its own.
    """
    frequencies = [frequency for trace in traces for frequency, _ in trace.points]
    top = top_of_axis([trace.points for trace in traces], [trace.limit for trace in traces])
    across = LinearScale(min(frequencies), max(frequencies), LEFT, RIGHT)
    up = swr_scale(top)
    drawing = Drawing(name, WIDTH, HEIGHT, "swr overlay")
    draw_axes(drawing, across, up)
    for limit in sorted({trace.limit for trace in traces}):
        draw_limit(drawing, up, limit)
    ends: dict[str, Point] = {}
    for trace in traces:
        runs = [
            [(across(x), up(y)) for x, y in run] for run in clipped_runs(trace.points, 1.0, top)
        ]
        drawing.curve(runs, f"curve trace-{trace.look}")
        if runs:
            drawing.tip(f"{trace.label}: {_reach(trace)}")
            ends[trace.label] = runs[-1][-1]
    labels = place_labels(ends, (LEFT, 0.0), (WIDTH, BOTTOM), radius=2.0)
    if not ends:
        say_all_above(drawing, top)
    for trace in traces:
        if trace.label in ends:
            drawing.dot(ends[trace.label], 3.5, f"trace-mark-{trace.look}")
            x, y = labels[trace.label][0]
            drawing.text((x, y + 4.0), trace.label, "order")
    told = "; ".join(f"{trace.label}: {_reach(trace)}" for trace in traces)
    return drawing.markup(f"SWR against frequency, {band}", f"{told}.")


def _reach(trace: Trace) -> str:
    swrs = [swr for _, swr in trace.points]
    return f"SWR {formats.swr(min(swrs))} to {formats.swr(max(swrs))}"
