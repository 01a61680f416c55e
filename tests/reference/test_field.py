"""Far field against published directivities, image theory and independent power balances.

`field.csv` and `ground.csv` hold the published rows used; each names its source and how it was
obtained. The power taken up by lossy ground is computed here from the plane-wave spectrum of the
current, on the transmission lines of TE and TM waves (Felsen and Marcuvitz, "Radiation and
Scattering of Waves", 1973, ch. 2): neither the far field nor the reflected potentials enter it.
"""

from __future__ import annotations

import csv
import re
from math import asin, atan, degrees, pi, radians, sqrt
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM, SPEED_OF_LIGHT_M_PER_S
from worker.engine.field import (
    RadiatingWire,
    elevation_cut,
    far_field,
    fresnel,
    gain_dbi,
    lobes,
    pattern,
    power_budget,
    radiated_power,
    radiation_intensity,
)
from worker.engine.ground import PERFECT_GROUND, Ground

FREQUENCY_HZ = 7.1e6
WAVELENGTH_M = SPEED_OF_LIGHT_M_PER_S / FREQUENCY_HZ

HERE = Path(__file__).parent


def rows(name: str, quantity: str) -> list[dict[str, str]]:
    with (HERE / name).open(newline="") as published:
        found = [row for row in csv.DictReader(published) if row["quantity"].startswith(quantity)]
    assert found, quantity
    return found


def number(text: str) -> complex:
    return complex(re.sub(r"([+-])j(.*)", r"\1\2j", text))


def sinusoidal(
    length_wavelengths: float,
    ground: Ground | None = None,
    height_wavelengths: float = 0.0,
    frequency_hz: float = FREQUENCY_HZ,
) -> RadiatingWire:
    """Wire with sinusoidal current whose standing wave has an amplitude of 1 A."""
    wavelength = SPEED_OF_LIGHT_M_PER_S / frequency_hz
    points = 2 * int(np.ceil(length_wavelengths / 0.4)) + 3
    position = np.linspace(-0.5, 0.5, points) * length_wavelengths * wavelength
    to_end = 0.5 * length_wavelengths - np.abs(position) / wavelength
    return RadiatingWire(
        position,
        np.sin(2.0 * pi * to_end) + 0j,
        frequency_hz,
        ground,
        height_wavelengths * wavelength,
    )


DIRECTIVITIES = [
    (
        float(row["inputs"].removeprefix("L/lambda=")),
        float(row["value"].split()[0]),
        float(match[1]),
    )
    for row in rows("field.csv", "Directivity (max over theta)")
    if (match := re.search(r"theta=([\d.]+) deg", row["value"]))
]


def test_every_published_directivity_is_understood() -> None:
    assert len(DIRECTIVITIES) == 23


def test_directivity_of_sinusoidal_current_agrees_with_the_sine_and_cosine_integrals() -> None:
    # Balanis, "Antenna Theory", eq. (4-75), computed from the published formula.
    for length, directivity, _ in DIRECTIVITIES:
        wire = sinusoidal(length)
        found = pattern(wire, radiated_power(wire).power_w)
        assert 10.0 ** (0.1 * found.directivity_dbi) == pytest.approx(directivity, rel=1e-8), length


def test_main_lobe_points_where_the_published_pattern_has_its_maximum() -> None:
    for length, _, angle in DIRECTIVITIES:
        strongest = lobes(sinusoidal(length), 1.0)[0]
        assert degrees(strongest.azimuth_rad) == pytest.approx(angle, abs=1e-4), length


def test_power_radiated_in_free_space_is_the_power_put_in() -> None:
    # Re Z of the induced-EMF method, computed from the published formula; odd half waves have
    # their current maximum at the feed.
    for row in rows("ground.csv", "Z induced-EMF thin limit, eta=376.730313668"):
        wire = sinusoidal(float(row["inputs"].removeprefix("L/lambda=")))
        put_in = 0.5 * number(row["value"]).real
        assert radiated_power(wire).power_w == pytest.approx(put_in, rel=1e-8), row["inputs"]


