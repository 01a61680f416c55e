"""A wire between two supports, against the published catenary and handbook figures.

Sources: H. M. Irvine, "Cable Structures", 1981, ch. 1 and 2 (catenary, elastic catenary, parabola);
E. J. Routh, "Analytical Statics", 1891 (supports not level); the state-change equation as in texts
on overhead lines; ASTM B1 and B258 tables of hard-drawn copper wire as handbooks print them; NESC
rule 251 for ice; all from memory, transcendental equations solved by mpmath.
"""

from __future__ import annotations

from math import atan2, cos, hypot, pi, sin, sqrt

import mpmath
import numpy as np
import pytest

from worker.engine.errors import NotConverged, OutOfRange
from worker.engine.material import MATERIALS
from worker.engine.span import (
    STRENGTHS,
    Line,
    Piece,
    Span,
    Weather,
    cutting_lengths,
    hang,
    load_per_metre,
    rope_line,
    string_up,
    wire_line,
)

POUND_N = 4.4482216
POUND_KG = 0.45359237
FOOT_M = 0.3048
INCH_M = 0.0254
RIGID_N = 1e12


def rigid(length_m: float, weight_n_per_m: float, wind_n_per_m: float = 0.0) -> Piece:
    return Piece(length_m, weight_n_per_m, wind_n_per_m, RIGID_N)


def parameter_m(distance_m: float, length_m: float, rise_m: float = 0.0) -> float:
    """The catenary's c: sqrt(L² - h²) = 2 c sinh(D / 2c)."""
    reach = mpmath.sqrt(mpmath.mpf(length_m) ** 2 - mpmath.mpf(rise_m) ** 2)
    half = mpmath.findroot(
        lambda u: mpmath.sinh(u) / u - reach / distance_m,
        (mpmath.mpf("1e-3"), 5),
        solver="anderson",
    )
    return float(distance_m / (2 * half))


@pytest.mark.parametrize("slack", [1.0005, 1.01, 1.2, 3.0])
def test_a_level_string_hangs_as_the_catenary(slack: float) -> None:
    distance_m, weight = 40.0, 0.3
    c = parameter_m(distance_m, slack * distance_m)
    found = hang([rigid(slack * distance_m, weight)], distance_m)
    middle = found.place_m(0, 0.5 * slack * distance_m)[0]
    sag_m = float(c * (mpmath.cosh(distance_m / (2 * c)) - 1))
    assert found.horizontal_pull_n == pytest.approx(weight * c, rel=1e-6)
    assert -middle[2] == pytest.approx(sag_m, rel=1e-6)
    assert found.largest_tension_n(0) == pytest.approx(
        weight * float(c * mpmath.cosh(distance_m / (2 * c))), rel=1e-6
    )


def test_every_point_of_a_level_string_lies_on_the_catenary() -> None:
    distance_m, length_m = 30.0, 33.0
    c = parameter_m(distance_m, length_m)
    places = np.linspace(0.0, length_m, 23)
    along, _, up = hang([rigid(length_m, 0.2)], distance_m).place_m(0, places).T
    x = along - 0.5 * distance_m
    assert up == pytest.approx(c * (np.cosh(x / c) - np.cosh(0.5 * distance_m / c)), abs=1e-6)


def test_a_string_between_unlevel_supports_hangs_as_the_catenary() -> None:
    distance_m, rise_m, length_m, weight = 50.0, 12.0, 55.0, 0.25
    c = parameter_m(distance_m, length_m, rise_m)
    found = hang([rigid(length_m, weight)], distance_m, rise_m)
    near, far = np.linalg.norm(found.pull_n(0, [0.0, length_m]), axis=1)
    assert found.horizontal_pull_n == pytest.approx(weight * c, rel=1e-6)
    # Along any catenary tension differs by the weight of the string that spans the height.
    assert far - near == pytest.approx(weight * rise_m, rel=1e-6)


def test_a_string_that_stretches_hangs_as_irvines_elastic_catenary() -> None:
    distance_m, length_m, weight, stiffness_n = 60.0, 60.0, 0.4, 5000.0
    found = hang([Piece(length_m, weight, 0.0, stiffness_n)], distance_m)

    def closure(pull: mpmath.mpf) -> mpmath.mpf:
        return (
            pull * length_m / stiffness_n
            + 2 * pull / weight * mpmath.asinh(weight * length_m / (2 * pull))
            - distance_m
        )

    pull_n = mpmath.findroot(closure, (10, 500), solver="anderson")
    assert found.horizontal_pull_n == pytest.approx(float(pull_n), rel=1e-9)
    # Irvine's sag at the middle: stretched by its own weight, and hanging.
    half = 0.5 * length_m
    sag = weight * length_m**2 / (8 * stiffness_n) + pull_n / weight * (
        mpmath.sqrt(1 + (weight * half / pull_n) ** 2) - 1
    )
    assert -found.place_m(0, half)[0][2] == pytest.approx(float(sag), rel=1e-9)


