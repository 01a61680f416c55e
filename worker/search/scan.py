"""The scan: every length of every wire at every ratio, read from maps of impedance.

Deterministic: the same space gives the same answer, for nothing in it is drawn by chance and
ties are broken by length, then by the order of wires and ratios.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Final

import numpy as np

from worker.search.impedance_map import BandMap, map_band_together
from worker.search.ranking import Contender, Pick, best_first, contenders_of, rank_keys
from worker.search.scoring import Score, merit, score
from worker.search.space import ComplexArray, FloatArray, SearchSpace

#: Called with the part done (0 to 1) and what is being done, in words.
ProgressCallback = Callable[[float, str], None]

#: Around a pick the map is read once more at this many finer lengths.
FINE_POINTS: Final = 81

#: Mapping takes about this part of the time, comparing the rest.
_MAP_PART: Final = 0.75

#: Lengths scored at a time: what they need then stays in the processor's cache.
_CHUNK_LENGTHS: Final = 2048


@dataclass(frozen=True, slots=True)
class WireMaps:
    """Maps of one wire, one for each band of a search space."""

    space: SearchSpace
    maps: tuple[BandMap, ...]

    def impedance_ohm(self, length_m: FloatArray) -> ComplexArray:
        """Impedance in Ω over bands, grid frequencies and lengths; shape (b, p, n)."""
        pairs = zip(self.maps, self.space.bands, strict=True)
        return np.array([each.impedance_ohm(length_m, band.grid_hz()) for each, band in pairs])

    def over_even_ratios(self, length_m: FloatArray) -> ComplexArray:
        """The same for lengths in an even ratio, at a small part of the cost."""
        pairs = zip(self.maps, self.space.bands, strict=True)
        return np.array([each.over_even_ratios(length_m, band.grid_hz()) for each, band in pairs])


@dataclass(frozen=True, slots=True)
class Closest:
    """For each band the wire, of all, whose SWR over it is lowest where it is highest."""

    swr_worst: tuple[float, ...]
    picks: tuple[Pick, ...]


@dataclass(frozen=True, slots=True)
class Scan:
    """What the scan found and what it cost.

    Attributes
    ----------
    space : SearchSpace
    contenders : tuple of Contender
        The local optima, best first.
    closest : Closest
    maps : tuple of WireMaps
        One for each wire of the space.
    combinations : int
        How many (wire, ratio, length) were compared.
    solves : int
        Direct solves behind the maps.
    largest_miss : float
        Largest departure of any map from fresh solves, relative to |Z|.
    """

    space: SearchSpace
    contenders: tuple[Contender, ...]
    closest: Closest
    maps: tuple[WireMaps, ...]
    combinations: int
    solves: int
    largest_miss: float

    def score_at(self, pick: Pick, length_m: FloatArray) -> Score:
        """The score of a pick's wire and ratio at other lengths, from its maps."""
        impedance = self.maps[pick.wire].impedance_ohm(length_m)
        return score(impedance, self.space.bands, self.space.feeding, pick.ratio)

    def refined(self, pick: Pick) -> Pick:
        """The best length that can be cut, between a pick's neighbours in the scan."""
        lengths_m = self.space.lengths_m()
        index = int(np.searchsorted(lengths_m, pick.length_m))
        low_m = float(lengths_m[max(index - 1, 0)])
        high_m = float(lengths_m[min(index + 1, len(lengths_m) - 1)])
        step_m = cutting_step_m(pick.length_m)
        fine_m = np.linspace(low_m, high_m, FINE_POINTS)
        cut_m = np.unique(np.round(fine_m / step_m)) * step_m
        cut_m = cut_m[(cut_m >= self.space.shortest_m) & (cut_m <= self.space.longest_m)]
        if cut_m.size == 0:
            return pick
        cost = cut_m * (self.space.wires[pick.wire].price_per_m or 0.0)
        keys = rank_keys(merit(self.score_at(pick, cut_m), self.space.bands), cut_m, cost)
        return Pick(pick.wire, pick.ratio, float(cut_m[best_first(keys)[0]]))


