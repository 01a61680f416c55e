"""Invented figures beside an invented candidate: line, network, stress, trade-off, sets.

Made up so that every case appears; nothing here checks physics.
"""

from __future__ import annotations

import math

from service.contracts.candidate import (
    BandOutcome,
    Candidate,
    Departure,
    DipoleSet,
    Steadiness,
    TradeOff,
    Trim,
)
from service.contracts.radiation import CurrentAlong, Radiation
from service.contracts.report import FeedStress, Matching, MatchingPart, ReportPoint
from service.contracts.request import DesignRequest
from tests.service.sample_hanging import ends_peak_v

FRONT = 40
LOSS_DB_PER_M = 0.01


def with_line(point: ReportPoint, request: DesignRequest) -> ReportPoint:
    """A point with its SWR and loss at the other end of the request's feed line, if any."""
    line = request.feed.feed_line
    if line is None:
        return point
    loss_db = LOSS_DB_PER_M * line.length_m * math.sqrt(point.frequency_mhz)
    far = point.reflection * 10.0 ** (-0.1 * loss_db)
    update = {
        "transmitter_swr": round((1.0 + far) / (1.0 - far), 4),
        "line_loss_db": round(loss_db * (1.0 + point.reflection), 3),
    }
    return point.model_copy(update=update)


def judged_swr(point: ReportPoint, request: DesignRequest) -> float:
    """The SWR that the limits apply to."""
    at_transmitter = request.feed.reference_point == "transmitter"
    return point.transmitter_swr or point.swr if at_transmitter else point.swr


def stress(centre: ReportPoint, index: int, power_w: float) -> FeedStress:
    """Voltage and current that would bring the power into the resistance."""
    current_a = math.sqrt(power_w / centre.resistance_ohm)
    size_ohm = math.hypot(centre.resistance_ohm, centre.reactance_ohm)
    return FeedStress(
        power_w=power_w,
        voltage_peak_v=round(math.sqrt(2.0) * size_ohm * current_a, 1),
        current_rms_a=round(current_a, 3),
        ends_peak_v=ends_peak_v(index),
    )


def matching(index: int, request: DesignRequest) -> Matching | None:
    """Networks of either form, one with a single part, and a band without."""
    if request.feed.matching == "none" or index == 3:
        return None
    coil = MatchingPart(
        kind="inductor",
        place="series",
        value=0.37 + 5.055 * index,
        unit="µH",
        current_rms_a=2.828 + index,
        voltage_peak_v=59.3 + 909.0 * index,
    )
    capacitor = MatchingPart(
        kind="capacitor",
        place="shunt",
        value=1248.313 / (1 + 15 * index),
        unit="pF",
        current_rms_a=0.317 + index,
        voltage_peak_v=200.0 + 787.6 * index,
    )
    return Matching(
        shunt_at="antenna" if index % 2 else "line",
        parts=(coil,) if index == 2 else (coil, capacitor),
        loss_db=0.106 - 0.01 * index,
    )


def current(index: int, request: DesignRequest) -> CurrentAlong:
    """A sinusoid of one half wave more on each band, turning over between."""
    turns = index + 1
    waves = [math.sin(math.pi * turns * place / 40.0) for place in range(41)]
    feed = request.feed.feed_fractions()[-1]
    return CurrentAlong(
        size=tuple(round(abs(each), 3) for each in waves),
        phase_deg=tuple(-179.5 if each < -1e-9 else 0.0 for each in waves),
        at_feed=round(abs(math.sin(math.pi * turns * feed)), 4),
    )


