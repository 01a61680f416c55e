"""What a report tells of end voltages and of exposure, tied to a whole plan."""

from __future__ import annotations

import json
from functools import cache
from math import hypot, log, sqrt

import pytest

from service.contracts.exposure import BandExposure
from service.contracts.report import BandReport, FeedReport
from service.contracts.request import parse_request
from worker.engine.exposure import KeepAway, Population, Standard, limits_at
from worker.planning import plan
from worker.translation.exposing import _distance


@cache
def report(
    power_w: float = 100.0, duty_percent: float = 100.0, standard: str = "both"
) -> FeedReport:
    fields = {
        "bands": ["amateur-region-1: 40m"],
        "site": {"span_m": 22.0, "height_m": 10.0},
        "stock": {"conductors": [{"awg": 12}]},
        "power_w": power_w,
        "candidates": 1,
        "tolerances": None,
        "lengths": {"low_m": 20.2, "high_m": 20.2},
        "exposure": {"duty_percent": duty_percent, "standard": standard},
    }
    return plan(parse_request(json.dumps(fields)), lambda _part, _step: None).reports[0]


def band(power_w: float = 100.0, duty_percent: float = 100.0, standard: str = "both") -> BandReport:
    return report(power_w, duty_percent, standard).bands[0]


def exposure(
    power_w: float = 100.0, duty_percent: float = 100.0, standard: str = "both"
) -> BandExposure:
    told = band(power_w, duty_percent, standard).exposure
    assert told is not None
    return told


def test_a_half_wave_has_the_same_high_voltage_at_both_ends() -> None:
    stress = band().stress
    assert stress is not None
    assert stress.ends_peak_v is not None
    near, far = stress.ends_peak_v
    assert near == far
    # Common practice: around a kilovolt at 100 W; Schelkunoff's 60 (ln(2 l / a) - 1) ohm times
    # the current's peak at the feed tells it within a tenth.
    a_m, l_m = 1.026e-3, 10.1
    usual = 60.0 * (log(2.0 * l_m / a_m) - 1.0) * sqrt(2.0) * stress.current_rms_a
    assert near == pytest.approx(usual, rel=0.1)


def test_end_voltages_grow_with_the_root_of_the_power() -> None:
    small, large = band(power_w=100.0).stress, band(power_w=1500.0).stress
    assert small is not None
    assert large is not None
    assert small.ends_peak_v is not None
    assert large.ends_peak_v is not None
    assert large.ends_peak_v[0] / small.ends_peak_v[0] == pytest.approx(sqrt(15.0), rel=1e-3)


def test_both_standards_tell_of_both_populations() -> None:
    told = [(each.standard, each.population) for each in exposure().distances]
    assert sorted(told) == [
        ("fcc-1.1310", "general-public"),
        ("fcc-1.1310", "occupational"),
        ("icnirp-2020", "general-public"),
        ("icnirp-2020", "occupational"),
    ]


def test_one_standard_alone_is_told_where_asked_for() -> None:
    assert {each.standard for each in exposure(standard="icnirp-2020").distances} == {"icnirp-2020"}


def test_the_far_field_distance_follows_from_the_gain_stored_with_it() -> None:
    fields = {
        "bands": ["amateur-region-1: 20m"],
        "site": {"span_m": 12.0, "height_m": 12.0, "ground": "salt-water"},
        "stock": {"conductors": [{"awg": 12}]},
        "candidates": 1,
        "tolerances": None,
        "lengths": {"low_m": 10.1, "high_m": 10.1},
    }
    found = plan(parse_request(json.dumps(fields)), lambda _part, _step: None).reports[0].bands[0]
    assert found.radiation is not None
    assert found.exposure is not None
    public = found.exposure.distances[0]
    # More than 6.23 dBi, a half wave's 2.15 dBi with the usual factor of the ground.
    assert found.radiation.gain_dbi > 7.0
    # 824 V/m over the MHz of the upper edge, the strictest of the band.
    limit = 824.0 / found.high.frequency_mhz
    assert public.electric_v_per_m == pytest.approx(limit, rel=1e-4)
    by_hand_m = sqrt(30.0 * 100.0 * 10.0 ** (0.1 * found.radiation.gain_dbi)) / limit
    assert public.far_field_m == pytest.approx(by_hand_m, abs=0.02)


def test_no_distance_is_rounded_down() -> None:
    limits = limits_at(Standard.FCC, Population.PUBLIC, 14.2e6)
    told = _distance(KeepAway(Standard.FCC, Population.PUBLIC, limits, 1.2301, 0.5), 10.0)
    assert (told.far_field_m, told.near_field_m, told.distance_m) == (1.24, 0.5, 1.24)


def test_the_distance_is_the_larger_of_both() -> None:
    for each in exposure(power_w=1500.0).distances:
        assert each.distance_m == max(each.far_field_m, each.near_field_m)


def test_pauses_count_in_the_average_but_not_where_nothing_is_averaged() -> None:
    whole, part = exposure(power_w=1500.0), exposure(power_w=1500.0, duty_percent=25.0)
    assert (part.peak_power_w, part.average_power_w) == (1500.0, 375.0)
    for before, after in zip(whole.distances, part.distances, strict=True):
        if before.not_averaged:
            # On 40m the nerves' 83 V/m stands beside 300 / 7.2^0.7 = 75 V/m: a quarter of the
            # power brings the second to where the first rules, which pauses do not change.
            assert 0.5 * before.far_field_m < after.far_field_m < before.far_field_m
        else:
            assert after.far_field_m == pytest.approx(0.5 * before.far_field_m, abs=0.01)


def test_a_distance_of_some_metres_on_40m_lies_in_the_near_field() -> None:
    assert all(each.in_near_field for each in exposure().distances)


def test_the_span_told_is_that_of_the_wire_planned() -> None:
    found = report()
    assert found.hanging is not None
    legs = [leg.electrical_m for leg in found.hanging.cutting]
    assert sum(legs) == pytest.approx(found.length_m, abs=1e-3)
    assert hypot(*found.hanging.shape_m[-1]) == pytest.approx(22.0, abs=1e-3)


def test_every_report_cautions_that_distances_are_formulas() -> None:
    said = " ".join(report().cautions)
    assert "have it measured" in said
    assert "knots may halve" in said
