"""Feed impedance and current of a straight wire: the public calls."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.thin_wire.batch import WireBatch, checked_batch
from worker.engine.thin_wire.discretisation import Discretisation
from worker.engine.thin_wire.galerkin import Condition
from worker.engine.thin_wire.gap import sharp_current
from worker.engine.thin_wire.refinement import (
    LEVELS,
    SURVEY_LEVEL,
    SURVEY_TOLERANCE_RAD,
    TOLERANCE_RAD,
    Solved,
    solve_level,
    solve_level_under,
)
from worker.engine.thin_wire.reflection import ReflectedPotentials

# The sharp current has died out this many widths of the smooth source away from its gap.
_SHARP_REACH_SIGMAS = 8.0

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

MODEL: Final[str] = (
    "straight tubular wire, exact averaged kernel, Galerkin solution, "
    "source of uniform field over a gap of stated width"
)


@dataclass(frozen=True, slots=True)
class FeedImpedance:
    """Feed impedance of each wire of a batch; every array has the batch's shape.

    Attributes
    ----------
    impedance_ohm
        Gap voltage over mean current in the gap.
    estimated_error_ohm
        Half the change from the next lower degree, plus what an error of 2e-5 rad in electrical
        half length would cause, for what that comparison cannot see.
    wire_impedance_slope_m
        Change of the impedance with `wire_impedance_ohm_per_m`: the integral of the squared
        current along the wire over its square at the feed.
    unknowns
        Unknowns of the linear system solved, per parity of the current.
    gap_m
        Width of the source gap.
    converged
        Whether the estimated error is within that of 1e-4 rad in electrical half length, which
        is below 0.2 % of the magnitude except close to zero.
    model
        What was solved, in words.
    """

    impedance_ohm: ComplexArray
    estimated_error_ohm: FloatArray
    wire_impedance_slope_m: ComplexArray
    unknowns: NDArray[np.intp]
    gap_m: FloatArray
    converged: NDArray[np.bool_]
    model: str


@dataclass(frozen=True, slots=True)
class WireCurrent:
    """Current along one wire for one volt at its feed.

    Attributes
    ----------
    position_m
        Points from the wire's centre, ascending, the feed on the side of `feed_fraction`; they
        are the nodes of an integration rule.
    weight_m
        Its weights: sum(weight_m * f(position_m)) integrates f along the wire.
    current_a_per_v
        Current at the points.
    impedance_ohm, estimated_error_ohm, converged, gap_m, model
        As in `FeedImpedance`.
    """

    position_m: FloatArray
    weight_m: FloatArray
    current_a_per_v: ComplexArray
    impedance_ohm: complex
    estimated_error_ohm: float
    converged: bool
    gap_m: float
    model: str


def feed_impedance(
    length_m: ArrayLike,
    radius_m: ArrayLike,
    frequency_hz: ArrayLike,
    *,
    feed_fraction: ArrayLike = 0.5,
    gap_m: ArrayLike | None = None,
    wire_impedance_ohm_per_m: ArrayLike = 0.0,
    loads: Sequence[tuple[float, ArrayLike]] = (),
    reflected: ReflectedPotentials | Sequence[ReflectedPotentials] | None = None,
    survey: bool = False,
) -> FeedImpedance:
    r"""Feed impedance of straight wires, many at once.

    Parameters
    ----------
    length_m, radius_m, frequency_hz
        Wire length, wire radius and frequency; arrays broadcast together to the batch's shape.
    feed_fraction
        Feed position as a fraction of the length, 0.5 the centre; broadcasts.
    gap_m
        Width of the source gap; broadcasts. Default: the wire's radius.
    wire_impedance_ohm_per_m
        Series impedance per unit length, complex; broadcasts.
    loads
        Lumped series loads: pairs of position (fraction of the length) and impedance (ohm,
        complex, broadcasts). A load at the feed is in series with it.
    reflected
        Ground under the wire, or one for each frequency of the batch, all at one height; None for
        free space.
    survey
        Accept an estimated error of 1e-3 of electrical half length and not 1e-4: measured, below
        0.05 ohm or 5e-4 of magnitude, for half the time; for choosing among thousands of wires.

    Returns
    -------
    FeedImpedance
        Arrays of the batch's shape.

    Raises
    ------
    OutOfRange
        Length outside 0.005 to 10 wavelengths, radius outside 1e-7 to 5e-3 wavelengths, wire
        shorter than ten radii, a feed or load within five radii or one gap width of an end or of
        another, a height below two radii, a frequency that is none of the ground's, or two heights.

    Notes
    -----
    Solves, for the current I on the tube of radius a,

    .. math::

        j\omega\mu_0 \int I (g_0 + g_A)\,dz' + \frac{d}{dz}\frac{1}{\varepsilon_0}
        \int q (g_0 + g_\Phi)\,dz' + Z_w I = E_\mathrm{gap},

    :math:`g_0` averaged around the circumference, and returns the gap's voltage over the mean
    current in it. Electrically the gap acts as a capacitance that grows by
    :math:`4ka/\eta` of susceptance per e-fold of 1 / gap, so a result without its gap means
    little near anti-resonance.

    References
    ----------
    E. Hallen (1938) and R. W. P. King, The Theory of Linear Antennas (1956): the integral
    equation; R. F. Harrington, Field Computation by Moment Methods (1968): Galerkin's method.
    """
    batch = checked_batch(
        length_m,
        radius_m,
        frequency_hz,
        feed_fraction=feed_fraction,
        gap_m=gap_m,
        wire_impedance_ohm_per_m=wire_impedance_ohm_per_m,
        loads=loads,
        reflected=reflected,
    )
    condition = Condition(batch.ground, batch.wire_impedance_ohm_per_m)
    return _solve_under(batch, (condition,), survey=survey)[0]


def feed_impedance_under(
    length_m: ArrayLike,
    radius_m: ArrayLike,
    frequency_hz: float,
    *,
    conditions: Sequence[tuple[ReflectedPotentials | None, ArrayLike]],
    feed_fraction: ArrayLike = 0.5,
    gap_m: ArrayLike | None = None,
    survey: bool = False,
) -> tuple[FeedImpedance, ...]:
    """Feed impedance of the same wires under several conditions, for little more than under one.

    Parameters
    ----------
    length_m, radius_m, frequency_hz, feed_fraction, gap_m, survey
        As for `feed_impedance`, but for one frequency.
    conditions
        Pairs of the ground under the wires, or None for free space, and their series impedance
        per unit length. Grounds may differ in height, and by `reflection.Rescaled` in frequency.

    Returns
    -------
    tuple of FeedImpedance
        One for each condition.

    Raises
    ------
    OutOfRange
        As for `feed_impedance`.
    """
    # The lowest decides on the mesh, which then does for those above it.
    lowest = min(conditions, key=lambda each: np.inf if each[0] is None else each[0].height_m)[0]
    batches = [
        checked_batch(
            length_m,
            radius_m,
            frequency_hz,
            feed_fraction=feed_fraction,
            gap_m=gap_m,
            wire_impedance_ohm_per_m=series,
            loads=(),
            reflected=ground,
        )
        for ground, series in (*conditions, (lowest, 0.0))
    ]
    under = [Condition(each.ground, each.wire_impedance_ohm_per_m) for each in batches[:-1]]
    return _solve_under(batches[-1], under, survey=survey)


def _solve_under(
    batch: WireBatch, conditions: Sequence[Condition], *, survey: bool
) -> tuple[FeedImpedance, ...]:
    """Solve a batch under each condition, level by level until all of a wire's answers hold."""
    shape = (len(conditions), batch.length_m.size)
    impedance = np.zeros(shape, dtype=complex)
    slope = np.zeros(shape, dtype=complex)
    error = np.zeros(shape)
    converged = np.zeros(shape, dtype=bool)
    unknowns = np.zeros(shape[1], dtype=np.intp)
    tolerance_rad = SURVEY_TOLERANCE_RAD if survey else TOLERANCE_RAD
    for level in (SURVEY_LEVEL, *LEVELS) if survey else LEVELS:
        pending = np.nonzero(~np.all(converged, axis=0))[0]
        if not pending.size:
            break
        for rows, answers in solve_level_under(batch, conditions, pending, level, tolerance_rad):
            for index, solved in enumerate(answers):
                impedance[index, rows] = solved.impedance_ohm
                slope[index, rows] = solved.wire_impedance_slope_m
                error[index, rows] = solved.estimated_error_ohm
                converged[index, rows] = solved.converged
                unknowns[rows] = solved.mesh.unknowns
    return tuple(
        FeedImpedance(
            impedance_ohm=impedance[index].reshape(batch.shape),
            estimated_error_ohm=error[index].reshape(batch.shape),
            wire_impedance_slope_m=slope[index].reshape(batch.shape),
            unknowns=unknowns.reshape(batch.shape),
            gap_m=batch.gap_m.reshape(batch.shape),
            converged=converged[index].reshape(batch.shape),
            model=MODEL,
        )
        for index in range(len(conditions))
    )


