"""From a candidate's wire to how it would hang between the supports of the site."""

from __future__ import annotations

from math import sqrt
from typing import Final

from service.contracts.formats import metres
from service.contracts.hanging import CutLeg, Hanging, HungSpan, HungState
from service.contracts.request import DesignRequest
from service.contracts.stock import Conductor
from worker.engine.span import (
    STRENGTHS,
    Line,
    Span,
    SpanState,
    StrungSpan,
    Weather,
    cutting_lengths,
    rope_line,
    string_up,
    wire_line,
)
from worker.translation.wires import Way

#: Where neither tension nor sag is given: this part of what the weaker of wire and rope bears
#: (common practice), and no less than the engine strings.
_USUAL_PART: Final = 0.1
_LEAST_PULL_N: Final = 0.02
_SHAPE_POINTS: Final = 25
#: Lower than this a wire may be touched by people on the ground (common practice).
_OUT_OF_REACH_M: Final = 3.0
#: Wire that sags more than so below its planned height, where no tolerance says otherwise.
_USUAL_TOLERANCE_M: Final = 0.5
_SWING_WORTH_A_WORD_M: Final = 0.3


def hung_span_of(request: DesignRequest, way: Way, length_m: float) -> HungSpan:
    """How a wire of a length would hang, under the weather of the request.

    Raises
    ------
    EngineError
        If a value lies outside what the model of the span covers.
    """
    hanging = request.hanging
    wire, rope = _wire(way.conductor), _rope(hanging)
    span = Span(
        distance_m=sqrt(request.site.span_m**2 - hanging.rise_m**2),
        wire=wire,
        length_m=length_m,
        rope=rope,
        feed_fraction=way.feed_fraction,
        feed_mass_kg=hanging.feed_mass_kg,
        rise_m=hanging.rise_m,
        strung_c=hanging.strung_c,
    )
    strung = _strung(span, hanging)
    states = {name: strung.under(weather) for name, weather in _weathers(hanging).items()}
    near_m = None if way.height_m is None else way.height_m - 0.5 * hanging.rise_m
    told = tuple(_state(name, state, near_m) for name, state in states.items())
    margins = {
        (what, name): line.breaking_n / tension_n
        for name, state in states.items()
        for what, line, tension_n in (
            ("wire", wire, state.wire_tension_n),
            ("rope", rope, state.rope_tension_n),
        )
    }
    (what, when), margin = min(margins.items(), key=lambda each: each[1])
    legs = _legs(hanging, way.feed_fraction, length_m)
    first = next(iter(states.values()))
    span_told = HungSpan(
        as_wanted=strung.as_wanted,
        tail_m=round(strung.tail_m, 3),
        wire_breaking_n=round(wire.breaking_n, 1),
        rope_breaking_n=round(rope.breaking_n, 1),
        safety_factor=round(margin, 2),
        safety_factor_wanted=hanging.safety_factor,
        weakest=f"{what}, {when}",
        states=told,
        cutting=legs,
        wire_total_m=round(sum(leg.cut_m for leg in legs), 3),
        shape_m=tuple((round(x, 3), round(up, 3)) for x, up in first.shape_m(_SHAPE_POINTS)),
        strength_source=STRENGTHS[way.conductor.material].source,
    )
    return span_told.model_copy(update={"cautions": _cautions(request, way, span_told)})


def _wire(conductor: Conductor) -> Line:
    insulation = conductor.insulation
    sleeve_m = 0.0 if insulation is None else 1e-3 * insulation.thickness_mm
    return wire_line(conductor.material, 1e-3 * conductor.bare_diameter_mm, sleeve_m)


def _rope(hanging: Hanging) -> Line:
    return rope_line(1e-3 * hanging.rope_diameter_mm, hanging.rope_breaking_n)


def _strung(span: Span, hanging: Hanging) -> StrungSpan:
    if hanging.sag_m is not None:
        return string_up(span, sag_m=hanging.sag_m)
    weaker_n = min(span.wire.breaking_n, span.rope.breaking_n)
    usual_n = max(_USUAL_PART * weaker_n, _LEAST_PULL_N)
    return string_up(span, tension_n=usual_n if hanging.tension_n is None else hanging.tension_n)


