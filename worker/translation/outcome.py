"""From appraised wires to candidates and feed-impedance reports."""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np

from service.contracts.candidate import (
    BandOutcome,
    Candidate,
    Departure,
    Service,
    Steadiness,
    Trim,
)
from service.contracts.report import (
    BandReport,
    FeedReport,
    FeedStress,
    Matching,
    MatchingPart,
    ReportPoint,
    ResonanceLine,
)
from service.contracts.request import DesignRequest
from worker.engine.matching import Component, Form, Kind, l_networks
from worker.engine.reflection import reflection_coefficient
from worker.search.appraisal import Appraisal, BandAppraisal, Curve
from worker.search.feeding import NETWORKS, Fed, network_values
from worker.search.scoring import FULLY_SERVED
from worker.search.space import ComplexArray, FloatArray
from worker.search.steadiness import Held
from worker.search.trade_off import Gain
from worker.translation.exposing import end_voltages_v, exposure_of
from worker.translation.pictures import BandPicture
from worker.translation.provenance import provenance_of
from worker.translation.rigging import hung_span_of
from worker.translation.wires import Way
from worker.translation.wording import (
    CAUTIONS,
    band_reason,
    compromise,
    improvement,
    is_used,
    network_in_words,
    why_it_ranks,
)

#: Quality of a coil as usually wound for this use (common practice).
_COIL_Q: Final = 200.0


@dataclass(frozen=True, slots=True)
class Look:
    """One wire looked at closely, and all that is told of it."""

    way: Way
    appraisal: Appraisal
    gains: tuple[Gain, ...]
    held: Held | None


def candidate_of(request: DesignRequest, look: Look, rank: int) -> Candidate:
    """One candidate with its outcome on every band and the sentences that explain it."""
    appraisal, conductor = look.appraisal, look.way.conductor
    length_m = appraisal.pick.length_m
    ratio = appraisal.pick.ratio
    outcomes = tuple(
        _band_outcome(band, appraisal, _matching(band, ratio, request)) for band in appraisal.bands
    )
    weights = [band.weight for band in request.bands]
    shares = [weight * each.served_fraction for weight, each in zip(weights, outcomes, strict=True)]
    whole = [each.swr_worst for each in outcomes if each.service == "served"]
    price = conductor.price_per_m
    return Candidate(
        rank=rank,
        length_m=_rounded(length_m, 6),
        conductor=conductor.label,
        diameter_mm=_rounded(conductor.bare_diameter_mm, 4),
        item_code=conductor.item_code,
        transformer_ratio=appraisal.pick.ratio,
        required_served=sum(each.required and each.service == "served" for each in outcomes),
        required_total=sum(each.required for each in outcomes),
        weighted_served=_rounded(sum(shares) / sum(weights), 4),
        swr_worst=max(whole) if whole else min(each.swr_worst for each in outcomes),
        loss_db=_largest_loss_db(appraisal, outcomes),
        cost=None if price is None else _rounded(price * length_m, 2),
        height_m=look.way.height_m,
        feed_fraction=look.way.feed_fraction,
        bands=outcomes,
        why=why_it_ranks(outcomes, appraisal),
        compromise=compromise(appraisal),
        improvements=tuple(improvement(gain, length_m) for gain in look.gains),
        trims=tuple(
            Trim(
                band=band.goal.name,
                order=band.nearest.order,
                # Cutting shortens, which raises the resonance.
                khz_per_cm=_rounded(-band.hz_per_m * 1e-5, 3),
            )
            for band in appraisal.bands
            if band.nearest is not None and band.hz_per_m is not None
        ),
        steadiness=None if look.held is None else _steadiness(look.held, appraisal),
    )


