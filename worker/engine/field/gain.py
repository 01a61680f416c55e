"""Gain, cuts through the pattern, and where the power goes."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from worker.engine.field.current import RadiatingWire, Real
from worker.engine.field.intensity import radiated_power, radiation_intensity
from worker.engine.limits import require_within

FLOOR_DBI: Final[float] = -100.0
"""Gain reported for a null, so that no infinity leaves the engine."""

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
    power = checked_power(input_power_w)
    return decibels(radiation_intensity(wire, elevation_rad, azimuth_rad), power)


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
    power = checked_power(input_power_w)
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


def checked_power(input_power_w: float) -> float:
    """Input power in W, once found to be positive and finite."""
    return float(require_within("input_power_w", input_power_w, 1e-30, _LARGEST_POWER_W, "W"))


def decibels(intensity: Real | np.float64, power: float) -> Real:
    """Gain in dBi of an intensity in W/sr, not below the floor."""
    smallest = 10.0 ** (0.1 * FLOOR_DBI)
    return np.asarray(10.0 * np.log10(np.maximum(4.0 * pi * intensity / power, smallest)))
