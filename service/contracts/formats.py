"""Numbers as a planner writes them: the same on the page, at the command line and in exports."""

from __future__ import annotations

import math


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


def decibels(value: float) -> str:
    """A loss in dB, ``0.84``."""
    return f"{value:.2f}"


def degrees(value: float) -> str:
    """An angle in degrees to a tenth, whole where it is so: ``39.8``, ``90``."""
    return f"{value:.1f}".removesuffix(".0")


def part_of_one(value: float) -> str:
    """A part of the largest, ``0.963``."""
    return f"{value:.3f}"


def volts(value: float) -> str:
    """A voltage in V to three figures, whole from a hundred on: ``59.3``, ``1999``."""
    return _three_figures(value)


def amperes(value: float) -> str:
    """A current in A to three figures, ``2.47``."""
    return _three_figures(value)


def newtons(value: float) -> str:
    """A tension or load in N to three figures, whole from a hundred on: ``85.2``, ``1503``."""
    return _three_figures(value)


def celsius(value: float) -> str:
    """A temperature in °C to a tenth, whole where it is so: ``-20``, ``12.5``."""
    return f"{value:.1f}".removesuffix(".0")


def pascals(value: float) -> str:
    """A pressure of wind in Pa, whole: ``430``."""
    return f"{value:.0f}"


def ice_mm(value: float) -> str:
    """A thickness of ice in mm to a tenth, whole where it is so: ``6``, ``12.5``."""
    return f"{value:.1f}".removesuffix(".0")


def safety_factor(value: float) -> str:
    """A breaking load over a tension, ``3.42``."""
    return f"{value:.2f}"


def minutes(value: float) -> str:
    """A time in minutes, ``30 min``."""
    return f"{value:g} min"


def component(value: float) -> str:
    """A coil in µH or a capacitor in pF to three figures, whole from a hundred on: ``5.43``."""
    return _three_figures(value)


def khz_per_cm(value: float) -> str:
    """How far a resonance moves in kHz for a centimetre, signed, to three figures: ``+3.53``."""
    return ("+" if value > 0.0 else "") + _three_figures(value)


def money(value: float) -> str:
    """A sum in the currency of the prices given, ``19.43``, finer only where it is: ``0.425``."""
    whole, point, decimals = f"{value:.4f}".partition(".")
    return whole + point + decimals.rstrip("0").ljust(2, "0")


def part(fraction: float) -> str:
    """A place along the wire as per cent of its length, ``36 %``, ``33.3 %``."""
    return f"{100.0 * fraction:.1f}".removesuffix(".0") + " %"


def feed_place(fraction: float, length_m: float) -> str:
    """Where a wire is fed, as one says it to who cuts it: ``7.36 m from one end (36 %)``."""
    if fraction == 0.5:
        return "at the centre"
    return f"{metres(fraction * length_m)} m from one end ({part(fraction)})"


def reflection(value: float) -> str:
    """A reflection coefficient's magnitude, ``0.294``."""
    return f"{value:.3f}"


def ratio(value: float) -> str:
    """A transformer's impedance ratio, ``4:1``; ``1:1`` where none is needed."""
    return f"{value:g}:1"


def _three_figures(value: float) -> str:
    """Three figures where that takes no more than three decimals; whole from a hundred on."""
    if abs(value) < 1.0:
        return f"{value:.3f}"
    return f"{value:.{max(0, 2 - math.floor(math.log10(abs(value))))}f}"


def ordinal(number: int) -> str:
    """A small ordinal, ``1st``, ``3rd``, ``11th``."""
    if number % 100 in (11, 12, 13):
        return f"{number}th"
    return f"{number}{ {1: 'st', 2: 'nd', 3: 'rd'}.get(number % 10, 'th') }"


def departed(what: str) -> str:
    """A departure as it is said of the wire: ``when 1 % longer``, ``over wetter ground``."""
    if what.endswith("ground"):
        return f"over {what}"
    if what.endswith("insulation"):
        return f"with {what}"
    return f"when {what}"


def listed(words: tuple[str, ...] | list[str], last: str = "and") -> str:
    """Words joined as in a sentence: ``a, b and c``, or with another ``last`` joint."""
    if len(words) <= 1:
        return "".join(words)
    return ", ".join(words[:-1]) + f" {last} " + words[-1]
