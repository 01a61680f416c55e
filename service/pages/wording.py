"""A design request in a planner's words, one sentence a subject."""

from __future__ import annotations

from typing import Final

from service.contracts.feed import Feed, line_in_words
from service.contracts.request import DesignRequest, LengthBounds, Tolerances
from service.contracts.station_site import GroundConstants, HeightRange, Site
from service.contracts.stock import Conductor, Insulation, Stock, material_in_words
from service.pages import formats

_GROUNDS: Final = {
    "pastoral-hills": "pastoral hills",
    "marshy-wooded": "marshy, wooded land",
    "city": "a city",
    "industrial": "an industrial area",
}
#: Classes of the recommendation that gives ground by kind and frequency.
_ITU: Final = "itu-"


def site_in_words(site: Site) -> str:
    """Span, what of it a wire can use, height and ground."""
    span = (
        f"{formats.metres(site.span_m)} m between the points of support, "
        f"{formats.metres(site.end_allowance_m)} m kept free at each end: "
        f"at most {formats.metres(site.longest_wire_m)} m of wire"
    )
    if site.ground == "free-space":
        return f"{span}, in free space."
    return f"{span}, {_heights(site)} over {_ground(site)}."


def lengths_in_words(lengths: LengthBounds) -> str:
    """Which lengths of wire are searched."""
    low, high = formats.metres(lengths.low_m), formats.metres(lengths.high_m)
    return f"{low} m and no other" if low == high else f"{low} to {high} m"


def stock_in_words(stock: Stock) -> list[str]:
    """Each conductor of the stock, or the range of diameters, as a buyer would ask for it."""
    if stock.diameter_range is None:
        return [_conductor(each) for each in stock.conductors]
    limits = stock.diameter_range
    low, high = formats.millimetres(limits.low_mm), formats.millimetres(limits.high_mm)
    sleeve = "" if limits.insulation is None else f", {_insulation(limits.insulation)}"
    return [f"any diameter from {low} to {high} mm, {material_in_words(limits.material)}{sleeve}"]


def feed_in_words(request: DesignRequest) -> str:
    """Where the wire may be fed, through what, against what, the line and the power."""
    feed = request.feed
    ratios = formats.listed([formats.ratio(each) for each in feed.transformer_ratios], "or")
    network = ", an L-network for each band" if feed.matching == "per-band" else ""
    line = ""
    if feed.feed_line is not None:
        length = formats.metres(feed.feed_line.length_m)
        line = f", {length} m of {line_in_words(feed.feed_line.line)}"
    return (
        f"{_places(feed)}, transformer {ratios}{network}{line}, "
        f"{formats.ohms(feed.reference_ohm)} Ω reference, {formats.watts(request.power_w)}. "
        f"SWR limits apply {limits_apply_at(feed)}."
    )


def limits_apply_at(feed: Feed) -> str:
    """The end of the feed line at which the SWR is held to its limits."""
    return "at the transmitter" if feed.reference_point == "transmitter" else "at the feed point"


def ranking_in_words(request: DesignRequest) -> str:
    """What the ranking goes by, and whether sets of dipoles were asked for."""
    by = (
        "By how each wire holds up where it departs most from the plan."
        if request.rank_by == "worst-case"
        else "By each wire as planned."
    )
    if request.largest_set is None:
        return f"{by} Sets of dipoles only where no single wire serves all required bands."
    if request.largest_set == 1:
        return f"{by} No sets of dipoles."
    return f"{by} Sets of up to {request.largest_set} dipoles asked for."


def tolerances_in_words(tolerances: Tolerances | None) -> str:
    """How far the wire as hung may depart from the plan."""
    if tolerances is None:
        return "None given: how a wire holds up was not looked at."
    said = []
    if tolerances.cutting_percent:
        said.append(f"length ±{tolerances.cutting_percent:g} %")
    if tolerances.height_m:
        said.append(f"height ±{tolerances.height_m:g} m")
    if tolerances.ground_factor > 1.0:
        said.append(f"ground {tolerances.ground_factor:g} times wetter and drier")
    if tolerances.insulation_percent:
        said.append(f"permittivity of insulation ±{tolerances.insulation_percent:g} %")
    text = formats.listed(said) or "no departure"
    return f"{text[:1].upper()}{text[1:]}."


def _places(feed: Feed) -> str:
    if feed.positions == "anywhere":
        return "Fed anywhere along the wire"
    fractions = sorted(feed.feed_fractions(), reverse=True)
    if fractions == [0.5]:
        return "Fed at the centre"
    places = ["the centre" if each == 0.5 else formats.part(each) for each in fractions]
    return f"Fed at {formats.listed(places, 'or')} of the length"


def _heights(site: Site) -> str:
    if isinstance(site.height_m, HeightRange):
        low, high = formats.metres(site.height_m.low_m), formats.metres(site.height_m.high_m)
        return f"any height from {low} to {high} m"
    return formats.listed([formats.metres(each) for each in site.heights_m()], "or") + " m"


def _ground(site: Site) -> str:
    if isinstance(site.ground, GroundConstants):
        return (
            f"ground of relative permittivity {site.ground.relative_permittivity:g} and "
            f"{site.ground.conductivity_s_per_m:g} S/m"
        )
    return ground_class_in_words(site.ground)


def ground_class_in_words(name: str) -> str:
    """A class of ground as the trade calls it."""
    if name.startswith(_ITU):
        return f"{_kind(name.removeprefix(_ITU))} (ITU-R P.527)"
    return "none: free space" if name == "free-space" else _kind(name)


def _kind(name: str) -> str:
    plain = name.replace("-", " ")
    if name in _GROUNDS or plain.endswith(("water", "ground")):
        return _GROUNDS.get(name, plain)
    return f"{plain} ground"


def _conductor(conductor: Conductor) -> str:
    label = conductor.label
    if conductor.awg is not None:
        label += f" ({formats.millimetres(conductor.bare_diameter_mm)} mm)"
    if conductor.insulation is not None:
        label += f": {_insulation(conductor.insulation)}"
    if conductor.item_code:
        label += f", item {conductor.item_code}"
    if conductor.price_per_m is not None:
        label += f", {formats.money(conductor.price_per_m)} a metre"
    return label


def _insulation(insulation: Insulation) -> str:
    return (
        f"insulation {formats.millimetres(insulation.thickness_mm)} mm thick, "
        f"relative permittivity {insulation.relative_permittivity:g}"
    )
