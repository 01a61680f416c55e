"""Sommerfeld integrals of a horizontal wire's reflected potentials, on deformed contours.

Symbols, in units of the free-space wavenumber k = omega / c:

===========  ===========================================================================
``r``        k rho, horizontal distance between source and observer
``drop``     2 k h, twice the height: source and observer lie at the same height h
``R1``       sqrt(r**2 + drop**2), distance to the image
``eps``      complex relative permittivity of the ground, Im <= 0
``lam``      horizontal wavenumber
``u``        sqrt(lam**2 - 1), vertical propagation constant in air
``u1``       sqrt(lam**2 - eps), vertical propagation constant in the ground
===========  ===========================================================================

Both reflected potentials are ``k / (4 pi)`` times

    I = integral of R(u) exp(-drop u) J0(r lam) lam / u d lam,    lam from 0 to infinity
      = integral of R(u) exp(-drop u) J0(r sqrt(u**2 + 1)) du,    u from j to infinity

with R = R_A = (u - u1) / (u + u1) for the vector potential (TE reflection) and
R = R_Phi = ((2 - eps) u - u1) / (eps u + u1) for the scalar potential. The latter is
``(Gamma_TM u**2 + Gamma_TE) / lam**2``, the combination that leaves the charge of a horizontal
current one scalar potential, with its apparent pole at lam = 0 cancelled by hand. Integrating over
u instead of lam removes the branch point of air; what is left is the branch point
``u_b = sqrt(eps - 1)`` of the ground and the pole ``u_p = -j / sqrt(eps + 1)``, both in the fourth
quadrant, and none of the contours below ever crosses the pole.

* Near (r <= drop/2): from j straight to j + infinity, the steepest descent for r = 0.
* Far: J0 is split so that only the outgoing Hankel function is left. One half of the path is the
  exact steepest descent through the saddle ``u_s = j drop / R1``, the other a straight ray from the
  saddle into the fourth quadrant, between branch point and pole. Where the ray passes below the
  branch point, the loop around that is added: it is the lateral wave. A branch point close to the
  saddle is passed above instead, by a short rise ahead of the ray.

The same nodes integrate R = 1, whose value exp(-j R1) / R1 is known: the difference is returned as
the error of quadrature.

References
----------
A. Sommerfeld, "Partial Differential Equations in Physics", 1949, section 32.
K. A. Michalski and J. R. Mosig, "Multilayered media Green's functions in integral equation
formulations", IEEE Trans. Antennas Propag. 45, 1997 (mixed potentials of the half space).
L. B. Felsen and N. Marcuvitz, "Radiation and Scattering of Waves", 1973, sections 4.2 and 5.5
(steepest descent and lateral wave).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Final, TypeAlias

import numpy as np
from numpy.typing import NDArray
from scipy.special import jv

from worker.engine.ground.hankel import scaled_hankel

Real: TypeAlias = NDArray[np.float64]
Complex: TypeAlias = NDArray[np.complex128]
Count: TypeAlias = NDArray[np.intp]

_DECAY: Final[float] = 30.0
"""Contours end where the integrand has fallen by exp(-30) = 1e-13."""

_RAY_NODES: Final = (10, 21, 19, 15, 12)
_NEAR_NODES: Final = (14, 20, 20, 20, 16)
_RISE_NODES: Final = (20,)
_SMOOTH_NODES: Final = (12, 15, 14, 14, 14)
"""Gauss-Legendre nodes a panel, from the far end of a graded contour to its start."""

_BEND: Final[float] = 0.35
"""Tangent of the angle by which the descent leaves the steepest one at the saddle."""

_ROWS_AT_ONCE: Final[int] = 256


@dataclass(frozen=True, slots=True, eq=False)
class Reflected:
    """Reflected potentials over the image potential exp(-j R1) / R1.

    Attributes
    ----------
    vector, scalar
        Complex ratios, shape (n,); both are -1 over a perfect ground and 0 without ground.
    quadrature_error
        Deviation from 1 of the same quadrature applied to R = 1, shape (n,).
    evaluations
        Bessel and Hankel functions evaluated, shape (n,).
    """

    vector: Complex
    scalar: Complex
    quadrature_error: Real
    evaluations: Count


def reflected(eps: Complex, height_rad: Real, distance_rad: Real) -> Reflected:
    """Reflected potentials of a horizontal wire over a half space.

    Parameters
    ----------
    eps
        Complex relative permittivity of the ground, shape (n,), Re >= 1, Im <= 0, finite.
    height_rad
        Phase length 2 k h of the way down and up again in radians, shape (n,), positive.
    distance_rad
        Phase length k rho of the horizontal distance in radians, shape (n,), zero or more.

    Returns
    -------
    Reflected
        Both potentials as ratios to exp(-j R1) / R1, one entry a row.

    Notes
    -----
    Rows are independent, so one call may mix frequencies, heights and grounds.
    """
    rows = distance_rad.size
    sums = np.empty((rows, 3), dtype=np.complex128)
    evaluations = np.zeros(rows, dtype=np.intp)
    near = distance_rad <= 0.5 * height_rad
    for contour, chosen in ((_near, near), (_far, ~near)):
        (which,) = np.nonzero(chosen)
        for start in range(0, which.size, _ROWS_AT_ONCE):
            part = which[start : start + _ROWS_AT_ONCE]
            sums[part], evaluations[part] = contour(eps[part], height_rad[part], distance_rad[part])
    return Reflected(sums[:, 0], sums[:, 1], np.abs(sums[:, 2] - 1.0), evaluations)


def _near(eps: Complex, drop: Real, r: Real) -> tuple[Complex, Count]:
    image: Real = np.hypot(r, drop)
    # J0 grows by at most exp(r**2 / 4 drop) on the way, r <= drop/2.
    length = (_DECAY + drop / 16.0) / drop
    sums = np.zeros((r.size, 3), dtype=np.complex128)
    cost = np.zeros(r.size, dtype=np.intp)
    for rows, x, w in _graded(length / 0.3, _NEAR_NODES):
        s = length[rows, None] * x
        u: Complex = np.add(s, 1j, dtype=np.complex128)
        wave = np.asarray(jv(0, r[rows, None] * np.sqrt(u * u + 1.0)), dtype=np.complex128)
        weight = wave * (np.exp(-drop[rows, None] * s) * (length[rows, None] * w))
        u1 = np.sqrt(u * u - (eps[rows, None] - 1.0))
        sums[rows] = _integrate(weight, u, u1, eps[rows, None])
        cost[rows] += x.size
    return sums * (image * np.exp(1j * (image - drop)))[:, None], cost


def _far(eps: Complex, drop: Real, r: Real) -> tuple[Complex, Count]:
    image: Real = np.hypot(r, drop)
    saddle = 1j * drop / image
    branch, pole = np.sqrt(eps - 1.0), -1j / np.sqrt(eps + 1.0)
    # Directions as seen from the saddle, as angles below the horizontal.
    to_branch, to_pole = -np.angle(branch - saddle), -np.angle(pole - saddle)
    shallow = to_branch < np.pi / 6.0
    # Below a branch point close to the saddle, ray and loop would nearly cancel each other.
    tent = shallow & (np.abs(eps - 1.0) < np.minimum(1.0 / r, 0.5))
    below = shallow & ~tent
    slope = np.where(below, 0.5 * (to_branch + to_pole), np.minimum(0.5 * to_branch, 0.7))
    slope[tent] = np.pi / 4.0
    direction = np.exp(-1j * slope)
    rise = np.where(tent, 2.0 * np.abs(branch), 0.0) * np.exp(1j * np.pi / 6.0)

    sums, cost = _descent(eps, drop, r, image)
    ray, ray_cost = _ray(eps, drop, r, image, saddle + rise, direction, branch, below)
    sums += ray
    cost += ray_cost
    for contour, chosen, along in ((_rise, tent, rise), (_lateral, below, direction)):
        if np.any(chosen):
            part, part_cost = contour(
                eps[chosen], drop[chosen], r[chosen], image[chosen], along[chosen]
            )
            sums[chosen] += part
            cost[chosen] += part_cost
    return sums * image[:, None], cost


def _descent(eps: Complex, drop: Real, r: Real, image: Real) -> tuple[Complex, Count]:
    """Integrate along the half of the steepest descent that comes from infinity to the saddle.

    With u = j cos w, lam = sin w and cos(w - w_s) = 1 - j v**2 the exponent is exactly
    -j R1 - R1 v**2. Real v < 0 is the steepest descent; it is bent a little near the saddle, away
    from the mirror -u_b of the branch point, which for a weak lossy ground lies right on it.
    """
    length = np.sqrt(_DECAY / image)
    to_branch = np.abs(np.sqrt(eps - 1.0) + 1j * drop / image)
    to_vertical = np.sqrt(1.0 - drop / image)  # where lam = 0, in v
    finest = np.clip(np.minimum(to_branch, to_vertical), 1e-3, 1.0)
    sums = np.zeros((r.size, 3), dtype=np.complex128)
    cost = np.zeros(r.size, dtype=np.intp)
    for rows, x, w in _graded(length / finest, _SMOOTH_NODES):
        t = length[rows, None] * x
        v = -t * (1.0 - 1j * _BEND / (1.0 + t * t))
        slope = 1.0 - 1j * _BEND * (1.0 - t * t) / (1.0 + t * t) ** 2
        cosine, sine = (drop / image)[rows, None], (r / image)[rows, None]
        root = np.sqrt(2j + v * v)
        u = 1j * (cosine * (1.0 - 1j * v * v) - sine * v * root)
        lam = sine * (1.0 - 1j * v * v) + cosine * v * root
        wave = scaled_hankel(r[rows, None] * lam)
        weight = wave * np.exp(-image[rows, None] * v * v)
        weight = (
            weight * np.asarray(slope * lam / root, dtype=np.complex128) * (length[rows, None] * w)
        )
        u1 = 1j * np.sqrt(eps[rows, None] - 1.0 - u * u)
        sums[rows] = _integrate(weight, u, u1, eps[rows, None])
        cost[rows] += x.size
    return sums, cost


def _ray(
    eps: Complex,
    drop: Real,
    r: Real,
    image: Real,
    start: Complex,
    direction: Complex,
    branch: Complex,
    below: NDArray[np.bool_],
) -> tuple[Complex, Count]:
    """Integrate along the straight ray from the saddle, or the top of the rise, to infinity."""
    length = _ray_length(drop, r, start, direction)
    to_branch = np.clip(0.5 * np.abs(branch - start), 1e-3, 0.15)
    to_pole = np.clip(np.abs(start + 1j / np.sqrt(eps + 1.0)), 0.02, 0.15)
    sums = np.zeros((r.size, 3), dtype=np.complex128)
    cost = np.zeros(r.size, dtype=np.intp)
    for rows, x, w in _graded(length / np.minimum(to_branch, to_pole), _RAY_NODES):
        step = direction[rows, None] * (length[rows, None] * x)
        u = start[rows, None] + step
        weight = _outgoing(u, drop[rows], r[rows], image[rows])
        weight = weight * (direction[rows, None] * length[rows, None] * w)
        # The root is continuous along its ray if its cut leaves the branch point on the far side:
        # Im u1 >= 0 below it, Re u1 >= 0 above.
        root = np.sqrt(u * u - (eps[rows, None] - 1.0))
        u1 = np.where(below[rows, None] & (root.imag < 0.0), -root, root)
        sums[rows] = _integrate(weight, u, u1, eps[rows, None])
        cost[rows] += x.size
    return sums, cost


def _rise(eps: Complex, drop: Real, r: Real, image: Real, rise: Complex) -> tuple[Complex, Count]:
    """Integrate along the straight rise from the saddle to the start of the ray."""
    x, w = _graded_rule(0, _RISE_NODES)
    u = 1j * (drop / image)[:, None] + rise[:, None] * x
    weight = _outgoing(u, drop, r, image) * (rise[:, None] * w)
    u1 = np.sqrt(u * u - (eps[:, None] - 1.0))
    sums = _integrate(weight, u, u1, eps[:, None])
    return sums, np.full(r.size, x.size, dtype=np.intp)


def _outgoing(u: Complex, drop: Real, r: Real, image: Real) -> Complex:
    """Half the outgoing Hankel function times exp(-drop u), over exp(-j R1)."""
    distance = r[:, None]
    lam = np.asarray(np.sqrt(u * u + 1.0), dtype=np.complex128)
    exponent = 1j * (image[:, None] - distance * lam) - drop[:, None] * u
    wave = scaled_hankel(distance * lam)
    return 0.5 * wave * np.exp(exponent)


def _ray_length(drop: Real, r: Real, start: Complex, direction: Complex) -> Real:
    """Length of the ray on which the integrand falls by exp(-_DECAY)."""
    # Far from the saddle the exponent falls in proportion to the length, near it to its square.
    linear = (_DECAY + r * start.imag) / (drop * direction.real - r * direction.imag)
    quadratic = np.sqrt(-_DECAY / (r * direction.real * direction.imag))
    longest = linear + quadratic
    lengths = longest[:, None] * 2.0 ** (-0.25 * np.arange(24))
    u = start[:, None] + lengths * direction[:, None]
    fall = (drop[:, None] * u + 1j * r[:, None] * np.sqrt(u * u + 1.0)).real
    enough = np.count_nonzero(fall > _DECAY, axis=1) - 1
    return np.take_along_axis(lengths, np.maximum(enough, 0)[:, None], axis=1)[:, 0]


def _lateral(
    eps: Complex, drop: Real, r: Real, image: Real, direction: Complex
) -> tuple[Complex, Count]:
    """Integrate the jump of R along the cut from the branch point, parallel to the ray.

    With u = u_b + t**2 exp(-j slope) the jump is odd in t, so the integrand is smooth. The jumps
    of R_A and R_Phi are -4 u u1 / (eps - 1) and -4 u u1 / (eps**2 u**2 - u1**2).
    """
    branch = np.sqrt(eps - 1.0)
    length = np.sqrt(_DECAY / (drop * direction.real - r * direction.imag))
    sums = np.zeros((r.size, 3), dtype=np.complex128)
    cost = np.zeros(r.size, dtype=np.intp)
    for rows, x, w in _graded(length / np.minimum(np.sqrt(np.abs(branch)), 1.0), _SMOOTH_NODES):
        t = length[rows, None] * x
        step = t * t * direction[rows, None]
        u = branch[rows, None] + step
        u1 = np.sqrt(step) * np.sqrt(2.0 * branch[rows, None] + step)
        weight = _outgoing(u, drop[rows], r[rows], image[rows])
        weight = weight * (2.0 * t * direction[rows, None] * length[rows, None] * w)
        permittivity = eps[rows, None]
        jump = -4.0 * u * u1 * weight
        sums[rows, 0] = (jump / (permittivity - 1.0)).sum(axis=1)
        sums[rows, 1] = (jump / ((permittivity * u) ** 2 - u1 * u1)).sum(axis=1)
        cost[rows] += x.size
    return sums, cost


def _integrate(weight: Complex, u: Complex, u1: Complex, eps: Complex) -> Complex:
    """Sum the weights times R_A, R_Phi and 1; shape (rows, nodes) to (rows, 3).

    With u**2 - u1**2 = eps - 1 both coefficients are written as multiples of eps - 1, which
    vanish exactly without ground and cancel nowhere.
    """
    inverse = 1.0 / (u + u1)
    vector = (eps - 1.0) * (inverse * inverse)
    scalar = (eps - 1.0) * ((inverse - u) / (eps * u + u1))
    return np.stack(
        [(weight * vector).sum(axis=1), (weight * scalar).sum(axis=1), weight.sum(axis=1)], axis=1
    )


def _graded(span: Real, nodes: tuple[int, ...]) -> list[tuple[Count, Real, Real]]:
    """Group rows by the number of halvings that resolve their start; give each group its rule.

    `span` is the length of the contour over the length scale at its start.
    """
    levels = np.ceil(np.log2(np.maximum(span, 2.0))).astype(np.intp)
    groups = []
    for level in np.unique(levels):
        x, w = _graded_rule(int(level), nodes)
        groups.append((np.nonzero(levels == level)[0], x, w))
    return groups


@lru_cache(maxsize=64)
def _graded_rule(level: int, nodes: tuple[int, ...]) -> tuple[Real, Real]:
    """Gauss-Legendre on [0, 1] in panels that halve `level` times towards 0."""
    edges = np.concatenate([[0.0], 2.0 ** -np.arange(level, -1, -1.0)])
    abscissae, weights = [], []
    for panel in range(level + 1):
        x, w = np.polynomial.legendre.leggauss(nodes[min(level - panel, len(nodes) - 1)])
        half = 0.5 * (edges[panel + 1] - edges[panel])
        abscissae.append(edges[panel] + half * (x + 1.0))
        weights.append(half * w)
    rule = np.concatenate(abscissae), np.concatenate(weights)
    for array in rule:
        array.setflags(write=False)
    return rule