def test_power_radiated_over_perfect_ground_is_the_power_put_in() -> None:
    # Image theory with Carter's mutual impedance, computed from the published formula.
    for row in rows("ground.csv", "Horizontal half-wave dipole over PEC ground"):
        height = float(row["inputs"].removeprefix("h/lambda="))
        put_in = 0.5 * number(row["value"]).real
        budget = power_budget(sinusoidal(0.5, PERFECT_GROUND, height), put_in)
        assert budget.radiated_fraction == pytest.approx(1.0, abs=1e-7), height


def power_into_ground_w(wire: RadiatingWire, eps: complex) -> float:
    """Power through the surface below a half-wave dipole with sinusoidal current of 1 A.

    P = (1 / 8 pi**2) int int (|V_TM|**2 Re(1 / Z_TM) + |V_TE|**2 Re(1 / Z_TE)) dkx dky, with the
    voltages that the current's transform 2 k cos(kx L / 2) / (k**2 - kx**2) excites at the
    surface and the wave impedances of the ground; wavenumbers in units of k.
    """
    x, w = np.polynomial.legendre.leggauss(120)
    angle, angle_weight = 0.25 * pi * (x + 1.0), 0.25 * pi * w
    deepest = 18.0 / wire.height_rad
    # Above the horizon lam = sin(t), below it lam = sqrt(1 + s**2), s on a stretched scale.
    stretch = np.log1p(deepest / 0.05)
    depth = 0.05 * np.expm1(0.5 * stretch * (x + 1.0))
    lam = np.concatenate([np.sin(angle), np.sqrt(1.0 + depth**2)])
    above = np.concatenate([1j * np.cos(angle), depth + 0j])
    measure = np.concatenate(
        [
            angle_weight * np.sin(angle) * np.cos(angle),
            0.5 * stretch * w * (depth + 0.05) * depth,
        ]
    )
    below = np.sqrt(lam**2 - eps)
    eta = FREE_SPACE_IMPEDANCE_OHM

    def absorbed(
        in_air: NDArray[np.inexact], in_ground: NDArray[np.inexact]
    ) -> NDArray[np.float64]:
        voltage = in_air * in_ground / (in_air + in_ground) * np.exp(-above * wire.height_rad)
        taken: NDArray[np.float64] = np.abs(voltage) ** 2 * (1.0 / in_ground).real
        return taken

    magnetic = absorbed(eta * above / 1j, eta * below / (1j * eps))
    electric = absorbed(eta * 1j / above, eta * 1j / below)
    along = lam[:, None] * np.cos(angle)
    # The transform's numerator and denominator vanish together at kx = k.
    offset = 0.5 * (1.0 - along)
    transform = pi * np.sinc(offset) / (1.0 + along)
    per_azimuth = magnetic[:, None] * np.cos(angle) ** 2 + electric[:, None] * np.sin(angle) ** 2
    quadrant = measure @ (np.abs(transform) ** 2 * per_azimuth) @ angle_weight
    return float(4.0 * quadrant / (8.0 * pi**2))


def test_sky_and_ground_together_take_the_power_put_in() -> None:
    # Re Z over lossy ground computed from the published Sommerfeld integrals.
    pattern_of_inputs = r"(.+) \((.+), (.+)\) f=(.+) MHz h/lambda=(\S+)"
    for row in rows("ground.csv", "Horizontal half-wave dipole (sinusoidal"):
        match = re.match(pattern_of_inputs, row["inputs"])
        assert match
        frequency, height = 1e6 * float(match[4]), float(match[5])
        ground = Ground(float(match[2]), float(match[3]))
        wire = sinusoidal(0.5, ground, height, frequency)
        put_in = 0.5 * number(row["value"]).real
        budget = power_budget(wire, put_in)
        taken = power_into_ground_w(wire, ground.complex_permittivity(frequency))
        assert budget.ground_loss_w == pytest.approx(taken, abs=1e-5 * put_in), row["inputs"]


