"""What a report stores for its pictures."""

from __future__ import annotations

import cmath
import json
import math

import numpy as np
import pytest

from service.contracts.radiation import CurrentAlong, Radiation
from service.contracts.report import FeedReport
from service.contracts.request import parse_request
from worker.engine.ground import GROUND_CLASSES, PERFECT_GROUND, Ground
from worker.engine.hung_wire import GroundTables, HungWire
from worker.engine.thin_wire.standing_wave import StandingWave
from worker.planning import plan
from worker.translation.pictures import BandPicture, _current, pictures_of
from worker.translation.wires import Hanging

CENTRE_HZ = 7.1e6
HALF_WAVE_M = 20.5


def picture(
    ground: Ground | None = GROUND_CLASSES["average"],
    *,
    length_m: float = HALF_WAVE_M,
    height_m: float = 11.0,
    feed_fraction: float = 0.5,
    centre_hz: float = CENTRE_HZ,
) -> BandPicture:
    grounds = None if ground is None else GroundTables(ground, height_m, length_m)
    wire = HungWire(1e-3, grounds=grounds, feed_fraction=feed_fraction)
    return pictures_of([wire], [length_m], [centre_hz])[0][0]


def radiation(found: BandPicture) -> Radiation:
    assert found.radiation is not None
    return found.radiation


def test_the_current_is_told_against_its_largest_from_end_to_end() -> None:
    current = picture().current
    assert len(current.size) == len(current.phase_deg) == 41
    assert max(current.size) == 1.0
    assert current.size[0] == current.size[-1] == 0.0
    assert current.size[20] == 1.0
    assert current.phase_deg[20] == 0.0
    assert current.at_feed == pytest.approx(1.0, abs=0.02)


def test_of_lobes_about_as_strong_phases_count_from_the_one_nearest_to_the_feed() -> None:
    along = np.array([0.0, 0.995, 0.0, -1.0, 0.0], dtype=complex)
    fraction = np.linspace(0.0, 1.0, 5)
    wave = StandingWave(fraction - 0.5, np.full(5, 0.2), along, fraction, along, 1.0 + 0.0j)
    assert _current(wave, 0.25).phase_deg[1] == 0.0
    assert abs(_current(wave, 0.25).phase_deg[3]) == 180.0
    assert _current(wave, 0.75).phase_deg[3] == 0.0


def test_on_a_full_wave_the_feed_is_at_a_minimum() -> None:
    current = picture(length_m=2.0 * HALF_WAVE_M).current
    assert current.at_feed < 0.3
    assert current.size[20] == min(current.size[5:36])
    assert abs(current.phase_deg[10]) < 20.0
    assert abs(current.phase_deg[30]) < 20.0


def test_on_one_and_a_half_waves_the_middle_runs_against_the_outer_thirds() -> None:
    current = picture(length_m=3.03 * HALF_WAVE_M).current
    assert abs(current.phase_deg[20]) < 20.0
    assert abs(current.phase_deg[6]) > 150.0


def test_a_feed_off_the_centre_counts_from_the_first_place() -> None:
    # A full wave fed a quarter wave from its end is at a maximum there.
    current = picture(length_m=2.0 * HALF_WAVE_M, feed_fraction=0.25).current
    assert current.at_feed == pytest.approx(1.0, abs=0.1)
    assert max(current.size[5:16]) == 1.0
    assert abs(current.phase_deg[30]) > 150.0


def test_the_parts_of_the_power_make_up_the_whole() -> None:
    found = radiation(picture())
    assert found.ground_loss_fraction is not None
    parts = (found.radiated_fraction, found.wire_loss_fraction, found.ground_loss_fraction)
    assert sum(parts) == pytest.approx(1.0, abs=2e-4)
    assert min(parts) >= 0.0


@pytest.mark.parametrize("ground", [None, PERFECT_GROUND])
def test_where_no_ground_takes_power_no_loss_in_it_is_told(ground: Ground | None) -> None:
    assert radiation(picture(ground)).ground_loss_fraction is None


def test_cuts_have_a_point_a_step_and_meet_where_they_cross() -> None:
    found = radiation(picture(length_m=3.0 * HALF_WAVE_M))
    steps = round(90.0 / found.step_deg)
    assert len(found.broadside_dbi) == steps + 1
    assert len(found.end_on_dbi) == len(found.around_dbi) == 2 * steps + 1
    # At the zenith both planes are one direction.
    assert found.broadside_dbi[-1] == found.end_on_dbi[steps]
    assert max(found.around_dbi) == pytest.approx(found.gain_dbi, abs=0.15)


def test_no_null_is_deeper_than_the_floor() -> None:
    found = radiation(picture())
    # Over lossy ground nothing goes along the horizon.
    assert found.broadside_dbi[0] == -60.0


def test_a_wire_too_high_to_be_drawn_still_shows_its_current() -> None:
    found = picture(height_m=30.0, length_m=1.0, centre_hz=144e6)
    assert found.radiation is None
    assert max(found.current.size) == 1.0


def planned_report() -> tuple[FeedReport, Hanging]:
    asked = parse_request(
        json.dumps(
            {
                "bands": [
                    {"name": "40m", "low_mhz": 7.0, "high_mhz": 7.2},
                    {"name": "15m", "low_mhz": 21.0, "high_mhz": 21.45},
                ],
                "site": {"span_m": 24.0, "height_m": 10.0},
                "stock": {"conductors": [{"awg": 12}]},
                "candidates": 1,
                "tolerances": None,
            }
        )
    )
    return plan(asked, lambda _part, _step: None).reports[0], Hanging(asked)


def test_a_planned_report_holds_the_pictures_of_its_own_wire() -> None:
    report, hanging = planned_report()
    wire = hanging.wire(hanging.ways[0]).hung
    centres_hz = [7.1e6, 21.225e6]
    (expected,) = pictures_of([wire], [report.length_m], centres_hz)
    for band, each in zip(report.bands, expected, strict=True):
        assert isinstance(band.current, CurrentAlong)
        assert band.current.at_feed == pytest.approx(each.current.at_feed, rel=1e-3)
        assert band.radiation is not None
        assert band.radiation.gain_dbi == pytest.approx(radiation(each).gain_dbi, abs=0.02)


def test_the_angle_of_reflection_goes_with_resistance_and_reactance() -> None:
    report, _ = planned_report()
    for point in (*report.sweep, *report.bands[0].grid):
        seen = complex(point.resistance_ohm, point.reactance_ohm) / report.transformer_ratio
        gamma = (seen - report.reference_ohm) / (seen + report.reference_ohm)
        assert point.reflection_deg is not None
        # Told to some decimals, so compared as points on the chart.
        told = cmath.rect(point.reflection, math.radians(point.reflection_deg))
        assert abs(told - gamma) < 2e-4
