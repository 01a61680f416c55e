"""What a design comes to: ranked candidates, each with how it serves every band and why."""

from __future__ import annotations

from typing import Literal

from service.contracts.quantities import Contract
from service.contracts.report import FeedReport

Service = Literal["served", "partly served", "unserved"]


class BandOutcome(Contract):
    """How one candidate serves one band.

    ``order`` counts half waves at the series resonance used, ``offset_khz`` is how far
    that resonance lies above the band's centre, ``served_fraction`` is the part of the
    band's width within the SWR limit.
    """

    name: str
    required: bool
    service: Service
    served_fraction: float
    order: int | None
    resonance_mhz: float | None
    offset_khz: float | None
    offset_percent: float | None
    swr_low: float
    swr_centre: float
    swr_high: float
    swr_worst: float
    swr_limit: float
    reason: str


class Trim(Contract):
    """What a centimetre off the whole length does to one band's resonance."""

    band: str
    order: int
    khz_per_cm: float


class Departure(Contract):
    """How a band fares when the wire as hung departs from the plan in one way."""

    what: str
    band: str
    served_fraction: float
    swr_worst: float


class Steadiness(Contract):
    """How a candidate holds up under the tolerances of the request.

    ``required_served`` and ``weighted_served`` are those of the worst departure, and
    ``swr_worst`` the largest SWR any departure brings to a band served as planned.
    """

    required_served: int
    weighted_served: float
    swr_worst: float
    worst: str
    departures: tuple[Departure, ...]


class Candidate(Contract):
    """One dipole that can be built from the stock on the site."""

    rank: int
    length_m: float
    conductor: str
    diameter_mm: float
    item_code: str
    transformer_ratio: float
    required_served: int
    required_total: int
    weighted_served: float
    swr_worst: float
    loss_db: float | None = None
    cost: float | None = None
    height_m: float | None = None
    feed_fraction: float = 0.5
    bands: tuple[BandOutcome, ...]
    why: str
    compromise: str
    improvements: tuple[str, ...] = ()
    trims: tuple[Trim, ...] = ()
    steadiness: Steadiness | None = None


class TradeOff(Contract):
    """One wire of the front: none serves at least as well and is shorter and cheaper too."""

    length_m: float
    conductor: str
    height_m: float | None = None
    feed_fraction: float = 0.5
    transformer_ratio: float
    required_served: int
    weighted_served: float
    swr_worst: float
    loss_db: float | None
    cost: float | None
    rank: int | None


class DipoleSet(Contract):
    """Several dipoles on one site, each with its own feed, that serve the bands together.

    ``ranks`` are those of the candidates; ``serves`` says for each band which of them.
    """

    ranks: tuple[int, ...]
    required_served: int
    required_total: int
    weighted_served: float
    serves: tuple[tuple[str, int], ...]
    unserved: tuple[str, ...]
    why: str


class DesignResult(Contract):
    """The stored result of one design: candidates in order, and what it cost to find them."""

    engine_version: str
    ground: str
    combinations: int
    solves: int
    search_s: float
    notes: tuple[str, ...]
    candidates: tuple[Candidate, ...]
    map_error_percent: float = 0.0
    trade_off: tuple[TradeOff, ...] = ()
    sets: tuple[DipoleSet, ...] = ()
    relax: tuple[str, ...] = ()


class PlannedDesign(Contract):
    """Everything a worker hands to the store: the result and one report a candidate."""

    result: DesignResult
    reports: tuple[FeedReport, ...]
