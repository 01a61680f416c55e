"""Hanging a wire between two supports: sag, tension, weather, and what to cut."""

from worker.engine.span.conductor_strength import STRENGTHS, Line, rope_line, wire_line
from worker.engine.span.cutting import Leg, cutting_lengths
from worker.engine.span.hung_span import Span, SpanState, StrungSpan, string_up
from worker.engine.span.loose_string import LooseString, Piece, hang
from worker.engine.span.weather import Weather, load_per_metre

__all__ = [
    "STRENGTHS",
    "Leg",
    "Line",
    "LooseString",
    "Piece",
    "Span",
    "SpanState",
    "StrungSpan",
    "Weather",
    "cutting_lengths",
    "hang",
    "load_per_metre",
    "rope_line",
    "string_up",
    "wire_line",
]
