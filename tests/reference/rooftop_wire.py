"""A plain, slow wire solution to check the fast one against: uniform rooftop functions.

Everything differs on purpose from the engine's method: equal segments over the whole wire,
piecewise linear current, every matrix element a numerical integral of the averaged kernel (the
circumference by a sum over angles) against the rooftops' correlation, which is a cubic spline.
Nothing is split off, so the gap has to span a few segments. Equation and convention are those of
R. F. Harrington, Field Computation by Moment Methods (1968), chapter 4, with e^{+j omega t}.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.constants import c, epsilon_0, mu_0

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


def rooftop_impedance(
    length_m: float,
    radius_m: float,
    frequency_hz: float,
    *,
    segments: int,
    gap_m: float,
    feed_fraction: float = 0.5,
    wire_impedance_ohm_per_m: complex = 0.0,
    loads: Sequence[tuple[float, complex]] = (),
    reflected: Callable[[FloatArray], ComplexArray] | None = None,
) -> complex:
    """Gap voltage over mean gap current; `reflected` adds to both Green's functions."""
    omega = 2.0 * np.pi * frequency_hz
    k = omega / c
    step = length_m / segments
    hat, slope = _correlations(step, radius_m, k, segments, reflected)
    offset = np.abs(np.arange(1, segments)[:, None] - np.arange(1, segments))
    matrix = 1j * omega * mu_0 * hat[offset] + slope[offset] / (1j * omega * epsilon_0)
    matrix = matrix / (4.0 * np.pi)
    matrix += (
        wire_impedance_ohm_per_m
        * step
        * ((2.0 / 3.0) * (offset == 0) + (1.0 / 6.0) * (offset == 1))
    )
    nodes = step * np.arange(1.0, segments)
    for fraction, impedance in loads:
        share = _gap_share(nodes - fraction * length_m, step, gap_m)
        matrix += impedance * np.outer(share, share)
    source = _gap_share(nodes - feed_fraction * length_m, step, gap_m)
    return complex(1.0 / (source @ np.linalg.solve(matrix, source)))


def extrapolated_impedance(
    length_m: float,
    radius_m: float,
    frequency_hz: float,
    *,
    segments: int,
    gap_m: float,
    feed_fraction: float = 0.5,
    wire_impedance_ohm_per_m: complex = 0.0,
    loads: Sequence[tuple[float, complex]] = (),
    reflected: Callable[[FloatArray], ComplexArray] | None = None,
) -> complex:
    """Richardson's extrapolation of three meshes, each twice as fine: orders one and two go."""
    coarse, middle, fine = (
        1.0
        / rooftop_impedance(
            length_m,
            radius_m,
            frequency_hz,
            segments=segments * factor,
            gap_m=gap_m,
            feed_fraction=feed_fraction,
            wire_impedance_ohm_per_m=wire_impedance_ohm_per_m,
            loads=loads,
            reflected=reflected,
        )
        for factor in (1, 2, 4)
    )
    first, second = 2.0 * middle - coarse, 2.0 * fine - middle
    return 1.0 / ((4.0 * second - first) / 3.0)


def _correlations(
    step: float,
    radius: float,
    k: float,
    segments: int,
    reflected: Callable[[FloatArray], ComplexArray] | None,
) -> tuple[ComplexArray, ComplexArray]:
    """Integrals of the kernel (4 pi G) against hat with hat and slope with slope, by distance."""
    node, weight = np.polynomial.legendre.leggauss(10)
    # One cell [0, 1], graded towards both ends where the kernel may be singular.
    edges = np.concatenate([[0.0], 0.25 ** np.arange(14.0, 0.0, -1.0), [0.5]])
    edges = np.concatenate([edges, 1.0 - edges[-2::-1]])
    middle, half = (edges[1:] + edges[:-1]) / 2.0, (edges[1:] - edges[:-1]) / 2.0
    unit = (middle[:, None] + half[:, None] * node).ravel()
    unit_weight = (half[:, None] * weight).ravel()
    cell = np.arange(segments + 1)[:, None]
    distance = step * (cell + unit)
    kernel = _averaged_kernel(distance, radius, k)
    if reflected is not None:
        kernel = kernel + 4.0 * np.pi * reflected(distance)
    # The spline's four cells as functions of the local coordinate, and minus their curvature.
    t, u = unit, 1.0 - unit
    spline = np.stack([t**3 / 6, 2 / 3 - u**2 + u**3 / 2, 2 / 3 - t**2 + t**3 / 2, u**3 / 6])
    curved = np.stack([-t, 2.0 - 3.0 * u, 2.0 - 3.0 * t, -u])
    hat_cells = step * step * (kernel @ (spline * unit_weight).T)
    slope_cells = kernel @ (curved * unit_weight).T
    hat = np.zeros(segments, dtype=complex)
    slope = np.zeros(segments, dtype=complex)
    for m in range(segments):
        for piece, start in enumerate(range(m - 2, m + 2)):
            # The kernel is even, so a cell below zero is its mirror image.
            place = (start, piece) if start >= 0 else (-start - 1, 3 - piece)
            hat[m] += hat_cells[place]
            slope[m] += slope_cells[place]
    return hat, slope


def _averaged_kernel(distance: FloatArray, radius: float, k: float) -> ComplexArray:
    """exp(-jkR)/R averaged around the circumference, angles graded towards R's minimum."""
    node, weight = np.polynomial.legendre.leggauss(12)
    edges = np.concatenate([[0.0], np.pi * 0.3 ** np.arange(12.0, -1.0, -1.0)])
    total = np.zeros(distance.shape, dtype=complex)
    for low, high in pairwise(edges):
        for x, w in zip(node, weight, strict=True):
            angle = (low + high) / 2.0 + (high - low) / 2.0 * x
            r = np.sqrt(distance**2 + (2.0 * radius * np.sin(angle / 2.0)) ** 2)
            total += (w * (high - low) / 2.0 / np.pi) * np.exp(-1j * k * r) / r
    return total


def _gap_share(offset: NDArray[np.floating], step: float, gap: float) -> NDArray[np.floating]:
    """Mean over the gap of each hat function, offset from the gap's centre to its node."""

    # Integral of a hat of unit half width up to each edge of the gap.
    edges = np.clip(np.stack([-gap / 2.0 - offset, gap / 2.0 - offset]) / step, -1.0, 1.0)
    lower, upper = np.where(edges < 0.0, (1.0 + edges) ** 2 / 2.0, 1.0 - (1.0 - edges) ** 2 / 2.0)
    share: NDArray[np.floating] = (upper - lower) * step / gap
    return share