def feed_report_of(
    request: DesignRequest, look: Look, rank: int, pictures: Sequence[BandPicture]
) -> FeedReport:
    """The feed-impedance report of one candidate, with its pictures, one a band."""
    appraisal, conductor = look.appraisal, look.way.conductor
    reference_ohm, ratio = request.feed.reference_ohm, appraisal.pick.ratio
    return FeedReport(
        rank=rank,
        length_m=_rounded(appraisal.pick.length_m, 6),
        conductor=conductor.label,
        diameter_mm=_rounded(conductor.bare_diameter_mm, 4),
        height_m=look.way.height_m,
        feed_fraction=look.way.feed_fraction,
        reference_ohm=reference_ohm,
        reference_point=request.feed.reference_point,
        transformer_ratio=ratio,
        bands=tuple(
            _band_report(band, request, ratio, picture)
            for band, picture in zip(appraisal.bands, pictures, strict=True)
        ),
        resonances=tuple(
            ResonanceLine(
                order=each.order,
                kind=each.kind,
                frequency_mhz=_rounded(each.frequency_hz / 1e6, 6),
                resistance_ohm=_rounded(each.resistance_ohm, 3),
            )
            for each in appraisal.resonances
        ),
        sweep=_points(appraisal.sweep, reference_ohm),
        provenance=provenance_of(request, look.way, appraisal),
        cautions=CAUTIONS,
        hanging=hung_span_of(request, look.way, appraisal.pick.length_m),
    )


def _largest_loss_db(appraisal: Appraisal, outcomes: tuple[BandOutcome, ...]) -> float | None:
    """Loss of the feed line on the worst band served at least in part, at its centre."""
    losses = [
        float(band.marks.fed.line_loss_db[1])
        for band, outcome in zip(appraisal.bands, outcomes, strict=True)
        if band.marks.fed.line_loss_db is not None and outcome.service != "unserved"
    ]
    return _rounded(max(losses), 3) if losses else None


def _steadiness(held: Held, appraisal: Appraisal) -> Steadiness:
    planned = np.array([band.served_fraction for band in appraisal.bands])
    return Steadiness(
        required_served=int(held.worst.merit.required_served[0]),
        weighted_served=_rounded(held.worst.merit.weighted_served[0], 4),
        swr_worst=_rounded(held.swr_of_served(planned), 4),
        worst=held.worst.what,
        departures=tuple(
            Departure(
                what=each.what,
                band=band.goal.name,
                served_fraction=_rounded(each.scored.served_fraction[index, 0], 4),
                swr_worst=_rounded(each.scored.swr_worst[index, 0], 4),
            )
            for each in held.departed
            for index, band in enumerate(appraisal.bands)
            if planned[index] > 0.0
        ),
    )


def _band_outcome(
    band: BandAppraisal, appraisal: Appraisal, network: Matching | None
) -> BandOutcome:
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
        swr_low=_rounded(band.marks.fed.limited_swr[0], 4),
        swr_centre=_rounded(band.marks.fed.limited_swr[1], 4),
        swr_high=_rounded(band.marks.fed.limited_swr[2], 4),
        swr_worst=_rounded(
            max(band.grid.fed.limited_swr.max(), band.marks.fed.limited_swr.max()), 4
        ),
        swr_limit=band.goal.swr_limit,
        reason="",
    )
    reason = band_reason(band, outcome, appraisal.resonances)
    if network is not None:
        reason += network_in_words(network.loss_db)
    return outcome.model_copy(update={"reason": reason})


def _band_report(
    band: BandAppraisal, request: DesignRequest, ratio: float, picture: BandPicture
) -> BandReport:
    reference_ohm = request.feed.reference_ohm
    low, centre, high = _points(band.marks, reference_ohm)
    at_feed = complex(band.marks.impedance_ohm[1])
    current_a = math.sqrt(request.power_w / at_feed.real)
    return BandReport(
        name=band.goal.name,
        low=low,
        centre=centre,
        high=high,
        grid=_points(band.grid, reference_ohm),
        stress=FeedStress(
            power_w=request.power_w,
            voltage_peak_v=_rounded(math.sqrt(2.0) * abs(at_feed) * current_a, 1),
            current_rms_a=_rounded(current_a, 3),
            ends_peak_v=end_voltages_v(picture.solved, request.power_w),
        ),
        matching=_matching(band, ratio, request),
        current=picture.current,
        radiation=picture.radiation,
        exposure=exposure_of(request, picture.solved, band.goal.low_hz, band.goal.high_hz),
    )


