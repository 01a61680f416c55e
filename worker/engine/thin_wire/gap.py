"""The feed gap: a uniform field over a short length, and the sharp current peak it causes.

A gap as short as the wire's radius drives a logarithmic peak of current that no coarse mesh can
follow. The source is therefore split in two: a smooth part, the gap field convolved with a
flat-topped Gaussian of width sigma, which the mesh follows easily, and the sharp rest, which has
no content at wavelengths longer than sigma, does not reach the wire's ends, and whose response is
that of the infinite tube, a single integral.

References
----------
L. A. Vainshtein, The Theory of Diffraction and the Factorization Method (1969), the infinite
tube; T. T. Wu and R. W. P. King, The thick tubular transmitting antenna (1967), gap admittance.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from math import factorial, pi, sqrt

import numpy as np
from numpy.polynomial import hermite_e, legendre
from numpy.typing import NDArray
from scipy.special import erf, i0e, iti0k0, k0e, k1

from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

# The smooth source has vanishing moments below order 2 * FLATNESS.
FLATNESS = 4
# Steps of the quadrature in the logarithm of the wavenumber: for the mean over the gap, and for
# currents at some distance, whose cosines need more.
_LOG_STEP = 0.06
_FINE_LOG_STEP = 0.02


def smooth_source(distance_m: FloatArray, gap_m: FloatArray, sigma_m: FloatArray) -> FloatArray:
    """Smooth part of the gap field (1/m, unit integral) at a distance from the gap's centre."""
    upper = _smooth_step((distance_m + gap_m / 2.0) / sigma_m)
    lower = _smooth_step((distance_m - gap_m / 2.0) / sigma_m)
    field: FloatArray = (upper - lower) / gap_m
    return field


def _smooth_step(x: FloatArray) -> FloatArray:
    """Integral of the flat-topped Gaussian, whose spectrum is `_smooth_spectrum`."""
    coefficients = np.zeros(2 * FLATNESS - 2)
    for m in range(1, FLATNESS):
        coefficients[2 * m - 1] = -((-0.5) ** m) / factorial(m)
    bell = np.exp(-0.5 * x * x) / sqrt(2.0 * pi)
    step: FloatArray = 0.5 * erf(x / sqrt(2.0)) + hermite_e.hermeval(x, coefficients) * bell
    return step


def _smooth_spectrum(q: FloatArray) -> FloatArray:
    """exp(-q^2/2) times the first FLATNESS terms of exp(q^2/2): 1 - O(q^(2 FLATNESS))."""
    half_square = 0.5 * q * q
    terms = sum(half_square**m / factorial(m) for m in range(FLATNESS))
    spectrum: FloatArray = np.exp(-half_square) * terms
    return spectrum


@dataclass(frozen=True, slots=True)
class _TubeSpectrum:
    """Quadrature over axial wavenumber of the sharp part's response, one row a wire."""

    wavenumber: FloatArray
    weight: ComplexArray
    static_wavenumber: FloatArray
    static_weight: FloatArray


def sharp_admittance(
    wavenumber_per_m: FloatArray,
    radius_m: FloatArray,
    gap_m: FloatArray,
    sigma_m: FloatArray,
    wire_impedance_ohm_per_m: ComplexArray,
) -> ComplexArray:
    r"""Admittance (S) that the sharp part of the source adds at the gap; all arrays of shape (B,).

    Notes
    -----
    On the infinite tube, with :math:`\gamma^2 = \zeta^2 - k^2`, the current of the sharp part
    averaged over the gap is

    .. math::

        Y = \frac{1}{\pi} \int_k^\infty
            \frac{\mathrm{sinc}^2(\zeta g/2)\,[1 - \hat s^2(\zeta\sigma)]}
                 {Z_w - j (\eta / 2\pi k)\, \gamma^2 I_0(\gamma a) K_0(\gamma a)}\, d\zeta.

    The part from 0 to k is left out: the bracket is below 1e-4 there. The large-argument form
    :math:`2a^2/\sqrt{(\zeta a)^2 + 1/4}` of :math:`1/(\gamma^2 I_0 K_0)` is integrated in
    closed form by :math:`\int_0^\infty \cos(\zeta y)(\zeta^2 + b^2)^{-1/2} d\zeta = K_0(by)`.
    """
    spectrum = _tube_spectrum(
        wavenumber_per_m, radius_m, sigma_m, wire_impedance_ohm_per_m, log_step=_LOG_STEP
    )
    sharp = _gap_spectrum(spectrum.wavenumber, gap_m) ** 2
    sharp *= 1.0 - _smooth_spectrum(spectrum.wavenumber * sigma_m[:, None]) ** 2
    smooth = _gap_spectrum(spectrum.static_wavenumber, gap_m) ** 2
    smooth *= _smooth_spectrum(spectrum.static_wavenumber * sigma_m[:, None]) ** 2
    y = gap_m / (2.0 * radius_m)
    integral_k0 = iti0k0(y)[1]
    static_total = 8.0 * radius_m**2 / gap_m * (integral_k0 - _first_moment_k0(y) / y)
    total = (
        np.sum(spectrum.weight * sharp, axis=1)
        - np.sum(spectrum.static_weight * smooth, axis=1)
        + static_total
    )
    admittance: ComplexArray = 2.0j * wavenumber_per_m / FREE_SPACE_IMPEDANCE_OHM * total
    return admittance


