"""Resonances of one wire, read from its map over frequency, and the length that moves one."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from scipy.optimize import brentq

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.resonance import reactance_zeros
from worker.search.impedance_map import BandMap, ImpedanceMap
from worker.search.space import BandGoal, FloatArray, WireModel

#: The map is first looked at this many times per half wave of wire.
_SAMPLES_PER_HALF_WAVE: Final = 60

#: A length in resonance is looked for within this part of the given one.
_REACH: Final = 0.08
_LOOKS: Final = 65

#: Length and frequency are moved by this part to see how a resonance follows.
_NUDGE: Final = 1e-3

#: A wire is moved onto a frequency to this part of its length: 1 mm in 100 m.
_LENGTH_RELATIVE: Final = 1e-5


@dataclass(frozen=True, slots=True)
class Resonance:
    """A zero of the reactance: ``series`` where it rises through zero, ``parallel`` where it falls.

    ``order`` is the number of half waves it lies near. On a wire fed at its centre it is odd for
    series and even for parallel; fed elsewhere a series resonance may be of any order, and a
    parallel one takes the next above.
    """

    order: int
    kind: Literal["series", "parallel"]
    frequency_hz: float
    resistance_ohm: float


def resonances_of(
    over_frequency: ImpedanceMap, length_m: float, *, centred: bool = True
) -> tuple[Resonance, ...]:
    """All resonances of a wire within its map, in rising frequency.

    Parameters
    ----------
    over_frequency : ImpedanceMap
        Map of the wire over frequency in Hz.
    length_m : float
        Its length in m.
    centred : bool
        Whether it is fed at its centre.
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
        held = half_waves_in(length_m, float(frequency_hz))
        found.append(
            Resonance(
                order=_order(held, rising=bool(rising), centred=centred),
                kind="series" if rising else "parallel",
                frequency_hz=float(frequency_hz),
                resistance_ohm=float(resistance_ohm),
            )
        )
    return tuple(found)


def _order(half_waves: float, *, rising: bool, centred: bool) -> int:
    if centred:
        return 2 * int(half_waves // 2) + (1 if rising else 2)
    return max(1, round(half_waves)) if rising else int(half_waves) + 1


def nearest_series(resonances: tuple[Resonance, ...], frequency_hz: float) -> Resonance | None:
    """The series resonance nearest to a frequency in Hz, or None where there is none."""
    series = [each for each in resonances if each.kind == "series"]
    return min(series, key=lambda each: abs(each.frequency_hz - frequency_hz), default=None)


def lengths_in_resonance(
    band_map: BandMap, near_m: float, goal: BandGoal
) -> tuple[float | None, float | None]:
    """The length in series resonance at a band's centre, and how frequency goes with length.

    Parameters
    ----------
    band_map : BandMap
        Of the wire over length.
    near_m : float
        A length within a few per cent of the answer, in m.
    goal : BandGoal

    Returns
    -------
    length_m : float or None
        None if the reactance has no rising zero near the given length.
    exponent : float or None
        Of the power by which the resonance goes with length, near minus one.
    """
    edges_hz = np.array([goal.low_hz, goal.centre_hz, goal.high_hz])
    found = [_rising_zero(band_map, near_m * goal.centre_hz / at_hz, at_hz) for at_hz in edges_hz]
    low_m, centre_m, high_m = found
    if low_m is None or high_m is None:
        return centre_m, None
    return centre_m, float(np.log(goal.high_hz / goal.low_hz) / np.log(high_m / low_m))


def exponent_of(wire: WireModel, length_m: float, frequency_hz: float) -> float:
    """The power by which a wire's resonance goes with its length, by direct solves.

    For a wire whose neighbours lie beyond the map. Along X = 0, df/dL = -(dX/dL)/(dX/df).

    Parameters
    ----------
    wire : WireModel
    length_m, frequency_hz : float
        Where it is in resonance.
    """
    lengths_m = length_m * np.array([1.0 + _NUDGE, 1.0 - _NUDGE, 1.0, 1.0])
    at_hz = frequency_hz * np.array([1.0, 1.0, 1.0 + _NUDGE, 1.0 - _NUDGE])
    reactance = wire.solve(lengths_m, at_hz).impedance_ohm.imag
    return float(-(reactance[0] - reactance[1]) / (reactance[2] - reactance[3]))


def _rising_zero(band_map: BandMap, near_m: float, frequency_hz: float) -> float | None:
    """The length nearest to a given one at which the reactance rises through zero."""
    low_m, high_m = near_m * (1.0 - _REACH), near_m * (1.0 + _REACH)

    def reactance(length_m: FloatArray) -> FloatArray:
        return np.asarray(band_map.impedance_ohm(length_m, np.array([frequency_hz]))[0].imag)

    lengths_m = np.linspace(low_m, high_m, _LOOKS)
    looked = reactance(lengths_m)
    rising = np.flatnonzero((looked[:-1] < 0.0) & (looked[1:] >= 0.0))
    if not rising.size:
        return None
    left = rising[np.argmin(np.abs(lengths_m[rising] - near_m))]
    return float(
        brentq(
            lambda length_m: float(reactance(np.array([length_m]))[0]),
            lengths_m[left],
            lengths_m[left + 1],
            xtol=_LENGTH_RELATIVE * near_m,
        )
    )


def half_waves_in(length_m: float, frequency_hz: float) -> float:
    """How many half waves of free space a length holds at a frequency."""
    return 2.0 * length_m * frequency_hz / SPEED_OF_LIGHT_M_PER_S
