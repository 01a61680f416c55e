"""Reflection coefficient on a Smith chart: circles of resistance and reactance, an arc a band.

References
----------
P. H. Smith, "Transmission line calculator", Electronics 12(1), 1939: with Γ = (z − 1)/(z + 1), a
resistance r is the circle of radius 1/(r + 1) about r/(r + 1), a reactance x that of radius 1/|x|
about 1 + j/x.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence
from typing import Final

from service.contracts import formats
from service.contracts.candidate import BandOutcome
from service.contracts.report import BandReport, FeedReport, ReportPoint
from service.plots.drawing import Drawing
from service.plots.labels import place_labels
from service.plots.looks import LOOKS, band_hue, band_look
from service.plots.scales import Point

RESISTANCES: Final = (0.2, 0.5, 1.0, 2.0, 5.0)
REACTANCES: Final = (0.2, 0.5, 1.0, 2.0, 5.0)

_WIDTH: Final = 400.0
_RADIUS: Final = 170.0
_CENTRE: Final[Point] = (200.0, 200.0)
_EDGE_MARK_PX: Final = 3.2


def smith_plot(report: FeedReport, outcomes: Sequence[BandOutcome]) -> str:
    """Draw the reflection coefficient over every band, as a file of its own.

    Parameters
    ----------
    report : FeedReport
        Whose bands tell the angle of the reflection.
    outcomes : sequence of BandOutcome
        Of the same bands: their limits.
    """
    drawing = Drawing(f"smith-{report.rank}", _WIDTH, 2.0 * _CENTRE[1], "smith")
    drawing.tell(read="smith", centre=f"{_CENTRE[0]:g} {_CENTRE[1]:g} {_RADIUS:g}")
    drawing.box((0.0, 0.0), (_WIDTH, 2.0 * _CENTRE[1]), "paper")
    _draw_grid(drawing)
    _draw_limits(drawing, outcomes)
    for index, band in enumerate(report.bands):
        _draw_arc(drawing, band, index)
    _draw_numbers(drawing, report.bands)
    return drawing.image(
        f"Reflection coefficient over each band, candidate {report.rank}", _in_words(report), LOOKS
    )


def reflection_of(point: ReportPoint) -> complex:
    """The complex reflection coefficient of a point that tells its angle."""
    return cmath.rect(point.reflection, math.radians(point.reflection_deg or 0.0))


def place_of(reflection: complex) -> Point:
    """Where a reflection coefficient lies in the drawing."""
    return _CENTRE[0] + _RADIUS * reflection.real, _CENTRE[1] - _RADIUS * reflection.imag


def _draw_grid(drawing: Drawing) -> None:
    for r in RESISTANCES:
        drawing.dot(place_of(complex(r / (r + 1.0), 0.0)), _RADIUS / (r + 1.0), "grid hollow")
    for x in REACTANCES:
        for sign in (1.0, -1.0):
            rim = _of_impedance(complex(0.0, sign * x))
            # From the rim to the open circuit, where all arcs of reactance meet.
            drawing.arc(
                place_of(rim), place_of(1.0 + 0.0j), _RADIUS / x, "grid hollow", left=sign > 0.0
            )
            label = f"{x:g}" if sign > 0.0 else f"−{x:g}"
            beyond = place_of(1.07 * rim)
            drawing.text((beyond[0], beyond[1] + 4.0), label, "tick")
    drawing.line(place_of(-1.0 + 0.0j), place_of(1.0 + 0.0j), "zero")
    drawing.dot(_CENTRE, _RADIUS, "frame hollow")
    for r in (0.0, *RESISTANCES):
        x, y = place_of(_of_impedance(complex(r, 0.0)))
        drawing.text((x + 3.0, y - 3.0), f"{r:g}", "tick", "start")
    drawing.text((4.0, 14.0), "r and x, parts of the reference", "unit", "start")


def _of_impedance(z: complex) -> complex:
    return (z - 1.0) / (z + 1.0)


def _draw_limits(drawing: Drawing, outcomes: Sequence[BandOutcome]) -> None:
    """The circle that each limit of SWR draws about the match."""
    for limit in sorted({outcome.swr_limit for outcome in outcomes}):
        radius = (limit - 1.0) / (limit + 1.0)
        drawing.dot(_CENTRE, _RADIUS * radius, "limit hollow")
        drawing.tip(f"SWR limit {formats.swr(limit)}")
        x, y = place_of(complex(0.0, -radius))
        drawing.text((x, y + 12.0), f"SWR {formats.swr(limit)}", "limit-name")


def _draw_arc(drawing: Drawing, band: BandReport, index: int) -> None:
    hue = band_hue(index)
    places = [place_of(reflection_of(point)) for point in band.grid]
    drawing.curve([places], f"curve {band_look(index)}")
    drawing.tip(
        f"{band.name}: {_point_in_words(band.low)}; {_point_in_words(band.centre)}; "
        f"{_point_in_words(band.high)}"
    )
    drawing.dot(places[0], _EDGE_MARK_PX, f"low-edge {hue}")
    drawing.tip(f"{band.name}, low edge: {_point_in_words(band.low)}")
    drawing.dot(places[-1], _EDGE_MARK_PX, f"filled-{hue}")
    drawing.tip(f"{band.name}, high edge: {_point_in_words(band.high)}")


def _draw_numbers(drawing: Drawing, bands: Sequence[BandReport]) -> None:
    """Each band's number beside the middle of its arc."""
    marks = {
        str(number): place_of(reflection_of(band.centre)) for number, band in enumerate(bands, 1)
    }
    arcs = [place_of(reflection_of(point)) for band in bands for point in band.grid[::4]]
    room = ((0.0, 20.0), (_WIDTH, 2.0 * _CENTRE[1]))
    for label, (middle, is_far) in place_labels(marks, *room, obstacles=arcs, radius=3.0).items():
        if is_far:
            drawing.line(marks[label], middle, "leader")
        drawing.text((middle[0], middle[1] + 4.0), label, "order")


def _point_in_words(point: ReportPoint) -> str:
    return (
        f"{formats.edge_mhz(point.frequency_mhz)} MHz, |Γ| {formats.reflection(point.reflection)}"
        f" at {formats.degrees(point.reflection_deg or 0.0)}°"
    )


def _in_words(report: FeedReport) -> str:
    told = [
        f"{number}, {band.name}, centre {_point_in_words(band.centre)}"
        for number, band in enumerate(report.bands, 1)
    ]
    return f"Against {formats.ohms(report.reference_ohm)} Ω. {formats.listed(told)}."
