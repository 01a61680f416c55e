"""Transformers and L-networks against a textbook example, scikit-rf and circuit arithmetic."""

from __future__ import annotations

from math import inf, pi, sqrt

import numpy as np
import pytest
import skrf
from scipy.optimize import fsolve

from worker.engine.errors import OutOfRange
from worker.engine.matching import Component, Form, Kind, LNetwork, Transformer, l_networks


def test_the_textbook_example_gives_its_two_networks() -> None:
    # Pozar, "Microwave Engineering", example 5.1, from memory: 200 - j100 ohm to 100 ohm at
    # 500 MHz; L = 38.8 nH with C = 0.92 pF, and C = 2.61 pF with L = 46.1 nH, worked from
    # reactances rounded to 1.22, 0.29 and 0.69, hence good to 0.5 %.
    networks = l_networks(200 - 100j, 100.0, 500e6, 100.0)
    assert [network.form for network in networks] == [Form.SHUNT_AT_LOAD] * 2
    by_series = {network.series.kind: network for network in networks}
    low_pass, high_pass = by_series[Kind.INDUCTOR], by_series[Kind.CAPACITOR]
    assert low_pass.series.value == pytest.approx(38.8e-9, rel=5e-3)
    assert low_pass.shunt.kind is Kind.CAPACITOR
    assert low_pass.shunt.value == pytest.approx(0.92e-12, rel=5e-3)
    assert high_pass.series.value == pytest.approx(2.61e-12, rel=5e-3)
    assert high_pass.shunt.kind is Kind.INDUCTOR
    assert high_pass.shunt.value == pytest.approx(46.1e-9, rel=5e-3)


def test_a_pure_resistance_is_matched_by_the_quality_factor_rule() -> None:
    # Common practice: Q = sqrt(R_high / R_low - 1), X_series = Q R_low, X_shunt = R_high / Q.
    q = sqrt(450 / 50 - 1)
    networks = l_networks(450.0, 50.0, 7e6, 100.0)
    assert len(networks) == 2
    for network in networks:
        assert network.form is Form.SHUNT_AT_LOAD
        assert abs(network.series.reactance_ohm) == pytest.approx(q * 50, rel=1e-12)
        assert abs(network.shunt.reactance_ohm) == pytest.approx(450 / q, rel=1e-12)


def test_component_stress_of_a_pure_resistance_follows_from_power() -> None:
    for network in l_networks(450.0, 50.0, 7e6, 100.0):
        # 100 W in 450 ohm is 300 V peak; in 50 ohm it is sqrt(2) A.
        assert network.shunt.voltage_peak_v == pytest.approx(300.0, rel=1e-9)
        assert network.series.current_rms_a == pytest.approx(sqrt(2.0), rel=1e-9)
        assert network.series.voltage_peak_v == pytest.approx(
            2.0 * abs(network.series.reactance_ohm), rel=1e-9
        )
        assert network.shunt.current_rms_a == pytest.approx(
            300.0 / sqrt(2) / abs(network.shunt.reactance_ohm), rel=1e-9
        )


@pytest.mark.parametrize(
    "load", [200 - 100j, 10 + 20j, 4000 - 2500j, 12 - 960j, 105 + 45j, 30 + 0.0j, 49.9 - 300j]
)
def test_scikit_rf_sees_a_match_through_every_network(load: complex) -> None:
    hertz = 7.1e6
    band = skrf.Frequency(hertz, hertz, 1, unit="Hz")
    media = skrf.media.DefinedGammaZ0(band, z0=50.0)
    networks = l_networks(load, 50.0, hertz, 100.0)
    assert len(networks) in (2, 4)
    for network in networks:
        series, shunt = (
            {
                Kind.INDUCTOR: media.inductor,
                Kind.CAPACITOR: media.capacitor,
                Kind.NONE: lambda _value: media.thru(),
            }[network.series.kind](network.series.value),
            {
                Kind.INDUCTOR: media.shunt_inductor,
                Kind.CAPACITOR: media.shunt_capacitor,
                Kind.NONE: lambda _value: media.thru(),
            }[network.shunt.kind](network.shunt.value),
        )
        antenna = media.load((load - 50) / (load + 50))
        order = (series, shunt) if network.form is Form.SHUNT_AT_LOAD else (shunt, series)
        seen = order[0] ** order[1] ** antenna
        assert abs(complex(seen.s[0, 0, 0])) < 1e-9


