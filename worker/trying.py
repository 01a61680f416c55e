"""What if: one wire in, how it would serve each band out, fast enough to move it by hand.

Each band is solved at equal electrical lengths for its edges and centre, read between as
`BandMap` reads its maps, and is so told within the tolerance of those maps.
"""

from __future__ import annotations

import itertools
import math
from collections import OrderedDict
from dataclasses import dataclass
from typing import Final

import numpy as np
from scipy.interpolate import AAA, BarycentricInterpolator

from service.contracts.candidate import Service
from service.contracts.report import ReportPoint
from service.contracts.what_if import WhatIf, WhatIfBand, WhatIfRequest
from worker.engine import ENGINE_VERSION
from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.ground import Ground
from worker.engine.hung_pattern import HungPattern, hung_patterns
from worker.engine.hung_wire import GroundTables, HungWire, solve_together
from worker.engine.line_catalogue import FEED_LINES
from worker.search.feeding import Fed, Feeding
from worker.search.scoring import FULLY_SERVED, served_fraction
from worker.search.space import ComplexArray, FloatArray
from worker.translation.outcome import report_points
from worker.translation.wires import ground_of, hung_wire

#: Points told over each band, an odd number so that the centre is one of them.
GRID_POINTS: Final = 21
#: Bands over which radius and height in wavelengths drift by less, as a part of the frequency
#: times what the drift weighs, are solved at their centre alone.
_LEAST_DRIFT: Final = 0.002
#: Wider ones at edges and centre, and in steps of at most this part.
_WIDEST_STEP: Final = 0.04
#: What is interpolated is the reflection against about a wire's own resistance as a line, which
#: turns by twice the wire's phase length; it must be met to this.
_AGAINST_OHM: Final = 600.0
_WITHIN: Final = 2e-5
_FIT_WITHIN: Final = 1e-5
#: From so many nodes on anti-resonances are near enough to be followed by a rational function.
_RATIONAL_FROM: Final = 6
#: Tables of the ground serve wires a little longer than the one they were made for.
_TABLE_REACH: Final = 1.25
_MOST_TABLES: Final = 4


@dataclass(frozen=True, slots=True)
class _Band:
    """One band's frequencies solved at, and how many electrical lengths each."""

    low_hz: float
    high_hz: float
    solved_hz: FloatArray
    nodes: int

    def nodes_m_hz(self, length_m: float) -> FloatArray:
        """Electrical lengths, as length times frequency, that the band's grid lies between."""
        middle, half = 0.5 * (self.high_hz + self.low_hz), 0.5 * (self.high_hz - self.low_hz)
        angles = np.pi * np.arange(self.nodes - 1, -1, -1) / (self.nodes - 1)
        nodes: FloatArray = length_m * (middle + half * np.cos(angles))
        return nodes


class Trials:
    """Answers what-ifs one after the other, and keeps the last tables of the ground warm."""

    def __init__(self) -> None:
        self._grounds: OrderedDict[tuple[Ground, float], GroundTables] = OrderedDict()

    def answer(self, asked: WhatIfRequest) -> WhatIf:
        """How the wire would serve each band.

        Raises
        ------
        EngineError
            If the wire lies outside what the models cover.
        """
        wire = hung_wire(asked.conductor, self._tables(asked), asked.feed_fraction)
        bands = [_band(asked, 1e6 * band.low_mhz, 1e6 * band.high_mhz) for band in asked.bands]
        impedances = _impedances(wire, asked.length_m, bands)
        centres_hz = [0.5 * (band.low_hz + band.high_hz) for band in bands]
        patterns = hung_patterns([wire] * len(bands), [asked.length_m] * len(bands), centres_hz)
        feeding = _feeding(asked)
        return WhatIf(
            engine_version=ENGINE_VERSION,
            request=asked,
            bands=tuple(
                _told(asked, index, feeding, impedance_ohm, pattern)
                for index, (impedance_ohm, pattern) in enumerate(
                    zip(impedances, patterns, strict=True)
                )
            ),
        )

    def _tables(self, asked: WhatIfRequest) -> GroundTables | None:
        ground = ground_of(asked.ground)
        if ground is None or asked.height_m is None:
            return None
        key = (ground, asked.height_m)
        kept = self._grounds.pop(key, None)
        if kept is None or kept.reach_m < 1.01 * asked.length_m:
            kept = GroundTables(ground, asked.height_m, _TABLE_REACH * asked.length_m)
        self._grounds[key] = kept
        while len(self._grounds) > _MOST_TABLES:
            self._grounds.popitem(last=False)
        return kept


def _feeding(asked: WhatIfRequest) -> Feeding:
    line = asked.feed_line
    return Feeding(
        reference_ohm=asked.reference_ohm,
        line=None if line is None else FEED_LINES[line.line],
        line_length_m=0.0 if line is None else line.length_m,
        at_transmitter=asked.reference_point == "transmitter",
        matched=asked.matching == "per-band",
    )


