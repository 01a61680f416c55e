"""An invented design for tests of the wire: figures made up so that every case appears.

The impedance is that of an open line with a made-up surge impedance and loss. It looks like
a dipole's and is none: nothing here checks physics.
"""

from __future__ import annotations

import cmath
import json
import math
from collections.abc import Callable
from typing import Any

from service.contracts.candidate import (
    BandOutcome,
    Candidate,
    DesignResult,
    PlannedDesign,
    Service,
)
from service.contracts.report import (
    BandReport,
    FeedReport,
    Provenance,
    ReportPoint,
    ResonanceLine,
)
from service.contracts.request import DesignRequest, parse_request
from tests.service import sample_extras, sample_hanging

SURGE_OHM = 850.0
LOSS_NEPER = 0.085
GRID_POINTS = 41
SWEEP_POINTS = 481


def request_fields(**changes: object) -> dict[str, Any]:
    """A request as a planner would send it, with fields replaced."""
    fields: dict[str, Any] = {
        "name": "Invented station, two bands",
        "bands": [
            {"name": "40m", "low_mhz": 7.0, "high_mhz": 7.2, "swr_limit": 2.0},
            {"name": "15m", "low_mhz": 21.0, "high_mhz": 21.45, "swr_limit": 2.0},
            {
                "name": "20m",
                "low_mhz": 14.0,
                "high_mhz": 14.35,
                "required": False,
                "weight": 0.5,
            },
        ],
        "site": {"span_m": 24.0, "height_m": 10.0, "ground": "average"},
        "stock": {"conductors": [{"awg": 12, "item_code": "W-12"}, {"diameter_mm": 1.5}]},
        "feed": {"reference_ohm": 50.0, "transformer_ratios": [1.0, 2.0]},
        "candidates": 2,
    }
    return fields | changes


#: Everything a request may say beyond the plain one: line, networks, prices, heights, sets.
FULL: dict[str, Any] = {
    "bands": [
        {"name": "40m", "low_mhz": 7.0, "high_mhz": 7.2, "swr_limit": 2.0},
        {"name": "15m", "low_mhz": 21.0, "high_mhz": 21.45, "swr_limit": 2.0},
        {"name": "20m", "low_mhz": 14.0, "high_mhz": 14.35, "required": False, "weight": 0.5},
        {"name": "10m", "low_mhz": 28.0, "high_mhz": 28.5, "required": False, "swr_limit": 3.0},
    ],
    "site": {"span_m": 24.0, "height_m": [10.0, 12.0], "ground": "average"},
    "stock": {
        "conductors": [
            {
                "diameter_mm": 1.5,
                "price_per_m": 0.425,
                "insulation": {"thickness_mm": 0.8, "relative_permittivity": 2.3},
            },
            {"awg": 12, "item_code": "W-12", "price_per_m": 0.5},
        ]
    },
    "feed": {
        "transformer_ratios": [1.0, 2.0],
        "feed_line": {"line": "rg-213", "length_m": 20.0},
        "positions": [0.5, 0.36],
        "matching": "per-band",
        "reference_point": "transmitter",
    },
    "power_w": 400.0,
    "exposure": {"duty_percent": 35.0},
    "candidates": 2,
    "largest_set": 3,
    "rank_by": "worst-case",
}


def request_json(**changes: object) -> str:
    """The same as JSON text."""
    return json.dumps(request_fields(**changes))


def sample_request(**changes: object) -> DesignRequest:
    """The same as a contract."""
    return parse_request(request_json(**changes))


def sample_planned(request: DesignRequest, count: int = 2) -> PlannedDesign:
    """What a worker might hand in for a request: candidates and one report for each."""
    lengths_m = [20.31 + 0.27 * index for index in range(count)]
    reports = tuple(_report(request, rank, length) for rank, length in enumerate(lengths_m, 1))
    candidates = tuple(_candidate(request, report) for report in reports)
    whole = candidates[0].required_served == candidates[0].required_total
    result = DesignResult(
        engine_version="0.0-invented",
        ground="invented ground",
        combinations=123_456,
        solves=789,
        search_s=1.25,
        notes=("An invented note on the search.",),
        candidates=candidates,
        map_error_percent=0.0173,
        trade_off=sample_extras.trade_off(candidates),
        sets=sample_extras.sets(candidates, request),
        relax=() if whole else ("Invented advice on what to relax.",),
    )
    return PlannedDesign(result=result, reports=reports)


def _first_mhz(length_m: float) -> float:
    return 142.6 / length_m


def _point(
    frequency_mhz: float, length_m: float, reference_ohm: float, ratio: float
) -> ReportPoint:
    turns = frequency_mhz / _first_mhz(length_m)
    angle = complex(LOSS_NEPER * math.sqrt(turns), 0.5 * math.pi * (turns + 0.03 * (1.0 - turns)))
    impedance = SURGE_OHM / cmath.tanh(angle)
    seen = impedance / ratio
    turned = (seen - reference_ohm) / (seen + reference_ohm)
    gamma = min(abs(turned), 0.999999)
    return ReportPoint(
        frequency_mhz=round(frequency_mhz, 6),
        resistance_ohm=round(impedance.real, 3),
        reactance_ohm=round(impedance.imag, 3),
        reflection=round(gamma, 5),
        swr=round((1.0 + gamma) / (1.0 - gamma), 4),
        reflection_deg=round(math.degrees(cmath.phase(turned)), 2),
    )


