"""Continuous maps of feed impedance, over length or over frequency, from few direct solves.

The feed impedance of a wire is, to high accuracy, a ratio of smooth functions of its length
and of its frequency: the poles are the anti-resonances. A rational interpolant through a
dozen or two of solves per wavelength therefore stands in for the solver everywhere between
them. Each map is checked against fresh solves between its own points and refined until it
agrees with them; how far it was off is kept with it.

References
----------
Y. Nakatsukasa, O. Sète, L. N. Trefethen, "The AAA algorithm for rational approximation",
SIAM J. Sci. Comput. 40 (2018) A1494–A1522.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from typing import Final

import numpy as np
from scipy.interpolate import AAA

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import NotConverged
from worker.search.space import ComplexArray, FloatArray, WireModel

#: Impedance in Ω at every length (m) or frequency (Hz).
Curve = Callable[[FloatArray], ComplexArray]
#: Impedances in Ω of k wires, (k, f, n), for n lengths times frequency in m Hz, at f frequencies.
Survey = Callable[[FloatArray, FloatArray], ComplexArray]

#: A map is one interpolant per stretch of at most this many wavelengths of wire.
STRETCH_WAVELENGTHS: Final = 6.0
#: Direct solves an interpolant is first built on: so many, and so many more a wavelength.
#: Measured: 3.5 a wavelength and 6 leave a quarter of the tolerance or less, in free space and
#: over ground, from 2 to 6 wavelengths.
FIRST_NODES: Final = 6
NODES_PER_WAVELENGTH: Final = 3.5
#: A stretch that this many do not hold is given up. Once doubled they are at most 197, which
#: a fit of less than a hundred terms goes through, so that it never stops short with a warning.
MOST_NODES: Final = 100
#: Of the gaps between solves every fifth is checked at first, and must agree to this part of
#: the tolerance, for the gaps not checked are worse; else all are checked from then on.
_CHECK_EVERY: Final = 5
_FEW_CHECKS_MARGIN: Final = 0.5
#: A band narrower than this part of its frequency is mapped at its edges alone, a wider one
#: at its centre too, and one wider still in steps of at most this part.
_NARROW_BAND: Final = 0.03
_WIDEST_STEP: Final = 0.08
#: Agreement asked of a map with fresh solves: the larger of the two.
TOLERANCE_OHM: Final = 0.1
TOLERANCE_RELATIVE: Final = 1e-3
#: Of places in an even ratio every so many are read from a map; steps between the four about one.
_STRIDE: Final = 4
_FOUR: Final = np.array([-1.0, 0.0, 1.0, 2.0])
_LEAST_RESISTANCE_OHM: Final = 1e-3
#: A wire too short for the model: hardly any resistance, and all the reactance in the world.
_STUB_OHM: Final = complex(0.01, -1e5)
#: What is fitted is the reflection against this resistance, about a wire's own as a line: it is
#: a ratio of smooth functions as impedance is, but keeps below one at an anti-resonance too,
#: which else decides alone how close the fit is everywhere.
_FIT_AGAINST_OHM: Final = 600.0
#: The solver's mesh changes with length and leaves steps of some 1e-5; a closer fit would only
#: chase them.
_FIT_WITHIN: Final = 1e-5


@dataclass(frozen=True, slots=True)
class _Stretch:
    high: float
    curve: Curve
    solves: int
    miss: float


@dataclass(frozen=True, slots=True)
class ImpedanceMap:
    """Feed impedance between two lengths (m), two frequencies (Hz), or two products of them.

    Attributes
    ----------
    low, high : float
        Where the map holds.
    solves : int
        Direct solves spent on it.
    largest_miss : float
        Largest departure from fresh solves that it was not built on, relative to |Z|.
    """

    low: float
    high: float
    solves: int
    largest_miss: float
    _stretches: tuple[_Stretch, ...]

    def impedance_ohm(self, at: FloatArray) -> ComplexArray:
        """Impedance in Ω anywhere inside the map; shape of ``at``."""
        impedance = np.empty(at.shape, dtype=np.complex128)
        ends = np.array([stretch.high for stretch in self._stretches[:-1]])
        which = np.searchsorted(ends, at)
        for index, stretch in enumerate(self._stretches):
            inside = which == index
            if inside.any():
                impedance[inside] = stretch.curve(at[inside])
        return _passive(impedance)


@dataclass(frozen=True, slots=True)
class BandMap:
    """Feed impedance of one conductor over length, anywhere within a band.

    At a fixed electrical length the impedance drifts only slowly with frequency, for it is
    the radius and the height in wavelengths that change. A map over length at two or three
    frequencies, read at equal electrical length and interpolated between them, therefore
    serves the whole band.

    Attributes
    ----------
    frequencies_hz : ndarray, shape (k,)
    maps : tuple of ImpedanceMap, length k
        At each of them, over length times frequency in m Hz.
    shortest_m_hz : float
        Length times frequency below which the model does not hold; there a wire is given the
        impedance of a stub too short to feed, which serves nothing.
    """

    frequencies_hz: FloatArray
    maps: tuple[ImpedanceMap, ...]
    shortest_m_hz: float = 0.0

    def impedance_ohm(self, length_m: FloatArray, frequency_hz: FloatArray) -> ComplexArray:
        """Impedance in Ω at p frequencies (Hz) of n lengths (m); shape (p, n)."""
        electrical = frequency_hz[:, None] * length_m
        impedance = np.zeros(electrical.shape, dtype=np.complex128)
        for index, each in enumerate(self.maps):
            weight = _lagrange_weight(self.frequencies_hz, index, frequency_hz)
            within = np.clip(electrical, each.low, each.high)
            impedance += weight[:, None] * each.impedance_ohm(within)
        return np.where(electrical < self.shortest_m_hz, _STUB_OHM, _passive(impedance))

    def over_even_ratios(self, length_m: FloatArray, frequency_hz: FloatArray) -> ComplexArray:
        """The same for lengths in an even ratio, at a small part of the cost; shape (p, n).

        A change of frequency is then a shift along the lengths, so each map is read once and
        not once a frequency, at every fourth place and by cubics between. Between those, one
        ratio apart, the line is straight.
        """
        step = float(np.log(length_m[1] / length_m[0]))
        lowest_hz = float(frequency_hz.min())
        shift = np.log(frequency_hz / lowest_hz) / step
        count = len(length_m) + int(shift.max()) + 2
        start_m_hz = lowest_hz * float(length_m[0])
        read = np.array([_read_evenly(each, start_m_hz, step, count) for each in self.maps])
        weights = np.array(
            [
                _lagrange_weight(self.frequencies_hz, index, frequency_hz)
                for index in range(len(self.maps))
            ]
        )
        impedance = np.empty((len(frequency_hz), len(length_m)), dtype=np.complex128)
        for row, by in enumerate(shift.tolist()):
            first, part = int(by), by % 1.0
            here = weights[:, row] @ read[:, first : first + len(length_m) + 1]
            impedance[row] = (1.0 - part) * here[:-1] + part * here[1:]
        _passive(impedance)
        for row, at_hz in enumerate(frequency_hz.tolist()):
            impedance[row, : np.searchsorted(length_m * at_hz, self.shortest_m_hz)] = _STUB_OHM
        return impedance

    @property
    def solves(self) -> int:
        """Direct solves spent on it."""
        return sum(each.solves for each in self.maps)

    @property
    def largest_miss(self) -> float:
        """Largest departure of its maps from fresh solves, relative to |Z|."""
        return max(each.largest_miss for each in self.maps)


def map_band(
    wire: WireModel, low_hz: float, high_hz: float, low_m: float, high_m: float
) -> BandMap:
    """Map the feed impedance of one wire over a band and a range of lengths.

    As `map_band_together`, for one wire.
    """

    def survey(length_m_hz: FloatArray, frequency_hz: FloatArray) -> ComplexArray:
        length_m = length_m_hz / frequency_hz[:, None]
        at_hz = np.broadcast_to(frequency_hz[:, None], length_m.shape)
        return wire.solve(length_m, at_hz).impedance_ohm[None]

    limits_m = (low_m, high_m)
    return map_band_together(survey, wire.shortest_wavelengths, low_hz, high_hz, limits_m)[0]


def map_band_together(
    survey: Survey,
    shortest_wavelengths: float,
    low_hz: float,
    high_hz: float,
    limits_m: tuple[float, float],
    finer: tuple[int, int] = (1, 1),
) -> tuple[BandMap, ...]:
    """Map the feed impedances of several wires over a band and a range of lengths.

    Solved together, wires cost less than one by one.

    Parameters
    ----------
    survey : callable
        Impedances in Ω of k wires, shape (k, f, n), for n electrical lengths, as length times
        frequency in m Hz, at f frequencies in Hz.
    shortest_wavelengths : float
        Length in wavelengths from which the models hold.
    low_hz, high_hz : float
        Edges of the band in Hz.
    limits_m : (float, float)
        Limits of length in m.
    finer : (int, int)
        So many times as many nodes as usual, from edge to edge and along the lengths.

    Returns
    -------
    tuple of BandMap
        One for each wire.

    Raises
    ------
    NotConverged
        If a stretch still departs from fresh solves with the most nodes allowed.
    """
    width = high_hz / low_hz - 1.0
    steps = 1 if width < _NARROW_BAND else max(2, int(np.ceil(width / _WIDEST_STEP)))
    frequencies_hz = _chebyshev_points(low_hz, high_hz, finer[0] * steps + 1)
    shortest_m_hz = SPEED_OF_LIGHT_M_PER_S * shortest_wavelengths
    least = max(limits_m[0] * low_hz, shortest_m_hz)
    most = max(limits_m[1] * high_hz, 1.5 * shortest_m_hz)

    def solve(length_m_hz: FloatArray) -> ComplexArray:
        return survey(length_m_hz, frequencies_hz).reshape(-1, len(length_m_hz))

    maps = _map(solve, least, most, SPEED_OF_LIGHT_M_PER_S, finer[1])
    each = len(frequencies_hz)
    return tuple(
        BandMap(frequencies_hz, maps[first : first + each], shortest_m_hz)
        for first in range(0, len(maps), each)
    )


def map_over_length(
    wire: WireModel, frequency_hz: float, low_m: float, high_m: float
) -> ImpedanceMap:
    """Map the feed impedance of one conductor over its length at one frequency.

    Parameters
    ----------
    wire : WireModel
    frequency_hz : float
    low_m, high_m : float
        Limits of the map in m.

    Raises
    ------
    NotConverged
        If a stretch still departs from fresh solves with the most nodes allowed.
    """
    wavelength_m = SPEED_OF_LIGHT_M_PER_S / frequency_hz

    def solve(length_m: FloatArray) -> ComplexArray:
        return wire.solve(length_m, np.full(length_m.shape, frequency_hz)).impedance_ohm[None]

    return _map(solve, low_m, high_m, wavelength_m)[0]


def map_over_frequency(
    wire: WireModel, length_m: float, low_hz: float, high_hz: float
) -> ImpedanceMap:
    """Map the feed impedance of one wire over frequency.

    As `map_over_frequency_together`, for one wire.
    """

    def solve(frequency_hz: FloatArray) -> ComplexArray:
        solved = wire.solve(np.full(frequency_hz.shape, length_m), frequency_hz)
        return solved.impedance_ohm[None]

    return map_over_frequency_together(solve, length_m, low_hz, high_hz)[0]


def map_over_frequency_together(
    solve: Curve, longest_m: float, low_hz: float, high_hz: float, finer: int = 1
) -> tuple[ImpedanceMap, ...]:
    """Map the feed impedances of several wires over frequency.

    Parameters
    ----------
    solve : callable
        Impedances in Ω of k wires, shape (k, n), at n frequencies in Hz.
    longest_m : float
        Length of the longest of them in m.
    low_hz, high_hz : float
        Limits of the maps in Hz.
    finer : int
        So many times as many nodes as usual.

    Returns
    -------
    tuple of ImpedanceMap
        One for each wire.

    Raises
    ------
    NotConverged
        If a stretch still departs from fresh solves with the most nodes allowed.
    """
    return _map(solve, low_hz, high_hz, SPEED_OF_LIGHT_M_PER_S / longest_m, finer)


def _map(
    solve: Curve, low: float, high: float, wavelength: float, finer: int = 1
) -> tuple[ImpedanceMap, ...]:
    """One map for each row that ``solve`` gives; ``wavelength`` in the unit of what is mapped."""
    waves = finer * (high - low) / wavelength
    count = max(1, int(np.ceil(waves / STRETCH_WAVELENGTHS)))
    nodes = FIRST_NODES + int(np.ceil(NODES_PER_WAVELENGTH * waves / count))
    edges = np.linspace(low, high, count + 1)
    by_stretch = [_interpolate(solve, float(a), float(b), nodes) for a, b in pairwise(edges)]
    return tuple(
        ImpedanceMap(
            low,
            high,
            sum(each.solves for each in stretches),
            max(each.miss for each in stretches),
            stretches,
        )
        for stretches in zip(*by_stretch, strict=True)
    )


def _interpolate(solve: Curve, low: float, high: float, first_nodes: int) -> tuple[_Stretch, ...]:
    """One stretch for each row; all take the nodes that the hardest of them needs."""
    nodes = _chebyshev_points(low, high, first_nodes)
    values = solve(nodes)
    while True:
        curves = [_rational_through(nodes, row) for row in values]
        gaps = 0.5 * (nodes[:-1] + nodes[1:])
        few = len(nodes) == first_nodes
        fresh = gaps[1::_CHECK_EVERY] if few else gaps
        solved = solve(fresh)
        read = np.array([curve(fresh) for curve in curves])
        miss, size = np.abs(read - solved), np.abs(solved)
        relative = np.max(miss / size, axis=1)
        allowed = np.maximum(TOLERANCE_OHM, TOLERANCE_RELATIVE * size)
        if np.all(miss <= (_FEW_CHECKS_MARGIN if few else 1.0) * allowed):
            spent = len(nodes) + len(fresh)
            return tuple(
                _Stretch(high, curve, spent, float(off))
                for curve, off in zip(curves, relative, strict=True)
            )
        if len(nodes) >= MOST_NODES:
            where = f"impedance map from {low:.6g} to {high:.6g}"
            raise NotConverged(where, float(relative.max()), TOLERANCE_RELATIVE)
        # The fresh solves become nodes: nothing spent is thrown away.
        order = np.argsort(np.concatenate([nodes, fresh]))
        nodes = np.concatenate([nodes, fresh])[order]
        values = np.concatenate([values, solved], axis=1)[:, order]


def departure(read_ohm: ComplexArray, fresh_ohm: ComplexArray) -> tuple[bool, float]:
    """Whether a map agrees with fresh solves, and the largest departure relative to |Z|."""
    miss, size = np.abs(read_ohm - fresh_ohm), np.abs(fresh_ohm)
    allowed = np.maximum(TOLERANCE_OHM, TOLERANCE_RELATIVE * size)
    return bool(np.all(miss <= allowed)), float(np.max(miss / size))


def _lagrange_weight(nodes: FloatArray, index: int, at: FloatArray) -> FloatArray:
    others = np.delete(nodes, index)
    factors = (at[:, None] - others) / (nodes[index] - others)
    return np.asarray(np.prod(factors, axis=1))


def _read_evenly(mapped: ImpedanceMap, start: float, step: float, count: int) -> ComplexArray:
    """So many readings of a map from a place on, each further by e to the step.

    Only every so many are read, and the rest told by the cubic through the four about them.
    """
    coarse = np.exp(_STRIDE * step * np.arange(-1, -(-count // _STRIDE) + 2))
    # A little beyond the map's ends too: held there the readings would have a kink.
    beyond = float(np.exp(2.0 * _STRIDE * step))
    read = mapped.impedance_ohm(np.clip(start * coarse, mapped.low / beyond, mapped.high * beyond))
    between = np.empty((len(read) - 3, _STRIDE), dtype=np.complex128)
    for place in range(_STRIDE):
        between[:, place] = sum(
            _lagrange_weight(_FOUR, tap, np.array([place / _STRIDE]))[0]
            * read[tap : len(read) - 3 + tap]
            for tap in range(4)
        )
    return between.ravel()[:count]


def _passive(impedance_ohm: ComplexArray) -> ComplexArray:
    """The impedance with a resistance above zero, as a wire's is.

    A wire much shorter than a wavelength has less of it than a map misses of its reactance.
    """
    impedance_ohm.real = np.maximum(impedance_ohm.real, _LEAST_RESISTANCE_OHM)
    return impedance_ohm


def _chebyshev_points(low: float, high: float, count: int) -> FloatArray:
    """Chebyshev points of the second kind between two limits, rising, ends included."""
    angles = np.pi * np.arange(count - 1, -1, -1) / (count - 1)
    points: FloatArray = 0.5 * (low + high) + 0.5 * (high - low) * np.cos(angles)
    return points


def _rational_through(nodes: FloatArray, values: ComplexArray) -> Curve:
    # Scaled to order one, so that the fit's own thresholds mean what they say.
    middle, half = 0.5 * (nodes[0] + nodes[-1]), 0.5 * (nodes[-1] - nodes[0])
    reflection = (values - _FIT_AGAINST_OHM) / (values + _FIT_AGAINST_OHM)
    # No pole is cleaned away, with a warning: whatever goes astray, the fresh solves tell.
    fit = AAA((nodes - middle) / half, reflection, rtol=_FIT_WITHIN, clean_up=False)

    def curve(at: FloatArray) -> ComplexArray:
        fitted = np.asarray(fit((at - middle) / half), dtype=np.complex128)
        return np.asarray(_FIT_AGAINST_OHM * (1.0 + fitted) / (1.0 - fitted))

    return curve
