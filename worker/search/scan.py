"""The scan: every length of every wire at every ratio, read from maps of impedance.

Deterministic: the same space gives the same answer, for nothing in it is drawn by chance and
ties are broken by length, then by the order of wires and ratios.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from typing import Final

import numpy as np

from worker.engine.errors import NotConverged
from worker.search.impedance_map import (
    TOLERANCE_RELATIVE,
    BandMap,
    departure,
    map_band_together,
)
from worker.search.ranking import Contender, Pick, best_first, contenders_of, rank_keys
from worker.search.scoring import Score, merit, score, scores
from worker.search.space import BandGoal, ComplexArray, FloatArray, SearchSpace

#: Called with the part done (0 to 1) and what is being done, in words.
ProgressCallback = Callable[[float, str], None]

#: Mapping takes about this part of the time, comparing the rest.
_MAP_PART: Final = 0.75

#: A band's maps are held to so many fresh solves, at least so many a map, this far into the
#: band, at lengths by this section.
_PROBES: Final = 12
_LEAST_PROBES: Final = 2
_PROBE_AT: Final = 0.23
_GOLDEN: Final = 0.618033988749895

#: Whether wires are solved with care, and how many times as many nodes as usual a band is
#: mapped on over frequency and over length: tried in turn until fresh solves agree. Further
#: frequencies cost little, and are what high wires over wide bands want.
_ATTEMPTS: Final = (
    (False, (1, 1)),
    (False, (2, 1)),
    (True, (2, 1)),
    (True, (2, 2)),
    (True, (4, 4)),
)

#: Wires are solved so many at a time, with a word of progress between.
_SOLVED_AT_A_TIME: Final = 250


@dataclass(frozen=True, slots=True)
class WireMaps:
    """Maps of one wire, one for each band of a search space."""

    space: SearchSpace
    maps: tuple[BandMap, ...]

    def impedance_ohm(self, length_m: FloatArray, points: int) -> ComplexArray:
        """Impedance in Ω over bands, p even frequencies and n lengths; shape (b, p, n)."""
        pairs = zip(self.maps, self._grids_hz(points), strict=True)
        return np.array([each.impedance_ohm(length_m, grid_hz) for each, grid_hz in pairs])

    def over_even_ratios(self, length_m: FloatArray, points: int) -> ComplexArray:
        """The same for lengths in an even ratio, at a small part of the cost."""
        pairs = zip(self.maps, self._grids_hz(points), strict=True)
        return np.array([each.over_even_ratios(length_m, grid_hz) for each, grid_hz in pairs])

    def _grids_hz(self, points: int) -> list[FloatArray]:
        return [band.grid_hz(points) for band in self.space.bands]


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
        Largest departure of any map from fresh, full solves between its own, relative to |Z|.
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
        impedance = self.maps[pick.wire].impedance_ohm(length_m, self.space.points)
        return score(impedance, self.space.bands, self.space.feeding, pick.ratio)

    def refined(self, pick: Pick) -> Pick:
        """The best length that can be cut, between a pick's neighbours in the scan."""
        lengths_m = self.space.lengths_m()
        step = float(lengths_m[1] / lengths_m[0])
        low_m, high_m = pick.length_m / step, pick.length_m * step
        per_m = cuts_per_m(pick.length_m)
        # To either side of the neighbours too: the nearest cut may lie beyond a band's edge.
        cuts = np.arange(np.floor(low_m * per_m), np.ceil(high_m * per_m) + 1.0)
        cut_m = cuts / per_m
        cut_m = cut_m[(cut_m >= self.space.shortest_m) & (cut_m <= self.space.longest_m)]
        if cut_m.size == 0:
            return pick
        cost = cut_m * (self.space.wires[pick.wire].price_per_m or 0.0)
        scored = self.score_at(pick, cut_m)
        keys = rank_keys(merit(scored, self.space.bands), cut_m, cost)
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
    maps, largest_miss = _map_wires(space, progress)
    for index, wire in enumerate(space.wires):
        part = _MAP_PART + (1.0 - _MAP_PART) * index / len(space.wires)
        step = f"comparing {len(lengths_m)} lengths of wire {index + 1} of {len(space.wires)}"
        progress(part, step)
        impedance = maps[index].over_even_ratios(lengths_m, space.points)
        by_ratio = scores(impedance, space.bands, space.feeding, space.ratios)
        for ratio, scored in zip(space.ratios, by_ratio, strict=True):
            progress(part, step)
            closest.see(scored, index, ratio, lengths_m)
            contenders += contenders_of(
                scored,
                merit(scored, space.bands),
                lengths_m,
                space.bands,
                (index, wire),
                ratio,
            )
    return Scan(
        space=space,
        contenders=tuple(sorted(contenders, key=lambda each: each.key)),
        closest=closest.found(),
        maps=maps,
        combinations=len(lengths_m) * len(space.wires) * len(space.ratios),
        solves=sum(each.solves + _probes(space) for wire_maps in maps for each in wire_maps.maps),
        largest_miss=largest_miss,
    )


