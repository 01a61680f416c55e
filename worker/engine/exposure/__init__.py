"""Exposure of people to the fields of a wire: published limits and the distance they ask for."""

from worker.engine.exposure.keep_away import KeepAway, Source, keep_away
from worker.engine.exposure.near_field import fields_of, largest_fields
from worker.engine.exposure.published_limits import Limit, Population, Standard, limits_at

__all__ = [
    "KeepAway",
    "Limit",
    "Population",
    "Source",
    "Standard",
    "fields_of",
    "keep_away",
    "largest_fields",
    "limits_at",
]
