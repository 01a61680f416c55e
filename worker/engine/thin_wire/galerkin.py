"""Galerkin matrices of half wires of one mesh shape, and their admittances at the ports.

A straight wire alone or over flat ground is symmetric about its centre, so any current is the sum
of an even and an odd one that do not interact; each is found on half the wire, with the kernel of
the other half added or subtracted. A centre-fed wire needs the even one only.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np
from numpy.typing import NDArray

from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM
from worker.engine.thin_wire.basis import (
    END_ELEMENT_RADII,
    ReferenceElement,
    end_kernel,
    product_kernel,
)
from worker.engine.thin_wire.gap import smooth_source
from worker.engine.thin_wire.reflection import ReflectedPotentials, reflected_matrices
from worker.engine.thin_wire.tube_kernel import distant_kernel

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

# A target closer than this, in half lengths from the middle of the source element, goes by
# product integration.
_NEAR = 2.2
# (ka)^2 below which the width of the kernel's dynamic part is left out.
_NEGLIGIBLE_WIDTH = 1e-6


@dataclass(frozen=True, slots=True)
class Discretisation:
    """Half wires cut into the same number of elements of the same degree.

    Wires and elements: `breaks_m` (B, elements + 1), `radius_m`, `wavenumber_per_m`,
    `wire_impedance_ohm_per_m` (B,).
    """

    element: ReferenceElement
    breaks_m: FloatArray
    radius_m: FloatArray
    wavenumber_per_m: FloatArray
    wire_impedance_ohm_per_m: ComplexArray

    @property
    def elements(self) -> int:
        """Number of elements on half a wire."""
        return int(self.breaks_m.shape[1]) - 1

    def points(self) -> FloatArray:
        """Gauss points (B, elements * points), measured from the wire's centre."""
        middle = (self.breaks_m[:, 1:-1] + self.breaks_m[:, :-2]) / 2.0
        half = self._half_lengths()
        inner = middle[:, :, None] + half[:, :, None] * self.element.node
        end = self.breaks_m[:, -1:] - END_ELEMENT_RADII * np.outer(
            self.radius_m, self._end_root() ** 2
        )
        return np.concatenate([inner.reshape(len(inner), -1), end], axis=1)

    def jacobian(self) -> FloatArray:
        """Length per unit of tau at each Gauss point."""
        inner = np.repeat(self._half_lengths(), self.element.node.size, axis=1)
        end = END_ELEMENT_RADII * np.outer(self.radius_m, self._end_root())
        return np.concatenate([inner, end], axis=1)

    def _half_lengths(self) -> FloatArray:
        return (self.breaks_m[:, 1:-1] - self.breaks_m[:, :-2]) / 2.0

    def _end_root(self) -> FloatArray:
        return (1.0 - self.element.node) / 2.0


@dataclass(frozen=True, slots=True)
class PortSolution:
    """Currents per volt at the ports, and the admittance matrices of the smooth sources.

    `admittance` and `coarse_admittance` have shape (B, P, P); the latter leaves out the highest
    degree, for the error estimate. `coefficients` maps parity (+1, -1) to (B, unknowns, P).
    """

    admittance: ComplexArray
    coarse_admittance: ComplexArray
    coefficients: dict[int, ComplexArray]


