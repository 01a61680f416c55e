"""What a planner reads off a far field: gain, cuts, lobes, take-off angle, where the power goes."""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, pi
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from worker.engine.field.current import RadiatingWire, RadiationVector, Real
from worker.engine.field.intensity import (
    intensity_of,
    radiated_power,
    radiation_intensity,
    towards,
)
from worker.engine.limits import require_within

FLOOR_DBI: Final[float] = -100.0
"""Gain reported for a null, so that no infinity leaves the engine."""

WEAKEST_LOBE_DB: Final[float] = 30.0
"""Lobes further below the strongest than this are not listed."""

_LARGEST_POWER_W: Final[float] = 1e12
_LARGEST_RESISTANCE_OHM_PER_M: Final[float] = 1e9


@dataclass(frozen=True, slots=True, eq=False)
class Cut:
    """Gain along a circle of directions.

    Attributes
    ----------
    elevation_rad, azimuth_rad
        Directions in rad, shape (n,); azimuth from the wire's own direction.
    gain_dbi
        Gain over an isotropic radiator in dB, shape (n,), not below `FLOOR_DBI`.
    """

    elevation_rad: Real
    azimuth_rad: Real
    gain_dbi: Real


@dataclass(frozen=True, slots=True)
class Lobe:
    """A direction of locally largest gain.

    Attributes
    ----------
    elevation_rad, azimuth_rad
        Direction in rad; azimuth from the wire's own direction, 0 to pi (pi/2 at the zenith).
        Every lobe has a mirror image at minus its azimuth.
    gain_dbi
        Gain there in dBi.
    """

    elevation_rad: float
    azimuth_rad: float
    gain_dbi: float


@dataclass(frozen=True, slots=True)
class PowerBudget:
    """Where the power accepted at the feed goes.

    Attributes
    ----------
    input_w, radiated_w, wire_loss_w
        Power accepted, radiated to the far sphere or the sky, and turned into heat in the wire, W.
    ground_loss_w
        What is left in W: taken up by the ground. In free space and over a perfect ground it is
        the error of the balance, and may be negative.
    radiated_fraction, wire_loss_fraction, ground_loss_fraction
        The same over the input power.
    estimated_error_w
        Error estimate of the radiated power in W.
    """

    input_w: float
    radiated_w: float
    wire_loss_w: float
    ground_loss_w: float
    estimated_error_w: float

    @property
    def radiated_fraction(self) -> float:
        """Radiation efficiency, wire and ground loss counted."""
        return self.radiated_w / self.input_w

    @property
    def wire_loss_fraction(self) -> float:
        """Part of the input turned into heat in the wire."""
        return self.wire_loss_w / self.input_w

    @property
    def ground_loss_fraction(self) -> float:
        """Part of the input taken up by the ground."""
        return self.ground_loss_w / self.input_w


@dataclass(frozen=True, slots=True)
class Pattern:
    """Summary of a wire's radiation.

    Attributes
    ----------
    gain_dbi
        Largest gain in dBi, referred to the power accepted at the feed.
    directivity_dbi
        Largest directivity in dBi, referred to the power radiated.
    take_off_rad, take_off_azimuth_rad
        Elevation and azimuth of the strongest lobe in rad.
    lobes
        All lobes down to `WEAKEST_LOBE_DB` below the strongest, strongest first.
    power
        The power budget.
    """

    gain_dbi: float
    directivity_dbi: float
    take_off_rad: float
    take_off_azimuth_rad: float
    lobes: tuple[Lobe, ...]
    power: PowerBudget


def gain_dbi(
    wire: RadiatingWire, input_power_w: float, elevation_rad: ArrayLike, azimuth_rad: ArrayLike
) -> Real:
    """Gain in given directions.

    Parameters
    ----------
    wire
        The wire and its current.
    input_power_w
        Power in W accepted at the feed for that current, ``Re(V I*) / 2``.
    elevation_rad, azimuth_rad
        Directions as for :func:`worker.engine.field.intensity.far_field`.

    Returns
    -------
    numpy.ndarray
        ``10 log10(4 pi U / P)`` in dBi, of the broadcast shape, not below `FLOOR_DBI`.

    Raises
    ------
    OutOfRange
        An input lies outside its range.

    References
    ----------
    IEEE Std 145-2013, "Definitions of terms for antennas" (gain excludes mismatch).
    """
    power = _checked_power(input_power_w)
    return _dbi(radiation_intensity(wire, elevation_rad, azimuth_rad), power)


