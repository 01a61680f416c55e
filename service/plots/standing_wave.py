"""SWR against frequency over one band, with its limit and the part of the band within it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from markupsafe import Markup

from service.contracts import formats
from service.contracts.candidate import BandOutcome
from service.contracts.report import BandReport, ReportPoint
from service.plots.drawing import Drawing
from service.plots.scales import LinearScale, LogScale, Point, clipped_runs
from service.plots.swr_panel import (
    BOTTOM,
    HEIGHT,
    LEFT,
    RIGHT,
    TOP,
    WIDTH,
    draw_axes,
    draw_limit,
    say_all_above,
    swr_scale,
    top_of_axis,
)


@dataclass(frozen=True, slots=True)
class _Frame:
    frequency: LinearScale
    swr: LinearScale | LogScale

    def place(self, point: Point) -> Point:
        return self.frequency(point[0]), self.swr(point[1])


def swr_plot(
    name: str,
    band: BandReport,
    outcome: BandOutcome,
    *,
    at_transmitter: bool = False,
    index: int | None = None,
) -> Markup:
    """Draw the SWR over one band: where its limit applies, and at the line's other end.

    Parameters
    ----------
    name : str
        Unique in the page.
    band : BandReport
    outcome : BandOutcome
        The same band's outcome: its limit and how it is served.
    at_transmitter : bool
        Whether the limit applies at the transmitter, else at the feed point.
    index : int, optional
        Which of the report's bands it is, for a script that tells the value under the pointer.
    """
    points, other = _swr_along(band.grid, at_transmitter)
    top = top_of_axis([points], [outcome.swr_limit])
    frame = _Frame(
        LinearScale(points[0][0], points[-1][0], LEFT, RIGHT),
        swr_scale(top),
    )
    drawing = Drawing(name, WIDTH, HEIGHT, "swr")
    if index is not None:
        drawing.tell(read="swr", band=str(index), x=frame.frequency.noted())
    draw_axes(drawing, frame.frequency, frame.swr)
    _draw_limit(drawing, frame, points, outcome.swr_limit)
    beside = clipped_runs(other, 1.0, top)
    drawing.curve(([frame.place(point) for point in run] for run in beside), "curve beside")
    runs = clipped_runs(points, 1.0, top)
    drawing.curve(([frame.place(point) for point in run] for run in runs), "curve swr")
    if not runs:
        say_all_above(drawing, top)
    _draw_resonance(drawing, frame, outcome)
    return drawing.markup(f"SWR against frequency, {band.name}", _in_words(outcome))


def _swr_along(
    grid: Sequence[ReportPoint], at_transmitter: bool
) -> tuple[list[Point], list[Point]]:
    """SWR against frequency where the limit applies, and at the other end of a feed line."""
    feed = [(point.frequency_mhz, point.swr) for point in grid]
    far = [
        (point.frequency_mhz, point.transmitter_swr)
        for point in grid
        if point.transmitter_swr is not None
    ]
    return (far, feed) if at_transmitter and far else (feed, far)


def _draw_limit(drawing: Drawing, frame: _Frame, points: Sequence[Point], limit: float) -> None:
    """The limit as a line, and under the foot the part of the band that keeps to it."""
    draw_limit(drawing, frame.swr, limit)
    for run in clipped_runs(points, 1.0, limit):
        ends = frame.frequency(run[0][0]), frame.frequency(run[-1][0])
        drawing.box((ends[0], BOTTOM + 1.0), (ends[1], BOTTOM + 4.5), "within")


def _draw_resonance(drawing: Drawing, frame: _Frame, outcome: BandOutcome) -> None:
    if outcome.resonance_mhz is None or outcome.order is None:
        return
    if frame.frequency.low <= outcome.resonance_mhz <= frame.frequency.high:
        x = frame.frequency(outcome.resonance_mhz)
        drawing.line((x, TOP), (x, BOTTOM), "resonance")
        drawing.text((x, TOP - 4.0), formats.ordinal(outcome.order), "order series")


def _in_words(outcome: BandOutcome) -> str:
    return (
        f"Low edge {formats.swr(outcome.swr_low)}, centre {formats.swr(outcome.swr_centre)}, "
        f"high edge {formats.swr(outcome.swr_high)}, limit {formats.swr(outcome.swr_limit)}: "
        f"{outcome.service}."
    )
