"""Whole plans against published resonances of thin wire.

Resonant lengths and resistances of a wire 5000 diameters long, in free space, fed at the
centre over a gap of one radius: numerical solution of Hallén's integral equation with the
exact kernel (Hallén 1938; Wu in Collin & Zucker, Antenna Theory, 1969, for the kernel),
computed independently of this project's solver; lengths to 1e-4, resistances to 1e-3.
"""

import json
from functools import cache
from math import pi

import pytest

from service.contracts.candidate import PlannedDesign
from service.contracts.report import ResonanceLine
from service.contracts.request import parse_request
from worker.planning import plan

C_M_PER_S = 299_792_458.0

# order: (length in wavelengths, resistance in Ω), computed from the published equation.
RESONANCES_OF_5000_DIAMETERS = {1: (0.485013, 72.092), 3: (1.481249, 105.96)}


@cache
def forty_and_fifteen(length_limit_m: float = 22.0) -> PlannedDesign:
    """A 40 m half wave to be used on 15 m as well, of wire about 5000 diameters long."""
    request = {
        "name": "reference: one wire for 40m and 15m",
        "bands": [{"band_list": "amateur-region-1", "names": ["40m", "15m"], "swr_limit": 2.5}],
        "site": {"span_m": length_limit_m, "end_allowance_m": 0.0, "ground": "free-space"},
        "stock": {"conductors": [{"diameter_mm": 4.1, "material": "annealed-copper"}]},
        "feed": {"reference_ohm": 50.0, "transformer_ratios": [1.0, 1.5, 2.0]},
        "candidates": 3,
    }
    return plan(parse_request(json.dumps(request)), lambda _part, _step: None)


def resonance(order: int) -> ResonanceLine:
    lines = forty_and_fifteen().reports[0].resonances
    return next(line for line in lines if line.order == order)


def test_one_wire_serves_both_bands_on_its_first_and_third_resonance() -> None:
    best = forty_and_fifteen().result.candidates[0]
    assert [band.order for band in best.bands] == [1, 3]
    assert [band.service for band in best.bands] == ["served", "served"]


@pytest.mark.parametrize("order", [1, 3])
def test_resonances_lie_at_the_published_electrical_lengths(order: int) -> None:
    length_m = forty_and_fifteen().result.candidates[0].length_m
    wavelengths = length_m * resonance(order).frequency_mhz * 1e6 / C_M_PER_S
    assert wavelengths == pytest.approx(RESONANCES_OF_5000_DIAMETERS[order][0], rel=1e-3)


@pytest.mark.parametrize("order", [1, 3])
def test_resistance_at_resonance_is_the_published_one_and_the_copper_s_own(order: int) -> None:
    # A sine current spreads the wire's resistance as half of it, whatever the order:
    # R_copper L / 2, with R_copper = ρ / (π d δ) the skin-effect resistance per metre.
    length_m = forty_and_fifteen().result.candidates[0].length_m
    frequency_hz = resonance(order).frequency_mhz * 1e6
    skin_depth_m = (1.0 / (pi * frequency_hz * 4e-7 * pi * 58.0e6)) ** 0.5
    copper_ohm = 0.5 * length_m / (pi * 4.1e-3 * skin_depth_m * 58.0e6)
    expected_ohm = RESONANCES_OF_5000_DIAMETERS[order][1] + copper_ohm
    assert resonance(order).resistance_ohm == pytest.approx(expected_ohm, rel=5e-3)


def test_third_resonance_lies_above_three_times_the_first_by_the_published_ratio() -> None:
    published = 1.481249 / 0.485013
    assert published > 3.0
    measured = resonance(3).frequency_mhz / resonance(1).frequency_mhz
    assert measured == pytest.approx(published, rel=1e-3)


def test_the_compromise_lies_between_the_lengths_the_bands_would_want_alone() -> None:
    # Wanted alone: 0.485013 wavelengths at 7.100 MHz and 1.481249 at 21.225 MHz.
    wanted_m = (0.485013 * C_M_PER_S / 7.100e6, 1.481249 * C_M_PER_S / 21.225e6)
    best = forty_and_fifteen().result.candidates[0]
    assert wanted_m[0] < best.length_m < wanted_m[1]
    for each_m in wanted_m:
        # The sentence names both, within the copper's own small shortening.
        assert any(
            f"{each_m + shift:.2f} m" in best.compromise for shift in (-0.02, -0.01, 0.0, 0.01)
        ), best.compromise


def test_the_compromise_is_explained_by_the_order_of_the_resonances() -> None:
    text = forty_and_fifteen().result.candidates[0].compromise
    assert "3rd resonance" in text
    assert "above 3" in text


def test_a_span_too_short_for_40m_leaves_it_unserved_with_the_reason() -> None:
    best = forty_and_fifteen(9.0).result.candidates[0]
    assert best.bands[0].service == "unserved"
    assert "1st-order resonance" in best.bands[0].reason
    assert best.bands[1].service == "served"


def test_the_same_request_gives_the_same_answer_to_the_last_bit() -> None:
    first = forty_and_fifteen()
    forty_and_fifteen.cache_clear()
    again = forty_and_fifteen()
    assert again.reports == first.reports
    assert again.result.candidates == first.result.candidates
