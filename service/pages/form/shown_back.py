"""What a field's content comes to in the other unit, said beside it."""

from __future__ import annotations

import math
import re
from typing import Final

from service.contracts.stock import Conductor
from service.contracts.units import LengthUnit, feet_of, metres_of, number_of, per_metre_of
from service.pages import formats
from service.pages.form.entries import Entries, written, written_rows
from service.pages.form.reading import unit_of

LENGTHS: Final = (
    "span",
    "allowance",
    "height",
    "length-low",
    "length-high",
    "line-length",
    "tol-height",
)
_NUMBERS: Final = re.compile(r"[0-9.]+")
_THICKEST_AWG: Final = 0
_THINNEST_AWG: Final = 40


def shown_back(entries: Entries) -> dict[str, str]:
    """By the field's name: lengths in the other unit, sizes of wire in the other measure."""
    unit = unit_of(entries)
    told = {name: _length(written(entries, name), unit) for name in LENGTHS}
    for row in written_rows(entries, "wire"):
        size, measure = written(entries, f"wire-{row}-size"), written(entries, f"wire-{row}-unit")
        told[f"wire-{row}-size"] = _size(size, measure)
        told[f"wire-{row}-price"] = _price(written(entries, f"wire-{row}-price"), unit)
    return {name: text for name, text in told.items() if text}


def _length(text: str, unit: LengthUnit) -> str:
    """Every number of a text in the other unit; metres to the last digit, feet to two."""

    def other(found: re.Match[str]) -> str:
        number = number_of(found[0])
        if number is None:
            return found[0]
        return f"{metres_of(number, unit):.10g}" if unit == "ft" else f"{feet_of(number, unit):.2f}"

    if not _NUMBERS.search(text):
        return ""
    return f"= {_NUMBERS.sub(other, text)} {'m' if unit == 'ft' else 'ft'}"


def _size(text: str, measure: str) -> str:
    number = number_of(text)
    if number is None or number < 0:
        return ""
    if measure != "mm":
        if number.denominator != 1 or number > _THINNEST_AWG:
            return ""
        diameter_mm = Conductor(awg=int(number)).bare_diameter_mm
        return f"= {formats.millimetres(diameter_mm)} mm"
    if number == 0:
        return ""
    # ASTM B258 turned round: 39 steps of gauge for a ratio of 92.
    gauge = round(36.0 - 39.0 * math.log(float(number) / 0.127, 92.0))
    return f"nearest to AWG {gauge}" if _THICKEST_AWG <= gauge <= _THINNEST_AWG else ""


def _price(text: str, unit: LengthUnit) -> str:
    number = number_of(text)
    if number is None or unit == "m":
        return ""
    return f"= {formats.money(per_metre_of(number, unit))} a metre"
