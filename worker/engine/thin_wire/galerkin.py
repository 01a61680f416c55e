"""Galerkin solution of half wires of one mesh shape: their admittances at the ports.

A straight wire alone or over flat ground is symmetric about its centre, so any current is the sum
of an even and an odd one that do not interact; each is found on half the wire, with the kernel of
the other half added or subtracted. A centre-fed wire needs the even one only.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import pi

import numpy as np
from numpy.typing import NDArray

from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM
from worker.engine.thin_wire.discretisation import Discretisation
from worker.engine.thin_wire.gap import smooth_source
from worker.engine.thin_wire.potential import tube_potentials
from worker.engine.thin_wire.reflection import GroundBelow, reflected_matrices

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class PortSolution:
    """Response to a volt from the smooth source at each port in turn.

    Attributes
    ----------
    admittance
        Port admittance matrices (B, P, P).
    coarse_admittance
        The same without the highest degree, for the error estimate.
    even, odd
        Coefficients (B, unknowns, P) of the currents; odd is zero where all ports are central.
    current_products
        Integrals (B, P, P) along the wire of the product of the currents of two ports.
    """

    admittance: ComplexArray
    coarse_admittance: ComplexArray
    even: ComplexArray
    odd: ComplexArray
    current_products: ComplexArray


def solve_ports(
    mesh: Discretisation,
    port_position_m: FloatArray,
    gap_m: FloatArray,
    sigma_m: FloatArray,
    ground: GroundBelow | None,
) -> PortSolution:
    """Solve for a volt at each port in turn.

    Parameters
    ----------
    mesh
        B half wires.
    port_position_m
        Signed positions from the centre, (B, P).
    gap_m
        Gap widths (B,).
    sigma_m
        Widths of the smooth sources, (B, P).
    ground
        Under each wire, or None in free space.
    """
    nodes, weights = mesh.nodes(), mesh.weights()
    direct, mirrored = tube_potentials(mesh, nodes)
    gap, sigma = gap_m[:, None, None], sigma_m[:, :, None]
    here = smooth_source(nodes[:, None, :] - port_position_m[:, :, None], gap, sigma)
    there = smooth_source(nodes[:, None, :] + port_position_m[:, :, None], gap, sigma)
    low = np.tile(np.arange(mesh.element.degree) < mesh.element.degree - 1, mesh.elements)
    count, ports = port_position_m.shape
    admittance = np.zeros((count, ports, ports), dtype=complex)
    coarse_admittance = np.zeros_like(admittance)
    products = np.zeros_like(admittance)
    # Over both halves; symmetric, as the rest is made to be.
    half = mesh.overlap(weights)
    overlap = half + np.swapaxes(half, 1, 2)
    currents = {parity: np.zeros((count, mesh.unknowns, ports), complex) for parity in (1, -1)}
    for parity in (1, -1) if np.any(port_position_m) else (1,):
        matrix = _matrix(mesh, nodes, weights, direct, mirrored, parity, ground)
        matrix += mesh.wire_impedance_ohm_per_m[:, None, None] * overlap
        source = mesh.test_current((here + parity * there) * weights[:, None, :])
        # An odd current vanishes at the centre, so its first unknown goes.
        kept = np.ones(mesh.unknowns, dtype=bool)
        kept[0] = parity == 1
        coarse_admittance += _respond(matrix, source, np.nonzero(kept & low)[0])[0]
        all_kept = np.nonzero(kept)[0]
        response, solution = _respond(matrix, source, all_kept)
        admittance += response
        currents[parity][:, all_kept] = solution
        along = currents[parity]
        products += np.swapaxes(along, 1, 2) @ (overlap @ along)
    return PortSolution(admittance, coarse_admittance, currents[1], currents[-1], products)


def _respond(
    matrix: ComplexArray, source: FloatArray, kept: NDArray[np.intp]
) -> tuple[ComplexArray, ComplexArray]:
    """Admittances (B, P, P) and coefficients (B, kept, P) with the kept unknowns only."""
    part = np.swapaxes(source[..., kept], 1, 2)
    block = matrix if kept.size == matrix.shape[1] else matrix[:, kept[:, None], kept]
    solution = np.linalg.solve(block, part).astype(complex, copy=False)
    return np.swapaxes(part, 1, 2) @ solution, solution


def _matrix(
    mesh: Discretisation,
    nodes: FloatArray,
    weights: FloatArray,
    direct: FloatArray,
    mirrored: FloatArray,
    parity: int,
    ground: GroundBelow | None,
) -> ComplexArray:
    r"""Galerkin matrices (B, N, N) of currents of one parity, over the whole wire.

    Notes
    -----
    With :math:`f_m` the basis continued to the other half,

    .. math::

        A_{mn} = \frac{j\eta}{4\pi} \Big[ k \iint f_m f_n (K + 4\pi g_A)
                 - \frac1k \iint f_m' f_n' (K + 4\pi g_\Phi) \Big],

    twice the integrals over half the wire, with the kernel to the mirrored half added for an even
    function and subtracted for an odd one; the charge of an even current is odd.
    """
    together, apart = direct + mirrored, direct - mirrored
    if parity < 0:
        together, apart = apart, together
    magnetic = _both_sides(lambda kernel: mesh.test_current(kernel * weights[:, None]), together)
    electric = _both_sides(mesh.test_charge, apart)
    if ground is not None:
        extra = reflected_matrices(ground, mesh, nodes, weights, parity)
        magnetic += extra[0]
        electric += extra[1]
    k = mesh.wavenumber_per_m[:, None, None]
    matrix = (0.5j * FREE_SPACE_IMPEDANCE_OHM / pi) * (k * magnetic - electric / k)
    symmetric: ComplexArray = 0.5 * (matrix + np.swapaxes(matrix, 1, 2))
    return symmetric


def _both_sides(
    test: Callable[[FloatArray], FloatArray], stacked: FloatArray
) -> NDArray[np.complex128]:
    """Test a kernel (2, B, Q, Q), real and minus imaginary part stacked, on both sides."""
    real, negative = test(np.ascontiguousarray(np.swapaxes(test(stacked), -1, -2)))
    result: ComplexArray = real - 1j * negative
    return result
