"""A close look at one wire: what it does on every band, by direct solves where it counts."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import NotConverged
from worker.search.feeding import Fed, Feeding
from worker.search.impedance_map import (
    TOLERANCE_RELATIVE,
    BandMap,
    ImpedanceMap,
    departure,
    map_over_frequency_together,
)
from worker.search.ranking import Pick
from worker.search.resonances import (
    Resonance,
    exponent_of,
    lengths_in_resonance,
    nearest_series,
    resonances_of,
)
from worker.search.scoring import served_fraction
from worker.search.space import BandGoal, ComplexArray, FloatArray, SearchSpace, Solved

#: Grid of the report within a band: odd, so that the centre is one of its points.
GRID_POINTS: Final = 41
#: A resonance within this part of a band's centre is the one the band is worked on.
NEAR: Final = 0.10
#: A map over frequency is made on so many times as many nodes as usual until it holds.
_FINER: Final = (1, 2, 4, 8)
#: Wires are solved so many at a time, with a word of progress between.
_SOLVED_AT_A_TIME: Final = 120
#: Points of the sweep over the whole range, for the plot.
SWEEP_POINTS: Final = 481


@dataclass(frozen=True, slots=True)
class Curve:
    """Impedance at the feed point over frequency, and what arrives behind it; shape (n,) each."""

    frequency_hz: FloatArray
    impedance_ohm: ComplexArray
    fed: Fed


@dataclass(frozen=True, slots=True)
class BandAppraisal:
    """How one wire does on one band.

    Attributes
    ----------
    goal : BandGoal
    marks : Curve
        Low edge, centre and high edge, by direct solves.
    error_ohm : float
        Largest estimated error of those solves.
    grid : Curve
        Edge to edge, from the map over frequency.
    served_fraction : float
    network : int or None
        Which of ``NETWORKS`` matches the band; None without one.
    nearest : Resonance or None
        The series resonance nearest to the band's centre.
    own_length_m : float or None
        The length that would put that resonance on the centre, in m; None where it is too far
        away for the band to be worked on it.
    hz_per_m : float or None
        How far that resonance moves with the length; None as above.
    """

    goal: BandGoal
    marks: Curve
    error_ohm: float
    grid: Curve
    served_fraction: float
    network: int | None
    nearest: Resonance | None
    own_length_m: float | None
    hz_per_m: float | None


@dataclass(frozen=True, slots=True)
class Appraisal:
    """Everything the report needs to know of one wire."""

    pick: Pick
    bands: tuple[BandAppraisal, ...]
    resonances: tuple[Resonance, ...]
    sweep: Curve
    solves: int
    largest_miss: float


def is_near(resonance: Resonance, goal: BandGoal) -> bool:
    """Whether a resonance is near enough to a band for the band to be worked on it."""
    return abs(resonance.frequency_hz / goal.centre_hz - 1.0) < NEAR


def appraise(
    space: SearchSpace,
    picks: tuple[Pick, ...],
    maps: tuple[tuple[BandMap, ...], ...],
    tell: Callable[[], None] = lambda: None,
) -> tuple[Appraisal, ...]:
    """Look closely at some wires of the space, together, for together they cost less.

    Parameters
    ----------
    space : SearchSpace
    picks : tuple of Pick
        The wires: conductor, height and feed, ratio and length.
    maps : tuple of tuple of BandMap
        Of each wire over length, one for each band.
    tell : callable
        Called before every solution, as a word of progress.
    """
    marks = _solve_marks(space, picks, tell)
    over_frequency = _map_whole_ranges(space, picks, marks, tell)
    appraisals: list[Appraisal] = []
    for row, pick in enumerate(picks):
        tell()
        appraisals.append(_appraise_one(space, pick, maps[row], over_frequency[row], marks[row]))
    return tuple(appraisals)


def _appraise_one(
    space: SearchSpace,
    pick: Pick,
    maps: tuple[BandMap, ...],
    over_frequency: ImpedanceMap,
    marks: list[Solved],
) -> Appraisal:
    resonances = resonances_of(
        over_frequency, pick.length_m, centred=space.wires[pick.wire].centred
    )
    sweep_hz = np.linspace(*_whole_range_hz(space, pick), SWEEP_POINTS)
    bands = tuple(
        _appraise_band(space, pick, _Band(goal, band_map, solved), over_frequency, resonances)
        for goal, band_map, solved in zip(space.bands, maps, marks, strict=True)
    )
    # A network is made for one band and says nothing of the frequencies between.
    unmatched = replace(space.feeding, matched=False)
    sweep_ohm = over_frequency.impedance_ohm(sweep_hz)
    return Appraisal(
        pick=pick,
        bands=bands,
        resonances=resonances,
        sweep=_curve(unmatched, pick, sweep_hz, sweep_ohm),
        solves=over_frequency.solves + 3 * len(marks),
        largest_miss=over_frequency.largest_miss,
    )


@dataclass(frozen=True, slots=True)
class _Band:
    """What is known of one wire on one band: the goal, its map over length, its marks solved."""

    goal: BandGoal
    over_length: BandMap
    marks: Solved


def _solve_marks(
    space: SearchSpace, picks: tuple[Pick, ...], tell: Callable[[], None]
) -> list[list[Solved]]:
    """Direct solutions of every pick at the edges and the centre of every band."""
    marks_hz = np.array([_marks_hz(goal) for goal in space.bands])
    solved = _solve_pairs(space, picks, marks_hz.ravel(), tell)
    each = (len(picks), *marks_hz.shape)
    impedance, error = solved.impedance_ohm.reshape(each), solved.error_ohm.reshape(each)
    bands = range(len(space.bands))
    return [
        [Solved(impedance[row, band], error[row, band]) for band in bands]
        for row in range(len(picks))
    ]


def _solve_pairs(
    space: SearchSpace,
    picks: tuple[Pick, ...],
    frequency_hz: FloatArray,
    tell: Callable[[], None],
    *,
    survey: bool = False,
) -> Solved:
    """Direct solutions of k picks at n frequencies, shape (k, n), some columns at a time."""
    columns = max(1, _SOLVED_AT_A_TIME // len(picks))
    parts: list[Solved] = []
    for start in range(0, len(frequency_hz), columns):
        tell()
        some_hz = frequency_hz[start : start + columns]
        wires = [pick.wire for pick in picks for _ in some_hz]
        length_m = np.repeat([pick.length_m for pick in picks], len(some_hz))
        solved = space.solved_together(wires, length_m, np.tile(some_hz, len(picks)), survey=survey)
        shape = (len(picks), len(some_hz))
        parts.append(Solved(solved.impedance_ohm.reshape(shape), solved.error_ohm.reshape(shape)))
    return Solved(
        np.concatenate([part.impedance_ohm for part in parts], axis=1),
        np.concatenate([part.error_ohm for part in parts], axis=1),
    )


def _marks_hz(goal: BandGoal) -> list[float]:
    return [goal.low_hz, goal.centre_hz, goal.high_hz]


def _map_whole_ranges(
    space: SearchSpace,
    picks: tuple[Pick, ...],
    marks: list[list[Solved]],
    tell: Callable[[], None],
) -> list[ImpedanceMap]:
    """Maps of all picks over frequency; those that can share a range are solved together.

    Each is held to the solutions at the marks, and made again on more nodes where it differs.
    """
    marks_hz = np.concatenate([_marks_hz(goal) for goal in space.bands])
    maps: dict[int, ImpedanceMap] = {}
    for (low_hz, high_hz), rows in _by_range(space, picks).items():
        chosen = tuple(picks[row] for row in rows)

        def solve(frequency_hz: FloatArray, chosen: tuple[Pick, ...] = chosen) -> ComplexArray:
            return _solve_pairs(space, chosen, frequency_hz, tell, survey=True).impedance_ohm

        marked = [np.concatenate([each.impedance_ohm for each in marks[row]]) for row in rows]
        longest_m = max(pick.length_m for pick in chosen)
        for finer in _FINER:
            found = map_over_frequency_together(solve, longest_m, low_hz, high_hz, finer)
            held = [
                departure(each.impedance_ohm(marks_hz), solved)
                for each, solved in zip(found, marked, strict=True)
            ]
            if all(within for within, _ in held):
                break
        else:
            miss = max(off for _, off in held)
            raise NotConverged("impedance map over frequency", miss, TOLERANCE_RELATIVE)
        for row, each, (_, miss) in zip(rows, found, held, strict=True):
            maps[row] = replace(each, largest_miss=max(each.largest_miss, miss))
    return [maps[row] for row in range(len(picks))]


def _by_range(space: SearchSpace, picks: tuple[Pick, ...]) -> dict[tuple[float, float], list[int]]:
    """The picks by the range they are mapped over: that of all, or their own if it is too wide."""
    own = [_whole_range_hz(space, pick) for pick in picks]
    common = (min(low for low, _ in own), max(high for _, high in own))
    ranges: dict[tuple[float, float], list[int]] = {}
    for row, pick in enumerate(picks):
        lowest_hz, highest_hz = _modelled_hz(space, pick)
        fits = lowest_hz <= common[0] and common[1] <= highest_hz
        ranges.setdefault(common if fits else own[row], []).append(row)
    return ranges


def _whole_range_hz(space: SearchSpace, pick: Pick) -> tuple[float, float]:
    """From below the wire's first resonance, or the lowest band, to above the highest."""
    one_wave_hz = SPEED_OF_LIGHT_M_PER_S / pick.length_m
    lowest_hz = min(goal.low_hz for goal in space.bands)
    # Insulation and low height may shorten the first resonance to 0.42 wavelengths.
    if 0.5 * one_wave_hz < 1.2 * lowest_hz:
        lowest_hz = min(lowest_hz, 0.42 * one_wave_hz)
    highest_hz = max(goal.high_hz for goal in space.bands)
    modelled_hz = _modelled_hz(space, pick)
    return max(0.95 * lowest_hz, modelled_hz[0]), min(1.05 * highest_hz, modelled_hz[1])


