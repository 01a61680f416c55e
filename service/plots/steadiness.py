"""How a candidate holds up: for each band the SWR it may come to, against its limit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from markupsafe import Markup

from service.contracts import formats
from service.contracts.candidate import BandOutcome, Candidate, Departure
from service.plots.drawing import Drawing
from service.plots.scales import LogScale, log_ticks

_WIDTH: Final = 344.0
_LEFT: Final = 8.0
_RIGHT: Final = _WIDTH - 12.0
_TOP: Final = 4.0
_ROW_PX: Final = 40.0
_FOOT_PX: Final = 36.0
_TRACK_PX: Final = 8.0
_MARK_PX: Final = 4.5
#: The axis reaches at least and at most so far; what lies beyond is drawn to its end.
_LOWEST_TOP: Final = 3.0
_HIGHEST_TOP: Final = 10.0


@dataclass(frozen=True, slots=True)
class _Row:
    outcome: BandOutcome
    departures: tuple[Departure, ...]

    @property
    def worst(self) -> Departure:
        return max(self.departures, key=lambda each: each.swr_worst)

    @property
    def reach(self) -> tuple[float, float]:
        values = [self.outcome.swr_worst, *(each.swr_worst for each in self.departures)]
        return min(values), max(values)


def steadiness_plot(candidate: Candidate) -> Markup:
    """Draw the range of each band's worst SWR over all departures, and the planned one.

    Parameters
    ----------
    candidate : Candidate
        With its steadiness, which tells of at least one band.
    """
    rows = _rows(candidate)
    bottom = _TOP + _ROW_PX * len(rows)
    top_swr = max(
        _LOWEST_TOP, *(max(1.25 * row.outcome.swr_limit, 1.05 * row.reach[1]) for row in rows)
    )
    scale = LogScale(1.0, min(top_swr, _HIGHEST_TOP), _LEFT, _RIGHT)
    drawing = Drawing(f"steady-{candidate.rank}", _WIDTH, bottom + _FOOT_PX, "steady")
    for swr in log_ticks(1.0, scale.high, 7):
        drawing.line((scale(swr), _TOP), (scale(swr), bottom), "grid")
        drawing.text((scale(swr), bottom + 15.0), f"{swr:g}", "tick")
    for index, row in enumerate(rows):
        _draw_row(drawing, scale, row, _TOP + _ROW_PX * index)
    drawing.line((_LEFT, bottom), (_RIGHT, bottom), "frame")
    drawing.text((_RIGHT, bottom + 30.0), "worst SWR in the band, log scale", "unit", "end")
    return drawing.markup(
        f"Worst SWR under the departures, candidate {candidate.rank}", _in_words(rows)
    )


def _rows(candidate: Candidate) -> list[_Row]:
    departures = candidate.steadiness.departures if candidate.steadiness else ()
    rows = [
        _Row(outcome, tuple(each for each in departures if each.band == outcome.name))
        for outcome in candidate.bands
    ]
    return [row for row in rows if row.departures]


def _draw_row(drawing: Drawing, scale: LogScale, row: _Row, top: float) -> None:
    """Name and worst departure above, the track below: shaded as far as the limit allows."""
    track = top + 27.0
    half = 0.5 * _TRACK_PX
    drawing.text((_LEFT, top + 16.0), row.outcome.name, "band-name", "start")
    drawing.text((_RIGHT, top + 16.0), _worst_in_words(row), "tick", "end")

    def across(swr: float) -> float:
        return scale(min(max(swr, 1.0), scale.high))

    limit = across(row.outcome.swr_limit)
    drawing.box((_LEFT, track - half), (limit, track + half), "band")
    low, high = row.reach
    drawing.line((across(low), track), (across(high), track), "reach")
    drawing.line((limit, track - half - 2.0), (limit, track + half + 2.0), "limit")
    if row.outcome.swr_worst <= scale.high:
        drawing.dot((across(row.outcome.swr_worst), track), _MARK_PX, "series")


def _worst_in_words(row: _Row) -> str:
    return f"{formats.swr(row.worst.swr_worst)}, {row.worst.what}"


def _in_words(rows: list[_Row]) -> str:
    said = [
        f"{row.outcome.name} {formats.swr(row.outcome.swr_worst)} as planned, at worst "
        f"{_worst_in_words(row)}, limit {formats.swr(row.outcome.swr_limit)}"
        for row in rows
    ]
    return "; ".join(said) + "."
