"""From the form to the request that the contract judges, and from its faults back to fields.

Nothing is judged here. What reads as a number is converted to the contract's unit; what does not
is handed on as written, so that the contract refuses it in its own words.
"""

from __future__ import annotations

import json
import re
from dataclasses import dataclass, field
from typing import Any, Final

from service.contracts.band_lists import BAND_LISTS, BandList
from service.contracts.units import LengthUnit, metres_of, number_of, per_metre_of
from service.errors import Fault
from service.pages.form.entries import Entries, written, written_rows

#: Parts of a request that have fields on the form; the others travel along as they are.
ON_FORM: Final = frozenset(
    (
        "name",
        "bands",
        "site",
        "lengths",
        "stock",
        "feed",
        "power_w",
        "candidates",
        "largest_set",
        "rank_by",
        "tolerances",
    )
)
FIRST_LIST: Final = "amateur-region-1"
_RANGE: Final = re.compile(r"(\S+)\s*(?:\bto\b|–)\s*(\S+)")


@dataclass(slots=True)
class FormRequest:
    """The request as JSON fields, and the form's field behind each path in it."""

    fields: dict[str, Any] = field(default_factory=dict)
    behind: dict[str, str] = field(default_factory=dict)

    def json(self) -> str:
        """The request as the contract reads it."""
        return json.dumps(self.fields)

    def field_of(self, fault: Fault) -> str | None:
        """The form's field that a fault is about: that of the nearest path above the fault's."""
        path = fault.field
        while path:
            if path in self.behind:
                return self.behind[path]
            path = path[: max(path.rfind("."), path.rfind("["), 0)]
        return None


def read_form(entries: Entries) -> FormRequest:
    """The request that the entries spell."""
    read = FormRequest(kept_parts(entries))
    _put(read.fields, "name", written(entries, "name"))
    read.behind["name"] = "name"
    _read_bands(read, entries)
    _read_site(read, entries)
    _read_stock(read, entries)
    _read_feed(read, entries)
    _read_ranking(read, entries)
    return read


def kept_parts(entries: Entries) -> dict[str, Any]:
    """Parts of the request the form was started from that have no field on it.

    What is no such part is handed on under its own name, for the contract to refuse.
    """
    text = written(entries, "kept")
    if not text:
        return {}
    try:
        kept = json.loads(text)
    except (ValueError, RecursionError):
        return {"kept": text}
    if not isinstance(kept, dict) or ON_FORM & kept.keys():
        return {"kept": text}
    return kept


def band_list_of(entries: Entries) -> BandList:
    """The ready-made list that the form shows."""
    return BAND_LISTS.get(written(entries, "list"), BAND_LISTS[FIRST_LIST])


def unit_of(entries: Entries) -> LengthUnit:
    """The unit of every length on the form."""
    return "ft" if written(entries, "unit") == "ft" else "m"


def length(text: str, unit: LengthUnit) -> object:
    """A length in m, or the text itself where it is no number."""
    number = number_of(text)
    return text if number is None else metres_of(number, unit)


def _number(text: str) -> object:
    number = number_of(text)
    return text if number is None else float(number)


def _whole(text: str) -> object:
    number = number_of(text)
    return text if number is None or number.denominator != 1 else int(number)


def _put(fields: dict[str, Any], name: str, value: object) -> None:
    """Leave out what was left empty, so that the contract takes its default or misses it."""
    if value != "":
        fields[name] = value


def _read_bands(read: FormRequest, entries: Entries) -> None:
    bands: list[dict[str, Any]] = []
    for edges in band_list_of(entries).bands:
        prefix = f"band-{edges.name}"
        if written(entries, f"{prefix}-take"):
            plain = {"name": edges.name, "low_mhz": edges.low_mhz, "high_mhz": edges.high_mhz}
            bands.append(plain | _wishes(read, entries, f"bands[{len(bands)}]", prefix))
            read.behind[f"bands[{len(bands) - 1}]"] = f"{prefix}-take"
    for row in written_rows(entries, "own"):
        prefix, path = f"own-{row}", f"bands[{len(bands)}]"
        own: dict[str, Any] = {}
        _put(own, "name", written(entries, f"{prefix}-name"))
        for edge in ("low", "high"):
            _put(own, f"{edge}_mhz", _number(written(entries, f"{prefix}-{edge}")))
            read.behind[f"{path}.{edge}_mhz"] = f"{prefix}-{edge}"
        read.behind |= {path: f"{prefix}-name"}
        bands.append(own | _wishes(read, entries, path, prefix))
    read.fields["bands"] = bands
    read.behind["bands"] = "list"


