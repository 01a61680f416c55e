"""Numbers and texts as a spreadsheet takes them: plain decimals, and no cell that runs."""

from __future__ import annotations

from decimal import Decimal
from typing import Final

#: A cell that opens with one of these may be taken for a formula (common practice).
_FORMULA_OPENERS: Final = ("=", "+", "-", "@", "\t", "\r", "\n", "＝", "＋", "－", "＠")


def resistance_ohm(value: float) -> str:
    """A resistance or reactance in Ω to two decimals; a zero carries no sign."""
    text = f"{value:.2f}"
    return "0.00" if text == "-0.00" else text


def reflection(value: float) -> str:
    """The magnitude of a reflection coefficient to four decimals."""
    return f"{value:.4f}"


def swr(value: float) -> str:
    """A standing wave ratio to three decimals, however high, so that a column can be sorted."""
    return f"{value:.3f}"


def exact(value: float) -> str:
    """A number as it was given, in plain decimals: ``0.425``, ``20``."""
    whole, point, decimals = format(Decimal(repr(value)), "f").partition(".")
    kept = decimals.rstrip("0")
    return whole + point + kept if kept else whole


def text_cell(text: str) -> str:
    """A text that a spreadsheet shows and never runs: an apostrophe goes before a formula."""
    return "'" + text if text.lstrip(" ").startswith(_FORMULA_OPENERS) else text
