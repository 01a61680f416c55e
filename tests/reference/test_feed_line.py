"""Feed lines against published formulas, cable tables, scikit-rf and the telegrapher equations."""

from __future__ import annotations

from math import log, pi

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from skrf import tlineFunctions

from worker.engine.conductor import MATERIALS, awg_diameter_m, internal_impedance_ohm_per_m
from worker.engine.constants import FREE_SPACE_IMPEDANCE_OHM, SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.engine.feed_line import Attenuation, FeedLine, fit_attenuation, terminate, transform
from worker.engine.line_catalogue import FEED_LINES

DB_PER_NEPER = 20 / log(10)

# Long-line formula, 10 log10((a² - rho²) / (a (1 - rho²))), a = 10^(ML / 10), as in the ARRL
# Handbook and Antenna Book, for real Z0; computed from the published formula.
# Columns: matched loss in dB, SWR at the load, total loss in dB, SWR at the input.
LONG_LINE = [
    (0.25, 1.5, 0.269634, 1.465520),
    (0.25, 10.0, 1.114370, 7.787865),
    (0.5, 2.0, 0.610242, 1.845289),
    (0.5, 5.0, 1.161534, 3.928139),
    (1.0, 3.0, 1.503853, 2.317653),
    (1.0, 10.0, 3.423703, 4.712734),
    (2.0, 1.5, 2.107573, 1.288831),
    (2.0, 5.0, 3.707058, 2.452075),
    (3.0, 2.0, 3.388591, 1.401140),
    (3.0, 10.0, 7.007698, 2.390188),
    (6.0, 1.5, 6.166313, 1.105790),
    (6.0, 10.0, 10.619831, 1.517363),
]

# Telegrapher equation in tanh form, loss by ABCD power; Z0 = 50 ohm real, velocity factor 0.66,
# attenuation of RG-213; computed from the published formulas.
# Columns: load, frequency in Hz, length in m, matched loss in dB, input impedance, total loss.
WORKED_COAX = [
    (73.0, 7.1e6, 30.0, 0.506894, 58.0695344 - 16.2968096j, 0.5395312),
    (4000.0 - 2500.0j, 14.2e6, 30.0, 0.722536, 6.75502251 - 34.0598332j, 10.1334300),
    (105.0 + 45.0j, 21.2e6, 30.0, 0.888100, 27.1946895 - 16.8496534j, 1.2252396),
    (12.0 - 960.0j, 3.6e6, 20.0, 0.239304, 2.72040012 + 48.1779119j, 16.3811489),
    (50.0 + 100.0j, 14.2e6, 15.24, 0.367048, 130.467934 - 112.226402j, 0.9948159),
]
# The same for a lossless line of 450 ohm, velocity factor 0.91, 30 m.
WORKED_WINDOW = [
    (4000.0 - 2500.0j, 14.2e6, 196.530384 - 928.453239j),
    (12.0 - 960.0j, 3.6e6, 47.0637511 + 2050.49912j),
]

# Cable table of an amateur licence manual: found in the text. Fit k1 sqrt(f) + k2 f in dB per
# 100 m with f in MHz, through its two points: computed.
# Columns: name, dB per 100 m at 30 and at 150 MHz, k1, k2, dB per 100 m at 3.6 and 28.5 MHz.
COAX_FIT = [
    ("rg-58", 8.1037, 18.4711, 1.456352, 0.004230, 2.7785, 7.8954),
    ("rg-213", 3.5433, 8.3005, 0.621984, 0.004552, 1.1965, 3.4502),
    ("rg-8x", 6.4304, 14.8622, 1.142109, 0.005829, 2.1880, 6.2633),
    ("rg-59", 5.8727, 13.4843, 1.048920, 0.004251, 2.0055, 5.7209),
    ("rg-174", 14.9606, 33.7927, 2.708988, 0.004096, 5.1547, 14.5788),
]


