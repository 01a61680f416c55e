"""How well wires of every length serve every band.

A band is *served* where the standing wave ratio stays within its limit from edge to edge,
*partly served* where it does over a part of the width, else *unserved*.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from worker.engine.reflection import LARGEST_STANDING_WAVE_RATIO
from worker.search.feeding import Feeding, Load, SingleArray, reflected_of
from worker.search.space import BandGoal, ComplexArray, FloatArray

#: A band counts as served from this part of its width on: rounding at an edge is no fault.
FULLY_SERVED: Final = 1.0 - 1e-9

#: Reflected power as far as this from a limit at every point is as far between them: on wire
#: of any use it swings by less.
_CLEARLY: Final = 0.03
#: Wires scored at a time: what they need then stays in the processor's cache.
_CHUNK_WIRES: Final = 1024
#: A closer look takes so many steps to one of the grid.
_FINER: Final = 12


@dataclass(frozen=True, slots=True)
class Score:
    """How n wires serve b bands, with one transformer ratio.

    Attributes
    ----------
    served_fraction : ndarray, shape (b, n)
        Part of each band's width within its SWR limit.
    swr_worst : ndarray, shape (b, n)
        Largest SWR within each band.
    loss_db : ndarray, shape (b, n)
        Loss of the feed line at the band's centre; zero without a line.
    """

    served_fraction: FloatArray
    swr_worst: FloatArray
    loss_db: FloatArray


def score(
    impedance_ohm: ComplexArray, bands: tuple[BandGoal, ...], feeding: Feeding, ratio: float
) -> Score:
    """Score wires by what arrives where the limits apply, over each band's grid.

    Parameters
    ----------
    impedance_ohm : ndarray, shape (b, p, n)
        At the feed points of n wires, at p evenly spaced frequencies of b bands.
    bands : tuple of BandGoal, length b
    feeding : Feeding
    ratio : float
        Impedance ratio of the transformer.
    """
    return next(scores(impedance_ohm, bands, feeding, (ratio,)))


def scores(
    impedance_ohm: ComplexArray,
    bands: tuple[BandGoal, ...],
    feeding: Feeding,
    ratios: tuple[float, ...],
) -> Iterator[Score]:
    """The same at several ratios, one after the other."""
    grids = np.array([band.grid_hz(impedance_ohm.shape[1]) for band in bands])
    limits = np.array([reflected_of(np.asarray(band.swr_limit)) for band in bands])
    load = Load.of(impedance_ohm)
    shape = (len(bands), impedance_ohm.shape[2])
    for ratio in ratios:
        reflected = np.empty(impedance_ohm.shape, dtype=np.float32)
        most, least, loss_db = np.empty(shape), np.empty(shape), np.zeros(shape)
        for start in range(0, shape[1], _CHUNK_WIRES):
            some = slice(start, start + _CHUNK_WIRES)
            part, lost_db = feeding.reflected_power(load.some(some), grids, ratio)
            reflected[..., some] = part
            most[:, some], least[:, some] = part.max(axis=1), part.min(axis=1)
            if lost_db is not None:
                loss_db[:, some] = lost_db
        served = (most <= limits[:, None]).astype(np.float64)
        # Most wires serve a band whole or not at all, clearly; the rest are looked at closely.
        for band, limit in enumerate(limits):
            close = np.flatnonzero(
                (most[band] > limit - _CLEARLY) & (least[band] <= limit + _CLEARLY)
            )
            for start in range(0, len(close), _CHUNK_WIRES):
                some_close = close[start : start + _CHUNK_WIRES]
                within, worst = _looked_at(reflected[band][:, some_close], limit)
                served[band, some_close], most[band, some_close] = within, worst
        yield Score(served, _swr_of(most), loss_db)


def _looked_at(reflected: SingleArray, limit: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Part of a band within a limit, and the most reflected, between (p, n) grid points too."""
    mismatch = _between(len(reflected)) @ _mismatch(reflected)
    within = served_fraction(mismatch[None], _mismatch(limit))[0]
    return within, 1.0 - 1.0 / np.maximum(mismatch.max(axis=0), 1.0)