def test_a_taut_string_sags_by_w_d_squared_over_eight_h() -> None:
    found = hang([Piece(40.0, 0.2, 0.0, 2e5)], 40.01)
    sag_m = -found.place_m(0, 20.0)[0][2]
    assert sag_m == pytest.approx(0.2 * 40.0**2 / (8.0 * found.horizontal_pull_n), rel=1e-3)


def test_wind_swings_a_string_into_the_plane_of_its_resultant() -> None:
    weight, wind = 0.3, 0.4
    blown = hang([rigid(42.0, weight, wind)], 40.0)
    still = hang([rigid(42.0, hypot(weight, wind))], 40.0)
    assert blown.horizontal_pull_n == pytest.approx(still.horizontal_pull_n, rel=1e-9)
    across, up = blown.place_m(0, 21.0)[0][1:]
    depth_m = -still.place_m(0, 21.0)[0][2]
    lean = atan2(wind, weight)
    assert across == pytest.approx(depth_m * sin(lean), rel=1e-9)
    assert -up == pytest.approx(depth_m * cos(lean), rel=1e-9)


def test_a_string_cut_in_pieces_hangs_as_it_did_whole() -> None:
    whole = hang([Piece(42.0, 0.3, 0.2, 4e4)], 40.0, 3.0)
    parts = hang([Piece(length_m, 0.3, 0.2, 4e4) for length_m in (2.0, 15.0, 25.0)], 40.0, 3.0)
    assert parts.horizontal_pull_n == pytest.approx(whole.horizontal_pull_n, rel=1e-9)
    assert parts.start_m[2] == pytest.approx(whole.place_m(0, 17.0)[0], abs=1e-8)


def test_a_heavy_feed_point_makes_a_triangle() -> None:
    light = 1e-4
    halves = [Piece(10.1, light, 0.0, RIGID_N, 50.0), rigid(10.1, light)]
    found = hang(halves, 20.0)
    depth_m = sqrt(10.1**2 - 10.0**2)
    assert -found.start_m[1][2] == pytest.approx(depth_m, rel=1e-4)
    assert found.largest_tension_n(0) == pytest.approx(25.0 * 10.1 / depth_m, rel=1e-3)


@pytest.mark.parametrize(("taut", "slope"), [(0.97, 0.0), (1.0, 0.3), (1.4, -0.5), (8.0, 0.1)])
def test_every_string_meets_its_far_end(taut: float, slope: float) -> None:
    chord_m = hypot(30.0, 30.0 * slope)
    pieces = [
        Piece(0.3 * taut * chord_m, 0.2, 0.9, 2e4, 9.0),
        Piece(0.7 * taut * chord_m, 2.0, 0.1, 4e5),
    ]
    found = hang(pieces, 30.0, 30.0 * slope)
    assert found.start_m[-1] == pytest.approx([30.0, 0.0, 30.0 * slope], abs=1e-7)


# ---------------------------------------------------------------- weather

BARE = wire_line("hard-drawn-copper", 0.0641 * INCH_M)


def span_all_of_wire(line: Line, distance_m: float) -> Span:
    """A span whose ropes are of the wire's own make: one uniform string."""
    return Span(distance_m, line, 0.98 * distance_m, line, strung_c=15.0)


@pytest.mark.parametrize(
    "weather", [Weather(-20.0), Weather(40.0), Weather(15.0, 430.0), Weather(-20.0, 200.0, 6e-3)]
)
def test_tension_changes_by_the_state_change_equation(weather: Weather) -> None:
    distance_m = 40.0
    rigid_rope = Line(
        BARE.diameter_m, BARE.mass_kg_per_m, BARE.stiffness_n, BARE.expansion_per_k, 1.0
    )
    strung = string_up(span_all_of_wire(rigid_rope, distance_m), tension_n=120.0)
    before = load_per_metre(BARE, Weather(15.0)).resultant_n_per_m
    after = load_per_metre(BARE, weather).resultant_n_per_m
    # The ropes of this span, 2 % of it, do not warm: the engine leaves ropes' warmth out.
    growth = (weather.temperature_c - 15.0) * BARE.expansion_per_k

    def change(pull: mpmath.mpf) -> mpmath.mpf:
        bow = (after**2 / pull**2 - before**2 / 120.0**2) * distance_m**2 / 24
        return bow - (pull - 120.0) / BARE.stiffness_n - growth * 0.98

    pull_n = float(mpmath.findroot(change, (30, 3000), solver="anderson"))
    assert strung.under(weather).horizontal_pull_n == pytest.approx(pull_n, rel=2e-3)