@pytest.mark.parametrize(("matched_db", "load_swr", "total_db", "input_swr"), LONG_LINE)
def test_loss_and_swr_on_a_line_of_real_impedance_follow_the_long_line_formula(
    matched_db: float, load_swr: float, total_db: float, input_swr: float
) -> None:
    state = transform(50.0 * load_swr, 50.0, matched_db / DB_PER_NEPER + 1.234j)
    assert float(state.load_standing_wave_ratio) == pytest.approx(load_swr, rel=1e-12)
    assert float(state.matched_loss_db) == pytest.approx(matched_db, rel=1e-12)
    assert float(state.total_loss_db) == pytest.approx(total_db, abs=1e-6)
    assert float(state.additional_loss_db) == pytest.approx(total_db - matched_db, abs=1e-6)
    assert float(state.input_standing_wave_ratio) == pytest.approx(input_swr, abs=1e-6)


@pytest.mark.parametrize(
    ("load", "hertz", "length", "matched_db", "input_ohm", "total_db"), WORKED_COAX
)
def test_transformation_along_lossy_coax_agrees_with_the_worked_examples(
    load: complex,
    hertz: float,
    length: float,
    matched_db: float,
    input_ohm: complex,
    total_db: float,
) -> None:
    propagation = FEED_LINES["rg-213"].propagation_per_m(hertz) * length
    state = transform(load, 50.0, propagation)
    assert float(state.matched_loss_db) == pytest.approx(matched_db, abs=1e-6)
    assert complex(state.input_impedance_ohm) == pytest.approx(input_ohm, rel=1e-7)
    assert float(state.total_loss_db) == pytest.approx(total_db, abs=2e-7)


@pytest.mark.parametrize(("load", "hertz", "input_ohm"), WORKED_WINDOW)
def test_transformation_along_a_lossless_line_agrees_with_the_worked_examples(
    load: complex, hertz: float, input_ohm: complex
) -> None:
    line = FeedLine("lossless", 450.0, 0.91, Attenuation(0.0, 0.0), "")
    state = terminate(line, 30.0, hertz, load)
    assert complex(state.input_impedance_ohm) == pytest.approx(input_ohm, rel=1e-7)
    assert float(state.total_loss_db) == pytest.approx(0.0, abs=1e-12)


LOADS = np.array([73 + 42j, 4000 - 2500j, 12 - 960j, 105 + 45j, 3 + 0.1j, 5000.0])


def test_transformation_with_complex_impedance_agrees_with_scikit_rf() -> None:
    for line in FEED_LINES.values():
        for hertz in (1.8e6, 14.2e6, 50e6):
            z0 = complex(line.characteristic_impedance_ohm(hertz))
            theta = complex(line.propagation_per_m(hertz)) * 27.0
            state = terminate(line, 27.0, hertz, LOADS)
            expected = tlineFunctions.zl_2_zin(z0, LOADS, theta)
            np.testing.assert_allclose(state.input_impedance_ohm, expected, rtol=1e-10)
            loss = tlineFunctions.zl_2_total_loss(z0, LOADS, theta)
            np.testing.assert_allclose(state.total_loss_db, 10 * np.log10(loss), atol=1e-9)


@pytest.mark.parametrize("load", [4000.0 - 2500.0j, 12.0 - 960.0j, 73.0 + 42.0j])
def test_impedance_and_loss_agree_with_the_telegrapher_equations_integrated(load: complex) -> None:
    # dV/dz = Z I, dI/dz = Y V towards the transmitter, from R, L, G, C as the line implies them.
    line, hertz, length = FEED_LINES["rg-58"], 3.6e6, 20.0
    gamma = complex(line.propagation_per_m(hertz))
    z0 = complex(line.characteristic_impedance_ohm(hertz))
    series, shunt = gamma * z0, gamma / z0
    solved = solve_ivp(
        lambda _z, state: [series * state[1], shunt * state[0]],
        (0.0, length),
        [load, 1.0 + 0.0j],
        rtol=1e-10,
        atol=1e-10,
    )
    voltage, current = solved.y[:, -1]
    state = terminate(line, length, hertz, load)
    assert complex(state.input_impedance_ohm) == pytest.approx(voltage / current, rel=1e-7)
    ratio = (voltage * np.conj(current)).real / load.real
    assert float(state.total_loss_db) == pytest.approx(10 * np.log10(ratio), abs=1e-7)