def _wishes(read: FormRequest, entries: Entries, path: str, prefix: str) -> dict[str, Any]:
    wishes: dict[str, Any] = {}
    if written(entries, f"{prefix}-wanted") == "wished":
        wishes["required"] = False
    for name, entry in (("weight", "weight"), ("swr_limit", "limit")):
        _put(wishes, name, _number(written(entries, f"{prefix}-{entry}")))
        read.behind[f"{path}.{name}"] = f"{prefix}-{entry}"
    return wishes


def _read_site(read: FormRequest, entries: Entries) -> None:
    unit = unit_of(entries)
    site: dict[str, Any] = {}
    _put(site, "span_m", length(written(entries, "span"), unit))
    _put(site, "end_allowance_m", length(written(entries, "allowance"), unit))
    _put(site, "height_m", heights(written(entries, "height"), unit))
    ground = written(entries, "ground")
    if ground == "constants":
        constants: dict[str, Any] = {}
        _put(constants, "relative_permittivity", _number(written(entries, "ground-er")))
        _put(constants, "conductivity_s_per_m", _number(written(entries, "ground-sigma")))
        site["ground"] = constants
    else:
        _put(site, "ground", ground)
    read.fields["site"] = site
    read.behind |= {
        "site": "span",
        "site.span_m": "span",
        "site.end_allowance_m": "allowance",
        "site.height_m": "height",
        "site.ground": "ground",
        "site.ground.relative_permittivity": "ground-er",
        "site.ground.conductivity_s_per_m": "ground-sigma",
    }
    low, high = written(entries, "length-low"), written(entries, "length-high")
    if low or high:
        lengths: dict[str, Any] = {}
        _put(lengths, "low_m", length(low, unit))
        _put(lengths, "high_m", length(high, unit))
        read.fields["lengths"] = lengths
        read.behind |= {"lengths": "length-low", "lengths.high_m": "length-high"}


def heights(text: str, unit: LengthUnit) -> object:
    """One height, several after commas, or two with ``to`` between them as a range."""
    limits = _RANGE.fullmatch(text)
    if limits is not None:
        return {"low_m": length(limits[1], unit), "high_m": length(limits[2], unit)}
    each = [length(part.strip(), unit) for part in text.split(",")]
    return each if len(each) > 1 else each[0]


def _read_stock(read: FormRequest, entries: Entries) -> None:
    stock: dict[str, Any] = {}
    conductors = []
    for index, row in enumerate(written_rows(entries, "wire")):
        conductors.append(_conductor(read, entries, f"stock.conductors[{index}]", f"wire-{row}"))
    if conductors:
        stock["conductors"] = conductors
    low, high = written(entries, "range-low"), written(entries, "range-high")
    if low or high:
        limits: dict[str, Any] = {}
        _put(limits, "low_mm", _number(low))
        _put(limits, "high_mm", _number(high))
        _put(limits, "material", written(entries, "range-material"))
        path = "stock.diameter_range"
        _read_insulation(read, entries, limits, path, "range")
        stock["diameter_range"] = limits
        read.behind |= {path: "range-low", f"{path}.high_mm": "range-high"}
        read.behind[f"{path}.material"] = "range-material"
    read.fields["stock"] = stock
    first = min(written_rows(entries, "wire"), default=0)
    read.behind["stock"] = f"wire-{first}-size"


