"""Solver, ground table and far field fit together."""

from __future__ import annotations

import numpy as np
import pytest

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.field import RadiatingWire, power_budget
from worker.engine.ground import GROUND_CLASSES, PERFECT_GROUND, Ground, tabulate
from worker.engine.thin_wire import ReflectedPotentials, current, feed_impedance

FREQUENCY_HZ = 14.2e6
WAVELENGTH_M = SPEED_OF_LIGHT_M_PER_S / FREQUENCY_HZ


@pytest.mark.parametrize("height", [0.01, 0.05, 0.5])
@pytest.mark.parametrize("length", [0.05, 0.5, 6.0])
def test_table_serves_a_wire_as_long_as_its_reach(length: float, height: float) -> None:
    table: ReflectedPotentials = tabulate(
        GROUND_CLASSES["average"], FREQUENCY_HZ, height * WAVELENGTH_M, length * WAVELENGTH_M
    )
    solved = feed_impedance(
        length * WAVELENGTH_M, 1e-4 * WAVELENGTH_M, FREQUENCY_HZ, reflected=table
    )
    assert np.isfinite(solved.impedance_ohm)


@pytest.mark.parametrize(("ground", "height"), [(None, 0.0), (PERFECT_GROUND, 0.3)])
def test_current_of_the_solver_radiates_what_its_feed_accepts(
    ground: Ground | None, height: float
) -> None:
    table = None
    if ground is not None:
        table = tabulate(ground, FREQUENCY_HZ, height * WAVELENGTH_M, 0.5 * WAVELENGTH_M)
    solved = current(0.48 * WAVELENGTH_M, 1e-4 * WAVELENGTH_M, FREQUENCY_HZ, reflected=table)
    wire = RadiatingWire(
        solved.position_m,
        solved.current_a_per_v,
        FREQUENCY_HZ,
        ground,
        height * WAVELENGTH_M,
        solved.weight_m,
    )
    accepted = 0.5 * (1.0 / solved.impedance_ohm).real
    assert power_budget(wire, accepted).radiated_fraction == pytest.approx(1.0, abs=1e-3)
