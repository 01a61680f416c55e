"""Induced-EMF impedances against published formulas, rounded handbook figures and quadrature.

Rows from the named formulas were computed at high precision with a wave impedance of
376.730313668 ohm (the value before the 2019 SI) or, where marked, 120 pi; tests state which.
"""

from __future__ import annotations

from math import pi

import mpmath
import numpy as np
import pytest

from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM, SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.engine.induced_emf import (
    mutual_impedance,
    small_radius_impedance,
    surface_impedance,
)

# One metre to the wavelength, so that lengths read in wavelengths.
FREQUENCY_HZ = SPEED_OF_LIGHT_M_PER_S
EARLIER_SI_OHM = 376.730313668
RELATIVE = 1e-9

# Source: Balanis, Antenna Theory, ch. 8; Kraus; Carter 1932. Computed from published formula.
# Wave impedance, length in wavelengths, impedance in ohm; independent of the radius.
ODD_HALF_WAVES = [
    (120.0 * pi, 0.5, 73.1296017917 + 42.544547284j),
    (EARLIER_SI_OHM, 0.5, 73.0790102857 + 42.5151147058j),
    (120.0 * pi, 1.5, 105.494231358 + 45.541018844j),
    (EARLIER_SI_OHM, 1.5, 105.421249803 + 45.5095132885j),
    (EARLIER_SI_OHM, 2.5, 120.682587725 + 46.1389310953j),
    (EARLIER_SI_OHM, 3.5, 130.75502739 + 46.410368886j),
]
# Same source and method; length and radius in wavelengths, small-radius form, field at rho = a.
SELF = [
    (0.1, 1e-5, 1.99885278544 - 2770.04390878j, 1.99885278386 - 2770.15472297j),
    (0.1, 5e-3, 1.99885278544 - 476.440547585j, 1.99845787652 - 530.264937783j),
    (0.25, 1e-4, 13.4311909779 - 722.796950009j, 13.4311899111 - 722.947611993j),
    (0.4, 1e-3, 39.9157473723 - 141.408389295j, 39.9154272096 - 141.90402649j),
    (0.45, 1e-5, 54.2918324179 - 138.158298218j, 54.2918323742 - 138.162349012j),
]
# Source: Carter 1932, Balanis eqs. 8-71 to 8-73, King 1957. Computed from published formula.
# Lengths, separation and offset of centres in wavelengths; impedance between feeds.
MUTUAL = [
    (0.5, 0.5, 0.01, 0.0, 73.0198463181 + 38.7674733069j),
    (0.5, 0.5, 0.05, 0.0, 71.6075074503 + 24.2518962666j),
    (0.5, 0.5, 0.0, 0.51, 25.1373448052 + 13.7965699065j),
    (0.5, 0.5, 0.0, 0.55, 20.2719649324 + 2.52678394648j),
    (0.5, 0.5, 0.1, 0.25, 53.2629026621 + 31.7247010553j),
    (0.5, 0.5, 0.1, 0.75, 1.07438193653 - 7.91996156772j),
    (0.48, 0.5, 0.2, 0.0, 48.4354886252 - 18.4132675202j),
    (0.75, 0.5, 0.3, 0.0, 63.9274603062 - 73.7087723302j),
    (1.25, 1.25, 0.5, 0.0, -49.848441181 - 83.0777390087j),
    (0.75, 0.75, 0.25, 0.5, 73.9703469079 - 74.1042287945j),
]
# Source: Carter 1932; Kraus; Balanis, rounded handbook figures with 120 pi, from memory.
HANDBOOK = [(0.25, 40.8 - 28.3j), (0.5, -12.5 - 29.9j), (1.0, 4.0 + 17.7j)]


@pytest.mark.parametrize(("eta", "length", "expected"), ODD_HALF_WAVES)
def test_odd_half_waves_have_the_published_impedance(
    eta: float, length: float, expected: complex
) -> None:
    got = small_radius_impedance(length, 1e-6, FREQUENCY_HZ, wave_impedance_ohm=eta)
    assert got == pytest.approx(expected, rel=RELATIVE)


@pytest.mark.parametrize(("length", "radius", "small_radius", "surface"), SELF)
def test_small_radius_form_has_the_published_values(
    length: float, radius: float, small_radius: complex, surface: complex
) -> None:
    del surface
    got = small_radius_impedance(length, radius, FREQUENCY_HZ, wave_impedance_ohm=EARLIER_SI_OHM)
    assert got == pytest.approx(small_radius, rel=RELATIVE)


@pytest.mark.parametrize(("length", "radius", "small_radius", "surface"), SELF)
def test_field_taken_on_the_surface_has_the_published_values(
    length: float, radius: float, small_radius: complex, surface: complex
) -> None:
    del small_radius
    got = surface_impedance(length, radius, FREQUENCY_HZ, wave_impedance_ohm=EARLIER_SI_OHM)
    assert got == pytest.approx(surface, rel=RELATIVE)