@pytest.mark.parametrize("load", LOADS.tolist())
def test_loss_with_complex_impedance_agrees_with_macalpine(load: complex) -> None:
    # Additional loss 10 log10((1 - |m1|²) / (1 - |m2|²)), m = (Z - Z0*) / (Z + Z0), 1 at the
    # input, 2 at the load: Macalpine, Trans. AIEE 72, 1953, as quoted in a text found.
    line, hertz = FEED_LINES["rg-174"], 1.8e6
    z0 = complex(line.characteristic_impedance_ohm(hertz))
    state = terminate(line, 20.0, hertz, load)
    input_ohm = complex(state.input_impedance_ohm)
    m1, m2 = ((z - z0.conjugate()) / (z + z0) for z in (input_ohm, load))
    expected = 10 * np.log10((1 - abs(m1) ** 2) / (1 - abs(m2) ** 2))
    assert float(state.additional_loss_db) == pytest.approx(expected, abs=1e-9)


def test_a_short_line_at_a_current_minimum_loses_less_than_when_matched() -> None:
    # Macalpine, as above: the additional loss may be negative; the long-line rule says never.
    state = terminate(FEED_LINES["rg-58"], 2.0, 3.6e6, 250.0)
    assert float(state.additional_loss_db) < -0.01
    assert float(state.total_loss_db) > 0.0


def test_a_matched_line_loses_its_matched_loss() -> None:
    line = FEED_LINES["rg-174"]
    z0 = line.characteristic_impedance_ohm(7.1e6)
    state = terminate(line, 40.0, 7.1e6, z0)
    assert float(state.total_loss_db) == pytest.approx(float(state.matched_loss_db), rel=1e-12)
    assert float(state.input_standing_wave_ratio) == pytest.approx(1.0, abs=1e-12)


def test_two_lengths_in_a_row_are_one_length() -> None:
    line, hertz, load = FEED_LINES["rg-8x"], 7.1e6, 4000.0 - 2500.0j
    far = terminate(line, 11.0, hertz, load)
    near = terminate(line, 19.0, hertz, far.input_impedance_ohm)
    whole = terminate(line, 30.0, hertz, load)
    assert complex(near.input_impedance_ohm) == pytest.approx(
        complex(whole.input_impedance_ohm), rel=1e-10
    )
    assert float(far.total_loss_db + near.total_loss_db) == pytest.approx(
        float(whole.total_loss_db), abs=1e-9
    )


def test_a_line_of_no_length_changes_nothing() -> None:
    state = terminate(FEED_LINES["rg-58"], 0.0, 7.1e6, 12.0 - 960.0j)
    assert complex(state.input_impedance_ohm) == pytest.approx(12.0 - 960.0j, rel=1e-9)
    assert float(state.total_loss_db) == pytest.approx(0.0, abs=1e-9)


def test_every_line_of_the_catalogue_is_passive() -> None:
    hertz = np.logspace(4, 9.4, 40)
    for line in FEED_LINES.values():
        gamma, z0 = line.propagation_per_m(hertz), line.characteristic_impedance_ohm(hertz)
        assert np.all((gamma * z0).real > 0.0), line.name
        # Without dielectric loss the conductance is zero but for rounding.
        assert np.all((gamma / z0).real > -1e-12 * np.abs(gamma / z0)), line.name