def sharp_current(
    distance_m: FloatArray,
    wavenumber_per_m: float,
    radius_m: float,
    gap_m: float,
    sigma_m: float,
    wire_impedance_ohm_per_m: complex,
) -> ComplexArray:
    """Current (A per volt) of the sharp part at distances (n,) from the gap's centre.

    Notes
    -----
    The integral is that of `sharp_admittance` with one gap spectrum replaced by the cosine of
    zeta z. Away from the gap the current is smooth on the scale of the distance from it, so
    wavenumbers far above its inverse cancel; a flat-topped Gaussian takes them out before their
    cosines outrun the quadrature.
    """
    one = np.ones(1)
    spectrum = _tube_spectrum(
        wavenumber_per_m * one,
        radius_m * one,
        sigma_m * one,
        np.full(1, wire_impedance_ohm_per_m, dtype=np.complex128),
        log_step=_FINE_LOG_STEP,
    )
    zeta, static_zeta = spectrum.wavenumber[0], spectrum.static_wavenumber[0]
    sharp = spectrum.weight[0] * np.sinc(zeta * gap_m / (2.0 * pi))
    sharp = sharp * (1.0 - _smooth_spectrum(zeta * sigma_m))
    smooth = spectrum.static_weight[0] * np.sinc(static_zeta * gap_m / (2.0 * pi))
    smooth = smooth * _smooth_spectrum(static_zeta * sigma_m)
    distance = np.abs(distance_m)[:, None]
    filter_width = np.maximum(distance - gap_m / 2.0, 0.0) / 8.0
    total = (np.cos(distance * zeta) * _smooth_spectrum(filter_width * zeta)) @ sharp
    total = total - np.cos(distance * static_zeta) @ smooth
    upper = (distance[:, 0] + gap_m / 2.0) / (2.0 * radius_m)
    lower = (distance[:, 0] - gap_m / 2.0) / (2.0 * radius_m)
    integral = iti0k0(upper)[1] - np.sign(lower) * iti0k0(np.abs(lower))[1]
    total = total + 4.0 * radius_m**2 / gap_m * integral
    current: ComplexArray = 2.0j * wavenumber_per_m / FREE_SPACE_IMPEDANCE_OHM * total
    return current


def _tube_spectrum(
    k: FloatArray,
    radius: FloatArray,
    sigma: FloatArray,
    wire_impedance: ComplexArray,
    log_step: float,
) -> _TubeSpectrum:
    # Trapezoidal rule in ln(gamma): the integrand is smooth there and dies at both ends.
    low, high = np.log(0.1 / sigma), np.log(40.0 / radius)
    count = int(np.ceil(np.max(high - low) / log_step)) + 1
    fraction = np.linspace(0.0, 1.0, count)
    gamma = np.exp(low[:, None] + (high - low)[:, None] * fraction)
    zeta = np.sqrt(gamma**2 + k[:, None] ** 2)
    step = ((high - low) / (count - 1))[:, None] * gamma**2 / zeta
    x = gamma * radius[:, None]
    wire_term = 2.0j * pi * k / FREE_SPACE_IMPEDANCE_OHM * wire_impedance
    response = 1.0 / (gamma**2 * i0e(x) * k0e(x) + wire_term[:, None])
    weight = step * (response - _static_response(zeta, radius))
    node, node_weight = _gauss_rule()
    reach = (9.0 / sigma)[:, None]
    static_zeta = reach * (node + 1.0) / 2.0
    static_weight = reach * node_weight / 2.0 * _static_response(static_zeta, radius)
    return _TubeSpectrum(zeta, weight, static_zeta, static_weight)


@cache
def _gauss_rule() -> tuple[FloatArray, FloatArray]:
    return legendre.leggauss(40)


def _static_response(zeta: FloatArray, radius: FloatArray) -> FloatArray:
    scaled = zeta * radius[:, None]
    response: FloatArray = 2.0 * radius[:, None] ** 2 / np.sqrt(scaled**2 + 0.25)
    return response


def _gap_spectrum(zeta: FloatArray, gap: FloatArray) -> FloatArray:
    spectrum: FloatArray = np.sinc(zeta * gap[:, None] / (2.0 * pi))
    return spectrum


def _first_moment_k0(y: FloatArray) -> FloatArray:
    """Integral of t K0(t) from 0 to y, 1 - y K1(y), by its series where that cancels."""
    small = np.minimum(y, 0.05)
    series = 0.5 * small**2 * (-np.log(small / 2.0) - np.euler_gamma + 0.5)
    series += small**4 / 16.0 * (-np.log(small / 2.0) - np.euler_gamma + 1.25)
    moment: FloatArray = np.where(y < 0.05, series, 1.0 - y * k1(np.maximum(y, 1e-300)))
    return moment