def stacked(parts: list[Score]) -> Score:
    """Scores of the same wires on different bands as one."""
    return Score(
        np.concatenate([part.served_fraction for part in parts], axis=0),
        np.concatenate([part.swr_worst for part in parts], axis=0),
        np.concatenate([part.loss_db for part in parts], axis=0),
    )


@cache
def _between(points: int) -> FloatArray:
    """Weights that interpolate from so many even points to ``_FINER`` times as many steps.

    By the cubic through the four points about each place.
    """
    order = min(4, points)
    places = np.linspace(0.0, points - 1.0, _FINER * (points - 1) + 1)
    weights = np.zeros((len(places), points))
    for row, place in enumerate(places):
        first = min(max(int(place) - order // 2 + 1, 0), points - order)
        nodes = np.arange(first, first + order)
        for node in nodes:
            others = nodes[nodes != node]
            weights[row, node] = np.prod((place - others) / (node - others))
    return weights


def _mismatch(reflected: FloatArray | SingleArray) -> FloatArray:
    """Power available over power taken, 1 / (1 - |Γ|²): what is interpolated over frequency.

    It is ((R + R0)² + X²) / (4 R R0), all but a parabola about a resonance, where the standing
    wave ratio has a kink.
    """
    taken = np.maximum(1.0 - reflected, 2.0 / LARGEST_STANDING_WAVE_RATIO)
    return np.asarray(1.0 / taken)


def _swr_of(reflected: FloatArray) -> FloatArray:
    """Standing wave ratio at a reflected part of the power, up to the largest told of."""
    magnitude = np.sqrt(reflected)
    # Total reflection, and a little more by rounding, is the largest ratio that is told of.
    away = np.maximum(1.0 - magnitude, 2.0 / (LARGEST_STANDING_WAVE_RATIO + 1.0))
    return np.asarray((1.0 + np.minimum(magnitude, 1.0)) / away)


def served_fraction(swr: FloatArray, limit: FloatArray) -> FloatArray:
    """Part of the width within the limit, the SWR taken as linear between grid points.

    Parameters
    ----------
    swr : ndarray, shape (b, p, n)
        Or anything else that rises with it, and its limit.
    limit : ndarray
        Broadcasts with ``swr``.

    Returns
    -------
    ndarray, shape (b, n)
        From 0 to 1.
    """
    excess = swr - limit
    left, right = excess[:, :-1], excess[:, 1:]
    inside = np.minimum(left, right)
    rise = np.abs(right - left)
    # Where one end is inside and the other outside, the part inside is |inside| / rise.
    part = np.where(rise > 0.0, -inside / np.where(rise > 0.0, rise, 1.0), 0.0)
    both_inside = np.maximum(left, right) <= 0.0
    share = np.where(both_inside, 1.0, np.clip(part, 0.0, 1.0))
    return np.asarray(np.mean(share, axis=1))


@dataclass(frozen=True, slots=True)
class Merit:
    """What n wires are ranked by, each as one number per wire; shape (n,) each."""

    required_served: NDArray[np.int64]
    weighted_served: FloatArray
    swr_worst: FloatArray
    loss_db: FloatArray


def merit(scored: Score, bands: tuple[BandGoal, ...]) -> Merit:
    """Gather the scores of all bands into what wires are ranked by.

    ``weighted_served`` is the mean served width by weight, from 0 to 1. ``swr_worst`` is
    taken over the bands served whole, for an SWR of 40 on a band that cannot be had says
    nothing of the others; where none is, it is the lowest of the worst. ``loss_db`` is the
    largest over the bands served at least in part.
    """
    required = np.array([band.required for band in bands])
    weights = np.array([band.weight for band in bands])
    whole = scored.served_fraction >= FULLY_SERVED
    worst_of_served = np.max(np.where(whole, scored.swr_worst, 1.0), axis=0)
    least_of_all = np.min(scored.swr_worst, axis=0)
    return Merit(
        required_served=np.sum(whole & required[:, None], axis=0),
        weighted_served=weights @ scored.served_fraction / weights.sum(),
        swr_worst=np.where(whole.any(axis=0), worst_of_served, least_of_all),
        loss_db=np.max(np.where(scored.served_fraction > 0.0, scored.loss_db, 0.0), axis=0),
    )
