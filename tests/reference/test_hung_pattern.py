"""What wires as hung carry and radiate, against published dipoles and image theory.

Sources, from memory: C. A. Balanis, "Antenna Theory", 3rd ed., 2005, section 4.5 (finite dipoles
with sinusoidal current), 4.6 (half-wave dipole, directivity 1.643) and 4.7 (image theory);
R. W. P. King, "The Theory of Linear Antennas", 1956 (the current is all but sinusoidal).
"""

from __future__ import annotations

from math import asin, cos, degrees, log10, pi, sin

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.field import RadiatingWire, gain_dbi, lobes, power_budget, principal_pattern
from worker.engine.ground import GROUND_CLASSES, PERFECT_GROUND, Ground
from worker.engine.hung_pattern import HIGHEST_DRAWN_WAVELENGTHS, HungPattern, hung_patterns
from worker.engine.hung_wire import GroundTables, HungWire
from worker.engine.thin_wire import current
from worker.engine.thin_wire.standing_wave import standing_waves

FREQUENCY_HZ = 14.2e6
WAVE_M = SPEED_OF_LIGHT_M_PER_S / FREQUENCY_HZ
THIN_M = 1e-6 * WAVE_M


def hung(
    length_wavelengths: float,
    ground: Ground | None = None,
    height_wavelengths: float = 0.0,
    feed_fraction: float = 0.5,
) -> HungPattern:
    length_m = length_wavelengths * WAVE_M
    grounds = None
    if ground is not None:
        grounds = GroundTables(ground, height_wavelengths * WAVE_M, length_m)
    wire = HungWire(THIN_M, grounds=grounds, feed_fraction=feed_fraction)
    (found,) = hung_patterns([wire], [length_m], [FREQUENCY_HZ])
    return found


def sinusoidal_dbi(length_wavelengths: float, angle_rad: float) -> float:
    """Balanis eq. (4-62a), its intensity against the angle to the wire, not normalised."""
    half = pi * length_wavelengths
    field = (cos(half * cos(angle_rad)) - cos(half)) / sin(angle_rad)
    return 20.0 * log10(abs(field))


def test_a_half_wave_in_free_space_has_a_gain_of_2_15_dbi() -> None:
    pattern = hung(0.49).pattern
    assert pattern is not None
    assert pattern.gain_dbi == pytest.approx(10.0 * log10(1.643), abs=0.02)
    assert degrees(pattern.take_off_azimuth_rad) == pytest.approx(90.0)
    assert pattern.radiated_fraction == pytest.approx(1.0, abs=2e-3)
    assert pattern.wire_loss_fraction == 0.0


def test_the_cut_along_a_half_wave_follows_the_published_pattern() -> None:
    pattern = hung(0.49).pattern
    assert pattern is not None
    angle_rad = pattern.step_rad * np.arange(len(pattern.azimuth_dbi))
    for angle, gain in zip(angle_rad.tolist(), pattern.azimuth_dbi.tolist(), strict=True):
        if 0.3 < angle < pi - 0.3:
            published = 10.0 * log10(1.643) + sinusoidal_dbi(0.5, angle)
            assert gain == pytest.approx(published, abs=0.06), degrees(angle)


def test_the_lobes_of_three_half_waves_stand_where_the_published_pattern_has_them() -> None:
    pattern = hung(1.49).pattern
    assert pattern is not None
    published = minimize_scalar(
        lambda angle: -sinusoidal_dbi(1.5, angle), bounds=(0.4, 1.2), method="bounded"
    ).x
    assert degrees(published) == pytest.approx(42.6, abs=0.1)
    found = pattern.take_off_azimuth_rad
    assert degrees(min(found, pi - found)) == pytest.approx(degrees(published), abs=0.8)


