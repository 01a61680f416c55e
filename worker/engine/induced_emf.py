"""Closed-form impedances of thin dipoles with a sinusoidal current, by induced EMF.

    function                   what it is
    small_radius_impedance     self impedance, sine and cosine integrals, leading term in a/L
    surface_impedance          self impedance with the field taken on the surface, rho = a
    mutual_impedance           parallel wires of any lengths: side by side, collinear, in echelon

The current is assumed to be sin(k(L/2 - |z|)), so the results are first estimates and
cross-checks. Referred to the feed they diverge where a length is a whole number of wavelengths.
The wave impedance is sqrt(mu0/eps0) = 376.7303134 ohm; older tables use 120 pi = 376.9911184 ohm.
"""

from __future__ import annotations

from math import inf, pi
from typing import Final, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import sici

from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM, SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
Reference = Literal["feed", "current_maximum"]

# Below this |sin(kL/2)| the current at the feed is taken as zero and the closed form as useless.
SMALLEST_FEED_CURRENT: Final = 1e-6


def small_radius_impedance(
    length_m: ArrayLike,
    radius_m: ArrayLike,
    frequency_hz: ArrayLike,
    *,
    referred_to: Reference = "feed",
    wave_impedance_ohm: float = FREE_SPACE_IMPEDANCE_OHM,
) -> ComplexArray:
    r"""Self impedance of a centre-fed dipole, leading term in radius over length.

    Parameters
    ----------
    length_m, radius_m, frequency_hz
        Length, radius and frequency, > 0; arrays broadcast together.
    referred_to
        Current the impedance refers to: at the feed, or the maximum of the sine.
    wave_impedance_ohm
        Wave impedance of the medium; 120 pi to compare with older tables.

    Returns
    -------
    Complex impedance (ohm) of the broadcast shape.

    Raises
    ------
    OutOfRange
        A quantity is not positive, or the feed current vanishes (length a multiple of a
        wavelength) and the impedance is referred to it.

    Notes
    -----
    With :math:`x = kL` and :math:`\gamma` Euler's constant,

    .. math::

        R_m &= \tfrac{\eta}{2\pi}\{\gamma + \ln x - \mathrm{Ci}\,x
               + \tfrac12 \sin x\,[\mathrm{Si}\,2x - 2\,\mathrm{Si}\,x]
               + \tfrac12 \cos x\,[\gamma + \ln\tfrac x2 + \mathrm{Ci}\,2x - 2\,\mathrm{Ci}\,x]\} \\
        X_m &= \tfrac{\eta}{4\pi}\{2\,\mathrm{Si}\,x
               + \cos x\,[2\,\mathrm{Si}\,x - \mathrm{Si}\,2x]
               - \sin x\,[2\,\mathrm{Ci}\,x - \mathrm{Ci}\,2x - \mathrm{Ci}(2ka^2/L)]\},

    divided by :math:`\sin^2(x/2)` for the feed.

    References
    ----------
    C. A. Balanis, Antenna Theory, chapter 8, induced EMF method; P. S. Carter (1932), Circuit
    relations in radiating systems; J. D. Kraus, Antennas.
    """
    length, radius, k = _positive_arrays(length_m, radius_m, frequency_hz)
    x = k * length
    si, ci = sici(x)
    si_double, ci_double = sici(2.0 * x)
    _, ci_radius = sici(2.0 * k * radius**2 / length)
    euler = np.euler_gamma
    resistance = euler + np.log(x) - ci
    resistance = resistance + 0.5 * np.sin(x) * (si_double - 2.0 * si)
    resistance = resistance + 0.5 * np.cos(x) * (euler + np.log(x / 2.0) + ci_double - 2.0 * ci)
    reactance = 2.0 * si + np.cos(x) * (2.0 * si - si_double)
    reactance = reactance - np.sin(x) * (2.0 * ci - ci_double - ci_radius)
    at_maximum: ComplexArray = np.asarray(2.0 * resistance + 1j * reactance)
    at_maximum = wave_impedance_ohm / (4.0 * pi) * at_maximum
    return _referred(at_maximum, k * length / 2.0, k * length / 2.0, referred_to)