def _weathers(hanging: Hanging) -> dict[str, Weather]:
    """The weathers told of, as strung first."""
    weathers = {
        "as strung": Weather(hanging.strung_c),
        "coldest": Weather(hanging.low_c),
        "hottest": Weather(hanging.high_c),
    }
    if hanging.wind_pa > 0.0:
        weathers["wind"] = Weather(hanging.low_c, hanging.wind_pa)
    if hanging.ice_mm > 0.0:
        name = "ice and wind" if hanging.wind_pa > 0.0 else "ice"
        weathers[name] = Weather(hanging.low_c, hanging.wind_pa, 1e-3 * hanging.ice_mm)
    return weathers


def _state(name: str, state: SpanState, near_m: float | None) -> HungState:
    return HungState(
        weather=name,
        temperature_c=state.weather.temperature_c,
        wind_pa=state.weather.wind_pa,
        ice_mm=round(1e3 * state.weather.ice_m, 3),
        wire_tension_n=round(state.wire_tension_n, 1),
        rope_tension_n=round(state.rope_tension_n, 1),
        sag_m=round(state.sag_m, 3),
        swing_m=round(state.swing_m, 3),
        lowest_m=None if near_m is None else round(near_m + state.lowest_m, 3),
        mean_height_m=None if near_m is None else round(near_m + state.mean_m, 3),
    )


def _legs(hanging: Hanging, feed_fraction: float, length_m: float) -> tuple[CutLeg, CutLeg]:
    near, far = cutting_lengths(
        length_m,
        feed_fraction,
        end_wrap_m=hanging.end_wrap_m,
        feed_wrap_m=hanging.feed_wrap_m,
        allowance_fraction=0.01 * hanging.cutting_allowance_percent,
    )
    return (
        CutLeg(leg="near", electrical_m=round(near.electrical_m, 3), cut_m=round(near.cut_m, 3)),
        CutLeg(leg="far", electrical_m=round(far.electrical_m, 3), cut_m=round(far.cut_m, 3)),
    )


def _cautions(request: DesignRequest, way: Way, span: HungSpan) -> tuple[str, ...]:
    """What a rigger must know of this span."""
    said: list[str] = []
    if not span.as_wanted:
        said.append(
            "No length of rope gives the tension or sag asked for; it is told with the nearest."
        )
    if span.safety_factor < span.safety_factor_wanted:
        said.append(
            f"The breaking load is only {span.safety_factor:g} times the tension "
            f"({span.weakest}), where {span.safety_factor_wanted:g} is asked for: string it "
            "slacker, or take stronger wire or rope."
        )
    said += _of_height(request, way, span)
    swing_m = max(state.swing_m for state in span.states)
    if swing_m > _SWING_WORTH_A_WORD_M:
        said.append(
            f"The wind pushes it {metres(swing_m)} m aside: keep everything further away than that."
        )
    if way.conductor.material == "annealed-copper":
        said.append("Soft copper stretches for good under load, which lengthens the wire.")
    return tuple(said)


def _of_height(request: DesignRequest, way: Way, span: HungSpan) -> list[str]:
    said: list[str] = []
    lows = [state.lowest_m for state in span.states if state.lowest_m is not None]
    if lows and min(lows) < _OUT_OF_REACH_M:
        said.append(
            f"Its lowest point comes down to {metres(max(min(lows), 0.0))} m over ground, within "
            "reach of people: hang it higher or tighter."
        )
    tolerances = request.tolerances
    tolerated_m = _USUAL_TOLERANCE_M if tolerances is None else tolerances.height_m
    mean_m = span.states[0].mean_height_m
    if way.height_m is not None and mean_m is not None and way.height_m - mean_m > tolerated_m:
        said.append(
            f"It hangs {metres(way.height_m - mean_m)} m lower on average than the straight wire "
            f"it was planned as: plan it at {metres(max(mean_m, 0.0))} m, or string it tighter."
        )
    return said
