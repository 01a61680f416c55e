"""The panel that SWR over one band is drawn on: its size, its scales, its grid and its limit."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

from service.contracts import formats
from service.plots.drawing import Drawing
from service.plots.scales import (
    LinearScale,
    LogScale,
    Point,
    linear_ticks,
    log_ticks,
    next_round,
)

WIDTH: Final = 344.0
LEFT: Final = 38.0
RIGHT: Final = WIDTH - 22.0
TOP: Final = 26.0
BOTTOM: Final = TOP + 150.0
HEIGHT: Final = BOTTOM + 36.0
_LOWEST_TOP: Final = 3.0
#: An axis that must reach higher is logarithmic, so that the limit stays clear of the foot.
_LINEAR_UP_TO: Final = 6.0
#: Above this a band is as far from use as can be, and no axis goes there.
_HIGHEST_TOP: Final = 200.0
_FREQUENCY_TICKS: Final = 4
_SWR_TICKS: Final = 5


def top_of_axis(curves: Sequence[Sequence[Point]], limits: Sequence[float]) -> float:
    """High enough for every limit and for the best of each curve; what lies above is cut off."""
    bests = [min(swr for _, swr in curve) for curve in curves]
    wanted = max(_LOWEST_TOP, *(1.5 * limit for limit in limits), 1.5 * max(bests))
    if wanted <= _LINEAR_UP_TO:
        return wanted
    worst = max(swr for curve in curves for _, swr in curve)
    return min(next_round(min(wanted, 1.5 * worst)), _HIGHEST_TOP)


def swr_scale(top: float) -> LinearScale | LogScale:
    """The scale of SWR up to the top of its axis."""
    return (LinearScale if top <= _LINEAR_UP_TO else LogScale)(1.0, top, BOTTOM, TOP)


def draw_axes(drawing: Drawing, across: LinearScale, up: LinearScale | LogScale) -> None:
    """Draw the grid with its figures, the frame and the units."""
    is_linear = isinstance(up, LinearScale)
    marks = linear_ticks if is_linear else log_ticks
    for swr in marks(1.0, up.high, _SWR_TICKS if is_linear else _SWR_TICKS + 3):
        drawing.line((LEFT, up(swr)), (RIGHT, up(swr)), "grid")
        drawing.text((LEFT - 6.0, up(swr) + 4.0), f"{swr:g}", "tick", "end")
    for mhz in linear_ticks(across.low, across.high, _FREQUENCY_TICKS):
        drawing.line((across(mhz), TOP), (across(mhz), BOTTOM), "grid")
        drawing.text((across(mhz), BOTTOM + 18.0), formats.edge_mhz(mhz), "tick")
    drawing.box((LEFT, TOP), (RIGHT, BOTTOM), "frame")
    drawing.text((2.0, TOP - 11.0), "SWR" if is_linear else "SWR, log scale", "unit", "start")
    drawing.text((RIGHT, BOTTOM + 31.0), "MHz", "unit", "end")


def draw_limit(drawing: Drawing, up: LinearScale | LogScale, limit: float) -> None:
    """Draw a limit as a line, with its name."""
    drawing.line((LEFT, up(limit)), (RIGHT, up(limit)), "limit")
    drawing.text((RIGHT - 4.0, up(limit) - 4.0), f"limit {formats.swr(limit)}", "limit-name", "end")


def say_all_above(drawing: Drawing, top: float) -> None:
    """Say that the whole band lies above the axis."""
    drawing.text((0.5 * (LEFT + RIGHT), TOP + 18.0), f"above {top:g} over the whole band", "tick")
