"""What lies between wire and transmitter: transformer, network and line, in that order.

Networks are held against the textbook's worked example, the quality-factor rule and the
engine's own exact networks, which are found another way; the line against the engine's.
"""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest

from worker.engine.feed_line import terminate
from worker.engine.line_catalogue import FEED_LINES
from worker.engine.matching import Component, Form, Kind, LNetwork, l_networks
from worker.engine.reflection import LARGEST_STANDING_WAVE_RATIO, standing_wave_ratio
from worker.search.feeding import (
    NETWORKS,
    ComplexArray,
    Feeding,
    FloatArray,
    network_values,
    reflected_of,
)
from worker.search.scoring import score
from worker.search.space import BandGoal

BAND_HZ = np.linspace(7.0e6, 7.3e6, 7)
CENTRE_HZ = 7.15e6
LOADS_OHM = (200 - 100j, 10 + 25j, 4000 - 2500j, 12 - 960j, 105 + 45j, 30 + 3j, 49.9 - 300j)


def over_band(centre_ohm: complex) -> ComplexArray:
    """A load that drifts over the band as a wire's does near resonance; shape (7, 1)."""
    relative = BAND_HZ / CENTRE_HZ - 1.0
    return np.asarray(centre_ohm + (20.0 * relative + 900j * relative))[:, None]


def reactance(component: Component, relative: FloatArray) -> FloatArray:
    """Reactance over frequency, relative to that where the network matches."""
    if component.kind is Kind.INDUCTOR:
        return component.reactance_ohm * relative
    return component.reactance_ohm / relative


def through(network: LNetwork, load_ohm: ComplexArray) -> ComplexArray:
    """A load seen through a network of the engine, by circuit arithmetic."""
    relative = BAND_HZ / CENTRE_HZ
    series = 1j * reactance(network.series, relative)
    # A part that is not there is nothing in series, or nothing across.
    present = network.shunt.kind is not Kind.NONE
    shunt = 1.0 / (1j * reactance(network.shunt, relative)) if present else 0.0 * relative
    if network.form is Form.SHUNT_AT_LOAD:
        return np.asarray(series + 1.0 / (1.0 / load_ohm[:, 0] + shunt))
    return np.asarray(1.0 / (1.0 / (load_ohm[:, 0] + series) + shunt))


# ------------------------------------------------------------------------ the network
def test_the_textbook_example_gives_its_two_networks() -> None:
    # Pozar, "Microwave Engineering", example 5.1, from memory: 200 - j100 ohm to 100 ohm,
    # normalised b = 0.29, x = 1.22 and b = -0.69, x = -1.22, as rounded there.
    load = np.array([200 - 100j])
    values = [network_values(load, 100.0, shunt_at_load=True, sign=sign) for sign in (1.0, -1.0)]
    assert [round(float(series[0]) / 100.0, 2) for series, _ in values] == [1.22, -1.22]
    assert [round(float(shunt[0]) * 100.0, 2) for _, shunt in values] == [0.29, -0.69]


def test_a_pure_resistance_is_matched_by_the_quality_factor_rule() -> None:
    # Common practice: Q = sqrt(R_high / R_low - 1), X_series = Q R_low, X_shunt = R_high / Q.
    q = sqrt(450 / 50 - 1)
    step_down = network_values(np.array([450 + 0j]), 50.0, shunt_at_load=True, sign=1.0)
    step_up = network_values(np.array([50 + 0j]), 450.0, shunt_at_load=False, sign=1.0)
    for series, shunt in (step_down, step_up):
        assert abs(float(series[0])) == pytest.approx(50.0 * q, rel=1e-12)
        assert 1.0 / abs(float(shunt[0])) == pytest.approx(450.0 / q, rel=1e-12)


@pytest.mark.parametrize("load_ohm", LOADS_OHM)
def test_the_four_forms_are_the_engine_s_networks_and_no_others(load_ohm: complex) -> None:
    found: list[tuple[Form, float, float]] = []
    for shunt_at_load, sign in NETWORKS:
        series, shunt = network_values(
            np.array([load_ohm]), 50.0, shunt_at_load=shunt_at_load, sign=sign
        )
        if np.isfinite(series[0]) and np.isfinite(shunt[0]):
            form = Form.SHUNT_AT_LOAD if shunt_at_load else Form.SERIES_AT_LOAD
            found.append((form, float(series[0]), -1.0 / float(shunt[0])))
    expected = [
        (each.form, each.series.reactance_ohm, each.shunt.reactance_ohm)
        for each in l_networks(load_ohm, 50.0, CENTRE_HZ, 100.0)
    ]
    assert len(found) == len(expected)
    for mine, engines in zip(sorted(found), sorted(expected), strict=True):
        assert mine[0] is engines[0]
        assert mine[1:] == pytest.approx(engines[1:], rel=1e-9)