@pytest.mark.parametrize("height_wavelengths", [0.5, 0.75, 1.0, 2.0])
def test_over_perfect_ground_the_lowest_lobe_is_where_direct_and_image_add_up(
    height_wavelengths: float,
) -> None:
    pattern = hung(0.49, PERFECT_GROUND, height_wavelengths).pattern
    assert pattern is not None
    # Across the wire both are alike, so the sum 2 sin(k h sin(elevation)) alone makes the lobes.
    elevation_deg = np.degrees(pattern.step_rad) * np.arange(len(pattern.broadside_dbi))
    first = int(np.argmax(np.diff(pattern.broadside_dbi) < 0.0))
    published_deg = degrees(asin(1.0 / (4.0 * height_wavelengths)))
    assert elevation_deg[first] == pytest.approx(published_deg, abs=np.degrees(pattern.step_rad))
    assert pattern.gain_dbi == pytest.approx(float(np.max(pattern.broadside_dbi)), abs=0.1)


def test_the_take_off_angle_over_perfect_ground_is_that_of_image_theory() -> None:
    pattern = hung(0.49, PERFECT_GROUND, 0.5).pattern
    assert pattern is not None
    assert degrees(pattern.take_off_rad) == pytest.approx(30.0, abs=0.1)
    assert degrees(pattern.take_off_azimuth_rad) == pytest.approx(90.0)
    assert pattern.radiated_fraction == pytest.approx(1.0, abs=2e-3)


def test_a_low_wire_radiates_best_straight_up() -> None:
    pattern = hung(0.49, GROUND_CLASSES["average"], 0.15).pattern
    assert pattern is not None
    assert degrees(pattern.take_off_rad) == 90.0
    assert pattern.broadside_dbi[-1] == pytest.approx(pattern.gain_dbi, abs=1e-9)


@pytest.mark.parametrize("feed_fraction", [0.5, 0.36])
@pytest.mark.parametrize(
    ("length_wavelengths", "height_wavelengths"), [(0.49, 0.3), (1.9, 0.9), (4.3, 1.7), (9.1, 6.0)]
)
def test_the_quick_pattern_finds_what_the_thorough_search_of_lobes_finds(
    length_wavelengths: float, height_wavelengths: float, feed_fraction: float
) -> None:
    ground = GROUND_CLASSES["average"]
    found = hung(length_wavelengths, ground, height_wavelengths, feed_fraction)
    assert found.pattern is not None
    wave = found.wave
    wire = RadiatingWire(
        wave.position_m,
        wave.current_a_per_v,
        FREQUENCY_HZ,
        ground,
        height_wavelengths * WAVE_M,
        wave.weight_m,
    )
    power_w = 0.5 * (1.0 / wave.impedance_ohm).real
    strongest = lobes(wire, power_w)[0]
    assert found.pattern.gain_dbi == pytest.approx(strongest.gain_dbi, abs=2e-3)
    assert found.pattern.take_off_rad == pytest.approx(strongest.elevation_rad, abs=3e-3)
    budget = power_budget(wire, power_w)
    assert found.pattern.radiated_fraction == pytest.approx(budget.radiated_fraction, rel=1e-4)


def test_cuts_go_from_the_end_that_the_feed_does_not_count_from() -> None:
    ground, height = GROUND_CLASSES["average"], 0.4
    found = hung(1.4, ground, height, feed_fraction=0.3)
    assert found.pattern is not None
    wave, step = found.wave, found.pattern.step_rad
    wire = RadiatingWire(
        wave.position_m,
        wave.current_a_per_v,
        FREQUENCY_HZ,
        ground,
        height * WAVE_M,
        wave.weight_m,
    )
    power_w = 0.5 * (1.0 / wave.impedance_ohm).real
    low = round(0.6 / step)
    ahead, behind = (gain_dbi(wire, power_w, low * step, azimuth) for azimuth in (0.0, pi))
    assert abs(float(ahead) - float(behind)) > 0.3
    assert found.pattern.end_on_dbi[low] == pytest.approx(float(ahead), abs=1e-6)
    assert found.pattern.end_on_dbi[-1 - low] == pytest.approx(float(behind), abs=1e-6)
    around = gain_dbi(wire, power_w, found.pattern.take_off_rad, low * step)
    assert found.pattern.azimuth_dbi[low] == pytest.approx(float(around), abs=1e-6)


