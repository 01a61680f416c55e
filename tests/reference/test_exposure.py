"""Exposure limits and distances, against the printed tables and published fields.

Sources: 47 CFR 1.1310, table 1; ICNIRP 2020, table 5, and 2010, tables 3 and 4; FCC OET Bulletin
65, ed. 97-01 (far-field formula with the ground's factor); C. A. Balanis, "Antenna Theory", 3rd
ed., 2005, sec. 8.5.2 and 4.6 (near field and radiated field of a half wave). Values worked by hand.
"""

from __future__ import annotations

from math import cos, pi, sqrt

import numpy as np
import pytest
from numpy.typing import NDArray

from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM, SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.engine.exposure import (
    KeepAway,
    Population,
    Source,
    Standard,
    fields_of,
    keep_away,
    largest_fields,
    limits_at,
)
from worker.engine.exposure.keep_away import (
    NEAREST_M,
    equivalent_isotropic_factor,
    far_field_distance_m,
)

PUBLIC, WORK = Population.PUBLIC, Population.OCCUPATIONAL
FCC, ICNIRP = Standard.FCC, Standard.ICNIRP

# MHz; V/m, A/m, W/m², minutes: worked by hand from the tables (1 mW/cm² is 10 W/m²).
FCC_ROWS = [
    (PUBLIC, 0.5, 614.0, 1.63, 1000.0, 30.0),
    (PUBLIC, 3.6, 228.889, 0.608333, 138.889, 30.0),
    (PUBLIC, 14.2, 58.0282, 0.154225, 8.92680, 30.0),
    (PUBLIC, 30.0, 27.4667, 0.073, 2.0, 30.0),
    (PUBLIC, 50.1, 27.5, 0.073, 2.0, 30.0),
    (PUBLIC, 432.0, 32.9509, 0.0874029, 2.88, 30.0),
    (WORK, 1.8, 614.0, 1.63, 1000.0, 6.0),
    (WORK, 7.1, 259.437, 0.688732, 178.536, 6.0),
    (WORK, 144.0, 61.4, 0.163, 10.0, 6.0),
    (WORK, 432.0, 73.6804, 0.195439, 14.4, 6.0),
]
ICNIRP_ROWS = [
    (PUBLIC, 7.1, 76.0742, 0.309859, None),
    (PUBLIC, 28.5, 28.7561, 0.0771930, None),
    (PUBLIC, 144.0, 27.7, 0.073, 2.0),
    (PUBLIC, 432.0, 28.5788, 0.0769035, 2.16),
    (WORK, 7.1, 167.363, 0.690141, None),
    (WORK, 144.0, 61.0, 0.16, 10.0),
    (WORK, 432.0, 62.3538, 0.166277, 10.8),
]


@pytest.mark.parametrize(
    ("population", "mhz", "electric", "magnetic", "density", "minutes"), FCC_ROWS
)
def test_the_american_limits_are_those_of_the_table(
    population: Population,
    mhz: float,
    electric: float,
    magnetic: float,
    density: float,
    minutes: float,
) -> None:
    (limit,) = limits_at(FCC, population, 1e6 * mhz)
    assert limit.electric_v_per_m == pytest.approx(electric, rel=1e-5)
    assert limit.magnetic_a_per_m == pytest.approx(magnetic, rel=1e-5)
    assert limit.power_density_w_per_m2 == pytest.approx(density, rel=1e-5)
    assert limit.averaging_min == minutes


@pytest.mark.parametrize(("population", "mhz", "electric", "magnetic", "density"), ICNIRP_ROWS)
def test_the_international_limits_are_those_of_the_table(
    population: Population, mhz: float, electric: float, magnetic: float, density: float | None
) -> None:
    limit = limits_at(ICNIRP, population, 1e6 * mhz)[0]
    assert limit.electric_v_per_m == pytest.approx(electric, rel=1e-4)
    assert limit.magnetic_a_per_m == pytest.approx(magnetic, rel=1e-4)
    assert limit.power_density_w_per_m2 == (None if density is None else pytest.approx(density))
    assert limit.averaging_min == 30.0


def test_up_to_10_mhz_nerves_have_a_limit_of_their_own_that_is_not_averaged() -> None:
    _, nerves = limits_at(ICNIRP, PUBLIC, 3.6e6)
    assert (nerves.electric_v_per_m, nerves.averaging_min) == (83.0, None)
    # 27 µT over 4 pi 1e-7 H/m.
    assert nerves.magnetic_a_per_m == pytest.approx(21.486, abs=1e-3)
    _, at_work = limits_at(ICNIRP, WORK, 10e6)
    assert at_work.magnetic_a_per_m == pytest.approx(79.577, abs=1e-3)
    assert len(limits_at(ICNIRP, PUBLIC, 10.1e6)) == 1


def test_no_limit_is_made_up_where_none_is_published() -> None:
    assert limits_at(FCC, PUBLIC, 0.2e6) == ()
    with pytest.raises(OutOfRange, match="frequency_hz"):
        limits_at(FCC, PUBLIC, 2e9)


