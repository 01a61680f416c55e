"""Kernel of a thin tube: the inverse distance averaged around its circumference.

    symbol   name here            meaning
    x        x                    axial distance over radius
    S(x)     static_kernel        <1 / sqrt(x^2 + 4 sin^2(phi/2))>, radius times <1/R>
    T(x)     mean_distance        <sqrt(x^2 + 4 sin^2(phi/2))>, <R> over radius
    W(x)     width_kernel         T - x^2 S - 2 S, what k^2 multiplies beside S; see `galerkin`
    J_i(x)   -                    integral of t^i S(t) from 0 to x
    j_i(x)   scaled_moments       J_i(x) / x^i, of order one for every x

All depend on nothing but x, so one set of expansions serves every wire.

References
----------
S. A. Schelkunoff, Advanced Antenna Theory (1952), the averaged kernel; NIST Digital Library of
Mathematical Functions, sections 19.2, 19.8 and 19.12 (complete elliptic integrals).
"""

from __future__ import annotations

from functools import cache
from math import log, pi

import numpy as np
from numpy.polynomial import chebyshev, legendre
from numpy.typing import NDArray
from scipy.special import ellipe, ellipkm1

FloatArray = NDArray[np.float64]

# The power series about x = 0 converges like (x/2)^(2n); it is used up to x = 1 only.
_SERIES_TERMS = 26


def static_kernel(x: FloatArray) -> FloatArray:
    """Averaged inverse distance, (2/pi) K(m) / sqrt(x^2 + 4) with m = 4 / (x^2 + 4); x != 0."""
    square = x * x
    kernel: FloatArray = (2.0 / pi) * ellipkm1(square / (square + 4.0)) / np.sqrt(square + 4.0)
    return kernel


def mean_distance(x: FloatArray) -> FloatArray:
    """Averaged distance over radius, (2/pi) sqrt(x^2 + 4) E(m)."""
    square = x * x + 4.0
    distance: FloatArray = (2.0 / pi) * np.sqrt(square) * ellipe(4.0 / square)
    return distance


def width_kernel(x: FloatArray) -> FloatArray:
    """Averaged (4 sin^2(phi/2) - 2) / sqrt(x^2 + 4 sin^2(phi/2)), a peak of integral -2; x != 0."""
    return mean_distance(x) - (x * x + 2.0) * static_kernel(x)


def distant_kernel(x: FloatArray) -> FloatArray:
    r"""Averaged inverse distance, as `static_kernel`, for points at least about four radii apart.

    Notes
    -----
    With :math:`u = x^2 + 2` the mean of :math:`R^2`, the central moments of :math:`R^2` over the
    circumference are 2, 0 and 6, hence :math:`u^{-1/2}[1 + 3/4\,u^{-2} + 105/64\,u^{-4}]`; the
    remainder is below 1e-6 of the value from x = 4 on.
    """
    mean_square = x * x + 2.0
    ratio = mean_square**-2.0
    kernel: FloatArray = (1.0 + ratio * (0.75 + 1.640625 * ratio)) / np.sqrt(mean_square)
    return kernel


@cache
def _series_coefficients() -> tuple[FloatArray, FloatArray]:
    """Coefficients of S(x) = sum (alpha_n + beta_n ln x) x^(2n).

    With T(x) the averaged distance, T' = x S and (x^2 + 4) x S' = -T; comparing powers gives
    each pair from the one before, from S -> ln(8/x)/pi and T -> 4/pi.
    """
    count = _SERIES_TERMS
    alpha, beta = np.zeros(count), np.zeros(count)
    gamma, delta = np.zeros(count + 1), np.zeros(count + 1)
    alpha[0], beta[0], gamma[0] = log(8.0) / pi, -1.0 / pi, 4.0 / pi
    for n in range(count):
        if n:
            beta[n] = (-delta[n] - 2.0 * (n - 1) * beta[n - 1]) / (8.0 * n)
            inner = gamma[n] + 2.0 * (n - 1) * alpha[n - 1] + beta[n - 1]
            alpha[n] = (-inner / 4.0 - beta[n]) / (2.0 * n)
        order = 2.0 * n + 2.0
        gamma[n + 1] = alpha[n] / order - beta[n] / order**2
        delta[n + 1] = beta[n] / order
    return alpha, beta


