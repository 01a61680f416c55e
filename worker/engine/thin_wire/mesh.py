"""Element boundaries on half a wire: fine at the open end and at the ports, coarse between.

Element sizes follow a size function. Near the end, where the charge varies with the logarithm of
the distance on every scale from the radius up, the size is proportional to the distance; near a
port it is a multiple of the smooth source's width; elsewhere it is a fraction of a wavelength.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from worker.engine.thin_wire.basis import END_ELEMENT_RADII, NEXT_ELEMENT_RADII

FloatArray = NDArray[np.float64]

_BISECTIONS = 26
_LAST_TWO_RADII = END_ELEMENT_RADII + NEXT_ELEMENT_RADII


@dataclass(frozen=True, slots=True)
class Grading:
    """Sizes of elements.

    Parameters
    ----------
    largest_wavelengths, largest_heights
        Size far from ends and ports, in wavelengths and in heights above ground.
    end_growth
        Size over distance to the end.
    port_sigmas
        Size at a port, in widths of the smooth source.
    port_growth
        Size over distance to a port.
    """

    largest_wavelengths: float
    largest_heights: float
    end_growth: float
    port_sigmas: float
    port_growth: float


@dataclass(frozen=True, slots=True)
class HalfWires:
    """Half wires (B,), wavelength and height above ground (inf without), and ports (B, P)."""

    half_length_m: FloatArray
    radius_m: FloatArray
    wavelength_m: FloatArray
    height_m: float
    port_distance_m: FloatArray
    sigma_m: FloatArray


def element_counts(wires: HalfWires, grading: Grading) -> NDArray[np.intp]:
    """Number of elements, of shape (B,), between the centre and the last two elements."""
    inner = wires.half_length_m - _LAST_TWO_RADII * wires.radius_m
    measure = _cumulative_density(inner[:, None], wires, grading)[:, 0]
    return np.maximum(np.ceil(measure - 1e-9), 1.0).astype(np.intp)


def element_breaks(wires: HalfWires, grading: Grading, count: int) -> FloatArray:
    """Boundaries (B, count + 3) from the centre to the end, `count` elements before the last two.

    The cumulative density of the size function is divided evenly and inverted by bisection.
    """
    inner = (wires.half_length_m - _LAST_TWO_RADII * wires.radius_m)[:, None]
    target = _cumulative_density(inner, wires, grading) * np.arange(1, count) / count
    low = np.zeros(target.shape)
    high = np.broadcast_to(inner, target.shape).copy()
    for _ in range(_BISECTIONS):
        middle = 0.5 * (low + high)
        below = _cumulative_density(middle, wires, grading) < target
        low = np.where(below, middle, low)
        high = np.where(below, high, middle)
    centre = np.zeros_like(inner)
    next_to_last = (wires.half_length_m - END_ELEMENT_RADII * wires.radius_m)[:, None]
    end = wires.half_length_m[:, None]
    return np.concatenate([centre, high, inner, next_to_last, end], axis=1)


def _cumulative_density(z: FloatArray, wires: HalfWires, grading: Grading) -> FloatArray:
    """Integral of 1 / size from the centre to z, of shape (B, n)."""
    half = wires.half_length_m[:, None]
    largest = np.minimum(
        grading.largest_wavelengths * wires.wavelength_m, grading.largest_heights * wires.height_m
    )
    total = z / largest[:, None]
    total = total + np.log(half / (half - z)) / grading.end_growth
    for position, sigma in zip(wires.port_distance_m.T, wires.sigma_m.T, strict=True):
        scale = grading.port_growth / (grading.port_sigmas * sigma[:, None])
        offset = z - position[:, None]
        total = (
            total
            + (
                np.sign(offset) * np.log1p(scale * np.abs(offset))
                + np.log1p(scale * position[:, None])
            )
            / grading.port_growth
        )
    return total