def test_characteristic_impedance_is_that_of_the_lines_resistance_and_conductance() -> None:
    # Chipman, ch. 5: alpha_c = R / 2 R0, alpha_d = G R0 / 2, Z0 = sqrt(Z / Y).
    line, hertz = FEED_LINES["rg-58"], 3.6e6
    conductor, dielectric = line.attenuation.terms_db_per_m(hertz)
    resistance = 2 * 50 * float(conductor) / DB_PER_NEPER
    conductance = 2 / 50 * float(dielectric) / DB_PER_NEPER
    beta = 2 * pi * hertz / (0.66 * SPEED_OF_LIGHT_M_PER_S)
    expected = np.sqrt((resistance + 50j * beta) / (conductance + 1j * beta / 50))
    actual = complex(line.characteristic_impedance_ohm(hertz))
    # The square root's own second-order term, (alpha / beta)² / 2, is what differs.
    assert actual == pytest.approx(complex(expected), rel=5e-4)
    assert actual.imag == pytest.approx(complex(expected).imag, rel=2e-3)


@pytest.mark.parametrize(("name", "at_30", "at_150", "k1", "k2", "at_3_6", "at_28_5"), COAX_FIT)
def test_coax_attenuation_passes_through_the_published_points(
    name: str, at_30: float, at_150: float, k1: float, k2: float, at_3_6: float, at_28_5: float
) -> None:
    law = FEED_LINES[name].attenuation
    assert 100 * law.conductor_db_per_m == pytest.approx(k1, rel=1e-5)
    assert 100 * law.dielectric_db_per_m == pytest.approx(k2, rel=2e-4)
    conductor, dielectric = law.terms_db_per_m([30e6, 150e6, 3.6e6, 28.5e6])
    np.testing.assert_allclose(
        100 * (conductor + dielectric), [at_30, at_150, at_3_6, at_28_5], atol=6e-5
    )


@pytest.mark.parametrize(
    ("name", "at_50", "at_150"),
    # Cable data in a repeater training guide: found in the text, nominal, in dB per 100 m.
    [("rg-58", 10.8, 20.0), ("rg-213", 4.9, 8.9)],
)
def test_a_second_cable_table_agrees_within_eight_per_cent(
    name: str, at_50: float, at_150: float
) -> None:
    conductor, dielectric = FEED_LINES[name].attenuation.terms_db_per_m([50e6, 150e6])
    np.testing.assert_allclose(100 * (conductor + dielectric), [at_50, at_150], rtol=0.08)


@pytest.mark.parametrize(
    ("name", "largest_db_per_100_ft"),
    # MIL-C-17G greatest attenuation at 1 GHz, as quoted in a text found.
    [("rg-58", 28.0), ("rg-213", 9.0)],
)
def test_coax_stays_within_the_military_limit_at_1_ghz(
    name: str, largest_db_per_100_ft: float
) -> None:
    conductor, dielectric = FEED_LINES[name].attenuation.terms_db_per_m(1e9)
    assert 30.48 * float(conductor + dielectric) < largest_db_per_100_ft


@pytest.mark.parametrize(
    ("name", "megahertz", "db_per_100_ft"),
    # Amateur handbook table of lines, from memory; rounded to one digit.
    [("open-wire-600", 1, 0.02), ("open-wire-600", 10, 0.06), ("open-wire-600", 100, 0.2)],
)
def test_open_wire_computed_from_its_wires_agrees_with_the_handbook(
    name: str, megahertz: float, db_per_100_ft: float
) -> None:
    conductor, dielectric = FEED_LINES[name].attenuation.terms_db_per_m(megahertz * 1e6)
    assert 30.48 * float(conductor + dielectric) == pytest.approx(db_per_100_ft, rel=0.1)


def test_wires_of_open_and_window_line_are_too_far_apart_to_feel_each_other() -> None:
    # Z0 = (eta / pi) arcosh(D / d): Ramo, Whinnery, Van Duzer, table 5.11b.
    for z0 in (450.0, 600.0):
        assert np.cosh(pi * z0 / FREE_SPACE_IMPEDANCE_OHM) > 20