@cache
def _zeroth_moment_coefficients() -> FloatArray:
    """Chebyshev coefficients of J_0(x) - ln(2x) in u = 1/x^2 on [0, 1]."""
    alpha, beta = _series_coefficients()
    order = 2.0 * np.arange(_SERIES_TERMS) + 1.0
    up_to_one = float(np.sum(alpha / order - beta / order**2))
    node, weight = legendre.leggauss(60)

    def remainder(u: FloatArray) -> FloatArray:
        span = -0.5 * np.log(u)
        x = np.exp(0.5 * span[:, None] * (node + 1.0))
        beyond = np.sum(static_kernel(x) * x * weight, axis=1) * 0.5 * span
        result: FloatArray = up_to_one + beyond - log(2.0) - span
        return result

    # u = 1/x^2 has its nearest singularity at -1/4, so the error falls like 2.6^-n.
    point = chebyshev.chebpts1(39)
    return np.asarray(chebyshev.chebfit(point, remainder((point + 1.0) / 2.0), 38), dtype=float)


def scaled_moments(x: FloatArray, count: int) -> FloatArray:
    r"""Moments J_i(x) / x^i of the static kernel.

    Parameters
    ----------
    x
        Axial distance over radius, > 0, any shape.
    count
        Number of moments, i = 0 to count - 1.

    Returns
    -------
    Array of shape (count, *x.shape).

    Notes
    -----
    Integrating by parts with T' = xS and (x^2 + 4) x S' = -T gives

    .. math::

        i^2 J_i = x^{i-1}\,[T + (i-1)(x^2 + 4) S] - 4 (i-1)^2 J_{i-2},

    stable for x >= 1; below that the power series is integrated term by term.
    """
    moments = np.empty((count, *x.shape))
    large = np.maximum(x, 1.0)
    square = large * large
    inverse_square = 1.0 / square
    kernel_term = (square + 4.0) * static_kernel(large) / large
    distance_term = mean_distance(large) / large
    moments[0] = chebyshev.chebval(
        2.0 * inverse_square - 1.0, _zeroth_moment_coefficients()
    ) + np.log(2.0 * large)
    if count > 1:
        moments[1] = distance_term - (4.0 / pi) / large
    for i in range(2, count):
        moments[i] = (
            distance_term
            + (i - 1) * kernel_term
            - 4.0 * (i - 1) ** 2 * inverse_square * moments[i - 2]
        ) / i**2
    small = x < 1.0
    if np.any(small):
        moments[:, small] = _small_moments(x[small], count)
    return moments


@cache
def _small_moment_coefficients(count: int) -> FloatArray:
    """Coefficients (2 * count, terms): plain parts, then factors of ln x, by powers of x^2."""
    alpha, beta = _series_coefficients()
    order = np.arange(count)[:, None] + 2.0 * np.arange(_SERIES_TERMS) + 1.0
    return np.concatenate([alpha / order - beta / order**2, beta / order])


def _small_moments(x: FloatArray, count: int) -> FloatArray:
    powers = np.cumprod(np.broadcast_to(x * x, (_SERIES_TERMS - 1, x.size)), axis=0)
    powers = np.concatenate([np.ones((1, x.size)), powers])
    plain, logarithmic = np.split(_small_moment_coefficients(count) @ powers, 2)
    moments: FloatArray = x * (plain + np.log(np.maximum(x, 1e-300)) * logarithmic)
    return moments


def scaled_width_moments(x: FloatArray, count: int) -> FloatArray:
    """Moments of `width_kernel` over x^i, like `scaled_moments`.

    Notes
    -----
    By parts, the integral of t^i (T - t^2 S) is (i+2) J_{i+2} + 4 (i+1) J_i - x^{i+1} (x^2+4) S.
    """
    moments = scaled_moments(x, count + 2)
    order = np.arange(count).reshape((count,) + (1,) * x.ndim)
    boundary = x * (x * x + 4.0) * static_kernel(x)
    result: FloatArray = (
        (order + 2.0) * x * x * moments[2:] + (4.0 * order + 2.0) * moments[:-2] - boundary
    )
    return result
