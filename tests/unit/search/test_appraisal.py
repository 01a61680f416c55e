"""A close look at one wire, on open lines known in closed form."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest

from tests.unit.search.open_line import C_M_PER_S, OpenLine, goal, resonant_m, space_of
from worker.engine.errors import NotConverged
from worker.engine.line_catalogue import FEED_LINES
from worker.engine.reflection import standing_wave_ratio
from worker.search.appraisal import NEAR, Appraisal, appraise
from worker.search.feeding import Feeding
from worker.search.ranking import Pick
from worker.search.scan import scan
from worker.search.space import FloatArray, SearchSpace, Solved, WireOffer

HALF_WAVE_M = resonant_m(1, 7.1e6)


def appraised(space: SearchSpace, *picks: Pick) -> tuple[Appraisal, ...]:
    found = scan(space, lambda _part, _step: None)
    return appraise(space, picks, tuple(found.maps[pick.wire].maps for pick in picks))


def swr_of(length_m: float, frequency_hz: FloatArray, ratio: float = 1.0) -> FloatArray:
    solved = OpenLine().solve(np.full(frequency_hz.shape, length_m), frequency_hz)
    return np.asarray(standing_wave_ratio(solved.impedance_ohm / ratio, 50.0))


def test_edges_and_centre_are_direct_solves_to_the_last_bit() -> None:
    (look,) = appraised(space_of(), Pick(0, 1.0, 20.31))
    for band in look.bands:
        marks_hz = np.array([band.goal.low_hz, band.goal.centre_hz, band.goal.high_hz])
        exact = OpenLine().solve(np.full(3, 20.31), marks_hz).impedance_ohm
        assert np.array_equal(band.marks.frequency_hz, marks_hz)
        assert np.array_equal(band.marks.impedance_ohm, exact)


def test_the_grid_runs_from_edge_to_edge_and_agrees_with_the_line() -> None:
    (look,) = appraised(space_of(), Pick(0, 1.0, 20.31))
    for band in look.bands:
        hertz = band.grid.frequency_hz
        assert (hertz[0], hertz[-1]) == (band.goal.low_hz, band.goal.high_hz)
        exact = OpenLine().solve(np.full(hertz.shape, 20.31), hertz).impedance_ohm
        assert np.max(np.abs(band.grid.impedance_ohm / exact - 1.0)) < 1e-3


@pytest.mark.parametrize("length_m", [19.8, 20.1, 20.31, 20.6])
def test_the_served_part_is_that_of_a_dense_sweep(length_m: float) -> None:
    (look,) = appraised(space_of(ratios=(1.5,)), Pick(0, 1.5, length_m))
    for band in look.bands:
        dense = swr_of(length_m, band.goal.grid_hz(4001), 1.5)
        assert band.served_fraction == pytest.approx(float(np.mean(dense <= 2.0)), abs=2e-3)


def test_resonances_are_those_of_the_line_and_each_band_gets_the_nearest() -> None:
    (look,) = appraised(space_of(), Pick(0, 1.0, HALF_WAVE_M))
    series = [each for each in look.resonances if each.kind == "series"]
    assert [each.order for each in series] == [1, 3]
    for each in series:
        assert each.frequency_hz == pytest.approx(each.order * 7.1e6, rel=1e-5)
    assert [band.nearest.order if band.nearest else None for band in look.bands] == [1, 3]


def test_a_first_resonance_below_the_lowest_band_is_not_missed() -> None:
    # A line as slow as a low wire in thick insulation: half a wave of free space at 7.05 MHz
    # is in resonance at 5.97 MHz.
    space = space_of(wires=(WireOffer(OpenLine(slowing=1.18)),))
    (look,) = appraised(space, Pick(0, 1.0, 0.5 * C_M_PER_S / 7.05e6))
    assert look.resonances[0].order == 1
    assert look.resonances[0].frequency_hz == pytest.approx(7.05e6 / 1.18, rel=1e-5)


@pytest.mark.parametrize("order", [1, 3])
def test_the_own_length_of_a_band_is_that_of_the_line(order: int) -> None:
    (look,) = appraised(space_of(), Pick(0, 1.0, 20.31))
    band = look.bands[0 if order == 1 else 1]
    assert band.own_length_m == pytest.approx(resonant_m(order, band.goal.centre_hz), rel=1e-4)


def test_a_resonance_moves_against_the_length_by_its_own_ratio() -> None:
    (look,) = appraised(space_of(), Pick(0, 1.0, 20.31))
    for band in look.bands:
        assert band.nearest is not None
        assert band.hz_per_m == pytest.approx(-band.nearest.frequency_hz / 20.31, rel=2e-3)


def test_own_length_and_trimming_are_told_where_the_site_ends_before_the_resonance() -> None:
    space = space_of(site_longest_m=19.6)
    (look,) = appraised(space, Pick(0, 1.0, 19.6))
    band = look.bands[0]
    assert band.own_length_m == pytest.approx(resonant_m(1, 7.1e6), rel=1e-3)
    assert band.nearest is not None
    assert band.hz_per_m == pytest.approx(-band.nearest.frequency_hz / 19.6, rel=2e-3)


def test_a_band_far_from_any_resonance_has_no_own_length() -> None:
    space = space_of(goal("40m", 7.0, 7.2), goal("20m", 14.0, 14.35))
    (look,) = appraised(space, Pick(0, 1.0, HALF_WAVE_M))
    assert look.bands[1].nearest is not None
    assert abs(look.bands[1].nearest.frequency_hz / 14.175e6 - 1.0) > NEAR
    assert look.bands[1].own_length_m is None
    assert look.bands[1].hz_per_m is None


def test_wires_looked_at_together_are_looked_at_as_each_alone() -> None:
    wires = (WireOffer(OpenLine()), WireOffer(OpenLine(surge_ohm=800.0)))
    space = space_of(wires=wires)
    picks = (Pick(0, 1.0, 20.31), Pick(1, 2.0, 20.05), Pick(0, 2.0, 13.0))
    together = appraised(space, *picks)
    for pick, look in zip(picks, together, strict=True):
        (alone,) = appraised(space, pick)
        assert look.pick == pick
        for one, other in zip(look.bands, alone.bands, strict=True):
            assert one.marks.impedance_ohm == pytest.approx(other.marks.impedance_ohm, rel=1e-12)
            assert one.grid.impedance_ohm == pytest.approx(other.grid.impedance_ohm, rel=1e-3)
            assert one.served_fraction == pytest.approx(other.served_fraction, abs=1e-3)


def test_every_band_is_looked_at_through_the_network_that_serves_it_best() -> None:
    feeding = Feeding(50.0, matched=True)
    (look,) = appraised(space_of(feeding=feeding), Pick(0, 1.0, 20.31))
    for band in look.bands:
        assert band.network is not None
        assert band.marks.fed.swr[1] == pytest.approx(1.0, abs=1e-6)
        at_feed, hertz = band.grid.impedance_ohm[:, None], band.grid.frequency_hz
        worst = [float(feeding.feed(at_feed, hertz, 1.0, each).swr.max()) for each in range(4)]
        assert band.network == int(np.argmin(worst))
        assert band.grid.fed.swr.max() == pytest.approx(min(worst))


def test_the_sweep_over_the_whole_range_is_told_without_networks() -> None:
    (look,) = appraised(space_of(feeding=Feeding(50.0, matched=True)), Pick(0, 1.0, 20.31))
    bare = standing_wave_ratio(look.sweep.impedance_ohm, 50.0)
    assert look.sweep.fed.swr == pytest.approx(bare)
    assert look.sweep.frequency_hz[0] < 7.0e6 < 21.45e6 < look.sweep.frequency_hz[-1]


def test_with_limits_at_the_transmitter_the_part_served_is_the_part_served_there() -> None:
    line = FEED_LINES["rg-58"]
    at_feed, at_transmitter = (
        appraised(space_of(feeding=Feeding(50.0, line, 30.0, at)), Pick(0, 1.0, 19.7))[0]
        for at in (False, True)
    )
    for one, other in zip(at_feed.bands, at_transmitter.bands, strict=True):
        assert other.served_fraction >= one.served_fraction
        assert other.grid.fed.transmitter_swr == pytest.approx(other.grid.fed.limited_swr)
    assert at_transmitter.bands[0].served_fraction > at_feed.bands[0].served_fraction


def test_the_errors_of_a_look_are_those_of_its_solves_and_its_map() -> None:
    (look,) = appraised(space_of(), Pick(0, 1.0, 20.31))
    assert look.largest_miss < 1e-3
    assert all(band.error_ohm == 0.0 for band in look.bands)


@dataclass
class LowLine(OpenLine):
    """A line whose impedance swings with frequency faster than its length tells of."""

    def solve(self, length_m: FloatArray, frequency_hz: FloatArray) -> Solved:
        plain = OpenLine.solve(self, length_m, frequency_hz).impedance_ohm
        swing = 0.1 * np.sin(2.0 * np.pi * frequency_hz / 2.3e6)
        return Solved(np.asarray(plain * (1.0 + swing)), np.zeros(length_m.shape))


def test_a_map_over_frequency_is_held_to_the_edges_and_centres_of_the_bands() -> None:
    line = LowLine()
    (look,) = appraised(space_of(wires=(WireOffer(line),)), Pick(0, 1.0, 8.0))
    for band in look.bands:
        hertz = band.grid.frequency_hz
        exact = line.solve(np.full(hertz.shape, 8.0), hertz).impedance_ohm
        assert np.max(np.abs(band.grid.impedance_ohm / exact - 1.0)) < 2e-3
    assert look.largest_miss <= 1e-3


def test_a_wire_that_cannot_be_mapped_over_frequency_is_refused() -> None:
    space = space_of()
    maps = scan(space, lambda _part, _step: None).maps[0].maps
    rough = replace(space, wires=(WireOffer(OpenLine(noise=0.02)),))
    with pytest.raises(NotConverged, match="impedance map"):
        appraise(rough, (Pick(0, 1.0, 20.31),), (maps,))


@dataclass
class LimitedLine(OpenLine):
    """An open line that holds no further than its model says, as a solver does."""

    longest_wavelengths: float = 2.0

    def solve(self, length_m: FloatArray, frequency_hz: FloatArray) -> Solved:
        waves = length_m * frequency_hz / C_M_PER_S
        assert np.all(waves <= self.longest_wavelengths * (1.0 + 1e-9))
        return super().solve(length_m, frequency_hz)


def test_wires_looked_at_together_are_each_swept_over_their_own_range() -> None:
    space = space_of(site_longest_m=27.0, wires=(WireOffer(LimitedLine()),))
    together = appraised(space, Pick(0, 1.0, 7.1), Pick(0, 1.0, 20.31))
    for length_m, look in zip((7.1, 20.31), together, strict=True):
        (alone,) = appraised(space, Pick(0, 1.0, length_m))
        assert np.array_equal(look.sweep.frequency_hz, alone.sweep.frequency_hz)
        assert look.sweep.impedance_ohm == pytest.approx(alone.sweep.impedance_ohm, rel=1e-3)


def test_a_wire_is_not_asked_for_more_than_its_model_holds_for_the_sake_of_another() -> None:
    # At 1.05 times 21.45 MHz the longer wire would be 2.03 wavelengths.
    space = space_of(site_longest_m=27.0, wires=(WireOffer(LimitedLine()),))
    short, long = appraised(space, Pick(0, 1.0, 7.1), Pick(0, 1.0, 26.9))
    assert float(short.sweep.frequency_hz[-1]) == pytest.approx(1.05 * 21.45e6)
    assert float(long.sweep.frequency_hz[-1]) == pytest.approx(2.0 * C_M_PER_S / 26.9)
