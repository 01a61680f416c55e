"""The front of all criteria and the gains of another length, by their plain definitions."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest

from tests.unit.search.open_line import OpenLine, goal, resonant_m, space_of
from worker.search.ranking import Contender, Pick
from worker.search.scan import Scan, scan
from worker.search.scoring import FULLY_SERVED
from worker.search.space import SearchSpace, WireOffer
from worker.search.trade_off import REACH, front_of, gains_of

Six = tuple[float, float, float, float, float, float]


def contender(
    required: int, width: float, swr: float, loss_db: float, length_m: float, cost: float
) -> Contender:
    return Contender(
        key=(0.0,),
        kind=((1, 2),),
        pick=Pick(0, 1.0, length_m),
        served=(width,),
        required_served=required,
        weighted_served=width,
        swr_worst=swr,
        loss_db=loss_db,
        cost=cost,
    )


def criteria(each: Contender) -> Six:
    """What is better when smaller."""
    return (
        -float(each.required_served),
        -each.weighted_served,
        each.swr_worst,
        each.loss_db,
        each.pick.length_m,
        each.cost,
    )


def beaten(each: Contender, by: Contender) -> bool:
    """Whether another is nowhere worse and somewhere better."""
    pairs = list(zip(criteria(by), criteria(each), strict=True))
    return all(one <= other for one, other in pairs) and any(one < other for one, other in pairs)


def random_contenders(seed: int, count: int) -> tuple[Contender, ...]:
    rng = np.random.default_rng(seed)
    return tuple(
        contender(
            int(rng.integers(0, 3)),
            float(rng.choice([0.0, 0.25, 0.5, 1.0])),
            float(rng.choice([1.2, 1.5, 2.0])),
            float(rng.choice([0.5, 1.0])),
            float(rng.choice([10.0, 20.0, 30.0])),
            float(rng.choice([5.0, 8.0])),
        )
        for _ in range(count)
    )


# --------------------------------------------------------------------------- the front
@pytest.mark.parametrize("seed", range(20))
def test_the_front_is_what_no_other_beats_and_each_of_it_once(seed: int) -> None:
    given = random_contenders(seed, 60)
    serving = [each for each in given if each.weighted_served > 0.0]
    kept = [each for each in serving if not any(beaten(each, other) for other in serving)]
    # Of equals the first stays.
    once = [
        each
        for index, each in enumerate(kept)
        if criteria(each) not in {criteria(before) for before in kept[:index]}
    ]
    front = front_of(given, 100)
    assert [id(each) for each in front] == [id(each) for each in once]


def test_each_criterion_alone_keeps_a_wire_on_the_front() -> None:
    usual: Six = (1, 0.5, 2.0, 1.0, 20.0, 8.0)
    better: Six = (2, 0.6, 1.5, 0.5, 19.0, 7.0)
    base = contender(1, *usual[1:])
    for place in range(6):
        changed = [better[place] if index == place else usual[index] for index in range(6)]
        # Better in one and worse in the next.
        after = (place + 1) % 6
        worse: Six = (0, 0.4, 2.5, 1.5, 21.0, 9.0)
        changed[after] = worse[after]
        other = contender(int(changed[0]), *changed[1:])
        assert front_of((base, other), 9) == (base, other), place


def test_differences_too_small_to_build_do_not_fill_the_front() -> None:
    given = tuple(
        contender(1, 0.5 + 1e-5 * index, 1.5 - 1e-4 * index, 1.0, 20.0 + 1e-3 * index, 8.0)
        for index in range(5)
    )
    assert front_of(given, 9) == given[:1]


def test_a_wire_that_serves_nothing_is_not_on_the_front() -> None:
    idle = contender(0, 0.0, 1.1, 0.0, 5.0, 1.0)
    useful = contender(1, 0.5, 2.0, 1.0, 20.0, 8.0)
    assert front_of((idle, useful), 9) == (useful,)
    assert front_of((idle,), 9) == ()
    assert front_of((), 9) == ()


def test_no_more_of_the_front_is_told_than_asked_for() -> None:
    given = tuple(
        contender(1, 0.1 * index, 1.0 + 0.1 * index, 1.0, 20.0, 8.0) for index in range(1, 8)
    )
    assert front_of(given, 3) == given[:3]


# --------------------------------------------------------------------------- the gains
def scanned(space: SearchSpace) -> Scan:
    return scan(space, lambda _part, _step: None)


def far_bands() -> SearchSpace:
    """40m where the line is a half wave of 20.0 m, 15m where it is three of 20.5 m."""
    first_mhz = 7.1 * resonant_m(1, 7.1e6) / 20.0
    third_mhz = 21.2 * resonant_m(3, 21.2e6) / 20.5
    return space_of(
        goal("40m", first_mhz - 0.05, first_mhz + 0.05, swr_limit=1.9),
        goal("15m", third_mhz - 0.05, third_mhz + 0.05, swr_limit=1.9),
        ratios=(1.5,),
        wires=(WireOffer(OpenLine()),),
        site_longest_m=23.0,
    )


def test_a_wire_longer_by_what_the_line_asks_gains_a_band_and_loses_the_other() -> None:
    found = scanned(far_bands())
    pick = Pick(0, 1.5, 20.0)
    now = found.score_at(pick, np.array([20.0, 20.5])).served_fraction
    assert (now[0, 0] >= FULLY_SERVED, now[1, 0] >= FULLY_SERVED) == (True, False)
    assert now[1, 1] >= FULLY_SERVED
    (gain,) = gains_of(found, pick)
    assert gain.serves.name == "15m"
    assert gain.fraction >= FULLY_SERVED
    assert 0.0 < gain.by_m < 0.5
    # No shorter step would do, and the next one does.
    step_m = 2.0 * REACH * 20.0 / 400.0
    around = found.score_at(pick, 20.0 + gain.by_m + step_m * np.array([-1.0, 0.0]))
    assert around.served_fraction[1, 0] < FULLY_SERVED <= around.served_fraction[1, 1]
    lost = found.score_at(pick, np.array([20.0 + gain.by_m])).served_fraction[0, 0] < FULLY_SERVED
    assert [each.name for each in gain.loses] == (["40m"] if lost else [])


@pytest.mark.parametrize("length_m", [19.2, 19.6, 20.0, 20.25, 20.5, 20.9])
def test_every_gain_holds_when_the_wire_is_solved_at_that_length(length_m: float) -> None:
    space = far_bands()
    found = scanned(space)
    pick = Pick(0, 1.5, length_m)
    now = found.score_at(pick, np.array([length_m])).served_fraction[:, 0]
    for gain in gains_of(found, pick):
        there = found.score_at(pick, np.array([length_m + gain.by_m])).served_fraction[:, 0]
        index = [band.name for band in space.bands].index(gain.serves.name)
        assert there[index] == pytest.approx(gain.fraction, abs=1e-9)
        assert there[index] > now[index] + 0.05
        for place, band in enumerate(space.bands):
            loses = now[place] >= FULLY_SERVED > there[place]
            assert (band in gain.loses) == loses


def test_the_step_to_a_shorter_wire_is_the_least_that_will_do() -> None:
    found = scanned(far_bands())
    pick = Pick(0, 1.5, 20.5)
    (gain,) = gains_of(found, pick)
    assert (gain.serves.name, gain.by_m < 0.0) == ("40m", True)
    step_m = 2.0 * REACH * 20.5 / 400.0
    around = found.score_at(pick, 20.5 + gain.by_m + step_m * np.array([0.0, 1.0]))
    assert around.served_fraction[0, 0] >= FULLY_SERVED > around.served_fraction[0, 1]


def test_bands_served_whole_have_nothing_to_gain() -> None:
    space = space_of(goal("40m", 7.05, 7.15, swr_limit=3.0), site_longest_m=23.0)
    assert gains_of(scanned(space), Pick(0, 1.0, resonant_m(1, 7.1e6))) == ()


def test_gains_keep_within_the_site() -> None:
    first_mhz = 7.1 * resonant_m(1, 7.1e6) / 20.5
    space = space_of(
        goal("40m", first_mhz - 0.1, first_mhz + 0.1, swr_limit=1.9),
        ratios=(1.5,),
        site_longest_m=20.1,
    )
    # All of the band would be had at 20.5 m, and the site ends at 20.1 m.
    (gain,) = gains_of(scanned(space), Pick(0, 1.5, 19.9))
    assert 0.0 < gain.fraction < 1.0
    assert 19.9 + gain.by_m == pytest.approx(20.1)


def test_each_band_is_told_once() -> None:
    found = scanned(far_bands())
    for length_m, ratio in product((19.0, 20.25, 21.0), (1.5,)):
        names = [gain.serves.name for gain in gains_of(found, Pick(0, ratio, length_m))]
        assert len(names) == len(set(names))
