"""What the parts of one candidate have to bear, read from its stored result and report."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from math import ceil, floor, log10

from service.contracts.candidate import BandOutcome, Candidate
from service.contracts.formats import listed
from service.contracts.report import BandReport, FeedReport, ReportPoint
from service.contracts.request import DesignRequest


@dataclass(frozen=True, slots=True)
class Worst:
    """The largest of some stored figures, and where it was found."""

    value: float
    where: str


@dataclass(frozen=True, slots=True)
class Duty:
    """The largest stored figures over the bands in use and over all weathers.

    What was not stored is None. ``bands`` are those served at least in part, or all of them where
    none is; ``line_swr`` is the largest on the line side of transformer and network among points
    within the SWR limits.
    """

    bands: tuple[str, ...]
    low_mhz: float
    high_mhz: float
    ends_peak_v: Worst | None
    feed_peak_v: Worst | None
    feed_rms_a: Worst | None
    line_swr: Worst
    wire_tension_n: Worst | None
    rope_tension_n: Worst | None

    @property
    def bands_in_words(self) -> str:
        """The bands that the figures are good for."""
        return listed(self.bands)


def duty_of(request: DesignRequest, candidate: Candidate, report: FeedReport) -> Duty:
    """Look for the largest figures of one candidate."""
    told = list(zip(candidate.bands, report.bands, strict=True))
    used = [each for each in told if each[0].service != "unserved"] or told
    stressed = [(band.name, band.stress) for _, band in used if band.stress is not None]
    states = () if report.hanging is None else report.hanging.states
    return Duty(
        bands=tuple(outcome.name for outcome, _ in used),
        low_mhz=min(band.low.frequency_mhz for _, band in used),
        high_mhz=max(band.high.frequency_mhz for _, band in used),
        ends_peak_v=_worst(
            (max(each.ends_peak_v), name) for name, each in stressed if each.ends_peak_v is not None
        ),
        feed_peak_v=_worst((each.voltage_peak_v, name) for name, each in stressed),
        feed_rms_a=_worst((each.current_rms_a, name) for name, each in stressed),
        line_swr=max(
            (_line_swr(request, outcome, band) for outcome, band in used), key=lambda w: w.value
        ),
        wire_tension_n=_worst((each.wire_tension_n, each.weather) for each in states),
        rope_tension_n=_worst((each.rope_tension_n, each.weather) for each in states),
    )


def at_least(value: float) -> float:
    """A figure to order by: up to three digits, never down."""
    if value <= 0.0:
        return 0.0
    step = 10.0 ** (floor(log10(value)) - 2)
    # A figure that has three digits already must not go up for its binary form.
    return round(ceil(value / step - 1e-9) * step, 9)


def _worst(figures: Iterable[tuple[float, str]]) -> Worst | None:
    found = max(figures, default=None, key=lambda each: each[0])
    return None if found is None else Worst(*found)


def _line_swr(request: DesignRequest, outcome: BandOutcome, band: BandReport) -> Worst:
    at_transmitter = request.feed.reference_point == "transmitter"

    def judged(point: ReportPoint) -> float:
        far = point.transmitter_swr
        return far if at_transmitter and far is not None else point.swr

    points = (band.low, band.centre, band.high, *band.grid)
    within = [point.swr for point in points if judged(point) <= outcome.swr_limit]
    return Worst(max(within, default=outcome.swr_limit), outcome.name)
