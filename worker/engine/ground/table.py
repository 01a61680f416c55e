"""Table of the reflected potentials along a horizontal wire, one per frequency, ground, height."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.engine.ground.medium import Ground
from worker.engine.ground.panels import Panels, resolve
from worker.engine.ground.spectrum import Complex, Real
from worker.engine.limits import require_within

LOWEST_FREQUENCY_HZ: Final[float] = 1e3
HIGHEST_FREQUENCY_HZ: Final[float] = 1e12
LOWEST_HEIGHT_WAVELENGTHS: Final[float] = 0.01
HIGHEST_HEIGHT_WAVELENGTHS: Final[float] = 100.0
LONGEST_REACH_WAVELENGTHS: Final[float] = 12.0

UNSEEN_QUADRATURE_ERROR: Final[float] = 5e-8
"""What branch point and pole of the ground may add to the quadrature error of the perfect image.

Largest difference (4.1e-8) to rules of twice the nodes, beyond `quadrature_error`, over all named
grounds, 1.8 to 50 MHz, 0.01 to 3 wavelengths high, distances to 12 wavelengths;
`tests/benchmarks/ground.py` measures it.
"""

_MARGIN_WAVELENGTHS: Final[float] = 0.5
_MARGIN_HEIGHTS: Final[float] = 6.0

INTERPOLATION_TOLERANCE: Final[float] = 1e-6
"""Panels are halved until their error estimate, relative to the image potential, is below this."""


@dataclass(frozen=True, slots=True, eq=False)
class GroundTable:
    """Reflected potentials of a horizontal wire, by interpolation in the distance along it.

    Made by :func:`tabulate`. Source and observer both lie at `height_m`.

    Attributes
    ----------
    ground
        The ground under the wire.
    frequency_hz, height_m
        Frequency in Hz and height of the wire in m.
    reach_m
        Length in m of the longest wire the table serves. Distances a little beyond it (half a
        wavelength, or six heights if that is less) may be asked for, as interpolation between
        samples along the wire does.
    interpolation_error
        Estimated largest error of interpolation, relative to the image potential
        ``1 / (4 pi R1)``, ``R1 = sqrt(rho**2 + 4 h**2)``.
    quadrature_error
        Error of the spectral quadrature in the same units, measured on the perfect image with the
        same nodes; the largest of the samples.
    samples
        Distances at which the Sommerfeld integrals were evaluated.
    evaluations
        Bessel and Hankel functions evaluated for them.
    """

    ground: Ground
    frequency_hz: float
    height_m: float
    reach_m: float
    interpolation_error: float
    quadrature_error: float
    samples: int
    evaluations: int
    _edges_m: Real = field(repr=False)
    _vector: Complex = field(repr=False)
    _scalar: Complex = field(repr=False)

    @property
    def relative_error(self) -> float:
        """Interpolation and quadrature error together, relative to the image potential."""
        if self.ground.is_perfect:
            return 0.0
        return self.interpolation_error + self.quadrature_error + UNSEEN_QUADRATURE_ERROR

    def vector_potential(self, distance_m: ArrayLike) -> Complex:
        """Reflected part g_A of the vector potential's Green's function.

        Parameters
        ----------
        distance_m
            Distances rho along the wire in m, any shape, 0 to a little beyond `reach_m`.

        Returns
        -------
        numpy.ndarray
            g_A in 1/m, complex, of the same shape.

        Raises
        ------
        OutOfRange
            A distance is negative, beyond the reach, or not a number.
        """
        distance = self._checked(distance_m)
        return self._image(distance) * self._interpolated(self._vector, distance)

    def scalar_potential(self, distance_m: ArrayLike) -> Complex:
        """Reflected part g_Phi of the scalar potential's Green's function.

        Parameters
        ----------
        distance_m
            Distances rho along the wire in m, any shape, 0 to a little beyond `reach_m`.

        Returns
        -------
        numpy.ndarray
            g_Phi in 1/m, complex, of the same shape.

        Raises
        ------
        OutOfRange
            A distance is negative, beyond the reach, or not a number.
        """
        distance = self._checked(distance_m)
        return self._image(distance) * self._interpolated(self._scalar, distance)

    def _checked(self, distance_m: ArrayLike) -> Real:
        return require_within("distance_m", distance_m, 0.0, float(self._edges_m[-1]), "m")

    def _image(self, distance: Real) -> Complex:
        image_m: Real = np.hypot(distance, 2.0 * self.height_m)
        wavenumber = 2.0 * np.pi * self.frequency_hz / SPEED_OF_LIGHT_M_PER_S
        phase = np.asarray(-1j * wavenumber * image_m, dtype=np.complex128)
        return np.asarray(np.exp(phase) / (4.0 * np.pi * image_m), dtype=np.complex128)

    def _interpolated(self, coefficients: Complex, distance: Real) -> Complex:
        edges = self._edges_m
        panel = np.searchsorted(edges[1:-1], distance, side="right")
        low, high = edges[panel], edges[panel + 1]
        local = (2.0 * distance - low - high) / (high - low)
        value: Complex = coefficients[0, panel]
        for row in coefficients[1:]:
            value = value * local + row[panel]
        return value


def tabulate(ground: Ground, frequency_hz: float, height_m: float, reach_m: float) -> GroundTable:
    """Tabulate the reflected potentials for one frequency, ground and height.

    Parameters
    ----------
    ground
        The half space under the wire.
    frequency_hz
        Frequency in Hz, positive.
    height_m
        Height of the wire in m, 0.01 to 100 wavelengths.
    reach_m
        Largest distance along the wire in m, up to 12 wavelengths: the length of the longest wire.

    Returns
    -------
    GroundTable
        Usable for every wire of that height, whatever its radius, up to the reach in length.

    Raises
    ------
    OutOfRange
        An input lies outside its range.
    NotConverged
        A panel missed the tolerance after six halvings.

    Notes
    -----
    With ``g0(R) = exp(-j k R) / (4 pi R)`` the field along a straight wire is::

        E_x = -j omega mu0 int I(x') (g0 + g_A) dx' - d/dx (1 / eps0) int q(x') (g0 + g_Phi) dx'

    with ``q = j / omega dI/dx'``. What is tabulated is g_A and g_Phi over the image potential
    ``g0(R1)``, which leaves functions without the phase and the peak of the image. They are
    interpolated by Chebyshev polynomials in panels that double away from the source, where the
    length scale is the height, and are halved where the lateral wave makes them ripple. The error
    estimate is the sum of the last two Chebyshev coefficients.

    References
    ----------
    K. A. Michalski and J. R. Mosig, "Multilayered media Green's functions in integral equation
    formulations", IEEE Trans. Antennas Propag. 45, 1997.
    L. N. Trefethen, "Approximation Theory and Approximation Practice", 2013, ch. 3 and 8.
    """
    return tabulate_many(ground, [frequency_hz], [height_m], [reach_m])[0]


def tabulate_many(
    ground: Ground, frequency_hz: ArrayLike, height_m: ArrayLike, reach_m: ArrayLike
) -> tuple[GroundTable, ...]:
    """Tabulate the reflected potentials for many frequencies and heights over one ground.

    Parameters
    ----------
    ground
        The half space under the wires.
    frequency_hz, height_m, reach_m
        As for :func:`tabulate`; arrays that broadcast to shape (n,).

    Returns
    -------
    tuple of GroundTable
        n tables, in the order given.

    Raises
    ------
    OutOfRange
        An input lies outside its range.
    NotConverged
        A panel missed the tolerance after six halvings.

    Notes
    -----
    The integrals of all tables are evaluated together; error and cost of a table are its own.
    """
    frequency, height, reach = (
        np.atleast_1d(array)
        for array in np.broadcast_arrays(
            np.asarray(frequency_hz, dtype=np.float64),
            np.asarray(height_m, dtype=np.float64),
            np.asarray(reach_m, dtype=np.float64),
        )
    )
    wavelength = _wavelengths(frequency, height, reach)
    margin = np.minimum(_MARGIN_WAVELENGTHS * wavelength, _MARGIN_HEIGHTS * height)
    wavenumber = 2.0 * np.pi / wavelength
    reach_rad = wavenumber * (reach + margin)
    if ground.is_perfect:
        resolved = [_image_panels(value) for value in reach_rad.tolist()]
    else:
        eps = np.array([ground.complex_permittivity(value) for value in frequency.tolist()])
        resolved = resolve(eps, 2.0 * wavenumber * height, reach_rad, INTERPOLATION_TOLERANCE)
    return tuple(
        GroundTable(
            ground=ground,
            frequency_hz=float(frequency[index]),
            height_m=float(height[index]),
            reach_m=float(reach[index]),
            interpolation_error=panels.interpolation_error,
            quadrature_error=panels.quadrature_error,
            samples=panels.samples,
            evaluations=panels.evaluations,
            _edges_m=panels.edges_rad / wavenumber[index],
            _vector=panels.vector,
            _scalar=panels.scalar,
        )
        for index, panels in enumerate(resolved)
    )


def _wavelengths(frequency: Real, height: Real, reach: Real) -> Real:
    """Free-space wavelengths in m, once every input has been found in range."""
    require_within("frequency_hz", frequency, LOWEST_FREQUENCY_HZ, HIGHEST_FREQUENCY_HZ, "Hz")
    wavelength: Real = SPEED_OF_LIGHT_M_PER_S / frequency
    for quantity, value, low, high in (
        (
            "height_m",
            height,
            LOWEST_HEIGHT_WAVELENGTHS * wavelength,
            HIGHEST_HEIGHT_WAVELENGTHS * wavelength,
        ),
        ("reach_m", reach, np.zeros_like(wavelength), LONGEST_REACH_WAVELENGTHS * wavelength),
    ):
        slack = 1.0 + 1e-9
        wrong = ~((value * slack >= low) & (value <= high * slack) & (value > 0.0))
        if wrong.any():
            first = int(np.argmax(wrong))
            raise OutOfRange(
                quantity, float(value[first]), float(low[first]), float(high[first]), "m"
            )
    return wavelength


def _image_panels(reach_rad: float) -> Panels:
    """One panel on which both potentials are minus the image potential, exactly."""
    constant = np.full((1, 1), -1.0 + 0.0j)
    return Panels(np.array([0.0, reach_rad]), constant, constant, 0.0, 0.0, 0, 0)