def _band(asked: WhatIfRequest, low_hz: float, high_hz: float) -> _Band:
    width = high_hz / low_hz - 1.0
    centre_hz = 0.5 * (low_hz + high_hz)
    height_wavelengths = (asked.height_m or 0.0) * centre_hz / SPEED_OF_LIGHT_M_PER_S
    if width * (0.5 + height_wavelengths) < _LEAST_DRIFT:
        solved_hz = np.array([centre_hz])
    else:
        steps = 2 * max(1, math.ceil(0.5 * width / _WIDEST_STEP))
        angles = np.pi * np.arange(steps, -1, -1) / steps
        solved_hz = centre_hz + 0.5 * (high_hz - low_hz) * np.cos(angles)
    # Half the turn of the reflection from edge to edge of the band.
    turn_rad = 2.0 * np.pi * asked.length_m * (high_hz - low_hz) / SPEED_OF_LIGHT_M_PER_S
    nodes = 3
    while turn_rad**nodes / (2.0 ** (nodes - 1) * math.factorial(nodes)) > _WITHIN:
        nodes += 1
    return _Band(low_hz, high_hz, solved_hz, nodes)


def _impedances(wire: HungWire, length_m: float, bands: list[_Band]) -> list[ComplexArray]:
    """Impedance over each band's grid, all bands solved in one batch."""
    lengths, frequencies = [], []
    for band in bands:
        for at_hz in band.solved_hz:
            nodes_m = band.nodes_m_hz(length_m) / at_hz
            lengths.append(nodes_m)
            frequencies.append(np.full(nodes_m.shape, at_hz))
    length, frequency = np.concatenate(lengths), np.concatenate(frequencies)
    solved_ohm, _ = solve_together([wire] * len(length), length, frequency, survey=True)
    rows = iter(np.split(solved_ohm, np.cumsum([len(each) for each in lengths])[:-1]))
    return [_read(band, length_m, [next(rows) for _ in band.solved_hz]) for band in bands]


def _read(band: _Band, length_m: float, solved_ohm: list[ComplexArray]) -> ComplexArray:
    grid_hz = np.linspace(band.low_hz, band.high_hz, GRID_POINTS)
    nodes_m_hz = band.nodes_m_hz(length_m)
    read = []
    for row in solved_ohm:
        reflection = (row - _AGAINST_OHM) / (row + _AGAINST_OHM)
        read.append(_along(nodes_m_hz, reflection, length_m * grid_hz))
    if len(read) == 1:
        reflection = read[0]
    else:
        across = BarycentricInterpolator(band.solved_hz, np.eye(len(read)))(grid_hz)
        reflection = np.einsum("pk,kp->p", across, np.array(read))
    return np.asarray(_AGAINST_OHM * (1.0 + reflection) / (1.0 - reflection))


def _along(nodes: FloatArray, values: ComplexArray, at: FloatArray) -> ComplexArray:
    """Read between nodes, scaled to order one so that the fit's thresholds mean what they say."""
    middle, half = 0.5 * (nodes[0] + nodes[-1]), 0.5 * (nodes[-1] - nodes[0])
    if len(nodes) < _RATIONAL_FROM:
        return np.asarray(
            BarycentricInterpolator((nodes - middle) / half, values)((at - middle) / half)
        )
    # Nothing is cleaned away, with a warning; it goes through every node to within the solver.
    fit = AAA((nodes - middle) / half, values, rtol=_FIT_WITHIN, clean_up=False)
    return np.asarray(fit((at - middle) / half), dtype=np.complex128)


def _told(
    asked: WhatIfRequest,
    index: int,
    feeding: Feeding,
    impedance_ohm: ComplexArray,
    found: HungPattern,
) -> WhatIfBand:
    band = asked.bands[index]
    grid_hz = 1e6 * np.linspace(band.low_mhz, band.high_mhz, GRID_POINTS)
    fed = feeding.feed(impedance_ohm[:, None], grid_hz, asked.transformer_ratio)
    part = float(served_fraction(fed.limited_swr[None], np.array(band.swr_limit))[0, 0])
    service: Service = "unserved"
    if part >= FULLY_SERVED:
        service = "served"
    elif part > 0.0:
        service = "partly served"
    points = report_points(grid_hz, impedance_ohm, _one_of(fed), asked.reference_ohm)
    pattern = found.pattern
    return WhatIfBand(
        name=band.name,
        service=service,
        served_fraction=round(min(part, 1.0), 6),
        swr_limit=band.swr_limit,
        swr_worst=round(float(fed.limited_swr.max()), 4),
        resonance_mhz=_resonance_mhz(points),
        low=points[0],
        centre=points[GRID_POINTS // 2],
        high=points[-1],
        grid=points,
        gain_dbi=None if pattern is None else round(pattern.gain_dbi, 2),
        take_off_deg=None if pattern is None else round(math.degrees(pattern.take_off_rad), 1),
        radiated_fraction=None if pattern is None else round(pattern.radiated_fraction, 4),
    )


def _one_of(fed: Fed) -> Fed:
    """The only wire of what was fed."""
    return Fed(
        fed.behind_ohm[:, 0],
        fed.swr[:, 0],
        fed.limited_swr[:, 0],
        None if fed.transmitter_swr is None else fed.transmitter_swr[:, 0],
        None if fed.line_loss_db is None else fed.line_loss_db[:, 0],
    )


def _resonance_mhz(points: tuple[ReportPoint, ...]) -> float | None:
    """Where the reactance rises through zero within the band, first if more than once."""
    for below, above in itertools.pairwise(points):
        low, high = below.reactance_ohm, above.reactance_ohm
        if low <= 0.0 < high:
            part = -low / (high - low)
            at = below.frequency_mhz + part * (above.frequency_mhz - below.frequency_mhz)
            return round(at, 6)
    return None