def elevation_cut(
    wire: RadiatingWire, input_power_w: float, azimuth_rad: float, points: int = 181
) -> Cut:
    """Gain in the vertical plane through an azimuth, over the zenith and down the other side.

    Parameters
    ----------
    wire, input_power_w
        As for :func:`gain_dbi`.
    azimuth_rad
        Azimuth of the near side in rad, from the wire's own direction.
    points
        Number of directions, 3 to 100 001. Over ground they run from horizon to horizon; in free
        space once around.

    Returns
    -------
    Cut
        Directions in order; past the zenith the azimuth is the opposite one.

    Raises
    ------
    OutOfRange
        An input lies outside its range.
    """
    require_within("points", points, 3, 100_001)
    end = pi if wire.ground is not None else 2.0 * pi
    turned = np.linspace(0.0, end, points)
    elevation = np.arcsin(np.clip(np.sin(turned), -1.0, 1.0))
    azimuth = np.where(np.cos(turned) >= 0.0, azimuth_rad, azimuth_rad + pi)
    return Cut(elevation, azimuth, gain_dbi(wire, input_power_w, elevation, azimuth))


def azimuth_cut(
    wire: RadiatingWire, input_power_w: float, elevation_rad: float, points: int = 361
) -> Cut:
    """Gain once around at a constant elevation.

    Parameters
    ----------
    wire, input_power_w
        As for :func:`gain_dbi`.
    elevation_rad
        Elevation in rad.
    points
        Number of directions, 3 to 100 001, the first and the last both off the wire's end.

    Returns
    -------
    Cut
        Directions in order of azimuth, 0 to 2 pi.

    Raises
    ------
    OutOfRange
        An input lies outside its range.
    """
    require_within("points", points, 3, 100_001)
    azimuth = np.linspace(0.0, 2.0 * pi, points)
    elevation = np.full(points, float(elevation_rad))
    return Cut(elevation, azimuth, gain_dbi(wire, input_power_w, elevation, azimuth))


def power_budget(
    wire: RadiatingWire, input_power_w: float, wire_resistance_ohm_per_m: float = 0.0
) -> PowerBudget:
    """Split the input power into sky, wire and ground.

    Parameters
    ----------
    wire, input_power_w
        As for :func:`gain_dbi`.
    wire_resistance_ohm_per_m
        Resistance of the wire at the frequency in ohm/m, zero or more.

    Returns
    -------
    PowerBudget
        Powers in W and their fractions.

    Raises
    ------
    OutOfRange
        An input lies outside its range.

    Notes
    -----
    Wire loss is ``R / 2`` times the integral of the squared current; the ground takes the rest.
    Loss in loads, balun and line is not in it: pass the power behind them.
    """
    power = _checked_power(input_power_w)
    resistance = require_within(
        "wire_resistance_ohm_per_m",
        wire_resistance_ohm_per_m,
        0.0,
        _LARGEST_RESISTANCE_OHM_PER_M,
        "ohm/m",
    )
    heat = 0.5 * float(resistance) * wire.mean_square_current_a2_m()
    sky = radiated_power(wire)
    return PowerBudget(power, sky.power_w, heat, power - sky.power_w - heat, sky.estimated_error_w)


def lobes(wire: RadiatingWire, input_power_w: float) -> tuple[Lobe, ...]:
    """All lobes of the pattern, strongest first.

    Parameters
    ----------
    wire, input_power_w
        As for :func:`gain_dbi`.

    Returns
    -------
    tuple of Lobe
        Local maxima of the gain over the half of the sky at azimuths 0 to pi; in free space,
        where the pattern turns about the wire, over azimuths 0 to pi at zero elevation.

    Raises
    ------
    OutOfRange
        The power lies outside its range.

    Notes
    -----
    Maxima of a grid fine enough for the phase lengths of wire and height, each then narrowed
    down by grids of 5 by 5 directions that halve in size.
    """
    power = _checked_power(input_power_w)
    moment = wire.moment()
    phase = 1.0 + wire.half_length_rad + 2.0 * wire.height_rad
    elevation = (
        np.zeros(1)
        if wire.ground is None
        else np.linspace(0.0, 0.5 * pi, max(91, ceil(8.0 * phase)))
    )
    azimuth = np.linspace(0.0, pi, max(181, ceil(12.0 * phase)))
    grid = _intensity(wire, moment, elevation[:, None], azimuth)
    found: list[tuple[float, float, float]] = []
    for row, column in _grid_maxima(grid, wire.ground is not None):
        centre = (float(elevation[row]), float(azimuth[column]))
        lobe = _narrowed(wire, moment, centre, float(azimuth[1]), elevation.size > 1)
        # Two neighbours of equal gain are one lobe.
        if all(abs(lobe[0] - e) + abs(lobe[1] - a) > 2.0 * azimuth[1] for e, a, _ in found):
            found.append(lobe)
    strongest = max(value for _, _, value in found)
    listed = [
        Lobe(at_elevation, at_azimuth, float(_dbi(np.float64(value), power)))
        for at_elevation, at_azimuth, value in found
        if value > strongest * 10.0 ** (-0.1 * WEAKEST_LOBE_DB)
    ]
    # Rounded, so that lobes equal by symmetry come in order of azimuth.
    return tuple(sorted(listed, key=lambda lobe: (-round(lobe.gain_dbi, 6), lobe.azimuth_rad)))