def test_ice_weighs_as_the_handbook_says() -> None:
    # 1.244 t (d + t) lb/ft with t and d in inch (57 lb/ft³).
    bare = load_per_metre(BARE, Weather(0.0)).weight_n_per_m
    iced = load_per_metre(BARE, Weather(0.0, 0.0, 0.5 * INCH_M)).weight_n_per_m
    pounds_per_foot = 1.244 * 0.5 * (0.0641 + 0.5)
    assert iced - bare == pytest.approx(pounds_per_foot * POUND_N / FOOT_M, rel=1e-3)


def test_wind_blows_on_the_outline_of_wire_and_ice() -> None:
    load = load_per_metre(BARE, Weather(0.0, 400.0, 0.01))
    assert load.wind_n_per_m == pytest.approx(400.0 * (0.0641 * INCH_M + 0.02))


# ---------------------------------------------------------------- conductors


@pytest.mark.parametrize(
    ("inch", "pounds"),
    [(0.0641, 213.5), (0.0808, 337.0), (0.1019, 529.2), (0.1285, 826.0), (0.1620, 1280.0)],
)
def test_hard_drawn_copper_breaks_at_the_loads_of_the_tables(inch: float, pounds: float) -> None:
    assert wire_line("hard-drawn-copper", inch * INCH_M).breaking_n == pytest.approx(
        pounds * POUND_N, rel=2e-3
    )


# ASTM B227, table 1, read: inch, and least psi of grades 40 HS and 30 HS.
CLAD_ROWS = [
    (0.2043, 108_000, 120_000),
    (0.1620, 118_000, 130_000),
    (0.1285, 128_000, 140_000),
    (0.1019, 138_600, 151_000),
    (0.0808, 115_000, 120_000),
    (0.0640, 125_000, 130_000),
    (0.0403, 130_000, 135_000),
]


@pytest.mark.parametrize(("inch", "forty_psi", "thirty_psi"), CLAD_ROWS)
def test_copper_clad_steel_is_promised_no_more_than_the_standard_does(
    inch: float, forty_psi: float, thirty_psi: float
) -> None:
    for name, psi in (("copper-clad-steel-40", forty_psi), ("copper-clad-steel-30", thirty_psi)):
        stress_pa = STRENGTHS[name].breaking_stress_pa(inch * INCH_M)
        assert 0.75 * psi * 6894.76 < stress_pa <= psi * 6894.76


@pytest.mark.parametrize(("inch", "pounds"), [(0.0641, 12.43), (0.0808, 19.77), (0.1019, 31.43)])
def test_copper_weighs_as_the_wire_tables_say(inch: float, pounds: float) -> None:
    # Pounds per 1000 ft, ASTM B258 sizes at 8.89 g/cm³.
    mass = wire_line("annealed-copper", inch * INCH_M).mass_kg_per_m
    assert mass * 1000.0 * FOOT_M == pytest.approx(pounds * POUND_KG, rel=1e-3)


def test_every_material_of_the_engine_can_be_hung() -> None:
    assert set(STRENGTHS) == set(MATERIALS)
    for name in MATERIALS:
        line = wire_line(name, 2e-3)
        # No metal wire breaks below 100 MPa or above 2 GPa, or stretches by more than 2 % first.
        stress_pa = line.breaking_n / (0.25 * pi * 4e-6)
        assert 1e8 < stress_pa < 2e9
        assert line.breaking_n / line.stiffness_n < 0.02


def test_insulation_weighs_but_bears_nothing() -> None:
    bare, coated = wire_line("annealed-copper", 2e-3), wire_line("annealed-copper", 2e-3, 1e-3)
    assert coated.breaking_n == bare.breaking_n
    assert coated.mass_kg_per_m - bare.mass_kg_per_m == pytest.approx(
        1400.0 * pi * (2e-3**2 - 1e-3**2), rel=1e-9
    )
    assert coated.diameter_m == pytest.approx(4e-3)


def test_a_rope_of_5_mm_bears_what_the_trade_promises() -> None:
    assert rope_line(5e-3).breaking_n == pytest.approx(3000.0)
    assert rope_line(5e-3, 4500.0).breaking_n == 4500.0


# ---------------------------------------------------------------- spans

WIRE = wire_line("copper-clad-steel-30", 2.05e-3)
ROPE = rope_line(5e-3)


@pytest.mark.parametrize("tension_n", [20.0, 150.0, 900.0])
def test_ropes_give_the_tension_wanted(tension_n: float) -> None:
    strung = string_up(Span(30.0, WIRE, 20.8, ROPE), tension_n=tension_n)
    assert strung.as_wanted
    assert strung.under(Weather(15.0)).horizontal_pull_n == pytest.approx(tension_n, rel=1e-5)


