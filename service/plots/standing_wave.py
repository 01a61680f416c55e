"""SWR against frequency over one band, with its limit and the part of the band within it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from markupsafe import Markup

from service.contracts import formats
from service.contracts.candidate import BandOutcome
from service.contracts.report import BandReport, ReportPoint
from service.plots.drawing import Drawing
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
#: An axis that must reach higher is logarithmic, so that the limit stays clear of the foot.
_LINEAR_UP_TO: Final = 6.0
#: Above this a band is as far from use as can be, and no axis goes there.
_HIGHEST_TOP: Final = 200.0
_FREQUENCY_TICKS: Final = 4
_SWR_TICKS: Final = 5


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
    top = _top_of_axis(points, outcome.swr_limit)
    frame = _Frame(
        LinearScale(points[0][0], points[-1][0], _LEFT, _RIGHT),
        (LinearScale if top <= _LINEAR_UP_TO else LogScale)(1.0, top, _BOTTOM, _TOP),
    )
    drawing = Drawing(name, _WIDTH, _HEIGHT, "swr")
    if index is not None:
        drawing.tell(read="swr", band=str(index), x=frame.frequency.noted())
    _draw_axes(drawing, frame)
    _draw_limit(drawing, frame, points, outcome.swr_limit)
    beside = clipped_runs(other, 1.0, top)
    drawing.curve(([frame.place(point) for point in run] for run in beside), "curve beside")
    runs = clipped_runs(points, 1.0, top)
    drawing.curve(([frame.place(point) for point in run] for run in runs), "curve swr")
    if not runs:
        middle = 0.5 * (_LEFT + _RIGHT)
        drawing.text((middle, _TOP + 18.0), f"above {top:g} over the whole band", "tick")
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


def _top_of_axis(points: Sequence[Point], limit: float) -> float:
    """High enough for the limit and for the best of the band; what lies above is cut off."""
    best = min(swr for _, swr in points)
    worst = max(swr for _, swr in points)
    wanted = max(_LOWEST_TOP, 1.5 * limit, 1.5 * best)
    if wanted <= _LINEAR_UP_TO:
        return wanted
    return min(next_round(min(wanted, 1.5 * worst)), _HIGHEST_TOP)


def _draw_axes(drawing: Drawing, frame: _Frame) -> None:
    is_linear = isinstance(frame.swr, LinearScale)
    marks = linear_ticks if is_linear else log_ticks
    for swr in marks(1.0, frame.swr.high, _SWR_TICKS if is_linear else _SWR_TICKS + 3):
        y = frame.swr(swr)
        drawing.line((_LEFT, y), (_RIGHT, y), "grid")
        drawing.text((_LEFT - 6.0, y + 4.0), f"{swr:g}", "tick", "end")
    for mhz in linear_ticks(frame.frequency.low, frame.frequency.high, _FREQUENCY_TICKS):
        x = frame.frequency(mhz)
        drawing.line((x, _TOP), (x, _BOTTOM), "grid")
        drawing.text((x, _BOTTOM + 18.0), formats.edge_mhz(mhz), "tick")
    drawing.box((_LEFT, _TOP), (_RIGHT, _BOTTOM), "frame")
    drawing.text((2.0, _TOP - 11.0), "SWR" if is_linear else "SWR, log scale", "unit", "start")
    drawing.text((_RIGHT, _BOTTOM + 31.0), "MHz", "unit", "end")


def _draw_limit(drawing: Drawing, frame: _Frame, points: Sequence[Point], limit: float) -> None:
    """The limit as a line, and under the foot the part of the band that keeps to it."""
    y = frame.swr(limit)
    drawing.line((_LEFT, y), (_RIGHT, y), "limit")
    drawing.text((_RIGHT - 4.0, y - 4.0), f"limit {formats.swr(limit)}", "limit-name", "end")
    for run in clipped_runs(points, 1.0, limit):
        ends = frame.frequency(run[0][0]), frame.frequency(run[-1][0])
        drawing.box((ends[0], _BOTTOM + 1.0), (ends[1], _BOTTOM + 4.5), "within")


def _draw_resonance(drawing: Drawing, frame: _Frame, outcome: BandOutcome) -> None:
    if outcome.resonance_mhz is None or outcome.order is None:
        return
    if frame.frequency.low <= outcome.resonance_mhz <= frame.frequency.high:
        x = frame.frequency(outcome.resonance_mhz)
        drawing.line((x, _TOP), (x, _BOTTOM), "resonance")
        drawing.text((x, _TOP - 4.0), formats.ordinal(outcome.order), "order series")


def _in_words(outcome: BandOutcome) -> str:
    return (
        f"Low edge {formats.swr(outcome.swr_low)}, centre {formats.swr(outcome.swr_centre)}, "
        f"high edge {formats.swr(outcome.swr_high)}, limit {formats.swr(outcome.swr_limit)}: "
        f"{outcome.service}."
    )
