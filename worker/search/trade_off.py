"""What a wire trades: the front of all criteria, and what a change of its length would gain."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from worker.search.ranking import Contender, Pick
from worker.search.scan import Scan
from worker.search.scoring import FULLY_SERVED
from worker.search.space import BandGoal

#: A length is looked for within this part of the wire's own.
REACH: Final = 0.10
_LOOKS: Final = 401


@dataclass(frozen=True, slots=True)
class Gain:
    """What another length of the same wire would bring.

    ``serves`` is the band it would serve whole, or serve more of, up to ``fraction``;
    ``loses`` are bands served now that it would no longer serve whole.
    """

    serves: BandGoal
    fraction: float
    by_m: float
    loses: tuple[BandGoal, ...]


def front_of(contenders: tuple[Contender, ...], most: int) -> tuple[Contender, ...]:
    """Contenders that no other beats or equals on every criterion; in their order.

    Criteria: required bands, weighted width, worst SWR, loss, length and cost.
    """
    if not contenders:
        return ()
    criteria = np.array(
        [
            (
                -each.required_served,
                -round(each.weighted_served, 3),
                round(each.swr_worst, 2),
                round(each.loss_db, 1),
                round(each.pick.length_m, 2),
                round(each.cost, 2),
            )
            for each in contenders
            if each.weighted_served > 0.0
        ]
    )
    useful = [each for each in contenders if each.weighted_served > 0.0]
    front: list[Contender] = []
    for index, each in enumerate(useful):
        no_worse = np.all(criteria <= criteria[index], axis=1)
        better = no_worse & np.any(criteria < criteria[index], axis=1)
        # Of equals the first in order stays.
        equal_before = no_worse[:index] & np.all(criteria[:index] == criteria[index], axis=1)
        if not better.any() and not equal_before.any():
            front.append(each)
        if len(front) == most:
            break
    return tuple(front)


def gains_of(found: Scan, pick: Pick) -> tuple[Gain, ...]:
    """What other lengths near a pick's would gain and lose, one for each band not served whole."""
    bands = found.space.bands
    low_m = max(found.space.shortest_m, (1.0 - REACH) * pick.length_m)
    high_m = min(found.space.longest_m, (1.0 + REACH) * pick.length_m)
    lengths_m = np.linspace(low_m, high_m, _LOOKS)
    served = found.score_at(pick, lengths_m).served_fraction
    now = found.score_at(pick, np.array([pick.length_m])).served_fraction[:, 0]
    gains: list[Gain] = []
    for index, band in enumerate(bands):
        if now[index] >= FULLY_SERVED or served[index].max() <= now[index] + 0.05:
            continue
        best = min(float(served[index].max()), FULLY_SERVED)
        there = np.flatnonzero(served[index] >= best)
        nearest = there[np.argmin(np.abs(lengths_m[there] - pick.length_m))]
        loses = tuple(
            other
            for place, other in enumerate(bands)
            if now[place] >= FULLY_SERVED > served[place, nearest]
        )
        by_m = float(lengths_m[nearest]) - pick.length_m
        gains.append(Gain(band, float(served[index, nearest]), by_m, loses))
    return tuple(gains)