def pattern(
    wire: RadiatingWire, input_power_w: float, wire_resistance_ohm_per_m: float = 0.0
) -> Pattern:
    """Summary of the radiation of a wire.

    Parameters
    ----------
    wire, input_power_w, wire_resistance_ohm_per_m
        As for :func:`power_budget`.

    Returns
    -------
    Pattern
        Largest gain and directivity, take-off angle, lobes and power budget.

    Raises
    ------
    OutOfRange
        An input lies outside its range.
    """
    budget = power_budget(wire, input_power_w, wire_resistance_ohm_per_m)
    found = lobes(wire, input_power_w)
    strongest = found[0]
    return Pattern(
        gain_dbi=strongest.gain_dbi,
        directivity_dbi=strongest.gain_dbi - 10.0 * float(np.log10(budget.radiated_fraction)),
        take_off_rad=strongest.elevation_rad,
        take_off_azimuth_rad=strongest.azimuth_rad,
        lobes=found,
        power=budget,
    )


def _checked_power(input_power_w: float) -> float:
    return float(require_within("input_power_w", input_power_w, 1e-30, _LARGEST_POWER_W, "W"))


def _dbi(intensity: Real | np.float64, power: float) -> Real:
    smallest = 10.0 ** (0.1 * FLOOR_DBI)
    return np.asarray(10.0 * np.log10(np.maximum(4.0 * pi * intensity / power, smallest)))


def _intensity(
    wire: RadiatingWire, moment: RadiationVector, elevation: Real, azimuth: Real
) -> Real:
    return intensity_of(*towards(wire, moment, elevation, azimuth))


def _grid_maxima(grid: Real, over_ground: bool) -> list[tuple[int, int]]:
    """Indices no lower than their eight neighbours; mirrored in azimuth, one zenith."""
    padded = np.pad(grid, ((1, 1), (0, 0)), constant_values=-1.0)
    padded = np.pad(padded, ((0, 0), (1, 1)), mode="reflect")
    rows, columns = grid.shape
    around = [
        padded[1 + down : 1 + down + rows, 1 + right : 1 + right + columns]
        for down in (-1, 0, 1)
        for right in (-1, 0, 1)
        if (down, right) != (0, 0)
    ]
    highest = (grid >= np.maximum.reduce(around)) & (grid > 0.0)
    if over_ground:
        highest[-1] = False
        if grid[-1].max() >= grid[-2].max():
            highest[-1, columns // 2] = True
    return [(int(row), int(column)) for row, column in np.argwhere(highest)]


def _narrowed(
    wire: RadiatingWire,
    moment: RadiationVector,
    centre: tuple[float, float],
    size: float,
    in_elevation: bool,
) -> tuple[float, float, float]:
    """Move to the maximum near a grid point; return elevation, azimuth and intensity."""
    elevation, azimuth = centre
    offsets = np.linspace(-1.0, 1.0, 5)
    value = 0.0
    while size > 1e-7:
        rows = np.clip(elevation + size * offsets, 0.0, 0.5 * pi) if in_elevation else np.zeros(1)
        columns = np.clip(azimuth + size * offsets, 0.0, pi)
        grid = _intensity(wire, moment, rows[:, None], columns)
        row, column = np.unravel_index(np.argmax(grid), grid.shape)
        elevation, azimuth, value = (
            float(rows[row]),
            float(columns[column]),
            float(grid[row, column]),
        )
        size *= 0.5
    if 0.5 * pi - elevation < 1e-6:
        azimuth = 0.5 * pi
    return elevation, azimuth, value
