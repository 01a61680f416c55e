"""Reference element of the Galerkin solution and the static interactions on it.

The current on one element is a polynomial in its own coordinate tau in [-1, 1]: two vertex
functions and integrated Legendre bubbles. On the last element, at the open end of the tube, tau
is related to the distance from the end by distance = delta ((1 - tau)/2)^2, because the current
falls there as the square root of that distance.

Potentials are sampled at Gauss points. Sources on the same or an adjacent element go by product
integration: the density is interpolated at the Gauss points and each Legendre term is integrated
against the static kernel exactly.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from math import factorial, sqrt

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from worker.engine.thin_wire.tube_kernel import (
    scaled_moments,
    scaled_width_moments,
    static_kernel,
    width_kernel,
)

FloatArray = NDArray[np.float64]

# The end element and the one before it have fixed sizes in radii, so that all the static
# interactions with the square-root behaviour at the end are universal numbers.
END_ELEMENT_RADII = 1.0
NEXT_ELEMENT_RADII = 2.0


@dataclass(frozen=True, slots=True)
class ReferenceElement:
    """Shape functions of one degree at its Gauss points.

    `value` and `slope` have shape (points, degree + 1): first and last column are the vertex
    functions at tau = -1 and +1. `legendre_fit` (points, points) turns Legendre moments of a
    kernel into its effective value at each Gauss point; `taylor_index` and `taylor_fit` do the
    same for products of power moments and powers of the target coordinate.
    """

    degree: int
    node: FloatArray
    weight: FloatArray
    value: FloatArray
    slope: FloatArray
    legendre_fit: FloatArray
    taylor_index: tuple[NDArray[np.intp], NDArray[np.intp]]
    taylor_fit: FloatArray


def shape_values(degree: int, tau: FloatArray) -> FloatArray:
    """Shape functions (n, degree + 1) at tau (n,): vertex at -1, bubbles, vertex at +1."""
    polynomials = legendre.legvander(tau, degree)
    value = np.empty((tau.size, degree + 1))
    value[:, 0], value[:, -1] = (1.0 - tau) / 2.0, (1.0 + tau) / 2.0
    for n in range(2, degree + 1):
        value[:, n - 1] = (polynomials[:, n] - polynomials[:, n - 2]) / sqrt(2.0 * (2 * n - 1))
    return value


@cache
def reference_element(degree: int, points: int) -> ReferenceElement:
    """Reference element of the given polynomial degree with that many Gauss points."""
    node, weight = legendre.leggauss(points)
    polynomials = legendre.legvander(node, max(degree, points))
    value = shape_values(degree, node)
    slope = np.zeros((points, degree + 1))
    slope[:, 0], slope[:, -1] = -0.5, 0.5
    for n in range(2, degree + 1):
        slope[:, n - 1] = (2 * n - 1) / sqrt(2.0 * (2 * n - 1)) * polynomials[:, n - 1]
    fit = (np.arange(points) + 0.5) * polynomials[:, :points]
    # P_n(t + u) = sum over i, m of taylor[n, i, m] u^i t^m
    taylor = np.zeros((points, points, points))
    for n in range(points):
        power = legendre.leg2poly(np.eye(points)[n])
        for total, coefficient in enumerate(power):
            for i in range(total + 1):
                binomial = factorial(total) / (factorial(i) * factorial(total - i))
                taylor[n, i, total - i] += coefficient * binomial
    index = np.nonzero(np.any(taylor, axis=0))
    return ReferenceElement(
        degree=degree,
        node=node,
        weight=weight,
        value=value,
        slope=slope,
        legendre_fit=fit,
        taylor_index=(index[0], index[1]),
        taylor_fit=np.ascontiguousarray((fit @ taylor[:, index[0], index[1]]).T),
    )


def product_kernel(
    element: ReferenceElement,
    target: FloatArray,
    half_length_over_radius: FloatArray,
    *,
    width: bool = False,
) -> FloatArray:
    """Effective static kernel, in units of 1 / half length, at each Gauss point of the source.

    Parameters
    ----------
    element
        Reference element of the source.
    target
        Target point in the source's coordinate tau; moderate, about |tau| <= 3.
    half_length_over_radius
        Source's half length over the wire radius, of the target's shape.
    width
        Integrate `width_kernel` instead of the static kernel.

    Returns
    -------
    Array of shape (*target.shape, points): sum(weight * density * result) is the potential.
    """
    points = element.node.size
    integrate = scaled_width_moments if width else scaled_moments
    moments = np.zeros((points, *target.shape))
    order = np.arange(points).reshape((points,) + (1,) * target.ndim)
    odd = order % 2 == 1
    for end, sign in ((1.0 - target, 1.0), (-1.0 - target, -1.0)):
        size = np.abs(end)
        terms = integrate(size * half_length_over_radius, points) * size**order
        moments += sign * np.where(odd, terms, np.sign(end) * terms)
    powers = target**order
    i, m = element.taylor_index
    combined = moments[i] * powers[m]
    return np.moveaxis(combined, 0, -1) @ element.taylor_fit


@cache
def end_kernel(points: int, *, width: bool = False) -> FloatArray:
    """Effective static (or width) kernel, in units of 1 / radius, of the end element.

    Returns
    -------
    Array of shape (2 * points, points): targets are the Gauss points of the element before the
    end element, then those of the end element itself.
    """
    element = reference_element(2, points)
    kernel_of = width_kernel if width else static_kernel
    root = (1.0 - element.node) / 2.0
    target = np.concatenate(
        [END_ELEMENT_RADII + NEXT_ELEMENT_RADII * root, END_ELEMENT_RADII * root**2]
    )
    gauss, gauss_weight = legendre.leggauss(16)
    # Panels shrink geometrically towards the logarithmic singularity.
    edges = np.concatenate([[0.0], 0.2 ** np.arange(18.0, -1.0, -1.0)])
    middle, half = (edges[1:] + edges[:-1]) / 2.0, (edges[1:] - edges[:-1]) / 2.0
    unit = (middle[:, None] + half[:, None] * gauss).ravel()
    unit_weight = (half[:, None] * gauss_weight).ravel()
    kernel = np.zeros((target.size, points))
    for row, distance in enumerate(target):
        singular = min(sqrt(distance / END_ELEMENT_RADII), 1.0)
        for reach in (-singular, 1.0 - singular):
            if reach == 0.0:
                continue
            s = singular + reach * unit
            strength = 2.0 * abs(reach) * unit_weight
            # s^2 - singular^2 written as a product keeps its digits near the singularity.
            gap = reach * unit * (s + singular) * END_ELEMENT_RADII
            gap += singular**2 * END_ELEMENT_RADII - distance
            moments = (strength * kernel_of(gap)) @ legendre.legvander(1.0 - 2.0 * s, points - 1)
            kernel[row] += element.legendre_fit @ moments
    return kernel
