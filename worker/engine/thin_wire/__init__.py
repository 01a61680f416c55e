"""Straight thin wire: feed impedance and current by a Galerkin solution.

`feed_impedance` solves many wires at once, `feed_impedance_under` the same wires over several
grounds; `current` gives the current along one. The source is
always a uniform field over a gap of stated width, by default the wire's radius. A ground enters
through `ReflectedPotentials`.
"""

from worker.engine.thin_wire.batch import (
    GAP_RANGE_RADII,
    LENGTH_RANGE_WAVELENGTHS,
    LOWEST_HEIGHT_RADII,
    PORT_CLEARANCE_RADII,
    RADIUS_RANGE_WAVELENGTHS,
    SHORTEST_LENGTH_RADII,
)
from worker.engine.thin_wire.reflection import ReflectedPotentials, Rescaled
from worker.engine.thin_wire.wire import (
    MODEL,
    FeedImpedance,
    WireCurrent,
    current,
    feed_impedance,
    feed_impedance_under,
)

__all__ = [
    "GAP_RANGE_RADII",
    "LENGTH_RANGE_WAVELENGTHS",
    "LOWEST_HEIGHT_RADII",
    "MODEL",
    "PORT_CLEARANCE_RADII",
    "RADIUS_RANGE_WAVELENGTHS",
    "SHORTEST_LENGTH_RADII",
    "FeedImpedance",
    "ReflectedPotentials",
    "Rescaled",
    "WireCurrent",
    "current",
    "feed_impedance",
    "feed_impedance_under",
]