def surface_impedance(
    length_m: ArrayLike,
    radius_m: ArrayLike,
    frequency_hz: ArrayLike,
    *,
    referred_to: Reference = "feed",
    wave_impedance_ohm: float = FREE_SPACE_IMPEDANCE_OHM,
) -> ComplexArray:
    """Self impedance of a centre-fed dipole with the field of the axial current taken at rho = a.

    Parameters, errors and shapes are those of `small_radius_impedance`.

    Notes
    -----
    The mutual impedance of two equal dipoles side by side at a distance of one radius.

    References
    ----------
    J. D. Kraus, Antennas, self impedance of a thin linear antenna; P. S. Carter (1932).
    """
    return mutual_impedance(
        length_m,
        length_m,
        frequency_hz,
        separation_m=radius_m,
        referred_to=referred_to,
        wave_impedance_ohm=wave_impedance_ohm,
    )


def mutual_impedance(
    first_length_m: ArrayLike,
    second_length_m: ArrayLike,
    frequency_hz: ArrayLike,
    *,
    separation_m: ArrayLike = 0.0,
    offset_m: ArrayLike = 0.0,
    referred_to: Reference = "feed",
    wave_impedance_ohm: float = FREE_SPACE_IMPEDANCE_OHM,
) -> ComplexArray:
    r"""Mutual impedance of two parallel centre-fed dipoles.

    Parameters
    ----------
    first_length_m, second_length_m, frequency_hz
        Lengths and frequency, > 0; arrays broadcast together.
    separation_m
        Distance between the axes, >= 0; 0 for collinear wires; broadcasts.
    offset_m
        Distance between the centres along the wires, any sign: 0 side by side; broadcasts.
    referred_to
        Currents the impedance refers to: at both feeds, or the maxima of the sines.
    wave_impedance_ohm
        Wave impedance of the medium.

    Returns
    -------
    Complex impedance (ohm) of the broadcast shape.

    Raises
    ------
    OutOfRange
        A length or frequency is not positive, collinear wires overlap, or a feed current
        vanishes and the impedance is referred to it.

    Notes
    -----
    The first wire's field along the second is
    :math:`-j\tfrac{\eta}{4\pi} [e^{-jkR_1}/R_1 + e^{-jkR_2}/R_2 - 2\cos(kh_1)\, e^{-jkR_0}/R_0]`,
    R measured to its ends and its centre. Against :math:`e^{\pm jkz}` each term integrates to
    exponential integrals :math:`E_1(jk(R \pm u))`, u the axial distance.

    References
    ----------
    P. S. Carter (1932), Circuit relations in radiating systems and applications to antenna
    problems, Proc. IRE 20; H. E. King (1957), Mutual impedance of unequal length antennas in
    echelon, IRE Trans. Antennas and Propagation 5; C. A. Balanis, Antenna Theory, chapter 8.
    """
    first, second, k = _positive_arrays(first_length_m, second_length_m, frequency_hz)
    first, second, k, separation, offset = (
        np.asarray(array, dtype=float)
        for array in np.broadcast_arrays(first, second, k, separation_m, offset_m)
    )
    _require("separation_m", separation, separation >= 0.0, 0.0, inf)
    free = np.abs(offset) - (first + second) / 2.0
    clear = (separation > 0.0) | (free >= -1e-12 * (first + second))
    _require("clear distance between collinear wires", free, clear, 0.0, inf)
    half_first, half_second = first / 2.0, second / 2.0
    total = np.zeros(first.shape, dtype=complex)
    for source, strength in (
        (-half_first, 1.0),
        (half_first, 1.0),
        (np.zeros_like(first), -2.0 * np.cos(k * half_first)),
    ):
        for side in (-1.0, 1.0):
            total = total + strength * _arm_integral(
                k, separation, offset - source, half_second, side
            )
    at_maximum = 1j * wave_impedance_ohm / (4.0 * pi) * total
    return _referred(at_maximum, k * half_first, k * half_second, referred_to)