@pytest.mark.parametrize("sag_m", [0.1, 1.0, 4.0])
def test_ropes_give_the_sag_wanted(sag_m: float) -> None:
    span = Span(30.0, WIRE, 20.8, ROPE, feed_fraction=0.36, feed_mass_kg=1.0, rise_m=3.0)
    strung = string_up(span, sag_m=sag_m)
    assert strung.as_wanted
    assert strung.under(Weather(15.0)).sag_m == pytest.approx(sag_m, rel=1e-5)


def test_a_tension_that_no_rope_is_left_for_is_told() -> None:
    strung = string_up(Span(20.0, WIRE, 20.0, ROPE), tension_n=500.0)
    assert not strung.as_wanted
    assert strung.under(Weather(15.0)).horizontal_pull_n < 500.0


def test_the_drawn_shape_runs_from_support_to_support_and_touches_the_sag() -> None:
    state = string_up(Span(30.0, WIRE, 20.8, ROPE, rise_m=2.0), sag_m=2.0).under(Weather(15.0))
    shape = state.shape_m(201)
    assert shape[0] == pytest.approx([0.0, 0.0])
    assert shape[-1] == pytest.approx([30.0, 2.0], abs=1e-6)
    assert max(2.0 / 30.0 * shape[:, 0] - shape[:, 1]) == pytest.approx(state.sag_m, rel=1e-3)
    assert min(shape[1:-1, 1]) == pytest.approx(state.lowest_m, abs=1e-3)
    assert np.mean(shape[1:-1, 1]) == pytest.approx(state.mean_m, abs=0.01)


def test_a_heavy_feed_hangs_lowest() -> None:
    light = string_up(Span(30.0, WIRE, 20.8, ROPE), tension_n=150.0).under(Weather(15.0))
    heavy = string_up(Span(30.0, WIRE, 20.8, ROPE, feed_mass_kg=3.0), tension_n=150.0)
    state = heavy.under(Weather(15.0))
    assert state.sag_m > light.sag_m + 0.5
    assert state.string.start_m[2][2] == pytest.approx(state.lowest_m)


def test_wind_moves_the_wire_aside_and_strains_it() -> None:
    strung = string_up(Span(30.0, WIRE, 20.8, ROPE), tension_n=150.0)
    still, blown = strung.under(Weather(15.0)), strung.under(Weather(15.0, 430.0))
    assert still.swing_m == 0.0
    assert blown.swing_m > still.sag_m
    assert blown.wire_tension_n > still.wire_tension_n
    assert blown.rope_tension_n >= blown.wire_tension_n


# ---------------------------------------------------------------- cutting


def test_legs_are_cut_for_wraps_and_trimming() -> None:
    near, far = cutting_lengths(
        20.0, 0.36, end_wrap_m=0.15, feed_wrap_m=0.1, allowance_fraction=0.01
    )
    assert (near.electrical_m, far.electrical_m) == pytest.approx((7.2, 12.8))
    assert near.cut_m == pytest.approx(7.2 * 1.01 + 0.25)
    assert far.cut_m == pytest.approx(12.8 * 1.01 + 0.25)


# ---------------------------------------------------------------- refusals


def test_what_cannot_be_hung_is_refused_by_name() -> None:
    with pytest.raises(OutOfRange, match="number of pieces"):
        hang([], 10.0)
    with pytest.raises(OutOfRange, match="weight_n_per_m"):
        rigid(1.0, 0.0)
    with pytest.raises(OutOfRange, match="length_m"):
        Span(10.0, WIRE, 16.0, ROPE)
    with pytest.raises(OutOfRange, match="tension_n and sag_m"):
        string_up(Span(30.0, WIRE, 20.0, ROPE))
    with pytest.raises(OutOfRange, match="tension_n and sag_m"):
        string_up(Span(30.0, WIRE, 20.0, ROPE), tension_n=1.0, sag_m=1.0)
    with pytest.raises(OutOfRange, match="wind_pa"):
        Weather(0.0, -1.0)
    with pytest.raises(OutOfRange, match="allowance_fraction"):
        cutting_lengths(20.0, 0.5, end_wrap_m=0.1, feed_wrap_m=0.1, allowance_fraction=1.0)


def test_a_string_whose_far_end_was_not_met_is_no_answer(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("worker.engine.span.loose_string._MOST_STEPS", 1)
    with pytest.raises(NotConverged, match="far end"):
        hang([Piece(45.0, 0.2, 0.3, 1e5)], 40.0, 5.0)
