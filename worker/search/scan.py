"""The scan: every length of every conductor at every ratio, read from maps of impedance.

Deterministic: the same space gives the same picks, for nothing in it is drawn by chance and
ties are broken by length, then by the order of conductors and ratios.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.search.impedance_map import ImpedanceMap, map_over_length
from worker.search.ranking import (
    Contender,
    Pick,
    best_first,
    contenders_of,
    distinct_leaders,
    rank_keys,
)
from worker.search.scoring import merit, score, swr_over_bands
from worker.search.space import ComplexArray, FloatArray, SearchSpace, WireModel

#: Called with the part done (0 to 1) and what is being done, in words.
ProgressCallback = Callable[[float, str], None]

#: Around a pick the map is read once more at this many finer lengths.
FINE_POINTS: Final = 81

#: Stands in for the impedance of a wire too long for the model: it serves no band.
_OPEN_CIRCUIT_OHM: Final = 1e9


@dataclass(frozen=True, slots=True)
class BandMaps:
    """Maps of one conductor: for each band, one map per frequency of its grid."""

    maps: tuple[tuple[ImpedanceMap | None, ...], ...]

    def impedance_ohm(self, length_m: FloatArray) -> ComplexArray:
        """Impedance in Ω over bands, grid frequencies and lengths; shape (b, p, n)."""
        return np.array([[_read(each, length_m) for each in band_maps] for band_maps in self.maps])

    @property
    def solves(self) -> int:
        """Direct solves spent on these maps."""
        return sum(each.solves for each in self._built())

    @property
    def largest_miss(self) -> float:
        """Largest departure of a map from fresh solves, relative to |Z|."""
        return max((each.largest_miss for each in self._built()), default=0.0)

    def _built(self) -> list[ImpedanceMap]:
        return [each for band_maps in self.maps for each in band_maps if each is not None]


@dataclass(frozen=True, slots=True)
class Scan:
    """What the scan found and what it cost.

    Attributes
    ----------
    picks : tuple of Pick
        The distinct leaders, best first.
    combinations : int
        How many (conductor, ratio, length) were compared.
    solves : int
        Direct solves behind the maps.
    largest_miss : float
        Largest departure of any map from fresh solves, relative to |Z|.
    """

    picks: tuple[Pick, ...]
    combinations: int
    solves: int
    largest_miss: float


def scan(space: SearchSpace, most: int, progress: ProgressCallback) -> Scan:
    """Find the distinct leaders among all wires of a search space.

    Parameters
    ----------
    space : SearchSpace
    most : int
        How many leaders to return at the most.
    progress : callable
        Called with the part done, from 0 to 1, and the step in words.
    """
    lengths_m = space.lengths_m()
    contenders: list[Contender] = []
    maps: list[BandMaps] = []
    for index, wire in enumerate(space.wires):

        def wire_progress(part: float, step: str, done: int = index) -> None:
            progress((done + part) / len(space.wires), step)

        maps.append(_map_bands(space, wire, f"conductor {index + 1}", wire_progress))
        impedance = maps[-1].impedance_ohm(lengths_m)
        for ratio in space.ratios:
            swr = swr_over_bands(impedance, space.reference_ohm, ratio)
            scored = score(swr, space.bands)
            gained = merit(scored, space.bands)
            contenders += contenders_of(scored, gained, lengths_m, space.bands, index, ratio)
    picks = distinct_leaders(contenders, most)
    return Scan(
        picks=tuple(_refine(space, maps[pick.wire], pick, lengths_m) for pick in picks),
        combinations=len(lengths_m) * len(space.wires) * len(space.ratios),
        solves=sum(each.solves for each in maps),
        largest_miss=max(each.largest_miss for each in maps),
    )


def cutting_step_m(length_m: float) -> float:
    """The fineness a wire of that length is cut to: 1 cm, or 1 mm below 5 m."""
    return 0.01 if length_m >= 5.0 else 0.001


def _map_bands(
    space: SearchSpace, wire: WireModel, name: str, progress: ProgressCallback
) -> BandMaps:
    rows: list[tuple[ImpedanceMap | None, ...]] = []
    for index, band in enumerate(space.bands):
        progress(index / len(space.bands), f"mapping {name} on {band.name}")
        rows.append(tuple(_map_one(space, wire, float(f)) for f in band.grid_hz()))
    return BandMaps(tuple(rows))


def _map_one(space: SearchSpace, wire: WireModel, frequency_hz: float) -> ImpedanceMap | None:
    """The map at one frequency, or None where even the shortest wire is too long for it."""
    limit_m = wire.longest_wavelengths * SPEED_OF_LIGHT_M_PER_S / frequency_hz
    high_m = min(space.longest_m, limit_m)
    if high_m <= space.shortest_m:
        return None

    return map_over_length(wire, frequency_hz, space.shortest_m, high_m)


def _read(length_map: ImpedanceMap | None, length_m: FloatArray) -> ComplexArray:
    impedance = np.full(length_m.shape, _OPEN_CIRCUIT_OHM, dtype=np.complex128)
    if length_map is not None:
        inside = length_m <= length_map.high
        impedance[inside] = length_map.impedance_ohm(length_m[inside])
    return impedance


def _refine(space: SearchSpace, maps: BandMaps, pick: Pick, lengths_m: FloatArray) -> Pick:
    """The best length that can be cut, between the neighbours of a pick."""
    index = int(np.searchsorted(lengths_m, pick.length_m))
    low_m = float(lengths_m[max(index - 1, 0)])
    high_m = float(lengths_m[min(index + 1, len(lengths_m) - 1)])
    step_m = cutting_step_m(pick.length_m)
    fine_m = np.linspace(low_m, high_m, FINE_POINTS)
    # Down at the upper limit, so that the wire still fits the span.
    cut_m = np.unique(np.floor(fine_m / step_m + 1e-9)) * step_m
    cut_m = cut_m[cut_m >= space.shortest_m]
    if cut_m.size == 0:
        return pick
    swr = swr_over_bands(maps.impedance_ohm(cut_m), space.reference_ohm, pick.ratio)
    keys = rank_keys(merit(score(swr, space.bands), space.bands), cut_m)
    best_m = float(cut_m[best_first(keys)[0]])
    return Pick(pick.wire, pick.ratio, best_m)