@pytest.mark.parametrize("load_ohm", LOADS_OHM)
def test_every_form_that_matches_matches_at_the_centre(load_ohm: complex) -> None:
    feeding = Feeding(50.0, matched=True)
    matched = 0
    for network in range(len(NETWORKS)):
        swr = feeding.feed(over_band(load_ohm), BAND_HZ, 1.0, network).swr[:, 0]
        matched += bool(swr[3] == pytest.approx(1.0, abs=1e-9))
        assert swr[3] == pytest.approx(1.0, abs=1e-9) or swr[3] > 1e5
    assert matched == len(l_networks(load_ohm, 50.0, CENTRE_HZ, 100.0))


@pytest.mark.parametrize("load_ohm", LOADS_OHM)
def test_the_best_network_is_the_best_of_the_engine_s_over_the_band(load_ohm: complex) -> None:
    drifting = over_band(load_ohm)
    lowest = min(
        float(np.max(standing_wave_ratio(through(each, drifting), 50.0)))
        for each in l_networks(load_ohm, 50.0, CENTRE_HZ, 100.0)
    )
    fed = Feeding(50.0, matched=True).feed(drifting, BAND_HZ, 1.0)
    assert float(fed.swr.max()) == pytest.approx(lowest, rel=1e-9)


def test_each_wire_of_a_batch_gets_a_network_of_its_own() -> None:
    feeding = Feeding(50.0, matched=True)
    batch = np.hstack([over_band(load) for load in LOADS_OHM])
    together = feeding.feed(batch, BAND_HZ, 1.0).swr
    alone = np.hstack([feeding.feed(over_band(load), BAND_HZ, 1.0).swr for load in LOADS_OHM])
    assert together == pytest.approx(alone, rel=1e-12)
    assert len(set(feeding.best_network(batch, BAND_HZ)[0].tolist())) > 1


def test_a_network_chosen_by_number_is_the_one_used() -> None:
    feeding = Feeding(50.0, matched=True)
    drifting = over_band(105 + 45j)
    which, through_ohm = feeding.best_network(drifting, BAND_HZ)
    chosen = feeding.feed(drifting, BAND_HZ, 1.0, int(which[0])).behind_ohm
    assert chosen == pytest.approx(through_ohm)
    other = feeding.feed(drifting, BAND_HZ, 1.0, (int(which[0]) + 1) % 4).behind_ohm
    assert not np.allclose(other, through_ohm)


def test_a_load_that_is_the_reference_already_is_not_made_worse() -> None:
    fed = Feeding(50.0, matched=True).feed(np.full((7, 1), 50.0 + 0j), BAND_HZ, 1.0)
    assert fed.swr == pytest.approx(np.ones((7, 1)), abs=1e-9)


def test_a_load_that_one_part_matches_is_matched_by_one_part() -> None:
    # 1/(10 + 20j) is 20 - 40j mS: a capacitor of 40 mS across it leaves 50 ohm.
    series, shunt = network_values(np.array([10 + 20j]), 50.0, shunt_at_load=True, sign=1.0)
    assert float(shunt[0]) == pytest.approx(0.04, rel=1e-12)
    assert float(series[0]) == pytest.approx(0.0, abs=1e-9)


def test_a_real_load_above_the_reference_is_matched_on_its_antenna_side() -> None:
    which, _ = Feeding(50.0, matched=True).best_network(np.full((7, 1), 450.0 + 0j), BAND_HZ)
    assert NETWORKS[int(which[0])][0]


# ------------------------------------------------------------------ transformer and line
def test_the_transformer_comes_before_the_network() -> None:
    feeding = Feeding(50.0, matched=True)
    through_four = feeding.feed(4.0 * over_band(105 + 45j), BAND_HZ, 4.0).swr
    assert through_four == pytest.approx(feeding.feed(over_band(105 + 45j), BAND_HZ, 1.0).swr)


def test_without_a_line_nothing_is_said_of_the_transmitter() -> None:
    fed = Feeding(50.0).feed(over_band(70 + 5j), BAND_HZ, 1.0)
    assert fed.transmitter_swr is None
    assert fed.line_loss_db is None
    assert fed.limited_swr == pytest.approx(standing_wave_ratio(over_band(70 + 5j), 50.0))


@pytest.mark.parametrize("name", ["rg-58", "rg-213", "window-line-450"])
@pytest.mark.parametrize("load_ohm", [72 + 0j, 30 - 80j, 4000 - 2500j])
def test_the_far_end_of_the_line_is_where_the_engine_s_line_puts_it(
    name: str, load_ohm: complex
) -> None:
    line, load = FEED_LINES[name], over_band(load_ohm)
    fed = Feeding(50.0, line, 27.0).feed(load, BAND_HZ, 2.0)
    assert fed.transmitter_swr is not None
    assert fed.line_loss_db is not None
    for index, frequency_hz in enumerate(BAND_HZ):
        state = terminate(line, 27.0, frequency_hz, complex(load[index, 0]) / 2.0)
        far = standing_wave_ratio(state.input_impedance_ohm, 50.0)
        assert fed.transmitter_swr[index, 0] == pytest.approx(float(far), rel=1e-12)
        assert fed.line_loss_db[index, 0] == pytest.approx(float(state.total_loss_db), rel=1e-12)


