"""The sentences of a result: why a band is served or not, why a wire ranks, what it trades."""

from __future__ import annotations

from typing import Final

from service.contracts.candidate import BandOutcome
from service.contracts.formats import (
    decibels,
    listed,
    metres,
    mhz,
    ohms,
    ordinal,
    ratio,
    share,
    swr,
)
from worker.search.appraisal import NEAR, Appraisal, BandAppraisal, is_near
from worker.search.resonances import Resonance
from worker.search.scoring import FULLY_SERVED
from worker.search.trade_off import Gain

CAUTIONS: Final = (
    (
        "Keep wire, supports and feed line well away from power lines: further than anything can "
        "fall or swing."
    ),
    (
        "The ends and, off resonance, the feed point carry high radio-frequency voltage: out of "
        "reach of people and animals, and off when anyone is near."
    ),
    (
        "People must stay further from every part of the wire than the exposure distance of the "
        "limits in force where you are. The distances told here come from formulas for a wire by "
        "itself, and metal nearby may raise the field: where it matters, have it measured."
    ),
    (
        "Disconnect and earth the feed line against lightning, and follow local codes for "
        "protection and bonding."
    ),
    (
        "Have masts, trees and tension judged by someone qualified; wire under tension can whip. "
        "Strengths told here are handbook figures of new wire and rope; knots may halve a rope's."
    ),
    "Local codes and licensed practice come before anything written here.",
)

#: A fifth of the power: less is lost in any matching (common practice).
_LOSS_WORTH_A_WORD_DB: Final = 1.0

NOT_MODELLED: Final = (
    "sag, slope and bends of the wire",
    "nearby metal, buildings, trees and other antennas",
    "radiation and loss of the feed line and its outer surface",
    "loss of the transformer",
    "couplings between the dipoles of a set",
)


def band_reason(
    band: BandAppraisal, outcome: BandOutcome, resonances: tuple[Resonance, ...]
) -> str:
    """Why a band is served, partly served or unserved, with the nearest usable resonance."""
    limit = swr(outcome.swr_limit)
    if outcome.service == "served":
        lead = f"SWR {swr(outcome.swr_worst)} or less from edge to edge, within {limit}"
    elif outcome.service == "partly served":
        lead = (
            f"SWR within {limit} over {share(outcome.served_fraction)} of the band, "
            f"up to {swr(outcome.swr_worst)} in the rest"
        )
    else:
        best = float(band.grid.fed.limited_swr.min())
        lead = f"SWR {swr(best)} at best, above {limit}"
    if band.nearest is None:
        return f"{lead}; this wire has no usable resonance in the range looked at."
    above = band.nearest.frequency_hz >= band.goal.centre_hz
    offset_hz = abs(band.nearest.frequency_hz - band.goal.centre_hz)
    distance = f"{offset_hz / 1e3:.0f} kHz" if offset_hz < 1e6 else f"{offset_hz / 1e6:.2f} MHz"
    sentence = (
        f"{lead}; the {ordinal(band.nearest.order)}-order resonance at "
        f"{mhz(band.nearest.frequency_hz / 1e6)} MHz ({ohms(band.nearest.resistance_ohm)} Ω) lies "
        f"{distance} {'above' if above else 'below'} the centre."
    )
    return sentence + _antiresonance_near(band, resonances, outcome.service == "unserved")


def network_in_words(loss_db: float) -> str:
    """What the coils of a band's network lose, where that is worth a word."""
    if loss_db < _LOSS_WORTH_A_WORD_DB:
        return ""
    lost = f"{decibels(loss_db)} dB, {round(100.0 * (1.0 - 10.0 ** (-0.1 * loss_db)))} %"
    return f" Its network loses {lost} of the power, in coils as usually wound."


def _antiresonance_near(
    band: BandAppraisal, resonances: tuple[Resonance, ...], unserved: bool
) -> str:
    """A word on the anti-resonance an unserved band falls beside, where one does."""
    parallel = [each for each in resonances if each.kind == "parallel"]
    if not unserved or not parallel:
        return ""
    closest = min(parallel, key=lambda each: abs(each.frequency_hz - band.goal.centre_hz))
    if abs(closest.frequency_hz / band.goal.centre_hz - 1.0) > NEAR:
        return ""
    return (
        f" The band falls beside the anti-resonance at {mhz(closest.frequency_hz / 1e6)} MHz "
        f"({ohms(closest.resistance_ohm)} Ω), where no transformer offered here helps."
    )


