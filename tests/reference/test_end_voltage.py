"""Voltage at a wire's ends, against the boundary condition and published approximations.

Sources, from memory: R. W. P. King, "The Theory of Linear Antennas", 1956, ch. II (potentials, and
no tangential field on the conductor); S. A. Schelkunoff, "Antennas: Theory and Practice", 1952
(average characteristic impedance of a thin dipole); image theory as in C. A. Balanis, "Antenna
Theory", 3rd ed., 2005, sec. 4.7.
"""

from __future__ import annotations

from math import log, pi, sqrt

import numpy as np
import pytest
from numpy.typing import NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S, VACUUM_PERMEABILITY_H_PER_M
from worker.engine.end_voltage import end_voltages, peak_feed_voltage_v
from worker.engine.errors import OutOfRange
from worker.engine.ground import GROUND_CLASSES, PERFECT_GROUND, Ground, tabulate
from worker.engine.hung_pattern import hung_patterns
from worker.engine.hung_wire import GroundTables, HungWire
from worker.engine.thin_wire.standing_wave import StandingWave, standing_waves

FREQUENCY_HZ = 14.2e6
WAVE_M = SPEED_OF_LIGHT_M_PER_S / FREQUENCY_HZ
K = 2.0 * pi / WAVE_M


def wave_on(length_m: float, radius_m: float, feed_fraction: float = 0.5) -> StandingWave:
    (wave,) = standing_waves(
        length_m, radius_m, FREQUENCY_HZ, gap_m=radius_m, feed_fraction=feed_fraction
    )
    return wave


def half_line_potential(
    place_m: NDArray[np.float64], radius_m: float, from_m: float, to_m: float, depth_m: float = 0.0
) -> NDArray[np.complex128]:
    """Integral of exp(-jkR) / R along a stretch of the wire, or of its image so far below."""
    apart = sqrt(radius_m**2 + depth_m**2)
    static = np.arcsinh((to_m - place_m) / apart) - np.arcsinh((from_m - place_m) / apart)
    node, weight = np.polynomial.legendre.leggauss(200)
    along = from_m + 0.5 * (to_m - from_m) * (node + 1.0)
    reach = np.hypot(along[:, None] - place_m, apart)
    dynamic = 0.5 * (to_m - from_m) * weight @ ((np.exp(-1j * K * reach) - 1.0) / reach)
    return np.asarray(static + dynamic)


@pytest.mark.parametrize("length_wavelengths", [0.48, 1.0, 1.47, 2.5])
@pytest.mark.parametrize("radius_wavelengths", [1e-5, 1e-4])
def test_the_charge_makes_what_the_boundary_condition_asks_for(
    length_wavelengths: float, radius_wavelengths: float
) -> None:
    # No tangential field: the potential at the end is half the feed's volt less the integral of
    # j omega A from the centre. The engine takes the charge instead; both come of one current.
    length_m, radius_m = length_wavelengths * WAVE_M, radius_wavelengths * WAVE_M
    wave = wave_on(length_m, radius_m)
    reached = half_line_potential(wave.position_m, radius_m, 0.0, 0.5 * length_m)
    flux = (
        VACUUM_PERMEABILITY_H_PER_M
        / (4.0 * pi)
        * np.sum(wave.weight_m * wave.current_a_per_v * reached)
    )
    expected = 0.5 - 2j * pi * FREQUENCY_HZ * flux
    _, far = end_voltages(wave, length_m, radius_m, FREQUENCY_HZ)
    assert abs(far) == pytest.approx(abs(expected), rel=5e-4)


