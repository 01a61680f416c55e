"""Reflection of a wave at an impedance step, and the standing wave it leaves on the line.

Z is the load, `impedance_ohm`; Z0 the line, `reference_ohm`; rho the voltage reflection
coefficient; S the voltage standing wave ratio.
"""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.limits import require_magnitude_within, require_within

LARGEST_STANDING_WAVE_RATIO: Final[float] = 1e6
"""Value at which :func:`standing_wave_ratio` stops, so that total reflection stays finite.

A ratio of 1e6 is a return loss of 1.7e-5 dB: no line, load or meter tells it from infinity.
"""

# The square of a larger magnitude would overflow; no impedance comes near it.
_LARGEST_MAGNITUDE_OHM: Final[float] = 1e150
_SMALLEST: Final[float] = float(np.finfo(np.float64).tiny)


def reflection_coefficient(
    impedance_ohm: ArrayLike, reference_ohm: ArrayLike
) -> NDArray[np.complex128]:
    """Voltage reflection coefficient of a load on a line.

    Parameters
    ----------
    impedance_ohm
        Load impedance, complex, any shape; at most 1e150 ohm.
    reference_ohm
        Characteristic impedance of the line, real or complex, any shape that broadcasts with
        the load; at most 1e150 ohm, with a positive real part.

    Returns
    -------
    numpy.ndarray
        Complex coefficient of the broadcast shape (zero-dimensional for two scalars).

    Raises
    ------
    OutOfRange
        An input is not a number of at most 1e150 ohm, the reference has no positive real part,
        or the two add up to zero, which no passive load does.

    Notes
    -----
    ``rho = (Z - Z0) / (Z + Z0)``. With a complex `reference_ohm` this is the ratio of the
    voltage waves of a lossy line, not the conjugate-matched power-wave form; its magnitude may
    then exceed one for a passive load.

    References
    ----------
    D. M. Pozar, "Microwave Engineering", 4th ed., 2012, eq. (2.35).
    """
    impedance = require_magnitude_within(
        "impedance_ohm", impedance_ohm, 0.0, _LARGEST_MAGNITUDE_OHM, "ohm"
    )
    reference = require_magnitude_within(
        "reference_ohm", reference_ohm, 0.0, _LARGEST_MAGNITUDE_OHM, "ohm"
    )
    require_within("reference_ohm (real part)", reference.real, _SMALLEST, np.inf, "ohm")
    total = impedance + reference
    require_within(
        "impedance_ohm + reference_ohm (magnitude)", np.abs(total), _SMALLEST, np.inf, "ohm"
    )
    return np.asarray((impedance - reference) / total)


def standing_wave_ratio(impedance_ohm: ArrayLike, reference_ohm: ArrayLike) -> NDArray[np.float64]:
    """Voltage standing wave ratio of a load on a line, clipped at 1e6.

    Parameters
    ----------
    impedance_ohm
        Load impedance, complex, any shape; at most 1e150 ohm.
    reference_ohm
        Characteristic impedance, any shape that broadcasts with the load; at most 1e150 ohm,
        with a positive real part.

    Returns
    -------
    numpy.ndarray
        Ratio of the broadcast shape, from 1 to `LARGEST_STANDING_WAVE_RATIO`. A short, a
        reactance, a load with a negative resistance and, on a line with complex Z0, a load
        that reflects more than it receives, all give that upper end.

    Raises
    ------
    OutOfRange
        As for :func:`reflection_coefficient`.

    Notes
    -----
    ``S = (1 + |rho|) / (1 - |rho|)``. For real Z0 it is evaluated as
    ``(p + q) / (p - q)`` with ``p = |Z + Z0|``, ``q = |Z - Z0|`` and
    ``p - q = 4 R R0 / (p + q)``, which keeps its digits where ``|rho|`` is close to one. With
    complex Z0, ``p**2 - q**2 = 4 Re(Z conj(Z0))``.

    References
    ----------
    D. M. Pozar, "Microwave Engineering", 4th ed., 2012, eq. (2.41).
    """
    coefficient = reflection_coefficient(impedance_ohm, reference_ohm)
    impedance = np.asarray(impedance_ohm, dtype=np.complex128)
    reference = np.asarray(reference_ohm, dtype=np.complex128)
    # Squares of tiny impedances would underflow in ohms.
    scale = np.maximum(np.abs(impedance), np.abs(reference))
    load, line = impedance / scale, reference / scale
    incident_plus_reflected = np.abs(load + line) + np.abs(load - line)
    four_power = 4.0 * (load * np.conj(line)).real
    smallest = incident_plus_reflected**2 / (2.0 * LARGEST_STANDING_WAVE_RATIO)
    ratio = incident_plus_reflected**2 / np.maximum(four_power, smallest)
    # Rounding may leave a matched load a few units in the last place below one.
    return np.clip(ratio, 1.0, LARGEST_STANDING_WAVE_RATIO).reshape(coefficient.shape)