def test_twin_lead_loses_more_than_the_resistance_of_its_wires_alone() -> None:
    # The table, from memory, counts the dielectric; AWG 20 wires alone lose most of it.
    wire = internal_impedance_ohm_per_m(awg_diameter_m(20) / 2, 10e6, MATERIALS["annealed-copper"])
    wires_db_per_m = DB_PER_NEPER * float(wire.real) / 300
    conductor, dielectric = FEED_LINES["twin-lead-300"].attenuation.terms_db_per_m(10e6)
    assert wires_db_per_m < float(conductor + dielectric) < 1.5 * wires_db_per_m


def test_one_law_fits_the_points_of_every_line_within_their_rounding() -> None:
    for line in FEED_LINES.values():
        assert line.attenuation.largest_misfit < 0.1, line.name


def test_a_fit_through_more_points_states_its_misfit() -> None:
    law = fit_attenuation([1e6, 4e6, 9e6], [0.01, 0.021, 0.03])
    conductor, dielectric = law.terms_db_per_m([1e6, 4e6, 9e6])
    misfit = np.abs((conductor + dielectric) / [0.01, 0.021, 0.03] - 1).max()
    assert law.largest_misfit == pytest.approx(misfit, rel=1e-12)
    assert 0.005 < law.largest_misfit < 0.05


def test_a_fit_never_gives_a_negative_term() -> None:
    # Points that fall below the root law would ask for a negative dielectric term.
    law = fit_attenuation([1e6, 100e6], [0.01, 0.09])
    assert law.dielectric_db_per_m == 0.0
    assert law.conductor_db_per_m > 0.0


def test_arrays_broadcast_to_what_scalars_give() -> None:
    line = FEED_LINES["rg-213"]
    length, hertz = np.array([10.0, 30.0])[:, None], np.array([3.6e6, 7.1e6, 14.2e6])
    together = terminate(line, length, hertz, 73 + 42j)
    assert together.input_impedance_ohm.shape == together.total_loss_db.shape == (2, 3)
    assert together.matched_loss_db.shape == together.load_standing_wave_ratio.shape == (2, 3)
    one = terminate(line, 30.0, 7.1e6, 73 + 42j)
    assert complex(together.input_impedance_ohm[1, 1]) == pytest.approx(
        complex(one.input_impedance_ohm), rel=1e-14
    )


def test_a_nearly_reactive_load_keeps_its_digits() -> None:
    # Lossless, R = 1e-9 ohm: no loss, and the resistance transforms as the power demands.
    state = transform(1e-9 + 1e5j, 50.0, 0.7j)
    assert float(state.total_loss_db) == pytest.approx(0.0, abs=1e-10)
    current_ratio = np.cos(0.7) + 1j * (1e-9 + 1e5j) / 50.0 * np.sin(0.7)
    assert float(state.input_impedance_ohm.real) == pytest.approx(
        1e-9 / abs(current_ratio) ** 2, rel=1e-9
    )


@pytest.mark.parametrize(
    ("length", "hertz", "load", "quantity"),
    [
        (-1.0, 7e6, 50.0, "length_m"),
        (10.0, 1e3, 50.0, "frequency_hz"),
        (10.0, 7e6, 100j, "real part"),
        (10.0, 7e6, -5.0, "real part"),
        (10.0, 7e6, float("nan"), "load_ohm"),
        (1e4, 1e9, 50.0, "matched loss"),
    ],
)
def test_an_input_out_of_range_is_named(
    length: float, hertz: float, load: complex, quantity: str
) -> None:
    with pytest.raises(OutOfRange, match=quantity):
        terminate(FEED_LINES["rg-58"], length, hertz, load)


def test_one_point_is_no_fit() -> None:
    with pytest.raises(OutOfRange, match="different frequencies"):
        fit_attenuation([30e6, 30e6], [0.08, 0.08])
