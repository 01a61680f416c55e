"""A stored request written back into the form, to start another from it."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping
from typing import Final

from service.contracts.band_lists import BAND_LISTS, BandList
from service.contracts.bands import Band
from service.contracts.feed import Feed
from service.contracts.request import DesignRequest, Tolerances
from service.contracts.station_site import GroundConstants, HeightRange, Site
from service.contracts.stock import Conductor, Insulation, Stock
from service.pages.form.entries import WISHES, Entries, with_band_moved, written
from service.pages.form.reading import FIRST_LIST, ON_FORM, band_list_of

#: Empty fields take the contract's defaults; only what is chosen, not written, is set here.
BLANK: Final[Mapping[str, str]] = {
    "list": FIRST_LIST,
    "unit": "m",
    "ground": "average",
    "steady": "yes",
}


def filled(request: DesignRequest) -> dict[str, str]:
    """The form's entries that spell a request, in metres."""
    chosen = max(BAND_LISTS.values(), key=lambda each: _in_common(each, request.bands))
    entries = {**BLANK, "name": request.name, "list": chosen.name}
    own = 0
    for band in request.bands:
        edges = chosen.find(band.name)
        if edges is not None and (edges.low_mhz, edges.high_mhz) == _edges(band):
            prefix = f"band-{edges.name}"
            entries[f"{prefix}-take"] = "yes"
        else:
            prefix = f"own-{own}"
            entries |= {
                f"{prefix}-name": band.name,
                f"{prefix}-low": _plain(band.low_mhz),
                f"{prefix}-high": _plain(band.high_mhz),
            }
            own += 1
        entries |= {
            f"{prefix}-wanted": "required" if band.required else "wished",
            f"{prefix}-weight": _plain(band.weight),
            f"{prefix}-limit": _plain(band.swr_limit),
        }
    entries |= _site(request.site) | _stock(request.stock) | _feed(request.feed)
    entries |= {
        "power": _plain(request.power_w),
        "candidates": str(request.candidates),
        "rank-by": request.rank_by,
    }
    kept = request.model_dump(mode="json", exclude_defaults=True, exclude=set(ON_FORM))
    if kept:
        entries["kept"] = json.dumps(kept)
    if request.lengths is not None:
        entries["length-low"] = _plain(request.lengths.low_m)
        entries["length-high"] = _plain(request.lengths.high_m)
    if request.largest_set is not None:
        entries["largest-set"] = str(request.largest_set)
    return entries | _tolerances(request.tolerances)


def with_list_shown(entries: Entries) -> dict[str, str]:
    """The same form with the list chosen now: nothing that was ticked is lost.

    Ticked bands that the list now shown has under the same name, in the same service, stay
    ticked; the others become the planner's own.
    """
    shown = BAND_LISTS.get(written(entries, "shown-list"))
    chosen = band_list_of(entries)
    if shown is None or shown is chosen:
        return dict(entries)
    changed = dict(entries)
    same_service = shown.name.partition("-")[0] == chosen.name.partition("-")[0]
    for edges in shown.bands:
        prefix = f"band-{edges.name}"
        if not written(entries, f"{prefix}-take") or (same_service and chosen.find(edges.name)):
            continue
        kept = [
            ("name", edges.name),
            ("low", _plain(edges.low_mhz)),
            ("high", _plain(edges.high_mhz)),
        ]
        kept += [(wish, written(entries, f"{prefix}-{wish}")) for wish in WISHES]
        changed.pop(f"{prefix}-take")
        changed = with_band_moved(changed, kept)
    return changed


def _in_common(each: BandList, bands: Iterable[Band]) -> int:
    known = {(edges.low_mhz, edges.high_mhz) for edges in each.bands}
    return sum(_edges(band) in known for band in bands)


def _edges(band: Band) -> tuple[float, float]:
    return band.low_mhz, band.high_mhz


def _plain(value: float) -> str:
    """The shortest decimal number that reads as the value, without an exponent."""
    if value == math.floor(value):
        return str(int(value))
    text = repr(value)
    return text if "e" not in text else f"{value:.20f}".rstrip("0")


def _listed(values: Iterable[float]) -> str:
    return ", ".join(map(_plain, values))


def _site(site: Site) -> dict[str, str]:
    entries = {"span": _plain(site.span_m), "allowance": _plain(site.end_allowance_m)}
    if isinstance(site.height_m, HeightRange):
        entries["height"] = f"{_plain(site.height_m.low_m)} to {_plain(site.height_m.high_m)}"
    elif isinstance(site.height_m, tuple):
        entries["height"] = _listed(site.height_m)
    elif site.height_m is not None:
        entries["height"] = _plain(site.height_m)
    if isinstance(site.ground, GroundConstants):
        return entries | {
            "ground": "constants",
            "ground-er": _plain(site.ground.relative_permittivity),
            "ground-sigma": _plain(site.ground.conductivity_s_per_m),
        }
    return entries | {"ground": site.ground}


def _stock(stock: Stock) -> dict[str, str]:
    entries: dict[str, str] = {}
    for row, conductor in enumerate(stock.conductors):
        entries |= _conductor(conductor, f"wire-{row}")
    if stock.diameter_range is not None:
        limits = stock.diameter_range
        entries |= {
            "range-low": _plain(limits.low_mm),
            "range-high": _plain(limits.high_mm),
            "range-material": limits.material,
            **_insulation(limits.insulation, "range"),
        }
    return entries


def _conductor(conductor: Conductor, prefix: str) -> dict[str, str]:
    entries = {
        f"{prefix}-unit": "mm" if conductor.awg is None else "awg",
        f"{prefix}-size": _plain(conductor.bare_diameter_mm)
        if conductor.awg is None
        else str(conductor.awg),
        f"{prefix}-material": conductor.material,
        f"{prefix}-code": conductor.item_code,
        **_insulation(conductor.insulation, prefix),
    }
    if conductor.price_per_m is not None:
        entries[f"{prefix}-price"] = _plain(conductor.price_per_m)
    return entries


def _insulation(insulation: Insulation | None, prefix: str) -> dict[str, str]:
    if insulation is None:
        return {}
    return {
        f"{prefix}-thick": _plain(insulation.thickness_mm),
        f"{prefix}-er": _plain(insulation.relative_permittivity),
        f"{prefix}-tan": _plain(insulation.loss_tangent),
    }


def _feed(feed: Feed) -> dict[str, str]:
    entries = {
        "reference": _plain(feed.reference_ohm),
        "ratios": _listed(feed.transformer_ratios),
        "matching": feed.matching,
        "point": feed.reference_point,
    }
    if feed.positions == "anywhere":
        entries["anywhere"] = "yes"
    else:
        entries["positions"] = _listed(feed.positions)
    if feed.feed_line is not None:
        entries["line"] = feed.feed_line.line
        entries["line-length"] = _plain(feed.feed_line.length_m)
    return entries


def _tolerances(tolerances: Tolerances | None) -> dict[str, str]:
    if tolerances is None:
        return {"steady": ""}
    return {
        "tol-cutting": _plain(tolerances.cutting_percent),
        "tol-height": _plain(tolerances.height_m),
        "tol-ground": _plain(tolerances.ground_factor),
        "tol-insulation": _plain(tolerances.insulation_percent),
    }