def solve_ports(
    mesh: Discretisation,
    port_position_m: FloatArray,
    gap_m: FloatArray,
    sigma_m: FloatArray,
    reflected: ReflectedPotentials | None,
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
    reflected
        Ground, or None in free space.
    """
    element = mesh.element
    z, jacobian = mesh.points(), mesh.jacobian()
    direct, mirrored = _potential_kernels(mesh, z)
    value, slope = assembled_shapes(element, mesh.elements)
    weight = np.tile(element.weight, mesh.elements)
    charge = slope * weight[:, None]
    current = (value * weight[:, None])[None] * jacobian[:, :, None]
    distance = z[:, :, None] - port_position_m[:, None, :]
    opposite = z[:, :, None] + port_position_m[:, None, :]
    gap, sigma = gap_m[:, None, None], sigma_m[:, None, :]
    here, there = smooth_source(distance, gap, sigma), smooth_source(opposite, gap, sigma)
    centred = not np.any(port_position_m)
    k = mesh.wavenumber_per_m[:, None, None]
    order = _shape_orders(element.degree, mesh.elements)
    ports = port_position_m.shape[1]
    admittance = np.zeros((len(z), ports, ports), dtype=complex)
    coarse_admittance = np.zeros_like(admittance)
    coefficients: dict[int, ComplexArray] = {}
    for parity in (1,) if centred else (1, -1):
        kept = np.arange(value.shape[1]) if parity == 1 else np.arange(1, value.shape[1])
        test = np.ascontiguousarray(charge[:, kept])
        moving = current[:, :, kept]
        magnetic = _sandwich(moving, direct + parity * mirrored)
        electric = _sandwich(test[None], direct - parity * mirrored)
        if reflected is not None:
            extra = reflected_matrices(reflected, z, moving, test, mesh.breaks_m[:, -1], parity)
            magnetic += extra[0]
            electric += extra[1]
        scale = 0.5j * FREE_SPACE_IMPEDANCE_OHM / pi
        matrix: ComplexArray = scale * (k * magnetic - electric / k)
        overlap = np.swapaxes(moving, 1, 2) @ value[:, kept]
        matrix = matrix + 2.0 * mesh.wire_impedance_ohm_per_m[:, None, None] * overlap
        matrix = 0.5 * (matrix + np.swapaxes(matrix, 1, 2))
        source = np.swapaxes(moving, 1, 2) @ (here + parity * there)
        solution: ComplexArray = np.linalg.solve(matrix, source).astype(complex, copy=False)
        admittance += np.swapaxes(source, 1, 2) @ solution
        coefficients[parity] = solution
        low = np.nonzero(order[kept] < element.degree)[0]
        coarse = np.linalg.solve(matrix[:, low[:, None], low], source[:, low])
        coarse_admittance += np.swapaxes(source[:, low], 1, 2) @ coarse
    return PortSolution(admittance, coarse_admittance, coefficients)


def assembled_shapes(element: ReferenceElement, elements: int) -> tuple[FloatArray, FloatArray]:
    """Values and slopes d/dtau of the continuous basis at all Gauss points of half a wire.

    Returns
    -------
    Two arrays of shape (elements * points, elements * degree). Column e * degree belongs to the
    boundary where element e starts; the boundary at the open end, where no current flows, is
    left out.
    """
    degree, points = element.degree, element.node.size
    value = np.zeros((elements * points, elements * degree + 1))
    slope = np.zeros_like(value)
    for e in range(elements):
        rows = slice(e * points, (e + 1) * points)
        columns = slice(e * degree, (e + 1) * degree + 1)
        value[rows, columns] += element.value
        slope[rows, columns] += element.slope
    return value[:, :-1], slope[:, :-1]


def _shape_orders(degree: int, elements: int) -> NDArray[np.intp]:
    return np.tile(np.concatenate([[1], np.arange(2, degree + 1)]), elements).astype(np.intp)


def _sandwich(shapes: FloatArray, kernel: FloatArray) -> ComplexArray:
    """Galerkin matrices (B, N, N) of a kernel whose real and imaginary parts are stacked."""
    real, imaginary = np.swapaxes(shapes, 1, 2) @ kernel @ shapes
    result: ComplexArray = real + 1j * imaginary
    return result


def _potential_kernels(mesh: Discretisation, z: FloatArray) -> tuple[FloatArray, FloatArray]:
    r"""Averaged exp(-jkR)/R between Gauss points, and between Gauss points and mirror points.

    Returns
    -------
    Two arrays of shape (2, B, Q, Q): real and imaginary parts stacked.

    Notes
    -----
    :math:`\langle e^{-jkR}/R \rangle` is taken as :math:`\cos(kR_2)\langle 1/R \rangle -
    j \sin(kR_2)/R_2` with :math:`R_2^2 = z^2 + 2a^2`, whose static factor is exact. What this
    misses is :math:`-\tfrac12 k^2 \langle (4a^2\sin^2(\phi/2) - 2a^2)/R \rangle`, a peak as
    narrow as the radius, added where (ka)^2 is not negligible, and terms in (ka)^4.
    """
    radius_squared = (mesh.radius_m**2)[:, None, None]
    k = mesh.wavenumber_per_m[:, None, None]
    thick = bool(np.max(mesh.wavenumber_per_m * mesh.radius_m) ** 2 > _NEGLIGIBLE_WIDTH)
    kernels = []
    for mirrored in (False, True):
        other = z[:, None, :]
        offset = z[:, :, None] + other if mirrored else z[:, :, None] - other
        offset *= offset
        offset += 2.0 * radius_squared
        distance = np.sqrt(offset, out=offset)
        kernel = np.empty((2, *distance.shape))
        real, imaginary = kernel
        static = distant_kernel(distance, radius_squared)
        pairs = _near_pairs(mesh.elements, mirrored=mirrored)
        _put_near_kernel(static, mesh, z, pairs)
        phase = k * distance
        np.sin(phase, out=imaginary)
        imaginary /= distance
        np.negative(imaginary, out=imaginary)
        np.cos(phase, out=real)
        real *= static
        if thick:
            peak = np.zeros_like(static)
            _put_near_kernel(peak, mesh, z, pairs, width=True)
            real -= 0.5 * k * k * radius_squared * peak
        kernels.append(kernel)
    return kernels[0], kernels[1]


@dataclass(frozen=True, slots=True)
class _Pairs:
    target: NDArray[np.intp]
    source: NDArray[np.intp]
    sign: float


def _near_pairs(elements: int, *, mirrored: bool) -> _Pairs:
    """Element pairs, the source not being the end element, that may lie close together."""
    if mirrored:
        pairs = [(0, 0), (0, 1), (1, 0)]
    else:
        pairs = [
            (target, source)
            for source in range(elements - 1)
            for target in range(max(0, source - 1), min(elements, source + 2))
        ]
    target, source = np.array(pairs, dtype=np.intp).T
    return _Pairs(target, source, -1.0 if mirrored else 1.0)


def _put_near_kernel(
    static: FloatArray,
    mesh: Discretisation,
    z: FloatArray,
    pairs: _Pairs,
    *,
    width: bool = False,
) -> None:
    """Replace, in place, the static (or width) kernel between elements that lie close together."""
    element = mesh.element
    points = element.node.size
    blocks = static.reshape(len(z), mesh.elements, points, mesh.elements, points)
    start, stop = mesh.breaks_m[:, :-1], mesh.breaks_m[:, 1:]
    middle = ((start + stop) / 2.0)[:, pairs.source, None]
    half = ((stop - start) / 2.0)[:, pairs.source, None]
    target = z.reshape(len(z), mesh.elements, points)[:, pairs.target]
    local = (pairs.sign * target - middle) / half
    near = np.abs(local) < _NEAR
    kernel = product_kernel(
        element,
        np.where(near, local, 0.0),
        np.broadcast_to(half / mesh.radius_m[:, None, None], local.shape),
        width=width,
    )
    kernel = kernel / half[..., None]
    distant = np.moveaxis(blocks[:, pairs.target, :, pairs.source, :], 0, 1)
    replaced = np.where(near[..., None], kernel, distant)
    blocks[:, pairs.target, :, pairs.source, :] = np.moveaxis(replaced, 1, 0)
    if pairs.sign > 0.0:
        end = end_kernel(points, width=width) / mesh.radius_m[:, None, None]
        static[:, -2 * points :, -points:] = end
