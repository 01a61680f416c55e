"""Round wire as a conductor: internal impedance per metre, with the materials and sizes.

a is the radius, ``gamma = sqrt(j omega mu sigma)`` the propagation constant in the metal and
``eta = j omega mu / gamma`` its wave impedance. Displacement current in the metal is left out.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import pi
from typing import Final, TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ive, kve

from worker.engine.constants import VACUUM_PERMEABILITY_H_PER_M
from worker.engine.limits import require_within
from worker.engine.material import MATERIALS, Material, Metal
from worker.engine.wire_size import awg_diameter_m, diameter_from_area_m

__all__ = [
    "MATERIALS",
    "Material",
    "Metal",
    "awg_diameter_m",
    "diameter_from_area_m",
    "internal_impedance_ohm_per_m",
    "resistance_ohm_per_m",
    "skin_depth_m",
]

SMALLEST_RADIUS_M: Final[float] = 1e-6
LARGEST_RADIUS_M: Final[float] = 0.1
HIGHEST_FREQUENCY_HZ: Final[float] = 3e9

# Largest |gamma r| at which the first-order expansion in frequency stands in for the Bessel form.
# Solid: both hold to 1e-13 there. Clad: the Bessel form loses its reactance to cancellation as
# |gamma r|^-2 and the expansion errs as |gamma r|^4; they cross below 1e-9.
_QUASI_STATIC_SOLID: Final[float] = 1e-3
_QUASI_STATIC_CLAD: Final[float] = 1e-2

_Reals: TypeAlias = NDArray[np.float64]
_Complexes: TypeAlias = NDArray[np.complex128]


def internal_impedance_ohm_per_m(
    radius_m: ArrayLike,
    frequency_hz: ArrayLike,
    material: Material,
    temperature_c: ArrayLike = 20.0,
) -> _Complexes:
    """Internal impedance per metre of a round wire, solid or clad.

    Parameters
    ----------
    radius_m
        Outer radius of the metal, 1e-6 to 0.1 m, any shape.
    frequency_hz
        Frequency, 0 to 3e9 Hz, any shape that broadcasts with the radius. At 0 the result is the
        direct-current resistance.
    material
        What the wire is made of.
    temperature_c
        Temperature of the metal, -100 to 200 °C, any shape that broadcasts.

    Returns
    -------
    numpy.ndarray
        Complex impedance in ohm per metre, of the broadcast shape: resistance and internal
        reactance.

    Raises
    ------
    OutOfRange
        A radius, frequency or temperature outside its range.

    Notes
    -----
    Solid wire, with ``z = gamma a`` and the modified Bessel functions I::

        Z = 1 / (pi a^2 sigma) * (z / 2) I0(z) / I1(z)
          = 1 / (pi a^2 sigma) * (1 + (z / 2) I2(z) / I1(z))

    The second form keeps the digits of a reactance far smaller than the resistance. Clad wire:
    in the cladding ``E = A I0(gamma r) + B K0(gamma r)``, with B / A from the core's surface
    impedance at the interface. Both are evaluated with exponentially scaled functions, so that
    no size or frequency overflows. The wire is taken as straight and alone: proximity is left
    out.

    References
    ----------
    S. Ramo, J. R. Whinnery, T. Van Duzer, "Fields and Waves in Communication Electronics",
    3rd ed., 1994, sec. 4.5.
    J. A. Stratton, "Electromagnetic Theory", 1941, sec. 9.15.
    B. R. Teare, E. R. Schatz, "Copper-Covered Steel Wire at Radio Frequencies", Proc. IRE 32,
    1944, pp. 397-403 (clad wire).
    """
    radius, frequency, temperature = np.broadcast_arrays(
        _radius(radius_m), _frequency(frequency_hz), np.asarray(temperature_c, dtype=np.float64)
    )
    shape = radius.shape
    radius, omega = radius.ravel(), 2.0 * pi * frequency.ravel()
    surface = _Layer.of(material.surface, omega, temperature.ravel())
    if material.core is None:
        return _solid(radius, omega, surface).reshape(shape)
    core = _Layer.of(material.core, omega, temperature.ravel())
    cladding = 2.0 * material.cladding_per_diameter * radius
    return _clad(radius, cladding, omega, surface, core).reshape(shape)


def resistance_ohm_per_m(
    radius_m: ArrayLike, material: Material, temperature_c: ArrayLike = 20.0
) -> _Reals:
    """Direct-current resistance per metre of a round wire, solid or clad.

    Parameters
    ----------
    radius_m
        Outer radius of the metal, 1e-6 to 0.1 m, any shape.
    material
        What the wire is made of.
    temperature_c
        Temperature of the metal, -100 to 200 °C, any shape that broadcasts.

    Returns
    -------
    numpy.ndarray
        Resistance in ohm per metre, of the broadcast shape.

    Raises
    ------
    OutOfRange
        A radius or temperature outside its range.

    Notes
    -----
    The inverse of the sum of conductivity times section over the layers.

    References
    ----------
    IEC 60028, "International standard of resistance for copper", 1925.
    """
    return internal_impedance_ohm_per_m(radius_m, 0.0, material, temperature_c).real.copy()


def skin_depth_m(
    frequency_hz: ArrayLike, material: Material, temperature_c: ArrayLike = 20.0
) -> _Reals:
    """Skin depth in the surface metal.

    Parameters
    ----------
    frequency_hz
        Frequency, 1e-3 to 3e9 Hz, any shape.
    material
        What the wire is made of; for a clad wire its cladding counts.
    temperature_c
        Temperature of the metal, -100 to 200 °C, any shape that broadcasts.

    Returns
    -------
    numpy.ndarray
        Depth in metres at which the current density has fallen to 1/e.

    Raises
    ------
    OutOfRange
        A frequency or temperature outside its range.

    Notes
    -----
    ``delta = sqrt(2 / (omega mu sigma))``.

    References
    ----------
    S. Ramo, J. R. Whinnery, T. Van Duzer, "Fields and Waves in Communication Electronics",
    3rd ed., 1994, sec. 3.16.
    """
    frequency = require_within("frequency_hz", frequency_hz, 1e-3, HIGHEST_FREQUENCY_HZ, "Hz")
    layer = _Layer.of(material.surface, 2.0 * pi * frequency, np.asarray(temperature_c))
    # The real part of gamma is one over the depth.
    return np.asarray(1.0 / layer.gamma.real)


@dataclass(frozen=True, slots=True)
class _Layer:
    """One metal at the frequencies and temperatures of a call."""

    conductivity: _Reals
    permeability: float
    gamma: _Complexes

    @classmethod
    def of(cls, metal: Metal, omega: _Reals, temperature_c: _Reals) -> _Layer:
        conductivity = metal.conductivity_at(temperature_c)
        permeability = metal.relative_permeability * VACUUM_PERMEABILITY_H_PER_M
        # sqrt(j x) = (1 + j) sqrt(x / 2)
        gamma = (1.0 + 1.0j) * np.sqrt(0.5 * omega * permeability * conductivity)
        return cls(conductivity, permeability, np.asarray(gamma))

    def at(self, where: NDArray[np.bool_]) -> _Layer:
        return _Layer(self.conductivity[where], self.permeability, self.gamma[where])


def _solid(radius: _Reals, omega: _Reals, metal: _Layer) -> _Complexes:
    resistance = 1.0 / (pi * radius**2 * metal.conductivity)
    z = metal.gamma * radius
    impedance = resistance + 1j * omega * metal.permeability / (8.0 * pi)
    skin = np.abs(z) >= _QUASI_STATIC_SOLID
    z = z[skin]
    impedance[skin] = resistance[skin] * (1.0 + 0.5 * z * ive(2, z) / ive(1, z))
    return np.asarray(impedance)


def _clad(
    radius: _Reals, cladding: _Reals, omega: _Reals, surface: _Layer, core: _Layer
) -> _Complexes:
    impedance = _clad_quasi_static(radius, radius - cladding, omega, surface, core)
    largest = np.maximum(np.abs(surface.gamma) * radius, np.abs(core.gamma) * (radius - cladding))
    skin = largest >= _QUASI_STATIC_CLAD
    impedance[skin] = _clad_with_skin_effect(
        radius[skin], cladding[skin], omega[skin], surface.at(skin), core.at(skin)
    )
    return impedance


def _clad_with_skin_effect(
    radius: _Reals, cladding: _Reals, omega: _Reals, surface: _Layer, core: _Layer
) -> _Complexes:
    inner = radius - cladding
    u, v = surface.gamma * inner, surface.gamma * radius
    z = core.gamma * inner
    surface_eta = 1j * omega * surface.permeability / surface.gamma
    core_impedance = 1j * omega * core.permeability / core.gamma * ive(0, z) / ive(1, z)
    ratio = core_impedance / surface_eta
    # E = I0(gamma r) - q K0(gamma r); scaled functions leave the factor exp(-2 Re) behind.
    q = (ive(0, u) - ratio * ive(1, u)) / (kve(0, u) + ratio * kve(1, u))
    step = surface.gamma * cladding
    decay = np.exp(-step - step.real)
    electric = ive(0, v) - q * kve(0, v) * decay
    magnetic = ive(1, v) + q * kve(1, v) * decay
    return np.asarray(surface_eta * electric / (2.0 * pi * radius * magnetic))


def _clad_quasi_static(
    radius: _Reals, inner: _Reals, omega: _Reals, surface: _Layer, core: _Layer
) -> _Complexes:
    """Direct-current resistance and the inductance of the direct-current distribution."""
    core_section, cladding_section = inner**2, radius**2 - inner**2
    core_conductance = pi * core_section * core.conductivity
    conductance = core_conductance + pi * cladding_section * surface.conductivity
    core_share = core_conductance / conductance
    # Enclosed current in the cladding, i(r) = constant + slope r^2, over the whole current.
    slope = (1.0 - core_share) / cladding_section
    constant = core_share - slope * core_section
    cladding_integral = (
        constant**2 * np.log(radius / inner)
        + constant * slope * cladding_section
        + 0.25 * slope**2 * (radius**4 - inner**4)
    )
    inductance = core.permeability * core_share**2 / (
        8.0 * pi
    ) + surface.permeability * cladding_integral / (2.0 * pi)
    return np.asarray(1.0 / conductance + 1j * omega * inductance)


def _radius(radius_m: ArrayLike) -> _Reals:
    return require_within("radius_m", radius_m, SMALLEST_RADIUS_M, LARGEST_RADIUS_M, "m")


def _frequency(frequency_hz: ArrayLike) -> _Reals:
    return require_within("frequency_hz", frequency_hz, 0.0, HIGHEST_FREQUENCY_HZ, "Hz")
