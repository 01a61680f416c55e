"""The wire drawn to scale between its supports, and the current along it band by band."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final, Literal

from markupsafe import Markup

from service.contracts import formats
from service.contracts.report import FeedReport
from service.contracts.station_site import Site
from service.plots.drawing import Drawing
from service.plots.looks import LOOKS
from service.plots.scales import LinearScale, Point, linear_ticks

Paper = Literal["wide", "narrow"]

#: Width of the drawing, and the most of its height that the wire may hang high, in px.
_SIZES: Final[dict[Paper, tuple[float, float]]] = {"wide": (760.0, 300.0), "narrow": (344.0, 260.0)}
_MARGIN_PX: Final = 16.0
_TOP_PX: Final = 52.0
_FOOT_PX: Final = 48.0
_FREE_DROP_PX: Final = 60.0
_INSULATOR_PX: Final = 3.5
#: Two supports and the two ends of the wire.
_FEWEST_OF_SHAPE: Final = 4
_TICK_PX: Final = 4.0

_WIDTH: Final = 344.0
_LEFT: Final = 38.0
_RIGHT: Final = _WIDTH - 12.0
_STRIP_TOP: Final = 24.0
_STRIP_BOTTOM: Final = 110.0
_STRIP_HEIGHT: Final = _STRIP_BOTTOM + 34.0
_MOST_TICKS: Final = 6


@dataclass(frozen=True, slots=True)
class _View:
    """Where things are in the drawing, in px; both directions have one scale.

    ``supports`` are where the ropes are tied, ``wire`` the points of the wire from end to end.
    """

    supports: tuple[Point, Point]
    wire: tuple[Point, ...]
    feed: Point
    ground: float

    @property
    def top(self) -> float:
        return min(y for _, y in self.supports)

    @property
    def ends(self) -> tuple[Point, Point]:
        return self.wire[0], self.wire[-1]


def wire_plot(report: FeedReport, site: Site, paper: Paper = "wide") -> Markup:
    """Draw the wire as hung: supports, ropes, insulators, wire, feed point, span and height.

    Parameters
    ----------
    report : FeedReport
        Of a candidate: its length, height and place of the feed. Sag is drawn where its shape is
        stored.
    site : Site
        Whose span it hangs in.
    paper : {"wide", "narrow"}
    """
    view = _view(report, site, paper)
    drawing = Drawing(
        f"wire-{report.rank}-{paper}",
        _SIZES[paper][0],
        view.ground + _FOOT_PX,
        f"hung {paper}",
    )
    if report.height_m is not None:
        _draw_ground_and_supports(drawing, view, report)
    _draw_wire(drawing, view, report)
    _draw_measures(drawing, view, report, site)
    high = f", {formats.metres(report.height_m)} m high" if report.height_m else ""
    return drawing.markup(
        f"The wire between its supports, to scale, candidate {report.rank}",
        f"{formats.metres(report.length_m)} m of wire in a span of "
        f"{formats.metres(site.span_m)} m, fed "
        f"{formats.feed_place(report.feed_fraction, report.length_m)}{high}"
        f"{_sag_in_words(report)}.",
    )


def sag_is_drawn(report: FeedReport) -> bool:
    """Whether the shape of the wire as strung is stored."""
    return report.hanging is not None and len(report.hanging.shape_m) >= _FEWEST_OF_SHAPE


def _places_m(report: FeedReport, site: Site) -> tuple[tuple[float, float], ...]:
    """Support, wire from end to end, support: along, and up from the first support."""
    if report.hanging is not None and sag_is_drawn(report):
        return report.hanging.shape_m
    start_m = 0.5 * (site.span_m - report.length_m)
    return ((0.0, 0.0), (start_m, 0.0), (start_m + report.length_m, 0.0), (site.span_m, 0.0))


def _view(report: FeedReport, site: Site, paper: Paper) -> _View:
    places_m = _places_m(report, site)
    width, most = _SIZES[paper]
    span_m, rise_m = places_m[-1]
    heights_m = [up for _, up in places_m]
    # The height told is that half way between the supports.
    ground_m = None if report.height_m is None else 0.5 * rise_m - report.height_m
    tall_m = max(heights_m) - min([*heights_m, *(() if ground_m is None else (ground_m,))])
    per_m = (width - 2.0 * _MARGIN_PX) / span_m
    if tall_m > 0.0:
        per_m = min(per_m, most / tall_m)
    left, top_m = 0.5 * (width - span_m * per_m), max(heights_m)

    def px(place_m: tuple[float, float]) -> Point:
        return left + place_m[0] * per_m, _TOP_PX + (top_m - place_m[1]) * per_m

    first, *wire_m, last = places_m
    if ground_m is None:
        ground = max(px(each)[1] for each in places_m) + _FREE_DROP_PX
    else:
        ground = px((0.0, ground_m))[1]
    return _View(
        (px(first), px(last)),
        tuple(px(each) for each in wire_m),
        px(_fed_m(wire_m, report.feed_fraction)),
        ground,
    )


def _fed_m(wire_m: list[tuple[float, float]], fraction: float) -> tuple[float, float]:
    """Where the feed is: points of the wire lie evenly along it."""
    steps = len(wire_m) - 1
    whole = min(int(fraction * steps), steps - 1)
    part = fraction * steps - whole
    (x, up), (next_x, next_up) = wire_m[whole], wire_m[whole + 1]
    return x + part * (next_x - x), up + part * (next_up - up)


def _draw_ground_and_supports(drawing: Drawing, view: _View, report: FeedReport) -> None:
    (left, left_top), (right, right_top) = view.supports
    drawing.box((left - 12.0, view.ground), (right + 12.0, view.ground + 5.0), "earth")
    for x, top in view.supports:
        drawing.line((x, top - 3.0), (x, view.ground), "support")
    x, top, higher_m = left + 14.0, left_top, -0.5 * _rise_m(report)
    if view.feed[0] - x < 90.0:
        x, top, higher_m = right - 14.0, right_top, 0.5 * _rise_m(report)
    _measure(drawing, (x, top), (x, view.ground))
    middle = 0.5 * (top + view.ground) + 4.0
    anchor: Literal["start", "end"] = "start" if x < view.feed[0] else "end"
    sideways = 7.0 if anchor == "start" else -7.0
    high = f"{formats.metres((report.height_m or 0.0) + higher_m)} m high"
    drawing.text((x + sideways, middle), high, "words", anchor)


def _rise_m(report: FeedReport) -> float:
    """How much higher the far support is than the near one, as drawn."""
    return report.hanging.shape_m[-1][1] if report.hanging and sag_is_drawn(report) else 0.0


def _draw_wire(drawing: Drawing, view: _View, report: FeedReport) -> None:
    start, end = view.ends
    if sag_is_drawn(report):
        drawing.line(*view.supports, "measure")
        drawing.tip("straight from support to support")
    drawing.line(view.supports[0], start, "rope")
    drawing.line(end, view.supports[1], "rope")
    drawing.line(view.feed, (view.feed[0], view.ground), "feeder")
    if len(view.wire) > len(view.ends):
        drawing.curve([view.wire], "wire-line")
    else:
        drawing.line(start, end, "wire-line")
    drawing.tip(f"{formats.metres(report.length_m)} m of {report.conductor}")
    for x, y in (start, end):
        drawing.box((x - _INSULATOR_PX, y - 5.0), (x + _INSULATOR_PX, y + 5.0), "insulator")
        drawing.tip("end insulator")
    drawing.dot(view.feed, 4.5, "feed-mark")
    drawing.tip(f"fed {formats.feed_place(report.feed_fraction, report.length_m)}")


def _draw_measures(drawing: Drawing, view: _View, report: FeedReport, site: Site) -> None:
    y = view.top - 16.0
    start, end = (x for x, _ in view.ends)
    _measure(drawing, (start, y), (end, y))
    length = f"wire {formats.metres(report.length_m)} m{_sag_in_words(report)}"
    drawing.text((0.5 * (start + end), y - 6.0), length, "words")
    foot = view.ground + 20.0
    left, right = (x for x, _ in view.supports)
    _measure(drawing, (left, foot), (right, foot))
    span = f"span {formats.metres(site.span_m)} m"
    if _rise_m(report):
        # The span is the straight line between supports of unlike height.
        span = f"{formats.metres(_places_m(report, site)[-1][0])} m apart, {span}"
    drawing.text((0.5 * (left + right), foot + 16.0), span, "words")
    # Beside the feeder, on the roomier side.
    roomier = right - view.feed[0] > view.feed[0] - left
    beside = view.feed[0] + (8.0 if roomier else -8.0)
    anchor: Literal["start", "end"] = "start" if roomier else "end"
    drawing.text((beside, view.feed[1] + 20.0), _feed_in_words(report), "words", anchor)


def _sag_in_words(report: FeedReport) -> str:
    if report.hanging is None or not sag_is_drawn(report):
        return ""
    return f", sag {formats.metres(report.hanging.as_strung().sag_m)} m"


def _feed_in_words(report: FeedReport) -> str:
    if report.transformer_ratio == 1.0:
        return "feed point"
    return f"feed point, {formats.ratio(report.transformer_ratio)}"


def _measure(drawing: Drawing, start: Point, end: Point) -> None:
    """A line of measure with a stroke across each end."""
    drawing.line(start, end, "measure")
    across = (0.0, _TICK_PX) if start[1] == end[1] else (_TICK_PX, 0.0)
    for x, y in (start, end):
        drawing.line((x - across[0], y - across[1]), (x + across[0], y + across[1]), "measure")


def current_plot(report: FeedReport, index: int) -> str | None:
    """Draw the current along the wire on one band, as a part of its largest, as a file.

    Parameters
    ----------
    report : FeedReport
    index : int
        Which of its bands.

    Returns
    -------
    str or None
        The file's text; None where no current is stored.
    """
    band = report.bands[index]
    current = band.current
    if current is None:
        return None
    along = LinearScale(0.0, report.length_m, _LEFT, _RIGHT)
    up = LinearScale(-1.0, 1.0, _STRIP_BOTTOM, _STRIP_TOP)
    drawing = Drawing(f"current-{report.rank}-{index + 1}", _WIDTH, _STRIP_HEIGHT, "current")
    drawing.box((0.0, 0.0), (_WIDTH, _STRIP_HEIGHT), "paper")
    drawing.tell(read="current", band=str(index), x=along.noted())
    for part in (-1.0, 0.0, 1.0):
        drawing.line((_LEFT, up(part)), (_RIGHT, up(part)), "grid" if part else "zero")
        label = f"{part:g}".replace("-", "−")
        drawing.text((_LEFT - 6.0, up(part) + 4.0), label, "tick", "end")
    for metres in linear_ticks(0.0, report.length_m, _MOST_TICKS):
        x = along(metres)
        drawing.line((x, _STRIP_TOP), (x, _STRIP_BOTTOM), "grid")
        drawing.text((x, _STRIP_BOTTOM + 15.0), f"{metres:g}", "tick")
    drawing.text((2.0, _STRIP_TOP - 12.0), "I, part of the largest", "unit", "start")
    drawing.text((_RIGHT, _STRIP_BOTTOM + 30.0), "m along the wire", "unit", "end")
    steps = len(current.size) - 1
    places = [along(report.length_m * index / steps) for index in range(steps + 1)]
    drawing.curve([[(x, up(size)) for x, size in zip(places, current.size, strict=True)]], "size")
    drawing.tip("size of the current, whatever its phase")
    signed = [
        (x, up(size * math.cos(math.radians(phase))))
        for x, size, phase in zip(places, current.size, current.phase_deg, strict=True)
    ]
    drawing.curve([signed], "curve standing")
    drawing.tip("the current in phase with its largest; below the line it runs the other way")
    feed = along(report.feed_fraction * report.length_m)
    drawing.line((feed, _STRIP_TOP), (feed, _STRIP_BOTTOM), "resonance")
    drawing.dot((feed, up(0.0)), 4.0, "feed-mark")
    drawing.tip(f"feed point: {formats.part_of_one(current.at_feed)} of the largest current")
    return drawing.image(
        f"Current along the wire, {band.name}",
        f"At {formats.mhz(band.centre.frequency_mhz)} MHz the current at the feed point is "
        f"{formats.part_of_one(current.at_feed)} of the largest along the wire.",
        LOOKS,
    )
