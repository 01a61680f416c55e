"""What the form's fields are called: beside each field, and where one is spoken of elsewhere."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

_FIELDS: Final[Mapping[str, str]] = {
    "name": "Name of the design",
    "list": "Ready-made list",
    "span": "Span between the supports",
    "allowance": "Kept free at each end",
    "height": "Height over ground",
    "length-low": "Shortest wire",
    "length-high": "Longest wire",
    "ground": "Ground",
    "ground-er": "Relative permittivity",
    "ground-sigma": "Conductivity, S/m",
    "ratios": "Transformer ratios allowed",
    "reference": "Reference impedance, Ω",
    "power": "Power, W",
    "positions": "Places of the feed",
    "anywhere": "Anywhere along the wire",
    "matching": "Matching at the feed point",
    "line": "Feed line",
    "line-length": "Its length",
    "point": "SWR limits apply",
    "candidates": "Candidates wanted",
    "rank-by": "Ranked by",
    "largest-set": "Sets of dipoles",
    "steady": "See how each wire holds up under these tolerances",
    "tol-cutting": "Length, ± %",
    "tol-height": "Height, ±",
    "tol-ground": "Ground wetter and drier, times",
    "tol-insulation": "Insulation's permittivity, ± %",
}

#: Fields of a row: of a band, of a conductor, of the range of diameters.
_IN_ROW: Final[Mapping[str, str]] = {
    "take": "Taken",
    "name": "Name",
    "low": "Low edge, MHz",
    "high": "High edge, MHz",
    "wanted": "Wanted",
    "limit": "SWR limit",
    "weight": "Weight",
    "size": "Size",
    "unit": "by",
    "material": "Material",
    "thick": "Insulation, mm",
    "er": "Its permittivity",
    "tan": "Its loss tangent",
    "code": "Item code",
    "price": "Price per m, ft",
}
_OF_RANGE: Final[Mapping[str, str]] = {"low": "Thinnest, mm", "high": "Thickest, mm"}
_RANGE: Final = "range"


def label(name: str) -> str:
    """What stands beside a field."""
    if name in _FIELDS:
        return _FIELDS[name]
    kind, _, last = name.partition("-")
    last = last.rpartition("-")[2]
    return (_OF_RANGE if kind == _RANGE else _IN_ROW).get(last) or _IN_ROW[last]


def row_label(kind: str, number: int) -> str:
    """What a row is called; people count from one."""
    return f"{'Own band' if kind == 'own' else 'Conductor'} {number + 1}"


def place(name: str) -> str:
    """A field where it is spoken of away from its row: ``Conductor 2, size``."""
    if name in _FIELDS:
        return _FIELDS[name]
    kind, _, rest = name.partition("-")
    if kind == _RANGE:
        return f"Range of diameters, {_lower(label(name))}"
    which = rest.rpartition("-")[0]
    if kind == "band":
        return which if name.endswith("-take") else f"{which}, {_lower(label(name))}"
    return f"{row_label(kind, int(which))}, {_lower(label(name))}"


def _lower(text: str) -> str:
    """A label within a sentence; abbreviations keep their capitals."""
    return text if text[:2].isupper() else text[:1].lower() + text[1:]