def cuts_per_m(length_m: float) -> int:
    """The fineness a wire of that length is cut to: 1 cm, or 1 mm below 5 m."""
    return 100 if length_m >= 5.0 else 1000


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


def _map_wires(
    space: SearchSpace, progress: ProgressCallback
) -> tuple[tuple[WireMaps, ...], float]:
    """The maps of all wires, band by band, for wires are solved together; and their miss.

    Maps that fresh solves do not bear out are made again, with more and more care.
    """
    todo = list(range(len(space.bands)))
    rough: set[int] = set()
    by_band: dict[int, tuple[BandMap, ...]] = {}
    misses = [np.inf] * len(space.bands)
    for careful, finer in _ATTEMPTS:
        mapped: dict[int, tuple[BandMap, ...]] = {}
        for done, index in enumerate(todo):
            # What a survey is too rough for, more frequencies do not mend.
            if index in rough and not careful:
                continue
            band = space.bands[index]
            part = _MAP_PART * (done + len(by_band)) / (len(todo) + len(by_band))
            tell = partial(progress, part, f"solving wires on {band.name}")
            maps = _map_band(space, band, tell, careful=careful, finer=finer)
            if maps is None:
                rough.add(index)
            else:
                mapped[index] = maps
            tell()
        for index, (within, miss) in _probe(space, mapped).items():
            misses[index] = max(miss, *(each.largest_miss for each in mapped[index]))
            if within:
                by_band[index] = mapped[index]
        todo = [index for index in todo if index not in by_band]
        if not todo:
            in_order = [by_band[index] for index in range(len(space.bands))]
            wires = tuple(WireMaps(space, maps) for maps in zip(*in_order, strict=True))
            return wires, max(misses)
    worst = max(todo, key=lambda index: misses[index])
    name = space.bands[worst].name
    raise NotConverged(f"impedance map on {name}", misses[worst], TOLERANCE_RELATIVE)


def _map_band(
    space: SearchSpace,
    band: BandGoal,
    tell: Callable[[], None],
    *,
    careful: bool,
    finer: tuple[int, int],
) -> tuple[BandMap, ...] | None:
    """The maps of all wires on one band; None where a survey is too rough to be mapped."""
    shortest = max(wire.model.shortest_wavelengths for wire in space.wires)

    def survey(length_m_hz: FloatArray, frequency_hz: FloatArray) -> ComplexArray:
        columns = max(1, _SOLVED_AT_A_TIME // (len(space.wires) * len(frequency_hz)))
        parts = []
        for start in range(0, len(length_m_hz), columns):
            tell()
            some = length_m_hz[start : start + columns]
            parts.append(space.surveyed(some, frequency_hz, careful=careful))
        return np.concatenate(parts, axis=2)

    limits_m = (space.shortest_m, space.longest_m)
    try:
        return map_band_together(survey, shortest, band.low_hz, band.high_hz, limits_m, finer)
    except NotConverged:
        if careful:
            raise
        return None


def _probe(
    space: SearchSpace, by_band: dict[int, tuple[BandMap, ...]]
) -> dict[int, tuple[bool, float]]:
    """Hold maps to fresh, full solves where they are least sure: between their frequencies.

    Returns
    -------
    dict
        For each band whether every map is within the tolerance, and the largest miss relative
        to |Z|.
    """
    # Spread evenly in logarithm by the golden section, and differently for each wire.
    places = 1.0 + np.arange(_probes(space)) + 0.5 * np.arange(len(space.wires))[:, None]
    spread = np.modf(places * _GOLDEN)[0]
    at_hz, length_m = [], []
    for index, maps in by_band.items():
        band = space.bands[index]
        between_hz = band.low_hz + _PROBE_AT * (band.high_hz - band.low_hz)
        lowest_m = max(space.shortest_m, maps[0].shortest_m_hz / between_hz)
        highest_m = max(space.longest_m, 1.01 * lowest_m)
        at_hz.append(between_hz)
        length_m.append(lowest_m * (highest_m / lowest_m) ** spread)
    if not at_hz:
        return {}
    all_m = np.array(length_m)
    wires = np.broadcast_to(np.arange(len(space.wires))[:, None], all_m.shape)
    all_hz = np.broadcast_to(np.array(at_hz)[:, None, None], all_m.shape)
    solved = space.solved_together(wires.ravel().tolist(), all_m.ravel(), all_hz.ravel())
    fresh = solved.impedance_ohm.reshape(all_m.shape)
    found = {}
    for row, (index, maps) in enumerate(by_band.items()):
        pairs = zip(maps, all_m[row], strict=True)
        hertz = np.array([at_hz[row]])
        read = np.array([each.impedance_ohm(row_m, hertz)[0] for each, row_m in pairs])
        found[index] = departure(read, fresh[row])
    return found


def _probes(space: SearchSpace) -> int:
    """How many fresh solves each map of a space is held to."""
    return max(_LEAST_PROBES, _PROBES // len(space.wires))
