"""R and X at the feed point against frequency, bands shaded and resonances marked by order."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final, Literal

from markupsafe import Markup

from service.contracts import formats
from service.contracts.report import BandReport, FeedReport, ReportPoint
from service.plots.drawing import Drawing
from service.plots.scales import (
    CompressedScale,
    LogScale,
    Point,
    clipped_runs,
    compressed_ticks,
    log_ticks,
    next_round,
)

Paper = Literal["wide", "narrow"]

#: Ohms up to which the scale is about linear: the region of resonances.
_KNEE_OHM: Final = 100.0
_SMALLEST_TICK_OHM: Final = 50.0
#: Nothing above this is worth ink; the table behind the plot has it.
_HIGHEST_OHM: Final = 10_000.0
_NARROWEST_BAND_PX: Final = 2.5
_LETTER_PX: Final = 7.6
_LABEL_ROW_PX: Final = 14.0
_MARK_PX: Final = 4.5


@dataclass(frozen=True, slots=True)
class _Frame:
    """The plotting area within the drawing, in px, and its two scales."""

    left: float
    right: float
    top: float
    bottom: float
    frequency: LogScale
    impedance: CompressedScale

    def place(self, frequency_mhz: float, impedance_ohm: float) -> Point:
        return self.frequency(frequency_mhz), self.impedance(impedance_ohm)


_SIZES: Final[dict[Paper, tuple[float, float, int]]] = {
    # Width of the drawing, height of the plotting area, most marks on the frequency axis.
    "wide": (760.0, 330.0, 12),
    "narrow": (344.0, 300.0, 6),
}


def impedance_plot(report: FeedReport, paper: Paper = "wide") -> Markup:
    """Draw R and X of one candidate over the whole sweep.

    Parameters
    ----------
    report : FeedReport
    paper : {"wide", "narrow"}
        For a desk or a page in print, or for a screen held in the hand.
    """
    width, height, most_ticks = _SIZES[paper]
    low_mhz, high_mhz = report.sweep[0].frequency_mhz, report.sweep[-1].frequency_mhz
    lowest_ohm, highest_ohm = _reach(report.sweep)
    left, right = 46.0, width - 12.0
    frequency = LogScale(low_mhz, high_mhz, left, right)
    labels, rows = _band_labels(report.bands, frequency, width)
    top = 10.0 + rows * _LABEL_ROW_PX
    impedance = CompressedScale(_KNEE_OHM, lowest_ohm, highest_ohm, top + height, top)
    frame = _Frame(left, right, top, top + height, frequency, impedance)

    drawing = Drawing(f"rx-{report.rank}-{paper}", width, top + height + 36.0, f"rx {paper}")
    drawing.tell(read="rx", x=frequency.noted())
    _draw_bands(drawing, frame, report.bands, labels)
    _draw_axes(drawing, frame, most_ticks)
    if not any(band.matching for band in report.bands):
        _draw_target(drawing, frame, report)
    for quantity, read in _CURVES:
        points = [(p.frequency_mhz, read(p)) for p in report.sweep]
        runs = clipped_runs(points, lowest_ohm, highest_ohm)
        drawing.curve(([frame.place(*p) for p in run] for run in runs), f"curve {quantity}")
    _draw_resonances(drawing, frame, report)
    return drawing.markup(
        f"Resistance and reactance against frequency, candidate {report.rank}",
        _in_words(report),
    )


_CURVES: Final[tuple[tuple[str, Callable[[ReportPoint], float]], ...]] = (
    ("reactance", lambda point: point.reactance_ohm),
    ("resistance", lambda point: point.resistance_ohm),
)


def _reach(sweep: Sequence[ReportPoint]) -> tuple[float, float]:
    """Round limits of the impedance axis that hold the sweep, up to the highest of worth."""
    lowest = min(min(p.reactance_ohm, p.resistance_ohm) for p in sweep)
    highest = max(max(p.reactance_ohm, p.resistance_ohm) for p in sweep)
    up = min(next_round(max(highest, 2.0 * _SMALLEST_TICK_OHM)), _HIGHEST_OHM)
    down = min(next_round(max(-lowest, 2.0 * _SMALLEST_TICK_OHM)), _HIGHEST_OHM)
    return -down, up


def _band_labels(
    bands: Sequence[BandReport], frequency: LogScale, width: float
) -> tuple[list[tuple[float, int]], int]:
    """For each band the middle of its label and its row above the frame, without overlaps."""
    ends: list[float] = []
    placed: dict[str, tuple[float, int]] = {}
    for band in sorted(bands, key=lambda each: each.centre.frequency_mhz):
        half = 0.5 * _LETTER_PX * len(band.name) + 3.0
        middle = frequency(band.centre.frequency_mhz)
        middle = min(max(middle, frequency.start + half), width - half)
        row = next((i for i, end in enumerate(ends) if end <= middle - half), len(ends))
        if row == len(ends):
            ends.append(0.0)
        ends[row] = middle + half
        placed[band.name] = (middle, row)
    return [placed[band.name] for band in bands], max(1, len(ends))


def _draw_bands(
    drawing: Drawing,
    frame: _Frame,
    bands: Sequence[BandReport],
    labels: Sequence[tuple[float, int]],
) -> None:
    for band, (middle, row) in zip(bands, labels, strict=True):
        start = frame.frequency(band.low.frequency_mhz)
        end = frame.frequency(band.high.frequency_mhz)
        missing = max(0.0, _NARROWEST_BAND_PX - (end - start)) / 2.0
        drawing.box((start - missing, frame.top), (end + missing, frame.bottom), "band")
        foot = frame.top - 5.0 - row * _LABEL_ROW_PX
        if row:
            centre = frame.frequency(band.centre.frequency_mhz)
            drawing.line((centre, frame.top), (centre, foot + 2.0), "leader")
        drawing.text((middle, foot), band.name, "band-name")


def _draw_axes(drawing: Drawing, frame: _Frame, most_ticks: int) -> None:
    low, high = frame.impedance.low, frame.impedance.high
    for ohm in compressed_ticks(low, high, _SMALLEST_TICK_OHM):
        y = frame.impedance(ohm)
        drawing.line((frame.left, y), (frame.right, y), "grid" if ohm else "zero")
        drawing.text((frame.left - 6.0, y + 4.0), _signed(ohm), "tick", "end")
    for mhz in log_ticks(frame.frequency.low, frame.frequency.high, most_ticks):
        x = frame.frequency(mhz)
        drawing.line((x, frame.top), (x, frame.bottom), "grid")
        drawing.text((x, frame.bottom + 15.0), f"{mhz:g}", "tick")
    drawing.box((frame.left, frame.top), (frame.right, frame.bottom), "frame")
    drawing.text((frame.left - 6.0, frame.top - 10.0), "Ω", "unit", "end")
    drawing.text((frame.right, frame.bottom + 30.0), "MHz", "unit", "end")


def _draw_target(drawing: Drawing, frame: _Frame, report: FeedReport) -> None:
    """The resistance that the transformer turns into the reference impedance."""
    y = frame.impedance(report.reference_ohm * report.transformer_ratio)
    drawing.line((frame.left, y), (frame.right, y), "target")


def _draw_resonances(drawing: Drawing, frame: _Frame, report: FeedReport) -> None:
    for each in report.resonances:
        if not frame.frequency.low <= each.frequency_mhz <= frame.frequency.high:
            continue
        place = frame.place(each.frequency_mhz, 0.0)
        if each.kind == "series":
            drawing.dot(place, _MARK_PX, "series")
        else:
            drawing.diamond(place, _MARK_PX + 0.5, "parallel")
        # Resonances and anti-resonances take turns, and crowd where orders are high.
        beside = 18.0 if each.kind == "series" else -9.0
        drawing.text((place[0], place[1] + beside), str(each.order), f"order {each.kind}")


def _in_words(report: FeedReport) -> str:
    series = [each for each in report.resonances if each.kind == "series"]
    found = formats.listed(
        [
            f"{formats.ordinal(each.order)} order at {formats.mhz(each.frequency_mhz)} MHz with "
            f"{formats.ohms(each.resistance_ohm)} Ω"
            for each in series
        ]
    )
    low, high = report.sweep[0].frequency_mhz, report.sweep[-1].frequency_mhz
    return (
        f"From {formats.mhz(low)} to {formats.mhz(high)} MHz, on a scale that is linear to about "
        f"{_KNEE_OHM:g} Ω and logarithmic above. Series resonances: {found or 'none here'}."
    )


def _signed(value: float) -> str:
    return f"{value:,.0f}".replace(",", "\u202f").replace("-", "−")
