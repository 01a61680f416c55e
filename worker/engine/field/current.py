"""A wire's current as a source of radiation: its Fourier transform along the wire."""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, pi
from typing import Final, TypeAlias

import numpy as np
from numpy.typing import NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.engine.ground import Ground
from worker.engine.limits import require_magnitude_within, require_within

Real: TypeAlias = NDArray[np.float64]
Complex: TypeAlias = NDArray[np.complex128]

LOWEST_FREQUENCY_HZ: Final[float] = 1e3
HIGHEST_FREQUENCY_HZ: Final[float] = 1e12
HIGHEST_HEIGHT_WAVELENGTHS: Final[float] = 100.0
LONGEST_WIRE_WAVELENGTHS: Final[float] = 100.0
WIDEST_SPACING_WAVELENGTHS: Final[float] = 0.25

_LARGEST_CURRENT_A: Final[float] = 1e12


@dataclass(frozen=True, slots=True, eq=False)
class RadiatingWire:
    """Current on a straight horizontal wire, above ground or in free space.

    Parameters
    ----------
    position_m
        Positions along the wire from its centre in m, strictly increasing, shape (n,), n >= 2.
    current_a
        Complex peak phasors of the current there in A, shape (n,).
    frequency_hz
        Frequency in Hz.
    ground
        The half space below; None is free space.
    height_m
        Height above ground in m, up to 100 wavelengths; without meaning in free space.
    weight_m
        Integration weights in m, shape (n,), where the positions are nodes of a quadrature rule.
        None: the positions run from end to end, no more than a quarter wave apart, and between
        two of them the current is taken as the sinusoid of the free-space wavenumber through both.

    Raises
    ------
    OutOfRange
        A value lies outside its range, shapes differ, or positions do not increase.
    """

    position_m: Real
    current_a: Complex
    frequency_hz: float
    ground: Ground | None = None
    height_m: float = 0.0
    weight_m: Real | None = None

    def __post_init__(self) -> None:
        require_within(
            "frequency_hz", self.frequency_hz, LOWEST_FREQUENCY_HZ, HIGHEST_FREQUENCY_HZ, "Hz"
        )
        longest = LONGEST_WIRE_WAVELENGTHS * self.wavelength_m
        position = require_within("position_m", self.position_m, -longest, longest, "m")
        current = require_magnitude_within(
            "current_a", self.current_a, 0.0, _LARGEST_CURRENT_A, "A"
        )
        if position.ndim != 1 or position.size < 2:
            raise OutOfRange("number of positions", position.size, 2, np.inf)
        if current.shape != position.shape:
            raise OutOfRange("number of currents", current.size, position.size, position.size)
        object.__setattr__(self, "position_m", position)
        object.__setattr__(self, "current_a", current)
        widest = WIDEST_SPACING_WAVELENGTHS * self.wavelength_m
        if self.weight_m is not None:
            widest = 2.0 * longest
            weight = require_within("weight_m", self.weight_m, -longest, longest, "m")
            if weight.shape != position.shape:
                raise OutOfRange("number of weights", weight.size, position.size, position.size)
            object.__setattr__(self, "weight_m", weight)
        steps = np.diff(position)
        require_within("spacing of position_m", steps, 1e-12 * longest, widest, "m")
        if self.ground is not None:
            highest = HIGHEST_HEIGHT_WAVELENGTHS * self.wavelength_m
            require_within("height_m", self.height_m, 0.0, highest, "m")

    @property
    def wavelength_m(self) -> float:
        """Free-space wavelength in m."""
        return SPEED_OF_LIGHT_M_PER_S / self.frequency_hz

    @property
    def wavenumber_per_m(self) -> float:
        """Free-space wavenumber in rad/m."""
        return 2.0 * pi / self.wavelength_m

    @property
    def half_length_rad(self) -> float:
        """Phase length from the centre to the farther end in rad."""
        return self.wavenumber_per_m * float(np.max(np.abs(self.position_m)))

    @property
    def height_rad(self) -> float:
        """Phase length of the height in rad, zero in free space."""
        return 0.0 if self.ground is None else self.wavenumber_per_m * self.height_m

    def moment(self) -> RadiationVector:
        """Current moment towards every direction.

        Returns
        -------
        RadiationVector
            ``N(c) = integral of I(x) exp(j k x c) dx`` for c = cosine of the angle to the wire.
        """
        # N is entire of exponential type kL/2: Chebyshev coefficients beyond that order vanish
        # faster than any power.
        degree = ceil(self.half_length_rad) + 30
        cosine = np.polynomial.chebyshev.chebpts1(degree + 1)
        wavenumber = self.wavenumber_per_m * cosine
        value = (
            self._sampled(wavenumber)
            if self.weight_m is None
            else self._weighted(wavenumber, self.weight_m)
        )
        series = np.polynomial.chebyshev.chebvander(cosine, degree).T @ value
        series *= 2.0 / (degree + 1)
        series[0] *= 0.5
        return RadiationVector(series)

    def mean_square_current_a2_m(self) -> float:
        """Integral of the squared magnitude of the current along the wire in A²·m."""
        current = np.asarray(self.current_a, dtype=np.complex128)
        if self.weight_m is not None:
            return float(np.sum(self.weight_m * np.abs(current) ** 2))
        k = self.wavenumber_per_m
        step = np.diff(self.position_m)
        sine = np.sin(k * step)
        own = (0.5 * step - np.sin(2.0 * k * step) / (4.0 * k)) / sine**2
        mutual = (sine - k * step * np.cos(k * step)) / (2.0 * k * sine**2)
        first, last = current[:-1], current[1:]
        squares = np.abs(first) ** 2 + np.abs(last) ** 2
        return float(np.sum(own * squares + 2.0 * mutual * (first * np.conj(last)).real))

    def _weighted(self, wavenumber: Real, weight: Real) -> Complex:
        phase = np.exp(1j * np.multiply.outer(wavenumber, self.position_m))
        return np.asarray(phase @ (weight * self.current_a), dtype=np.complex128)

    def _sampled(self, wavenumber: Real) -> Complex:
        """Sum the exact transforms of the sinusoids between neighbouring positions."""
        k = self.wavenumber_per_m
        start, step = self.position_m[:-1], np.diff(self.position_m)
        kappa = wavenumber[:, None]
        forward, backward = _exponential(kappa + k, step), _exponential(kappa - k, step)
        rising = (forward - backward) / 2j
        falling = np.exp(1j * kappa * step) * (np.conj(backward) - np.conj(forward)) / 2j
        value = falling * self.current_a[:-1] + rising * self.current_a[1:]
        value = value * np.exp(1j * kappa * start) / np.sin(k * step)
        return np.asarray(value.sum(axis=1), dtype=np.complex128)


@dataclass(frozen=True, slots=True, eq=False)
class RadiationVector:
    """Current moment as a Chebyshev series in the cosine of the angle to the wire.

    Attributes
    ----------
    series
        Complex coefficients in A·m.
    """

    series: Complex

    def __call__(self, cosine: Real) -> Complex:
        """Current moment in A·m towards directions whose cosine to the wire is given."""
        return np.asarray(np.polynomial.chebyshev.chebval(cosine, self.series))


def _exponential(q: Real, step: Real) -> Complex:
    """Integral of exp(j q s) over s from 0 to step."""
    half = 0.5 * q * step
    return np.asarray(step * np.exp(1j * half) * np.sinc(half / pi), dtype=np.complex128)
