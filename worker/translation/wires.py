"""From a request to what is searched: conductors as hung wires, bands as goals."""

from __future__ import annotations

from dataclasses import dataclass, replace

from service.contracts.request import DesignRequest
from service.contracts.station_site import Ground as SaidGround
from service.contracts.station_site import GroundConstants
from service.contracts.stock import Conductor
from service.contracts.sweep import SweepRequest
from worker.engine.ground import GROUND_CLASSES, Ground
from worker.engine.hung_wire import GroundTables, HungWire
from worker.engine.insulation import Sleeve
from worker.engine.material import MATERIALS
from worker.engine.thin_wire.batch import LENGTH_RANGE_WAVELENGTHS
from worker.search.space import BandGoal, FloatArray, SearchSpace, Solved

#: Tables reach beyond the longest wire, for maps are read at equal electrical length over a
#: band, and the length a band would want by itself may be a little beyond the site.
_TABLE_REACH = 1.6


@dataclass(frozen=True, slots=True)
class StockWire:
    """A conductor of the stock as the search sees it: the wire model of the engine."""

    hung: HungWire

    @property
    def shortest_wavelengths(self) -> float:
        """Length in wavelengths from which the model holds."""
        return LENGTH_RANGE_WAVELENGTHS[0]

    @property
    def longest_wavelengths(self) -> float:
        """Length in wavelengths up to which the model holds."""
        return LENGTH_RANGE_WAVELENGTHS[1]

    def solve(self, length_m: FloatArray, frequency_hz: FloatArray) -> Solved:
        """Solve every pair of length (m) and frequency (Hz)."""
        found = self.hung.feed_impedance(length_m, frequency_hz)
        return Solved(found.impedance_ohm, found.estimated_error_ohm)


def search_space(request: DesignRequest) -> SearchSpace:
    """What a request allows to vary, and what it wants served."""
    site = request.site
    grounds = _ground_tables(site.ground, site.height_m, site.longest_wire_m)
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
            for band in request.bands
        ),
        wires=tuple(StockWire(_hung(each, grounds)) for each in request.stock.choices()),
        site_longest_m=site.longest_wire_m,
        ratios=request.feed.transformer_ratios,
        reference_ohm=request.feed.reference_ohm,
    )


def swept_wire(request: SweepRequest) -> StockWire:
    """The one wire of a sweep."""
    longest_m = request.length_m or request.high
    grounds = _ground_tables(request.ground, request.height_m, longest_m)
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


def _ground_tables(
    said: SaidGround, height_m: float | None, longest_m: float
) -> GroundTables | None:
    ground = ground_of(said)
    if ground is None or height_m is None:
        return None
    return GroundTables(ground, height_m, _TABLE_REACH * longest_m)


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
