"""A wire hung between two supports by ropes: strung once, then left to the weather."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import hypot, log
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from worker.engine.limits import require_within
from worker.engine.span.conductor_strength import STANDARD_GRAVITY_M_PER_S2, Line
from worker.engine.span.loose_string import LooseString, Piece, hang
from worker.engine.span.weather import Weather, load_per_metre

FloatArray = NDArray[np.float64]

#: Ropes are not cut shorter than this: there is always a knot.
_SHORTEST_TAIL_M: Final = 1e-3
#: Where the ropes' length is looked for: this much shorter and longer than just taut, of the span.
_TAUTEST: Final = 0.1
_DOUBLINGS: Final = 18
#: Pieces of the string: rope, near leg, far leg, rope. The slope jumps only where legs meet, so
#: what is lowest is a place of theirs where they run level, or one of their ends.
_ROPES: Final = (0, 3)
_LEGS: Final = (1, 2)


@dataclass(frozen=True, slots=True)
class Span:
    """What hangs, and between what.

    Parameters
    ----------
    distance_m : float
        Distance between the supports in plan, 0.1 to 5000 m.
    wire : Line
    length_m : float
        Unstretched length of the wire when strung, above zero, in m.
    rope : Line
    feed_fraction : float
        Place of the feed from the near end, 0.01 to 0.99.
    feed_mass_kg : float
        What hangs at the feed, 0 to 1000 kg.
    rise_m : float
        How much higher the far support is, in m.
    strung_c : float
        Temperature of the wire when strung, in °C.

    Raises
    ------
    OutOfRange
        A value outside its range; a wire longer than 1.5 times the line between the supports.
    """

    distance_m: float
    wire: Line
    length_m: float
    rope: Line
    feed_fraction: float = 0.5
    feed_mass_kg: float = 0.0
    rise_m: float = 0.0
    strung_c: float = 15.0

    def __post_init__(self) -> None:
        """Refuse what no rigger would hang."""
        require_within("distance_m", self.distance_m, 0.1, 5000.0, "m")
        require_within("rise_m", self.rise_m, -5000.0, 5000.0, "m")
        require_within("length_m", self.length_m, 1e-2, 1.5 * self.chord_m, "m")
        require_within("feed_fraction", self.feed_fraction, 0.01, 0.99)
        require_within("feed_mass_kg", self.feed_mass_kg, 0.0, 1000.0, "kg")

    @property
    def chord_m(self) -> float:
        """Straight line between the supports."""
        return hypot(self.distance_m, self.rise_m)


@dataclass(frozen=True, slots=True, eq=False)
class SpanState:
    """A span under one weather.

    Attributes
    ----------
    weather : Weather
    wire_tension_n, rope_tension_n : float
        Largest tension in the wire and in the ropes; the latter pulls at a support.
    horizontal_pull_n : float
        Pull along the span, the same all along.
    sag_m : float
        Largest depth of the wire below the straight line between the supports.
    lowest_m, mean_m : float
        Lowest and mean height of the wire, counted from the near support's.
    swing_m : float
        How far the wind pushes the wire aside.
    string : LooseString
    """

    weather: Weather
    wire_tension_n: float
    rope_tension_n: float
    horizontal_pull_n: float
    sag_m: float
    lowest_m: float
    mean_m: float
    swing_m: float
    string: LooseString

    def shape_m(self, points: int) -> FloatArray:
        """Points from support to support, shape (points + 2, 2): along, and up from the near one.

        The first and the last are the supports; the others lie evenly along the wire.
        """
        near, far = _LEGS
        near_m, far_m = (self.string.pieces[leg].length_m for leg in _LEGS)
        along = np.linspace(0.0, near_m + far_m, points)
        wire = np.where(
            (along <= near_m)[:, None],
            self.string.place_m(near, np.minimum(along, near_m)),
            self.string.place_m(far, np.maximum(along - near_m, 0.0)),
        )
        return np.vstack([self.string.start_m[0], wire, self.string.start_m[-1]])[:, [0, 2]]


@dataclass(frozen=True, slots=True)
class StrungSpan:
    """A span whose ropes have been made fast.

    Attributes
    ----------
    span : Span
    tail_m : float
        Unstretched rope from each end of the wire to its support, in m.
    as_wanted : bool
        Whether the tension or sag wanted could be had: not where even no rope at all, or a rope
        slack beyond use, would fall short of it.
    """

    span: Span
    tail_m: float
    as_wanted: bool

    def under(self, weather: Weather) -> SpanState:
        """The span under a weather.

        Raises
        ------
        NotConverged
            As for `hang`.

        Notes
        -----
        What is kept is the length of wire and rope without tension: it grows with the temperature
        and stretches with the load. This is the state-change equation of overhead lines, with the
        catenary in the place of its parabola.
        """
        return _state(self.span, self.tail_m, weather)


def string_up(
    span: Span, *, tension_n: float | None = None, sag_m: float | None = None
) -> StrungSpan:
    """Find the ropes that give a span its tension or its sag, in still air when strung.

    Parameters
    ----------
    span
    tension_n
        Pull along the span wanted, 0.01 to 1e7 N; nearly that in a halyard.
    sag_m
        Or the sag wanted, 1e-3 to 1000 m.

    Raises
    ------
    OutOfRange
        A tension or sag outside its range; neither, or both.
    NotConverged
        As for `hang`.
    """
    require_within("tension_n and sag_m given", (tension_n, sag_m).count(None), 1, 1)
    still = Weather(span.strung_c)
    if sag_m is None:
        pull_n = float(require_within("tension_n", tension_n or 0.0, 0.01, 1e7, "N"))
        return _made_fast(
            span, lambda tail_m: log(pull_n / _string(span, tail_m, still).horizontal_pull_n)
        )
    deep_m = float(require_within("sag_m", sag_m, 1e-3, 1000.0, "m"))
    return _made_fast(span, lambda tail_m: log(_sag_m(span, _string(span, tail_m, still)) / deep_m))


def _made_fast(span: Span, excess: Callable[[float], float]) -> StrungSpan:
    """Ropes of which `excess`, rising with their length, is zero; or the nearest there are."""
    taut_m = 0.5 * (span.chord_m - span.length_m)
    low_m = max(taut_m - 0.5 * _TAUTEST * span.chord_m, _SHORTEST_TAIL_M)
    if excess(low_m) >= 0.0:
        return StrungSpan(span, low_m, as_wanted=False)
    step_m = 1e-4 * span.chord_m
    high_m = max(taut_m, low_m)
    for _ in range(_DOUBLINGS):
        high_m += step_m
        if excess(high_m) >= 0.0:
            tail_m = brentq(excess, low_m, high_m, xtol=1e-9 * span.chord_m, rtol=1e-9)
            return StrungSpan(span, float(tail_m), as_wanted=True)
        low_m, step_m = high_m, 2.0 * step_m
    return StrungSpan(span, low_m, as_wanted=False)


def _string(span: Span, tail_m: float, weather: Weather) -> LooseString:
    warmer_k = weather.temperature_c - span.strung_c
    feed_n = STANDARD_GRAVITY_M_PER_S2 * span.feed_mass_kg
    grown_m = span.length_m * (1.0 + span.wire.expansion_per_k * warmer_k)
    rope = _piece(span.rope, tail_m, weather)
    return hang(
        (
            rope,
            _piece(span.wire, span.feed_fraction * grown_m, weather, feed_n),
            _piece(span.wire, (1.0 - span.feed_fraction) * grown_m, weather),
            rope,
        ),
        span.distance_m,
        span.rise_m,
    )


def _sag_m(span: Span, string: LooseString) -> float:
    slope = span.rise_m / span.distance_m
    deepest = [string.place_m(leg, string.where_slope_is(leg, slope))[0] for leg in _LEGS]
    return max(float(slope * at[0] - at[2]) for at in deepest)


def _state(span: Span, tail_m: float, weather: Weather) -> SpanState:
    string = _string(span, tail_m, weather)
    lowest = [string.place_m(leg, string.where_slope_is(leg, 0.0))[0] for leg in _LEGS]
    swung = [string.place_m(leg, string.where_swung_most(leg))[0] for leg in _LEGS]
    return SpanState(
        weather=weather,
        wire_tension_n=max(string.largest_tension_n(leg) for leg in _LEGS),
        rope_tension_n=max(string.largest_tension_n(rope) for rope in _ROPES),
        horizontal_pull_n=string.horizontal_pull_n,
        sag_m=_sag_m(span, string),
        lowest_m=min(float(at[2]) for at in lowest),
        mean_m=_mean_height_m(string),
        swing_m=max(abs(float(at[1])) for at in swung),
        string=string,
    )


def _piece(line: Line, length_m: float, weather: Weather, end_weight_n: float = 0.0) -> Piece:
    load = load_per_metre(line, weather)
    return Piece(length_m, load.weight_n_per_m, load.wind_n_per_m, line.stiffness_n, end_weight_n)


def _mean_height_m(string: LooseString) -> float:
    """Mean over the wire's length of its height, by Gauss's rule on each leg."""
    node, weight = np.polynomial.legendre.leggauss(8)
    total, length = 0.0, 0.0
    for index in _LEGS:
        leg_m = string.pieces[index].length_m
        heights = string.place_m(index, 0.5 * leg_m * (node + 1.0))[:, 2]
        total += 0.5 * leg_m * float(weight @ heights)
        length += leg_m
    return total / length
