"""Internal impedance, wire sizes and materials against published formulas, tables and standards.

Rows are marked with how they were obtained: computed from the named published formula, found in
a text, or from memory.
"""

from __future__ import annotations

from math import pi, sqrt

import mpmath
import numpy as np
import pytest

from worker.engine.conductor import (
    MATERIALS,
    Material,
    Metal,
    awg_diameter_m,
    diameter_from_area_m,
    internal_impedance_ohm_per_m,
    resistance_ohm_per_m,
    skin_depth_m,
)
from worker.engine.constants import VACUUM_PERMEABILITY_H_PER_M
from worker.engine.errors import OutOfRange
from worker.engine.material import (
    CORE_STEEL,
    cladding_for_nominal_conductivity,
    copper_clad_steel,
)

COPPER = MATERIALS["annealed-copper"]
CLAD_40 = MATERIALS["copper-clad-steel-40"]

# Internal impedance per metre: Z = gamma rho I0(gamma a) / (2 pi a I1(gamma a)), as in Ramo,
# Whinnery, Van Duzer, and Stratton; computed from the published formula.
# Columns: diameter in metres, frequency in hertz, impedance in ohm per metre.
ANNEALED_COPPER = [
    (0.5e-3, 0.001e6, 0.08780999843 + 0.0003141585951j),
    (0.5e-3, 0.1e6, 0.09143297693 + 0.03076958954j),
    (0.5e-3, 1.8e6, 0.2463508236 + 0.2208299308j),
    (0.5e-3, 3.5e6, 0.3338243941 + 0.3093862254j),
    (0.5e-3, 50e6, 1.196700291 + 1.174120905j),
    (1.628e-3, 0.001e6, 0.008286696997 + 0.0003140839695j),
    (1.628e-3, 0.1e6, 0.01840346499 + 0.01588767738j),
    (1.628e-3, 1.8e6, 0.07055562991 + 0.06838814161j),
    (1.628e-3, 14e6, 0.1929522257 + 0.1908474816j),
    (5.0e-3, 0.001e6, 0.0009143297693 + 0.0003076958954j),
    (5.0e-3, 0.1e6, 0.005478626341 + 0.005244769602j),
    (5.0e-3, 3.5e6, 0.03129346039 + 0.03107159355j),
    (5.0e-3, 28e6, 0.08810701018 + 0.08788666157j),
    (5.0e-3, 50e6, 0.1176638757 + 0.117443735j),
]
ALUMINIUM_61_IACS = [
    (0.5e-3, 0.001e6, 0.1439504315 + 0.000314159016j),
    (0.5e-3, 1.8e6, 0.3247531752 + 0.2811151704j),
    (0.5e-3, 28e6, 1.162126836 + 1.124357989j),
    (1.628e-3, 0.1e6, 0.02430741919 + 0.02017851533j),
    (1.628e-3, 3.5e6, 0.1256537353 + 0.1221138028j),
    (1.628e-3, 50e6, 0.4652427836 + 0.4618105223j),
    (5.0e-3, 0.001e6, 0.00146206998 + 0.0003116992326j),
    (5.0e-3, 14e6, 0.07993031509 + 0.07956798708j),
    (5.0e-3, 50e6, 0.1507322109 + 0.1503710404j),
]

# Skin-effect ratios against x = a sqrt(omega mu sigma): Rosa and Grover, Bull. NBS 8, and the
# table form of NBS Circular 74; computed from the published formula. (x, R / R0, L / L0)
SKIN_EFFECT = [
    (0.5, 1.000325436, 0.9998372855),
    (1.0, 1.005186731, 0.9974075341),
    (1.5, 1.02582367, 0.9871107742),
    (2.0, 1.078158746, 0.9611351193),
    (2.5, 1.175378859, 0.9134655926),
    (3.0, 1.318094818, 0.8451665321),
    (4.0, 1.677868863, 0.6863227882),
    (5.0, 2.042725062, 0.5559681199),
    (6.0, 2.39358957, 0.4652055085),
    (8.0, 3.094445669, 0.3510719729),
    (10.0, 3.798576052, 0.281619294),
    (20.0, 7.327672351, 0.1412789687),
    (50.0, 17.93031972, 0.05655981277),
    (100.0, 35.60666471, 0.02828319545),
]

