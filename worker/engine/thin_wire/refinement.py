"""Fineness of the solution: levels of mesh and degree, and when one is fine enough."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import pi
from typing import Final

import numpy as np
from numpy.typing import NDArray

from worker.engine.thin_wire.basis import reference_element
from worker.engine.thin_wire.batch import WireBatch
from worker.engine.thin_wire.discretisation import Discretisation
from worker.engine.thin_wire.galerkin import Condition, PortSolution, solve_ports
from worker.engine.thin_wire.gap import sharp_admittance
from worker.engine.thin_wire.mesh import Grading, HalfWires, element_breaks, element_counts

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class Level:
    """One fineness of solution; the next is tried where the estimated error is too large.

    With `few_shapes` meshes are rounded up to a few numbers of elements, so that wires of many
    lengths are solved in few runs: each wire costs more arithmetic, and far less around it.
    """

    degree: int
    points: int
    grading: Grading
    few_shapes: bool = False


LEVELS: Final = (
    Level(5, 7, Grading(0.32, 5.0, 2.0, 1.8, 0.85)),
    Level(6, 8, Grading(0.2, 8.0, 1.4, 1.5, 0.8)),
    Level(8, 11, Grading(0.15, 6.0, 1.0, 1.2, 0.7)),
)

# A coarser start, for those who solve thousands of wires to choose among them: half the time.
SURVEY_LEVEL: Final = Level(4, 6, Grading(0.35, 12.0, 2.2, 2.0, 0.9), few_shapes=True)

# Errors are judged as errors of the wire's electrical half length, in radians. On a lossless wire
# of characteristic impedance Zc, Z = -j Zc cot x, so that |dZ/dx| = (Zc^2 + |Z|^2) / Zc.
TOLERANCE_RAD: Final = 1e-4
SURVEY_TOLERANCE_RAD: Final = 1e-3
# What comparison of degrees cannot see: quadrature and the split of the source.
_FLOOR_RAD = 2e-5
# Share of the change from the degree before that is counted as error.
_SHARE_OF_CHANGE = 0.5
# Numbers of elements that meshes are rounded up to where few shapes are wanted: by a fifth at most.
_RUNGS: Final = np.array(
    [1, 2, 3, 4, 5, 6, 7, 8, 10, 12, 14, 17, 20, 24, 28, 33, 40, 48, 58, 70, 84, 100]
)
# Entries of the largest array of one chunk: holds memory flat and the caches warm.
_CHUNK_ENTRIES = 200_000


@dataclass(frozen=True, slots=True)
class Solved:
    """Wires of one mesh shape solved at one level; all arrays start with the wire.

    `port_voltage` (B, P) are the voltages across the gaps, less the drop in their own loads, for
    one volt applied at the feed; `even` and `odd` are as in `galerkin.PortSolution`.
    """

    mesh: Discretisation
    impedance_ohm: ComplexArray
    wire_impedance_slope_m: ComplexArray
    estimated_error_ohm: FloatArray
    converged: NDArray[np.bool_]
    port_voltage: ComplexArray
    even: ComplexArray
    odd: ComplexArray


def solve_level(
    batch: WireBatch,
    rows: NDArray[np.intp],
    level: Level,
    tolerance_rad: float = TOLERANCE_RAD,
) -> Iterator[tuple[NDArray[np.intp], Solved]]:
    """Solve some rows of a batch, in runs of one mesh shape that fit the working memory."""
    condition = Condition(batch.ground, batch.wire_impedance_ohm_per_m)
    for some, (solved,) in solve_level_under(batch, (condition,), rows, level, tolerance_rad):
        yield some, solved


def solve_level_under(
    batch: WireBatch,
    conditions: Sequence[Condition],
    rows: NDArray[np.intp],
    level: Level,
    tolerance_rad: float = TOLERANCE_RAD,
) -> Iterator[tuple[NDArray[np.intp], list[Solved]]]:
    """The same under each of some conditions; the batch itself hangs at the lowest height."""
    part = batch[rows]
    counts = element_counts(_half_wires(part), level.grading)
    if level.few_shapes:
        counts = _RUNGS[np.searchsorted(_RUNGS, counts)]
    for count in np.unique(counts):
        members = np.nonzero(counts == count)[0]
        size = max(1, _CHUNK_ENTRIES // ((int(count) + 2) * level.points) ** 2)
        for start in range(0, members.size, size):
            some = members[start : start + size]
            under = [condition[rows[some]] for condition in conditions]
            yield rows[some], _solve(part[some], under, int(count), level, tolerance_rad)


def _solve(
    part: WireBatch,
    conditions: Sequence[Condition],
    elements: int,
    level: Level,
    tolerance_rad: float,
) -> list[Solved]:
    mesh = Discretisation(
        element=reference_element(level.degree, level.points),
        breaks_m=element_breaks(_half_wires(part), level.grading, elements),
        radius_m=part.radius_m,
        wavenumber_per_m=part.wavenumber_per_m,
    )
    ports = solve_ports(mesh, part.port_position_m, part.gap_m, part.sigma_m, conditions)
    return [
        _solved(part, mesh, each, condition.wire_impedance_ohm_per_m, tolerance_rad)
        for each, condition in zip(ports, conditions, strict=True)
    ]


def _solved(
    part: WireBatch,
    mesh: Discretisation,
    ports: PortSolution,
    wire_impedance_ohm_per_m: ComplexArray,
    tolerance_rad: float,
) -> Solved:
    sharp = _sharp_admittances(part, wire_impedance_ohm_per_m)
    voltage, impedance = _feed(part, ports.admittance + sharp)
    # Stationary in the current: dZ/dz is the integral of I^2 over the square at the feed.
    products = np.einsum("bp,bpq,bq->b", voltage, ports.current_products, voltage)
    _, coarse = _feed(part, ports.coarse_admittance + sharp)
    characteristic = 120.0 * (np.log(part.length_m / part.radius_m) - 1.0)
    per_radian = (characteristic**2 + np.abs(impedance) ** 2) / characteristic
    error = _SHARE_OF_CHANGE * np.abs(impedance - coarse) + _FLOOR_RAD * per_radian
    return Solved(
        mesh=mesh,
        impedance_ohm=impedance,
        wire_impedance_slope_m=products * impedance**2,
        estimated_error_ohm=error,
        converged=error <= tolerance_rad * per_radian,
        port_voltage=voltage,
        even=ports.even,
        odd=ports.odd,
    )


def _half_wires(batch: WireBatch) -> HalfWires:
    return HalfWires(
        half_length_m=batch.length_m / 2.0,
        radius_m=batch.radius_m,
        wavelength_m=2.0 * pi / batch.wavenumber_per_m,
        height_m=batch.height_m,
        port_distance_m=np.abs(batch.port_position_m),
        sigma_m=batch.sigma_m,
    )


def _sharp_admittances(part: WireBatch, wire_impedance_ohm_per_m: ComplexArray) -> ComplexArray:
    """Diagonal matrices (B, P, P) of what the sharp parts of the sources add."""
    ports = part.sigma_m.shape[1]
    total = np.zeros((len(part.sigma_m), ports, ports), dtype=complex)
    for port in range(ports):
        total[:, port, port] = sharp_admittance(
            part.wavenumber_per_m,
            part.radius_m,
            part.gap_m,
            part.sigma_m[:, port],
            wire_impedance_ohm_per_m,
        )
    return total


def _feed(part: WireBatch, admittance: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    """Gap voltages (B, P) for one volt at the feed, and the feed impedance (B,).

    Port currents are I = Y V, and V = E - Z I with Z the loads and E one volt at the feed.
    """
    ports = admittance.shape[1]
    system = np.eye(ports) + part.port_impedance_ohm[:, :, None] * admittance
    applied = np.zeros((len(admittance), ports, 1), dtype=complex)
    applied[:, 0] = 1.0
    voltage = np.linalg.solve(system, applied)[:, :, 0].astype(complex, copy=False)
    current = np.sum(admittance[:, 0] * voltage, axis=1)
    return voltage, 1.0 / current