def current(
    length_m: float,
    radius_m: float,
    frequency_hz: float,
    *,
    feed_fraction: float = 0.5,
    gap_m: float | None = None,
    wire_impedance_ohm_per_m: complex = 0.0,
    loads: Sequence[tuple[float, complex]] = (),
    reflected: ReflectedPotentials | None = None,
) -> WireCurrent:
    """Current along one wire for one volt at its feed.

    Parameters and errors are those of `feed_impedance`, for one wire.

    Returns
    -------
    WireCurrent
        Positions from the centre with their integration weights, and complex current per volt.
    """
    batch = checked_batch(
        length_m,
        radius_m,
        frequency_hz,
        feed_fraction=feed_fraction,
        gap_m=gap_m,
        wire_impedance_ohm_per_m=wire_impedance_ohm_per_m,
        loads=loads,
        reflected=reflected,
    )
    for level in LEVELS:
        ((_, solved),) = solve_level(batch, np.arange(1), level)
        if solved.converged[0]:
            break
    position, weight, along = _current_along(batch, solved)
    return WireCurrent(
        position_m=position,
        weight_m=weight,
        current_a_per_v=along,
        impedance_ohm=complex(solved.impedance_ohm[0]),
        estimated_error_ohm=float(solved.estimated_error_ohm[0]),
        converged=bool(solved.converged[0]),
        gap_m=float(batch.gap_m[0]),
        model=MODEL,
    )


