"""Reflected potentials and ground constants against published values and direct integration.

`ground.csv` holds the published rows used here and in test_field.py; every row names its source
and how it was obtained. Where this file integrates a Sommerfeld integral itself, it does so from
the TE and TM transmission-line forms (Michalski and Mosig, IEEE Trans. Antennas Propag. 45, 1997)
along the horizontal wavenumber, by mpmath or by adaptive quadrature: neither the formulas of the
engine nor its contours are used.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Callable
from pathlib import Path

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import quad
from scipy.special import j0, j1

from worker.engine.constants import (
    FREE_SPACE_IMPEDANCE_OHM,
    SPEED_OF_LIGHT_M_PER_S,
    VACUUM_PERMEABILITY_H_PER_M,
    VACUUM_PERMITTIVITY_F_PER_M,
)
from worker.engine.ground import (
    GROUND_CLASSES,
    PERFECT_GROUND,
    Ground,
    GroundTable,
    tabulate,
    water,
)
from worker.engine.ground.hankel import scaled_hankel
from worker.engine.ground.natural_water import ionic_conductivity_s_per_m

with (Path(__file__).parent / "ground.csv").open(newline="") as published:
    ROWS = list(csv.DictReader(published))


def rows(quantity: str) -> list[dict[str, str]]:
    found = [row for row in ROWS if row["quantity"].startswith(quantity)]
    assert found, quantity
    return found


def number(text: str) -> complex:
    return complex(re.sub(r"([+-])j(.*)", r"\1\2j", text))


FREE_HALF_WAVE_OHM = number(
    next(
        row["value"]
        for row in rows("Z induced-EMF thin limit, eta=376.730313668")
        if row["inputs"] == "L/lambda=0.5"
    )
)
OVER_LOSSY = [
    (
        match[1],
        Ground(float(match[2]), float(match[3])),
        1e6 * float(match[4]),
        float(match[5]),
        number(row["value"]),
    )
    for row in rows("Horizontal half-wave dipole (sinusoidal")
    if (match := re.match(r"(.+) \((.+), (.+)\) f=(.+) MHz h/lambda=(\S+)", row["inputs"]))
]


def half_wave_change_ohm(table: GroundTable) -> complex:
    """What the ground adds to a half-wave dipole with sinusoidal current: induced EMF.

    Delta Z = j omega mu0 <I, g_A I> + <I', g_Phi I'> / (j omega eps0), I(0) = 1.
    """
    omega = 2.0 * np.pi * table.frequency_hz
    wavenumber = omega / SPEED_OF_LIGHT_M_PER_S
    quarter = 0.5 * np.pi / wavenumber
    x, w = np.polynomial.legendre.leggauss(40)
    position = np.concatenate([0.5 * quarter * (x - 1.0), 0.5 * quarter * (x + 1.0)])
    weight = 0.5 * quarter * np.tile(w, 2)
    current = weight * np.cos(wavenumber * position)
    slope = -weight * wavenumber * np.sin(wavenumber * position)
    distance = np.abs(position[:, None] - position)
    inductive = current @ table.vector_potential(distance) @ current
    capacitive = slope @ table.scalar_potential(distance) @ slope
    return complex(
        1j * omega * VACUUM_PERMEABILITY_H_PER_M * inductive
        + capacitive / (1j * omega * VACUUM_PERMITTIVITY_F_PER_M)
    )


def test_every_published_row_over_lossy_ground_is_understood() -> None:
    assert len(OVER_LOSSY) == 160


@pytest.mark.parametrize("name", ["very good", "average", "poor", "sea water"])
def test_half_wave_impedance_over_lossy_ground_agrees_with_the_plane_wave_spectrum(
    name: str,
) -> None:
    # Computed from the published Sommerfeld integrals, two evaluations agreeing to 1e-8 ohm.
    for kind, ground, frequency, height, expected in OVER_LOSSY:
        if kind == name:
            wavelength = SPEED_OF_LIGHT_M_PER_S / frequency
            table = tabulate(ground, frequency, height * wavelength, 0.5 * wavelength)
            found = FREE_HALF_WAVE_OHM + half_wave_change_ohm(table)
            assert abs(found - expected) < 1e-6, (ground, frequency, height)


def test_half_wave_impedance_over_perfect_ground_agrees_with_image_theory() -> None:
    # Image theory with Carter's mutual impedance, computed from the published formula.
    wavelength = SPEED_OF_LIGHT_M_PER_S / 7e6
    for row in rows("Horizontal half-wave dipole over PEC ground"):
        height = float(row["inputs"].removeprefix("h/lambda="))
        table = tabulate(PERFECT_GROUND, 7e6, height * wavelength, 0.5 * wavelength)
        found = FREE_HALF_WAVE_OHM + half_wave_change_ohm(table)
        assert abs(found - number(row["value"])) < 1e-6, row["inputs"]


def te_and_tm(
    eps: complex, lam: complex, sqrt: Callable[[complex], complex]
) -> tuple[complex, complex, complex]:
    """Vertical constant in air and voltage reflection coefficients of both transmission lines."""
    above, below = sqrt(lam * lam - 1), sqrt(lam * lam - eps)
    # TE line: Z = j omega mu / u. TM line: Z = u / (j omega eps).
    return above, (above - below) / (above + below), (below / eps - above) / (below / eps + above)


def potentials_by_mpmath(eps: complex, height: float, distance: float) -> tuple[complex, complex]:
    """4 pi g_A / k and 4 pi g_Phi / k for height and distance in radians."""
    permittivity = mpmath.mpc(eps)

    def integrand(lam: complex, scalar: bool) -> complex:
        above, electric, magnetic = te_and_tm(permittivity, lam, mpmath.sqrt)
        reflection = (magnetic * above**2 + electric) / lam**2 if scalar else electric
        wave = mpmath.exp(-2 * above * height) * mpmath.besselj(0, lam * distance)
        value: complex = reflection * wave * lam / above
        return value

    corner = mpmath.mpc(1.5, 0.4 / max(1.0, distance))
    end = corner + 34 / (2 * height)
    steps = 2 + int(distance * 34 / (2 * height) / 6)
    tail = [corner + (end - corner) * (step / steps) ** 1.5 for step in range(steps + 1)]
    path = [mpmath.mpf(0), mpmath.mpc(0.7, corner.imag), *tail]
    with mpmath.workdps(16):
        return (
            complex(mpmath.quad(lambda lam: integrand(lam, False), path)),
            complex(mpmath.quad(lambda lam: integrand(lam, True), path)),
        )


@pytest.mark.parametrize(
    ("ground", "frequency_hz", "height", "distance"),
    [
        (GROUND_CLASSES["average"], 3.6e6, 0.05, 0.02),
        (GROUND_CLASSES["very-good"], 28.5e6, 0.05, 0.6),
        (GROUND_CLASSES["salt-water"], 7.1e6, 0.1, 0.5),
        (GROUND_CLASSES["itu-very-dry-ground"], 14.2e6, 0.25, 1.7),
        (Ground(3.0, 0.0), 7.1e6, 0.1, 0.9),
        (Ground(80.0, 0.0), 7.1e6, 0.2, 0.11),
        (Ground(1.1, 0.0), 7.1e6, 0.1, 0.5),
    ],
    ids=lambda value: getattr(value, "name", None),
)
def test_potentials_agree_with_sommerfeld_integrals_by_mpmath(
    ground: Ground, frequency_hz: float, height: float, distance: float
) -> None:
    wavelength = SPEED_OF_LIGHT_M_PER_S / frequency_hz
    wavenumber = 2.0 * np.pi / wavelength
    vector, scalar = potentials_by_mpmath(
        ground.complex_permittivity(frequency_hz), 2.0 * np.pi * height, 2.0 * np.pi * distance
    )
    table = tabulate(ground, frequency_hz, height * wavelength, 2.0 * wavelength)
    at = np.array(distance * wavelength)
    scale = wavenumber / (4.0 * np.pi)
    image = scale / (2.0 * np.pi * np.hypot(2.0 * height, distance))
    assert abs(table.vector_potential(at) - scale * vector) < 2e-8 * image
    assert abs(table.scalar_potential(at) - scale * scalar) < 2e-8 * image


def dipole_field(eps: complex, wavenumber: float, height_m: float, distance_m: float) -> complex:
    """Reflected E_x along its axis of a horizontal dipole of unit moment, from its spectrum.

    E_x = -(1 / 2 pi) int (V_TM (J0 - J1 / (lam rho)) + V_TE J1 / (lam rho)) lam d lam with the
    voltage V = Z Gamma exp(-2 u h) / 2 on either line.
    """
    height, distance = wavenumber * height_m, wavenumber * distance_m

    def integrand(lam: float) -> complex:
        above, electric, magnetic = te_and_tm(eps, lam, lambda square: np.sqrt(square + 0j))
        decay = 0.5 * FREE_SPACE_IMPEDANCE_OHM * np.exp(-2.0 * above * height)
        ratio = j1(lam * distance) / (lam * distance)
        voltages = above / 1j * magnetic * (j0(lam * distance) - ratio) + (
            1j / above * electric * ratio
        )
        return complex(-decay * voltages * lam / (2.0 * np.pi))

    def propagating(angle: float) -> complex:
        return complex(integrand(np.sin(angle)) * np.cos(angle))

    def evanescent(depth: float) -> complex:
        lam = np.sqrt(1.0 + depth * depth)
        return complex(integrand(lam) * depth / lam)

    deepest = 36.0 / (2.0 * height)
    return wavenumber**2 * sum(
        quad(part, 0.0, end, complex_func=True, epsabs=1e-9, epsrel=1e-10, limit=400)[0]
        for part, end in ((propagating, 0.5 * np.pi), (evanescent, deepest))
    )


@pytest.mark.parametrize("name", ["average", "salt-water"])
def test_mixed_potentials_give_the_field_of_the_horizontal_dipole(name: str) -> None:
    # E_x = -j omega mu0 g_A + (1 / (j omega eps0)) g_Phi'' for a unit dipole; both sides are
    # weighed with a smooth bump, so that the derivatives fall on the bump.
    frequency, ground = 7.1e6, GROUND_CLASSES[name]
    omega, wavelength = 2.0 * np.pi * frequency, SPEED_OF_LIGHT_M_PER_S / frequency
    height, centre, half = 0.1 * wavelength, 0.4 * wavelength, 0.25 * wavelength
    x, w = np.polynomial.legendre.leggauss(16)
    distance, weight = centre + half * x, half * w
    phase = 0.5 * np.pi * x
    bump = np.cos(phase) ** 4
    bent = (0.5 * np.pi / half) ** 2 * (12.0 * np.cos(phase) ** 2 - 16.0 * np.cos(phase) ** 4)
    table = tabulate(ground, frequency, height, wavelength)
    found = np.sum(
        weight
        * (
            -1j * omega * VACUUM_PERMEABILITY_H_PER_M * bump * table.vector_potential(distance)
            + bent * table.scalar_potential(distance) / (1j * omega * VACUUM_PERMITTIVITY_F_PER_M)
        )
    )
    eps = ground.complex_permittivity(frequency)
    expected = np.sum(
        weight
        * bump
        * [
            dipole_field(eps, omega / SPEED_OF_LIGHT_M_PER_S, height, at)
            for at in distance.tolist()
        ]
    )
    assert abs(found - expected) < 1e-7 * abs(expected)


def test_reflection_vanishes_without_ground() -> None:
    table = tabulate(Ground(1.0, 0.0), 7e6, 5.0, 80.0)
    distance = np.linspace(0.0, 80.0, 50)
    assert np.all(table.vector_potential(distance) == 0.0)
    assert np.all(table.scalar_potential(distance) == 0.0)


def test_reflection_fades_in_proportion_as_the_ground_does() -> None:
    # First order in eps - 1: halving the contrast halves the reflected potentials.
    distance = np.linspace(0.0, 80.0, 50)
    full, half = (
        tabulate(Ground(1.0 + contrast, 0.0), 7e6, 5.0, 80.0) for contrast in (2e-6, 1e-6)
    )
    for potential in (GroundTable.vector_potential, GroundTable.scalar_potential):
        ratio = potential(full, distance) / potential(half, distance)
        assert np.all(np.abs(ratio - 2.0) < 1e-3)


def test_reflection_tends_to_the_perfect_image_as_conductivity_grows() -> None:
    # The impedance of the ground, and with it the difference, falls as 1 / sqrt(sigma).
    distance = np.linspace(0.0, 80.0, 200)
    image = tabulate(PERFECT_GROUND, 7e6, 5.0, 80.0)
    differences = []
    for conductivity in (1e4, 1e6, 1e8, 1e10):
        table = tabulate(Ground(1.0, conductivity), 7e6, 5.0, 80.0)
        differences.append(
            max(
                float(np.max(np.abs(potential(table, distance) / potential(image, distance) - 1.0)))
                for potential in (GroundTable.vector_potential, GroundTable.scalar_potential)
            )
        )
    ratios = np.array(differences[:-1]) / np.array(differences[1:])
    assert np.all(np.abs(ratios - 10.0) < 0.3)


def test_low_over_a_dielectric_the_scalar_potential_is_the_electrostatic_image() -> None:
    # Jackson, "Classical Electrodynamics", 3rd ed., eq. (4.45): image charge
    # -(eps - 1) / (eps + 1); corrections are of the order of k h.
    wavelength = SPEED_OF_LIGHT_M_PER_S / 7e6
    table = tabulate(Ground(3.0, 0.0), 7e6, 0.01 * wavelength, wavelength)
    distance = np.array([0.0, 0.01, 0.02]) * wavelength
    image = 1.0 / (4.0 * np.pi * np.hypot(distance, 0.02 * wavelength))
    assert np.all(np.abs(table.scalar_potential(distance) / image + 0.5) < 0.1)


def test_loss_tangent_and_penetration_depth_agree_with_the_plane_wave() -> None:
    # gamma = (j omega / c) sqrt(eps), ITU-R P.527; computed from the published formula.
    grounds = {
        "average": GROUND_CLASSES["average"],
        "poor": GROUND_CLASSES["city"],
        "very good": GROUND_CLASSES["very-good"],
    }
    for row in rows("Ground loss tangent"):
        match = re.match(r"(.+) f=(.+) MHz", row["inputs"])
        values = re.match(r"tan d=(.+) depth=(.+) m", row["value"])
        assert match
        assert values
        frequency = 1e6 * float(match[2])
        eps = grounds[match[1]].complex_permittivity(frequency)
        growth = 2j * np.pi * frequency / SPEED_OF_LIGHT_M_PER_S * np.sqrt(eps)
        assert -eps.imag / eps.real == pytest.approx(float(values[1]), rel=1e-5)
        assert 1.0 / growth.real == pytest.approx(float(values[2]), rel=1e-5)


def test_named_grounds_are_the_published_ones() -> None:
    # Ground classes: common practice. ITU-R P.527-3: figures from memory.
    published_pairs = {
        (ground.relative_permittivity, ground.conductivity_s_per_m)
        for ground in GROUND_CLASSES.values()
    }
    found = rows("Ground class") + rows("ITU-R P.527-3")
    assert len(found) == 16
    for row in found:
        match = re.match(r"eps_r=(\S+) sigma=(\S+) S/m", row["value"])
        assert match
        ends = [float(end) for end in match[1].split("-")]
        assert (sum(ends) / len(ends), float(match[2])) in published_pairs, row["inputs"]


def test_standard_sea_water_conducts_as_the_practical_salinity_scale_says() -> None:
    # C(35, 15 degC, 0) = 4.2914 S/m: Practical Salinity Scale 1978, UNESCO Tech. Pap. Mar. Sci.
    # 44, 1983; from memory.
    assert ionic_conductivity_s_per_m(15.0, 35.0) == pytest.approx(4.2914, abs=1e-4)


def test_pure_water_has_its_static_permittivity_at_hf() -> None:
    # 78.30 at 25 degC and 87.74 at 0 degC: Malmberg and Maryott, J. Res. NBS 56, 1956; from memory.
    assert water(7e6, 25.0, 0.0).relative_permittivity == pytest.approx(78.30, rel=3e-3)
    assert water(7e6, 0.0, 0.0).relative_permittivity == pytest.approx(87.74, rel=3e-3)


def test_sea_water_is_close_to_the_constants_of_the_recommendation() -> None:
    # P.527-3 draws 70 and 5 S/m for average salinity at 20 degC; from memory, read off a figure.
    sea = water(7e6, 20.0, 35.0)
    constants: NDArray[np.float64] = np.array([sea.relative_permittivity, sea.conductivity_s_per_m])
    assert np.allclose(constants, [70.0, 5.0], rtol=0.06)


@pytest.mark.parametrize("magnitude", [0.05, 3.0, 17.9, 18.1, 60.0])
def test_hankel_function_agrees_with_mpmath_on_both_sides_of_the_expansion(
    magnitude: float,
) -> None:
    for angle in (0.0, -0.8, -1.6, -2.4, 0.6):
        z = magnitude * np.exp(1j * angle)
        with mpmath.workdps(30):
            expected = complex(mpmath.hankel2(0, z) * mpmath.exp(1j * mpmath.mpc(z)))
        found = scaled_hankel(np.array([z], dtype=np.complex128))[0]
        assert abs(found - expected) < 1e-11 * abs(expected)
