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
    bands: tuple[BandOutcome, ...]
    why: str
    compromise: str


class DesignResult(Contract):
    """The stored result of one design: candidates in order, and what it cost to find them."""

    engine_version: str
    ground: str
    combinations: int
    solves: int
    search_s: float
    notes: tuple[str, ...]
    candidates: tuple[Candidate, ...]


class PlannedDesign(Contract):
    """Everything a worker hands to the store: the result and one report a candidate."""

    result: DesignResult
    reports: tuple[FeedReport, ...]
