"""What a report tells of how a wire hangs, tied to the engine's span."""

from __future__ import annotations

import json
from math import sqrt

import pytest

from service.contracts.hanging import HungSpan, HungState
from service.contracts.request import DesignRequest, parse_request
from service.contracts.stock import Conductor
from worker.engine.span import Span, Weather, rope_line, string_up, wire_line
from worker.translation.rigging import hung_span_of
from worker.translation.wires import Way

LENGTH_M = 20.8
WIRE = {"awg": 14, "material": "copper-clad-steel-30"}


def request(ground: str = "average", **hanging: float) -> DesignRequest:
    height = {} if ground == "free-space" else {"height_m": 11.0}
    fields = {
        "bands": ["amateur-region-1: 40m"],
        "site": {"span_m": 30.0, "ground": ground} | height,
        "stock": {"conductors": [WIRE]},
        "hanging": hanging,
    }
    return parse_request(json.dumps(fields))


def hung(
    given: DesignRequest | None = None,
    conductor: Conductor | None = None,
    feed_fraction: float = 0.5,
    length_m: float = LENGTH_M,
) -> HungSpan:
    given = given or request()
    way = Way(conductor or Conductor.model_validate(WIRE), 11.0, feed_fraction)
    if given.site.ground == "free-space":
        way = Way(way.conductor, None, feed_fraction)
    return hung_span_of(given, way, length_m)


def state(span: HungSpan, weather: str) -> HungState:
    return next(each for each in span.states if each.weather == weather)


def test_the_states_are_those_of_the_engine() -> None:
    found = hung(request(tension_n=120.0, rise_m=3.0, ice_mm=6.0, feed_mass_kg=0.5), None, 0.36)
    wire = wire_line("copper-clad-steel-30", 1e-3 * Conductor(awg=14).bare_diameter_mm)
    span = Span(sqrt(30.0**2 - 3.0**2), wire, LENGTH_M, rope_line(5e-3), 0.36, 0.5, 3.0, 15.0)
    strung = string_up(span, tension_n=120.0)
    for name, weather in {
        "as strung": Weather(15.0),
        "coldest": Weather(-20.0),
        "hottest": Weather(40.0),
        "wind": Weather(-20.0, 430.0),
        "ice and wind": Weather(-20.0, 430.0, 6e-3),
    }.items():
        told, expected = state(found, name), strung.under(weather)
        assert told.wire_tension_n == pytest.approx(expected.wire_tension_n, abs=0.06)
        assert told.sag_m == pytest.approx(expected.sag_m, abs=6e-4)
        assert told.swing_m == pytest.approx(expected.swing_m, abs=6e-4)
        # The near support is half the rise lower than the site's height.
        assert told.lowest_m == pytest.approx(9.5 + expected.lowest_m, abs=6e-4)
    assert len(found.states) == 5
    assert found.tail_m == pytest.approx(strung.tail_m, abs=6e-4)


def test_by_default_the_pull_is_a_tenth_of_what_the_weaker_of_wire_and_rope_bears() -> None:
    wire_n = hung().wire_breaking_n
    assert state(hung(), "as strung").wire_tension_n == pytest.approx(0.1 * wire_n, rel=0.01)
    weak = hung(request(rope_breaking_n=500.0))
    assert state(weak, "as strung").wire_tension_n == pytest.approx(50.0, rel=0.03)


def test_the_sag_asked_for_is_had() -> None:
    assert state(hung(request(sag_m=1.5)), "as strung").sag_m == pytest.approx(1.5, abs=1e-3)


def test_the_safety_factor_is_the_least_of_wire_and_rope_in_any_weather() -> None:
    found = hung(request(wind_pa=900.0, rope_breaking_n=1000.0))
    factors = [found.wire_breaking_n / each.wire_tension_n for each in found.states]
    factors += [found.rope_breaking_n / each.rope_tension_n for each in found.states]
    assert found.safety_factor == pytest.approx(min(factors), abs=0.006)
    assert found.weakest == "rope, wind"


def test_weather_that_is_not_asked_about_is_not_told() -> None:
    calm = hung(request(wind_pa=0.0))
    assert [each.weather for each in calm.states] == ["as strung", "coldest", "hottest"]
    icy = hung(request(wind_pa=0.0, ice_mm=5.0))
    assert icy.states[-1].weather == "ice"


def test_in_free_space_no_height_is_told() -> None:
    found = hung(request("free-space"))
    assert {(each.lowest_m, each.mean_height_m) for each in found.states} == {(None, None)}


def test_the_cutting_list_adds_wraps_and_allowance_to_each_leg() -> None:
    near, far = hung(feed_fraction=0.36).cutting
    assert (near.leg, far.leg) == ("near", "far")
    assert near.electrical_m == pytest.approx(0.36 * LENGTH_M, abs=1e-3)
    assert near.cut_m == pytest.approx(0.36 * LENGTH_M * 1.01 + 0.25, abs=1e-3)
    assert hung(feed_fraction=0.36).wire_total_m == pytest.approx(near.cut_m + far.cut_m)


def test_the_shape_hangs_between_the_supports() -> None:
    found = hung(request(rise_m=2.0))
    assert found.shape_m[0] == (0.0, 0.0)
    assert found.shape_m[-1] == pytest.approx((sqrt(900.0 - 4.0), 2.0), abs=1e-3)
    assert len(found.shape_m) == 27


def test_insulation_makes_the_wire_heavier_and_its_sag_deeper() -> None:
    coated = Conductor.model_validate(WIRE | {"insulation": {"thickness_mm": 0.8}})
    given = request(tension_n=100.0)
    assert state(hung(given, coated), "as strung").sag_m > state(hung(given), "as strung").sag_m


# ---------------------------------------------------------------- cautions


def cautions(found: HungSpan) -> str:
    return " ".join(found.cautions)


def test_a_span_within_all_limits_needs_no_caution_but_of_the_wind() -> None:
    assert hung(request(wind_pa=0.0)).cautions == ()
    assert "aside" in cautions(hung(request(wind_pa=430.0)))


def test_a_factor_below_the_one_asked_for_is_a_caution() -> None:
    found = hung(request(tension_n=600.0, wind_pa=0.0))
    assert found.safety_factor < 3.0
    assert "where 3 is asked for" in cautions(found)
    assert "asked for" not in cautions(
        hung(request(tension_n=600.0, wind_pa=0.0, safety_factor=1.5))
    )


def test_a_wire_within_reach_is_a_caution() -> None:
    found = hung(request(sag_m=8.5, wind_pa=0.0))
    assert "within reach of people" in cautions(found)


def test_a_wire_that_hangs_lower_than_planned_is_a_caution() -> None:
    found = hung(request(sag_m=2.0, wind_pa=0.0))
    mean_m = state(found, "as strung").mean_height_m
    assert mean_m is not None
    assert f"plan it at {mean_m:.2f}" in cautions(found)
    assert "lower on average" not in cautions(hung(request(wind_pa=0.0)))


def test_a_pull_that_cannot_be_had_is_a_caution() -> None:
    found = hung(request(tension_n=90_000.0), length_m=29.0)
    assert not found.as_wanted
    assert "No length of rope" in cautions(found)


def test_soft_copper_is_a_caution() -> None:
    soft = Conductor(awg=14, material="annealed-copper")
    assert "stretches for good" in cautions(hung(conductor=soft))
