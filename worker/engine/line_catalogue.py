"""Feed lines in common use, by standard designation or generic construction.

Attenuations are of clean, dry, new line. Ribbon and window line lose several times as much when
wet; coaxial cable ages. Parallel lines that are mostly air are computed from their wires, since
tables round them to one digit: ``alpha = 2 R / (2 Z0)`` nepers per metre with R the resistance of
one wire (R. A. Chipman, "Theory and Problems of Transmission Lines", 1968, ch. 5); wires twenty
diameters apart do not feel each other.
"""

from __future__ import annotations

from collections.abc import Mapping
from math import log
from types import MappingProxyType
from typing import Final

from worker.engine.attenuation import fit_attenuation
from worker.engine.conductor import MATERIALS, awg_diameter_m, internal_impedance_ohm_per_m
from worker.engine.feed_line import FeedLine

_M_PER_100_FT: Final[float] = 30.48
_DB_PER_NEPER: Final[float] = 20.0 / log(10.0)

_HANDBOOK_TABLE: Final[str] = (
    "attenuation at 30 and 150 MHz: amateur licence manual, cable table (read); "
    "velocity factor: from memory"
)
_FROM_MEMORY: Final[str] = "amateur handbook table of lines at 1, 10, 100 and 1000 MHz, from memory"


def _line(
    name: str,
    nominal_impedance_ohm: float,
    velocity_factor: float,
    db_per_100_ft: Mapping[float, float],
    source: str,
) -> FeedLine:
    attenuation = fit_attenuation(
        [1e6 * megahertz for megahertz in db_per_100_ft],
        [decibels / _M_PER_100_FT for decibels in db_per_100_ft.values()],
    )
    return FeedLine(name, nominal_impedance_ohm, velocity_factor, attenuation, source)


def _two_wires(
    name: str, nominal_impedance_ohm: float, velocity_factor: float, gauge: int, material: str
) -> FeedLine:
    frequencies_hz = [1.8e6, 3.5e6, 7e6, 14e6, 28e6, 54e6, 144e6]
    resistance_ohm_per_m = internal_impedance_ohm_per_m(
        awg_diameter_m(gauge) / 2.0, frequencies_hz, MATERIALS[material]
    ).real
    db_per_m = _DB_PER_NEPER * resistance_ohm_per_m / nominal_impedance_ohm
    return FeedLine(
        name,
        nominal_impedance_ohm,
        velocity_factor,
        fit_attenuation(frequencies_hz, db_per_m.tolist()),
        f"computed from two wires of {material}, AWG {gauge}; velocity factor: common practice",
    )


_LINES: Final[tuple[FeedLine, ...]] = (
    _line("rg-58", 50.0, 0.66, {30: 2.47, 150: 5.63}, _HANDBOOK_TABLE),
    _line("rg-213", 50.0, 0.66, {30: 1.08, 150: 2.53}, _HANDBOOK_TABLE),
    _line("rg-8x", 50.0, 0.80, {30: 1.96, 150: 4.53}, _HANDBOOK_TABLE),
    _line("rg-174", 50.0, 0.66, {30: 4.56, 150: 10.30}, _HANDBOOK_TABLE),
    _line("rg-59", 75.0, 0.66, {30: 1.79, 150: 4.11}, _HANDBOOK_TABLE),
    _line("rg-11", 75.0, 0.66, {1: 0.2, 10: 0.7, 100: 2.3, 1000: 7.8}, _FROM_MEMORY),
    _line("twin-lead-300", 300.0, 0.82, {1: 0.09, 10: 0.3, 100: 1.1, 1000: 3.9}, _FROM_MEMORY),
    _two_wires("window-line-450", 450.0, 0.91, 18, "copper-clad-steel-30"),
    _two_wires("open-wire-600", 600.0, 0.97, 12, "annealed-copper"),
)

FEED_LINES: Final[Mapping[str, FeedLine]] = MappingProxyType({line.name: line for line in _LINES})
"""Lines by plain name; read-only."""
