"""Standing waves on many wires at once: the smooth part of the current, for pattern and drawing.

The sharp part that `gap` adds beside a feed has no content at wavelengths longer than the width of
the smooth source, so it radiates nothing; what it adds to the current there is some microsiemens,
to be seen only where the feed is at an anti-resonance. `wire.current` has it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.thin_wire.batch import checked_batch
from worker.engine.thin_wire.discretisation import Discretisation
from worker.engine.thin_wire.refinement import (
    LEVELS,
    SURVEY_LEVEL,
    SURVEY_TOLERANCE_RAD,
    Solved,
    solve_level,
)
from worker.engine.thin_wire.reflection import ReflectedPotentials

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class StandingWave:
    """Smooth current along one wire for one volt at its feed.

    Attributes
    ----------
    position_m, weight_m
        Nodes and weights of an integration rule along the wire, ascending from the end that
        `feed_fraction` counts from; zero is the centre.
    current_a_per_v
        Current at the nodes.
    place_fraction
        Places evenly spaced from that end to the other, as fractions of the length.
    current_at_place_a_per_v
        Current there; zero at the ends.
    impedance_ohm
        At the feed, as in `wire.feed_impedance` of a survey.
    """

    position_m: FloatArray
    weight_m: FloatArray
    current_a_per_v: ComplexArray
    place_fraction: FloatArray
    current_at_place_a_per_v: ComplexArray
    impedance_ohm: complex


def standing_waves(
    length_m: ArrayLike,
    radius_m: ArrayLike,
    frequency_hz: ArrayLike,
    *,
    feed_fraction: ArrayLike = 0.5,
    gap_m: ArrayLike | None = None,
    wire_impedance_ohm_per_m: ArrayLike = 0.0,
    reflected: ReflectedPotentials | Sequence[ReflectedPotentials] | None = None,
    places: int = 41,
) -> tuple[StandingWave, ...]:
    """Standing waves on a batch of wires; parameters and errors as for `wire.feed_impedance`.

    Solved no closer than its survey: within some thousandths of the largest current.

    Parameters
    ----------
    places
        How many places along each wire the current is also given at, ends included.

    Returns
    -------
    tuple of StandingWave
        In the order of the flattened batch.
    """
    batch = checked_batch(
        length_m,
        radius_m,
        frequency_hz,
        feed_fraction=feed_fraction,
        gap_m=gap_m,
        wire_impedance_ohm_per_m=wire_impedance_ohm_per_m,
        loads=(),
        reflected=reflected,
    )
    found: dict[int, StandingWave] = {}
    pending = np.arange(batch.length_m.size)
    for level in (SURVEY_LEVEL, *LEVELS):
        unfinished: list[int] = []
        for rows, solved in solve_level(batch, pending, level, SURVEY_TOLERANCE_RAD):
            for index, row in enumerate(rows.tolist()):
                found[row] = _wave(solved, index, places)
                if not solved.converged[index]:
                    unfinished.append(row)
        if not unfinished:
            break
        pending = np.array(unfinished, dtype=np.intp)
    return tuple(found[row] for row in range(batch.length_m.size))


def _wave(solved: Solved, index: int, places: int) -> StandingWave:
    mesh = _one_of(solved.mesh, index)
    voltage = solved.port_voltage[index]
    even, odd = solved.even[index] @ voltage, solved.odd[index] @ voltage
    half, half_weight = mesh.nodes()[0], mesh.weights()[0]
    order = np.argsort(half)
    half, half_weight = half[order], half_weight[order]
    half_length_m = float(mesh.breaks_m[0, -1])
    fraction = np.linspace(0.0, 1.0, places)
    placed_m = half_length_m * (2.0 * fraction - 1.0)

    def along(position_m: FloatArray) -> ComplexArray:
        distance = np.minimum(np.abs(position_m), half_length_m)
        value: ComplexArray = mesh.evaluate(even, distance)
        if odd.size:
            value = value + np.sign(position_m) * mesh.evaluate(odd, distance)
        return value

    position = np.concatenate([-half[::-1], half])
    return StandingWave(
        position_m=position,
        weight_m=np.concatenate([half_weight[::-1], half_weight]),
        current_a_per_v=along(position),
        place_fraction=fraction,
        current_at_place_a_per_v=along(placed_m),
        impedance_ohm=complex(solved.impedance_ohm[index]),
    )


def _one_of(mesh: Discretisation, index: int) -> Discretisation:
    """One wire of a mesh: all of its arrays start with the wire."""
    rows = {
        each.name: getattr(mesh, each.name)[index : index + 1]
        for each in fields(mesh)
        if isinstance(getattr(mesh, each.name), np.ndarray)
    }
    return replace(mesh, **rows)