# ASTM B258, d = 0.005 in * 92^((36 - n) / 39), computed from the published formula. (AWG, mm)
AWG = [
    (6, 4.115378099),
    (8, 3.263643206),
    (10, 2.588186728),
    (12, 2.052525388),
    (14, 1.627726634),
    (16, 1.290845906),
    (18, 1.023687343),
    (20, 0.8118209704),
    (22, 0.6438032985),
    (24, 0.5105592271),
]

# IEC 60228 nominal cross-sections and the diameter of the solid wire, from memory. (mm², mm)
METRIC = [(0.5, 0.7979), (0.75, 0.9772), (1.0, 1.1284), (1.5, 1.3820), (2.5, 1.7841)]
METRIC_THICK = [(4.0, 2.2568), (6.0, 2.7640), (10.0, 3.5682)]
# IEC 60228 greatest resistance of plain copper class 1 at 20 °C, from memory. (mm², ohm/km)
METRIC_GREATEST_RESISTANCE = [(1.5, 12.1), (2.5, 7.41), (4.0, 4.61), (6.0, 3.08)]

# Hard-drawn copper-clad steel, direct-current resistance at 20 °C: a wire maker's table citing
# ASTM B227, found in the text. (AWG, diameter in inch, 40 % and 30 % grade in ohm per 1000 ft)
CLAD_STEEL_RESISTANCE = [
    (4, 0.2043, 0.6337, 0.8447),
    (6, 0.162, 1.008, 1.343),
    (8, 0.1285, 1.602, 2.136),
    (10, 0.1019, 2.547, 3.396),
    (11, 0.09074, 3.213, 4.284),
    (12, 0.08081, 4.051, 5.399),
]


def assert_close(actual: complex, expected: complex, relative: float) -> None:
    assert actual.real == pytest.approx(expected.real, rel=relative)
    assert actual.imag == pytest.approx(expected.imag, rel=relative)


@pytest.mark.parametrize(("diameter_m", "frequency_hz", "expected"), ANNEALED_COPPER)
def test_internal_impedance_of_copper_agrees_with_the_exact_formula(
    diameter_m: float, frequency_hz: float, expected: complex
) -> None:
    actual = complex(internal_impedance_ohm_per_m(diameter_m / 2, frequency_hz, COPPER))
    assert_close(actual, expected, 1e-8)


@pytest.mark.parametrize(("diameter_m", "frequency_hz", "expected"), ALUMINIUM_61_IACS)
def test_internal_impedance_of_aluminium_agrees_with_the_exact_formula(
    diameter_m: float, frequency_hz: float, expected: complex
) -> None:
    aluminium = MATERIALS["aluminium-1350-h19"]
    actual = complex(internal_impedance_ohm_per_m(diameter_m / 2, frequency_hz, aluminium))
    assert_close(actual, expected, 1e-8)


@pytest.mark.parametrize(("x", "resistance_ratio", "inductance_ratio"), SKIN_EFFECT)
def test_skin_effect_ratios_agree_with_the_published_table(
    x: float, resistance_ratio: float, inductance_ratio: float
) -> None:
    radius_m, sigma = 1e-3, COPPER.surface.conductivity_s_per_m
    omega = (x / radius_m) ** 2 / (VACUUM_PERMEABILITY_H_PER_M * sigma)
    impedance = complex(internal_impedance_ohm_per_m(radius_m, omega / (2 * pi), COPPER))
    assert impedance.real * pi * radius_m**2 * sigma == pytest.approx(resistance_ratio, rel=1e-8)
    inductance_at_dc = VACUUM_PERMEABILITY_H_PER_M / (8 * pi)
    assert impedance.imag / omega / inductance_at_dc == pytest.approx(inductance_ratio, rel=1e-8)


@pytest.mark.parametrize("frequency_hz", [1e-6, 1e-3, 1.0, 50.0])
def test_reactance_keeps_its_digits_where_it_is_far_below_the_resistance(
    frequency_hz: float,
) -> None:
    impedance = complex(internal_impedance_ohm_per_m(1e-5, frequency_hz, COPPER))
    # L = mu / 8 pi for uniform current, exact in this limit.
    expected = 2 * pi * frequency_hz * VACUUM_PERMEABILITY_H_PER_M / (8 * pi)
    assert impedance.imag == pytest.approx(expected, rel=1e-12)


def test_direct_current_resistance_is_resistivity_over_section() -> None:
    # 1/58 ohm mm²/m, exact by definition (IEC 60028).
    assert float(resistance_ohm_per_m(sqrt(1e-6 / pi), COPPER)) == pytest.approx(1 / 58, rel=1e-14)