# ---------------------------------------------------------------- far field


def test_the_far_field_distance_is_that_of_the_bulletin() -> None:
    # 100 W into a half wave (1.64), 2.56 for the ground: 419.8 W equivalent isotropic.
    factor = equivalent_isotropic_factor(None)
    assert 100.0 * factor == pytest.approx(419.9, abs=0.2)
    (limit,) = limits_at(FCC, PUBLIC, 144e6)
    # S = 2 W/m² asks for sqrt(419.9 / (8 pi)) = 4.087 m; E = 27.5 V/m for 112.23 / 27.5 = 4.081 m.
    assert far_field_distance_m(limit, 100.0, factor) == pytest.approx(4.09, abs=0.01)


def test_a_gain_with_the_ground_in_it_counts_where_it_is_larger() -> None:
    usual = equivalent_isotropic_factor(None)
    assert equivalent_isotropic_factor(6.0) == usual
    assert equivalent_isotropic_factor(8.4) == pytest.approx(10.0**0.84)


# ---------------------------------------------------------------- near field

MHZ = 14.2
WAVE_M = SPEED_OF_LIGHT_M_PER_S / (1e6 * MHZ)
K = 2.0 * pi / WAVE_M
HALF_M = 0.25 * WAVE_M
PLACE_M: NDArray[np.float64] = np.linspace(-HALF_M, HALF_M, 41)
# A peak of one ampere into 73.1 ohm is 36.6 W.
CURRENT_A = np.cos(K * PLACE_M).astype(complex)
HALF_WAVE_W = 0.5 * 73.13


@pytest.mark.parametrize(("along_m", "aside_m"), [(0.0, 1.0), (3.0, 0.5), (7.0, 2.0), (20.0, 9.0)])
def test_the_near_field_of_a_half_wave_is_the_published_one(along_m: float, aside_m: float) -> None:
    first, last = np.hypot(along_m - HALF_M, aside_m), np.hypot(along_m + HALF_M, aside_m)
    scale = FREE_SPACE_IMPEDANCE_OHM / (4.0 * pi)
    waves = np.exp(-1j * K * np.array([first, last]))
    along = scale * abs(np.sum(waves / [first, last]))
    across = (
        scale / aside_m * abs(np.sum(waves * [along_m - HALF_M, along_m + HALF_M] / [first, last]))
    )
    around = abs(np.sum(waves)) / (4.0 * pi * aside_m)
    electric, magnetic = fields_of(PLACE_M, CURRENT_A, 1e6 * MHZ, along_m, aside_m)
    assert electric == pytest.approx(sqrt(0.5 * (along**2 + across**2)), rel=1e-9)
    assert magnetic == pytest.approx(around / sqrt(2.0), rel=1e-9)


def test_a_current_of_any_shape_has_the_field_of_its_dipoles() -> None:
    # Hertz's dipole, element by element (Balanis eq. 4-8 and 4-10): no filament of sines at all.
    place_m = np.linspace(-3.0, 3.0, 401)
    current_a = (1.0 + 0.5j) * (1.0 - (place_m / 3.0) ** 2) * np.exp(0.3j * place_m)
    along_m, aside_m = 2.0, 1.5
    node, weight = np.polynomial.legendre.leggauss(60)
    s = 3.0 * node
    flow = (1.0 + 0.5j) * (1.0 - (s / 3.0) ** 2) * np.exp(0.3j * s) * 3.0 * weight
    reach = np.hypot(along_m - s, aside_m)
    turn, tilt = np.exp(-1j * K * reach) / (4.0 * pi), (along_m - s) / reach
    radial = (
        FREE_SPACE_IMPEDANCE_OHM * flow * tilt * 2.0 * (1.0 + 1.0 / (1j * K * reach)) / reach**2
    )
    sine = aside_m / reach
    swirl = 1.0 + 1.0 / (1j * K * reach) - 1.0 / (K * reach) ** 2
    polar = 1j * FREE_SPACE_IMPEDANCE_OHM * K * flow * sine * swirl / reach
    along = abs(np.sum(turn * (radial * tilt - polar * sine)))
    across = abs(np.sum(turn * (radial * sine + polar * tilt)))
    around = abs(np.sum(1j * K * flow * sine * (1.0 + 1.0 / (1j * K * reach)) / reach * turn))
    electric, magnetic = fields_of(place_m, current_a, 1e6 * MHZ, along_m, aside_m)
    assert electric == pytest.approx(sqrt(0.5 * (along**2 + across**2)), rel=1e-4)
    assert magnetic == pytest.approx(around / sqrt(2.0), rel=1e-4)


def test_far_away_the_field_is_that_of_the_gain() -> None:
    far = largest_fields(PLACE_M, CURRENT_A, 1e6 * MHZ, [40.0 * WAVE_M])
    expected = sqrt(30.0 * HALF_WAVE_W * 1.643) / (40.0 * WAVE_M)
    assert far.electric_v_per_m[0] == pytest.approx(expected, rel=5e-3)
    assert far.magnetic_a_per_m[0] == pytest.approx(expected / (120.0 * pi), rel=5e-3)


