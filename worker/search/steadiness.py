"""How a wire holds up when what is hung departs from what was planned."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from worker.search.ranking import Pick
from worker.search.scoring import FULLY_SERVED, Merit, Score, merit, score, stacked
from worker.search.space import BandGoal, FloatArray, SearchSpace, WireModel, points_of

#: Frequencies per band a departure is judged at, by direct solves: at least edges, centre and
#: between, and no further apart than this part of their frequency.
POINTS: Final = 5
_FURTHEST_APART: Final = 0.04

#: Stands for a band that is not judged: it serves nothing.
_UNSERVED_OHM: Final = complex(1e-3, -1e5)


@dataclass(frozen=True, slots=True)
class Departure:
    """One way the wire may differ: in words, the wire then, and its length over the planned."""

    what: str
    model: WireModel
    length_ratio: float = 1.0


@dataclass(frozen=True, slots=True)
class Departed:
    """How the wire fares then: one score of one wire."""

    what: str
    scored: Score
    merit: Merit

    def key(self) -> tuple[int, float, float]:
        """Sorts departures, the worst last."""
        return (
            -int(self.merit.required_served[0]),
            -float(self.merit.weighted_served[0]),
            float(self.merit.swr_worst[0]),
        )


@dataclass(frozen=True, slots=True)
class Held:
    """A wire under all its departures; ``worst`` is the one it fares worst in."""

    departed: tuple[Departed, ...]
    worst: Departed
    solves: int

    def swr_of_served(self, planned: FloatArray) -> float:
        """Largest SWR that any departure brings to a band served whole as planned.

        Parameters
        ----------
        planned : ndarray, shape (b,)
            Part of each band served as planned.
        """
        whole = planned >= FULLY_SERVED
        if not whole.any():
            return float(min(each.scored.swr_worst.min() for each in self.departed))
        return float(max(each.scored.swr_worst[whole, 0].max() for each in self.departed))


def hold(
    space: SearchSpace,
    pick: Pick,
    departures: tuple[Departure, ...],
    planned: FloatArray | None = None,
    tell: Callable[[], None] = lambda: None,
) -> Held:
    """Judge a wire under every departure, by direct solves.

    Parameters
    ----------
    space : SearchSpace
    pick : Pick
    departures : tuple of Departure
        At least one.
    planned : ndarray, shape (b,), optional
        Part of each band served as planned: one that is not served at all is not solved again,
        and counts as unserved in every departure. By default all are solved.
    tell : callable
        Called before every departure, as a word of progress.
    """
    judged = np.full(len(space.bands), fill_value=True) if planned is None else planned > 0.0
    departed: list[Departed] = []
    for each in departures:
        tell()
        scored = _scored(space, pick, each, judged)
        departed.append(Departed(each.what, scored, merit(scored, space.bands)))
    worst = max(departed, key=Departed.key)
    solves = sum(_grid_hz(space, band).size for band in _those(space.bands, judged))
    return Held(tuple(departed), worst, solves * len(departures))


def _scored(
    space: SearchSpace, pick: Pick, departure: Departure, judged: NDArray[np.bool_]
) -> Score:
    """The score of one wire under one departure, solved on the bands judged."""
    at_hz = np.concatenate(
        [np.empty(0), *(_grid_hz(space, each) for each in _those(space.bands, judged))]
    )
    length_m = np.full(at_hz.size, pick.length_m * departure.length_ratio)
    solved = list(departure.model.solve(length_m, at_hz).impedance_ohm) if at_hz.size else []
    parts: list[Score] = []
    for band, is_judged in zip(space.bands, judged, strict=True):
        points = _grid_hz(space, band).size
        impedance = np.full(points, _UNSERVED_OHM)
        if is_judged:
            impedance[:], solved = solved[:points], solved[points:]
        parts.append(score(impedance[None, :, None], (band,), space.feeding, pick.ratio))
    return stacked(parts)


def _those(bands: tuple[BandGoal, ...], judged: NDArray[np.bool_]) -> list[BandGoal]:
    return [band for band, is_judged in zip(bands, judged, strict=True) if is_judged]


def _grid_hz(space: SearchSpace, band: BandGoal) -> FloatArray:
    return band.grid_hz(points_of(band, space.feeding, _FURTHEST_APART, POINTS))
