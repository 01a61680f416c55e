"""Lengths in feet and prices by the foot, turned into metres exactly.

A foot is 0.3048 m by definition (International Yard and Pound Agreement, 1959), so the
conversion is done in fractions and rounded once, to the nearest number the machine holds.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Final, Literal

LengthUnit = Literal["m", "ft"]

METRES_PER_FOOT: Final = Fraction(3048, 10_000)
#: Longer texts are no lengths, and fractions of them would be slow.
_LONGEST_NUMBER: Final = 24


def number_of(text: str) -> Fraction | None:
    """The decimal number a text spells, exactly, or None where it spells none."""
    text = text.strip()
    plain = text.removeprefix("-").removeprefix("+").replace(".", "", 1)
    if len(text) > _LONGEST_NUMBER or not (plain.isascii() and plain.isdigit()):
        return None
    return Fraction(text)


def metres_of(length: Fraction, unit: LengthUnit) -> float:
    """A length in m, to the last digit."""
    return float(length * METRES_PER_FOOT if unit == "ft" else length)


def per_metre_of(price: Fraction, unit: LengthUnit) -> float:
    """A price per metre from one per metre or per foot."""
    return float(price / METRES_PER_FOOT if unit == "ft" else price)


def feet_of(length: Fraction, unit: LengthUnit) -> float:
    """A length in feet, to the last digit."""
    return float(length if unit == "ft" else length / METRES_PER_FOOT)
