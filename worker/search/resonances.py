"""Resonances of one wire, read from its map over frequency, and the length that moves one."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from scipy.optimize import brentq

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.resonance import reactance_zeros
from worker.search.impedance_map import ImpedanceMap
from worker.search.space import FloatArray, WireModel

#: The map is first looked at this many times per half wave of wire.
_SAMPLES_PER_HALF_WAVE: Final = 60

#: A wire is moved onto a frequency to this part of its length: 1 mm in 100 m.
_LENGTH_RELATIVE: Final = 1e-5


@dataclass(frozen=True, slots=True)
class Resonance:
    """A zero of the reactance: ``series`` where it rises through zero, ``parallel`` where it falls.

    ``order`` is the number of half waves it lies near: odd for series, even for parallel.
    """

    order: int
    kind: Literal["series", "parallel"]
    frequency_hz: float
    resistance_ohm: float


def resonances_of(over_frequency: ImpedanceMap, length_m: float) -> tuple[Resonance, ...]:
    """All resonances of a wire within its map, in rising frequency.

    Parameters
    ----------
    over_frequency : ImpedanceMap
        Map of the wire over frequency in Hz.
    length_m : float
        Its length in m.
    """
    half_waves = half_waves_in(length_m, over_frequency.high - over_frequency.low)
    zeros = reactance_zeros(
        over_frequency.impedance_ohm,
        over_frequency.low,
        over_frequency.high,
        max(16, int(np.ceil(half_waves * _SAMPLES_PER_HALF_WAVE))),
    )
    found: list[Resonance] = []
    for frequency_hz, rising, resistance_ohm in zip(
        zeros.position, zeros.rising, zeros.resistance_ohm, strict=True
    ):
        pair = int(half_waves_in(length_m, float(frequency_hz)) // 2)
        found.append(
            Resonance(
                order=2 * pair + 1 if rising else 2 * pair + 2,
                kind="series" if rising else "parallel",
                frequency_hz=float(frequency_hz),
                resistance_ohm=float(resistance_ohm),
            )
        )
    return tuple(found)


def nearest_series(resonances: tuple[Resonance, ...], frequency_hz: float) -> Resonance | None:
    """The series resonance nearest to a frequency in Hz, or None where there is none."""
    series = [each for each in resonances if each.kind == "series"]
    return min(series, key=lambda each: abs(each.frequency_hz - frequency_hz), default=None)


def length_in_resonance_m(wire: WireModel, near_m: float, frequency_hz: float) -> float | None:
    """The length at which a wire's series resonance falls on a frequency.

    Parameters
    ----------
    wire : WireModel
    near_m : float
        A length within a few per cent of the answer, in m.
    frequency_hz : float

    Returns
    -------
    float or None
        Length in m; None if the reactance has no rising zero near the given length.
    """

    def reactance(length_m: float) -> float:
        at: FloatArray = np.array([length_m])
        return float(wire.solve(at, np.array([frequency_hz])).impedance_ohm[0].imag)

    for margin in (0.01, 0.03, 0.08):
        low_m, high_m = near_m * (1.0 - margin), near_m * (1.0 + margin)
        if reactance(low_m) < 0.0 < reactance(high_m):
            found = brentq(reactance, low_m, high_m, xtol=_LENGTH_RELATIVE * near_m)
            return float(found)
    return None


def half_waves_in(length_m: float, frequency_hz: float) -> float:
    """How many half waves of free space a length holds at a frequency."""
    return 2.0 * length_m * frequency_hz / SPEED_OF_LIGHT_M_PER_S