def test_a_thick_wire_at_high_frequency_reaches_the_surface_resistance_of_a_plane() -> None:
    radius_m, frequency_hz = 0.1, 3e9
    depth_m = float(skin_depth_m(frequency_hz, COPPER))
    plane = (1 + 1j) / (COPPER.surface.conductivity_s_per_m * depth_m * 2 * pi * radius_m)
    # First curvature term of the large-argument expansion of I0 / I1: 1 / (2 z).
    expected = plane * (1 + 1 / (2 * (1 + 1j) * radius_m / depth_m))
    actual = complex(internal_impedance_ohm_per_m(radius_m, frequency_hz, COPPER))
    assert_close(actual, expected, 1e-9)


def test_skin_depth_of_copper_at_14_mhz_is_that_of_the_published_rows() -> None:
    # Stated in the rows above: 17.66209 micrometres, computed from the published formula.
    assert float(skin_depth_m(14e6, COPPER)) == pytest.approx(17.66209e-6, rel=1e-6)


def clad_impedance_by_mpmath(radius_m: float, frequency_hz: float, material: Material) -> complex:
    """Two-layer solution with 60 digits and unscaled Bessel functions (Stratton, sec. 9.15)."""
    assert material.core is not None
    with mpmath.workdps(60):
        omega = 2 * mpmath.pi * mpmath.mpf(frequency_hz)
        outer = mpmath.mpf(radius_m)
        inner = outer * (1 - 2 * mpmath.mpf(material.cladding_per_diameter))

        def wave(metal: Metal) -> tuple[mpmath.mpc, mpmath.mpc]:
            mu = metal.relative_permeability * mpmath.mpf(VACUUM_PERMEABILITY_H_PER_M)
            gamma = mpmath.sqrt(mpmath.mpc(0, omega * mu * metal.conductivity_s_per_m))
            return gamma, gamma / metal.conductivity_s_per_m

        core_gamma, core_eta = wave(material.core)
        gamma, eta = wave(material.surface)
        z, u, v = core_gamma * inner, gamma * inner, gamma * outer
        # Unit magnetic field at the interface; Cramer's rule for E = p I0 + q K0.
        electric = core_eta * mpmath.besseli(0, z) / mpmath.besseli(1, z)
        i0, i1 = mpmath.besseli(0, u), mpmath.besseli(1, u) / eta
        k0, k1 = mpmath.besselk(0, u), mpmath.besselk(1, u) / eta
        p, q = electric * k1 + k0, electric * i1 - i0
        top = p * mpmath.besseli(0, v) + q * mpmath.besselk(0, v)
        bottom = (p * mpmath.besseli(1, v) - q * mpmath.besselk(1, v)) / eta
        return complex(top / (2 * mpmath.pi * outer * bottom))


@pytest.mark.parametrize("radius_m", [0.2e-3, 0.814e-3, 5e-3])
@pytest.mark.parametrize("frequency_hz", [1e-3, 1.0, 60.0, 10e3, 1.8e6, 28.5e6, 1e9])
def test_clad_wire_agrees_with_the_two_layer_solution_in_60_digits(
    radius_m: float, frequency_hz: float
) -> None:
    actual = complex(internal_impedance_ohm_per_m(radius_m, frequency_hz, CLAD_40))
    assert_close(actual, clad_impedance_by_mpmath(radius_m, frequency_hz, CLAD_40), 1e-9)


def test_clad_wire_with_core_and_cladding_of_one_metal_is_a_solid_wire() -> None:
    one_metal = Material("one metal", COPPER.surface, "", COPPER.surface, 0.1)
    frequency_hz = np.logspace(-3, 9, 25)
    clad = internal_impedance_ohm_per_m(1e-3, frequency_hz, one_metal)
    solid = internal_impedance_ohm_per_m(1e-3, frequency_hz, COPPER)
    np.testing.assert_allclose(clad.real, solid.real, rtol=1e-9)
    np.testing.assert_allclose(clad.imag, solid.imag, rtol=1e-9)


def test_copper_clad_steel_conducts_like_its_copper_alone_at_radio_frequency() -> None:
    # Teare and Schatz, Proc. IRE 32, 1944 (abstract read): at radio frequencies the current
    # keeps to the copper, and the resistance is as low as that of solid copper.
    solid = Material("its copper", CLAD_40.surface, "")
    radius_m = awg_diameter_m(14) / 2
    ratio = internal_impedance_ohm_per_m(radius_m, [3.5e6, 30e6], CLAD_40) / (
        internal_impedance_ohm_per_m(radius_m, [3.5e6, 30e6], solid)
    )
    np.testing.assert_allclose(np.abs(ratio), 1.0, atol=2e-3)


