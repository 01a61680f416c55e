"""From a request to what is searched: ways to hang the wire, and bands as goals."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from itertools import product

from service.contracts.request import DesignRequest
from service.contracts.station_site import Ground as SaidGround
from service.contracts.station_site import GroundConstants
from service.contracts.stock import Conductor
from service.contracts.sweep import SweepRequest
from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.ground import GROUND_CLASSES, Ground
from worker.engine.ground.table import LOWEST_HEIGHT_WAVELENGTHS
from worker.engine.hung_wire import (
    GroundTables,
    HungWire,
    solve_together,
)
from worker.engine.insulation import Sleeve
from worker.engine.line_catalogue import FEED_LINES
from worker.engine.material import MATERIALS
from worker.engine.survey import survey_impedances
from worker.engine.thin_wire import LENGTH_RANGE_WAVELENGTHS
from worker.search.feeding import Feeding
from worker.search.space import BandGoal, FloatArray, SearchSpace, Solved, WireOffer

#: Tables reach this much beyond the longest wire looked at: a departure may be longer.
_TABLE_REACH = 1.1


@dataclass(frozen=True, slots=True)
class StockWire:
    """A conductor of the stock as the search sees it: the wire model of the engine."""

    hung: HungWire
    survey: bool = False

    @property
    def shortest_wavelengths(self) -> float:
        """Length in wavelengths from which the model holds."""
        return LENGTH_RANGE_WAVELENGTHS[0]

    @property
    def longest_wavelengths(self) -> float:
        """Length in wavelengths up to which the model holds."""
        return LENGTH_RANGE_WAVELENGTHS[1]

    @property
    def lowest_hz(self) -> float:
        """Frequency from which the model holds, whatever the length: the ground's, for a height."""
        if self.hung.grounds is None:
            return 0.0
        return LOWEST_HEIGHT_WAVELENGTHS * SPEED_OF_LIGHT_M_PER_S / self.hung.grounds.height_m

    def solve(self, length_m: FloatArray, frequency_hz: FloatArray) -> Solved:
        """Solve every pair of length (m) and frequency (Hz)."""
        found = self.hung.feed_impedance(length_m, frequency_hz, survey=self.survey)
        return Solved(found.impedance_ohm, found.estimated_error_ohm)


@dataclass(frozen=True, slots=True)
class Way:
    """One way to hang the wire: which conductor, how high (None in free space), fed where."""

    conductor: Conductor
    height_m: float | None
    feed_fraction: float


@dataclass(slots=True)
class Hanging:
    """Hangs wires for one request; ground tables are shared by all that need the same."""

    request: DesignRequest
    ways: tuple[Way, ...] = field(init=False)
    _tables: dict[tuple[Ground, float], GroundTables] = field(init=False, default_factory=dict)

    def __post_init__(self) -> None:
        """List the ways the request allows."""
        heights: tuple[float | None, ...] = self.request.site.heights_m() or (None,)
        self.ways = tuple(
            Way(conductor, height_m, fraction)
            for conductor, height_m, fraction in product(
                self.request.stock.choices(), heights, self.request.feed.feed_fractions()
            )
        )

    def space(self) -> SearchSpace:
        """What the request allows to vary, and what it wants served."""
        feed = self.request.feed
        line, lengths = feed.feed_line, self.request.lengths
        wires = [self.wire(way) for way in self.ways]
        hung = [wire.hung for wire in wires]
        return SearchSpace(
            bands=tuple(
                BandGoal(
                    name=band.name,
                    low_hz=band.low_mhz * 1e6,
                    high_hz=band.high_mhz * 1e6,
                    required=band.required,
                    weight=band.weight,
                    swr_limit=band.swr_limit,
                )
                for band in self.request.bands
            ),
            wires=tuple(
                WireOffer(wire, way.conductor.price_per_m, centred=way.feed_fraction == 0.5)
                for wire, way in zip(wires, self.ways, strict=True)
            ),
            site_longest_m=self.request.site.longest_wire_m,
            asked_m=None if lengths is None else (lengths.low_m, lengths.high_m),
            ratios=feed.transformer_ratios,
            feeding=Feeding(
                reference_ohm=feed.reference_ohm,
                line=None if line is None else FEED_LINES[line.line],
                line_length_m=0.0 if line is None else line.length_m,
                at_transmitter=feed.reference_point == "transmitter",
                matched=feed.matching == "per-band",
            ),
            survey=lambda length_m_hz, frequency_hz, careful: survey_impedances(
                hung, length_m_hz, frequency_hz, careful=careful
            ),
            together=lambda chosen, length_m, frequency_hz, survey: Solved(
                *solve_together(
                    [hung[index] for index in chosen], length_m, frequency_hz, survey=survey
                )
            ),
        )

    def wire(self, way: Way, ground: Ground | None = None) -> StockWire:
        """One way as a model, over the site's ground or another."""
        ground = ground or ground_of(self.request.site.ground)
        grounds = None
        if ground is not None and way.height_m is not None:
            reach_m = _TABLE_REACH * self._longest_read_m()
            key = (ground, way.height_m)
            grounds = self._tables.setdefault(key, GroundTables(ground, way.height_m, reach_m))
        hung = _hung(way.conductor, grounds)
        return StockWire(replace(hung, feed_fraction=way.feed_fraction))

    def _longest_read_m(self) -> float:
        """The longest wire that maps are read for.

        They are read at equal electrical length, at the low edge of a band for longer wire; and
        they cover a little more than the shortest wire that the models hold for.
        """
        bands = self.request.bands
        widest = max(band.high_mhz / band.low_mhz for band in bands)
        longest_wave_m = SPEED_OF_LIGHT_M_PER_S / (1e6 * min(band.low_mhz for band in bands))
        shortest_m = 2.0 * LENGTH_RANGE_WAVELENGTHS[0] * longest_wave_m
        return max(widest * self.request.site.longest_wire_m, shortest_m)


def swept_wire(request: SweepRequest) -> StockWire:
    """The one wire of a sweep."""
    ground, grounds = ground_of(request.ground), None
    if ground is not None and request.height_m is not None:
        reach_m = _TABLE_REACH * (request.length_m or request.high)
        grounds = GroundTables(ground, request.height_m, reach_m)
    hung = _hung(request.conductor, grounds)
    return StockWire(
        replace(hung, feed_fraction=request.feed_fraction, temperature_c=request.temperature_c)
    )


def ground_of(said: SaidGround) -> Ground | None:
    """The engine's ground for what a request says; None in free space."""
    if isinstance(said, GroundConstants):
        return Ground(said.relative_permittivity, said.conductivity_s_per_m)
    if said == "free-space":
        return None
    return GROUND_CLASSES[said]


def hung_wire(conductor: Conductor, grounds: GroundTables | None, feed_fraction: float) -> HungWire:
    """The engine's wire for a conductor, its ground and the place of its feed."""
    return replace(_hung(conductor, grounds), feed_fraction=feed_fraction)


def _hung(conductor: Conductor, grounds: GroundTables | None) -> HungWire:
    radius_m = 0.5e-3 * conductor.bare_diameter_mm
    sleeve = None
    if conductor.insulation is not None:
        sleeve = Sleeve(
            radius_m + 1e-3 * conductor.insulation.thickness_mm,
            conductor.insulation.relative_permittivity,
            conductor.insulation.loss_tangent,
        )
    return HungWire(radius_m, MATERIALS[conductor.material], sleeve, grounds)
