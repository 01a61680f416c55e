"""Feed impedance and current of a straight wire: the public calls."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import inf, pi
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.engine.thin_wire.basis import reference_element
from worker.engine.thin_wire.discretisation import Discretisation
from worker.engine.thin_wire.galerkin import PortSolution, solve_ports
from worker.engine.thin_wire.gap import sharp_admittance, sharp_current
from worker.engine.thin_wire.mesh import Grading, HalfWires, element_breaks, element_counts
from worker.engine.thin_wire.reflection import ReflectedPotentials

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

MODEL: Final[str] = (
    "straight tubular wire, exact averaged kernel, Galerkin solution, "
    "source of uniform field over a gap of stated width"
)

LENGTH_RANGE_WAVELENGTHS: Final = (0.05, 6.0)
RADIUS_RANGE_WAVELENGTHS: Final = (1e-7, 5e-3)
# A port stays this many radii away from the ends, and ports from each other.
PORT_CLEARANCE_RADII: Final = 5.0
SHORTEST_LENGTH_RADII: Final = 2.0 * PORT_CLEARANCE_RADII
GAP_RANGE_RADII: Final = (1e-2, inf)

# Permitted estimated error, relative to the impedance's magnitude.
_TOLERANCE = 5e-4
# What comparison of degrees cannot see, relative: quadrature and the split of the source.
_ERROR_FLOOR = 1e-4


@dataclass(frozen=True, slots=True)
class _Level:
    """One fineness of solution; the next is tried where the estimated error is too large."""

    degree: int
    points: int
    grading: Grading


_LEVELS = (
    _Level(5, 7, Grading(0.3, 1.8, 2.0, 1.2)),
    _Level(6, 8, Grading(0.2, 1.4, 2.0, 1.2)),
    _Level(8, 11, Grading(0.15, 1.0, 1.5, 1.0)),
)
# Width of the smooth source: in radians of phase, and as a fraction of the distances to the
# nearest end, of the other ports and to the image in the ground.
_SIGMA_PHASE = 0.3
_SIGMA_CLEARANCE = 1.0 / 6.0
# Points of the largest kernel array in one chunk; holds memory flat and the caches warm.
_CHUNK_POINTS = 200_000


@dataclass(frozen=True, slots=True)
class FeedImpedance:
    """Feed impedance of each wire of a batch; every array has the batch's shape.

    Attributes
    ----------
    impedance_ohm
        Gap voltage over mean current in the gap.
    estimated_error_ohm
        Half the change from the next lower degree, plus a floor of 1e-4 of the magnitude for
        what that comparison cannot see.
    unknowns
        Unknowns of the linear system solved, per parity of the current.
    gap_m
        Width of the source gap.
    converged
        Whether the estimated error is within the tolerance.
    model
        What was solved, in words.
    """

    impedance_ohm: ComplexArray
    estimated_error_ohm: FloatArray
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


@dataclass(frozen=True, slots=True)
class _Batch:
    """Checked, flattened input. Ports: feed first, then loads; arrays (B,) or (B, ports)."""

    shape: tuple[int, ...]
    length_m: FloatArray
    radius_m: FloatArray
    wavenumber_per_m: FloatArray
    gap_m: FloatArray
    wire_impedance_ohm_per_m: ComplexArray
    port_position_m: FloatArray
    sigma_m: FloatArray
    port_impedance_ohm: ComplexArray

    def __getitem__(self, rows: NDArray[np.intp]) -> _Batch:
        return _Batch(
            (rows.size,),
            self.length_m[rows],
            self.radius_m[rows],
            self.wavenumber_per_m[rows],
            self.gap_m[rows],
            self.wire_impedance_ohm_per_m[rows],
            self.port_position_m[rows],
            self.sigma_m[rows],
            self.port_impedance_ohm[rows],
        )


def feed_impedance(
    length_m: ArrayLike,
    radius_m: ArrayLike,
    frequency_hz: ArrayLike,
    *,
    feed_fraction: ArrayLike = 0.5,
    gap_m: ArrayLike | None = None,
    wire_impedance_ohm_per_m: ArrayLike = 0.0,
    loads: Sequence[tuple[float, ArrayLike]] = (),
    reflected: ReflectedPotentials | None = None,
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
        Ground under the wire; None for free space.

    Returns
    -------
    FeedImpedance
        Arrays of the batch's shape.

    Raises
    ------
    OutOfRange
        Length outside 0.05 to 6 wavelengths, radius outside 1e-7 to 5e-3 wavelengths, a port
        within five radii of an end or of another port, or a frequency that is not the ground's.

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
    batch = _checked(
        length_m,
        radius_m,
        frequency_hz,
        feed_fraction,
        gap_m,
        wire_impedance_ohm_per_m,
        loads,
        reflected,
    )
    count = batch.length_m.size
    impedance = np.zeros(count, dtype=complex)
    error = np.full(count, inf)
    unknowns = np.zeros(count, dtype=np.intp)
    pending = np.arange(count)
    for level in _LEVELS:
        for rows, mesh in _chunks(batch, pending, level):
            part = batch[rows]
            solution = _solve(part, mesh, reflected)
            sharp = _sharp(part)
            impedance[rows] = 1.0 / _feed_admittance(part, solution.admittance, sharp)
            coarse = 1.0 / _feed_admittance(part, solution.coarse_admittance, sharp)
            error[rows] = _estimated_error(impedance[rows], coarse)
            unknowns[rows] = mesh.unknowns
        pending = np.nonzero(error > _TOLERANCE * np.abs(impedance))[0]
        if not pending.size:
            break
    converged = error <= _TOLERANCE * np.abs(impedance)
    return FeedImpedance(
        impedance_ohm=impedance.reshape(batch.shape),
        estimated_error_ohm=error.reshape(batch.shape),
        unknowns=unknowns.reshape(batch.shape),
        gap_m=batch.gap_m.reshape(batch.shape),
        converged=converged.reshape(batch.shape),
        model=MODEL,
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
    batch = _checked(
        length_m,
        radius_m,
        frequency_hz,
        feed_fraction,
        gap_m,
        wire_impedance_ohm_per_m,
        loads,
        reflected,
    )
    sharp = _sharp(batch)
    for level in _LEVELS:
        ((_, mesh),) = _chunks(batch, np.arange(1), level)
        solution = _solve(batch, mesh, reflected)
        impedance = 1.0 / _feed_admittance(batch, solution.admittance, sharp)
        coarse = 1.0 / _feed_admittance(batch, solution.coarse_admittance, sharp)
        error = _estimated_error(impedance, coarse)
        converged = bool(error[0] <= _TOLERANCE * abs(impedance[0]))
        if converged:
            break
    voltage = _port_voltages(batch, solution.admittance, sharp)[0]
    half_position, half_weight = mesh.nodes()[0], mesh.weights()[0]
    even = mesh.evaluate(solution.even @ voltage)[0]
    odd = mesh.evaluate(solution.odd @ voltage)[0]
    position = np.concatenate([-half_position[::-1], half_position])
    along = np.concatenate([(even - odd)[::-1], even + odd])
    for port, volts in enumerate(voltage):
        along = along + volts * sharp_current(
            position - batch.port_position_m[0, port],
            float(batch.wavenumber_per_m[0]),
            float(batch.radius_m[0]),
            float(batch.gap_m[0]),
            float(batch.sigma_m[0, port]),
            complex(batch.wire_impedance_ohm_per_m[0]),
        )
    return WireCurrent(
        position_m=position,
        weight_m=np.concatenate([half_weight[::-1], half_weight]),
        current_a_per_v=along,
        impedance_ohm=complex(impedance[0]),
        estimated_error_ohm=float(error[0]),
        converged=converged,
        gap_m=float(batch.gap_m[0]),
        model=MODEL,
    )


def _checked(
    length_m: ArrayLike,
    radius_m: ArrayLike,
    frequency_hz: ArrayLike,
    feed_fraction: ArrayLike,
    gap_m: ArrayLike | None,
    wire_impedance_ohm_per_m: ArrayLike,
    loads: Sequence[tuple[float, ArrayLike]],
    reflected: ReflectedPotentials | None,
) -> _Batch:
    arrays = np.broadcast_arrays(
        np.asarray(length_m, dtype=float),
        np.asarray(radius_m, dtype=float),
        np.asarray(frequency_hz, dtype=float),
        np.asarray(feed_fraction, dtype=float),
        np.asarray(radius_m if gap_m is None else gap_m, dtype=float),
        np.asarray(wire_impedance_ohm_per_m, dtype=complex),
        *(np.asarray(impedance, dtype=complex) for _, impedance in loads),
    )
    shape = arrays[0].shape
    length, radius, frequency, feed, gap = (np.ravel(array) for array in arrays[:5])
    wire_impedance = np.ravel(arrays[5]).astype(complex)
    _require("frequency_hz", frequency, 1.0, 1e12, "Hz")
    wavelength = SPEED_OF_LIGHT_M_PER_S / frequency
    _require("length in wavelengths", length / wavelength, *LENGTH_RANGE_WAVELENGTHS)
    _require("radius in wavelengths", radius / wavelength, *RADIUS_RANGE_WAVELENGTHS)
    _require("gap in radii", gap / radius, *GAP_RANGE_RADII)
    _require("wire_impedance_ohm_per_m", wire_impedance.real, 0.0, inf, "ohm/m")
    if reflected is not None:
        own = reflected.frequency_hz
        _require("frequency_hz", frequency, own * (1 - 1e-9), own * (1 + 1e-9), "Hz")
    position = [(feed - 0.5) * length]
    impedance = [np.zeros(length.size, dtype=complex)]
    for (fraction, _), value in zip(loads, arrays[6:], strict=True):
        place = (fraction - 0.5) * length
        matches = [i for i, other in enumerate(position) if np.allclose(other, place, atol=0.0)]
        if matches:
            impedance[matches[0]] = impedance[matches[0]] + np.ravel(value)
        else:
            position.append(place)
            impedance.append(np.ravel(value).astype(complex))
    ports = np.stack(position, axis=1)
    clearance = _clearance(ports, length)
    for port in range(ports.shape[1]):
        _require(
            "distance from a feed or load to an end or another load, in radii",
            clearance[:, port] / np.maximum(radius, gap / PORT_CLEARANCE_RADII),
            PORT_CLEARANCE_RADII * (1.0 - 1e-9),
            inf,
        )
    sigma = np.minimum(
        (_SIGMA_PHASE / (2.0 * pi) * wavelength)[:, None], _SIGMA_CLEARANCE * clearance
    )
    if reflected is not None:
        sigma = np.minimum(sigma, _SIGMA_CLEARANCE * 2.0 * reflected.height_m)
    return _Batch(
        shape=shape,
        length_m=length,
        radius_m=radius,
        wavenumber_per_m=2.0 * pi / wavelength,
        gap_m=gap,
        wire_impedance_ohm_per_m=wire_impedance,
        port_position_m=ports,
        sigma_m=sigma,
        port_impedance_ohm=np.stack(impedance, axis=1),
    )


def _require(quantity: str, values: FloatArray, low: float, high: float, unit: str = "") -> None:
    outside = ~((values >= low) & (values <= high))
    if np.any(outside):
        raise OutOfRange(quantity, float(values[outside][0]), low, high, unit)


def _clearance(ports: FloatArray, length: FloatArray) -> FloatArray:
    """Distance from each port to the nearest end or other port, (B, ports)."""
    nearest = length[:, None] / 2.0 - np.abs(ports)
    for port in range(ports.shape[1]):
        for other in range(ports.shape[1]):
            if other != port:
                distance = np.abs(ports[:, port] - ports[:, other])
                nearest[:, port] = np.minimum(nearest[:, port], distance)
    return nearest


def _chunks(
    batch: _Batch, rows: NDArray[np.intp], level: _Level
) -> list[tuple[NDArray[np.intp], Discretisation]]:
    """Split rows into runs of the same mesh shape that fit the working memory."""
    part = batch[rows]
    wires = HalfWires(
        half_length_m=part.length_m / 2.0,
        radius_m=part.radius_m,
        wavelength_m=2.0 * pi / part.wavenumber_per_m,
        port_distance_m=np.abs(part.port_position_m),
        sigma_m=part.sigma_m,
    )
    counts = element_counts(wires, level.grading)
    chunks = []
    for count in np.unique(counts):
        members = np.nonzero(counts == count)[0]
        size = max(1, _CHUNK_POINTS // ((int(count) + 2) * level.points) ** 2)
        for start in range(0, members.size, size):
            some = members[start : start + size]
            wires_here = HalfWires(
                half_length_m=wires.half_length_m[some],
                radius_m=wires.radius_m[some],
                wavelength_m=wires.wavelength_m[some],
                port_distance_m=wires.port_distance_m[some],
                sigma_m=wires.sigma_m[some],
            )
            mesh = Discretisation(
                element=reference_element(level.degree, level.points),
                breaks_m=element_breaks(wires_here, level.grading, int(count)),
                radius_m=part.radius_m[some],
                wavenumber_per_m=part.wavenumber_per_m[some],
                wire_impedance_ohm_per_m=part.wire_impedance_ohm_per_m[some],
            )
            chunks.append((rows[some], mesh))
    return chunks


def _solve(
    part: _Batch, mesh: Discretisation, reflected: ReflectedPotentials | None
) -> PortSolution:
    return solve_ports(mesh, part.port_position_m, part.gap_m, part.sigma_m, reflected)


def _estimated_error(impedance: ComplexArray, coarse: ComplexArray) -> FloatArray:
    error: FloatArray = 0.5 * np.abs(impedance - coarse) + _ERROR_FLOOR * np.abs(impedance)
    return error


def _sharp(part: _Batch) -> ComplexArray:
    """Diagonal admittances (B, ports) that the sharp parts of the sources add."""
    columns = [
        sharp_admittance(
            part.wavenumber_per_m,
            part.radius_m,
            part.gap_m,
            part.sigma_m[:, port],
            part.wire_impedance_ohm_per_m,
        )
        for port in range(part.sigma_m.shape[1])
    ]
    return np.stack(columns, axis=1)


def _port_voltages(part: _Batch, admittance: ComplexArray, sharp: ComplexArray) -> ComplexArray:
    """Gap voltages (B, ports) for one volt applied to the feed in series with its own load."""
    count = admittance.shape[1]
    total = admittance + sharp[:, :, None] * np.eye(count)
    # V = E - Z Y V, with Z the loads and E one volt at the feed.
    system = np.eye(count) + part.port_impedance_ohm[:, :, None] * total
    applied = np.zeros((len(total), count, 1), dtype=complex)
    applied[:, 0] = 1.0
    return np.linalg.solve(system, applied)[:, :, 0].astype(complex, copy=False)


def _feed_admittance(part: _Batch, admittance: ComplexArray, sharp: ComplexArray) -> ComplexArray:
    voltage = _port_voltages(part, admittance, sharp)
    feed: ComplexArray = np.einsum("bp,bp->b", admittance[:, 0], voltage)
    result: ComplexArray = feed + sharp[:, 0] * voltage[:, 0]
    return result
