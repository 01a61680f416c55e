"""Potentials at the nodes of half wires from unit sources at their nodes.

Between distant elements the averaged kernel is simply evaluated; between elements close together
its static part is replaced by the effective kernel of product integration (see `basis`).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from worker.engine.thin_wire.basis import end_kernel, product_kernel
from worker.engine.thin_wire.discretisation import Discretisation
from worker.engine.thin_wire.tube_kernel import distant_kernel, static_kernel

FloatArray = NDArray[np.float64]

# A target closer than this, in half lengths from the middle of the source element, goes by
# product integration.
_NEAR = 2.2
# Points closer than this many radii need the static kernel itself, up to the second number its
# distant form; beyond, averaging around the tube changes 1/R_2 by less than 2e-6.
_CLOSE_RADII = 4.0
_DISTANT_RADII = 25.0
# (ka)^2 below which the width of the kernel's dynamic part is left out.
_NEGLIGIBLE_WIDTH = 1e-6


@dataclass(frozen=True, slots=True)
class _Pairs:
    """Element pairs that may lie close together; sign -1 where the target is mirrored."""

    target: NDArray[np.intp]
    source: NDArray[np.intp]
    sign: float


def tube_potentials(mesh: Discretisation, nodes: FloatArray) -> tuple[FloatArray, FloatArray]:
    r"""Averaged exp(-jkR)/R between nodes, and between nodes and mirrored nodes.

    Returns
    -------
    Two arrays of shape (2, B, Q, Q), the real part and minus the imaginary part stacked; targets
    before sources.

    Notes
    -----
    :math:`\langle e^{-jkR}/R \rangle` is taken as :math:`\cos(kR_2)\langle 1/R \rangle -
    j \sin(kR_2)/R_2` with :math:`R_2^2 = z^2 + 2a^2`, whose static factor is exact. What this
    misses is :math:`-\tfrac12 k^2 \langle (4a^2\sin^2(\phi/2) - 2a^2)/R \rangle`, a peak as
    narrow as the radius, added where (ka)^2 is not negligible, and terms in (ka)^4.

    Sine and cosine of :math:`k|z_i - z_j|` come from products of those at the nodes; the small
    rest :math:`k(R_2 - |z_i - z_j|)` of the phase is expanded.
    """
    phase = mesh.wavenumber_per_m[:, None] * nodes
    cosine, sine = np.cos(phase), np.sin(phase)
    # Sums of two products each, as products of matrices with a common side of two.
    plain = np.stack([cosine, sine], axis=2)
    turned = np.stack([cosine, sine], axis=1)
    flipped = np.stack([cosine, -sine], axis=1)
    crossed = np.stack([-sine, cosine], axis=1)
    swapped = np.stack([sine, cosine], axis=1)
    later = np.sign(np.arange(nodes.shape[1])[:, None] - np.arange(nodes.shape[1]))
    direct = _kernel(
        mesh,
        nodes,
        np.abs(nodes[:, :, None] - nodes[:, None, :]),
        plain @ turned,
        (plain @ crossed) * later,
        _near_pairs(mesh.elements),
    )
    mirrored = _kernel(
        mesh,
        nodes,
        nodes[:, :, None] + nodes[:, None, :],
        plain @ flipped,
        plain @ swapped,
        _mirrored_pairs(),
    )
    return direct, mirrored


def _kernel(
    mesh: Discretisation,
    nodes: FloatArray,
    offset: FloatArray,
    cosine: FloatArray,
    sine: FloatArray,
    pairs: _Pairs,
) -> FloatArray:
    """Kernel at axial distances `offset` with the cosine and sine of k times them."""
    radius_squared = (mesh.radius_m**2)[:, None, None]
    k = mesh.wavenumber_per_m[:, None, None]
    thick = bool(np.max(mesh.wavenumber_per_m * mesh.radius_m) ** 2 > _NEGLIGIBLE_WIDTH)
    distance = offset * offset
    distance += 2.0 * radius_squared
    np.sqrt(distance, out=distance)
    inverse = 1.0 / distance
    static = inverse.copy()
    _put_close_kernel(static, mesh, offset)
    _put_near_kernel(static, mesh, nodes, pairs)
    rest = distance
    rest -= offset
    rest *= k
    if thick:
        # To third order: next to itself a short wire's sin(kR)/R all but cancels.
        square = rest * rest
        along, across = 1.0 - 0.5 * square, rest * (1.0 - square / 6.0)
        cosine, sine = along * cosine - across * sine, along * sine + across * cosine
    else:
        cosine, sine = cosine - rest * sine, sine + rest * cosine
    kernel = np.empty((2, *offset.shape))
    np.multiply(cosine, static, out=kernel[0])
    np.multiply(sine, inverse, out=kernel[1])
    if thick:
        peak = np.zeros_like(static)
        _put_near_kernel(peak, mesh, nodes, pairs, width=True)
        kernel[0] -= 0.5 * k * k * radius_squared * peak
    return kernel


def _put_close_kernel(static: FloatArray, mesh: Discretisation, offset: FloatArray) -> None:
    """Correct, in place, the static kernel where 1/R_2 is not good enough.

    Points of one element are among them and come out infinite; `_put_near_kernel` follows.
    """
    wire, target, source = np.nonzero(offset < _DISTANT_RADII * mesh.radius_m[:, None, None])
    radius = mesh.radius_m[wire]
    x = offset[wire, target, source] / radius
    close = np.nonzero(x < _CLOSE_RADII)[0]
    kernel = distant_kernel(x)
    kernel[close] = static_kernel(x[close])
    static[wire, target, source] = kernel / radius


def _near_pairs(elements: int) -> _Pairs:
    """Each element with itself and its neighbours, the source not being the end element."""
    pairs = [
        (target, source)
        for source in range(elements - 1)
        for target in range(max(0, source - 1), min(elements, source + 2))
    ]
    target, source = np.array(pairs, dtype=np.intp).T
    return _Pairs(target, source, 1.0)


def _mirrored_pairs() -> _Pairs:
    """Elements next to the centre against those on its other side."""
    return _Pairs(np.array([0, 0, 1]), np.array([0, 1, 0]), -1.0)


def _put_near_kernel(
    kernel: FloatArray,
    mesh: Discretisation,
    nodes: FloatArray,
    pairs: _Pairs,
    *,
    width: bool = False,
) -> None:
    """Replace, in place, the static (or width) kernel between elements that lie close together."""
    points = mesh.element.node.size
    count = len(nodes)
    blocks = kernel.reshape(count, mesh.elements, points, mesh.elements, points)
    start, stop = mesh.breaks_m[:, :-1], mesh.breaks_m[:, 1:]
    middle = ((start + stop) / 2.0)[:, pairs.source, None]
    half = ((stop - start) / 2.0)[:, pairs.source, None]
    target = nodes.reshape(count, mesh.elements, points)[:, pairs.target]
    local = (pairs.sign * target - middle) / half
    wire, pair, point = np.nonzero(np.abs(local) < _NEAR)
    half_length = half[wire, pair, 0]
    effective = product_kernel(
        mesh.element,
        local[wire, pair, point],
        half_length / mesh.radius_m[wire],
        width=width,
    )
    blocks[wire, pairs.target[pair], point, pairs.source[pair]] = effective / half_length[:, None]
    if pairs.sign > 0.0:
        end = end_kernel(points, width=width) / mesh.radius_m[:, None, None]
        kernel[:, -2 * points :, -points:] = end
