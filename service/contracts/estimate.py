"""How large the search for a request will be, told before it is submitted.

Nothing is searched here. The size follows from the request by the rules of the search: how
many lengths lie between the shortest and the longest wire worth looking at. The time is a rule
of thumb and stated as one.
"""

from __future__ import annotations

import math
from typing import Final

from service.contracts.bands import Band
from service.contracts.quantities import Contract, wavelength_m
from service.contracts.request import SHORTEST_RESONANCE_WAVELENGTHS, DesignRequest

#: The search compares about so many combinations, a quarter where a feed line or networks
#: make each dearer, in steps of length between these two ratios.
_COMBINATIONS: Final = 1_000_000
_FINEST_STEP: Final = 1e-4
_COARSEST_STEP: Final = 2e-3
#: Figures held at a time while one wire is compared, at so many frequencies a band at least.
_MOST_HELD: Final = 4_000_000
_POINTS_PER_BAND: Final = 7
_FURTHEST_APART: Final = 0.02
CENTRE: Final = 0.5

#: The longest wire searched, in wavelengths on the highest band, before margins.
_LONGEST_WAVELENGTHS: Final = 10.0
_MARGIN: Final = 1.05

# Seconds on one core of a small server, from runs of 1 to 15 ways and 1 to 11 bands. Wires many
# wavelengths long, above all off the centre, take maps made with more care, one by one.
_ALWAYS_S: Final = 1.0
_PER_BAND_S: Final = 0.5
_PER_MILLION_READINGS_S: Final = 0.2
_PER_WAY_AND_WAVELENGTH_TO_THE_FOURTH_S: Final = 3.4e-4
_OFF_CENTRE_TIMES: Final = 5


class SearchEstimate(Contract):
    """The size of a search: what is combined, how often, and roughly how long it takes.

    ``ways`` are conductors times heights times places of the feed; ``combinations`` are ways
    times transformers times lengths, to two figures; ``roughly_s`` is a rule of thumb for one
    core that has nothing else to do, and may be off by a factor of three.
    """

    ways: int
    transformers: int
    bands: int
    longest_wire_m: float
    lengths: int
    combinations: int
    roughly_s: float


def estimate_search(request: DesignRequest) -> SearchEstimate:
    """The size of the search for a request."""
    places = request.feed.feed_fractions()
    ways = len(request.stock.choices()) * max(1, len(request.site.heights_m())) * len(places)
    transformers = len(request.feed.transformer_ratios)
    shortest_m, longest_m = _limits_m(request)
    # Bounds that the models do not reach leave nothing between them; the worker says so.
    span = math.log(max(longest_m / shortest_m, 1.0))
    lengths = _lengths(request, span, ways * transformers)
    bands = len(request.bands)
    readings = lengths * ways * transformers * bands * _points(request.bands)
    careful = sum(1 if place == CENTRE else _OFF_CENTRE_TIMES for place in places)
    careful *= ways // len(places)
    top_m = wavelength_m(max(band.high_mhz for band in request.bands))
    roughly_s = (
        _ALWAYS_S
        + _PER_BAND_S * bands
        + _PER_MILLION_READINGS_S * readings / 1e6
        + _PER_WAY_AND_WAVELENGTH_TO_THE_FOURTH_S * careful * (longest_m / top_m) ** 4
    )
    return SearchEstimate(
        ways=ways,
        transformers=transformers,
        bands=bands,
        longest_wire_m=longest_m,
        lengths=_two_figures(lengths),
        combinations=_two_figures(lengths * ways * transformers),
        roughly_s=round(roughly_s, 0 if roughly_s >= 10.0 else 1),
    )


def _limits_m(request: DesignRequest) -> tuple[float, float]:
    """Shortest and longest wire searched: what the bands need, the span takes, models hold for."""
    top_m = wavelength_m(max(band.high_mhz for band in request.bands))
    widest = max(band.high_mhz / band.low_mhz for band in request.bands)
    longest_m = min(request.site.longest_wire_m, _LONGEST_WAVELENGTHS * top_m / (widest * _MARGIN))
    shortest_m = min(SHORTEST_RESONANCE_WAVELENGTHS * top_m, longest_m)
    if request.lengths is None:
        return shortest_m, longest_m
    return max(shortest_m, request.lengths.low_m), min(longest_m, request.lengths.high_m)


def _lengths(request: DesignRequest, span: float, wires: int) -> int:
    """How many lengths are looked at, evenly spaced in logarithm over a span of it."""
    simple = request.feed.feed_line is None and request.feed.matching == "none"
    each = (_COMBINATIONS if simple else _COMBINATIONS // 4) / wires
    each = min(each, _MOST_HELD / (len(request.bands) * _points(request.bands)))
    step = min(max(span / each, _FINEST_STEP), _COARSEST_STEP)
    return max(2, math.ceil(span / step) + 1)


def _points(bands: tuple[Band, ...]) -> int:
    """Frequencies at which a wire is judged on each band."""
    steps = max(math.log(band.high_mhz / band.low_mhz) for band in bands) / _FURTHEST_APART
    return max(_POINTS_PER_BAND, 2 * math.ceil(0.5 * steps) + 1)


def _two_figures(number: float) -> int:
    """A whole number to two figures, for more would promise too much."""
    if number < 100.0:
        return round(number)
    scale: int = 10 ** (math.floor(math.log10(number)) - 1)
    return round(number / scale) * scale
