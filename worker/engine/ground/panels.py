"""Piecewise polynomials through the Sommerfeld integrals, refined until each piece is resolved."""

from __future__ import annotations

from dataclasses import dataclass
from math import factorial
from typing import Final

import numpy as np

from worker.engine.errors import NotConverged
from worker.engine.ground.spectrum import Complex, Count, Real, reflected

NODES: Final[int] = 12
"""Chebyshev nodes a panel; the polynomials are of degree NODES - 1."""

_LONGEST_PANEL_RAD: Final[float] = 4.0 * np.pi
_FACTORIAL: Final[float] = float(factorial(NODES - 2))
_FAINT: Final[float] = 0.02
"""Ripple that no panel need resolve, over the tolerance."""
_MOST_HALVINGS: Final[int] = 6


@dataclass(frozen=True, slots=True, eq=False)
class Panels:
    """Panels of one table, in order of distance.

    Attributes
    ----------
    edges_rad
        Ends of the panels as phase lengths k rho, shape (panels + 1,), the first 0.
    vector, scalar
        Coefficients of the local variable -1..1, highest power first, shape (NODES, panels).
    interpolation_error
        Largest estimate over the panels, relative to the image potential.
    quadrature_error
        Largest error of quadrature over the samples, in the same units.
    samples, evaluations
        Distances sampled and special functions evaluated, panels given up included.
    """

    edges_rad: Real
    vector: Complex
    scalar: Complex
    interpolation_error: float
    quadrature_error: float
    samples: int
    evaluations: int


@dataclass(frozen=True, slots=True, eq=False)
class _Fitted:
    """Panels of many tables in any order; the first axis runs over the panels."""

    job: Count
    low: Real
    high: Real
    coefficients: Complex
    error: Real
    quadrature: Real
    evaluations: Count

    def where(self, keep: Count) -> _Fitted:
        return _Fitted(
            self.job[keep],
            self.low[keep],
            self.high[keep],
            self.coefficients[keep],
            self.error[keep],
            self.quadrature[keep],
            self.evaluations[keep],
        )


def resolve(eps: Complex, drop: Real, reach_rad: Real, tolerance: float) -> list[Panels]:
    """Cover every table's range of distances with panels that meet the tolerance.

    Parameters
    ----------
    eps, drop, reach_rad
        Complex permittivity, phase length 2 k h and phase length of the reach, shape (tables,).
    tolerance
        Largest interpolation error of a panel, relative to the image potential.

    Returns
    -------
    list of Panels
        One entry a table.

    Raises
    ------
    NotConverged
        A panel missed the tolerance after six halvings.
    """
    starts = [
        _starting_edges(*case, tolerance)
        for case in zip(eps.tolist(), drop.tolist(), reach_rad.tolist(), strict=True)
    ]
    job = np.repeat(np.arange(eps.size), [edges.size - 1 for edges in starts])
    low = np.concatenate([edges[:-1] for edges in starts])
    high = np.concatenate([edges[1:] for edges in starts])

    rounds: list[_Fitted] = []
    kept: list[_Fitted] = []
    for _ in range(_MOST_HALVINGS + 1):
        fitted = _fit(eps, drop, job, low, high)
        good = fitted.error <= tolerance
        rounds.append(fitted)
        kept.append(fitted.where(np.nonzero(good)[0]))
        if good.all():
            return [_assemble(index, kept, rounds) for index in range(eps.size)]
        middle = 0.5 * (low + high)[~good]
        job = np.concatenate([job[~good]] * 2)
        low, high = (
            np.concatenate([low[~good], middle]),
            np.concatenate([middle, high[~good]]),
        )
    raise NotConverged("table of reflected potentials", float(fitted.error.max()), tolerance)