def why_it_ranks(outcomes: tuple[BandOutcome, ...], appraisal: Appraisal) -> str:
    """One sentence: what the wire serves, on which resonances, at what worst SWR."""
    with_what = (
        "Fed directly"
        if appraisal.pick.ratio == 1.0
        else f"Through a {ratio(appraisal.pick.ratio)} transformer"
    )
    whole = [_used(each) for each in outcomes if each.service == "served"]
    part = [
        f"{each.name} over {share(each.served_fraction)}"
        for each in outcomes
        if each.service == "partly served"
    ]
    missed = [each.name for each in outcomes if each.service == "unserved"]
    clauses: list[str] = []
    if whole:
        clauses.append(f"serves {listed(whole)}")
    if part:
        clauses.append(f"serves in part {listed(part)}")
    if missed:
        clauses.append(f"does not serve {listed(missed)}")
    return f"{with_what}, it {listed(clauses)}."


def _used(outcome: BandOutcome) -> str:
    order = "" if outcome.order is None else f" on its {ordinal(outcome.order)} resonance"
    return f"{outcome.name}{order} (worst SWR {swr(outcome.swr_worst)})"


def compromise(appraisal: Appraisal) -> str:
    """What the length trades between the bands it is used on."""
    length_m = appraisal.pick.length_m
    used = [band for band in appraisal.bands if is_used(band)]
    own = [
        f"{band.goal.name} ({ordinal(band.nearest.order)} order) would want "
        f"{metres(band.own_length_m)} m"
        for band in used
        if band.nearest is not None and band.own_length_m is not None
    ]
    if not own:
        return "No band is used near a resonance of this wire."
    sentences = [_orders_in_proportion(used, appraisal.resonances)]
    if len(own) > 1:
        sentences.append(
            f"For resonance at its centre {listed(own)}; {metres(length_m)} m is the compromise."
        )
    else:
        sentences.append(
            f"For resonance at its centre {own[0]}; this wire is {metres(length_m)} m."
        )
    return " ".join(filter(None, sentences))


def is_used(band: BandAppraisal) -> bool:
    """Whether a band is worked on the resonance nearest to it."""
    return band.nearest is not None and is_near(band.nearest, band.goal)


def _orders_in_proportion(used: list[BandAppraisal], resonances: tuple[Resonance, ...]) -> str:
    """How far the higher resonances lie from whole multiples of the first."""
    first = next((r for r in resonances if r.kind == "series" and r.order == 1), None)
    higher = {b.nearest.order: b.nearest for b in used if b.nearest and b.nearest.order > 1}
    if first is None or not higher:
        return ""
    clauses: list[str] = []
    for order, each in sorted(higher.items()):
        times = each.frequency_hz / first.frequency_hz
        side = "above" if times > order else "below"
        clauses.append(
            f"the {ordinal(order)} resonance at {mhz(each.frequency_hz / 1e6)} MHz is "
            f"{times:.3f} times the 1st at {mhz(first.frequency_hz / 1e6)} MHz, {side} {order}"
        )
    text = listed(clauses)
    return text[:1].upper() + text[1:] + ": the end effect weighs less on the higher orders."


def improvement(gain: Gain, length_m: float) -> str:
    """What another length would bring, and what it would take."""
    step = f"{metres(abs(gain.by_m))} m {'longer' if gain.by_m > 0.0 else 'shorter'}"
    brought = (
        f"would serve {gain.serves.name} whole"
        if gain.fraction >= FULLY_SERVED
        else f"would serve {share(gain.fraction)} of {gain.serves.name}"
    )
    lost = [each.name for each in gain.loses]
    but = f", but no longer all of {listed(lost)}" if lost else ""
    return f"{step} ({metres(length_m + gain.by_m)} m) {brought}{but}."
