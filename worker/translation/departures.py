"""The ways in which a wire as hung may differ from the plan."""

from __future__ import annotations

from dataclasses import replace
from math import sqrt
from typing import Final

from service.contracts.quantities import wavelength_m
from service.contracts.request import LOWEST_HEIGHT_WAVELENGTHS, Tolerances
from worker.engine.ground import Ground
from worker.search.steadiness import Departure
from worker.translation.wires import Hanging, StockWire, Way, ground_of

#: Relative permittivity of ground stays between that of a vacuum and of cold water.
_LEAST_PERMITTIVITY: Final = 1.0
_MOST_PERMITTIVITY: Final = 88.0


def departures_of(hanging: Hanging, way: Way) -> tuple[Departure, ...]:
    """Every departure the request's tolerances tell of; none without tolerances."""
    tolerances = hanging.request.tolerances
    if tolerances is None:
        return ()
    return (
        *_cut(hanging, way, tolerances),
        *_higher_and_lower(hanging, way, tolerances),
        *_wetter_and_drier(hanging, way, tolerances),
        *_other_insulation(hanging, way, tolerances),
    )


def _surveyed(wire: StockWire) -> StockWire:
    """The wire solved no closer than a survey: what departs by a hundredth need be no closer."""
    return replace(wire, survey=True)


def _cut(hanging: Hanging, way: Way, tolerances: Tolerances) -> list[Departure]:
    percent = tolerances.cutting_percent
    if percent == 0.0:
        return []
    wire = _surveyed(hanging.wire(way))
    return [
        Departure(f"{percent:g} % longer", wire, 1.0 + percent / 100.0),
        Departure(f"{percent:g} % shorter", wire, 1.0 - percent / 100.0),
    ]


def _higher_and_lower(hanging: Hanging, way: Way, tolerances: Tolerances) -> list[Departure]:
    by_m = tolerances.height_m
    if way.height_m is None or by_m == 0.0:
        return []
    bands = hanging.request.bands
    longest_wave_m = wavelength_m(min(band.low_mhz for band in bands))
    lowest_m = max(0.5 * way.height_m, LOWEST_HEIGHT_WAVELENGTHS * longest_wave_m)
    heights = [(f"{by_m:g} m higher", way.height_m + by_m)]
    # Lower than that it would be another site, or one that the ground's model does not cover.
    if way.height_m - by_m >= lowest_m:
        heights.append((f"{by_m:g} m lower", way.height_m - by_m))
    return [
        Departure(what, _surveyed(hanging.wire(replace(way, height_m=height_m))))
        for what, height_m in heights
    ]


def _wetter_and_drier(hanging: Hanging, way: Way, tolerances: Tolerances) -> list[Departure]:
    ground, factor = ground_of(hanging.request.site.ground), tolerances.ground_factor
    if ground is None or ground.is_perfect or factor == 1.0:
        return []
    return [
        Departure(f"{name} ground", _surveyed(hanging.wire(way, _moistened(ground, by))))
        for name, by in (("wetter", factor), ("drier", 1.0 / factor))
    ]


def _other_insulation(hanging: Hanging, way: Way, tolerances: Tolerances) -> list[Departure]:
    insulation, percent = way.conductor.insulation, tolerances.insulation_percent
    if insulation is None or percent == 0.0:
        return []
    departures: list[Departure] = []
    for name, by in (("denser", 1.0 + percent / 100.0), ("lighter", 1.0 - percent / 100.0)):
        permittivity = max(1.0, insulation.relative_permittivity * by)
        other = insulation.model_copy(update={"relative_permittivity": permittivity})
        conductor = way.conductor.model_copy(update={"insulation": other})
        wire = _surveyed(hanging.wire(replace(way, conductor=conductor)))
        departures.append(Departure(f"{name} insulation", wire))
    return departures


def _moistened(ground: Ground, factor: float) -> Ground:
    """The ground with more or less water: conductivity by a factor, permittivity by its root."""
    most = max(_MOST_PERMITTIVITY, ground.relative_permittivity)
    changed = ground.relative_permittivity * sqrt(factor)
    return replace(
        ground,
        relative_permittivity=min(max(changed, _LEAST_PERMITTIVITY), most),
        conductivity_s_per_m=ground.conductivity_s_per_m * factor,
    )
