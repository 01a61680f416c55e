"""Resonances against converged full-wave solutions and facts of the trade."""

from __future__ import annotations

import numpy as np
import pytest

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.resonance import Resonance, resonant_frequencies, resonant_lengths

# Source: Hallen's equation with the exact (tube) kernel, uniform field over a gap of one radius,
# Nystrom solution converged to about 1e-6, stated to 1e-4 in length and 1e-3 in resistance (1e-2
# at anti-resonance). Computed from published formula.
# Length over diameter, order, length in wavelengths, resistance in ohm.
CONVERGED = [
    (50, 1, 0.463828, 73.325),
    (100, 1, 0.469098, 72.498),
    (100, 2, 0.778378, 909.3),
    (500, 1, 0.478141, 72.025),
    (500, 2, 0.863291, 1918.2),
    (500, 3, 1.471860, 106.39),
    (500, 5, 2.470411, 123.69),
    (5000, 1, 0.485013, 72.092),
    (5000, 2, 0.923201, 4034.1),
    (5000, 3, 1.481249, 105.96),
    (5000, 5, 2.479633, 122.38),
    (50000, 1, 0.488597, 72.236),
    (50000, 2, 0.948852, 6905.0),
    (50000, 3, 1.486212, 105.99),
    (50000, 5, 2.485201, 122.33),
]
LENGTH_M = 20.0


@pytest.fixture(scope="module")
def resonances() -> dict[int, dict[int, Resonance]]:
    """Resonances by slenderness and order."""
    found: dict[int, dict[int, Resonance]] = {}
    for slenderness, order, _, _ in CONVERGED:
        highest = max(o for s, o, _, _ in CONVERGED if s == slenderness)
        if order == highest:
            all_of_wire = resonant_frequencies(
                LENGTH_M, LENGTH_M / slenderness / 2.0, highest_order=highest
            )
            found[slenderness] = {r.order: r for r in all_of_wire}
    return found


@pytest.mark.parametrize(("slenderness", "order", "wavelengths", "resistance"), CONVERGED)
def test_resonant_length_is_that_of_the_converged_solution(
    resonances: dict[int, dict[int, Resonance]],
    slenderness: int,
    order: int,
    wavelengths: float,
    resistance: float,
) -> None:
    del resistance
    found = resonances[slenderness][order]
    got = found.length_m * found.frequency_hz / SPEED_OF_LIGHT_M_PER_S
    assert got == pytest.approx(wavelengths, rel=3e-5)


@pytest.mark.parametrize(("slenderness", "order", "wavelengths", "resistance"), CONVERGED)
def test_resonant_resistance_is_that_of_the_converged_solution(
    resonances: dict[int, dict[int, Resonance]],
    slenderness: int,
    order: int,
    wavelengths: float,
    resistance: float,
) -> None:
    del wavelengths
    found = resonances[slenderness][order]
    assert found.resistance_ohm == pytest.approx(resistance, rel=2e-4)


def test_orders_alternate_between_series_and_parallel() -> None:
    found = resonant_frequencies(LENGTH_M, 1e-3, highest_order=8)
    assert [r.order for r in found] == [1, 2, 3, 4, 5, 6, 7, 8]
    assert [r.kind for r in found] == ["series", "parallel"] * 4


def test_third_resonance_lies_above_three_times_the_first() -> None:
    # Common practice: a 40 m half wave is too short a 3/2 wave on 15 m's low end.
    first, _, third = resonant_frequencies(LENGTH_M, 1e-3, highest_order=3)
    assert 3.0 < third.frequency_hz / first.frequency_hz < 3.1


def test_series_resonance_of_the_three_half_wave_is_about_106_ohm() -> None:
    # Common practice: 104 to 106 ohm for thin wire.
    third = resonant_frequencies(LENGTH_M, 5e-4, highest_order=3)[2]
    assert 104.0 < third.resistance_ohm < 107.0


def test_half_wave_wire_is_cut_about_five_per_cent_short() -> None:
    # Common practice: 142.6 / f(MHz) m, the 468 / f feet rule, meant for wire among its
    # surroundings; thin wire in free space is a little longer.
    first = resonant_lengths(7.1e6, 8e-4, highest_order=1)[0]
    assert 142.6 / 7.1 < first.length_m < 150.0 / 7.1


def test_lengths_and_frequencies_find_the_same_resonance() -> None:
    by_length = resonant_lengths(14.2e6, 1e-3, highest_order=3)[2]
    by_frequency = resonant_frequencies(by_length.length_m, 1e-3, highest_order=3)[2]
    assert by_frequency.frequency_hz == pytest.approx(14.2e6, rel=1e-6)
    assert by_frequency.slope_ohm_per_hz == pytest.approx(by_length.slope_ohm_per_hz, rel=1e-3)


def test_slope_at_the_first_resonance_is_that_of_a_line() -> None:
    # Schelkunoff's mean characteristic impedance 120 (ln(L/a) - 1), Antennas: Theory and
    # Practice: X = -Zc cot(kL/2), so f dX/df = Zc pi/2; the radiating wire is within 15 %.
    radius_m = 1e-4
    first = resonant_frequencies(LENGTH_M, radius_m, highest_order=1)[0]
    line = 120.0 * (np.log(LENGTH_M / radius_m) - 1.0) * np.pi / 2.0
    assert first.slope_ohm_per_hz * first.frequency_hz == pytest.approx(line, rel=0.15)
