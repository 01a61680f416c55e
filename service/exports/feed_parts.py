"""Lines of a bill for the way from the wire to the transmitter."""

from __future__ import annotations

from math import sqrt
from typing import Final, Literal

from service.contracts.bill import BillLine, Rating
from service.contracts.candidate import Candidate
from service.contracts.feed import is_coaxial, line_in_words
from service.contracts.formats import ratio
from service.contracts.report import BandReport, FeedReport, MatchingPart
from service.contracts.request import DesignRequest
from service.exports.digits import exact
from service.exports.hanging_parts import voltage_rating
from service.exports.part_duty import Duty, Worst, at_least

#: Over the power of the request, for heat and mismatch (common practice).
POWER_MARGIN: Final = 2.0
#: Twice the power is so many times the current.
_CURRENT_MARGIN: Final = sqrt(POWER_MARGIN)
#: Common-mode impedance that keeps current off the line (common practice): more of it is needed
#: off centre, where the two legs are unlike.
CHOKING_OHM: Final = 1000.0
CHOKING_OFF_CENTRE_OHM: Final = 5000.0
_OF_A_BAND: Final = ("inductor", "capacitor")


def transformer_and_choke(
    request: DesignRequest, candidate: Candidate, duty: Duty
) -> list[BillLine]:
    """A transformer and a choke; at 1:1 a current balun is both.

    A balanced line needs no choke at the wire, but one where it meets what is not balanced.
    """
    line = request.feed.feed_line
    balanced = line is not None and not is_coaxial(line.line)
    lines: list[BillLine] = []
    choking = (_choking(candidate), *_power(request), *_frequencies(duty))
    if candidate.transformer_ratio != 1.0:
        lines.append(_transformer(request, candidate, duty))
    elif not balanced:
        described = "Current balun 1:1, which is the common-mode choke at the feed too"
        return [_piece("current balun", described, (_ratio(candidate), *choking))]
    where = (
        "where the balanced line meets coaxial cable or equipment"
        if balanced
        else "on the feed line, below the transformer"
    )
    lines.append(_piece("common-mode choke", f"Common-mode choke {where}", choking))
    return lines


def networks(request: DesignRequest, report: FeedReport, duty: Duty) -> list[BillLine]:
    """Coils and capacitors of the L-networks on the bands in use."""
    return [
        _network_part(request, band, part)
        for band in report.bands
        if band.matching is not None and band.name in duty.bands
        for part in band.matching.parts
    ]


def feed_line(request: DesignRequest, duty: Duty) -> list[BillLine]:
    """The feed line of the request, if it names one."""
    line = request.feed.feed_line
    if line is None:
        return []
    swr = duty.line_swr
    rating = Rating(
        name=f"power at {duty.high_mhz:g} MHz",
        bound="at least",
        # Where the standing wave is highest |V|² = 2 P Z0 S, as at S times the power matched.
        value=at_least(request.power_w * swr.value),
        unit="W",
        source=f"{exact(request.power_w)} W of the request times {exact(swr.value)}, the largest "
        f"SWR on the line within the limits (on {swr.where})",
    )
    return [
        BillLine(
            part="feed line",
            description=f"Feed line, {line_in_words(line.line)}",
            quantity=line.length_m,
            unit="m",
            quantity_source="the request; nothing is added for connectors and bends",
            ratings=(rating,),
        )
    ]


def _transformer(request: DesignRequest, candidate: Candidate, duty: Duty) -> BillLine:
    described = (
        f"Impedance transformer {ratio(candidate.transformer_ratio)}, antenna side to line side, "
        f"{request.feed.reference_ohm:g} Ω on the line side"
    )
    ratings = (
        _ratio(candidate),
        *_power(request),
        *voltage_rating(request, "voltage, antenna side", duty.feed_peak_v, "across the feed"),
        *_current(request, "current, antenna side", duty.feed_rms_a),
        *_frequencies(duty),
    )
    return _piece("transformer", described, ratings)


def _network_part(request: DesignRequest, band: BandReport, part: MatchingPart) -> BillLine:
    name = "Coil" if part.kind == "inductor" else "Capacitor"
    ratings = (
        Rating(
            name="inductance" if part.kind == "inductor" else "capacitance",
            bound="nominal",
            value=part.value,
            unit=part.unit,
            source=f"the L-network that matches the centre of {band.name}; adjustable about it",
        ),
        *voltage_rating(
            request, "working voltage", Worst(part.voltage_peak_v, band.name), "across it"
        ),
        *_current(request, "current", Worst(part.current_rms_a, band.name)),
    )
    return _piece(part.kind, f"{name} of the L-network on {band.name}, {part.place}", ratings)


def _piece(
    part: Literal["transformer", "current balun", "common-mode choke", "inductor", "capacitor"],
    description: str,
    ratings: tuple[Rating, ...],
) -> BillLine:
    return BillLine(
        part=part,
        description=description,
        quantity=1.0,
        unit="piece",
        quantity_source="one for its band" if part in _OF_A_BAND else "one for the wire",
        ratings=ratings,
    )


def _ratio(candidate: Candidate) -> Rating:
    return Rating(
        name="impedance ratio",
        bound="nominal",
        value=candidate.transformer_ratio,
        unit=":1",
        source="the candidate, antenna side to line side",
    )


def _power(request: DesignRequest) -> tuple[Rating, ...]:
    source = (
        f"{exact(request.power_w)} W of the request, times {POWER_MARGIN:g} for heat and mismatch "
        "(common practice)"
    )
    value = at_least(POWER_MARGIN * request.power_w)
    return (Rating(name="power", bound="at least", value=value, unit="W", source=source),)


def _current(request: DesignRequest, name: str, rms_a: Worst | None) -> tuple[Rating, ...]:
    if rms_a is None:
        return ()
    source = (
        f"{exact(rms_a.value)} A rms at the centre of {rms_a.where} and "
        f"{exact(request.power_w)} W, at {POWER_MARGIN:g} times that power"
    )
    value = at_least(_CURRENT_MARGIN * rms_a.value)
    return (Rating(name=name, bound="at least", value=value, unit="A rms", source=source),)


def _choking(candidate: Candidate) -> Rating:
    centred = candidate.feed_fraction == 0.5
    return Rating(
        name="common-mode impedance",
        bound="at least",
        value=CHOKING_OHM if centred else CHOKING_OFF_CENTRE_OHM,
        unit="Ω",
        source=f"common practice for a wire fed {'at its centre' if centred else 'off centre'}, "
        "on every band",
    )


def _frequencies(duty: Duty) -> tuple[Rating, Rating]:
    source = f"the edges of {duty.bands_in_words}"
    return (
        Rating(
            name="lowest frequency",
            bound="at most",
            value=duty.low_mhz,
            unit="MHz",
            source=source,
        ),
        Rating(
            name="highest frequency",
            bound="at least",
            value=duty.high_mhz,
            unit="MHz",
            source=source,
        ),
    )