def _matching(band: BandAppraisal, ratio: float, request: DesignRequest) -> Matching | None:
    """The network of one band with its values and stresses, as chosen by the search."""
    if band.network is None:
        return None
    load_ohm = complex(band.marks.impedance_ohm[1]) / ratio
    shunt_at_load, sign = NETWORKS[band.network]
    series_ohm, _ = network_values(
        np.array([load_ohm]), request.feed.reference_ohm, shunt_at_load=shunt_at_load, sign=sign
    )
    form = Form.SHUNT_AT_LOAD if shunt_at_load else Form.SERIES_AT_LOAD
    found = [
        each
        for each in l_networks(
            load_ohm,
            request.feed.reference_ohm,
            band.goal.centre_hz,
            request.power_w,
            inductor_q=_COIL_Q,
        )
        if each.form is form
    ]
    if not found:
        return None
    # A coil's loss moves the values a little, so the nearest of that form is the one meant.
    chosen = min(found, key=lambda each: abs(each.series.reactance_ohm - float(series_ohm[0])))
    return Matching(
        shunt_at="antenna" if shunt_at_load else "line",
        parts=(*_part(chosen.series, "series"), *_part(chosen.shunt, "shunt")),
        loss_db=_rounded(chosen.loss_db, 3),
    )


def _part(component: Component, place: Literal["series", "shunt"]) -> tuple[MatchingPart, ...]:
    if component.kind is Kind.NONE:
        return ()
    is_coil = component.kind is Kind.INDUCTOR
    return (
        MatchingPart(
            kind="inductor" if is_coil else "capacitor",
            place=place,
            value=_rounded(component.value * (1e6 if is_coil else 1e12), 3),
            unit="µH" if is_coil else "pF",
            current_rms_a=_rounded(component.current_rms_a, 3),
            voltage_peak_v=_rounded(component.voltage_peak_v, 1),
        ),
    )


def _points(curve: Curve, reference_ohm: float) -> tuple[ReportPoint, ...]:
    return report_points(curve.frequency_hz, curve.impedance_ohm, curve.fed, reference_ohm)


def report_points(
    frequency_hz: FloatArray, impedance_ohm: ComplexArray, fed: Fed, reference_ohm: float
) -> tuple[ReportPoint, ...]:
    """Points of one wire's curve, rounded for storage; arrays of shape (n,)."""
    reflection = reflection_coefficient(fed.behind_ohm, reference_ohm)
    far, loss_db = fed.transmitter_swr, fed.line_loss_db
    return tuple(
        ReportPoint(
            frequency_mhz=_rounded(frequency_hz[index] / 1e6, 6),
            resistance_ohm=_rounded(impedance_ohm[index].real, 3),
            reactance_ohm=_rounded(impedance_ohm[index].imag, 3),
            reflection=_rounded(abs(reflection[index]), 5),
            swr=_rounded(fed.swr[index], 4),
            reflection_deg=_rounded(math.degrees(cmath.phase(reflection[index])), 2),
            transmitter_swr=None if far is None else _rounded(far[index], 4),
            line_loss_db=None if loss_db is None else _rounded(loss_db[index], 3),
        )
        for index in range(len(frequency_hz))
    )


def _rounded(value: float, digits: int) -> float:
    """Rounded for storage, well below what the models resolve; never a NaN or an infinity."""
    number = float(value)
    if not math.isfinite(number):
        raise ArithmeticError(f"a result is not a finite number: {number}")
    return round(number, digits)