def test_the_heat_in_the_wire_is_that_of_the_power_budget() -> None:
    wave = hung(0.49).wave
    wire = RadiatingWire(
        wave.position_m, wave.current_a_per_v, FREQUENCY_HZ, weight_m=wave.weight_m
    )
    power_w = 0.5 * (1.0 / wave.impedance_ohm).real
    quick = principal_pattern(wire, power_w, 0.2).wire_loss_fraction
    assert quick == pytest.approx(power_budget(wire, power_w, 0.2).wire_loss_fraction)
    # A sinusoid of half a wave: half of R L, over the radiation resistance (Balanis 4-93).
    assert quick == pytest.approx(0.2 * 0.49 * WAVE_M / 2.0 / 71.0, rel=0.03)


def test_a_half_wave_carries_half_a_period_of_the_cosine() -> None:
    wave = hung(0.48).wave
    published = np.sin(pi * wave.place_fraction)
    size = np.abs(wave.current_at_place_a_per_v)
    assert size / size.max() == pytest.approx(published, abs=0.03)


def test_three_half_waves_turn_over_twice() -> None:
    wave = hung(1.47).wave
    strongest = wave.current_at_place_a_per_v[20]
    turned = (wave.current_at_place_a_per_v / strongest).real
    published = -np.sin(3.0 * pi * wave.place_fraction)
    assert turned == pytest.approx(published, abs=0.12)


@pytest.mark.parametrize("feed_fraction", [0.5, 0.3])
@pytest.mark.parametrize("length_wavelengths", [0.48, 0.97, 2.6])
def test_the_smooth_current_is_the_whole_one_away_from_the_gap(
    length_wavelengths: float, feed_fraction: float
) -> None:
    length_m, radius_m = length_wavelengths * WAVE_M, 1e-5 * WAVE_M
    whole = current(length_m, radius_m, FREQUENCY_HZ, feed_fraction=feed_fraction)
    (smooth,) = standing_waves(length_m, radius_m, FREQUENCY_HZ, feed_fraction=feed_fraction)
    place_m = length_m * (smooth.place_fraction - 0.5)
    real, imaginary = (
        np.interp(place_m, whole.position_m, part)
        for part in (whole.current_a_per_v.real, whole.current_a_per_v.imag)
    )
    away = np.abs(smooth.place_fraction - feed_fraction) * length_wavelengths > 0.1
    away &= (smooth.place_fraction > 0.03) & (smooth.place_fraction < 0.97)
    largest = float(np.max(np.abs(whole.current_a_per_v)))
    off = np.abs(smooth.current_at_place_a_per_v - (real + 1j * imaginary))[away] / largest
    assert float(off.max()) < 0.01


def test_many_wires_at_once_are_as_each_alone() -> None:
    ground = GroundTables(GROUND_CLASSES["good"], 10.0, 45.0)
    wires = [HungWire(1e-3, grounds=ground, feed_fraction=place) for place in (0.5, 0.36, 0.5)]
    lengths_m, at_hz = [20.0, 21.0, 40.0], [7.1e6, 7.1e6, 14.2e6]
    together = hung_patterns(wires, lengths_m, at_hz)
    for index, each in enumerate(together):
        (alone,) = hung_patterns([wires[index]], [lengths_m[index]], [at_hz[index]])
        assert each.pattern is not None
        assert alone.pattern is not None
        assert each.pattern.gain_dbi == pytest.approx(alone.pattern.gain_dbi, abs=1e-3)
        assert each.wave.impedance_ohm == pytest.approx(alone.wave.impedance_ohm, rel=1e-3)


def test_no_pattern_is_made_for_a_wire_higher_than_can_be_drawn() -> None:
    ground = GROUND_CLASSES["average"]
    assert hung(0.49, ground, 0.99 * HIGHEST_DRAWN_WAVELENGTHS).pattern is not None
    assert hung(0.49, ground, 1.01 * HIGHEST_DRAWN_WAVELENGTHS).pattern is None
