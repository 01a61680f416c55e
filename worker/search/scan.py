"""The scan: every length of every conductor at every ratio, read from maps of impedance.

Deterministic: the same space gives the same picks, for nothing in it is drawn by chance and
ties are broken by length, then by the order of conductors and ratios.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np

from worker.search.impedance_map import BandMap, map_band
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


@dataclass(frozen=True, slots=True)
class WireMaps:
    """Maps of one conductor, one for each band of a search space."""

    space: SearchSpace
    maps: tuple[BandMap, ...]

    def impedance_ohm(self, length_m: FloatArray) -> ComplexArray:
        """Impedance in Ω over bands, grid frequencies and lengths; shape (b, p, n)."""
        return np.array(
            [
                each.impedance_ohm(length_m, band.grid_hz())
                for each, band in zip(self.maps, self.space.bands, strict=True)
            ]
        )


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
    maps: list[WireMaps] = []
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
        solves=sum(each.solves for wire_maps in maps for each in wire_maps.maps),
        largest_miss=max(each.largest_miss for wire_maps in maps for each in wire_maps.maps),
    )


def cutting_step_m(length_m: float) -> float:
    """The fineness a wire of that length is cut to: 1 cm, or 1 mm below 5 m."""
    return 0.01 if length_m >= 5.0 else 0.001


def _map_bands(
    space: SearchSpace, wire: WireModel, name: str, progress: ProgressCallback
) -> WireMaps:
    maps: list[BandMap] = []
    for index, band in enumerate(space.bands):
        progress(index / len(space.bands), f"mapping {name} on {band.name}")
        maps.append(map_band(wire, band.low_hz, band.high_hz, space.shortest_m, space.longest_m))
    return WireMaps(space, tuple(maps))


def _refine(space: SearchSpace, maps: WireMaps, pick: Pick, lengths_m: FloatArray) -> Pick:
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
