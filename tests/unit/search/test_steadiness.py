"""How wires hold up under departures, on open lines known in closed form."""

from __future__ import annotations

import numpy as np
import pytest

from tests.unit.search.open_line import OpenLine, goal, resonant_m, space_of
from worker.engine.reflection import standing_wave_ratio
from worker.search.feeding import Feeding
from worker.search.ranking import Pick
from worker.search.space import FloatArray
from worker.search.steadiness import Departed, Departure, hold

LINE = OpenLine()
#: In resonance at the centre of 40m, and in its third resonance near 15m.
PICK = Pick(0, 1.0, resonant_m(1, 7.1e6))
LONGER = Departure("2 % longer", LINE, 1.02)
SHORTER = Departure("2 % shorter", LINE, 0.98)
OTHER = Departure("another wire", OpenLine(surge_ohm=700.0))


def swr_of(line: OpenLine, length_m: float, frequency_hz: FloatArray) -> FloatArray:
    impedance = line.solve(np.full(frequency_hz.shape, length_m), frequency_hz).impedance_ohm
    return np.asarray(standing_wave_ratio(impedance, 50.0))


@pytest.mark.parametrize("departure", [LONGER, SHORTER, OTHER])
def test_a_departure_is_judged_by_direct_solves_of_the_wire_as_it_then_is(
    departure: Departure,
) -> None:
    space = space_of()
    held = hold(space, PICK, (departure,))
    model = departure.model
    assert isinstance(model, OpenLine)
    for index, band in enumerate(space.bands):
        dense = swr_of(model, PICK.length_m * departure.length_ratio, band.grid_hz(2001))
        scored = held.departed[0].scored
        assert scored.swr_worst[index, 0] == pytest.approx(dense.max(), rel=1e-3)
        assert scored.served_fraction[index, 0] == pytest.approx(np.mean(dense <= 2.0), abs=2e-3)


@pytest.mark.parametrize(("low_mhz", "high_mhz"), [(5.6, 8.2), (20.0, 29.0)])
def test_a_departure_on_a_wide_band_is_judged_as_closely(low_mhz: float, high_mhz: float) -> None:
    # The upper band holds the third resonance and the anti-resonance above it.
    space = space_of(goal("wide", low_mhz, high_mhz, swr_limit=3.0))
    held = hold(space, PICK, (LONGER,))
    dense = swr_of(LINE, 1.02 * PICK.length_m, space.bands[0].grid_hz(4001))
    assert held.departed[0].scored.served_fraction[0, 0] == pytest.approx(
        np.mean(dense <= 3.0), abs=5e-3
    )


def test_no_departure_from_the_plan_is_the_plan() -> None:
    held = hold(space_of(), PICK, (Departure("as planned", LINE),))
    assert held.worst.merit.required_served[0] == 1
    assert held.worst.scored.swr_worst[0, 0] == pytest.approx(
        swr_of(LINE, PICK.length_m, np.array([7.0e6, 7.2e6])).max(), rel=1e-3
    )


def test_the_worst_departure_is_the_one_that_loses_a_required_band() -> None:
    # 3 % away from resonance this line leaves an SWR of 2 on 40m, whichever way it goes.
    away = Departure("5 % longer", LINE, 1.05)
    held = hold(space_of(goal()), PICK, (LONGER, away, SHORTER))
    assert held.worst.what == "5 % longer"
    assert held.worst.merit.required_served[0] == 0


def test_departures_sort_by_required_bands_then_width_then_swr() -> None:
    space = space_of(goal(), goal("wished", 7.3, 7.5, required=False))
    longer, shorter, away = (
        hold(space, PICK, (each,)).worst
        for each in (LONGER, SHORTER, Departure("5 % longer", LINE, 1.05))
    )
    order = sorted([away, longer, shorter], key=Departed.key)
    merits = [(each.merit.required_served[0], each.merit.weighted_served[0]) for each in order]
    assert merits == sorted(merits, reverse=True)
    assert order[-1].what == "5 % longer"


def test_the_largest_swr_is_that_of_the_bands_served_as_planned() -> None:
    space = space_of()
    held = hold(space, PICK, (LONGER, SHORTER))
    of_40m = max(float(each.scored.swr_worst[0, 0]) for each in held.departed)
    of_15m = max(float(each.scored.swr_worst[1, 0]) for each in held.departed)
    assert held.swr_of_served(np.array([1.0, 0.0])) == pytest.approx(of_40m)
    assert held.swr_of_served(np.array([1.0, 1.0])) == pytest.approx(max(of_40m, of_15m))
    # With none served as planned, the nearest miss of all.
    least = min(float(each.scored.swr_worst.min()) for each in held.departed)
    assert held.swr_of_served(np.array([0.9, 0.0])) == pytest.approx(least)


def test_a_band_not_served_as_planned_is_not_solved_again_and_counts_as_unserved() -> None:
    space = space_of()
    line = OpenLine()
    both = hold(space, PICK, (Departure("longer", line, 1.02),))
    solves = line.solves
    one = hold(space, PICK, (Departure("longer", line, 1.02),), np.array([1.0, 0.0]))
    assert one.solves == line.solves - solves == both.solves // 2
    assert one.worst.scored.served_fraction[1, 0] == 0.0
    assert one.worst.scored.swr_worst[0, 0] == both.worst.scored.swr_worst[0, 0]


def test_with_no_band_served_nothing_is_solved() -> None:
    line = OpenLine()
    held = hold(space_of(), PICK, (Departure("longer", line, 1.02),), np.zeros(2))
    assert held.solves == line.solves == 0
    assert held.worst.merit.weighted_served[0] == 0.0


def test_a_word_of_progress_comes_before_every_departure() -> None:
    told: list[int] = []
    line = OpenLine()
    departures = (Departure("a", line, 1.01), Departure("b", line, 0.99))
    hold(space_of(), PICK, departures, None, lambda: told.append(line.solves))
    assert told[0] == 0
    assert 0 < told[1] < line.solves


def test_departures_are_judged_where_the_limits_apply_and_through_the_transformer() -> None:
    space = space_of(goal(), ratios=(2.0,), feeding=Feeding(25.0))
    # Twice the ratio against half the reference is the same match.
    halved = hold(space, Pick(0, 2.0, PICK.length_m), (LONGER,))
    plain = hold(space_of(goal()), PICK, (LONGER,))
    assert halved.worst.scored.swr_worst == pytest.approx(plain.worst.scored.swr_worst)