def test_field_over_perfect_ground_is_the_free_field_times_the_image_factor() -> None:
    # Broadside, 2 sin(k h sin(elevation)): Balanis, "Antenna Theory", section 4.8.2.
    elevation = np.linspace(0.0, 0.5 * pi, 46)
    free = radiation_intensity(sinusoidal(0.5), elevation, 0.5 * pi)
    over = radiation_intensity(sinusoidal(0.5, PERFECT_GROUND, 0.7), elevation, 0.5 * pi)
    factor = 2.0 * np.sin(2.0 * pi * 0.7 * np.sin(elevation))
    assert np.allclose(over, free * factor**2, rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize(("height", "expected"), [(0.5, [0.5]), (1.0, [0.25, 0.75])])
def test_broadside_lobes_over_perfect_ground_lie_at_odd_quarters_of_the_height(
    height: float, expected: list[float]
) -> None:
    # sin(elevation) = (2 n - 1) lambda / (4 h): image theory, Balanis section 4.8.2.
    found = lobes(sinusoidal(0.5, PERFECT_GROUND, height), 1.0)
    broadside = [lobe for lobe in found if lobe.azimuth_rad == pytest.approx(0.5 * pi)]
    assert [lobe.elevation_rad for lobe in broadside] == pytest.approx(
        [asin(value) for value in expected], abs=1e-5
    )


def test_low_dipole_over_perfect_ground_shoots_straight_up() -> None:
    found = pattern(sinusoidal(0.5, PERFECT_GROUND, 0.15), 1.0)
    assert found.take_off_rad == pytest.approx(0.5 * pi)


def test_magnetic_polarisation_is_not_reflected_at_brewsters_angle() -> None:
    # tan(zenith angle) = sqrt(eps): Stratton, "Electromagnetic Theory", section 9.6.
    rise = np.array(np.cos(atan(sqrt(9.0))))
    magnetic, _ = fresnel(Ground(9.0, 0.0), FREQUENCY_HZ, rise)
    assert abs(magnetic) < 1e-12


def test_both_polarisations_are_reflected_alike_from_straight_above() -> None:
    # (1 - n) / (1 + n), n = sqrt(eps): Stratton section 9.5.
    magnetic, electric = fresnel(Ground(9.0, 0.0), FREQUENCY_HZ, np.array(1.0))
    assert complex(magnetic) == pytest.approx(-0.5)
    assert complex(electric) == pytest.approx(-0.5)


def test_far_field_is_the_limit_of_the_field_of_the_dipole_and_its_image() -> None:
    # Half-wave pattern cos(pi/2 cos(psi)) / sin(psi), field 60 V for 1 A: Balanis eq. (4-84).
    azimuth = np.linspace(0.1, pi - 0.1, 30)
    vertical, horizontal = far_field(sinusoidal(0.5), 0.0, azimuth)
    expected = (
        FREE_SPACE_IMPEDANCE_OHM / (2.0 * pi) * np.cos(0.5 * pi * np.cos(azimuth)) / np.sin(azimuth)
    )
    assert np.allclose(np.abs(horizontal), expected, rtol=1e-10)
    assert np.all(vertical == 0.0)


def test_half_wave_dipole_in_free_space_has_its_handbook_gain() -> None:
    # 2.15 dBi: Balanis section 4.6; row L/lambda=0.5 gives 2.1508804 dBi.
    wire = sinusoidal(0.5)
    gain = gain_dbi(wire, radiated_power(wire).power_w, 0.0, 0.5 * pi)
    assert float(gain) == pytest.approx(2.1508804, abs=1e-6)


def test_wire_loss_of_a_half_wave_sinusoid_is_that_of_half_its_feed_current() -> None:
    # Mean square of a cosine is one half: R_loss = R' L / 2 (Balanis, example 2.13).
    wire = sinusoidal(0.5, PERFECT_GROUND, 0.5)
    budget = power_budget(wire, 40.0, wire_resistance_ohm_per_m=0.1)
    assert budget.wire_loss_w == pytest.approx(0.5 * 0.1 * 0.25 * WAVELENGTH_M, rel=1e-12)


def test_elevation_cut_passes_through_the_published_lobes() -> None:
    cut = elevation_cut(sinusoidal(0.5, PERFECT_GROUND, 1.0), 1.0, 0.5 * pi, points=721)
    ascending = cut.gain_dbi[:361]
    tops = np.nonzero((ascending[1:-1] > ascending[:-2]) & (ascending[1:-1] > ascending[2:]))[0] + 1
    assert np.allclose(cut.elevation_rad[tops], [asin(0.25), asin(0.75)], atol=radians(0.13))