def test_thin_cladding_leaves_the_steel_to_carry_current() -> None:
    thin = copper_clad_steel("thin", 0.002)
    radius_m = awg_diameter_m(14) / 2
    thin_ohm = float(internal_impedance_ohm_per_m(radius_m, 1.8e6, thin).real)
    thick_ohm = float(internal_impedance_ohm_per_m(radius_m, 1.8e6, CLAD_40).real)
    assert thin_ohm > 5 * thick_ohm


@pytest.mark.parametrize("relative_permeability", [20.0, 500.0])
def test_the_uncertain_permeability_of_the_core_does_not_matter_above_1_8_mhz(
    relative_permeability: float,
) -> None:
    core = Metal(
        CORE_STEEL.conductivity_s_per_m,
        CORE_STEEL.temperature_coefficient_per_k,
        relative_permeability,
    )
    other = Material("other steel", CLAD_40.surface, "", core, CLAD_40.cladding_per_diameter)
    radius_m = awg_diameter_m(14) / 2
    change = internal_impedance_ohm_per_m(radius_m, 1.8e6, other).real / (
        internal_impedance_ohm_per_m(radius_m, 1.8e6, CLAD_40).real
    )
    assert float(change) == pytest.approx(1.0, abs=0.005)


@pytest.mark.parametrize(("gauge", "inch", "grade_40", "grade_30"), CLAD_STEEL_RESISTANCE)
def test_direct_current_resistance_of_copper_clad_steel_agrees_with_the_makers_table(
    gauge: int, inch: float, grade_40: float, grade_30: float
) -> None:
    radius_m = awg_diameter_m(gauge) / 2
    assert 2 * radius_m == pytest.approx(inch * 0.0254, rel=5e-4)
    ohm_per_kft = 304.8 * np.array(
        [
            float(resistance_ohm_per_m(radius_m, MATERIALS["copper-clad-steel-40"])),
            float(resistance_ohm_per_m(radius_m, MATERIALS["copper-clad-steel-30"])),
        ]
    )
    np.testing.assert_allclose(ohm_per_kft, [grade_40, grade_30], rtol=0.01)


def test_cladding_thickness_follows_from_the_grade() -> None:
    # Derived from f + 0.09 (1 - f) = IACS, t / D = (1 - sqrt(1 - f)) / 2; a maker's text says
    # about 10 % of the diameter for the 40 % grade.
    assert cladding_for_nominal_conductivity(0.40) == pytest.approx(0.094, abs=5e-4)
    assert cladding_for_nominal_conductivity(0.30) == pytest.approx(0.061, abs=5e-4)


@pytest.mark.parametrize(("gauge", "diameter_mm"), AWG)
def test_american_wire_gauge_agrees_with_astm_b258(gauge: int, diameter_mm: float) -> None:
    assert awg_diameter_m(gauge) == pytest.approx(diameter_mm * 1e-3, rel=1e-9)


@pytest.mark.parametrize(("area_mm2", "diameter_mm"), METRIC + METRIC_THICK)
def test_metric_sizes_are_named_by_their_section(area_mm2: float, diameter_mm: float) -> None:
    assert diameter_from_area_m(area_mm2 * 1e-6) == pytest.approx(diameter_mm * 1e-3, abs=5e-8)


@pytest.mark.parametrize(("area_mm2", "greatest_ohm_per_km"), METRIC_GREATEST_RESISTANCE)
def test_copper_of_nominal_section_stays_within_the_greatest_resistance_of_its_size(
    area_mm2: float, greatest_ohm_per_km: float
) -> None:
    radius_m = diameter_from_area_m(area_mm2 * 1e-6) / 2
    resistance = 1e3 * float(resistance_ohm_per_m(radius_m, COPPER))
    assert 0.9 * greatest_ohm_per_km < resistance < greatest_ohm_per_km