def test_over_a_perfect_ground_the_image_takes_its_part() -> None:
    height_m, length_m, radius_m = 0.05 * WAVE_M, 0.48 * WAVE_M, 1e-5 * WAVE_M
    tables = GroundTables(PERFECT_GROUND, height_m, length_m)
    (hung,) = hung_patterns([HungWire(radius_m, grounds=tables)], [length_m], [FREQUENCY_HZ])
    wave = hung.wave
    span = (0.0, 0.5 * length_m)
    reached = half_line_potential(wave.position_m, radius_m, *span)
    reached = reached - half_line_potential(wave.position_m, radius_m, *span, 2.0 * height_m)
    flux = (
        VACUUM_PERMEABILITY_H_PER_M
        / (4.0 * pi)
        * np.sum(wave.weight_m * wave.current_a_per_v * reached)
    )
    expected = 0.5 - 2j * pi * FREQUENCY_HZ * flux
    assert abs(hung.end_volts[1]) == pytest.approx(abs(expected), rel=1e-3)
    # So near to its image the ends carry noticeably less for their charge than alone.
    alone = end_voltages(wave, length_m, radius_m, FREQUENCY_HZ)
    assert abs(hung.end_volts[1]) < 0.95 * abs(alone[1])


def test_a_ground_of_great_conductivity_acts_as_a_perfect_one() -> None:
    height_m, length_m, radius_m = 0.1 * WAVE_M, 0.48 * WAVE_M, 1e-5 * WAVE_M

    def ends(ground: Ground) -> tuple[complex, complex]:
        table = tabulate(ground, FREQUENCY_HZ, height_m, length_m)
        return end_voltages(wave_on(length_m, radius_m), length_m, radius_m, FREQUENCY_HZ, table)

    perfect, metal = ends(PERFECT_GROUND), ends(Ground(1.0, 1e6))
    assert metal[1] == pytest.approx(perfect[1], rel=1e-3)
    assert ends(GROUND_CLASSES["average"])[1] != pytest.approx(perfect[1], rel=1e-3)


@pytest.mark.parametrize("length_wavelengths", [0.48, 1.47])
def test_a_wire_has_the_voltage_of_its_average_characteristic_impedance(
    length_wavelengths: float,
) -> None:
    # Schelkunoff: 60 (ln(2 l / a) - 1) ohm of one arm to earth, times the current's largest.
    length_m, radius_m = length_wavelengths * WAVE_M, 1e-5 * WAVE_M
    wave = wave_on(length_m, radius_m)
    impedance_ohm = 60.0 * (log(length_m / radius_m) - 1.0)
    usual = impedance_ohm * float(np.max(np.abs(wave.current_at_place_a_per_v)))
    assert abs(end_voltages(wave, length_m, radius_m, FREQUENCY_HZ)[1]) == pytest.approx(
        usual, rel=0.1
    )


def test_a_full_wave_fed_at_its_centre_has_half_the_feed_s_volt_at_each_end() -> None:
    ends = end_voltages(wave_on(WAVE_M, 1e-5 * WAVE_M), WAVE_M, 1e-5 * WAVE_M, FREQUENCY_HZ)
    assert abs(ends[0]) == pytest.approx(0.5, rel=1e-3)
    assert ends[0] == pytest.approx(-ends[1], rel=1e-6)


def test_a_wire_fed_off_its_centre_has_a_voltage_of_its_own_at_each_end() -> None:
    length_m, radius_m = 0.95 * WAVE_M, 1e-5 * WAVE_M
    near, far = end_voltages(wave_on(length_m, radius_m, 0.3), length_m, radius_m, FREQUENCY_HZ)
    other = end_voltages(wave_on(length_m, radius_m, 0.7), length_m, radius_m, FREQUENCY_HZ)
    assert abs(near) != pytest.approx(abs(far), rel=1e-2)
    assert (abs(other[1]), abs(other[0])) == pytest.approx((abs(near), abs(far)), rel=1e-2)


def test_a_hundred_watts_into_fifty_ohm_are_a_hundred_volts_at_their_peak() -> None:
    assert peak_feed_voltage_v(50.0 + 0.0j, 100.0) == pytest.approx(100.0)
    # The same current of 1.414 A rms through 50 + j 50 ohm: 141 V peak.
    assert peak_feed_voltage_v(50.0 + 50.0j, 100.0) == pytest.approx(141.42, abs=0.01)
    with pytest.raises(OutOfRange, match="resistance_ohm"):
        peak_feed_voltage_v(-1.0 + 50.0j, 100.0)
