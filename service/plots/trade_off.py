"""What the wires of the front trade: served width against length, SWR, cost or loss."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Literal

from markupsafe import Markup

from service.contracts import formats
from service.contracts.candidate import TradeOff
from service.plots.drawing import Drawing
from service.plots.labels import place_labels
from service.plots.scales import LinearScale, LogScale, Point, linear_ticks, log_ticks

Against = Literal["length", "swr", "cost", "loss"]

_AXES: Final[dict[Against, str]] = {
    "length": "length, m",
    "swr": "worst SWR",
    "cost": "cost of the wire",
    "loss": "line loss, dB",
}

_WIDTH: Final = 344.0
_LEFT: Final = 38.0
_RIGHT: Final = _WIDTH - 14.0
_TOP: Final = 26.0
_BOTTOM: Final = _TOP + 210.0
_HEIGHT: Final = _BOTTOM + 36.0
_MOST_TICKS: Final = 6
#: A wire whose SWR is above this is as far from use as can be, and no axis goes there.
_HIGHEST_SWR: Final = 100.0
#: An axis of SWR that must reach higher is logarithmic.
_LINEAR_UP_TO: Final = 6.0

_SHOWN_PX: Final = 4.5
_OTHER_PX: Final = 3.5
_FEWER_PX: Final = 2.0


@dataclass(frozen=True, slots=True)
class _Frame:
    across: LinearScale | LogScale
    served: LinearScale

    def place(self, each: TradeOff, against: Against) -> Point:
        return self.across(_value(each, against) or 0.0), self.served(100.0 * each.weighted_served)


def trade_off_plot(front: Sequence[TradeOff], against: Against) -> Markup:
    """Draw the front: the part of the bands served against what has to be paid for it.

    Parameters
    ----------
    front : sequence of TradeOff
        At least one; those with a rank are marked by it, those that serve fewer required
        bands than another are drawn small.
    against : {"length", "swr", "cost", "loss"}
        What is paid; wires of which it is not known are left out.
    """
    drawn = [each for each in front if _is_drawn(_value(each, against), against)]
    drawing = Drawing(f"trade-{against}", _WIDTH, _HEIGHT, "trade")
    if drawn:
        frame = _frame(drawn, against)
        _draw_axes(drawing, frame, against)
        _draw_marks(drawing, frame, drawn, against)
    return drawing.markup(f"Served width against {_AXES[against]}", _in_words(front, drawn))


def _value(each: TradeOff, against: Against) -> float | None:
    match against:
        case "length":
            return each.length_m
        case "swr":
            return each.swr_worst
        case "cost":
            return each.cost
        case "loss":
            return each.loss_db


def _is_drawn(value: float | None, against: Against) -> bool:
    return value is not None and (against != "swr" or value <= _HIGHEST_SWR)


def _frame(front: Sequence[TradeOff], against: Against) -> _Frame:
    served = [100.0 * each.weighted_served for each in front]
    low, high = _with_margin(min(served), max(served), least=0.0, most=100.0)
    values = [_value(each, against) or 0.0 for each in front]
    left, right = _with_margin(min(values), max(values), least=1.0 if against == "swr" else 0.0)
    is_log = against == "swr" and right > _LINEAR_UP_TO
    return _Frame(
        (LogScale if is_log else LinearScale)(left, right, _LEFT, _RIGHT),
        LinearScale(low, high, _BOTTOM, _TOP),
    )


def _with_margin(
    low: float, high: float, *, least: float, most: float = float("inf")
) -> tuple[float, float]:
    """Limits a little wider than what they hold, so that no mark lies on the frame."""
    margin = max(0.06 * (high - low), 0.02 * high, 1e-3)
    return max(least, low - margin), min(high + margin, most + 0.5 * margin)


def _draw_axes(drawing: Drawing, frame: _Frame, against: Against) -> None:
    for served in linear_ticks(frame.served.low, frame.served.high, _MOST_TICKS):
        y = frame.served(served)
        drawing.line((_LEFT, y), (_RIGHT, y), "grid")
        drawing.text((_LEFT - 6.0, y + 4.0), f"{served:g}", "tick", "end")
    marks = log_ticks if isinstance(frame.across, LogScale) else linear_ticks
    for value in marks(frame.across.low, frame.across.high, _MOST_TICKS):
        x = frame.across(value)
        drawing.line((x, _TOP), (x, _BOTTOM), "grid")
        drawing.text((x, _BOTTOM + 16.0), f"{value:g}", "tick")
    drawing.box((_LEFT, _TOP), (_RIGHT, _BOTTOM), "frame")
    drawing.text((2.0, _TOP - 11.0), "served width by weight, %", "unit", "start")
    drawing.text((_RIGHT, _BOTTOM + 31.0), _AXES[against], "unit", "end")


def _draw_marks(
    drawing: Drawing, frame: _Frame, front: Sequence[TradeOff], against: Against
) -> None:
    most = max(each.required_served for each in front)
    for each in front:
        if each.rank is None:
            fewer = each.required_served < most
            kind, radius = ("fewer", _FEWER_PX) if fewer else ("other", _OTHER_PX)
            drawing.dot(frame.place(each, against), radius, kind)
    shown = {each.rank: frame.place(each, against) for each in front if each.rank is not None}
    labels = _labels(shown)
    for rank, (middle, is_far) in labels.items():
        if is_far:
            drawing.line(shown[rank], middle, "leader")
    for rank, place in shown.items():
        drawing.dot(place, _SHOWN_PX, "shown")
        middle, _ = labels[rank]
        drawing.text((middle[0], middle[1] + 4.0), str(rank), "order series")


def _labels(marks: dict[int, Point]) -> dict[int, tuple[Point, bool]]:
    """For each mark the middle of its rank, clear of the others, and whether it is far off."""
    named = {str(rank): place for rank, place in sorted(marks.items())}
    placed = place_labels(named, (_LEFT, _TOP), (_RIGHT, _BOTTOM), radius=_SHOWN_PX)
    return {int(rank): each for rank, each in placed.items()}


def _in_words(front: Sequence[TradeOff], drawn: Sequence[TradeOff]) -> str:
    shown = [
        f"candidate {each.rank}, {formats.metres(each.length_m)} m, serves "
        f"{formats.share(each.weighted_served)} with a worst SWR of {formats.swr(each.swr_worst)}"
        for each in front
        if each.rank is not None
    ]
    left_out = len(front) - len(drawn)
    more = f" {left_out} of them beyond the axis or unknown on it." if left_out else ""
    return f"{len(front)} wires; {formats.listed(shown) or 'none of them a candidate'}.{more}"
