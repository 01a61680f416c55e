"""Lobes of the pattern: found on a grid of directions, then narrowed down; the take-off angle."""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, pi
from typing import Final

import numpy as np

from worker.engine.field.current import RadiatingWire, RadiationVector, Real
from worker.engine.field.gain import PowerBudget, checked_power, decibels, power_budget
from worker.engine.field.intensity import intensity_of, towards

WEAKEST_LOBE_DB: Final[float] = 30.0
"""Lobes further below the strongest than this are not listed."""

_FLAT_TOP_RAD: Final[float] = 0.02


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
    power = checked_power(input_power_w)
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
        Lobe(at_elevation, at_azimuth, float(decibels(np.float64(value), power)))
        for at_elevation, at_azimuth, value in found
        if value > strongest * 10.0 ** (-0.1 * WEAKEST_LOBE_DB)
    ]
    # Gains are rounded, so that equal lobes come lowest first, then in order of azimuth.
    return tuple(
        sorted(
            listed,
            key=lambda lobe: (-round(lobe.gain_dbi, 6), lobe.elevation_rad, lobe.azimuth_rad),
        )
    )


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
    if in_elevation:
        zenith = float(_intensity(wire, moment, np.array(0.5 * pi), np.array(0.5 * pi)))
        # A lobe may be flat enough for rounding to choose a point beside its top.
        if abs(0.5 * pi - elevation) < _FLAT_TOP_RAD and zenith >= value * (1.0 - 1e-9):
            return 0.5 * pi, 0.5 * pi, zenith
    return elevation, azimuth, value