def test_beside_the_middle_the_magnetic_field_is_that_of_a_long_wire() -> None:
    # Ampère: I / (2 pi r), at a tenth of a metre, in rms.
    _, magnetic = fields_of(PLACE_M, CURRENT_A, 1e6 * MHZ, 0.0, 0.1)
    assert magnetic == pytest.approx(cos(0.0) / (2.0 * pi * 0.1) / sqrt(2.0), rel=1e-2)


# ---------------------------------------------------------------- distances


def source(power_w: float, duty_fraction: float = 1.0, gain_dbi: float | None = None) -> Source:
    scale = sqrt(power_w / HALF_WAVE_W)
    current_a = np.asarray(scale * CURRENT_A, dtype=np.complex128)
    return Source(PLACE_M, current_a, 1e6 * MHZ, power_w, duty_fraction, gain_dbi)


def told(given: Source, standard: Standard, population: Population) -> float:
    for each in keep_away(given, 14.0e6, 14.35e6):
        if (each.standard, each.population) == (standard, population):
            return each.distance_m
    raise AssertionError(standard)


def test_at_the_distance_told_the_field_of_the_current_is_at_the_limit() -> None:
    given = source(1000.0)
    for each in keep_away(given, 14.0e6, 14.35e6):
        near = largest_fields(PLACE_M, given.current_a, given.frequency_hz, [each.near_field_m])
        (limit, *_) = [
            one
            for one in each.limits
            if one.electric_v_per_m == min(another.electric_v_per_m for another in each.limits)
        ]
        worst = 1.6 * max(
            near.electric_v_per_m[0] / limit.electric_v_per_m,
            near.magnetic_a_per_m[0] / limit.magnetic_a_per_m,
        )
        assert worst == pytest.approx(1.0, rel=0.02)


def test_the_strictest_limit_within_the_band_counts() -> None:
    # 824 / 14.35 = 57.42 V/m: sqrt(30 * 100 * 4.199) / 57.42 = 1.955 m; of power density,
    # sqrt(419.9 / (4 pi 8.741)) = 1.955 m; of 2.19 / 14.35 A/m, 1.951 m.
    each = keep_away(source(100.0), 14.0e6, 14.35e6)[0]
    assert (each.standard, each.population) == (FCC, PUBLIC)
    assert each.far_field_m == pytest.approx(1.955, abs=0.002)


def test_people_at_work_may_come_closer() -> None:
    for standard in Standard:
        assert told(source(1000.0), standard, WORK) < told(source(1000.0), standard, PUBLIC)


def test_a_quarter_of_the_time_on_the_air_halves_the_distance() -> None:
    whole, part = (
        keep_away(source(1000.0), 14.0e6, 14.35e6),
        keep_away(source(1000.0, 0.25), 14.0e6, 14.35e6),
    )
    for one, other in zip(whole, part, strict=True):
        assert other.far_field_m == pytest.approx(0.5 * one.far_field_m)
        assert other.near_field_m < one.near_field_m


def test_pauses_do_not_help_where_the_limit_is_not_averaged() -> None:
    half_m = 0.25 * SPEED_OF_LIGHT_M_PER_S / 3.6e6
    place_m = np.linspace(-half_m, half_m, 41)
    current_a = (10.0 * np.cos(0.5 * pi * place_m / half_m)).astype(np.complex128)

    def found(duty_fraction: float) -> KeepAway:
        given = Source(place_m, current_a, 3.6e6, 100.0 * HALF_WAVE_W, duty_fraction)
        return keep_away(given, 3.5e6, 3.8e6, (ICNIRP,))[0]

    # 83 V/m at once against 300 / 3.8^0.7 = 117.8 V/m on average.
    whole, part = found(1.0), found(0.25)
    assert part.far_field_m == pytest.approx(whole.far_field_m)
    assert part.near_field_m == pytest.approx(whole.near_field_m)


def test_close_to_its_ends_a_wire_asks_for_more_than_the_far_field_tells() -> None:
    # A short wire of little radiation and much charge.
    place_m = np.linspace(-2.0, 2.0, 41)
    current_a = (5.0 - 2.5 * np.abs(place_m)).astype(np.complex128)
    given = Source(place_m, current_a, 3.6e6, 20.0)
    for each in keep_away(given, 3.5e6, 3.8e6):
        assert each.near_field_m > each.far_field_m
        assert each.distance_m == each.near_field_m


def test_no_distance_is_told_closer_than_the_model_holds() -> None:
    assert told(source(1e-4), FCC, WORK) == NEAREST_M


def test_where_a_standard_has_no_limit_no_distance_is_told() -> None:
    place_m = np.linspace(-100.0, 100.0, 41)
    current_a = np.cos(0.5 * pi * place_m / 100.0).astype(np.complex128)
    given = Source(place_m, current_a, 0.2e6, 10.0)
    assert {each.standard for each in keep_away(given, 0.19e6, 0.21e6)} == {ICNIRP}
    assert keep_away(given, 0.19e6, 0.21e6, (FCC,)) == ()
