"""What the far field promises besides its physics."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.engine.field import (
    RadiatingWire,
    azimuth_cut,
    elevation_cut,
    far_field,
    gain_dbi,
    lobes,
    pattern,
    power_budget,
    radiated_power,
    radiation_intensity,
)
from worker.engine.ground import GROUND_CLASSES, PERFECT_GROUND, Ground

FREQUENCY_HZ = 14.2e6
WAVELENGTH_M = SPEED_OF_LIGHT_M_PER_S / FREQUENCY_HZ
QUARTER = 0.5 * np.pi


def off_centre(ground: Ground | None = None, height_m: float = 0.0) -> RadiatingWire:
    """A wire without symmetry: progressive and standing wave, 1.3 wavelengths."""
    position = np.linspace(-0.65, 0.65, 161) * WAVELENGTH_M
    wavenumber = 2.0 * np.pi / WAVELENGTH_M
    to_end = 0.65 * WAVELENGTH_M - np.abs(position)
    amplitude = np.sin(wavenumber * to_end) * np.exp(-0.4j * wavenumber * position)
    return RadiatingWire(position, amplitude, FREQUENCY_HZ, ground, height_m)


def test_samples_and_quadrature_nodes_of_one_current_radiate_alike() -> None:
    sampled = off_centre(GROUND_CLASSES["average"], 8.0)
    x, w = np.polynomial.legendre.leggauss(40)
    half = 0.325 * WAVELENGTH_M
    position = np.concatenate([half * (x - 1.0), half * (x + 1.0)])
    wavenumber = 2.0 * np.pi / WAVELENGTH_M
    amplitude = np.sin(wavenumber * (2.0 * half - np.abs(position))) * np.exp(
        -0.4j * wavenumber * position
    )
    nodes = RadiatingWire(
        position, amplitude, FREQUENCY_HZ, sampled.ground, 8.0, np.tile(half * w, 2)
    )
    assert radiated_power(sampled).power_w == pytest.approx(radiated_power(nodes).power_w, rel=1e-4)
    assert sampled.mean_square_current_a2_m() == pytest.approx(
        nodes.mean_square_current_a2_m(), rel=1e-3
    )


def test_power_is_the_plain_sum_of_intensity_over_the_sky() -> None:
    wire = off_centre(GROUND_CLASSES["average"], 8.0)
    x, w = np.polynomial.legendre.leggauss(80)
    elevation, azimuth = 0.5 * QUARTER * (x + 1.0), np.linspace(0.0, 2.0 * np.pi, 160, False)
    intensity = radiation_intensity(wire, elevation[:, None], azimuth)
    plain = (0.5 * QUARTER * w * np.cos(elevation)) @ intensity.mean(axis=1) * 2.0 * np.pi
    power = radiated_power(wire)
    assert power.power_w == pytest.approx(plain, rel=1e-9)
    assert power.estimated_error_w < 1e-6 * power.power_w


def test_gain_follows_the_input_power() -> None:
    wire = off_centre(PERFECT_GROUND, 8.0)
    one, ten = (gain_dbi(wire, power, 0.5, 1.0) for power in (1.0, 10.0))
    assert float(one - ten) == pytest.approx(10.0)


def test_gain_of_a_null_is_the_floor_and_not_minus_infinity() -> None:
    wire = off_centre(GROUND_CLASSES["average"], 8.0)
    assert float(gain_dbi(wire, 1.0, 0.0, 1.0)) == -100.0


def test_strongest_lobe_is_the_largest_gain_anywhere() -> None:
    wire = off_centre(GROUND_CLASSES["very-good"], 20.0)
    found = pattern(wire, 10.0)
    elevation = np.linspace(0.0, QUARTER, 181)[:, None]
    everywhere = gain_dbi(wire, 10.0, elevation, np.linspace(0.0, 2.0 * np.pi, 361))
    assert np.max(everywhere) <= found.gain_dbi + 1e-12
    assert np.max(everywhere) > found.gain_dbi - 0.01
    assert found.gain_dbi == found.lobes[0].gain_dbi
    assert float(
        gain_dbi(wire, 10.0, found.take_off_rad, found.take_off_azimuth_rad)
    ) == pytest.approx(found.gain_dbi)


def test_directivity_is_the_gain_referred_to_the_power_radiated() -> None:
    wire = off_centre(GROUND_CLASSES["average"], 8.0)
    sky = radiated_power(wire).power_w
    assert pattern(wire, 10.0).directivity_dbi == pytest.approx(pattern(wire, sky).gain_dbi)


def test_every_lobe_is_a_local_maximum() -> None:
    wire = off_centre(GROUND_CLASSES["average"], 20.0)
    listed = lobes(wire, 10.0)
    assert len(listed) > 3
    for lobe in listed:
        elevation = np.clip(lobe.elevation_rad + np.array([-0.01, 0.0, 0.01]), 0.0, QUARTER)
        around = gain_dbi(
            wire, 10.0, elevation[:, None], lobe.azimuth_rad + np.array([-0.01, 0.0, 0.01])
        )
        assert np.max(around) <= lobe.gain_dbi + 1e-9


def test_lobes_come_strongest_first() -> None:
    gains = [lobe.gain_dbi for lobe in lobes(off_centre(PERFECT_GROUND, 20.0), 10.0)]
    assert len(gains) > 3
    # Lobes equal by symmetry may differ in the last digits.
    assert np.all(np.diff(gains) < 1e-6)


def test_power_budget_adds_up_to_the_input() -> None:
    budget = power_budget(off_centre(GROUND_CLASSES["average"], 8.0), 100.0, 0.2)
    assert budget.radiated_w + budget.wire_loss_w + budget.ground_loss_w == pytest.approx(100.0)
    assert (
        budget.radiated_fraction + budget.wire_loss_fraction + budget.ground_loss_fraction
    ) == pytest.approx(1.0)


def test_elevation_cut_runs_from_horizon_to_horizon() -> None:
    cut = elevation_cut(off_centre(PERFECT_GROUND, 8.0), 1.0, 1.0, points=5)
    assert np.allclose(np.degrees(cut.elevation_rad), [0.0, 45.0, 90.0, 45.0, 0.0])
    assert np.allclose(cut.azimuth_rad[[0, 1]], 1.0)
    assert np.allclose(cut.azimuth_rad[[3, 4]], 1.0 + np.pi)


def test_elevation_cut_in_free_space_runs_once_around() -> None:
    cut = elevation_cut(off_centre(), 1.0, 1.0, points=5)
    assert np.allclose(np.degrees(cut.elevation_rad), [0.0, 90.0, 0.0, -90.0, 0.0])


def test_azimuth_cut_closes_on_itself() -> None:
    cut = azimuth_cut(off_centre(PERFECT_GROUND, 8.0), 1.0, 0.5)
    assert cut.gain_dbi[0] == pytest.approx(cut.gain_dbi[-1])
    assert np.allclose(cut.gain_dbi, cut.gain_dbi[::-1])


def test_ground_is_dark_below_the_horizon() -> None:
    with pytest.raises(OutOfRange, match="elevation_rad"):
        far_field(off_centre(PERFECT_GROUND, 8.0), -0.1, 0.0)


@pytest.mark.parametrize(
    ("change", "quantity"),
    [
        ({"frequency_hz": 0.0}, "frequency_hz"),
        ({"height_m": -1.0}, "height_m"),
        ({"height_m": float("nan")}, "height_m"),
        ({"position_m": np.array([0.0, 1.0, 0.5])}, "spacing of position_m"),
        ({"position_m": np.array([0.0, 1.0, 9.0])}, "spacing of position_m"),
        ({"position_m": np.array([0.0, 1.0, np.nan])}, "position_m"),
        ({"current_a": np.array([0.0, 1.0, np.inf])}, "current_a (magnitude)"),
        ({"current_a": np.array([0.0, 1.0])}, "number of currents"),
        ({"weight_m": np.array([1.0, 1.0])}, "number of weights"),
    ],
)
def test_impossible_wire_is_refused_by_name(change: dict[str, object], quantity: str) -> None:
    good = RadiatingWire(
        np.array([-1.0, 0.0, 1.0]), np.array([0.0, 1.0, 0.0j]), FREQUENCY_HZ, PERFECT_GROUND, 8.0
    )
    with pytest.raises(OutOfRange) as refused:
        replace(good, **change)  # type: ignore[arg-type]  # one field at a time, each of its type
    assert refused.value.quantity == quantity


@pytest.mark.parametrize("power", [0.0, -1.0, float("nan")])
def test_power_that_is_not_positive_is_refused(power: float) -> None:
    for judge in (pattern, power_budget, lobes):
        with pytest.raises(OutOfRange, match="input_power_w"):
            judge(off_centre(), power)