def _modelled_hz(space: SearchSpace, pick: Pick) -> tuple[float, float]:
    """Between which frequencies the model of a wire holds."""
    wire = space.wires[pick.wire].model
    one_wave_hz = SPEED_OF_LIGHT_M_PER_S / pick.length_m
    lowest_hz = max(wire.shortest_wavelengths * one_wave_hz, wire.lowest_hz)
    return lowest_hz, wire.longest_wavelengths * one_wave_hz


def _appraise_band(
    space: SearchSpace,
    pick: Pick,
    band: _Band,
    over_frequency: ImpedanceMap,
    resonances: tuple[Resonance, ...],
) -> BandAppraisal:
    goal, feeding = band.goal, space.feeding
    grid_hz = goal.grid_hz(GRID_POINTS)
    grid_ohm = over_frequency.impedance_ohm(grid_hz)
    network = None
    if feeding.matched:
        network = int(feeding.best_network(grid_ohm[:, None] / pick.ratio, grid_hz)[0][0])
    marks_hz = np.array(_marks_hz(goal))
    grid = _curve(feeding, pick, grid_hz, grid_ohm, network)
    part = served_fraction(grid.fed.limited_swr[None, :, None], np.array(goal.swr_limit))[0, 0]
    nearest = nearest_series(resonances, goal.centre_hz)
    own_length_m = hz_per_m = None
    if nearest is not None and is_near(nearest, goal):
        guess_m = pick.length_m * nearest.frequency_hz / goal.centre_hz
        # Of one order, resonance goes as a power of length; its exponent is that within the band.
        own_length_m, exponent = lengths_in_resonance(band.over_length, guess_m, goal)
        if exponent is None:
            model = space.wires[pick.wire].model
            exponent = exponent_of(model, pick.length_m, nearest.frequency_hz)
        if own_length_m is None:
            shorter = (goal.centre_hz / nearest.frequency_hz) ** (1.0 / exponent)
            own_length_m = pick.length_m * shorter
        hz_per_m = exponent * nearest.frequency_hz / pick.length_m
    return BandAppraisal(
        goal=goal,
        marks=_curve(feeding, pick, marks_hz, band.marks.impedance_ohm, network),
        error_ohm=float(band.marks.error_ohm.max()),
        grid=grid,
        served_fraction=float(part),
        network=network,
        nearest=nearest,
        own_length_m=own_length_m,
        hz_per_m=hz_per_m,
    )


def _curve(
    feeding: Feeding,
    pick: Pick,
    frequency_hz: FloatArray,
    impedance_ohm: ComplexArray,
    network: int | None = None,
) -> Curve:
    fed = feeding.feed(impedance_ohm[:, None], frequency_hz, pick.ratio, network)
    return Curve(
        frequency_hz,
        impedance_ohm,
        Fed(
            behind_ohm=fed.behind_ohm[:, 0],
            swr=fed.swr[:, 0],
            limited_swr=fed.limited_swr[:, 0],
            transmitter_swr=None if fed.transmitter_swr is None else fed.transmitter_swr[:, 0],
            line_loss_db=None if fed.line_loss_db is None else fed.line_loss_db[:, 0],
        ),
    )
