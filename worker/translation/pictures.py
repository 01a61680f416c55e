"""From standing waves and patterns to what a report stores for its pictures."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.contracts.radiation import CurrentAlong, Radiation
from worker.engine.field import PrincipalPattern
from worker.engine.hung_pattern import HungPattern, hung_patterns
from worker.engine.hung_wire import HungWire
from worker.engine.thin_wire.standing_wave import StandingWave

#: Of equally strong places of the current the one nearest to the feed is the largest.
_SAME_SIZE: Final = 0.99
#: No null is stored deeper: it is off every scale.
_FLOOR_DBI: Final = -60.0


@dataclass(frozen=True, slots=True)
class BandPicture:
    """What is drawn of one wire on one band, and the solution it is drawn from."""

    current: CurrentAlong
    radiation: Radiation | None
    solved: HungPattern


def pictures_of(
    wires: Sequence[HungWire], lengths_m: Sequence[float], centres_hz: Sequence[float]
) -> list[list[BandPicture]]:
    """The pictures of several wires at the centres of their bands.

    Parameters
    ----------
    wires, lengths_m
        k wires and their lengths in m.
    centres_hz
        Frequencies in Hz.

    Returns
    -------
    list of list of BandPicture
        For each wire one a frequency.
    """
    bands = len(centres_hz)
    each = [wire for wire in wires for _ in centres_hz]
    found = hung_patterns(each, np.repeat(lengths_m, bands), np.tile(centres_hz, len(wires)))
    pictures = [_picture(wire, one) for wire, one in zip(each, found, strict=True)]
    return [pictures[start : start + bands] for start in range(0, len(pictures), bands)]


def _picture(wire: HungWire, found: HungPattern) -> BandPicture:
    takes_power = wire.grounds is not None and not wire.grounds.ground.is_perfect
    return BandPicture(
        current=_current(found.wave, wire.feed_fraction),
        radiation=None
        if found.pattern is None
        else _radiation(found.pattern, ground_takes_power=takes_power),
        solved=found,
    )


def _current(wave: StandingWave, feed_fraction: float) -> CurrentAlong:
    size = np.abs(wave.current_at_place_a_per_v)
    strong = np.flatnonzero(size >= _SAME_SIZE * size.max())
    nearest = strong[np.argmin(np.abs(wave.place_fraction[strong] - feed_fraction))]
    against = wave.current_at_place_a_per_v[nearest]
    turned = wave.current_at_place_a_per_v / (against / abs(against))
    # At an end there is no current, and so no phase of it.
    phase_deg = np.where(size > 0.0, np.degrees(np.angle(turned)), 0.0)
    return CurrentAlong(
        size=tuple(round(float(each), 3) for each in size / size.max()),
        phase_deg=tuple(round(float(each), 1) for each in phase_deg),
        at_feed=round(1.0 / abs(wave.impedance_ohm) / float(size.max()), 4),
    )


def _radiation(pattern: PrincipalPattern, *, ground_takes_power: bool) -> Radiation:
    def gains(cut: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> tuple[float, ...]:
        return tuple(round(max(float(each), _FLOOR_DBI), 2) for each in cut)

    left = 1.0 - pattern.radiated_fraction - pattern.wire_loss_fraction
    return Radiation(
        gain_dbi=round(pattern.gain_dbi, 2),
        take_off_deg=round(math.degrees(pattern.take_off_rad), 1),
        azimuth_deg=round(math.degrees(pattern.take_off_azimuth_rad), 1),
        radiated_fraction=round(pattern.radiated_fraction, 4),
        wire_loss_fraction=round(pattern.wire_loss_fraction, 4),
        ground_loss_fraction=round(left, 4) if ground_takes_power else None,
        step_deg=round(math.degrees(pattern.step_rad), 3),
        broadside_dbi=gains(pattern.broadside_dbi),
        end_on_dbi=gains(pattern.end_on_dbi),
        around_dbi=gains(pattern.azimuth_dbi),
    )
