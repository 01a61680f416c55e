"""Elevation and azimuth pattern of one band: polar, in decibels below the largest gain."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Final

from service.contracts import formats
from service.contracts.radiation import Radiation
from service.contracts.report import BandReport, FeedReport
from service.plots.drawing import Drawing
from service.plots.looks import LOOKS
from service.plots.scales import Point

#: Rings in dB below the largest gain; the last is the centre.
RINGS_DB: Final = (0.0, -3.0, -10.0, -20.0)
LOWEST_DB: Final = -30.0

_WIDTH: Final = 344.0
_RADIUS: Final = 130.0
_UPPER: Final[Point] = (172.0, 192.0)
_LOWER: Final[Point] = (172.0, 400.0)
_HEIGHT: Final = 572.0


def pattern_plot(report: FeedReport, index: int) -> str | None:
    """Draw the pattern on one band as a file of its own.

    Parameters
    ----------
    report : FeedReport
    index : int
        Which of its bands.

    Returns
    -------
    str or None
        The file's text; None where no pattern is stored.
    """
    band = report.bands[index]
    found = band.radiation
    if found is None:
        return None
    drawing = Drawing(f"pattern-{report.rank}-{index + 1}", _WIDTH, _HEIGHT, "pattern")
    drawing.tell(
        read="pattern",
        band=str(index),
        upper=f"{_UPPER[0]:g} {_UPPER[1]:g} {_RADIUS:g}",
        lower=f"{_LOWER[0]:g} {_LOWER[1]:g} {_RADIUS:g}",
    )
    drawing.box((0.0, 0.0), (_WIDTH, _HEIGHT), "paper")
    drawing.text(
        (4.0, 16.0), f"{band.name}, 0 dB = {_dbi(found.gain_dbi)} dBi", "band-name", "start"
    )
    _draw_elevation(drawing, found)
    _draw_azimuth(drawing, found)
    return drawing.image(f"Pattern on {band.name}", _in_words(band, found), LOOKS)


def part_of_radius(gain_dbi: float, largest_dbi: float) -> float:
    """How far from the centre a gain lies: 1 at the largest, 0 at the lowest and below."""
    return max(0.0, 1.0 - (gain_dbi - largest_dbi) / LOWEST_DB)


def _place(centre: Point, angle_deg: float, part: float) -> Point:
    angle = math.radians(angle_deg)
    return (
        centre[0] + _RADIUS * part * math.cos(angle),
        centre[1] - _RADIUS * part * math.sin(angle),
    )


def _draw_elevation(drawing: Drawing, found: Radiation) -> None:
    left, right = (_place(_UPPER, angle, 1.0) for angle in (180.0, 0.0))
    for ring in RINGS_DB:
        part = part_of_radius(ring, 0.0)
        ends = _place(_UPPER, 180.0, part), _place(_UPPER, 0.0, part)
        drawing.arc(*ends, _RADIUS * part, _ring(ring), left=False)
    for angle in range(0, 181, 30):
        drawing.line(_UPPER, _place(_UPPER, angle, 1.0), "grid")
        x, y = _place(_UPPER, angle, 1.09)
        drawing.text((x, y + 4.0), f"{min(angle, 180 - angle)}°", "tick")
    drawing.line(left, right, "zero")
    steps = range(len(found.broadside_dbi))
    across = [
        *((index * found.step_deg, found.broadside_dbi[index]) for index in steps),
        *(
            (180.0 - index * found.step_deg, found.broadside_dbi[index])
            for index in reversed(steps)
        ),
    ]
    along = [(index * found.step_deg, gain) for index, gain in enumerate(found.end_on_dbi)]
    _draw_cut(drawing, _UPPER, along, found, "end-on")
    drawing.tip("along the wire")
    _draw_cut(drawing, _UPPER, across, found, "broadside")
    drawing.tip("across the wire")
    _label_rings(drawing, _UPPER)
    tip = _place(_UPPER, found.take_off_deg, 1.0)
    drawing.line(_UPPER, tip, "strongest")
    drawing.tip(f"take-off angle {formats.degrees(found.take_off_deg)}°")
    drawing.text((4.0, _UPPER[1] + 22.0), "elevation", "unit", "start")
    drawing.text((_WIDTH - 4.0, _UPPER[1] + 22.0), "dB, even from 0 to −30", "unit", "end")


def _draw_azimuth(drawing: Drawing, found: Radiation) -> None:
    for ring in RINGS_DB:
        part = part_of_radius(ring, 0.0)
        drawing.dot(_LOWER, _RADIUS * part, _ring(ring))
    for angle in range(0, 360, 30):
        drawing.line(_LOWER, _place(_LOWER, angle, 1.0), "grid")
        x, y = _place(_LOWER, angle, 1.1)
        drawing.text((x, y + 4.0), f"{angle}°", "tick")
    drawing.line(_place(_LOWER, 180.0, 0.16), _place(_LOWER, 0.0, 0.16), "wire-line")
    drawing.tip("the wire, its direction 0°")
    cut = [(index * found.step_deg, gain) for index, gain in enumerate(found.around_dbi)]
    whole = [*cut, *((360.0 - turned, gain) for turned, gain in reversed(cut))]
    _draw_cut(drawing, _LOWER, whole, found, "around")
    drawing.tip(f"around, at {formats.degrees(found.take_off_deg)}° elevation")
    _label_rings(drawing, _LOWER)
    for strongest in (found.azimuth_deg, -found.azimuth_deg):
        drawing.dot(_place(_LOWER, strongest, 1.0), 4.0, "shown")
        drawing.tip(f"{_dbi(found.gain_dbi)} dBi, the largest gain")
    words = f"azimuth, at {formats.degrees(found.take_off_deg)}° elevation"
    drawing.text((4.0, _HEIGHT - 6.0), words, "unit", "start")


def _draw_cut(
    drawing: Drawing,
    centre: Point,
    cut: Sequence[tuple[float, float]],
    found: Radiation,
    css_class: str,
) -> None:
    places = [_place(centre, angle, part_of_radius(gain, found.gain_dbi)) for angle, gain in cut]
    drawing.curve([places], f"curve {css_class}")


def _ring(ring: float) -> str:
    return {0.0: "frame hollow", -3.0: "half-power hollow"}.get(ring, "grid hollow")


def _label_rings(drawing: Drawing, centre: Point) -> None:
    """Each ring's dB where spokes leave room; the outermost is told above the drawing."""
    for ring in RINGS_DB[1:]:
        x, y = _place(centre, 75.0, part_of_radius(ring, 0.0))
        drawing.text((x, y + 4.0), _signed(f"{ring:g}"), "ring")


def _dbi(gain: float) -> str:
    return _signed(formats.decibels(gain))


def _signed(text: str) -> str:
    return text.replace("-", "−")


def _in_words(band: BandReport, found: Radiation) -> str:
    return (
        f"At {formats.mhz(band.centre.frequency_mhz)} MHz the largest gain is "
        f"{formats.decibels(found.gain_dbi)} dBi at {formats.degrees(found.take_off_deg)}° "
        f"elevation and {formats.degrees(found.azimuth_deg)}° from the wire's direction."
    )