def impedance_of(
    component: Component, hertz: float, inductor_q: float, capacitor_q: float
) -> complex:
    """Impedance of a real component from its value and its quality factor."""
    if component.kind is Kind.INDUCTOR:
        reactance, q = 2 * pi * hertz * component.value, inductor_q
    else:
        reactance, q = -1 / (2 * pi * hertz * component.value), capacitor_q
    return complex(abs(reactance) / q, reactance)


def seen_through(network: LNetwork, load: complex, hertz: float, q: tuple[float, float]) -> complex:
    series = impedance_of(network.series, hertz, *q)
    shunt = impedance_of(network.shunt, hertz, *q)
    if network.form is Form.SHUNT_AT_LOAD:
        return series + 1 / (1 / load + 1 / shunt)
    return 1 / (1 / shunt + 1 / (series + load))


LOADS = [4000 - 2500j, 12 - 960j, 105 + 45j, 450 + 0j, 15 + 8j]
TARGETS = [50 + 0j, 75 - 20j]


@pytest.mark.parametrize("load", LOADS)
@pytest.mark.parametrize("target", TARGETS)
def test_lossy_components_still_match_exactly(load: complex, target: complex) -> None:
    networks = l_networks(load, target, 3.6e6, 100.0, 150.0, 800.0)
    assert networks
    for network in networks:
        assert seen_through(network, load, 3.6e6, (150.0, 800.0)) == pytest.approx(target, rel=1e-9)
        assert network.input_impedance_ohm == pytest.approx(target, rel=1e-9)


@pytest.mark.parametrize("load", LOADS)
def test_power_in_is_power_in_the_load_and_in_the_components(load: complex) -> None:
    for network in l_networks(load, 50.0, 3.6e6, 100.0, 150.0, 800.0):
        in_load = 100.0 * 10 ** (-network.loss_db / 10)
        in_components = network.series.dissipated_w + network.shunt.dissipated_w
        assert network.loss_db > 0.0
        assert in_load + in_components == pytest.approx(100.0, rel=1e-9)


def test_loss_of_a_usual_network_is_its_quality_factor_over_that_of_the_coil() -> None:
    # Common practice: efficiency 1 - Q_network / Q_coil, to first order.
    networks = l_networks(450.0, 50.0, 7e6, 100.0, inductor_q=200.0, capacitor_q=inf)
    for network in networks:
        loss = 1 - 10 ** (-network.loss_db / 10)
        assert loss == pytest.approx(sqrt(8) / 200, rel=0.03)


@pytest.mark.parametrize("load", LOADS)
@pytest.mark.parametrize("target", TARGETS)
def test_no_network_is_missed_that_a_search_from_many_starts_finds(
    load: complex, target: complex
) -> None:
    hertz, q = 3.6e6, (60.0, 300.0)
    found = {
        (
            network.form,
            round(network.series.reactance_ohm, 2),
            round(network.shunt.reactance_ohm, 2),
        )
        for network in l_networks(load, target, hertz, 100.0, *q)
    }
    searched = set()
    for form in Form:
        for start in np.ndindex(8, 8):
            exponents = np.array([0.5, 1.5, 2.5, 3.5, 0.5, 1.5, 2.5, 3.5])
            signs = np.array([1, 1, 1, 1, -1, -1, -1, -1])
            guess = [float(signs[i] * 10 ** exponents[i]) for i in start]
            solution = solve_from(guess, form, load, target, q)
            if solution is not None:
                searched.add((form, round(solution[0], 2), round(solution[1], 2)))
    assert searched
    assert searched <= found