@pytest.mark.parametrize(("first", "second", "separation", "offset", "expected"), MUTUAL)
def test_mutual_impedance_has_the_published_values(
    first: float, second: float, separation: float, offset: float, expected: complex
) -> None:
    got = mutual_impedance(
        first,
        second,
        FREQUENCY_HZ,
        separation_m=separation,
        offset_m=offset,
        wave_impedance_ohm=EARLIER_SI_OHM,
    )
    assert got == pytest.approx(expected, rel=RELATIVE)


def test_collinear_half_waves_that_touch_have_the_published_value() -> None:
    # Same source; published to 1e-8.
    got = mutual_impedance(0.5, 0.5, FREQUENCY_HZ, offset_m=0.5, wave_impedance_ohm=EARLIER_SI_OHM)
    assert got == pytest.approx(26.3959799844 + 20.1481806161j, rel=1e-8)


@pytest.mark.parametrize(("separation", "expected"), HANDBOOK)
def test_side_by_side_half_waves_agree_with_handbook_figures(
    separation: float, expected: complex
) -> None:
    got = mutual_impedance(
        0.5, 0.5, FREQUENCY_HZ, separation_m=separation, wave_impedance_ohm=120.0 * pi
    )
    assert abs(complex(got) - expected) < 0.08


@pytest.mark.parametrize(
    ("first", "second", "separation", "offset"),
    [(0.37, 0.37, 2e-4, 0.0), (0.6, 1.3, 0.17, 0.41), (0.9, 0.4, 0.0, -0.8), (2.3, 0.7, 0.5, 0.2)],
)
def test_closed_form_is_the_integral_of_the_field(
    first: float, second: float, separation: float, offset: float
) -> None:
    expected = _mutual_by_quadrature(first, second, separation, offset)
    got = mutual_impedance(
        first,
        second,
        FREQUENCY_HZ,
        separation_m=separation,
        offset_m=offset,
        referred_to="current_maximum",
    )
    assert got == pytest.approx(expected, rel=RELATIVE)


def _mutual_by_quadrature(first: float, second: float, separation: float, offset: float) -> complex:
    """Generator: mpmath quadrature of the sinusoidal current's field times the second current.

    Field: Balanis, Antenna Theory, eq. 8-59, of a unit current maximum.
    """
    mpmath.mp.dps = 20
    k = 2 * mpmath.pi

    def integrand(z: mpmath.mpf) -> mpmath.mpc:
        def wave(centre: float) -> mpmath.mpc:
            r = mpmath.sqrt(mpmath.mpf(separation) ** 2 + (z - centre) ** 2)
            return mpmath.exp(-1j * k * r) / r

        field = wave(-first / 2) + wave(first / 2) - 2 * mpmath.cos(k * first / 2) * wave(0.0)
        return field * mpmath.sin(k * (mpmath.mpf(second) / 2 - abs(z - offset)))

    breaks = [offset - second / 2, offset, offset + second / 2]
    spikes = [
        centre + side * distance
        for centre in (-first / 2, 0.0, first / 2)
        for side in (-1, 1)
        for distance in (0.0, 1e-4, 1e-3, 1e-2, 0.1)
    ]
    inside = {x for x in spikes if breaks[0] < x < breaks[-1]} | set(breaks)
    total = mpmath.quad(integrand, sorted(inside))
    return complex(1j * FREE_SPACE_IMPEDANCE_OHM / (4 * mpmath.pi) * total)


def test_mutual_impedance_is_the_same_both_ways() -> None:
    there = mutual_impedance(0.45, 0.62, FREQUENCY_HZ, separation_m=0.2, offset_m=0.3)
    back = mutual_impedance(0.62, 0.45, FREQUENCY_HZ, separation_m=0.2, offset_m=-0.3)
    assert there == pytest.approx(back, rel=1e-12)


def test_arrays_broadcast_to_the_values_of_single_calls() -> None:
    lengths, separations = np.array([0.3, 0.5, 0.9])[:, None], np.array([0.0625, 0.4])
    table = mutual_impedance(lengths, 0.5, FREQUENCY_HZ, separation_m=separations)
    single = mutual_impedance(0.9, 0.5, FREQUENCY_HZ, separation_m=0.4)
    assert table.shape == (3, 2)
    assert table[2, 1] == pytest.approx(complex(single), rel=1e-14)


def test_full_wave_wire_is_refused_at_the_feed() -> None:
    with pytest.raises(OutOfRange, match="feed current"):
        small_radius_impedance(1.0, 1e-5, FREQUENCY_HZ)


def test_full_wave_wire_is_finite_at_the_current_maximum() -> None:
    # 199 ohm at the current maximum: Kraus; Jordan and Balmain, from memory.
    got = small_radius_impedance(1.0, 1e-5, FREQUENCY_HZ, referred_to="current_maximum")
    assert complex(got).real == pytest.approx(199.0, abs=0.5)


def test_overlapping_collinear_wires_are_refused() -> None:
    with pytest.raises(OutOfRange, match="clear distance"):
        mutual_impedance(0.5, 0.5, FREQUENCY_HZ, offset_m=0.4)


@pytest.mark.parametrize("radius", [0.0, -1e-3, np.nan, np.inf])
def test_radius_that_is_no_radius_is_refused(radius: float) -> None:
    with pytest.raises(OutOfRange):
        small_radius_impedance(0.5, radius, FREQUENCY_HZ)
