"""Sets of dipoles that serve the bands together, chosen exactly.

Choosing wires so that every required band is served by one of them is set cover; it is solved
as a mixed-integer linear programme, to proven optimality.

References
----------
R. M. Karp, "Reducibility among combinatorial problems" (1972), problem 14 (set covering).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import Bounds, LinearConstraint, milp
from scipy.sparse import coo_array

from worker.engine.errors import NotConverged
from worker.search.scoring import FULLY_SERVED
from worker.search.space import FloatArray

#: One required band more outweighs all width, and all width outweighs the burden.
_REQUIRED_WEIGHT: Final = 100.0
_BURDEN_WEIGHT: Final = 1e-3


@dataclass(frozen=True, slots=True)
class ChosenSet:
    """Wires that serve together.

    Attributes
    ----------
    members : tuple of int
        Indices of the wires, rising.
    server : tuple of (int or None), length b
        For each band the wire that serves the most of it; None where none serves any.
    required_served : int
    weighted_served : float
        Served width by weight, from 0 to 1.
    """

    members: tuple[int, ...]
    server: tuple[int | None, ...]
    required_served: int
    weighted_served: float


def best_sets(
    served: FloatArray, required: NDArray[np.bool_], weight: FloatArray, largest: int
) -> tuple[ChosenSet, ...]:
    """The best set of each size that gains on the smaller ones, up to the largest.

    The first that serves all required bands is the smallest that can.

    Parameters
    ----------
    served : ndarray, shape (m, b)
        Part of each of b bands that each of m wires serves; wires in order of preference.
    required : ndarray, shape (b,)
    weight : ndarray, shape (b,)
    largest : int

    Returns
    -------
    tuple of ChosenSet
        Empty where no wire serves anything worth telling.

    Raises
    ------
    NotConverged
        If the programme could not be solved.
    """
    chosen: list[ChosenSet] = []
    for size in range(1, min(largest, len(served)) + 1):
        found = _best_of_size(served, required, weight, size)
        if found is None:
            break
        before = (chosen[-1].required_served, chosen[-1].weighted_served) if chosen else (-1, -1.0)
        if (found.required_served, found.weighted_served) > (before[0], before[1] + 1e-9):
            chosen.append(found)
    return tuple(chosen)


def _best_of_size(
    served: FloatArray, required: NDArray[np.bool_], weight: FloatArray, size: int
) -> ChosenSet | None:
    """The best of at most ``size`` wires, each the first that does as well; None where none is."""
    useful = _undominated(served)
    members = useful[_taken(served[useful], required, weight, size)]
    if not members.size:
        return None
    return _with_the_preferred(served, required, weight, _as_set(served, required, weight, members))


def _undominated(served: FloatArray) -> NDArray[np.intp]:
    """Wires of which no other serves as much of every band; of wires alike the first."""
    as_much = np.all(served[:, None, :] >= served[None, :, :], axis=2)
    alike = as_much & as_much.T
    dominates = as_much & (~alike | np.triu(np.ones(alike.shape, dtype=np.bool_), 1))
    return np.flatnonzero(~dominates.any(axis=0))


def _taken(
    served: FloatArray, required: NDArray[np.bool_], weight: FloatArray, size: int
) -> NDArray[np.intp]:
    """The programme: x says which wires are taken, y which serves which band."""
    wires, bands = served.shape
    whole = served >= FULLY_SERVED
    gain = served * (weight / weight.sum()) + _REQUIRED_WEIGHT * (whole & required)
    # No wire more than needed: the burden of all together stays below any gain.
    burden = np.full(wires, _BURDEN_WEIGHT / wires)
    cost = np.concatenate([burden, -gain.ravel()])
    x = np.arange(wires)
    y = wires + np.arange(wires * bands)
    owner, band = np.divmod(np.arange(wires * bands), bands)
    ones = np.ones(wires * bands)
    width = wires + wires * bands
    few = coo_array((np.ones(wires), (np.zeros(wires, dtype=int), x)), shape=(1, width))
    one_server = coo_array((ones, (band, y)), shape=(bands, width))
    only_taken = coo_array(
        (
            np.concatenate([ones, -ones]),
            (np.tile(np.arange(wires * bands), 2), np.concatenate([y, owner])),
        ),
        shape=(wires * bands, width),
    )
    solved = milp(
        cost,
        integrality=np.concatenate([np.ones(wires), np.zeros(wires * bands)]),
        bounds=Bounds(0.0, 1.0),
        constraints=[
            LinearConstraint(few.tocsr(), ub=float(size)),
            LinearConstraint(one_server.tocsr(), ub=1.0),
            LinearConstraint(only_taken.tocsr(), ub=0.0),
        ],
        options={"mip_rel_gap": 0.0},
    )
    if solved.x is None:
        raise NotConverged("set cover", float("inf"), 0.0)
    return np.flatnonzero(np.round(solved.x[:wires]) > 0.5)


def _with_the_preferred(
    served: FloatArray, required: NDArray[np.bool_], weight: FloatArray, chosen: ChosenSet
) -> ChosenSet:
    """The set with each wire exchanged for the first that would do as well in its place.

    A preference in the programme itself would be lost in the solver's own tolerance.
    """
    for member in chosen.members:
        others = [each for each in chosen.members if each != member]
        for preferred in range(member):
            if preferred in others:
                continue
            members = np.array(sorted([*others, preferred]), dtype=np.intp)
            exchanged = _as_set(served, required, weight, members)
            if _worth(exchanged) >= _worth(chosen):
                chosen = exchanged
                break
    return chosen


def _worth(chosen: ChosenSet) -> tuple[int, float]:
    """What sets are compared by, without the last digits of a sum."""
    return chosen.required_served, round(chosen.weighted_served, 12)


def _as_set(
    served: FloatArray,
    required: NDArray[np.bool_],
    weight: FloatArray,
    members: NDArray[np.intp],
) -> ChosenSet:
    of_members = served[members]
    best = np.argmax(of_members, axis=0)
    most = np.max(of_members, axis=0)
    return ChosenSet(
        members=tuple(members.tolist()),
        server=tuple(
            int(members[index]) if part > 0.0 else None
            for index, part in zip(best, most, strict=True)
        ),
        required_served=int(np.sum((most >= FULLY_SERVED) & required)),
        weighted_served=float(most @ weight / weight.sum()),
    )
