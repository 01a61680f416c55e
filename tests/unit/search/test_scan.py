"""The scan over lengths, wires and ratios, on open lines known in closed form."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest

from tests.unit.search.open_line import C_M_PER_S, OpenLine, goal, resonant_m, space_of
from worker.engine.errors import NotConverged
from worker.engine.line_catalogue import FEED_LINES
from worker.engine.reflection import standing_wave_ratio
from worker.search import scoring as scoring_module
from worker.search.feeding import Feeding
from worker.search.impedance_map import map_band
from worker.search.ranking import Pick
from worker.search.scan import Scan, cuts_per_m, scan
from worker.search.scoring import merit, score
from worker.search.space import (
    FINEST_STEP,
    ComplexArray,
    FloatArray,
    SearchSpace,
    Solved,
    WireOffer,
)


def scanned(space: SearchSpace) -> Scan:
    return scan(space, lambda _part, _step: None)


def exact_best(space: SearchSpace, wire: int, ratio: float, lengths_m: list[float]) -> float:
    """The length of those that a ranking by the plain criteria would take, solved one by one."""
    model = space.wires[wire].model
    at_m = np.array(lengths_m)
    grids = np.array([band.grid_hz() for band in space.bands])
    hertz, metres = np.meshgrid(grids.ravel(), at_m, indexing="ij")
    impedance = model.solve(metres, hertz).impedance_ohm.reshape(*grids.shape, len(at_m))
    gained = merit(score(impedance, space.bands, space.feeding, ratio), space.bands)
    order = sorted(
        range(len(at_m)),
        key=lambda index: (
            -gained.required_served[index],
            -round(float(gained.weighted_served[index]), 3),
            round(float(gained.swr_worst[index]), 2),
            at_m[index],
        ),
    )
    return float(at_m[order[0]])


# ----------------------------------------------------------------------- reading the maps
@pytest.mark.parametrize("step", [1e-4, 3e-4])
def test_lengths_in_an_even_ratio_are_read_as_any_others(step: float) -> None:
    mapped = map_band(OpenLine(), 21.0e6, 21.45e6, 5.0, 30.0)
    lengths_m = 5.0 * np.exp(step * np.arange(int(np.log(6.0) / step)))
    frequency_hz = np.linspace(21.0e6, 21.45e6, 7)
    quick = mapped.over_even_ratios(lengths_m, frequency_hz)
    exact = mapped.impedance_ohm(lengths_m, frequency_hz)
    assert np.max(np.abs(quick / exact - 1.0)) < 1e-5 * max(1.0, (step / 1e-4) ** 2)


def test_every_frequency_of_a_band_is_shifted_the_right_way() -> None:
    # At equal electrical length the line is the same but for its slow loss.
    mapped = map_band(OpenLine(), 28.0e6, 29.7e6, 4.4, 30.0)
    lengths_m = 4.5 * np.exp(1e-4 * np.arange(17_000))
    edges_hz = np.array([28.0e6, 29.7e6])
    reactance = mapped.over_even_ratios(lengths_m, edges_hz).imag
    for edge_hz, row in zip(edges_hz, reactance, strict=True):
        resonant = lengths_m[np.flatnonzero(np.diff(np.sign(row)) > 0)[0]]
        assert float(resonant) == pytest.approx(resonant_m(1, float(edge_hz)), rel=2e-4)


@pytest.mark.parametrize("chunk", [1, 100, 4097])
def test_scoring_in_pieces_changes_nothing(chunk: int, monkeypatch: pytest.MonkeyPatch) -> None:
    space = space_of(site_longest_m=22.0, ratios=(1.0, 1.5))
    whole = scanned(space)
    if chunk == 1:
        # A piece a length would take minutes; the last piece alone is one here.
        chunk = len(space.lengths_m()) - 1
    monkeypatch.setattr(scoring_module, "_CHUNK_WIRES", chunk)
    pieces = scanned(space)
    assert pieces.contenders == whole.contenders
    assert pieces.closest == whole.closest


@pytest.mark.parametrize(("low_mhz", "high_mhz"), [(7.0, 7.2), (28.0, 29.7), (20.0, 29.0)])
def test_the_part_of_a_band_served_is_that_of_a_dense_sweep(
    low_mhz: float, high_mhz: float
) -> None:
    # The widest band holds a resonance and the anti-resonances about it.
    space = space_of(goal("b", low_mhz, high_mhz, swr_limit=2.5), site_longest_m=25.0)
    found = scanned(space)
    lengths_m = np.linspace(space.shortest_m, space.longest_m, 61)
    read = found.score_at(Pick(0, 1.5, 0.0), lengths_m).served_fraction[0]
    hertz, metres = np.meshgrid(space.bands[0].grid_hz(3001), lengths_m, indexing="ij")
    impedance = OpenLine().solve(metres, hertz).impedance_ohm
    dense = np.mean(standing_wave_ratio(impedance / 1.5, 50.0) <= 2.5, axis=0)
    assert read.max() > 0.1
    assert read == pytest.approx(dense, abs=3e-3)


@pytest.mark.parametrize("length_m", [10.0, 60.0, 150.0])
def test_the_ripples_of_a_long_line_are_followed_where_the_limits_apply(length_m: float) -> None:
    line = FEED_LINES["window-line-450"]
    feeding = Feeding(50.0, line, length_m, at_transmitter=True)
    space = space_of(goal("10m", 28.0, 29.7, swr_limit=3.0), feeding=feeding, site_longest_m=8.0)
    found = scanned(space)
    lengths_m = np.linspace(space.shortest_m, space.longest_m, 41)
    read = found.score_at(Pick(0, 4.0, 0.0), lengths_m).served_fraction[0]
    hertz, metres = np.meshgrid(space.bands[0].grid_hz(2001), lengths_m, indexing="ij")
    fed = feeding.feed(OpenLine().solve(metres, hertz).impedance_ohm, hertz[:, 0], 4.0)
    dense = np.mean(fed.limited_swr <= 3.0, axis=0)
    assert read.max() > 0.05
    assert read == pytest.approx(dense, abs=0.02)


# ------------------------------------------------------------------------- what is found
def test_the_scan_counts_every_length_wire_and_ratio() -> None:
    wires = (WireOffer(OpenLine()), WireOffer(OpenLine(surge_ohm=900.0)))
    space = space_of(wires=wires, ratios=(1.0, 2.0, 4.0))
    assert scanned(space).combinations == 6 * len(space.lengths_m())


def test_the_scan_counts_its_solves() -> None:
    line = OpenLine()
    assert scanned(space_of(wires=(WireOffer(line),))).solves == line.solves


def test_lengths_reach_from_below_the_first_resonance_to_the_site() -> None:
    space = space_of(goal("15m", 21.0, 21.45), site_longest_m=25.0)
    lengths_m = space.lengths_m()
    assert lengths_m[0] == pytest.approx(0.40 * C_M_PER_S / 21.45e6)
    assert lengths_m[-1] == pytest.approx(25.0)
    assert np.all(np.diff(np.log(lengths_m)) <= 1.01 * FINEST_STEP)


def test_no_wire_longer_than_its_model_covers_is_scanned() -> None:
    space = space_of(goal("15m", 21.0, 21.45), site_longest_m=500.0)
    assert space.lengths_m()[-1] <= 6.0 * C_M_PER_S / 21.45e6


def test_contenders_are_sorted_the_best_first() -> None:
    keys = [each.key for each in scanned(space_of()).contenders]
    assert len(keys) > 3
    assert keys == sorted(keys)


@pytest.mark.parametrize(
    "feeding", [Feeding(50.0), Feeding(50.0, matched=True)], ids=["plain", "matched"]
)
def test_the_best_wire_is_the_best_of_all_lengths_tried_one_by_one(feeding: Feeding) -> None:
    space = space_of(goal(), goal("15m", 21.0, 21.45), site_longest_m=22.0, feeding=feeding)
    found = scanned(space)
    best = found.refined(found.contenders[0].pick)
    tried = [round(0.01 * cm, 2) for cm in range(int(100 * space.shortest_m) + 1, 2201)]
    exact = exact_best(space, best.wire, best.ratio, tried)
    # Of lengths alike to the steps of the ranking any will do, but it must be as good.
    assert exact_best(space, best.wire, best.ratio, [best.length_m, exact]) == pytest.approx(
        best.length_m, abs=0.02
    )


def test_the_same_space_gives_the_same_scan_to_the_last_bit() -> None:
    first, again = scanned(space_of()), scanned(space_of())
    assert again.contenders == first.contenders
    assert again.closest == first.closest
    assert again.largest_miss == first.largest_miss


def test_a_priced_wire_carries_its_cost() -> None:
    (first, *_) = scanned(space_of(wires=(WireOffer(OpenLine(), price_per_m=2.5),))).contenders
    assert first.cost == pytest.approx(2.5 * first.pick.length_m)


# ----------------------------------------------------------------------------- closest
def test_the_closest_wire_of_each_band_is_the_closest_of_all() -> None:
    wires = (WireOffer(OpenLine()), WireOffer(OpenLine(surge_ohm=600.0)))
    space = space_of(wires=wires, ratios=(1.0, 2.0))
    found = scanned(space)
    lengths_m = space.lengths_m()
    for band in range(len(space.bands)):
        of_all = [
            float(found.score_at(Pick(wire, ratio, 0.0), lengths_m).swr_worst[band].min())
            for wire in range(2)
            for ratio in space.ratios
        ]
        assert found.closest.swr_worst[band] == pytest.approx(min(of_all), rel=1e-4)
        pick = found.closest.picks[band]
        there = found.score_at(pick, np.array([pick.length_m])).swr_worst[band, 0]
        assert there == pytest.approx(found.closest.swr_worst[band], rel=1e-4)


# ------------------------------------------------------------------------------ refined
@pytest.mark.parametrize(("length_m", "per_m"), [(20.0, 100), (5.0, 100), (4.9, 1000)])
def test_a_wire_is_cut_to_a_centimetre_and_a_short_one_to_a_millimetre(
    length_m: float, per_m: int
) -> None:
    assert cuts_per_m(length_m) == per_m


def test_a_refined_length_can_be_cut_and_fits_the_site() -> None:
    found = scanned(space_of())
    for contender in found.contenders[:20]:
        refined = found.refined(contender.pick)
        per_m = cuts_per_m(refined.length_m)
        assert refined.length_m == round(refined.length_m * per_m) / per_m
        assert found.space.shortest_m <= refined.length_m <= found.space.longest_m
        assert (refined.wire, refined.ratio) == (contender.pick.wire, contender.pick.ratio)


def test_cutting_to_a_centimetre_never_cuts_beyond_the_edge_of_a_band_s_service() -> None:
    # The wire serves the more of the wished band the longer it is, until it is too long for
    # the required one: the best lies at the very edge, and the nearest centimetre beyond it.
    lost: list[float] = []
    wished = goal("wished", 26.3, 27.6, required=False, swr_limit=30.0)
    for limit in np.linspace(1.7, 2.6, 19):
        space = space_of(
            goal("10m", 28.0, 28.6, swr_limit=float(limit)),
            wished,
            site_longest_m=8.0,
            ratios=(1.0,),
        )
        found = scanned(space)
        top = found.contenders[0]
        refined = found.refined(top.pick)
        served = merit(found.score_at(refined, np.array([refined.length_m])), space.bands)
        if int(served.required_served[0]) < top.required_served:
            lost.append(float(limit))
    assert not lost


def test_progress_is_told_often_and_rises() -> None:
    told: list[float] = []
    scan(space_of(), lambda part, _step: told.append(part))
    assert len(told) >= 5
    assert told == sorted(told)
    assert 0.0 <= told[0] <= told[-1] <= 1.0


class Stopped(Exception):
    pass


def test_what_the_progress_callback_raises_ends_the_scan() -> None:
    line = OpenLine()

    def stop(part: float, _step: str) -> None:
        if part > 0.2:
            raise Stopped

    with pytest.raises(Stopped):
        scan(space_of(wires=(WireOffer(line),)), stop)
    assert line.solves < scanned(space_of()).solves


# --------------------------------------------------------------------- maps held to solves
@dataclass
class RippledLine(OpenLine):
    """An open line whose impedance swings with frequency, as over ground with height."""

    swings_per_mhz: float = 0.0

    def solve(self, length_m: FloatArray, frequency_hz: FloatArray) -> Solved:
        plain = OpenLine.solve(self, length_m, frequency_hz).impedance_ohm
        swing = 0.1 * np.sin(2e-6 * np.pi * self.swings_per_mhz * frequency_hz)
        return Solved(np.asarray(plain * (1.0 + swing)), np.zeros(length_m.shape))


def largest_error(found: Scan) -> float:
    """Largest departure of any map from its wire, over lengths and frequencies, relative."""
    lengths_m = np.linspace(found.space.shortest_m, found.space.longest_m, 301)
    errors: list[float] = []
    for offer, maps in zip(found.space.wires, found.maps, strict=True):
        for band, band_map in zip(found.space.bands, maps.maps, strict=True):
            hertz, metres = np.meshgrid(band.grid_hz(23), lengths_m, indexing="ij")
            exact = offer.model.solve(metres, hertz).impedance_ohm
            read = band_map.impedance_ohm(lengths_m, band.grid_hz(23))
            errors.append(float(np.max(np.abs(read / exact - 1.0))))
    return max(errors)


@pytest.mark.parametrize("swings_per_mhz", [0.0, 0.1, 0.3])
@pytest.mark.parametrize(("low_mhz", "high_mhz"), [(7.0, 7.1), (28.0, 29.7), (20.0, 30.0)])
def test_a_band_of_any_width_is_mapped_to_the_tolerance(
    low_mhz: float, high_mhz: float, swings_per_mhz: float
) -> None:
    line = RippledLine(swings_per_mhz=swings_per_mhz)
    space = space_of(goal("b", low_mhz, high_mhz), wires=(WireOffer(line),))
    found = scanned(space)
    assert found.largest_miss <= 1e-3
    assert largest_error(found) < 5e-3


def rough_unless_careful(
    length_m_hz: FloatArray, frequency_hz: FloatArray, careful: bool
) -> ComplexArray:
    line = OpenLine(noise=0.0 if careful else 0.02)
    length_m = length_m_hz / frequency_hz[:, None]
    at_hz = np.broadcast_to(frequency_hz[:, None], length_m.shape)
    return line.solve(length_m, at_hz).impedance_ohm[None]


def test_where_a_survey_is_too_rough_wires_are_solved_with_care() -> None:
    careful = scanned(replace(space_of(), survey=rough_unless_careful))
    assert largest_error(careful) < 1e-3
    assert careful.contenders == scanned(space_of()).contenders


def test_a_survey_that_disagrees_with_the_solver_is_found_out() -> None:
    # Smooth, and so mapped without complaint, but another wire than the one to be planned.
    def other(length_m_hz: FloatArray, frequency_hz: FloatArray, _careful: bool) -> ComplexArray:
        return 1.01 * rough_unless_careful(length_m_hz, frequency_hz, True)

    with pytest.raises(NotConverged, match="impedance map on"):
        scanned(replace(space_of(), survey=other))


def test_a_wire_that_cannot_be_mapped_is_refused_and_not_planned_on() -> None:
    with pytest.raises(NotConverged, match="impedance map"):
        scanned(space_of(wires=(WireOffer(OpenLine(noise=0.02)),)))
