"""Numbers as a planner writes them: the same on the page, at the command line and in exports."""

from __future__ import annotations


def mhz(value: float) -> str:
    """A frequency in MHz to the kHz, ``7.100``."""
    return f"{value:.3f}"


def edge_mhz(value: float) -> str:
    """A band edge in MHz to the kHz, with further digits only where it has them: ``5.3515``."""
    whole, point, decimals = f"{value:.6f}".partition(".")
    return whole + point + decimals.rstrip("0").ljust(3, "0")


def khz(value: float) -> str:
    """A signed offset in kHz, ``+47``."""
    return f"{value:+.0f}"


def percent(value: float) -> str:
    """A signed offset in per cent, ``+0.66``."""
    return f"{value:+.2f}"


def share(value: float) -> str:
    """A part of a whole as per cent, ``87 %``; never rounded up to the whole."""
    whole = 100.0 * value
    return f"{int(whole) if whole < 100.0 else 100} %"


def metres(value: float) -> str:
    """A length in m, to the centimetre, or to the millimetre below 5 m."""
    return f"{value:.2f}" if abs(value) >= 5.0 else f"{value:.3f}"


def millimetres(value: float) -> str:
    """A diameter in mm, ``1.63``."""
    return f"{value:.2f}"


def ohms(value: float) -> str:
    """A resistance or reactance in Ω: tenths, or whole ohms from a thousand on."""
    return f"{value:.1f}" if abs(value) < 1000.0 else f"{value:.0f}"


def swr(value: float) -> str:
    """A standing wave ratio, ``1.83``; whole numbers from 10 on, and a bound from 100 on."""
    if value >= 100.0:
        return "> 100"
    return f"{value:.2f}" if value < 10.0 else f"{value:.0f}"


def reflection(value: float) -> str:
    """A reflection coefficient's magnitude, ``0.294``."""
    return f"{value:.3f}"


def ratio(value: float) -> str:
    """A transformer's impedance ratio, ``4:1``; ``1:1`` where none is needed."""
    return f"{value:g}:1"


def ordinal(number: int) -> str:
    """A small ordinal, ``1st``, ``3rd``, ``11th``."""
    if number % 100 in (11, 12, 13):
        return f"{number}th"
    return f"{number}{ {1: 'st', 2: 'nd', 3: 'rd'}.get(number % 10, 'th') }"


def listed(words: tuple[str, ...] | list[str]) -> str:
    """Words joined as in a sentence: ``a, b and c``."""
    if len(words) <= 1:
        return "".join(words)
    return ", ".join(words[:-1]) + " and " + words[-1]