def _starting_edges(eps: complex, drop: float, reach_rad: float, tolerance: float) -> Real:
    """Panels that double from the height on, since the functions vary on the scale of R1.

    Where the lateral wave exp(-j k1 rho) is felt, its beat with the image limits their length:
    a beat of phase x either way has Chebyshev coefficients of about (x / 2)**n / n!.
    """
    branch, ground_wavenumber = np.sqrt(eps - 1.0), np.sqrt(eps)
    beats = max(abs(ground_wavenumber - 1.0), 1e-9)
    edges = [0.0]
    while (at := edges[-1]) < reach_rad:
        ripple = np.exp(-drop * branch.real + ground_wavenumber.imag * at) / (1.0 + at)
        longest = _LONGEST_PANEL_RAD
        if ripple > _FAINT * tolerance:
            phase = 2.0 * (_FACTORIAL * tolerance / ripple) ** (1.0 / (NODES - 2))
            longest = min(longest, 2.0 * phase / beats)
        edges.append(at + min(max(drop, at), longest))
    return np.asarray(edges) * (reach_rad / edges[-1])


def _fit(eps: Complex, drop: Real, job: Count, low: Real, high: Real) -> _Fitted:
    half, middle = 0.5 * (high - low), 0.5 * (high + low)
    distance = middle[:, None] + half[:, None] * _POINTS
    rows = np.repeat(job, NODES)
    sampled = reflected(eps[rows], drop[rows], distance.ravel())
    values = np.stack([sampled.vector, sampled.scalar], axis=-1).reshape(job.size, NODES, 2)
    chebyshev = _TO_CHEBYSHEV @ values
    error = np.abs(chebyshev[:, -2:, :]).sum(axis=1).max(axis=1)
    shape = (job.size, NODES)
    return _Fitted(
        job,
        low,
        high,
        _TO_POWERS @ chebyshev,
        error,
        sampled.quadrature_error.reshape(shape).max(axis=1),
        sampled.evaluations.reshape(shape).sum(axis=1),
    )


def _assemble(index: int, kept: list[_Fitted], rounds: list[_Fitted]) -> Panels:
    own = [fitted.where(np.nonzero(fitted.job == index)[0]) for fitted in kept]
    low = np.concatenate([fitted.low for fitted in own])
    order = np.argsort(low)
    high = np.concatenate([fitted.high for fitted in own])[order]
    coefficients = np.concatenate([fitted.coefficients for fitted in own])[order]
    tried = [fitted.where(np.nonzero(fitted.job == index)[0]) for fitted in rounds]
    return Panels(
        edges_rad=np.concatenate([[0.0], high]),
        vector=np.ascontiguousarray(coefficients[:, :, 0].T),
        scalar=np.ascontiguousarray(coefficients[:, :, 1].T),
        interpolation_error=float(max(fitted.error.max(initial=0.0) for fitted in own)),
        quadrature_error=float(max(fitted.quadrature.max(initial=0.0) for fitted in own)),
        samples=NODES * sum(fitted.low.size for fitted in tried),
        evaluations=int(sum(fitted.evaluations.sum() for fitted in tried)),
    )


def _chebyshev_matrices() -> tuple[Real, Real, Real]:
    """Points, values-to-Chebyshev and Chebyshev-to-powers (highest first) of one panel."""
    points = np.asarray(np.polynomial.chebyshev.chebpts1(NODES), dtype=np.float64)
    vandermonde = np.asarray(np.polynomial.chebyshev.chebvander(points, NODES - 1))
    to_chebyshev = np.array(vandermonde.T, dtype=np.float64) * (2.0 / NODES)
    to_chebyshev[0] *= 0.5
    powers = np.zeros((NODES, NODES))
    for degree in range(NODES):
        column = np.polynomial.chebyshev.cheb2poly(np.eye(NODES)[degree][: degree + 1])
        powers[: degree + 1, degree] = column
    return points, to_chebyshev, powers[::-1]


_POINTS, _TO_CHEBYSHEV, _TO_POWERS = _chebyshev_matrices()
