"""A design request in a planner's words, one sentence a subject."""

from __future__ import annotations

from typing import Final

from service.contracts.request import DesignRequest
from service.contracts.station_site import GroundConstants, Site
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
    heights = [formats.metres(height_m) for height_m in site.heights_m()]
    return f"{span}, {formats.listed(heights)} m over {_ground(site)}."


def stock_in_words(stock: Stock) -> list[str]:
    """Each conductor of the stock, or the range of diameters, as a buyer would ask for it."""
    if stock.diameter_range is None:
        return [_conductor(each) for each in stock.conductors]
    limits = stock.diameter_range
    low, high = formats.millimetres(limits.low_mm), formats.millimetres(limits.high_mm)
    sleeve = "" if limits.insulation is None else f", {_insulation(limits.insulation)}"
    return [f"any diameter from {low} to {high} mm, {material_in_words(limits.material)}{sleeve}"]


def feed_in_words(request: DesignRequest) -> str:
    """Reference impedance, the transformers allowed, the line and the power."""
    feed = request.feed
    ratios = formats.listed([formats.ratio(each) for each in feed.transformer_ratios])
    plural = "s" if len(feed.transformer_ratios) > 1 else ""
    line = (
        ""
        if feed.feed_line is None
        else f", {formats.metres(feed.feed_line.length_m)} m of {_line(feed.feed_line.line)}"
    )
    return (
        f"{formats.ohms(feed.reference_ohm)} Ω reference, transformer{plural} {ratios}{line}, "
        f"{formats.watts(request.power_w)}."
    )


def _ground(site: Site) -> str:
    if isinstance(site.ground, GroundConstants):
        return (
            f"ground of relative permittivity {site.ground.relative_permittivity:g} and "
            f"{site.ground.conductivity_s_per_m:g} S/m"
        )
    if site.ground.startswith(_ITU):
        return f"{_kind(site.ground.removeprefix(_ITU))} (ITU-R P.527)"
    return _kind(site.ground)


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
    return f"{label}, item {conductor.item_code}" if conductor.item_code else label


def _line(name: str) -> str:
    """A feed line by its designation, or by its construction and impedance."""
    if name.startswith("rg-"):
        return name.upper()
    construction, _, impedance_ohm = name.rpartition("-")
    return f"{impedance_ohm} Ω {construction.replace('-', ' ')}"


def _insulation(insulation: Insulation) -> str:
    return (
        f"insulation {formats.millimetres(insulation.thickness_mm)} mm thick, "
        f"relative permittivity {insulation.relative_permittivity:g}"
    )
