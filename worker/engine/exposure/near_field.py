"""Fields close to a wire in free space, from its current."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM, SPEED_OF_LIGHT_M_PER_S
from worker.engine.limits import require_within

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

#: Places looked at beside the wire, closer together towards its ends, and around each end.
_BESIDE: Final = 21
_AROUND_END_RAD: Final = np.radians([15.0, 30.0, 45.0, 60.0, 75.0])


@dataclass(frozen=True, slots=True)
class NearField:
    """Largest fields at some distances from a wire.

    Attributes
    ----------
    distance_m : numpy.ndarray, shape (n,)
        From the nearest part of the wire.
    electric_v_per_m, magnetic_a_per_m : numpy.ndarray, shape (n,)
        Root mean square, the largest anywhere at that distance.
    """

    distance_m: FloatArray
    electric_v_per_m: FloatArray
    magnetic_a_per_m: FloatArray


def fields_of(
    position_m: FloatArray,
    current_a: ComplexArray,
    frequency_hz: float,
    along_m: ArrayLike,
    aside_m: ArrayLike,
) -> tuple[FloatArray, FloatArray]:
    """Root mean square fields at some places.

    Parameters
    ----------
    position_m
        Along the wire, strictly increasing, shape (n,), ends included.
    current_a
        Complex peak phasors there, zero at both ends.
    frequency_hz
        1e3 to 1e12 Hz.
    along_m, aside_m
        Places: along the wire as `position_m`, and from its axis, above zero; any shape that
        broadcasts. No closer than the positions are to one another.

    Returns
    -------
    electric_v_per_m, magnetic_a_per_m : numpy.ndarray
        Size of the whole field vectors, of the broadcast shape.

    Raises
    ------
    OutOfRange
        A frequency or a place outside its range.

    Notes
    -----
    Between neighbouring positions the current is the sinusoid of the free-space wavenumber through
    both; the field of such a filament is a closed form of its jumps of slope.

    References
    ----------
    S. A. Schelkunoff, H. T. Friis, "Antennas: Theory and Practice", 1952, sec. 8.14 and 13.3;
    C. A. Balanis, "Antenna Theory", 3rd ed., 2005, sec. 8.5.2 (near field of a sinusoidal dipole).
    """
    require_within("frequency_hz", frequency_hz, 1e3, 1e12, "Hz")
    aside = require_within("aside_m", aside_m, 1e-6, 1e6, "m")
    k = 2.0 * pi * frequency_hz / SPEED_OF_LIGHT_M_PER_S
    jump = _slope_jumps(position_m, current_a, k)
    offset = np.asarray(along_m, dtype=np.float64)[..., None] - position_m
    reach = np.hypot(offset, aside[..., None])
    wave = jump * np.exp(-1j * k * reach)
    scale = FREE_SPACE_IMPEDANCE_OHM / (4.0 * pi * k)
    along = scale * np.abs(np.sum(wave / reach, axis=-1))
    across = scale * np.abs(np.sum(wave * offset / reach, axis=-1)) / aside
    around = np.abs(np.sum(wave, axis=-1)) / (4.0 * pi * k * aside)
    return np.asarray(np.hypot(along, across) / np.sqrt(2.0)), np.asarray(around / np.sqrt(2.0))


def largest_fields(
    position_m: FloatArray, current_a: ComplexArray, frequency_hz: float, distance_m: ArrayLike
) -> NearField:
    """Largest fields at some distances from the nearest part of a wire.

    Parameters
    ----------
    position_m, current_a, frequency_hz
        As for `fields_of`.
    distance_m
        Shape (n,), in m.

    Raises
    ------
    OutOfRange
        As for `fields_of`.
    """
    distance = np.asarray(distance_m, dtype=np.float64)
    low, high = float(position_m[0]), float(position_m[-1])
    middle, half = 0.5 * (low + high), 0.5 * (high - low)
    beside = middle - half * np.cos(np.linspace(0.0, pi, _BESIDE))
    out, aside = np.cos(_AROUND_END_RAD), np.sin(_AROUND_END_RAD)
    along = np.concatenate(
        [
            np.broadcast_to(beside, (distance.size, _BESIDE)),
            low - distance[:, None] * out,
            high + distance[:, None] * out,
        ],
        axis=1,
    )
    from_axis = np.concatenate([np.ones(_BESIDE), aside, aside]) * distance[:, None]
    electric, magnetic = fields_of(position_m, current_a, frequency_hz, along, from_axis)
    return NearField(distance, electric.max(axis=1), magnetic.max(axis=1))


def _slope_jumps(position_m: FloatArray, current_a: ComplexArray, k: float) -> ComplexArray:
    """Jump of the current's slope at each position, nothing flowing beyond the ends."""
    step = k * np.diff(position_m)
    first, last = current_a[:-1], current_a[1:]
    starting = k * (last - first * np.cos(step)) / np.sin(step)
    ending = k * (last * np.cos(step) - first) / np.sin(step)
    jump = np.zeros(position_m.size, dtype=np.complex128)
    jump[:-1] += starting
    jump[1:] -= ending
    return jump
