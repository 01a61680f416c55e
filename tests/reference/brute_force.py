"""The plain way to search: solve every wire of a grid, one by one, and judge each by itself.

Nothing of the search is used here. Impedances are direct solutions of the engine, networks
are all of the engine's exact ones, and service is judged by its definition: a band is served
where the standing wave ratio keeps within the limit. Between the frequencies solved a spline is
drawn through the power available over the power taken, ((R + R0)² + X²) / (4 R R0), which is
all but a parabola about a resonance: measured, its served widths are right to 1e-4 where straight
lines between as many ratios are wrong by 1e-2.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from itertools import product
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from worker.engine.feed_line import terminate
from worker.engine.ground import GROUND_CLASSES
from worker.engine.hung_wire import GroundTables, HungWire
from worker.engine.insulation import Sleeve
from worker.engine.line_catalogue import FEED_LINES
from worker.engine.matching import Component, Form, Kind, l_networks
from worker.engine.material import MATERIALS
from worker.engine.reflection import standing_wave_ratio

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

#: Frequencies of a band that are solved: other ones than the search looks at, but for the
#: edges and the centre; and places that service is judged at.
POINTS = 5
PLACES = 201


@dataclass(frozen=True)
class Judged:
    """Wires of one way, one ratio and n lengths; arrays of shape (n,), ``parts`` (b, n)."""

    way: tuple[str, float | None, float]
    ratio: float
    length_m: FloatArray
    required: NDArray[np.int64]
    width: FloatArray
    swr: FloatArray


@dataclass
class BruteForce:
    """Every wire a request allows, at lengths given; the request as plain fields."""

    fields: dict[str, Any]
    _wires: dict[tuple[str, float | None, float], HungWire] = field(default_factory=dict)

    def __post_init__(self) -> None:
        site, feed = self.fields["site"], self.fields.get("feed", {})
        said = site.get("height_m")
        heights: list[float | None] = said if isinstance(said, list) else [said]
        grounds: dict[float | None, GroundTables | None] = {None: None}
        for height_m in heights:
            if height_m is not None:
                ground = GROUND_CLASSES[site["ground"]]
                grounds[height_m] = GroundTables(ground, height_m, 1.2 * site["span_m"])
        for conductor, height_m, fraction in product(
            self.fields["stock"]["conductors"], heights, feed.get("positions", [0.5])
        ):
            radius_m = 0.5e-3 * conductor["diameter_mm"]
            coat = conductor.get("insulation")
            sleeve = None
            if coat is not None:
                outer_m = radius_m + 1e-3 * coat["thickness_mm"]
                sleeve = Sleeve(outer_m, coat["relative_permittivity"], 0.0)
            self._wires[conductor["item_code"], height_m, fraction] = HungWire(
                radius_m,
                MATERIALS[conductor["material"]],
                sleeve,
                grounds[height_m],
                feed_fraction=fraction,
            )

    def judged(self, lengths_m: FloatArray) -> Iterator[Judged]:
        """Every way and ratio at every length."""
        for way in self._wires:
            impedance = self._impedance(way, lengths_m)
            for ratio in self.fields["feed"]["transformer_ratios"]:
                yield self._judge(way, ratio, lengths_m, impedance)

    def one(self, way: tuple[str, float | None, float], ratio: float, length_m: float) -> Judged:
        """One wire."""
        at_m = np.array([length_m])
        return self._judge(way, ratio, at_m, self._impedance(way, at_m))

    def _grids_hz(self) -> FloatArray:
        edges = [(each["low_mhz"], each["high_mhz"]) for each in self.fields["bands"]]
        return np.array([np.linspace(1e6 * low, 1e6 * high, POINTS) for low, high in edges])

    def _impedance(
        self, way: tuple[str, float | None, float], lengths_m: FloatArray
    ) -> ComplexArray:
        grids_hz = self._grids_hz()
        hertz, metres = np.meshgrid(grids_hz.ravel(), lengths_m, indexing="ij")
        solved = self._wires[way].feed_impedance(metres, hertz)
        assert np.all(solved.converged)
        return solved.impedance_ohm.reshape(*grids_hz.shape, len(lengths_m))

    def _judge(
        self,
        way: tuple[str, float | None, float],
        ratio: float,
        lengths_m: FloatArray,
        impedance_ohm: ComplexArray,
    ) -> Judged:
        bands = self.fields["bands"]
        pairs = zip(impedance_ohm, self._grids_hz(), strict=True)
        swr = np.array([self._swr(each / ratio, hertz) for each, hertz in pairs])
        limits = np.array([each.get("swr_limit", 2.0) for each in bands])
        mismatch = _between(swr)
        parts = _part_within(mismatch, _mismatch(limits)[:, None, None])
        weight = np.array([each.get("weight", 1.0) for each in bands])
        required = np.array([each.get("required", True) for each in bands])
        worst = _swr_of(mismatch.max(axis=1))
        whole = worst <= limits[:, None]
        of_served = np.where(whole, worst, 1.0).max(axis=0)
        return Judged(
            way=way,
            ratio=ratio,
            length_m=lengths_m,
            required=np.sum(whole & required[:, None], axis=0),
            width=weight @ parts / weight.sum(),
            swr=np.where(whole.any(axis=0), of_served, worst.min(axis=0)),
        )

    def _swr(self, load_ohm: ComplexArray, frequency_hz: FloatArray) -> FloatArray:
        """Where the limits apply, of loads behind the transformer; shape (p, n) both."""
        feed = self.fields["feed"]
        if feed.get("matching") == "per-band":
            columns = [_matched(load, frequency_hz) for load in load_ohm.T]
            load_ohm = np.column_stack(columns)
        if feed.get("reference_point") == "transmitter":
            line = feed["feed_line"]
            load_ohm = terminate(
                FEED_LINES[line["line"]], line["length_m"], frequency_hz[:, None], load_ohm
            ).input_impedance_ohm
        return np.asarray(standing_wave_ratio(load_ohm, 50.0))


def _mismatch(swr: FloatArray) -> FloatArray:
    """Power available over power taken."""
    return np.asarray((swr + 1.0) ** 2 / (4.0 * swr))


def _swr_of(mismatch: FloatArray) -> FloatArray:
    magnitude = np.sqrt(1.0 - 1.0 / mismatch)
    return np.asarray((1.0 + magnitude) / (1.0 - magnitude))


def _between(swr: FloatArray) -> FloatArray:
    """Mismatch at all places; ratios (b, points, n) to (b, places, n)."""
    spline = CubicSpline(np.linspace(0.0, 1.0, POINTS), _mismatch(swr), axis=1)
    return np.maximum(spline(np.linspace(0.0, 1.0, PLACES)), 1.0)


def _part_within(mismatch: FloatArray, limit: FloatArray) -> FloatArray:
    """Part of each band within the limit, straight lines drawn between the places."""
    left, right = mismatch[:, :-1], mismatch[:, 1:]
    low, high = np.minimum(left, right), np.maximum(left, right)
    sloping = high > low
    crossed = (limit - low) / np.where(sloping, high - low, 1.0)
    level = np.where(low <= limit, 1.0, 0.0)
    return np.asarray(np.where(sloping, np.clip(crossed, 0.0, 1.0), level).mean(axis=1))


def _matched(load_ohm: ComplexArray, frequency_hz: FloatArray) -> ComplexArray:
    """A load over a band through the network, of all, that keeps its worst SWR lowest."""
    middle = len(frequency_hz) // 2
    relative = frequency_hz / frequency_hz[middle]
    seen: list[ComplexArray] = []
    across: ComplexArray
    for each in l_networks(complex(load_ohm[middle]), 50.0, float(frequency_hz[middle]), 1.0):
        series = 1j * _reactance(each.series, relative)
        across = np.zeros(len(relative), dtype=np.complex128)
        if each.shunt.kind is not Kind.NONE:
            across = np.asarray(1.0 / (1j * _reactance(each.shunt, relative)))
        if each.form is Form.SHUNT_AT_LOAD:
            seen.append(series + 1.0 / (1.0 / load_ohm + across))
        else:
            seen.append(1.0 / (1.0 / (load_ohm + series) + across))
    return min(seen, key=lambda through: float(standing_wave_ratio(through, 50.0).max()))


def _reactance(part: Component, relative: FloatArray) -> FloatArray:
    rising = part.kind is Kind.INDUCTOR
    return part.reactance_ohm * (relative if rising else 1.0 / relative)
