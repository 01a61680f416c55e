"""How a wire holds up when what is hung departs from what was planned."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np

from worker.search.ranking import Pick
from worker.search.scoring import FULLY_SERVED, Merit, Score, merit, score
from worker.search.space import POINTS_PER_BAND, FloatArray, SearchSpace, WireModel

#: Frequencies per band a departure is judged at, by direct solves: edges, centre and between;
#: on wide bands as many as the scan looks at.
POINTS: Final = 5

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
    points = POINTS if space.points == POINTS_PER_BAND else space.points
    grids = np.array([band.grid_hz(points) for band in space.bands])
    judged = np.full(len(grids), fill_value=True) if planned is None else planned > 0.0
    at_hz = grids[judged].ravel()
    departed: list[Departed] = []
    for each in departures:
        tell()
        impedance = np.full((*grids.shape, 1), _UNSERVED_OHM)
        if at_hz.size:
            length_m = np.full(at_hz.size, pick.length_m * each.length_ratio)
            solved = each.model.solve(length_m, at_hz).impedance_ohm
            impedance[judged] = solved.reshape(-1, points, 1)
        scored = score(impedance, space.bands, space.feeding, pick.ratio)
        departed.append(Departed(each.what, scored, merit(scored, space.bands)))
    worst = max(departed, key=Departed.key)
    return Held(tuple(departed), worst, at_hz.size * len(departures))
