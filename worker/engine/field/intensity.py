"""Far field of a horizontal wire over ground or in free space, and the power it carries away."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from math import ceil, pi
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM
from worker.engine.field.current import Complex, RadiatingWire, RadiationVector, Real
from worker.engine.ground import Ground
from worker.engine.limits import require_within

_LARGEST_AZIMUTH_RAD: Final[float] = 4.0 * pi


@dataclass(frozen=True, slots=True)
class RadiatedPower:
    """Power through the far sphere, or the sky above ground.

    Attributes
    ----------
    power_w
        Power in W for the current given.
    estimated_error_w
        Difference in W to a coarser angular quadrature. How well the samples describe the current
        is not in it.
    directions
        Directions summed over.
    """

    power_w: float
    estimated_error_w: float
    directions: int


def far_field(
    wire: RadiatingWire, elevation_rad: ArrayLike, azimuth_rad: ArrayLike
) -> tuple[Complex, Complex]:
    """Far electric field times distance.

    Parameters
    ----------
    wire
        The wire and its current.
    elevation_rad
        Elevation above the horizon in rad, any shape; over ground 0 to pi/2, in free space
        -pi/2 to pi/2.
    azimuth_rad
        Azimuth from the wire's own direction in rad, any shape that broadcasts: 0 is off the end,
        pi/2 broadside.

    Returns
    -------
    vertical, horizontal : numpy.ndarray
        Complex peak phasors r E exp(j k r) in V, along falling zenith angle (vertical
        polarisation, TM) and along azimuth (horizontal polarisation, TE); phase referred to the
        ground below the centre of the wire, or to the centre in free space.

    Raises
    ------
    OutOfRange
        An angle lies outside its range.

    Notes
    -----
    With N the current moment towards the direction, theta the zenith angle and phi the azimuth::

        r E_theta = -j eta k / (4 pi) N cos(theta) cos(phi) (e^(+j k h cos) + G_TM e^(-j k h cos))
        r E_phi   = +j eta k / (4 pi) N sin(phi) (e^(+j k h cos) + G_TE e^(-j k h cos))

    where G_TE, G_TM are the Fresnel coefficients of the tangential electric field, both -1 over
    a perfect ground. Over lossy ground the field vanishes at the horizon; the surface wave, which
    falls off faster than 1/r, is no part of it. What is returned as vertical is -E_theta.

    References
    ----------
    C. A. Balanis, "Antenna Theory", 3rd ed., 2005, sections 4.7 and 4.8 (image and Fresnel
    coefficients).
    L. B. Felsen and N. Marcuvitz, "Radiation and Scattering of Waves", 1973, section 5.5.
    """
    lowest = -0.5 * pi if wire.ground is None else 0.0
    elevation = require_within("elevation_rad", elevation_rad, lowest, 0.5 * pi, "rad")
    azimuth = require_within(
        "azimuth_rad", azimuth_rad, -_LARGEST_AZIMUTH_RAD, _LARGEST_AZIMUTH_RAD, "rad"
    )
    return towards(wire, wire.moment(), elevation, azimuth)


def radiation_intensity(
    wire: RadiatingWire, elevation_rad: ArrayLike, azimuth_rad: ArrayLike
) -> Real:
    """Power per solid angle.

    Parameters
    ----------
    wire, elevation_rad, azimuth_rad
        As for :func:`far_field`.

    Returns
    -------
    numpy.ndarray
        ``|r E|**2 / (2 eta)`` in W/sr, of the broadcast shape.

    Raises
    ------
    OutOfRange
        An angle lies outside its range.

    References
    ----------
    C. A. Balanis, "Antenna Theory", 3rd ed., 2005, eq. (2-12a).
    """
    return intensity_of(*far_field(wire, elevation_rad, azimuth_rad))


def intensity_of(vertical: Complex, horizontal: Complex) -> Real:
    """Power per solid angle in W/sr of a far field times distance in V."""
    squares = np.abs(vertical) ** 2 + np.abs(horizontal) ** 2
    return np.asarray(squares / (2.0 * FREE_SPACE_IMPEDANCE_OHM), dtype=np.float64)


def radiated_power(wire: RadiatingWire) -> RadiatedPower:
    """Power radiated to the far sphere, over ground to the sky.

    Parameters
    ----------
    wire
        The wire and its current.

    Returns
    -------
    RadiatedPower
        Power in W with an error estimate.

    Notes
    -----
    Integral of the radiation intensity, in polar coordinates about the wire: the current moment
    then depends on one angle only. Gauss-Legendre in both, with nodes for the phase lengths of
    wire and height.
    """
    moment = wire.moment()
    nodes = _nodes(wire)
    power, directions = _integrated(wire, moment, nodes)
    coarse, _ = _integrated(wire, moment, ceil(0.7 * nodes))
    return RadiatedPower(power, abs(power - coarse), directions)


def power_of_moment(wire: RadiatingWire, moment: RadiationVector) -> float:
    """Power radiated in W, as :func:`radiated_power`, from a known current moment, unchecked.

    On the nodes that there serve to check: within 1e-4 of it.
    """
    return _integrated(wire, moment, ceil(0.7 * _nodes(wire)))[0]


def _nodes(wire: RadiatingWire) -> int:
    return 40 + ceil(1.2 * (wire.half_length_rad + 2.0 * wire.height_rad))


def towards(
    wire: RadiatingWire, moment: RadiationVector, elevation: Real, azimuth: Real
) -> tuple[Complex, Complex]:
    """Far electric field times distance, as :func:`far_field`, from a known current moment."""
    rise = np.sin(elevation)
    east, north = np.cos(azimuth), np.sin(azimuth)
    strength = _strength_ohm_per_m(wire) * moment(np.cos(elevation) * east)
    transverse_magnetic, transverse_electric = _standing_waves(wire, rise)
    vertical = 1j * strength * rise * east * transverse_magnetic
    horizontal = 1j * strength * north * transverse_electric
    return vertical, horizontal


def _strength_ohm_per_m(wire: RadiatingWire) -> float:
    return FREE_SPACE_IMPEDANCE_OHM * wire.wavenumber_per_m / (4.0 * pi)


def _standing_waves(wire: RadiatingWire, rise: Real) -> tuple[Complex, Complex]:
    """Direct plus reflected wave of either polarisation, for unit direct wave."""
    if wire.ground is None:
        one = np.ones_like(rise, dtype=np.complex128)
        return one, one
    direct = np.exp(1j * wire.height_rad * rise)
    magnetic, electric = fresnel(wire.ground, wire.frequency_hz, rise)
    return direct + magnetic / direct, direct + electric / direct


def fresnel(ground: Ground, frequency_hz: float, rise: Real) -> tuple[Complex, Complex]:
    """Fresnel coefficients of the tangential electric field.

    Parameters
    ----------
    ground
        The half space.
    frequency_hz
        Frequency in Hz.
    rise
        Sine of the elevation, any shape, 0 to 1.

    Returns
    -------
    magnetic, electric : numpy.ndarray
        Coefficients of TM and TE waves; both are -1 at the horizon and over perfect ground.

    Notes
    -----
    With ``q = sqrt(eps - cos(elevation)**2)``: ``G_TM = (q - eps rise) / (q + eps rise)`` and
    ``G_TE = (rise - q) / (rise + q)``.

    References
    ----------
    J. A. Stratton, "Electromagnetic Theory", 1941, section 9.5.
    """
    sine = np.asarray(rise, dtype=np.float64)
    if ground.is_perfect:
        minus = np.full(sine.shape, -1.0 + 0.0j)
        return minus, minus
    eps = ground.complex_permittivity(frequency_hz)
    root = np.sqrt(eps - 1.0 + sine**2)
    return (root - eps * sine) / (root + eps * sine), (sine - root) / (sine + root)


@cache
def _gauss_rule(nodes: int) -> tuple[Real, Real]:
    return np.polynomial.legendre.leggauss(nodes)


def _integrated(wire: RadiatingWire, moment: RadiationVector, nodes: int) -> tuple[float, int]:
    """Integrate the intensity over the sphere or the sky; return it and the directions used."""
    x, w = _gauss_rule(nodes)
    polar = 0.5 * pi * (x + 1.0)
    along, across = np.cos(polar), np.sin(polar)
    squared = np.abs(_strength_ohm_per_m(wire) * moment(along)) ** 2
    if wire.ground is None:
        turned, used = 2.0 * pi * across**2, nodes
    else:
        # A quarter turn, from the horizon to the vertical plane through the wire, twice.
        roll = 0.25 * pi * (x + 1.0)
        rise = np.multiply.outer(across, np.sin(roll))
        side = np.multiply.outer(across, np.cos(roll))
        magnetic, electric = _standing_waves(wire, rise)
        horizontal_squared = along[:, None] ** 2 + side**2
        gain = (np.abs(rise * along[:, None] * magnetic) ** 2 + np.abs(side * electric) ** 2) / (
            horizontal_squared
        )
        turned, used = 0.5 * pi * (gain @ w), nodes * nodes
    total = 0.5 * pi * np.sum(w * across * squared * turned)
    return float(total) / (2.0 * FREE_SPACE_IMPEDANCE_OHM), used