def solve_from(
    guess: list[float], form: Form, load: complex, target: complex, q: tuple[float, float]
) -> tuple[float, float] | None:
    """Series and shunt reactance found by a general root finder, or none."""

    def component(reactance: float) -> complex:
        return complex(abs(reactance) / (q[0] if reactance > 0 else q[1]), reactance)

    def mismatch(reactances: np.ndarray) -> list[float]:
        series, shunt = component(float(reactances[0])), component(float(reactances[1]))
        if form is Form.SHUNT_AT_LOAD:
            seen = series + 1 / (1 / load + 1 / shunt)
        else:
            seen = 1 / (1 / shunt + 1 / (series + load))
        return [(seen / target - 1).real, (seen / target - 1).imag]

    solution, _, status, _ = fsolve(mismatch, guess, full_output=True, xtol=1e-13)
    good = status == 1 and max(abs(value) for value in mismatch(solution)) < 1e-9
    return (float(solution[0]), float(solution[1])) if good else None


def test_networks_come_with_the_least_loss_first() -> None:
    losses = [
        network.loss_db for network in l_networks(12 - 960j, 50.0, 3.6e6, 100.0, 150.0, 800.0)
    ]
    assert len(losses) == 4
    assert np.all(np.diff(losses) > -1e-9)
    assert losses[-1] > losses[0] + 0.1


def test_a_matched_load_needs_no_element() -> None:
    (network,) = l_networks(50.0, 50.0, 7e6, 100.0)
    assert network.series.kind is network.shunt.kind is Kind.NONE
    assert network.loss_db == pytest.approx(0.0, abs=1e-12)


def test_a_load_with_the_targets_resistance_needs_one_element() -> None:
    networks = l_networks(50 + 30j, 50.0, 7e6, 100.0)
    single = [network for network in networks if network.shunt.kind is Kind.NONE]
    assert len(single) == 1
    assert single[0].series.reactance_ohm == pytest.approx(-30.0, rel=1e-12)


def test_a_load_with_the_targets_conductance_keeps_its_one_element_whatever_the_rounding() -> None:
    for target in np.linspace(10.0, 300.0, 100).tolist():
        networks = l_networks(1 / (1 / target + 0.007j), target, 7e6, 100.0)
        single = [network for network in networks if network.series.kind is Kind.NONE]
        assert len(single) == 1, target
        # A double root is known to the square root of the rounding.
        assert single[0].shunt.reactance_ohm == pytest.approx(1 / 0.007, rel=1e-6)


@pytest.mark.parametrize("ratio", [1.0, 4.0, 9.0, 0.25])
def test_a_transformer_divides_impedance_by_its_ratio(ratio: float) -> None:
    transformer = Transformer(ratio, loss_db=0.2)
    load = np.array([200 - 100j, 50.0])
    np.testing.assert_allclose(transformer.line_side_ohm(load), load / ratio, rtol=1e-15)
    back = transformer.antenna_side_ohm(transformer.line_side_ohm(load))
    np.testing.assert_allclose(back, load, rtol=1e-15)


def test_a_transformer_of_three_decibels_passes_half_the_power() -> None:
    assert Transformer(4.0, 10 * np.log10(2)).efficiency == pytest.approx(0.5, rel=1e-12)
    assert Transformer(4.0).efficiency == 1.0


@pytest.mark.parametrize(
    ("load", "target", "hertz", "power", "q", "quantity"),
    [
        (0j, 50.0, 7e6, 100.0, 200.0, "load_ohm"),
        (-5.0, 50.0, 7e6, 100.0, 200.0, "load_ohm"),
        (complex("nan"), 50.0, 7e6, 100.0, 200.0, "load_ohm"),
        (50.0, 50j, 7e6, 100.0, 200.0, "target_ohm"),
        (50.0, 50.0, 0.0, 100.0, 200.0, "frequency_hz"),
        (50.0, 50.0, 7e6, 0.0, 200.0, "power_w"),
        (50.0, 50.0, 7e6, 100.0, 1.0, "inductor_q"),
    ],
)
def test_an_input_out_of_range_is_named(
    load: complex, target: complex, hertz: float, power: float, q: float, quantity: str
) -> None:
    with pytest.raises(OutOfRange, match=quantity):
        l_networks(load, target, hertz, power, q)


@pytest.mark.parametrize(("ratio", "loss_db"), [(0.0, 0.0), (4.0, -0.1), (float("nan"), 0.0)])
def test_what_is_no_transformer_is_refused(ratio: float, loss_db: float) -> None:
    with pytest.raises(OutOfRange):
        Transformer(ratio, loss_db)
