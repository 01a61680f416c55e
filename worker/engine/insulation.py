"""Insulated wire: what a dielectric sleeve adds to a bare wire.

a is the radius of the metal, b that of the sleeve, ``eps = eps_r (1 - j tan delta)`` its complex
relative permittivity and ``xi = 1 - 1 / eps``. The sleeve is replaced by a bare wire of a larger
radius that has a distributed series impedance, which any thin-wire solution can take.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import pi, sqrt
from types import MappingProxyType
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S, VACUUM_PERMEABILITY_H_PER_M
from worker.engine.limits import require_within

LARGEST_ELECTRICAL_RADIUS: Final[float] = 0.05
"""Largest phase k b across the sleeve, in the dielectric, for which it counts as thin."""


@dataclass(frozen=True, slots=True)
class Sleeve:
    """A dielectric sleeve that fits the wire without a gap.

    Parameters
    ----------
    outer_radius_m
        Outer radius, 1e-6 to 0.2 m.
    relative_permittivity
        Real part, 1 to 100.
    loss_tangent
        Imaginary over real part of the permittivity, 0 to 1.

    Raises
    ------
    OutOfRange
        A figure outside its range.
    """

    outer_radius_m: float
    relative_permittivity: float
    loss_tangent: float = 0.0

    def __post_init__(self) -> None:
        """Refuse what is no sleeve."""
        require_within("outer_radius_m", self.outer_radius_m, 1e-6, 0.2, "m")
        require_within("relative_permittivity", self.relative_permittivity, 1.0, 100.0)
        require_within("loss_tangent", self.loss_tangent, 0.0, 1.0)


@dataclass(frozen=True, slots=True)
class CoatedWire:
    """The bare wire that stands for an insulated one.

    Parameters
    ----------
    equivalent_radius_m
        Radius for the thin-wire solution, shape of the radius given.
    series_impedance_ohm_per_m
        Impedance to distribute along it, shape of radius and frequency together. The metal's
        internal impedance, which belongs to the radius of the metal, comes on top.
    """

    equivalent_radius_m: NDArray[np.float64]
    series_impedance_ohm_per_m: NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class Dielectric:
    """A common insulation at high frequency.

    Parameters
    ----------
    relative_permittivity, loss_tangent
        Typical figures at 1 to 30 MHz.
    source
        Where they come from.
    """

    relative_permittivity: float
    loss_tangent: float
    source: str


DIELECTRICS: Final[Mapping[str, Dielectric]] = MappingProxyType(
    {
        "polyethylene": Dielectric(2.28, 2e-4, "plastics table at 1 MHz, confirmed from memory"),
        "ptfe": Dielectric(2.1, 2e-4, "plastics table at 1 MHz, confirmed from memory"),
        "pvc": Dielectric(
            3.5, 0.06, "common practice; 3 to 5 and 0.02 to 0.12 with the plasticizer"
        ),
    }
)
"""Insulations by plain name; read-only."""


def coated_wire(radius_m: ArrayLike, sleeve: Sleeve, frequency_hz: ArrayLike) -> CoatedWire:
    """Equivalent radius and series impedance of an insulated wire.

    Parameters
    ----------
    radius_m
        Radius of the metal, 1e-6 m up to the sleeve's outer radius, any shape.
    sleeve
        The insulation.
    frequency_hz
        Frequency, any shape that broadcasts with the radius; from 0 up to where the sleeve's
        outer radius is 0.05 radian in the dielectric (100 MHz for 24 mm of air, 13 mm of PVC).

    Returns
    -------
    CoatedWire
        Radius in metres and impedance in ohm per metre.

    Raises
    ------
    OutOfRange
        A radius outside its range, or a frequency at which the sleeve is not thin.

    Notes
    -----
    Between a and b the dielectric lowers the radial field by eps and leaves the magnetic field
    alone. Enlarging the wire to ``a_eq = a (b / a)^Re(xi)`` gives the right potential, and a
    series inductance ``L = (mu0 / 2 pi) ln(b / a) Re(xi)`` restores the vector potential that
    this takes away. Dielectric loss belongs to the charge; for the nearly sinusoidal current of
    a wire antenna, ``d²I/dz² = -k² I``, it is the resistance
    ``-(omega mu0 / 2 pi) ln(b / a) Im(xi)``, so that altogether
    ``Z = j omega (mu0 / 2 pi) ln(b / a) xi``. Compared with the surface wave of an infinitely
    long coated wire, the slowing is right to 1e-6 of itself at high frequency and to 4e-4 at
    the thickest sleeve allowed; the loss comes out low by about twice the slowing (3 % to 6 % of
    itself on usual wire).

    References
    ----------
    J. H. Richmond, E. H. Newman, "Dielectric coated wire antennas", Radio Science 11, 1976,
    pp. 13-20.
    B. D. Popović, A. Nešić, "Generalisation of the concept of equivalent radius of thin
    cylindrical antennas", IEE Proc. H 131, 1984, pp. 153-158.
    """
    radius = require_within("radius_m", radius_m, 1e-6, sleeve.outer_radius_m, "m")
    frequency = require_within(
        "frequency_hz", frequency_hz, 0.0, highest_frequency_hz(sleeve), "Hz"
    )
    permittivity = sleeve.relative_permittivity * (1.0 - 1j * sleeve.loss_tangent)
    displaced = 1.0 - 1.0 / permittivity
    thickness = np.log(sleeve.outer_radius_m / radius)
    inductance = VACUUM_PERMEABILITY_H_PER_M / (2.0 * pi) * thickness * displaced
    return CoatedWire(
        equivalent_radius_m=np.asarray(radius * np.exp(displaced.real * thickness)),
        series_impedance_ohm_per_m=np.asarray(2j * pi * frequency * inductance),
    )


def highest_frequency_hz(sleeve: Sleeve) -> float:
    """Frequency up to which a sleeve counts as thin.

    Parameters
    ----------
    sleeve
        The insulation.

    Returns
    -------
    float
        Frequency in hertz at which ``k b`` in the dielectric is 0.05 radian.

    Notes
    -----
    ``f = 0.05 c / (2 pi b sqrt(eps_r))``.
    """
    phase_per_hz = 2.0 * pi * sleeve.outer_radius_m * sqrt(sleeve.relative_permittivity)
    return LARGEST_ELECTRICAL_RADIUS * SPEED_OF_LIGHT_M_PER_S / phase_per_hz


def velocity_factor(
    radius_m: ArrayLike, sleeve: Sleeve, return_distance_m: ArrayLike
) -> NDArray[np.float64]:
    """Velocity on an insulated wire over that on the bare one, by the capacitance ratio.

    Parameters
    ----------
    radius_m
        Radius of the metal, 1e-6 m up to the sleeve's outer radius, any shape.
    sleeve
        The insulation; its loss is left out.
    return_distance_m
        Height over a conducting plane, from the sleeve's outer radius to 1e6 m, any shape that
        broadcasts. A free wire has no plane; a quarter of its length is of the right order, and
        the logarithm forgives the rest.

    Returns
    -------
    numpy.ndarray
        Velocity factor, at most 1.

    Raises
    ------
    OutOfRange
        A radius or distance outside its range.

    Notes
    -----
    ``sqrt(ln(2 H / a_eq) / ln(2 H / a))``: inductance unchanged, capacitance raised. An estimate
    of the shortening, ``1 - v``, before any solution; the solution itself takes
    :func:`coated_wire`.

    References
    ----------
    Common practice; two-conductor line formulas as in S. Ramo, J. R. Whinnery, T. Van Duzer,
    "Fields and Waves in Communication Electronics", 3rd ed., 1994, table 5.11b.
    """
    distance = require_within(
        "return_distance_m", return_distance_m, sleeve.outer_radius_m, 1e6, "m"
    )
    lossless = Sleeve(sleeve.outer_radius_m, sleeve.relative_permittivity)
    equivalent = coated_wire(radius_m, lossless, 0.0).equivalent_radius_m
    radius = np.asarray(radius_m, dtype=np.float64)
    return np.asarray(
        np.sqrt(np.log(2.0 * distance / equivalent) / np.log(2.0 * distance / radius))
    )
