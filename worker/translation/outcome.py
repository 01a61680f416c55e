"""From appraised wires to candidates and feed-impedance reports."""

from __future__ import annotations

import math

import numpy as np

from service.contracts.candidate import BandOutcome, Candidate, Service
from service.contracts.report import BandReport, FeedReport, Provenance, ReportPoint, ResonanceLine
from service.contracts.request import DesignRequest
from worker.engine.reflection import reflection_coefficient
from worker.search.appraisal import Appraisal, BandAppraisal, Curve
from worker.search.scoring import FULLY_SERVED
from worker.translation.wording import (
    CAUTIONS,
    band_reason,
    compromise,
    is_used,
    why_it_ranks,
)


def candidate_of(request: DesignRequest, appraisal: Appraisal, rank: int) -> Candidate:
    """One candidate with its outcome on every band and the sentences that explain it."""
    conductor = request.stock.choices()[appraisal.pick.wire]
    outcomes = tuple(_band_outcome(band, appraisal) for band in appraisal.bands)
    weights = [band.weight for band in request.bands]
    shares = [weight * each.served_fraction for weight, each in zip(weights, outcomes, strict=True)]
    whole = [each.swr_worst for each in outcomes if each.service == "served"]
    return Candidate(
        rank=rank,
        length_m=_rounded(appraisal.pick.length_m, 6),
        conductor=conductor.label,
        diameter_mm=_rounded(conductor.bare_diameter_mm, 4),
        item_code=conductor.item_code,
        transformer_ratio=appraisal.pick.ratio,
        required_served=sum(each.required and each.service == "served" for each in outcomes),
        required_total=sum(each.required for each in outcomes),
        weighted_served=_rounded(sum(shares) / sum(weights), 4),
        swr_worst=max(whole) if whole else min(each.swr_worst for each in outcomes),
        bands=outcomes,
        why=why_it_ranks(outcomes, appraisal),
        compromise=compromise(appraisal),
    )


def feed_report_of(
    request: DesignRequest, appraisal: Appraisal, rank: int, provenance: Provenance
) -> FeedReport:
    """The feed-impedance report of one candidate."""
    conductor = request.stock.choices()[appraisal.pick.wire]
    reference_ohm, ratio = request.feed.reference_ohm, appraisal.pick.ratio
    return FeedReport(
        rank=rank,
        length_m=_rounded(appraisal.pick.length_m, 6),
        conductor=conductor.label,
        diameter_mm=_rounded(conductor.bare_diameter_mm, 4),
        reference_ohm=reference_ohm,
        transformer_ratio=ratio,
        bands=tuple(_band_report(band, reference_ohm, ratio) for band in appraisal.bands),
        resonances=tuple(
            ResonanceLine(
                order=each.order,
                kind=each.kind,
                frequency_mhz=_rounded(each.frequency_hz / 1e6, 6),
                resistance_ohm=_rounded(each.resistance_ohm, 3),
            )
            for each in appraisal.resonances
        ),
        sweep=_points(appraisal.sweep, reference_ohm, ratio),
        provenance=provenance,
        cautions=CAUTIONS,
    )


def _band_outcome(band: BandAppraisal, appraisal: Appraisal) -> BandOutcome:
    service: Service = "unserved"
    if band.served_fraction >= FULLY_SERVED:
        service = "served"
    elif band.served_fraction > 0.0:
        service = "partly served"
    near = band.nearest
    centre_hz = band.goal.centre_hz
    outcome = BandOutcome(
        name=band.goal.name,
        required=band.goal.required,
        service=service,
        served_fraction=_rounded(min(band.served_fraction, 1.0), 6),
        order=near.order if near and is_used(band) else None,
        resonance_mhz=_rounded(near.frequency_hz / 1e6, 6) if near else None,
        offset_khz=_rounded((near.frequency_hz - centre_hz) / 1e3, 3) if near else None,
        offset_percent=_rounded(100.0 * (near.frequency_hz / centre_hz - 1.0), 4) if near else None,
        swr_low=_rounded(band.marks.swr[0], 4),
        swr_centre=_rounded(band.marks.swr[1], 4),
        swr_high=_rounded(band.marks.swr[2], 4),
        swr_worst=_rounded(max(band.grid.swr.max(), band.marks.swr.max()), 4),
        swr_limit=band.goal.swr_limit,
        reason="",
    )
    reason = band_reason(band, outcome, appraisal.resonances)
    return outcome.model_copy(update={"reason": reason})


def _band_report(band: BandAppraisal, reference_ohm: float, ratio: float) -> BandReport:
    low, centre, high = _points(band.marks, reference_ohm, ratio)
    return BandReport(
        name=band.goal.name,
        low=low,
        centre=centre,
        high=high,
        grid=_points(band.grid, reference_ohm, ratio),
    )


def _points(curve: Curve, reference_ohm: float, ratio: float) -> tuple[ReportPoint, ...]:
    reflection = np.abs(reflection_coefficient(curve.impedance_ohm / ratio, reference_ohm))
    return tuple(
        ReportPoint(
            frequency_mhz=_rounded(frequency_hz / 1e6, 6),
            resistance_ohm=_rounded(impedance.real, 3),
            reactance_ohm=_rounded(impedance.imag, 3),
            reflection=_rounded(gamma, 5),
            swr=_rounded(swr, 4),
        )
        for frequency_hz, impedance, gamma, swr in zip(
            curve.frequency_hz, curve.impedance_ohm, reflection, curve.swr, strict=True
        )
    )


def _rounded(value: float, digits: int) -> float:
    """Rounded for storage, well below what the models resolve; never a NaN or an infinity."""
    number = float(value)
    if not math.isfinite(number):
        raise ArithmeticError(f"a result is not a finite number: {number}")
    return round(number, digits)
