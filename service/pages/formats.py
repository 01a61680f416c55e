"""Numbers, times and signs on the page: those of the contracts, and a few only a page needs."""

from __future__ import annotations

from datetime import UTC, datetime

from service.contracts import formats
from service.contracts.formats import (
    amperes,
    celsius,
    component,
    decibels,
    degrees,
    departed,
    edge_mhz,
    ice_mm,
    khz,
    khz_per_cm,
    listed,
    metres,
    mhz,
    millimetres,
    money,
    newtons,
    ohms,
    ordinal,
    part_of_one,
    pascals,
    percent,
    ratio,
    reflection,
    safety_factor,
    volts,
)

__all__ = [
    "amperes",
    "celsius",
    "component",
    "count",
    "decibels",
    "degrees",
    "departed",
    "edge_mhz",
    "feed_place",
    "fine_mhz",
    "ice_mm",
    "instant",
    "khz",
    "khz_per_cm",
    "listed",
    "metres",
    "mhz",
    "millimetres",
    "minus",
    "minutes",
    "money",
    "newtons",
    "ohms",
    "ordinal",
    "part",
    "part_of_one",
    "pascals",
    "percent",
    "ratio",
    "reflection",
    "safety_factor",
    "share",
    "swr",
    "volts",
    "watts",
]


def fine_mhz(value: float) -> str:
    """A frequency in MHz to a tenth of a kHz, for points that lie close together."""
    return f"{value:.4f}"


def minutes(value: float) -> str:
    """A time in minutes, on one line."""
    return _unbroken(formats.minutes(value))


def share(value: float) -> str:
    """A part of a whole as per cent, on one line."""
    return _unbroken(formats.share(value))


def part(fraction: float) -> str:
    """A place along the wire as per cent of its length, on one line."""
    return _unbroken(formats.part(fraction))


def feed_place(fraction: float, length_m: float) -> str:
    """Where a wire is fed, its figures each on one line."""
    return (
        formats.feed_place(fraction, length_m).replace(" m ", "\u00a0m ").replace(" %", "\u00a0%")
    )


def swr(value: float) -> str:
    """A standing wave ratio, on one line."""
    return _unbroken(formats.swr(value))


def _unbroken(text: str) -> str:
    return text.replace(" ", "\u00a0")


def minus(text: str) -> str:
    """A number's text with the true minus sign, as wide as the plus."""
    return text.replace("-", "−")


def count(number: int) -> str:
    """A whole number in groups of three, ``123 456``, with spaces that do not break."""
    return f"{number:,}".replace(",", "\u202f")


def watts(value: float) -> str:
    """A power in W, or in kW from ten thousand on."""
    return f"{value:g} W" if value < 1e4 else f"{value / 1e3:g} kW"


def instant(when: datetime) -> str:
    """A moment in UTC to the minute, ``2 Dec 2025, 14:03 UTC``."""
    utc = when.replace(tzinfo=UTC) if when.tzinfo is None else when.astimezone(UTC)
    return f"{utc.day} {utc:%b %Y, %H:%M} UTC"