def _arm_integral(
    k: FloatArray, separation: FloatArray, centre: FloatArray, half: FloatArray, side: float
) -> ComplexArray:
    """Integral of exp(-jkR)/R times sin(k(half - |u - centre|)) over one arm of the second wire.

    `u` is the axial distance from the source point; `side` picks the arm beyond or before the
    centre. The sine is split into two exponentials of u.
    """
    tip = centre + side * half
    low, high = (centre, tip) if side > 0.0 else (tip, centre)
    total = np.zeros(k.shape, dtype=complex)
    for sign in (1.0, -1.0):
        direction = sign * side
        phase = np.exp(1j * direction * k * tip) * (sign / 2j)
        step = _antiderivative(k, separation, high, low, direction)
        step = step - _antiderivative(k, separation, low, high, direction)
        total = total + phase * step
    return total


def _antiderivative(
    k: FloatArray, separation: FloatArray, u: FloatArray, other: FloatArray, direction: float
) -> ComplexArray:
    """Antiderivative in u of exp(-jk(R + direction u))/R, direction +1 or -1.

    `other` is the far end of the interval, which lies on one side of 0 when the separation is 0.
    Then one of the two directions has R + direction u = 0 and integrates to a logarithm. Where
    tips touch, u = 0, the logarithms of the two directions cancel and are left out of both.
    """
    distance = np.hypot(separation, u)
    reach = distance + np.abs(u)
    axial = separation == 0.0
    touching = axial & (u == 0.0)
    safe_reach = np.where(touching, 1.0, reach)
    adding = direction * np.where(touching, other, u) >= 0.0
    # R - |u| written without cancellation
    argument = k * np.where(adding, safe_reach, separation**2 / safe_reach)
    si, ci = sici(np.where(argument > 0.0, argument, 1.0))
    integral = np.asarray(ci - 1j * (si - pi / 2.0), dtype=complex)
    integral[axial & ~adding] = -np.log(safe_reach[axial & ~adding])
    leading = np.euler_gamma + np.log(k) + 0.5j * pi
    at_tip = np.where(adding, leading, 0.0)
    return (direction * np.where(touching, at_tip, integral)).astype(complex, copy=False)


def _referred(
    at_maximum: ComplexArray, first_phase: FloatArray, second_phase: FloatArray, to: Reference
) -> ComplexArray:
    if to == "current_maximum":
        return at_maximum
    for phase in (first_phase, second_phase):
        current = np.abs(np.sin(phase))
        _require(
            "feed current over maximum current",
            current,
            current >= SMALLEST_FEED_CURRENT,
            SMALLEST_FEED_CURRENT,
            1.0,
        )
    impedance: ComplexArray = at_maximum / (np.sin(first_phase) * np.sin(second_phase))
    return impedance


def _positive_arrays(
    length_m: ArrayLike, other_m: ArrayLike, frequency_hz: ArrayLike
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Length, second length and wavenumber, broadcast together and checked."""
    length, other, frequency = (
        np.asarray(array, dtype=float)
        for array in np.broadcast_arrays(length_m, other_m, frequency_hz)
    )
    for quantity, values, unit in (
        ("length_m", length, "m"),
        ("radius or second length", other, "m"),
        ("frequency_hz", frequency, "Hz"),
    ):
        _require(quantity, values, (values > 0.0) & (values < inf), 0.0, inf, unit)
    return length, other, 2.0 * pi * frequency / SPEED_OF_LIGHT_M_PER_S


def _require(
    quantity: str,
    values: FloatArray,
    permitted: NDArray[np.bool_],
    low: float,
    high: float,
    unit: str = "",
) -> None:
    if not np.all(permitted):
        raise OutOfRange(quantity, float(values[~permitted].ravel()[0]), low, high, unit)
