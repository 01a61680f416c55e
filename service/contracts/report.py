"""The feed-impedance report: what the transmitter will see, band by band, and how it was found."""

from __future__ import annotations

from typing import Literal

from service.contracts.exposure import BandExposure
from service.contracts.hanging import HungSpan
from service.contracts.quantities import Contract
from service.contracts.radiation import CurrentAlong, Radiation


class ReportPoint(Contract):
    """Impedance at one frequency, at the feed point and after the transformer.

    ``reflection`` is |Γ|, ``reflection_deg`` its angle and ``swr`` the standing wave ratio on
    the line side of the transformer and the matching network, against the reference impedance.
    ``transmitter_swr`` and ``line_loss_db`` belong to the other end of the feed line, where
    one is given.
    """

    frequency_mhz: float
    resistance_ohm: float
    reactance_ohm: float
    reflection: float
    swr: float
    reflection_deg: float | None = None
    transmitter_swr: float | None = None
    line_loss_db: float | None = None


class MatchingPart(Contract):
    """One part of a matching network, with its stress at the power of the request."""

    kind: Literal["inductor", "capacitor"]
    place: Literal["series", "shunt"]
    value: float
    unit: Literal["µH", "pF"]
    current_rms_a: float
    voltage_peak_v: float


class Matching(Contract):
    """An L-network at the feed point that matches one band at its centre.

    ``shunt_at`` tells which side of the series part the shunt part is on.
    """

    shunt_at: Literal["antenna", "line"]
    parts: tuple[MatchingPart, ...]
    loss_db: float


class FeedStress(Contract):
    """Voltage and current at the power of the request, band centre.

    At the feed point, and against earth at both ends: first the one that ``feed_fraction`` counts
    from.
    """

    power_w: float
    voltage_peak_v: float
    current_rms_a: float
    ends_peak_v: tuple[float, float] | None = None


class BandReport(Contract):
    """One band of the report: its edges and centre, and a grid between the edges.

    ``current`` and ``radiation`` are those at the centre; ``radiation`` is left out where the
    wire hangs more wavelengths high than a pattern can be drawn for.
    """

    name: str
    low: ReportPoint
    centre: ReportPoint
    high: ReportPoint
    grid: tuple[ReportPoint, ...]
    stress: FeedStress | None = None
    matching: Matching | None = None
    current: CurrentAlong | None = None
    radiation: Radiation | None = None
    exposure: BandExposure | None = None


class ResonanceLine(Contract):
    """One resonance of the wire: near ``order`` half waves, series where it is usable."""

    order: int
    kind: Literal["series", "parallel"]
    frequency_mhz: float
    resistance_ohm: float


class Provenance(Contract):
    """How the figures were found and what they leave out.

    ``largest_error_ohm`` is the solver's own estimate over the edges and centres of the
    bands, which are solved directly; the grid and the sweep are read from a map that was
    checked against fresh solutions and was off by ``map_error_percent`` of |Z| at most.
    """

    engine_version: str
    model: str
    source_gap_mm: float
    ground: str
    conductor_loss: str
    largest_error_ohm: float
    map_error_percent: float
    not_modelled: tuple[str, ...]


class FeedReport(Contract):
    """The feed-impedance report of one candidate, and how it would hang."""

    rank: int
    length_m: float
    conductor: str
    diameter_mm: float
    height_m: float | None = None
    feed_fraction: float = 0.5
    reference_ohm: float
    reference_point: Literal["feed-point", "transmitter"] = "feed-point"
    transformer_ratio: float
    bands: tuple[BandReport, ...]
    resonances: tuple[ResonanceLine, ...]
    sweep: tuple[ReportPoint, ...]
    provenance: Provenance
    cautions: tuple[str, ...]
    hanging: HungSpan | None = None
