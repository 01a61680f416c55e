"""Lines of a bill for what bears the wire: insulators, rope, and what rope runs over."""

from __future__ import annotations

from typing import Final

from service.contracts.bill import BillLine, Rating
from service.contracts.candidate import Candidate
from service.contracts.formats import feed_place, metres
from service.contracts.report import FeedReport
from service.contracts.request import DesignRequest
from service.exports.digits import exact
from service.exports.part_duty import Duty, Worst, at_least

#: Over the computed peak, for rain, dirt, and band edges beside the centre (common practice).
VOLTAGE_MARGIN: Final = 2.0
#: Rope for the knots at both ends of each halyard (common practice).
KNOTS_M: Final = 1.0
#: A rope that comes back down beside itself pulls at its pulley twice (statics).
_DOUBLED: Final = 2.0


def insulators(request: DesignRequest, candidate: Candidate, duty: Duty) -> list[BillLine]:
    """Two for the ends, one for the feed."""
    centred = candidate.feed_fraction == 0.5
    place = feed_place(candidate.feed_fraction, candidate.length_m)
    tensions = [each for each in (duty.wire_tension_n, duty.rope_tension_n) if each is not None]
    at_ends = max(tensions, default=None, key=lambda each: each.value)
    return [
        BillLine(
            part="end insulator",
            description="End insulator between wire and rope",
            quantity=2.0,
            unit="piece",
            quantity_source="one at each end of the wire",
            ratings=(
                *voltage_rating(request, "working voltage", duty.ends_peak_v, "against earth"),
                *breaking_load(request, at_ends),
            ),
        ),
        BillLine(
            part="feed insulator",
            description="Centre insulator that takes the strain of the feed line"
            if centred
            else f"Insulator at the feed, {place}, that takes the strain of the feed line",
            quantity=1.0,
            unit="piece",
            quantity_source="one at the feed",
            ratings=(
                *voltage_rating(request, "working voltage", duty.feed_peak_v, "across the feed"),
                *breaking_load(request, duty.wire_tension_n),
            ),
        ),
    ]


def rope_and_hardware(
    request: DesignRequest, candidate: Candidate, report: FeedReport, duty: Duty
) -> list[BillLine]:
    """Halyards down to the ground, the pulleys they run over, and shackles."""
    tail_m = (
        0.5 * (request.site.span_m - candidate.length_m)
        if report.hanging is None
        else report.hanging.tail_m
    )
    down_m = candidate.height_m or 0.0
    down = f", {metres(down_m)} m down to the ground" if down_m else ""
    return [
        BillLine(
            part="rope",
            description="Rope that withstands sunlight, for two halyards",
            quantity=round(2.0 * (tail_m + down_m + KNOTS_M), 2),
            unit="m",
            quantity_source=f"for each end {metres(tail_m)} m from wire to support{down} and "
            f"{metres(KNOTS_M)} m for knots (common practice)",
            ratings=(
                Rating(
                    name="diameter",
                    bound="nominal",
                    value=request.hanging.rope_diameter_mm,
                    unit="mm",
                    source="the request; wind and ice were taken on it",
                ),
                *breaking_load(request, duty.rope_tension_n, "; a knot may halve a rope's"),
            ),
        ),
        BillLine(
            part="pulley",
            description="Pulley at each support, for the halyard",
            quantity=2.0,
            unit="piece",
            quantity_source="one at each support",
            ratings=_working_load(duty.rope_tension_n),
        ),
        BillLine(
            part="shackle",
            description="Shackle with a pin that can be secured",
            quantity=4.0,
            unit="piece",
            quantity_source="one at each end insulator and at each pulley",
            ratings=_working_load(duty.rope_tension_n),
        ),
    ]


def voltage_rating(
    request: DesignRequest, name: str, peak_v: Worst | None, across: str
) -> tuple[Rating, ...]:
    """A working voltage with its margin; nothing where no voltage was stored."""
    if peak_v is None:
        return ()
    source = (
        f"{exact(peak_v.value)} V peak {across} at the centre of {peak_v.where} and "
        f"{exact(request.power_w)} W, times {VOLTAGE_MARGIN:g} for rain, dirt and band edges "
        "(common practice)"
    )
    value = at_least(VOLTAGE_MARGIN * peak_v.value)
    return (Rating(name=name, bound="at least", value=value, unit="V peak", source=source),)


def breaking_load(
    request: DesignRequest, tension_n: Worst | None, beside: str = ""
) -> tuple[Rating, ...]:
    """A breaking load by the safety factor of the request; nothing where no tension was stored."""
    if tension_n is None:
        return ()
    factor = request.hanging.safety_factor
    return (
        Rating(
            name="breaking load",
            bound="at least",
            value=at_least(factor * tension_n.value),
            unit="N",
            source=f"largest tension {exact(tension_n.value)} N ({tension_n.where}), times the "
            f"safety factor of {factor:g} asked for{beside}",
        ),
    )


def _working_load(tension_n: Worst | None) -> tuple[Rating, ...]:
    if tension_n is None:
        return ()
    return (
        Rating(
            name="working load",
            bound="at least",
            value=at_least(_DOUBLED * tension_n.value),
            unit="N",
            source=f"largest tension of the rope {exact(tension_n.value)} N ({tension_n.where}), "
            f"times {_DOUBLED:g} where it comes back down; the working load, not the breaking load",
        ),
    )