def scan(space: SearchSpace, progress: ProgressCallback) -> Scan:
    """Compare all wires of a search space.

    Parameters
    ----------
    space : SearchSpace
    progress : callable
        Called with the part done, from 0 to 1, and the step in words.
    """
    lengths_m = space.lengths_m()
    contenders: list[Contender] = []
    closest = _ClosestSoFar(len(space.bands))
    maps = _map_wires(space, progress)
    for index, wire in enumerate(space.wires):
        part = _MAP_PART + (1.0 - _MAP_PART) * index / len(space.wires)
        progress(part, f"comparing {len(lengths_m)} lengths of wire {index + 1}")
        for ratio, scored in _scores(space, maps[index], lengths_m):
            closest.see(scored, index, ratio, lengths_m)
            contenders += contenders_of(
                scored,
                merit(scored, space.bands),
                lengths_m,
                space.bands,
                index,
                ratio,
                wire.price_per_m or 0.0,
            )
    return Scan(
        space=space,
        contenders=tuple(sorted(contenders, key=lambda each: each.key)),
        closest=closest.found(),
        maps=maps,
        combinations=len(lengths_m) * len(space.wires) * len(space.ratios),
        solves=sum(each.solves for wire_maps in maps for each in wire_maps.maps),
        largest_miss=max(each.largest_miss for wire_maps in maps for each in wire_maps.maps),
    )


def cutting_step_m(length_m: float) -> float:
    """The fineness a wire of that length is cut to: 1 cm, or 1 mm below 5 m."""
    return 0.01 if length_m >= 5.0 else 0.001


class _ClosestSoFar:
    """Keeps, for each band, the wire that comes closest to serving it by itself."""

    def __init__(self, bands: int) -> None:
        self._swr = [np.inf] * bands
        self._picks = [Pick(0, 1.0, 0.0)] * bands

    def see(self, scored: Score, wire: int, ratio: float, lengths_m: FloatArray) -> None:
        lowest = np.argmin(scored.swr_worst, axis=1)
        for band, index in enumerate(lowest.tolist()):
            if scored.swr_worst[band, index] < self._swr[band]:
                self._swr[band] = float(scored.swr_worst[band, index])
                self._picks[band] = Pick(wire, ratio, float(lengths_m[index]))

    def found(self) -> Closest:
        return Closest(tuple(self._swr), tuple(self._picks))


def _map_wires(space: SearchSpace, progress: ProgressCallback) -> tuple[WireMaps, ...]:
    """The maps of all wires, band by band, for wires are solved together."""
    by_band: list[tuple[BandMap, ...]] = []
    shortest = max(wire.model.shortest_wavelengths for wire in space.wires)
    for index, band in enumerate(space.bands):
        progress(_MAP_PART * index / len(space.bands), f"solving wires on {band.name}")
        limits_m = (space.shortest_m, space.longest_m)

        def survey(length_m: FloatArray, frequency_hz: float) -> ComplexArray:
            progress(_MAP_PART * index / len(space.bands), f"solving wires on {band.name}")  # noqa: B023  # used within its own round only
            return space.surveyed(length_m, frequency_hz)

        by_band.append(map_band_together(survey, shortest, band.low_hz, band.high_hz, limits_m))
    return tuple(WireMaps(space, maps) for maps in zip(*by_band, strict=True))


def _scores(
    space: SearchSpace, maps: WireMaps, lengths_m: FloatArray
) -> Iterator[tuple[float, Score]]:
    """The score of one wire at every ratio, over all lengths of the scan."""
    impedance = maps.over_even_ratios(lengths_m)
    for ratio in space.ratios:
        parts = [
            score(
                impedance[:, :, start : start + _CHUNK_LENGTHS], space.bands, space.feeding, ratio
            )
            for start in range(0, len(lengths_m), _CHUNK_LENGTHS)
        ]
        yield ratio, joined(parts)


def joined(parts: list[Score]) -> Score:
    """Scores of neighbouring runs of lengths as one."""
    return Score(
        np.concatenate([part.served_fraction for part in parts], axis=1),
        np.concatenate([part.swr_worst for part in parts], axis=1),
        np.concatenate([part.loss_db for part in parts], axis=1),
    )
