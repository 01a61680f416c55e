"""Galerkin solution of half wires of one mesh shape: their admittances at the ports.

A straight wire alone or over flat ground is symmetric about its centre, so any current is the sum
of an even and an odd one that do not interact; each is found on half the wire, with the kernel of
the other half added or subtracted. A centre-fed wire needs the even one only.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
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


@dataclass(frozen=True, slots=True)
class Condition:
    """What may change about B wires while their shape stays: the ground below, and the metal.

    Attributes
    ----------
    ground
        Under each wire, or None in free space.
    wire_impedance_ohm_per_m
        Series impedance of each wire, (B,).
    """

    ground: GroundBelow | None
    wire_impedance_ohm_per_m: ComplexArray

    def __getitem__(self, rows: NDArray[np.intp]) -> Condition:
        """The condition of some of the wires."""
        ground = None if self.ground is None else self.ground[rows]
        return Condition(ground, self.wire_impedance_ohm_per_m[rows])


def solve_ports(
    mesh: Discretisation,
    port_position_m: FloatArray,
    gap_m: FloatArray,
    sigma_m: FloatArray,
    conditions: Sequence[Condition],
) -> list[PortSolution]:
    """Solve for a volt at each port in turn, under each condition.

    What wires do to themselves costs most, and is found once for all conditions.

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
    conditions
        One solution is given for each.
    """
    nodes, weights = mesh.nodes(), mesh.weights()
    direct, mirrored = tube_potentials(mesh, nodes)
    gap, sigma = gap_m[:, None, None], sigma_m[:, :, None]
    here = smooth_source(nodes[:, None, :] - port_position_m[:, :, None], gap, sigma)
    there = smooth_source(nodes[:, None, :] + port_position_m[:, :, None], gap, sigma)
    low = np.tile(np.arange(mesh.element.degree) < mesh.element.degree - 1, mesh.elements)
    # Over both halves; symmetric, as the rest is made to be.
    half = mesh.overlap(weights)
    overlap = half + np.swapaxes(half, 1, 2)
    grounds = [each.ground for each in conditions if each.ground is not None]
    answers = [_Answer(mesh, port_position_m.shape) for _ in conditions]
    for parity in (1, -1) if np.any(port_position_m) else (1,):
        alone = _matrix_alone(mesh, weights, direct, mirrored, parity)
        below = iter(reflected_matrices(grounds, mesh, nodes, weights, parity))
        source = mesh.test_current((here + parity * there) * weights[:, None, :])
        # An odd current vanishes at the centre, so its first unknown goes.
        kept = np.ones(mesh.unknowns, dtype=bool)
        kept[0] = parity == 1
        for condition, answer in zip(conditions, answers, strict=True):
            magnetic, electric = alone
            if condition.ground is not None:
                extra = next(below)
                magnetic, electric = magnetic + extra[0], electric + extra[1]
            matrix = _impedance_matrix(mesh, magnetic, electric)
            matrix += condition.wire_impedance_ohm_per_m[:, None, None] * overlap
            answer.add(parity, matrix, source, kept, low, overlap)
    return [answer.solution() for answer in answers]


class _Answer:
    """Gathers what the even and the odd current answer under one condition."""

    def __init__(self, mesh: Discretisation, shape: tuple[int, ...]) -> None:
        count, ports = shape
        self._admittance = np.zeros((count, ports, ports), dtype=complex)
        self._coarse = np.zeros_like(self._admittance)
        self._products = np.zeros_like(self._admittance)
        self._currents = {
            parity: np.zeros((count, mesh.unknowns, ports), dtype=complex) for parity in (1, -1)
        }

    def add(
        self,
        parity: int,
        matrix: ComplexArray,
        source: FloatArray,
        kept: NDArray[np.bool_],
        low: NDArray[np.bool_],
        overlap: FloatArray,
    ) -> None:
        self._coarse += _respond(matrix, source, np.nonzero(kept & low)[0])[0]
        all_kept = np.nonzero(kept)[0]
        response, solution = _respond(matrix, source, all_kept)
        self._admittance += response
        along = self._currents[parity]
        along[:, all_kept] = solution
        self._products += np.swapaxes(along, 1, 2) @ (overlap @ along)

    def solution(self) -> PortSolution:
        return PortSolution(
            self._admittance, self._coarse, self._currents[1], self._currents[-1], self._products
        )


def _respond(
    matrix: ComplexArray, source: FloatArray, kept: NDArray[np.intp]
) -> tuple[ComplexArray, ComplexArray]:
    """Admittances (B, P, P) and coefficients (B, kept, P) with the kept unknowns only."""
    part = np.swapaxes(source[..., kept], 1, 2)
    block = matrix if kept.size == matrix.shape[1] else matrix[:, kept[:, None], kept]
    solution = np.linalg.solve(block, part).astype(complex, copy=False)
    return np.swapaxes(part, 1, 2) @ solution, solution


def _matrix_alone(
    mesh: Discretisation,
    weights: FloatArray,
    direct: FloatArray,
    mirrored: FloatArray,
    parity: int,
) -> tuple[ComplexArray, ComplexArray]:
    r"""Magnetic and electric matrices (B, N, N) of currents of one parity in free space.

    Notes
    -----
    With :math:`f_m` the basis continued to the other half, they are the double integrals in

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
    return magnetic, _both_sides(mesh.test_charge, apart)


def _impedance_matrix(
    mesh: Discretisation, magnetic: ComplexArray, electric: ComplexArray
) -> ComplexArray:
    """Galerkin matrices (B, N, N), made as symmetric as they should be."""
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