def _current_along(batch: WireBatch, solved: Solved) -> tuple[FloatArray, FloatArray, ComplexArray]:
    """Nodes, weights and current of the only wire of a batch, smooth and sharp parts together."""
    position, weight = _integration_rule(batch, solved.mesh)
    voltage = solved.port_voltage[0]
    distance = np.abs(position)
    even = solved.mesh.evaluate(solved.even[0] @ voltage, distance)
    odd = solved.mesh.evaluate(solved.odd[0] @ voltage, distance)
    along = even + np.sign(position) * odd
    for port, volts in enumerate(voltage):
        along = along + volts * sharp_current(
            position - batch.port_position_m[0, port],
            float(batch.wavenumber_per_m[0]),
            float(batch.radius_m[0]),
            float(batch.gap_m[0]),
            float(batch.sigma_m[0, port]),
            complex(batch.wire_impedance_ohm_per_m[0]),
        )
    return position, weight, along


def _integration_rule(batch: WireBatch, mesh: Discretisation) -> tuple[FloatArray, FloatArray]:
    """Positions and weights along the whole wire: the mesh's, and finer towards each gap.

    Panels halve the way to the edges of a gap down to its width, so that the logarithmic peaks
    of the sharp currents are integrated as exactly as the smooth part.
    """
    half_breaks = mesh.breaks_m[0, :-1]
    edges = [-half_breaks, half_breaks]
    gap, outermost = float(batch.gap_m[0]), float(half_breaks[-1])
    for position, sigma in zip(batch.port_position_m[0], batch.sigma_m[0], strict=True):
        count = int(np.ceil(np.log2(max(_SHARP_REACH_SIGMAS * float(sigma) / gap, 1.0)))) + 5
        steps = gap / 16.0 * 2.0 ** np.arange(count + 1.0)
        reach = np.concatenate([[0.0], steps, gap / 2.0 - steps[steps < gap / 2.0]])
        reach = np.concatenate([reach, gap / 2.0 + steps])
        edges += [position + reach, position - reach]
    breaks = np.unique(np.clip(np.concatenate(edges), -outermost, outermost))
    breaks = breaks[np.append(True, np.diff(breaks) > 1e-12 * outermost)]
    node, node_weight = mesh.element.node, mesh.element.weight
    middle, half = (breaks[1:] + breaks[:-1]) / 2.0, (breaks[1:] - breaks[:-1]) / 2.0
    inner = (middle[:, None] + half[:, None] * node).ravel()
    inner_weight = (half[:, None] * node_weight).ravel()
    end, end_weight = mesh.nodes()[0, -node.size :], mesh.weights()[0, -node.size :]
    position = np.concatenate([-end[::-1], inner, end])
    return position, np.concatenate([end_weight[::-1], inner_weight, end_weight])
