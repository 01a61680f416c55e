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

#: A map is one interpolant per stretch of at most this many wavelengths of wire.
STRETCH_WAVELENGTHS: Final = 2.0
#: Direct solves the first interpolant of a stretch is built on, and the most it may take.
FIRST_NODES: Final = 15
MOST_NODES: Final = 120
#: Of the gaps between solves every third is checked, until a check fails.
_CHECK_EVERY: Final = 3
#: A band narrower than this part of its frequency is mapped at its edges alone, a wider one
#: at its centre too.
_NARROW_BAND: Final = 0.01
#: Agreement asked of a map with fresh solves: the larger of the two.
TOLERANCE_OHM: Final = 0.1
TOLERANCE_RELATIVE: Final = 1e-3
#: Below this the interpolant would only chase the last digits of the solver.
_FIT_RELATIVE: Final = 1e-8


@dataclass(frozen=True, slots=True)
class _Stretch:
    high: float
    curve: Curve
    solves: int
    miss: float


@dataclass(frozen=True, slots=True)
class ImpedanceMap:
    """Feed impedance between two lengths (m), or between two frequencies (Hz).

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
        """Impedance in Ω at every length or frequency inside the map; shape of ``at``."""
        impedance = np.empty(at.shape, dtype=np.complex128)
        ends = np.array([stretch.high for stretch in self._stretches[:-1]])
        which = np.searchsorted(ends, at)
        for index, stretch in enumerate(self._stretches):
            inside = which == index
            if inside.any():
                impedance[inside] = stretch.curve(at[inside])
        return impedance


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
    """

    frequencies_hz: FloatArray
    maps: tuple[ImpedanceMap, ...]

    def impedance_ohm(self, length_m: FloatArray, frequency_hz: FloatArray) -> ComplexArray:
        """Impedance in Ω at p frequencies (Hz) of n lengths (m); shape (p, n)."""
        electrical = frequency_hz[:, None] * length_m
        impedance = np.zeros(electrical.shape, dtype=np.complex128)
        for index, each in enumerate(self.maps):
            weight = _lagrange_weight(self.frequencies_hz, index, frequency_hz)
            at_m = np.clip(electrical / self.frequencies_hz[index], each.low, each.high)
            impedance += weight[:, None] * each.impedance_ohm(at_m)
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
    """Map the feed impedance of one conductor over a band and a range of lengths.

    Parameters
    ----------
    wire : WireModel
    low_hz, high_hz : float
        Edges of the band in Hz.
    low_m, high_m : float
        Limits of length in m.

    Raises
    ------
    NotConverged
        If a stretch still departs from fresh solves with the most nodes allowed.
    """
    count = 2 if high_hz < (1.0 + _NARROW_BAND) * low_hz else 3
    frequencies_hz = np.linspace(low_hz, high_hz, count)
    # Read at equal electrical length: the low edge is asked for longer wire, the high for shorter.
    maps = tuple(
        map_over_length(wire, float(f), low_m * low_hz / float(f), high_m * high_hz / float(f))
        for f in frequencies_hz
    )
    return BandMap(frequencies_hz, maps)


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
    stretch_m = STRETCH_WAVELENGTHS * SPEED_OF_LIGHT_M_PER_S / frequency_hz

    def solve(length_m: FloatArray) -> ComplexArray:
        return wire.solve(length_m, np.full(length_m.shape, frequency_hz)).impedance_ohm

    return _map(solve, low_m, high_m, stretch_m)


def map_over_frequency(
    wire: WireModel, length_m: float, low_hz: float, high_hz: float
) -> ImpedanceMap:
    """Map the feed impedance of one wire over frequency.

    Parameters
    ----------
    wire : WireModel
    length_m : float
    low_hz, high_hz : float
        Limits of the map in Hz.

    Raises
    ------
    NotConverged
        If a stretch still departs from fresh solves with the most nodes allowed.
    """
    stretch_hz = STRETCH_WAVELENGTHS * SPEED_OF_LIGHT_M_PER_S / length_m

    def solve(frequency_hz: FloatArray) -> ComplexArray:
        return wire.solve(np.full(frequency_hz.shape, length_m), frequency_hz).impedance_ohm

    return _map(solve, low_hz, high_hz, stretch_hz)


def _map(solve: Curve, low: float, high: float, stretch: float) -> ImpedanceMap:
    edges = np.linspace(low, high, max(1, int(np.ceil((high - low) / stretch))) + 1)
    stretches = tuple(_interpolate(solve, float(a), float(b)) for a, b in pairwise(edges))
    return ImpedanceMap(
        low,
        high,
        sum(each.solves for each in stretches),
        max(each.miss for each in stretches),
        stretches,
    )


def _interpolate(solve: Curve, low: float, high: float) -> _Stretch:
    nodes = _chebyshev_points(low, high, FIRST_NODES)
    values = solve(nodes)
    while True:
        curve = _rational_through(nodes, values)
        gaps = 0.5 * (nodes[:-1] + nodes[1:])
        fresh = gaps[1::_CHECK_EVERY] if len(nodes) == FIRST_NODES else gaps
        solved = solve(fresh)
        miss, size = np.abs(curve(fresh) - solved), np.abs(solved)
        relative = float(np.max(miss / size))
        if np.all(miss <= np.maximum(TOLERANCE_OHM, TOLERANCE_RELATIVE * size)):
            return _Stretch(high, curve, len(nodes) + len(fresh), relative)
        if len(nodes) >= MOST_NODES:
            where = f"impedance map from {low:.6g} to {high:.6g}"
            raise NotConverged(where, relative, TOLERANCE_RELATIVE)
        # The fresh solves become nodes: nothing spent is thrown away.
        order = np.argsort(np.concatenate([nodes, fresh]))
        nodes = np.concatenate([nodes, fresh])[order]
        values = np.concatenate([values, solved])[order]


def _lagrange_weight(nodes: FloatArray, index: int, at: FloatArray) -> FloatArray:
    others = np.delete(nodes, index)
    factors = (at[:, None] - others) / (nodes[index] - others)
    return np.asarray(np.prod(factors, axis=1))


def _chebyshev_points(low: float, high: float, count: int) -> FloatArray:
    """Chebyshev points of the second kind between two limits, rising, ends included."""
    angles = np.pi * np.arange(count - 1, -1, -1) / (count - 1)
    points: FloatArray = 0.5 * (low + high) + 0.5 * (high - low) * np.cos(angles)
    return points


def _rational_through(nodes: FloatArray, values: ComplexArray) -> Curve:
    # Scaled to order one, so that the fit's own thresholds mean what they say.
    middle, half = 0.5 * (nodes[0] + nodes[-1]), 0.5 * (nodes[-1] - nodes[0])
    fit = AAA((nodes - middle) / half, values, rtol=_FIT_RELATIVE)

    def curve(at: FloatArray) -> ComplexArray:
        return np.asarray(fit((at - middle) / half), dtype=np.complex128)

    return curve
