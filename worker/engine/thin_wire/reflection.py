"""What the ground adds to the thin-wire equation, as the wire sees it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import factorial, pi
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from worker.engine.thin_wire.discretisation import Discretisation

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

# Interpolation on a uniform grid by polynomials of this many points.
_STENCIL = 8
# Grid spacing: at most these fractions of the wavelength and of the height.
_SPACING_WAVELENGTHS = 0.05
_SPACING_HEIGHTS = 0.7


class ReflectedPotentials(Protocol):
    r"""Reflected Green's functions between two points of one horizontal wire.

    One object stands for one frequency and one height over one ground, and serves every length
    and radius of wire hung there.

    Notes
    -----
    The mixed-potential equation, with :math:`g_0 = e^{-jkR}/(4\pi R)` and time convention
    :math:`e^{+j\omega t}`, reads

    .. math::

        E_x = -j\omega\mu_0 \int I (g_0 + g_A)\,dx'
              - \frac{d}{dx} \frac{1}{\varepsilon_0} \int q\,(g_0 + g_\Phi)\,dx',
        \qquad q = -\frac{1}{j\omega} \frac{dI}{dx'}.

    Over a perfect conductor both functions are :math:`-e^{-jkR_1}/(4\pi R_1)` with
    :math:`R_1 = \sqrt{\rho^2 + (2h)^2}`.
    """

    @property
    def frequency_hz(self) -> float:
        """Frequency the potentials hold for."""

    @property
    def height_m(self) -> float:
        """Height of the wire's axis; twice it is the shortest length on which they vary."""

    def vector_potential(self, distance_m: FloatArray) -> ComplexArray:
        """Reflected vector-potential function g_A (1/m) at horizontal distances >= 0."""

    def scalar_potential(self, distance_m: FloatArray) -> ComplexArray:
        """Reflected scalar-potential function g_Phi (1/m) at horizontal distances >= 0."""


@dataclass(frozen=True, slots=True)
class GroundBelow:
    """The ground under each of B wires that hang at one height: its potentials, and which.

    Attributes
    ----------
    potentials
        One a frequency.
    which
        Index into them for each wire, (B,).
    """

    potentials: Sequence[ReflectedPotentials]
    which: NDArray[np.intp]

    @property
    def height_m(self) -> float:
        """Height of the wires."""
        return float(self.potentials[0].height_m)

    def __getitem__(self, rows: NDArray[np.intp]) -> GroundBelow:
        """The ground under some of the wires."""
        return GroundBelow(self.potentials, self.which[rows])

    def both(self, distance_m: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """Vector and scalar potential functions (1/m) at distances (B, n) along each wire."""
        vector = np.empty(distance_m.shape, dtype=complex)
        scalar = np.empty_like(vector)
        for index in np.unique(self.which):
            rows = np.nonzero(self.which == index)[0]
            potentials = self.potentials[int(index)]
            vector[rows] = potentials.vector_potential(distance_m[rows])
            scalar[rows] = potentials.scalar_potential(distance_m[rows])
        return vector, scalar


@dataclass(frozen=True, slots=True)
class Rescaled:
    """Potentials as seen by a wire measured in other metres, at another frequency.

    A wire and its ground look the same where every length goes as the wavelength.

    Attributes
    ----------
    potentials
        As they are.
    scale
        Metres of theirs to one metre of the wire's.
    """

    potentials: ReflectedPotentials
    scale: float

    @property
    def frequency_hz(self) -> float:
        """Frequency at which the wire's metres are as many wavelengths as theirs."""
        return self.potentials.frequency_hz * self.scale

    @property
    def height_m(self) -> float:
        """Height in the wire's metres."""
        return self.potentials.height_m / self.scale

    def vector_potential(self, distance_m: FloatArray) -> ComplexArray:
        """g_A per metre of the wire's."""
        return self.scale * self.potentials.vector_potential(self.scale * distance_m)

    def scalar_potential(self, distance_m: FloatArray) -> ComplexArray:
        """g_Phi per metre of the wire's."""
        return self.scale * self.potentials.scalar_potential(self.scale * distance_m)


def reflected_matrices(
    grounds: Sequence[GroundBelow],
    mesh: Discretisation,
    nodes: FloatArray,
    weights: FloatArray,
    parity: int,
) -> Iterator[tuple[ComplexArray, ComplexArray]]:
    """Galerkin matrices of 4 pi g_A between currents and 4 pi g_Phi between charges.

    Parameters
    ----------
    grounds
        Some that may be under the wires; a pair of matrices is given for each.
    mesh, nodes, weights
        B half wires with their nodes and weights (B, Q).
    parity
        +1 for an even current, -1 for an odd one.

    Notes
    -----
    The reflected functions are smooth on the scale of the height, so the basis functions are
    first gathered on a uniform grid by interpolation. On it the kernel between two points of half
    a wire is a Toeplitz matrix and the kernel to the other half a Hankel matrix, and both come
    from one row of values.
    """
    if not grounds:
        return
    half_length = mesh.breaks_m[:, -1]
    wavelength = 2.0 * pi / mesh.wavenumber_per_m
    height = min(ground.height_m for ground in grounds)
    spacing = np.minimum(_SPACING_WAVELENGTHS * wavelength, _SPACING_HEIGHTS * height)
    cells = max(int(np.ceil(np.max(half_length / spacing))), 1)
    step = half_length / cells
    gather = np.swapaxes(_interpolation(nodes / step[:, None], cells), 1, 2)
    index = np.arange(1 - _STENCIL // 2, cells + _STENCIL // 2 + 1)
    apart, across = np.abs(index[:, None] - index), np.abs(index[:, None] + index)
    distance = step[:, None] * np.arange(2 * (cells + _STENCIL // 2) + 1)
    moments = (mesh.test_current(gather * weights[:, None, :]), mesh.test_charge(gather))
    for ground in grounds:
        pair = []
        for moment, potential, sign in zip(
            moments, ground.both(distance), (parity, -parity), strict=True
        ):
            # Real and imaginary part apart: the moments are real, and so are twice as quick.
            values = 4.0 * pi * np.stack([potential.real, potential.imag])
            kernel = values[..., apart]
            kernel += sign * values[..., across]
            real, imaginary = np.swapaxes(moment, 1, 2) @ (kernel @ moment)
            pair.append(real + 1j * imaginary)
        yield pair[0], pair[1]


def _interpolation(position: FloatArray, cells: int) -> FloatArray:
    """Weights (B, Q, nodes) that interpolate from grid nodes -margin to cells + margin + 1."""
    margin = _STENCIL // 2 - 1
    cell = np.clip(np.floor(position), 0.0, cells)
    offset = position - cell
    nodes = np.arange(-margin, _STENCIL // 2 + 1, dtype=float)
    weights = np.empty((*position.shape, _STENCIL))
    for i in range(_STENCIL):
        others = np.delete(nodes, i)
        scale = factorial(i) * factorial(_STENCIL - 1 - i) * (-1.0) ** (_STENCIL - 1 - i)
        weights[..., i] = np.prod(offset[..., None] - others, axis=-1) / scale
    gather = np.zeros((*position.shape, cells + _STENCIL))
    np.put_along_axis(
        gather, cell.astype(np.intp)[..., None] + np.arange(_STENCIL), weights, axis=-1
    )
    return gather