def _conductor(read: FormRequest, entries: Entries, path: str, prefix: str) -> dict[str, Any]:
    conductor: dict[str, Any] = {}
    size = written(entries, f"{prefix}-size")
    if written(entries, f"{prefix}-unit") == "mm":
        _put(conductor, "diameter_mm", _number(size))
    else:
        _put(conductor, "awg", _whole(size))
    _put(conductor, "material", written(entries, f"{prefix}-material"))
    _put(conductor, "item_code", written(entries, f"{prefix}-code"))
    price = written(entries, f"{prefix}-price")
    amount = number_of(price)
    _put(
        conductor,
        "price_per_m",
        price if amount is None else per_metre_of(amount, unit_of(entries)),
    )
    _read_insulation(read, entries, conductor, path, prefix)
    read.behind |= {
        path: f"{prefix}-size",
        f"{path}.material": f"{prefix}-material",
        f"{path}.item_code": f"{prefix}-code",
        f"{path}.price_per_m": f"{prefix}-price",
    }
    return conductor


def _read_insulation(
    read: FormRequest, entries: Entries, around: dict[str, Any], path: str, prefix: str
) -> None:
    """Insulation, where its thickness is given; its other constants alone mean nothing."""
    thickness = written(entries, f"{prefix}-thick")
    if not thickness:
        return
    insulation: dict[str, Any] = {"thickness_mm": _number(thickness)}
    _put(insulation, "relative_permittivity", _number(written(entries, f"{prefix}-er")))
    _put(insulation, "loss_tangent", _number(written(entries, f"{prefix}-tan")))
    around["insulation"] = insulation
    path = f"{path}.insulation"
    read.behind |= {
        path: f"{prefix}-thick",
        f"{path}.relative_permittivity": f"{prefix}-er",
        f"{path}.loss_tangent": f"{prefix}-tan",
    }


def _listed(text: str) -> object:
    return [_number(part.strip()) for part in text.split(",")] if text else ""


def _read_feed(read: FormRequest, entries: Entries) -> None:
    feed: dict[str, Any] = {}
    _put(feed, "reference_ohm", _number(written(entries, "reference")))
    _put(feed, "transformer_ratios", _listed(written(entries, "ratios")))
    anywhere = written(entries, "anywhere")
    _put(feed, "positions", "anywhere" if anywhere else _listed(written(entries, "positions")))
    _put(feed, "matching", written(entries, "matching"))
    _put(feed, "reference_point", written(entries, "point"))
    line, line_length = written(entries, "line"), written(entries, "line-length")
    if line or line_length:
        feed_line: dict[str, Any] = {}
        _put(feed_line, "line", line)
        _put(feed_line, "length_m", length(line_length, unit_of(entries)))
        feed["feed_line"] = feed_line
    read.fields["feed"] = feed
    _put(read.fields, "power_w", _number(written(entries, "power")))
    read.behind |= {
        "feed": "reference",
        "feed.reference_ohm": "reference",
        "feed.transformer_ratios": "ratios",
        "feed.positions": "anywhere" if anywhere else "positions",
        "feed.matching": "matching",
        "feed.reference_point": "point",
        "feed.feed_line": "line",
        "feed.feed_line.length_m": "line-length",
        "power_w": "power",
    }


_TOLERANCES: Final = (
    ("cutting_percent", "tol-cutting"),
    ("ground_factor", "tol-ground"),
    ("insulation_percent", "tol-insulation"),
)


def _read_ranking(read: FormRequest, entries: Entries) -> None:
    fields = read.fields
    _put(fields, "candidates", _whole(written(entries, "candidates")))
    _put(fields, "largest_set", _whole(written(entries, "largest-set")))
    _put(fields, "rank_by", written(entries, "rank-by"))
    read.behind |= {
        "candidates": "candidates",
        "largest_set": "largest-set",
        "rank_by": "rank-by",
        "tolerances": "steady",
        "tolerances.height_m": "tol-height",
    }
    if not written(entries, "steady"):
        fields["tolerances"] = None
        return
    tolerances: dict[str, Any] = {}
    for name, entry in _TOLERANCES:
        _put(tolerances, name, _number(written(entries, entry)))
        read.behind[f"tolerances.{name}"] = entry
    _put(tolerances, "height_m", length(written(entries, "tol-height"), unit_of(entries)))
    fields["tolerances"] = tolerances