def _report(request: DesignRequest, rank: int, length_m: float) -> FeedReport:
    reference_ohm = request.feed.reference_ohm
    ratio = request.feed.transformer_ratios[-1]
    conductor = request.stock.choices()[0]

    def at(frequency_mhz: float) -> ReportPoint:
        point = _point(frequency_mhz, length_m, reference_ohm, ratio)
        return sample_extras.with_line(point, request)

    def spread(low: float, high: float, count: int) -> tuple[ReportPoint, ...]:
        return tuple(at(low + (high - low) * i / (count - 1)) for i in range(count))

    bands = tuple(
        BandReport(
            name=band.name,
            low=at(band.low_mhz),
            centre=at(band.centre_mhz),
            high=at(band.high_mhz),
            grid=spread(band.low_mhz, band.high_mhz, GRID_POINTS),
            stress=sample_extras.stress(at(band.centre_mhz), index, request.power_w),
            matching=sample_extras.matching(index, request),
            current=sample_extras.current(index, request),
            radiation=sample_extras.radiation(index),
            exposure=sample_hanging.exposure(index, request),
        )
        for index, band in enumerate(request.bands)
    )
    lowest = min(band.low_mhz for band in request.bands)
    highest = max(band.high_mhz for band in request.bands)
    return FeedReport(
        rank=rank,
        length_m=length_m,
        conductor=conductor.label,
        diameter_mm=round(conductor.bare_diameter_mm, 4),
        height_m=max(request.site.heights_m(), default=None),
        feed_fraction=request.feed.feed_fractions()[-1],
        reference_ohm=reference_ohm,
        transformer_ratio=ratio,
        bands=bands,
        resonances=tuple(_resonance(order, length_m, at) for order in range(1, 5)),
        sweep=spread(0.9 * min(lowest, _first_mhz(length_m)), 1.05 * highest, SWEEP_POINTS),
        provenance=Provenance(
            engine_version="0.0-invented",
            model="an invented open line",
            source_gap_mm=1.0,
            ground="invented ground",
            conductor_loss="invented loss",
            largest_error_ohm=0.12,
            map_error_percent=0.003,
            not_modelled=("anything at all",),
        ),
        cautions=("Keep clear of power lines.", "Follow local codes."),
        hanging=sample_hanging.hanging(request, length_m),
    )


def _resonance(order: int, length_m: float, at: Callable[[float], ReportPoint]) -> ResonanceLine:
    turns = (order - 0.03) / 0.97
    frequency_mhz = round(turns * _first_mhz(length_m), 6)
    return ResonanceLine(
        order=order,
        kind="series" if order % 2 else "parallel",
        frequency_mhz=frequency_mhz,
        resistance_ohm=at(frequency_mhz).resistance_ohm,
    )


def _candidate(request: DesignRequest, report: FeedReport) -> Candidate:
    outcomes = tuple(
        _outcome(request, report, index, band.required, band.swr_limit)
        for index, band in enumerate(request.bands)
    )
    conductor = request.stock.choices()[0]
    price, losses = conductor.price_per_m, [band.centre.line_loss_db for band in report.bands]
    return Candidate(
        rank=report.rank,
        length_m=report.length_m,
        conductor=report.conductor,
        diameter_mm=report.diameter_mm,
        item_code=conductor.item_code,
        transformer_ratio=report.transformer_ratio,
        required_served=sum(o.required and o.service == "served" for o in outcomes),
        required_total=sum(o.required for o in outcomes),
        weighted_served=0.8125,
        swr_worst=max(o.swr_worst for o in outcomes if o.required),
        loss_db=max((each for each in losses if each is not None), default=None),
        cost=None if price is None else round(price * report.length_m, 2),
        height_m=report.height_m,
        feed_fraction=report.feed_fraction,
        bands=outcomes,
        why=f"Invented reason for rank {report.rank}.",
        compromise=f"Invented compromise of candidate {report.rank}.",
        improvements=(f"Invented improvement of candidate {report.rank}.",),
        trims=sample_extras.trims(outcomes),
        steadiness=sample_extras.steadiness(outcomes, request),
    )


def _outcome(
    request: DesignRequest, report: FeedReport, index: int, required: bool, limit: float
) -> BandOutcome:
    band = report.bands[index]
    centre = band.centre.frequency_mhz
    series = [each for each in report.resonances if each.kind == "series"]
    near = min(series, key=lambda each: abs(each.frequency_mhz - centre))
    judged = [sample_extras.judged_swr(point, request) for point in band.grid]
    within = sum(swr <= limit for swr in judged) / len(band.grid)
    service: Service = "partly served" if within else "unserved"
    return BandOutcome(
        name=band.name,
        required=required,
        service="served" if within == 1.0 else service,
        served_fraction=round(within, 6),
        order=near.order if abs(near.frequency_mhz / centre - 1.0) < 0.1 else None,
        resonance_mhz=near.frequency_mhz,
        offset_khz=round(1e3 * (near.frequency_mhz - centre), 3),
        offset_percent=round(100.0 * (near.frequency_mhz / centre - 1.0), 4),
        swr_low=sample_extras.judged_swr(band.low, request),
        swr_centre=sample_extras.judged_swr(band.centre, request),
        swr_high=sample_extras.judged_swr(band.high, request),
        swr_worst=max(judged),
        swr_limit=limit,
        reason=f"Invented reason for {band.name}.",
    )
