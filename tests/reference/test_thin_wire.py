"""The thin-wire solution against converged solutions, an independent one, and conservation laws."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import ive, j0, kve

from tests.reference.rooftop_wire import extrapolated_impedance
from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM, SPEED_OF_LIGHT_M_PER_S
from worker.engine.induced_emf import mutual_impedance
from worker.engine.thin_wire import ReflectedPotentials, current, feed_impedance
from worker.engine.thin_wire.basis import end_kernel
from worker.engine.thin_wire.gap import sharp_admittance
from worker.engine.thin_wire.tube_kernel import (
    distant_kernel,
    scaled_moments,
    scaled_width_moments,
    static_kernel,
)

FREQUENCY_HZ = 14.1e6
WAVELENGTH_M = SPEED_OF_LIGHT_M_PER_S / FREQUENCY_HZ

# Source: Hallen's equation with the exact (tube) kernel, uniform field over the gap, Nystrom
# solution with graded panels converged to about 1e-6, stated to 1e-4; an independent spectral
# Galerkin solution agrees. Computed from published formula.
# Length and radius in wavelengths, impedance in ohm, gap of one radius.
THIN = [
    (0.1, 5e-05, 1.792415 - 2105.114j),
    (0.1, 2.5e-06, 1.892198 - 3246.821j),
    (0.25, 6.25e-06, 13.03782 - 1045.436j),
    (0.4, 4e-05, 40.80985 - 262.5527j),
    (0.47, 1e-05, 64.42086 - 63.82322j),
    (0.5, 1e-05, 78.1475 + 44.82661j),
    (0.5, 1e-04, 80.57348 + 46.06987j),
    (0.6, 1.5e-05, 152.0693 + 423.3767j),
    (0.75, 3.40499e-05, 523.8753 + 1186.607j),
    (1.0, 1e-05, 3721.804 - 3658.668j),
    (1.0, 1e-04, 1876.298 - 2175.355j),
    (1.25, 6.25e-05, 139.8779 - 753.8286j),
    (1.5, 1e-05, 111.9108 + 49.56581j),
    (1.5, 1e-04, 114.826 + 50.66383j),
    (2.0, 5e-05, 2233.171 - 2059.591j),
    (2.5, 6.25e-05, 130.6822 + 51.49028j),
    (3.0, 7.5e-05, 1906.924 - 1673.99j),
]
THICK = [
    (0.5, 0.0005, 84.29516 + 47.46148j),
    (0.5, 0.00336897, 95.5749 + 46.7284j),
    (0.47, 0.005, 77.6997 + 8.042405j),
    (0.5, 0.005, 99.71379 + 44.65361j),
    (1.0, 0.001, 663.5622 - 1024.307j),
    (1.0, 0.005, 241.6018 - 478.8017j),
    (1.5, 0.005, 137.2774 + 40.21613j),
    (2.0, 0.001, 670.2456 - 875.4298j),
    (2.5, 0.00125, 141.4948 + 49.34055j),
]
# Same source, wide gaps: length, radius, gap in wavelengths; admittance in mS, stated to 3e-4.
WIDE_GAP = [
    (0.5, 0.00025, 0.02, 9.164992 - 5.348784j),
    (1.0, 0.0005, 0.04, 0.354797 + 0.219551j),
    (0.5, 0.0033689735, 0.02, 8.435029 - 4.528517j),
]


@pytest.mark.parametrize(("length", "radius", "expected"), THIN + THICK)
def test_impedance_is_that_of_the_converged_solution(
    length: float, radius: float, expected: complex
) -> None:
    got = _impedance(length, radius)
    assert abs(got / expected - 1.0) < 1.5e-4


@pytest.mark.parametrize(("length", "radius", "expected"), THIN + THICK)
def test_converged_solution_lies_within_the_estimated_error(
    length: float, radius: float, expected: complex
) -> None:
    result = feed_impedance(length * WAVELENGTH_M, radius * WAVELENGTH_M, FREQUENCY_HZ)
    # The reference itself is stated to 1e-4.
    allowed = float(result.estimated_error_ohm) + 1e-4 * abs(expected)
    assert abs(complex(result.impedance_ohm) - expected) < allowed


@pytest.mark.parametrize(("length", "radius", "gap", "expected_ms"), WIDE_GAP)
def test_wide_gaps_have_the_admittance_of_the_converged_solution(
    length: float, radius: float, gap: float, expected_ms: complex
) -> None:
    got = 1e3 / _impedance(length, radius, gap_m=gap * WAVELENGTH_M)
    assert abs(got - expected_ms) < 3e-4 * abs(expected_ms)


@dataclass(frozen=True)
class PerfectGround:
    """Image in a perfect conductor."""

    height_m: float
    frequency_hz: float = FREQUENCY_HZ

    def vector_potential(self, distance_m: NDArray[np.float64]) -> NDArray[np.complex128]:
        distance = np.sqrt(distance_m**2 + (2.0 * self.height_m) ** 2)
        wave: NDArray[np.complex128] = np.exp(-2j * pi / WAVELENGTH_M * distance)
        return -wave / (4.0 * pi * distance)

    scalar_potential = vector_potential


@pytest.mark.parametrize(
    ("length", "feed_fraction", "series", "loads"),
    [
        (0.48, 0.5, 0.0, ()),
        (0.48, 0.3, 0.0, ()),
        (0.48, 0.5, 0.0, ((0.25, 80j), (0.75, 80j))),
        (0.48, 0.35, 50.0 + 90.0j, ((0.7, 20.0 + 30.0j),)),
    ],
)
def test_feed_loads_and_wire_impedance_agree_with_an_independent_solution(
    length: float,
    feed_fraction: float,
    series: complex,
    loads: tuple[tuple[float, complex], ...],
) -> None:
    # Generator: rooftop_wire, whose own error at this fineness is about 5e-4.
    wire = (length * WAVELENGTH_M, 2e-3 * WAVELENGTH_M, FREQUENCY_HZ)
    gap_m = 0.04 * WAVELENGTH_M
    per_metre = series / WAVELENGTH_M
    expected = extrapolated_impedance(
        *wire,
        segments=48,
        gap_m=gap_m,
        feed_fraction=feed_fraction,
        wire_impedance_ohm_per_m=per_metre,
        loads=loads,
    )
    got = feed_impedance(
        *wire,
        gap_m=gap_m,
        feed_fraction=feed_fraction,
        wire_impedance_ohm_per_m=per_metre,
        loads=loads,
    )
    assert abs(complex(got.impedance_ohm) / expected - 1.0) < 5e-4


@pytest.mark.parametrize("feed_fraction", [0.5, 0.4375])
def test_short_thick_wire_agrees_with_an_independent_solution(feed_fraction: float) -> None:
    # Generator: rooftop_wire, whose segments here are a small part of the radius. Its ends and
    # gap are five to eight radii apart, so that every approximation for distance is strained.
    wire = (0.064 * WAVELENGTH_M, 4e-3 * WAVELENGTH_M, FREQUENCY_HZ)
    gap_m = 0.008 * WAVELENGTH_M
    expected = extrapolated_impedance(*wire, segments=32, gap_m=gap_m, feed_fraction=feed_fraction)
    got = feed_impedance(*wire, gap_m=gap_m, feed_fraction=feed_fraction)
    assert abs(complex(got.impedance_ohm) / expected - 1.0) < 2e-4


@pytest.mark.parametrize("feed_fraction", [0.5, 0.3])
def test_wire_over_perfect_ground_agrees_with_an_independent_solution(
    feed_fraction: float,
) -> None:
    # Generator: rooftop_wire with the image added to its kernel; off by 1e-3 at this fineness.
    ground = PerfectGround(0.05 * WAVELENGTH_M)
    wire = (0.48 * WAVELENGTH_M, 2e-3 * WAVELENGTH_M, FREQUENCY_HZ)
    gap_m = 0.04 * WAVELENGTH_M
    expected = extrapolated_impedance(
        *wire,
        segments=60,
        gap_m=gap_m,
        feed_fraction=feed_fraction,
        reflected=ground.vector_potential,
    )
    got = feed_impedance(*wire, gap_m=gap_m, feed_fraction=feed_fraction, reflected=ground)
    assert abs(complex(got.impedance_ohm) / expected - 1.0) < 2e-3


@pytest.mark.parametrize("height", [0.1, 0.25, 0.5, 1.0])
def test_half_wave_over_perfect_ground_follows_image_theory(height: float) -> None:
    # Image theory with Carter's mutual impedance of sinusoidal currents; the real current differs
    # from the sine by a few per cent on wire this thin.
    length_m = 0.5 * WAVELENGTH_M
    ground = PerfectGround(height * WAVELENGTH_M)
    got = _impedance(0.5, 1e-6, reflected=ground) - _impedance(0.5, 1e-6)
    expected = -mutual_impedance(
        length_m, length_m, FREQUENCY_HZ, separation_m=2.0 * ground.height_m
    )
    assert abs(got - complex(expected)) < 0.12 * abs(complex(expected))


def test_wire_far_above_ground_is_a_wire_in_free_space() -> None:
    ground = PerfectGround(50.0 * WAVELENGTH_M)
    assert abs(_impedance(0.5, 1e-5, reflected=ground) - _impedance(0.5, 1e-5)) < 0.5


@pytest.mark.parametrize(
    ("length", "radius", "feed_fraction"),
    [
        (0.48, 1e-5, 0.5),
        (1.0, 1e-4, 0.5),
        (1.48, 1e-6, 0.35),
        (2.7, 1e-3, 0.2),
        (0.05, 5e-3, 0.5),
    ],
)
def test_lossless_wire_radiates_the_power_it_takes(
    length: float, radius: float, feed_fraction: float
) -> None:
    result = current(
        length * WAVELENGTH_M, radius * WAVELENGTH_M, FREQUENCY_HZ, feed_fraction=feed_fraction
    )
    taken = 0.5 * (1.0 / result.impedance_ohm).real
    radiated = _radiated_power(
        result.position_m, result.weight_m, result.current_a_per_v, radius * WAVELENGTH_M
    )
    assert radiated == pytest.approx(taken, rel=1e-4)


def _radiated_power(
    position: NDArray[np.float64],
    weight: NDArray[np.float64],
    along: NDArray[np.complex128],
    radius: float,
) -> float:
    """Generator: far field of the tube current integrated over all directions.

    U = (eta/8) |sin(theta) J0(ka sin(theta)) int I e^{jkz cos(theta)} dz / lambda|^2 a steradian;
    Balanis, Antenna Theory, section 4.5, with the tube's factor J0.
    """
    node, node_weight = np.polynomial.legendre.leggauss(80)
    k = 2.0 * pi / WAVELENGTH_M
    moment = np.exp(1j * k * np.outer(node, position)) @ (weight * along)
    sine = np.sqrt(1.0 - node**2)
    tube = j0(k * radius * sine)
    intensity = FREE_SPACE_IMPEDANCE_OHM / 8.0 * np.abs(sine * tube * moment / WAVELENGTH_M) ** 2
    return float(2.0 * pi * np.sum(node_weight * intensity))


def test_lossy_wire_loses_what_flows_through_its_resistance() -> None:
    per_metre = 2.0 + 3.0j
    length_m, radius_m = 0.48 * WAVELENGTH_M, 1e-5 * WAVELENGTH_M
    lossy = current(length_m, radius_m, FREQUENCY_HZ, wire_impedance_ohm_per_m=per_metre)
    lost = 0.5 * per_metre.real * np.sum(lossy.weight_m * np.abs(lossy.current_a_per_v) ** 2)
    radiated = _radiated_power(lossy.position_m, lossy.weight_m, lossy.current_a_per_v, radius_m)
    assert radiated + lost == pytest.approx(0.5 * (1.0 / lossy.impedance_ohm).real, rel=2e-4)


def test_gap_susceptance_moves_by_4ka_over_eta_for_each_e_fold() -> None:
    # The logarithm of a delta-gap's susceptance: T. T. Wu and R. W. P. King (1967).
    radius = 1e-4
    wide, narrow = (
        1.0 / _impedance(0.5, radius, gap_m=radius * WAVELENGTH_M * ratio)
        for ratio in (0.1, 0.1 / np.e)
    )
    expected = 4.0 * 2.0 * pi * radius / FREE_SPACE_IMPEDANCE_OHM
    assert (narrow - wide).imag == pytest.approx(expected, rel=0.01)


def test_half_wave_is_about_73_ohm() -> None:
    # Common practice. A perfectly thin half wave is 73.1 + j42.5 ohm; at resonance wire is 72.
    assert _impedance(0.4886, 1e-5).real == pytest.approx(73.0, abs=1.5)


def test_full_wave_wire_has_a_finite_impedance() -> None:
    # Where the closed form diverges; the converged figure is 3722 - j3659 ohm at 1e-5.
    assert 1e3 < abs(_impedance(1.0, 1e-5)) < 1e4


def _impedance(length: float, radius: float, **options: object) -> complex:
    """Feed impedance of a wire given in wavelengths."""
    gap = options.get("gap_m")
    ground = options.get("reflected")
    assert gap is None or isinstance(gap, float)
    reflected: ReflectedPotentials | None = None
    if isinstance(ground, PerfectGround):
        reflected = ground
    result = feed_impedance(
        length * WAVELENGTH_M,
        radius * WAVELENGTH_M,
        FREQUENCY_HZ,
        gap_m=gap,
        reflected=reflected,
    )
    return complex(result.impedance_ohm)


@pytest.mark.parametrize("x", [1e-3, 0.3, 0.999, 1.001, 2.5, 40.0, 3e4])
def test_static_kernel_is_the_inverse_distance_averaged_around_the_tube(x: float) -> None:
    mpmath.mp.dps = 25
    root = mpmath.sqrt(mpmath.mpf(x) ** 2 + 4)
    # Generator: the complete elliptic integral by mpmath; NIST DLMF 19.2.8.
    expected = 2 / mpmath.pi * mpmath.ellipk(4 / root**2) / root
    assert static_kernel(np.array([x]))[0] == pytest.approx(float(expected), rel=1e-13)


@pytest.mark.parametrize("x", [0.02, 0.7, 1.2, 6.0, 300.0])
def test_moments_of_the_static_kernel_are_its_integrals(x: float) -> None:
    got = scaled_moments(np.array([x]), 8)[:, 0]
    expected = [_moment(x, i, lambda s, _t, _sq: s) for i in range(8)]
    assert got == pytest.approx(np.array(expected), rel=1e-9)


@pytest.mark.parametrize("x", [0.02, 0.7, 1.2, 6.0, 300.0])
def test_moments_of_the_width_kernel_are_its_integrals(x: float) -> None:
    got = scaled_width_moments(np.array([x]), 6)[:, 0]
    expected = [_moment(x, i, lambda s, t, sq: t - (sq + 2) * s) for i in range(6)]
    assert got == pytest.approx(np.array(expected), rel=1e-7, abs=1e-9)


def _moment(x: float, power: int, kernel: object) -> float:
    """Generator: mpmath quadrature of t^i / x^i times a kernel of S, T and t^2."""
    assert callable(kernel)
    mpmath.mp.dps = 20

    def integrand(t: mpmath.mpf) -> mpmath.mpf:
        square = t * t + 4
        # K(m) = pi / (2 agm(1, sqrt(1 - m))), NIST DLMF 19.8.5, keeps its digits near m = 1.
        static = 1 / (mpmath.agm(1, t / mpmath.sqrt(square)) * mpmath.sqrt(square))
        mean = 2 / mpmath.pi * mpmath.sqrt(square) * mpmath.ellipe(4 / square)
        return kernel(static, mean, t * t) * (t / x) ** power

    return float(mpmath.quad(integrand, [0, x / 1000, x / 30, x / 5, x]))


@pytest.mark.parametrize("row", [0, 3, 6, 7, 10, 13])
@pytest.mark.parametrize("power", [0, 3])
def test_end_elements_effective_kernel_integrates_its_densities(row: int, power: int) -> None:
    points = 7
    node, weight = np.polynomial.legendre.leggauss(points)
    got = np.sum(weight * node**power * end_kernel(points)[row])
    # Targets: the element before, 1 to 3 radii from the end, then the end element, 0 to 1.
    root = (1.0 - node[row % points]) / 2.0
    depth = 1.0 + 2.0 * root if row < points else root**2
    mpmath.mp.dps = 20

    def integrand(tau: mpmath.mpf) -> mpmath.mpf:
        x = abs(((1 - tau) / 2) ** 2 - mpmath.mpf(depth))
        size = mpmath.sqrt(x * x + 4)
        return tau**power / (mpmath.agm(1, x / size) * size)

    singular = [1.0 - 2.0 * float(np.sqrt(depth))] if depth < 1.0 else []
    # Generator: mpmath quadrature over the square-root coordinate.
    assert got == pytest.approx(float(mpmath.quad(integrand, [-1, *singular, 1])), rel=1e-9)


def test_distant_form_of_the_kernel_holds_from_four_radii() -> None:
    x = np.geomspace(4.0, 1e5, 50)
    got = distant_kernel(x)
    assert got == pytest.approx(static_kernel(x), rel=5e-7)


def test_sharp_admittance_is_the_infinite_tubes_integral() -> None:
    k, radius, gap, sigma, series = 1.0, 2e-3, 5e-3, 0.1, 30.0 + 40.0j
    expected = _tube_admittance(k, radius, gap, sigma, series)
    got = sharp_admittance(
        np.array([k]),
        np.array([radius]),
        np.array([gap]),
        np.array([sigma]),
        np.array([series]),
    )[0]
    assert abs(got - expected) < 2e-6 * abs(expected)


def _tube_admittance(k: float, radius: float, gap: float, sigma: float, series: complex) -> complex:
    """Generator: the tube's spectrum (Vainshtein 1969) by Gauss panels, its tail by the mean."""
    period = 2.0 * pi / gap
    panels = np.concatenate([np.geomspace(1e-3, period / 8, 60), period / 8 * np.arange(2, 4001)])
    node, weight = np.polynomial.legendre.leggauss(12)
    half = np.diff(panels)[:, None] / 2.0
    gamma = (panels[:-1, None] + half) + half * node
    zeta = np.sqrt(gamma**2 + k**2)
    q = (zeta * sigma) ** 2 / 2.0
    smooth = np.exp(-q) * (1.0 + q + q**2 / 2.0 + q**3 / 6.0)
    sharp = np.sinc(zeta * gap / (2.0 * pi)) ** 2 * (1.0 - smooth**2)
    bessel = ive(0, gamma * radius) * kve(0, gamma * radius)
    tube = FREE_SPACE_IMPEDANCE_OHM / (2.0 * pi * k) * gamma**2 * bessel
    total = np.sum(sharp / (series - 1j * tube) * gamma / zeta * half * weight)
    # Beyond, sinc^2 averages 2 / (zeta gap)^2 and the tube term is eta gamma / (4 pi k a).
    tail = 4.0j * pi * k * radius / FREE_SPACE_IMPEDANCE_OHM / (gap * panels[-1]) ** 2
    return complex((total + tail) / pi)
