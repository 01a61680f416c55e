"""The pattern as it is drawn: strongest direction, two elevation cuts and one in azimuth, quickly.

`lobe.pattern` finds every lobe to within rounding; this finds the strongest to some hundredths
of a degree and samples the cuts no closer than a drawing needs, for a small part of the time.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, pi
from typing import Final

import numpy as np

from worker.engine.field.current import RadiatingWire, RadiationVector, Real
from worker.engine.field.gain import checked_power, decibels
from worker.engine.field.intensity import intensity_of, power_of_moment, towards

#: Steps a cut may be sampled in, in degrees: each divides ten.
STEPS_DEG: Final = (2.5, 1.0, 0.5)
#: Points of a cut from one null to the next.
_POINTS_PER_LOBE: Final = 8
#: Steps of the coarse look from one null to the next, and least angle looked at between.
_LOOKS_PER_LOBE: Final = 3
_COARSEST_LOOK_RAD: Final = pi / 45.0
#: Looks closer at the strongest direction, each in steps a fourth of the last.
_ZOOMS: Final = 4
#: Gains that differ by less are equal.
_SAME_DB: Final = 1e-6


@dataclass(frozen=True, slots=True, eq=False)
class PrincipalPattern:
    """The strongest direction and the cuts through the pattern of one wire.

    Attributes
    ----------
    gain_dbi
        Largest gain in dBi, referred to the power accepted at the feed.
    take_off_rad, take_off_azimuth_rad
        Its elevation, and its azimuth from the wire's own direction, 0 to pi; every direction has
        an equal at minus its azimuth. In free space, where the pattern turns about the wire, the
        elevation is zero.
    step_rad
        Step of the cuts.
    broadside_dbi
        Gain across the wire, elevation 0 to pi/2: the other side is alike.
    end_on_dbi
        Gain along the wire, elevation 0 to pi over the zenith, from azimuth 0.
    azimuth_dbi
        Gain at the take-off angle, azimuth 0 to pi: the other half is alike.
    radiated_fraction, wire_loss_fraction
        Parts of the power accepted at the feed that are radiated and turned into heat in the
        wire; over lossy ground the ground takes up the rest.
    """

    gain_dbi: float
    take_off_rad: float
    take_off_azimuth_rad: float
    step_rad: float
    broadside_dbi: Real
    end_on_dbi: Real
    azimuth_dbi: Real
    radiated_fraction: float
    wire_loss_fraction: float


def principal_pattern(
    wire: RadiatingWire, input_power_w: float, wire_resistance_ohm_per_m: float = 0.0
) -> PrincipalPattern:
    """Strongest direction, cuts, and where the power of a wire goes.

    Parameters
    ----------
    wire, input_power_w, wire_resistance_ohm_per_m
        As for :func:`worker.engine.field.gain.power_budget`.

    Raises
    ------
    OutOfRange
        An input lies outside its range.

    Notes
    -----
    Nulls over height lie lambda / (2 h) apart in the sine of the elevation, those along the wire
    no closer than lambda / L in the cosine of the angle to it; steps follow from both.
    """
    power = checked_power(input_power_w)
    moment = wire.moment()
    heat_w = 0.5 * wire_resistance_ohm_per_m * wire.mean_square_current_a2_m()
    elevation, azimuth, strongest = _strongest(wire, moment)
    step = _step_rad(wire)
    quarter, half = (np.arange(round(reach / step) + 1) * step for reach in (0.5 * pi, pi))
    over = np.minimum(half, pi - half)  # past the zenith it comes down on the other side
    cuts = (
        (quarter, np.full(quarter.shape, 0.5 * pi)),
        (np.maximum(over, 0.0), np.where(half <= 0.5 * pi, 0.0, pi)),
        (np.full(half.shape, elevation), half),
    )
    gains = [decibels(_intensity(wire, moment, *cut), power) for cut in cuts]
    return PrincipalPattern(
        gain_dbi=float(decibels(np.float64(strongest), power)),
        take_off_rad=elevation,
        take_off_azimuth_rad=azimuth,
        step_rad=step,
        broadside_dbi=gains[0],
        end_on_dbi=gains[1],
        azimuth_dbi=gains[2],
        radiated_fraction=power_of_moment(wire, moment) / power,
        wire_loss_fraction=heat_w / power,
    )


def _step_rad(wire: RadiatingWire) -> float:
    lobe_rad = min(_lobe_over_height_rad(wire), _lobe_along_wire_rad(wire))
    wanted = float(np.degrees(lobe_rad / _POINTS_PER_LOBE))
    return float(np.radians(next((each for each in STEPS_DEG if each <= wanted), STEPS_DEG[-1])))


def _lobe_over_height_rad(wire: RadiatingWire) -> float:
    return pi / max(pi / 2.0, wire.height_rad)


def _lobe_along_wire_rad(wire: RadiatingWire) -> float:
    return pi / max(pi / 2.0, wire.half_length_rad)


def _strongest(wire: RadiatingWire, moment: RadiationVector) -> tuple[float, float, float]:
    """Elevation, azimuth and intensity of the strongest direction."""
    in_elevation = wire.ground is not None
    along = min(_COARSEST_LOOK_RAD, _lobe_along_wire_rad(wire) / _LOOKS_PER_LOBE)
    over = min(along, _lobe_over_height_rad(wire) / _LOOKS_PER_LOBE)
    rows = np.linspace(0.0, 0.5 * pi, ceil(0.5 * pi / over) + 1) if in_elevation else np.zeros(1)
    columns = np.linspace(0.0, pi, 2 * ceil(0.5 * pi / along) + 1)
    offsets = along * np.linspace(-1.0, 1.0, 9)
    for _ in range(_ZOOMS + 1):
        grid = _intensity(wire, moment, rows[:, None], columns)
        row, column = _first_of_the_strongest(grid, columns)
        elevation, azimuth, best = float(rows[row]), float(columns[column]), grid[row, column]
        if in_elevation:
            rows = np.clip(elevation + offsets, 0.0, 0.5 * pi)
        columns = np.clip(azimuth + offsets, 0.0, pi)
        offsets = offsets / 4.0
    if in_elevation:
        zenith = float(_intensity(wire, moment, np.array(0.5 * pi), np.array(0.5 * pi)))
        if zenith >= best * 10.0 ** (-0.1 * _SAME_DB):
            return 0.5 * pi, 0.5 * pi, zenith
    return elevation, azimuth, float(best)


def _first_of_the_strongest(grid: Real, columns: Real) -> tuple[int, int]:
    """Where the grid is largest; of equals the one nearest to broadside, then the lowest."""
    same = np.argwhere(grid >= grid.max() * 10.0 ** (-0.1 * _SAME_DB))
    nearest = int(np.argmin(np.abs(columns[same[:, 1]] - 0.5 * pi)))
    return int(same[nearest, 0]), int(same[nearest, 1])


def _intensity(
    wire: RadiatingWire, moment: RadiationVector, elevation: Real, azimuth: Real
) -> Real:
    return intensity_of(*towards(wire, moment, elevation, azimuth))
