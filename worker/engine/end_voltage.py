"""Radio-frequency voltage at the ends of a wire: the potential its own charge makes there."""

from __future__ import annotations

from math import pi, sqrt
from typing import Final

import numpy as np
from numpy.typing import NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S, VACUUM_PERMITTIVITY_F_PER_M
from worker.engine.limits import require_within
from worker.engine.thin_wire.reflection import ReflectedPotentials
from worker.engine.thin_wire.standing_wave import StandingWave
from worker.engine.thin_wire.tube_kernel import mean_distance

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

#: Step in heights by which the reflected potential is differenced: it varies on twice a height.
_STEP_HEIGHTS: Final = 0.02


def end_voltages(
    wave: StandingWave,
    length_m: float,
    radius_m: float,
    frequency_hz: float,
    reflected: ReflectedPotentials | None = None,
) -> tuple[complex, complex]:
    r"""Voltage against earth at both ends of a wire, for one volt at its feed.

    Parameters
    ----------
    wave
        Its current for one volt.
    length_m, radius_m
        Of the wire that was solved, in m.
    frequency_hz
        In Hz.
    reflected
        The ground's potentials at that frequency; None in free space.

    Returns
    -------
    tuple of complex
        At the end that `feed_fraction` counts from, and at the other; a ratio without unit.

    Raises
    ------
    OutOfRange
        A length, radius or frequency outside 1e-3 to 1e5 m, 1e-7 to 1 m, 1e3 to 1e12 Hz.

    Notes
    -----
    The scalar potential in the Lorenz gauge on the tube's rim,
    :math:`\phi = \frac{1}{\varepsilon_0} \int q (g_0 + g_\Phi)\,ds`, with the continuity equation
    :math:`q = -I' / j\omega`. By parts, as no current flows at an end,
    :math:`\phi = \frac{1}{j\omega\varepsilon_0} \int I\, \partial_s (g_0 + g_\Phi)\,ds`: only the
    current is needed, not its slope. :math:`g_0` is averaged around the tube as in `potential`.

    References
    ----------
    R. W. P. King, "The Theory of Linear Antennas", 1956, ch. II (potentials on a tube). As a
    check, S. A. Schelkunoff's average characteristic impedance, "Antennas: Theory and Practice",
    1952, gives the same within a tenth on a half wave.
    """
    require_within("length_m", length_m, 1e-3, 1e5, "m")
    require_within("radius_m", radius_m, 1e-7, 1.0, "m")
    require_within("frequency_hz", frequency_hz, 1e3, 1e12, "Hz")
    wavenumber = 2.0 * pi * frequency_hz / SPEED_OF_LIGHT_M_PER_S
    scale = 1.0 / (2j * pi * frequency_hz * VACUUM_PERMITTIVITY_F_PER_M)
    found = []
    for side in (-1.0, 1.0):
        distance = np.abs(0.5 * length_m * side - wave.position_m)
        slope = _slope_alone(distance, radius_m, wavenumber)
        if reflected is not None:
            slope = slope + _slope_reflected(distance, reflected)
        # Away from the near end the distance grows with s; towards the far end it falls.
        along = np.sum(wave.weight_m * wave.current_a_per_v * slope)
        found.append(complex(-side * scale * along))
    return found[0], found[1]


def peak_feed_voltage_v(impedance_ohm: complex, power_w: float) -> float:
    """Peak voltage at a feed that takes so much power.

    Parameters
    ----------
    impedance_ohm
        Of positive resistance.
    power_w
        Power accepted, 0 to 1e12 W.

    Raises
    ------
    OutOfRange
        A resistance or power outside its range.
    """
    require_within("power_w", power_w, 0.0, 1e12, "W")
    require_within("resistance_ohm", impedance_ohm.real, 1e-9, 1e12, "ohm")
    return sqrt(2.0 * power_w / (1.0 / impedance_ohm).real)


def _slope_alone(distance_m: FloatArray, radius_m: float, wavenumber: float) -> ComplexArray:
    """Change of the averaged free-space Green's function with the distance along the tube."""
    x = distance_m / radius_m
    # S' = -T / (x (x^2 + 4)), as in `tube_kernel`.
    static = -mean_distance(x) / (x * (x * x + 4.0)) / radius_m**2
    reach = np.hypot(distance_m, sqrt(2.0) * radius_m)
    turned = np.exp(-1j * wavenumber * reach)
    dynamic = -(turned - 1.0) / reach**2 - 1j * wavenumber * turned / reach
    slope: ComplexArray = (static + dynamic * distance_m / reach) / (4.0 * pi)
    return slope


def _slope_reflected(distance_m: FloatArray, reflected: ReflectedPotentials) -> ComplexArray:
    """The same of the ground's part, by differences: it is smooth on the scale of the height."""
    step = _STEP_HEIGHTS * reflected.height_m
    # Even in the distance, so what lies beyond the end is mirrored.
    after = reflected.scalar_potential(distance_m + step)
    before = reflected.scalar_potential(np.abs(distance_m - step))
    slope: ComplexArray = (after - before) / (2.0 * step)
    return slope