def test_limits_apply_where_the_planner_says() -> None:
    line, load = FEED_LINES["rg-58"], over_band(30 - 80j)
    at_feed = Feeding(50.0, line, 27.0).feed(load, BAND_HZ, 1.0)
    at_transmitter = Feeding(50.0, line, 27.0, at_transmitter=True).feed(load, BAND_HZ, 1.0)
    assert at_feed.limited_swr == pytest.approx(at_feed.swr)
    assert at_transmitter.transmitter_swr is not None
    assert at_transmitter.limited_swr == pytest.approx(at_transmitter.transmitter_swr)
    # A lossy line of the reference's own impedance hides a part of the mismatch.
    assert np.all(at_transmitter.limited_swr < at_feed.limited_swr)


def test_a_lossy_line_lowers_the_swr_by_the_textbook_factor() -> None:
    # |Γ| falls by the matched loss twice over (Pozar, sec. 2.7); the line's Z0 is not quite
    # real, hence the tolerance.
    line = FEED_LINES["rg-58"]
    feeding = Feeding(line.nominal_impedance_ohm, line, 27.0)
    fed = feeding.feed(np.full((7, 1), 150.0 + 0j), BAND_HZ, 1.0)
    matched_db = 27.0 * np.sum(line.attenuation.terms_db_per_m(BAND_HZ), axis=0)
    reflection = 0.5 * 10.0 ** (-2.0 * matched_db / 20.0)
    assert fed.transmitter_swr is not None
    expected = (1.0 + reflection) / (1.0 - reflection)
    assert fed.transmitter_swr[:, 0] == pytest.approx(expected, rel=0.02)


def test_the_best_network_is_the_one_whose_limits_apply_at_the_transmitter() -> None:
    # Behind a long line of another impedance the best at the feed point is not the best there.
    line = FEED_LINES["window-line-450"]
    differ = 0
    for load_ohm in LOADS_OHM:
        feeding = Feeding(50.0, line, 31.0, at_transmitter=True, matched=True)
        chosen = feeding.feed(over_band(load_ohm), BAND_HZ, 1.0).limited_swr.max()
        each = [
            feeding.feed(over_band(load_ohm), BAND_HZ, 1.0, network).limited_swr.max()
            for network in range(len(NETWORKS))
        ]
        assert chosen == pytest.approx(min(each), rel=1e-12)
        at_feed = Feeding(50.0, matched=True).best_network(over_band(load_ohm), BAND_HZ)[0][0]
        differ += each[int(at_feed)] > 1.001 * min(each)
    assert differ > 0


# --------------------------------------------------------------- what the scan makes of it
@pytest.mark.parametrize(
    "feeding",
    [
        Feeding(50.0),
        Feeding(50.0, matched=True),
        Feeding(50.0, FEED_LINES["rg-213"], 20.0),
        Feeding(50.0, FEED_LINES["rg-213"], 20.0, at_transmitter=True),
        Feeding(50.0, FEED_LINES["window-line-450"], 20.0, at_transmitter=True, matched=True),
    ],
)
def test_the_scan_scores_what_arrives_where_the_limits_apply(feeding: Feeding) -> None:
    goals = (BandGoal("40m", 7.0e6, 7.3e6, required=True, weight=1.0, swr_limit=2.0),)
    batch = np.hstack([over_band(load) for load in LOADS_OHM])
    scored = score(batch[None], goals, feeding, 2.0)
    fed = feeding.feed(batch, BAND_HZ, 2.0)
    # Reflected power is what is scored, in single precision: seven digits of the whole.
    expected = reflected_of(fed.limited_swr.max(axis=0))
    assert reflected_of(scored.swr_worst[0]) == pytest.approx(expected, abs=2e-7)
    if fed.line_loss_db is not None:
        assert scored.loss_db[0] == pytest.approx(fed.line_loss_db[3], rel=1e-9)


def test_total_reflection_is_told_as_the_largest_ratio_there_is() -> None:
    goals = (BandGoal("40m", 7.0e6, 7.3e6, required=True, weight=1.0, swr_limit=2.0),)
    scored = score(np.full((1, 7, 1), 1e-9 - 1e5j), goals, Feeding(50.0), 1.0)
    assert scored.swr_worst[0, 0] == pytest.approx(LARGEST_STANDING_WAVE_RATIO, rel=1e-6)
    assert scored.served_fraction[0, 0] == 0.0
