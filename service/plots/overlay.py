"""SWR of several wires over one band, one over the other, with their limits."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from markupsafe import Markup

from service.contracts import formats
from service.contracts.report import ReportPoint
from service.plots.drawing import Drawing
from service.plots.labels import place_labels
from service.plots.scales import (
    LinearScale,
    LogScale,
    Point,
    clipped_runs,
    linear_ticks,
    log_ticks,
    next_round,
)

_WIDTH: Final = 344.0
_LEFT: Final = 38.0
_RIGHT: Final = _WIDTH - 22.0
_TOP: Final = 26.0
_BOTTOM: Final = _TOP + 150.0
_HEIGHT: Final = _BOTTOM + 36.0
_LOWEST_TOP: Final = 3.0
_LINEAR_UP_TO: Final = 6.0
_HIGHEST_TOP: Final = 200.0
_FREQUENCY_TICKS: Final = 4
_SWR_TICKS: Final = 5


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
    top = _top_of_axis(traces)
    across = LinearScale(min(frequencies), max(frequencies), _LEFT, _RIGHT)
    up = (LinearScale if top <= _LINEAR_UP_TO else LogScale)(1.0, top, _BOTTOM, _TOP)
    drawing = Drawing(name, _WIDTH, _HEIGHT, "swr overlay")
    _draw_axes(drawing, across, up)
    for limit in sorted({trace.limit for trace in traces}):
        drawing.line((_LEFT, up(limit)), (_RIGHT, up(limit)), "limit")
        words = f"limit {formats.swr(limit)}"
        drawing.text((_RIGHT - 4.0, up(limit) - 4.0), words, "limit-name", "end")
    ends: dict[str, Point] = {}
    for trace in traces:
        runs = [
            [(across(x), up(y)) for x, y in run] for run in clipped_runs(trace.points, 1.0, top)
        ]
        drawing.curve(runs, f"curve trace-{trace.look}")
        if runs:
            drawing.tip(f"{trace.label}: {_reach(trace)}")
            ends[trace.label] = runs[-1][-1]
    labels = place_labels(ends, (_LEFT, 0.0), (_WIDTH, _BOTTOM), radius=2.0)
    if not ends:
        middle = 0.5 * (_LEFT + _RIGHT)
        drawing.text((middle, _TOP + 18.0), f"above {top:g} over the whole band", "tick")
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


def _top_of_axis(traces: Sequence[Trace]) -> float:
    """High enough for every limit and for the best of each wire; what lies above is cut off."""
    bests = [min(swr for _, swr in trace.points) for trace in traces]
    wanted = max(_LOWEST_TOP, *(1.5 * trace.limit for trace in traces), 1.5 * max(bests))
    if wanted <= _LINEAR_UP_TO:
        return wanted
    worst = max(swr for trace in traces for _, swr in trace.points)
    return min(next_round(min(wanted, 1.5 * worst)), _HIGHEST_TOP)


def _draw_axes(drawing: Drawing, across: LinearScale, up: LinearScale | LogScale) -> None:
    is_linear = isinstance(up, LinearScale)
    marks = linear_ticks if is_linear else log_ticks
    for swr in marks(1.0, up.high, _SWR_TICKS if is_linear else _SWR_TICKS + 3):
        drawing.line((_LEFT, up(swr)), (_RIGHT, up(swr)), "grid")
        drawing.text((_LEFT - 6.0, up(swr) + 4.0), f"{swr:g}", "tick", "end")
    for mhz in linear_ticks(across.low, across.high, _FREQUENCY_TICKS):
        drawing.line((across(mhz), _TOP), (across(mhz), _BOTTOM), "grid")
        drawing.text((across(mhz), _BOTTOM + 18.0), formats.edge_mhz(mhz), "tick")
    drawing.box((_LEFT, _TOP), (_RIGHT, _BOTTOM), "frame")
    drawing.text((2.0, _TOP - 11.0), "SWR" if is_linear else "SWR, log scale", "unit", "start")
    drawing.text((_RIGHT, _BOTTOM + 31.0), "MHz", "unit", "end")
