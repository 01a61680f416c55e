"""What the ground adds to the thin-wire equation, as the wire sees it."""

from __future__ import annotations

from collections.abc import Sequence
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


def reflected_matrices(
    ground: GroundBelow,
    mesh: Discretisation,
    nodes: FloatArray,
    weights: FloatArray,
    parity: int,
) -> tuple[ComplexArray, ComplexArray]:
    """Galerkin matrices of 4 pi g_A between currents and 4 pi g_Phi between charges.

    Parameters
    ----------
    ground
        Under each wire.
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
    half_length = mesh.breaks_m[:, -1]
    wavelength = 2.0 * pi / mesh.wavenumber_per_m
    spacing = np.minimum(_SPACING_WAVELENGTHS * wavelength, _SPACING_HEIGHTS * ground.height_m)
    cells = max(int(np.ceil(np.max(half_length / spacing))), 1)
    step = half_length / cells
    gather = np.swapaxes(_interpolation(nodes / step[:, None], cells), 1, 2)
    index = np.arange(1 - _STENCIL // 2, cells + _STENCIL // 2 + 1)
    distance = step[:, None] * np.arange(2 * (cells + _STENCIL // 2) + 1)
    vector, scalar = ground.both(distance)
    matrices = []
    for moments, potential, sign in (
        (mesh.test_current(gather * weights[:, None, :]), vector, parity),
        (mesh.test_charge(gather), scalar, -parity),
    ):
        values = 4.0 * pi * potential
        kernel = values[:, np.abs(index[:, None] - index)]
        kernel = kernel + sign * values[:, np.abs(index[:, None] + index)]
        turned = np.swapaxes(moments, 1, 2)
        matrices.append(turned @ kernel.real @ moments + 1j * (turned @ kernel.imag @ moments))
    return matrices[0], matrices[1]


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
