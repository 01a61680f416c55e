"""A sweep as one standalone drawing: R and X above, SWR below, against what was swept."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from service.contracts import formats
from service.contracts.sweep import Sweep, SweepPoint
from service.plots.drawing import Drawing
from service.plots.scales import (
    CompressedScale,
    LinearScale,
    LogScale,
    Point,
    clipped_runs,
    compressed_ticks,
    linear_ticks,
    log_ticks,
    next_round,
)

_WIDTH: Final = 760.0
_LEFT: Final = 56.0
_RIGHT: Final = _WIDTH - 16.0
_UPPER: Final = (44.0, 304.0)
_LOWER: Final = (344.0, 504.0)
_HEIGHT: Final = 560.0
_KNEE_OHM: Final = 100.0
_SMALLEST_TICK_OHM: Final = 50.0
_HIGHEST_SWR: Final = 100.0
_MOST_TICKS: Final = 11
_MARK_PX: Final = 4.5

#: A standalone file carries its looks with it; colours apart for colour-blind eyes, and dashes.
_STYLE: Final = """
svg { background: #fff; font: 12px system-ui, sans-serif; }
.frame { fill: none; stroke: #1c2530; }
.grid { stroke: #d9dee3; }
.zero { stroke: #66717d; }
.curve { fill: none; stroke-width: 2; stroke-linejoin: round; }
.resistance { stroke: #b34700; }
.reactance { stroke: #0068a5; stroke-dasharray: 8 3; }
.swr { stroke: #0068a5; }
.series { fill: #1c2530; }
.parallel { fill: #fff; stroke: #1c2530; stroke-width: 1.3; }
.words { fill: #1c2530; }
.title { font-weight: 600; font-size: 14px; }
.tick { fill: #45505c; }
"""


@dataclass(frozen=True, slots=True)
class _Panel:
    across: LinearScale
    up: CompressedScale | LogScale
    top: float
    bottom: float

    def place(self, point: Point) -> Point:
        return self.across(point[0]), self.up(point[1])


def sweep_plot(sweep: Sweep, title: str) -> str:
    """Draw a sweep as a standalone SVG document.

    Parameters
    ----------
    sweep : Sweep
    title : str
        The wire in words.
    """
    drawing = Drawing("sweep", _WIDTH, _HEIGHT, "sweep")
    drawing.text((_LEFT, 20.0), title, "words title", "start")
    drawing.text((_LEFT, 37.0), f"R and X at the feed, Ω; {sweep.ground}", "words", "start")
    _draw_impedance(drawing, sweep)
    _draw_swr(drawing, sweep)
    return drawing.document(title, _in_words(sweep), _STYLE)


def swept_value(sweep: Sweep, point: SweepPoint) -> float:
    """What was swept, in the unit of its axis: MHz or m."""
    return point.frequency_mhz if sweep.request.along == "frequency" else point.length_m


def _draw_impedance(drawing: Drawing, sweep: Sweep) -> None:
    r = [(swept_value(sweep, each), each.resistance_ohm) for each in sweep.points]
    x = [(swept_value(sweep, each), each.reactance_ohm) for each in sweep.points]
    values = [value for _, value in r + x]
    low = -next_round(max(-min(values), 2.0 * _SMALLEST_TICK_OHM))
    high = next_round(max(*values, 2.0 * _SMALLEST_TICK_OHM))
    top, bottom = _UPPER
    scale = CompressedScale(_KNEE_OHM, low, high, bottom, top)
    panel = _Panel(_across(sweep), scale, top, bottom)
    for ohm in compressed_ticks(low, high, _SMALLEST_TICK_OHM):
        _draw_level(drawing, panel, ohm, f"{ohm:g}", "grid" if ohm else "zero")
    _draw_verticals(drawing, panel, sweep)
    drawing.curve([[panel.place(point) for point in r]], "curve resistance")
    drawing.curve([[panel.place(point) for point in x]], "curve reactance")
    for curve, name in ((r, "R"), (x, "X")):
        end = panel.place(curve[-1])
        drawing.text((end[0] - 4.0, end[1] - 6.0), name, "words", "end")
    for each in sweep.crossings:
        place = panel.place((each.at, 0.0))
        if each.kind == "series":
            drawing.dot(place, _MARK_PX, "series")
        else:
            drawing.diamond(place, _MARK_PX, "parallel")


def _draw_swr(drawing: Drawing, sweep: Sweep) -> None:
    points = [(swept_value(sweep, each), each.swr) for each in sweep.points]
    high = min(_HIGHEST_SWR, next_round(max(3.0, *(value for _, value in points))))
    top, bottom = _LOWER
    panel = _Panel(_across(sweep), LogScale(1.0, high, bottom, top), top, bottom)
    request = sweep.request
    drawing.text(
        (_LEFT, top - 8.0),
        f"SWR against {formats.ohms(request.reference_ohm)} Ω behind "
        f"{formats.ratio(request.transformer_ratio)}",
        "words",
        "start",
    )
    for level in log_ticks(1.0, high, 8):
        _draw_level(drawing, panel, level, f"{level:g}", "grid")
    _draw_verticals(drawing, panel, sweep)
    runs = clipped_runs(points, 1.0, high)
    drawing.curve(([panel.place(point) for point in run] for run in runs), "curve swr")
    unit = "MHz" if request.along == "frequency" else "length, m"
    drawing.text((_RIGHT, bottom + 34.0), unit, "words", "end")


def _across(sweep: Sweep) -> LinearScale:
    return LinearScale(sweep.request.low, sweep.request.high, _LEFT, _RIGHT)


def _draw_level(drawing: Drawing, panel: _Panel, value: float, words: str, kind: str) -> None:
    y = panel.up(value)
    drawing.line((_LEFT, y), (_RIGHT, y), kind)
    drawing.text((_LEFT - 6.0, y + 4.0), words.replace("-", "−"), "tick", "end")


def _draw_verticals(drawing: Drawing, panel: _Panel, sweep: Sweep) -> None:
    for value in linear_ticks(sweep.request.low, sweep.request.high, _MOST_TICKS):
        x = panel.across(value)
        drawing.line((x, panel.top), (x, panel.bottom), "grid")
        drawing.text((x, panel.bottom + 17.0), f"{value:.6g}", "tick")
    drawing.box((_LEFT, panel.top), (_RIGHT, panel.bottom), "frame")


def _in_words(sweep: Sweep) -> str:
    unit = "MHz" if sweep.request.along == "frequency" else "m"
    found = [
        f"{'resonance' if each.kind == 'series' else 'anti-resonance'} at {each.at:.3f} {unit} "
        f"with {formats.ohms(each.resistance_ohm)} Ω"
        for each in sweep.crossings
    ]
    return f"{formats.listed(found) or 'No resonance'} in the range swept."
