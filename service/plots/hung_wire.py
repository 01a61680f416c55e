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
    """Where things are in the drawing, in px; both directions have one scale."""

    left: float
    right: float
    top: float
    ground: float
    ends: tuple[float, float]
    feed: float


def wire_plot(report: FeedReport, site: Site, paper: Paper = "wide") -> Markup:
    """Draw the wire as hung: supports, ropes, insulators, wire, feed point, span and height.

    Parameters
    ----------
    report : FeedReport
        Of a candidate: its length, height and place of the feed.
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
        _draw_ground_and_supports(drawing, view, report.height_m)
    _draw_wire(drawing, view, report)
    _draw_measures(drawing, view, report, site)
    return drawing.markup(
        f"The wire between its supports, to scale, candidate {report.rank}",
        f"{formats.metres(report.length_m)} m of wire in a span of "
        f"{formats.metres(site.span_m)} m, fed "
        f"{formats.feed_place(report.feed_fraction, report.length_m)}"
        + (f", {formats.metres(report.height_m)} m high." if report.height_m else "."),
    )


def _view(report: FeedReport, site: Site, paper: Paper) -> _View:
    width, most = _SIZES[paper]
    per_m = (width - 2.0 * _MARGIN_PX) / site.span_m
    if report.height_m is not None:
        per_m = min(per_m, most / report.height_m)
    middle, half = 0.5 * width, 0.5 * site.span_m * per_m
    drop = _FREE_DROP_PX if report.height_m is None else report.height_m * per_m
    ends = (middle - 0.5 * report.length_m * per_m, middle + 0.5 * report.length_m * per_m)
    feed = ends[0] + report.feed_fraction * (ends[1] - ends[0])
    return _View(middle - half, middle + half, _TOP_PX, _TOP_PX + drop, ends, feed)


def _draw_ground_and_supports(drawing: Drawing, view: _View, height_m: float) -> None:
    drawing.box((view.left - 12.0, view.ground), (view.right + 12.0, view.ground + 5.0), "earth")
    for x in (view.left, view.right):
        drawing.line((x, view.top - 3.0), (x, view.ground), "support")
    x = view.left + 14.0
    if view.feed - x < 90.0:
        x = view.right - 14.0
    _measure(drawing, (x, view.top), (x, view.ground))
    middle = 0.5 * (view.top + view.ground) + 4.0
    anchor: Literal["start", "end"] = "start" if x < view.feed else "end"
    sideways = 7.0 if anchor == "start" else -7.0
    drawing.text((x + sideways, middle), f"{formats.metres(height_m)} m high", "words", anchor)


def _draw_wire(drawing: Drawing, view: _View, report: FeedReport) -> None:
    start, end = view.ends
    drawing.line((view.left, view.top), (start, view.top), "rope")
    drawing.line((end, view.top), (view.right, view.top), "rope")
    drawing.line((view.feed, view.top), (view.feed, view.ground), "feeder")
    drawing.line((start, view.top), (end, view.top), "wire-line")
    drawing.tip(f"{formats.metres(report.length_m)} m of {report.conductor}")
    for x in (start, end):
        corner = (x - _INSULATOR_PX, view.top - 5.0)
        drawing.box(corner, (x + _INSULATOR_PX, view.top + 5.0), "insulator")
        drawing.tip("end insulator")
    drawing.dot((view.feed, view.top), 4.5, "feed-mark")
    drawing.tip(f"fed {formats.feed_place(report.feed_fraction, report.length_m)}")


def _draw_measures(drawing: Drawing, view: _View, report: FeedReport, site: Site) -> None:
    y = view.top - 16.0
    start, end = view.ends
    _measure(drawing, (start, y), (end, y))
    length = f"wire {formats.metres(report.length_m)} m"
    drawing.text((0.5 * (start + end), y - 6.0), length, "words")
    foot = view.ground + 20.0
    _measure(drawing, (view.left, foot), (view.right, foot))
    span = f"span {formats.metres(site.span_m)} m"
    drawing.text((0.5 * (view.left + view.right), foot + 16.0), span, "words")
    # Beside the feeder, on the roomier side.
    right = view.right - view.feed > view.feed - view.left
    beside = view.feed + (8.0 if right else -8.0)
    anchor: Literal["start", "end"] = "start" if right else "end"
    drawing.text((beside, view.top + 20.0), _feed_in_words(report), "words", anchor)


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