@pytest.mark.parametrize(
    ("name", "resistivity_ohm_m", "relative"),
    [
        # IEC 60028, 1.7241e-8 as rounded by the Copper Development Association: found in text.
        ("annealed-copper", 1.7241e-8, 5e-5),
        # ASTM B1, 96.16 % IACS: from memory.
        ("hard-drawn-copper", 1.7930e-8, 1e-4),
        # ASTM B230 / B609, 61.0 % IACS: from memory.
        ("aluminium-1350-h19", 2.8264e-8, 1e-4),
        # ASM handbook: from memory, to 3 %.
        ("aluminium-6061-t6", 3.99e-8, 0.03),
        ("aluminium-6063-t5", 3.2e-8, 0.03),
        ("aluminium-6063-t6", 3.2e-8, 0.03),
        # Copper Development Association: from memory, to 5 %.
        ("phosphor-bronze-c51000", 1.15e-7, 0.05),
        ("phosphor-bronze-c50500", 3.6e-8, 0.05),
    ],
)
def test_conductivity_of_each_material_agrees_with_its_published_resistivity(
    name: str, resistivity_ohm_m: float, relative: float
) -> None:
    assert 1 / MATERIALS[name].surface.conductivity_s_per_m == pytest.approx(
        resistivity_ohm_m, rel=relative
    )


@pytest.mark.parametrize(
    ("name", "coefficient_per_k"),
    # Industrial Power Engineering and Applications Handbook, table 30.1: found in the text.
    # (The 6101A column, 55 % IACS, stands for 6063-T5 of equal conductivity.)
    [
        ("annealed-copper", 3.93e-3),
        ("aluminium-1350-h19", 4.03e-3),
        ("aluminium-6063-t5", 3.63e-3),
    ],
)
def test_temperature_coefficient_agrees_with_the_handbook(
    name: str, coefficient_per_k: float
) -> None:
    assert MATERIALS[name].surface.temperature_coefficient_per_k == pytest.approx(
        coefficient_per_k, rel=2e-3
    )


def test_copper_resists_a_fifth_more_at_75_degrees() -> None:
    # IEC 60028: 1 + 0.00393 (75 - 20) = 1.21615.
    ratio = resistance_ohm_per_m(1e-3, COPPER, 75.0) / resistance_ohm_per_m(1e-3, COPPER)
    assert float(ratio) == pytest.approx(1.21615, rel=1e-12)


def test_temperature_acts_on_skin_effect_resistance_by_its_square_root() -> None:
    hot = internal_impedance_ohm_per_m(2e-3, 100e6, COPPER, 75.0).real
    cold = internal_impedance_ohm_per_m(2e-3, 100e6, COPPER).real
    assert float(hot / cold) == pytest.approx(sqrt(1.21615), rel=1e-3)


def test_arrays_broadcast_to_what_scalars_give() -> None:
    radius_m = np.array([0.5e-3, 1e-3])[:, None, None]
    frequency_hz = np.array([0.0, 1e3, 7e6])[:, None]
    temperature_c = np.array([-20.0, 20.0, 50.0, 80.0])
    for material in (COPPER, CLAD_40):
        together = internal_impedance_ohm_per_m(radius_m, frequency_hz, material, temperature_c)
        assert together.shape == (2, 3, 4)
        one = internal_impedance_ohm_per_m(1e-3, 7e6, material, 50.0)
        assert complex(together[1, 2, 2]) == pytest.approx(complex(one), rel=1e-14)


@pytest.mark.parametrize(
    ("quantity", "radius_m", "frequency_hz", "temperature_c"),
    [
        ("radius_m", 0.0, 7e6, 20.0),
        ("radius_m", float("nan"), 7e6, 20.0),
        ("radius_m", 0.2, 7e6, 20.0),
        ("frequency_hz", 1e-3, -1.0, 20.0),
        ("frequency_hz", 1e-3, float("inf"), 20.0),
        ("temperature_c", 1e-3, 7e6, -274.0),
        ("temperature_c", 1e-3, 7e6, 1000.0),
    ],
)
def test_an_input_out_of_range_is_named_with_its_range(
    quantity: str, radius_m: float, frequency_hz: float, temperature_c: float
) -> None:
    with pytest.raises(OutOfRange) as caught:
        internal_impedance_ohm_per_m([1e-3, radius_m], frequency_hz, COPPER, temperature_c)
    assert caught.value.quantity == quantity
    assert caught.value.low < caught.value.high


def test_a_gauge_no_table_has_is_refused() -> None:
    with pytest.raises(OutOfRange, match="gauge"):
        awg_diameter_m(57)


def test_a_cladding_thicker_than_the_wire_is_refused() -> None:
    with pytest.raises(OutOfRange, match="cladding_per_diameter"):
        copper_clad_steel("impossible", 0.5)
