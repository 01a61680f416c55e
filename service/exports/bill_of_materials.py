"""The bill of materials of one candidate, from its stored result, report and request."""

from __future__ import annotations

from typing import Final

from service.contracts.bill import BillLine, BillOfMaterials, Rating
from service.contracts.candidate import Candidate
from service.contracts.formats import listed, metres
from service.contracts.progress import Design
from service.contracts.report import FeedReport
from service.contracts.request import DesignRequest
from service.contracts.stock import Conductor
from service.exports import feed_parts, hanging_parts
from service.exports.digits import exact
from service.exports.part_duty import Duty, duty_of

#: Over the electrical length, where no cutting list was stored (common practice).
ALLOWANCE_WITHOUT_LIST_PERCENT: Final = 5.0
#: Two sums that may differ by their rounding to the cent, of a length rounded to the µm.
_ALIKE: Final = 0.011

_NOT_ON_IT: Final = (
    "Not on this bill: supports and what holds the pulleys to them, earthing and lightning "
    "protection, connectors, switches, tools, and spares."
)
_BUYING: Final = (
    (
        "The ratings are the least to ask for, from computed figures and the margins told: have "
        "the maker confirm working, not breaking or flash-over, values, outdoors and wet."
    ),
    (
        "They hold for the power told and for the bands told. More power, or a tuner on another "
        "band, may bring voltages that these parts do not bear."
    ),
)


def bill_of_materials(design: Design, candidate: Candidate, report: FeedReport) -> BillOfMaterials:
    """What to buy for one candidate, how much, and what each part must bear.

    Parameters
    ----------
    design : Design
        Done: its request tells stock, line, power and safety factor.
    candidate : Candidate
    report : FeedReport
        Of the same candidate. Where an older one holds no hanging, end voltages or stress, the
        ratings that rest on them are left out and a note says so.
    """
    request = design.request
    duty = duty_of(request, candidate, report)
    return BillOfMaterials(
        design_id=design.id,
        design_name=design.name,
        rank=candidate.rank,
        purchase_reference=request.purchase_reference,
        planned_at=design.finished_at or design.created_at,
        wire=f"{metres(candidate.length_m)} m of {candidate.conductor}",
        power_w=request.power_w,
        lines=(
            _conductor(request, candidate, report, duty),
            *hanging_parts.insulators(request, candidate, duty),
            *feed_parts.transformer_and_choke(request, candidate, duty),
            *feed_parts.networks(request, report, duty),
            *feed_parts.feed_line(request, duty),
            *hanging_parts.rope_and_hardware(request, candidate, report, duty),
        ),
        notes=tuple(_notes(request, candidate, duty)),
        cautions=(
            *report.cautions,
            *(() if report.hanging is None else report.hanging.cautions),
            *_BUYING,
        ),
    )


def _conductor(
    request: DesignRequest, candidate: Candidate, report: FeedReport, duty: Duty
) -> BillLine:
    length_m, source = _wire_to_buy(request, candidate, report)
    prices = {each.price_per_m for each in _of_stock(request, candidate)}
    price = prices.pop() if len(prices) == 1 else None
    return BillLine(
        part="conductor",
        description=candidate.conductor,
        quantity=length_m,
        unit="m",
        quantity_source=source,
        ratings=(
            Rating(
                name="diameter",
                bound="nominal",
                value=candidate.diameter_mm,
                unit="mm",
                source="the stock of the request, metal only",
            ),
            *_sleeve(request, candidate),
            *hanging_parts.breaking_load(request, duty.wire_tension_n),
        ),
        item_code=candidate.item_code,
        unit_price=price,
        amount=None if price is None else round(length_m * price, 2),
    )


def _wire_to_buy(
    request: DesignRequest, candidate: Candidate, report: FeedReport
) -> tuple[float, str]:
    """Length in m and how it is made up."""
    electrical = f"{metres(candidate.length_m)} m electrical"
    if report.hanging is None:
        percent = ALLOWANCE_WITHOUT_LIST_PERCENT
        length_m = round(candidate.length_m * (1.0 + 0.01 * percent), 3)
        return length_m, f"{electrical} and {percent:g} % for wraps and trimming (common practice)"
    legs = " and ".join(f"{each.cut_m:.3f} m" for each in report.hanging.cutting)
    percent = request.hanging.cutting_allowance_percent
    made_of = f"{electrical}, with wraps and {percent:g} % to trim away"
    return report.hanging.wire_total_m, f"the cutting list: legs of {legs}; {made_of}"


def _of_stock(request: DesignRequest, candidate: Candidate) -> list[Conductor]:
    """Conductors of the stock that the candidate may be made of; more than one if alike."""

    def is_it(each: Conductor) -> bool:
        if (each.label, each.item_code) != (candidate.conductor, candidate.item_code):
            return False
        if each.price_per_m is None or candidate.cost is None:
            return each.price_per_m is None and candidate.cost is None
        return abs(each.price_per_m * candidate.length_m - candidate.cost) < _ALIKE

    same_size = [
        each
        for each in request.stock.choices()
        if round(each.bare_diameter_mm, 4) == candidate.diameter_mm
    ]
    return [each for each in same_size if is_it(each)]


def _sleeve(request: DesignRequest, candidate: Candidate) -> tuple[Rating, ...]:
    sleeves = {each.insulation for each in _of_stock(request, candidate)}
    sleeve = sleeves.pop() if len(sleeves) == 1 else None
    if sleeve is None:
        return ()
    source = "the stock of the request"
    return (
        Rating(
            name="insulation thickness",
            bound="nominal",
            value=sleeve.thickness_mm,
            unit="mm",
            source=source,
        ),
        Rating(
            name="relative permittivity of the insulation",
            bound="nominal",
            value=sleeve.relative_permittivity,
            unit="",
            source=source,
        ),
    )


def _notes(request: DesignRequest, candidate: Candidate, duty: Duty) -> list[str]:
    said = [f"Ratings are for {exact(request.power_w)} W on {duty.bands_in_words}."]
    unserved = [each.name for each in candidate.bands if each.service == "unserved"]
    if len(unserved) == len(candidate.bands):
        said.append("This wire serves none of the bands: buy nothing by this bill.")
    elif unserved:
        said.append(
            f"Nothing is rated for {listed(unserved)}, not served by this wire: do not transmit "
            "there."
        )
    if duty.rope_tension_n is None:
        said.append(
            "No tension was stored with this design: plan it again, or have the loads worked out "
            "before insulators, rope and hardware are bought."
        )
    if duty.ends_peak_v is None:
        said.append(
            "No end voltage was stored with this design: plan it again before end insulators are "
            "bought."
        )
    if duty.feed_peak_v is None:
        said.append("No voltage at the feed was stored with this design.")
    if request.feed.feed_line is None:
        said.append("The request names no feed line, so none is on this bill.")
    if len({(each.price_per_m, each.insulation) for each in _of_stock(request, candidate)}) > 1:
        said.append(
            "Several conductors of the stock answer to this description; what differs between "
            "them is left out. Give each an item code."
        )
    if candidate.height_m is None:
        said.append("Planned in free space: rope is counted without the way down to the ground.")
    said.append(_NOT_ON_IT)
    return said
