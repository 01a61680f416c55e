"""The order of candidates, and which of them are different enough to be worth showing.

Wires are ordered by required bands served, then by weighted served width, worst SWR, loss of
the feed line, length (a shorter wire hangs more easily) and cost: each shown, none hidden in
one number.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.search.scoring import FULLY_SERVED, Merit, Score
from worker.search.space import BandGoal, FloatArray, WireOffer

#: Served widths are compared to the thousandth of the whole, SWR to the hundredth: finer
#: differences are below what can be built, and would hide the next criterion.
WIDTH_STEP: Final = 1e-3
SWR_STEP: Final = 1e-2
LOSS_STEP_DB: Final = 0.1
#: Lengths are compared to half a per cent, or the price would never be asked.
LENGTH_STEP: Final = 5e-3


@dataclass(frozen=True, slots=True)
class Pick:
    """One wire picked from the scan: which conductor, which ratio, which length."""

    wire: int
    ratio: float
    length_m: float


#: For each band the order of resonance used, and the service: 2 whole, 1 in part, 0 none.
Kind = tuple[tuple[int, int], ...]


@dataclass(frozen=True, slots=True)
class Contender:
    """A local optimum of the scan.

    Attributes
    ----------
    key : tuple of float
        Sorts contenders, the best first.
    kind : Kind
    pick : Pick
    served : tuple of float
        Part of each band within its limit.
    required_served, weighted_served, swr_worst, loss_db, cost
        What it is ranked by; cost is 0 where no price is known.
    """

    key: tuple[float, ...]
    kind: Kind
    pick: Pick
    served: tuple[float, ...] = ()
    required_served: int = 0
    weighted_served: float = 0.0
    swr_worst: float = 1.0
    loss_db: float = 0.0
    cost: float = 0.0


def rank_keys(merit: Merit, length_m: FloatArray, cost: FloatArray) -> FloatArray:
    """Columns to sort by, best first when ascending; shape (n, 6).

    Of rows alike the first is meant, so lengths are given rising.
    """
    return np.column_stack(
        [
            -merit.required_served.astype(np.float64),
            -np.round(merit.weighted_served / WIDTH_STEP),
            np.round(merit.swr_worst / SWR_STEP),
            np.round(merit.loss_db / LOSS_STEP_DB),
            np.round(np.log(length_m) / LENGTH_STEP),
            cost,
        ]
    )


def best_first(keys: FloatArray) -> NDArray[np.intp]:
    """Indices that put rows of keys in order, the first column weighing most."""
    return np.lexsort(keys.T[::-1])


def nearest_order(length_m: FloatArray, frequency_hz: float) -> NDArray[np.int64]:
    """The number of half waves nearest to a length, at least 1; for a wire fed off its centre."""
    half_waves = 2.0 * length_m * frequency_hz / SPEED_OF_LIGHT_M_PER_S
    return np.maximum(np.round(half_waves), 1).astype(np.int64)


def nearest_odd_order(length_m: FloatArray, frequency_hz: float) -> NDArray[np.int64]:
    """The odd number of half waves nearest to a length; 1, 3, 5 and so on."""
    half_waves = 2.0 * length_m * frequency_hz / SPEED_OF_LIGHT_M_PER_S
    return (2 * np.floor(half_waves / 2.0) + 1).astype(np.int64)


def distinct_leaders(contenders: list[Contender], most: int) -> tuple[Contender, ...]:
    """The best contenders that differ from each other, best first, at most so many.

    A contender adds nothing to a better one that uses the same order of resonance on every
    band the contender serves, and serves each at least as well: neighbours of one optimum,
    and the same duty with another conductor or a worse ratio, are left out.
    """
    leaders: list[Contender] = []
    # Where no wire serves anything, the nearest miss is still an answer: the first adds itself.
    for contender in sorted(contenders, key=lambda each: each.key):
        if not any(_adds_nothing(contender.kind, leader.kind) for leader in leaders):
            leaders.append(contender)
        if len(leaders) == most:
            break
    return tuple(leaders)


def _adds_nothing(kind: Kind, better: Kind) -> bool:
    return all(
        service == 0 or (order == better_order and service <= better_service)
        for (order, service), (better_order, better_service) in zip(kind, better, strict=True)
    )


def contenders_of(
    scored: Score,
    merit: Merit,
    length_m: FloatArray,
    bands: tuple[BandGoal, ...],
    offer: tuple[int, WireOffer],
    ratio: float,
) -> list[Contender]:
    """The best local optimum along length of each kind, for one conductor and one ratio.

    Parameters
    ----------
    scored : Score
        Of n wires.
    merit : Merit
        Of the same wires.
    length_m : ndarray, shape (n,)
        Rising.
    bands : tuple of BandGoal
    offer : (int, WireOffer)
        Index of the wire and the wire.
    ratio : float
    """
    wire, price_per_m = offer[0], offer[1].price_per_m or 0.0
    order_of = nearest_odd_order if offer[1].centred else nearest_order
    cost = length_m * price_per_m
    keys = rank_keys(merit, length_m, cost)
    place = np.empty(len(length_m), dtype=np.int64)
    place[best_first(keys)] = np.arange(len(length_m))
    # Beyond either end there is nothing better.
    walled = np.concatenate([[len(length_m)], place, [len(length_m)]])
    tops = np.flatnonzero((place < walled[:-2]) & (place < walled[2:]))
    tops = tops[np.argsort(place[tops])]
    orders = np.array([order_of(length_m[tops], band.centre_hz) for band in bands])
    fractions = scored.served_fraction[:, tops]
    service = np.where(fractions >= FULLY_SERVED, 2, np.where(fractions > 0.0, 1, 0))
    orders = np.where(service > 0, orders, 0)
    # The first of each kind is the best of it, for they come in order.
    kinds = (3 * orders + service).T
    firsts = np.sort(np.unique(kinds, axis=0, return_index=True)[1])
    return [
        Contender(
            key=(*keys[tops[column]].tolist(), float(wire), ratio),
            kind=tuple(zip(orders[:, column].tolist(), service[:, column].tolist(), strict=True)),
            pick=Pick(wire, ratio, float(length_m[tops[column]])),
            served=tuple(fractions[:, column].tolist()),
            required_served=int(merit.required_served[tops[column]]),
            weighted_served=float(merit.weighted_served[tops[column]]),
            swr_worst=float(merit.swr_worst[tops[column]]),
            loss_db=float(merit.loss_db[tops[column]]),
            cost=float(cost[tops[column]]),
        )
        for column in firsts.tolist()
    ]
