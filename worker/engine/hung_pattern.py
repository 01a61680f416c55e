"""What wires as hung carry and radiate: standing wave and pattern, several wires together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.end_voltage import end_voltages
from worker.engine.field import PrincipalPattern, RadiatingWire, principal_pattern
from worker.engine.hung_wire import HungWire
from worker.engine.thin_wire.standing_wave import StandingWave, standing_waves

#: Higher up, the lobes are finer than a drawing shows and take long to add up.
HIGHEST_DRAWN_WAVELENGTHS: Final = 10.0


@dataclass(frozen=True, slots=True)
class HungPattern:
    """The standing wave on one wire and what it radiates; None above `HIGHEST_DRAWN_WAVELENGTHS`.

    For one volt at the feed, though the pattern's gains and fractions do not depend on it.
    `end_volts` are the voltages at its ends, as `end_voltage.end_voltages` gives them.
    """

    wave: StandingWave
    pattern: PrincipalPattern | None
    end_volts: tuple[complex, complex]


def hung_patterns(
    wires: Sequence[HungWire], length_m: ArrayLike, frequency_hz: ArrayLike, places: int = 41
) -> tuple[HungPattern, ...]:
    """Standing waves and patterns of several wires, each of its own length and at its frequency.

    Parameters
    ----------
    wires : sequence of HungWire
        k wires, which may be the same; those that share their ground tables and the place of the
        feed are one batch.
    length_m, frequency_hz : array_like, shape (k,)
    places : int
        How many places along each wire the current is given at.

    Raises
    ------
    OutOfRange
        As for `HungWire.feed_impedance`.
    """
    lengths_m, frequencies_hz = np.asarray(length_m), np.asarray(frequency_hz)
    found: dict[int, HungPattern] = {}
    batches: dict[tuple[int, float], list[int]] = {}
    for index, wire in enumerate(wires):
        batches.setdefault((id(wire.grounds), wire.feed_fraction), []).append(index)
    for members in batches.values():
        first, at_hz = wires[members[0]], frequencies_hz[members]
        electrical = [wires[index].electrical(frequencies_hz[index]) for index in members]
        waves = standing_waves(
            lengths_m[members],
            np.array([radius_m for radius_m, _ in electrical]),
            at_hz,
            feed_fraction=first.feed_fraction,
            gap_m=np.array([wires[index].radius_m for index in members]),
            wire_impedance_ohm_per_m=np.array([series for _, series in electrical]),
            reflected=None if first.grounds is None else first.grounds.at_each(at_hz),
            places=places,
        )
        for index, wave, (radius_m, series) in zip(members, waves, electrical, strict=True):
            wire, length_m, hz = wires[index], float(lengths_m[index]), float(frequencies_hz[index])
            below = None if wire.grounds is None else wire.grounds.at(hz)
            ends = end_voltages(wave, length_m, float(radius_m), hz, below)
            found[index] = HungPattern(wave, _pattern(wire, wave, hz, float(series.real)), ends)
    return tuple(found[index] for index in range(len(wires)))


def _pattern(
    wire: HungWire, wave: StandingWave, frequency_hz: float, resistance_ohm_per_m: float
) -> PrincipalPattern | None:
    ground, height_m = None, 0.0
    if wire.grounds is not None:
        ground, height_m = wire.grounds.ground, wire.grounds.height_m
        if height_m * frequency_hz > HIGHEST_DRAWN_WAVELENGTHS * SPEED_OF_LIGHT_M_PER_S:
            return None
    source = RadiatingWire(
        wave.position_m, wave.current_a_per_v, frequency_hz, ground, height_m, wave.weight_m
    )
    accepted_w = 0.5 * (1.0 / wave.impedance_ohm).real
    return principal_pattern(source, accepted_w, resistance_ohm_per_m)