def radiation(index: int) -> Radiation | None:
    """A pattern with one lobe on the first band and more on others; none on the fourth."""
    if index == 3:
        return None
    step_deg = (2.5, 1.0, 0.5)[index % 3]
    steps = round(90.0 / step_deg)
    around = [math.radians(step_deg * place) for place in range(2 * steps + 1)]

    def gains(lobes: int, below: float) -> tuple[float, ...]:
        return tuple(
            round(
                max(6.25 - below + 20.0 * math.log10(max(abs(math.sin(lobes * a)), 1e-6)), -60), 2
            )
            for a in around
        )

    return Radiation(
        gain_dbi=6.25,
        take_off_deg=37.3 - 2.5 * index,
        azimuth_deg=90.0 if index == 0 else 45.5,
        radiated_fraction=0.7725,
        wire_loss_fraction=0.0163,
        ground_loss_fraction=0.2112,
        step_deg=step_deg,
        broadside_dbi=gains(index + 1, 0.0)[: steps + 1],
        end_on_dbi=gains(index + 2, 4.5),
        around_dbi=gains(index + 1, 0.0),
    )


def trims(outcomes: tuple[BandOutcome, ...]) -> tuple[Trim, ...]:
    """For each band with a resonance of its own what a centimetre does."""
    return tuple(
        Trim(band=each.name, order=each.order, khz_per_cm=round((each.resonance_mhz or 0.0) / 2, 3))
        for each in outcomes
        if each.order is not None
    )


def steadiness(outcomes: tuple[BandOutcome, ...], request: DesignRequest) -> Steadiness | None:
    """Each band served at least in part, a little worse in every departure than in the last."""
    if request.tolerances is None:
        return None
    insulated = request.stock.choices()[0].insulation is not None
    whats = ["1 % longer", "1 % shorter", "0.5 m higher", "0.5 m lower"]
    whats += ["wetter ground", "drier ground"]
    whats += ["denser insulation", "lighter insulation"] if insulated else []
    departures = tuple(
        Departure(
            what=what,
            band=each.name,
            served_fraction=round(each.served_fraction / (1.0 + 0.02 * index), 4),
            swr_worst=round(each.swr_worst * (1.02 + 0.03 * index), 4),
        )
        for index, what in enumerate(whats)
        for each in outcomes
        if each.service != "unserved"
    )
    return Steadiness(
        required_served=0,
        weighted_served=0.7654,
        swr_worst=max((each.swr_worst for each in departures), default=1.0),
        worst=whats[-1],
        departures=departures,
    )


def trade_off(candidates: tuple[Candidate, ...]) -> tuple[TradeOff, ...]:
    """All candidates but the last, and other wires of the stock."""
    first = candidates[0]
    shown = [_on_front(each, 0.0, each.rank) for each in candidates[:-1] or candidates]
    others = [_on_front(first, 0.4 * step, None) for step in range(1, FRONT - len(shown) + 1)]
    return (*shown, *others)


def _on_front(like: Candidate, longer_m: float, rank: int | None) -> TradeOff:
    return TradeOff(
        length_m=round(like.length_m + longer_m, 3),
        conductor=like.conductor,
        transformer_ratio=like.transformer_ratio,
        required_served=like.required_served if longer_m < 5.0 else 0,
        weighted_served=round(like.weighted_served - 0.012 * longer_m, 4),
        swr_worst=round(max(1.05, like.swr_worst / (1.0 + 0.05 * longer_m)), 3),
        loss_db=like.loss_db,
        cost=None if like.cost is None else round(like.cost + longer_m, 2),
        rank=rank,
    )


def sets(candidates: tuple[Candidate, ...], request: DesignRequest) -> tuple[DipoleSet, ...]:
    """Sets of two and more of the first candidates, as many as asked for."""
    largest = min(request.largest_set or 1, len(candidates))
    return tuple(_set_of(candidates[:size]) for size in range(2, largest + 1))


def _set_of(members: tuple[Candidate, ...]) -> DipoleSet:
    serves: list[tuple[str, int]] = []
    unserved: list[str] = []
    for index, band in enumerate(members[0].bands):
        member = members[(index - 1) % len(members)]
        if member.bands[index].service == "unserved":
            unserved.append(band.name)
        else:
            serves.append((band.name, member.rank))
    return DipoleSet(
        ranks=tuple(each.rank for each in members),
        required_served=1,
        required_total=members[0].required_total,
        weighted_served=0.8877,
        serves=tuple(serves),
        unserved=tuple(unserved),
        why=f"Invented reason for a set of {len(members)}.",
    )
