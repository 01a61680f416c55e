"""Impedances of many hung wires over many lengths, for choosing among them.

A wire in free space looks the same at every frequency where its length and its radius are as many
wavelengths. What wires of one electrical size do to themselves is therefore found once, and only
the ground and the metal are put in frequency by frequency and height by height.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from worker.engine.hung_wire import GroundTables, HungWire
from worker.engine.thin_wire import (
    FeedImpedance,
    ReflectedPotentials,
    Rescaled,
    feed_impedance,
    feed_impedance_under,
)

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

#: Series impedances within this part of the median are put in by their first order.
_ALIKE: Final = 0.6
#: Impedance is taken as a parabola in the logarithm of the radius, or as straight where all radii
#: are within this of each other.
_NARROW: Final = 0.25
#: What a further ground costs beside a solution of its own.
_FURTHER: Final = 0.25


def survey_impedances(
    wires: Sequence[HungWire],
    length_m_hz: FloatArray,
    frequency_hz: FloatArray,
    *,
    careful: bool = False,
) -> ComplexArray:
    """Impedances of several wires at a few frequencies, together and no closer than a survey.

    Parameters
    ----------
    wires : sequence of HungWire
        k wires; the more they have in common, the less they cost.
    length_m_hz : ndarray, shape (n,)
        Electrical lengths, as length times frequency in m Hz.
    frequency_hz : ndarray, shape (f,)
    careful : bool
        Solve every wire by itself and closely; by default bare wires of several radii are told
        from two or three, for impedance is smooth in the logarithm of the radius, and their
        metal is put in by its first order, for which the current's own integral is known.

    Returns
    -------
    ndarray, shape (k, f, n)
        In Ω, with the error of `thin_wire.feed_impedance` at ``survey``.

    Raises
    ------
    OutOfRange
        As for `HungWire.feed_impedance`.
    """
    impedance = np.empty((len(wires), len(frequency_hz), len(length_m_hz)), dtype=np.complex128)
    left = list(range(len(wires)))
    for members in [] if careful else _alike(wires, frequency_hz):
        alike = _Alike.of([wires[index] for index in members], frequency_hz)
        if alike.pays:
            impedance[members] = alike.impedances(length_m_hz)
            left = [index for index in left if index not in members]
    by_hanging: dict[tuple[int, float], list[int]] = {}
    for index in left:
        hanging = (id(wires[index].grounds), wires[index].feed_fraction)
        by_hanging.setdefault(hanging, []).append(index)
    for members in by_hanging.values():
        impedance[members] = _each_by_itself(
            [wires[index] for index in members], length_m_hz, frequency_hz, survey=not careful
        ).impedance_ohm
    return impedance


def _alike(wires: Sequence[HungWire], frequency_hz: FloatArray) -> list[list[int]]:
    """Bare wires fed at one place, of metal near enough to the usual one for its first order."""
    groups: dict[tuple[float, bool], list[int]] = {}
    for index, wire in enumerate(wires):
        if wire.sleeve is None:
            groups.setdefault((wire.feed_fraction, wire.grounds is None), []).append(index)
    found: list[list[int]] = []
    for members in groups.values():
        series = np.array([wires[index].electrical(frequency_hz)[1] for index in members])
        usual = np.median(series.real, axis=0) + 1j * np.median(series.imag, axis=0)
        near = np.all(np.abs(series - usual) <= _ALIKE * np.abs(usual), axis=1)
        found.append([index for index, is_near in zip(members, near, strict=True) if is_near])
    return [members for members in found if members]


@dataclass(frozen=True, slots=True)
class _Alike:
    """Bare wires of like metal, fed at one place, over one or several grounds.

    Lengths are told in metres at the first frequency, and one of them is ``metres`` (f,) at the
    others.
    """

    wires: list[HungWire]
    frequency_hz: FloatArray
    metres: FloatArray
    radius_m: FloatArray
    series_ohm_per_m: ComplexArray
    nodes_m: FloatArray
    grounds: list[GroundTables | None]

    @classmethod
    def of(cls, wires: list[HungWire], frequency_hz: FloatArray) -> _Alike:
        metres = frequency_hz[0] / frequency_hz
        radius_m = np.array([wire.radius_m for wire in wires])[:, None] / metres
        narrow = np.log(radius_m.max() / radius_m.min()) <= _NARROW
        return cls(
            wires=wires,
            frequency_hz=frequency_hz,
            metres=metres,
            radius_m=radius_m,
            series_ohm_per_m=np.array([wire.electrical(frequency_hz)[1] for wire in wires])
            * metres,
            nodes_m=np.geomspace(radius_m.min(), radius_m.max(), 2 if narrow else 3),
            grounds=list({id(wire.grounds): wire.grounds for wire in wires}.values()),
        )

    @property
    def pays(self) -> bool:
        """Whether going by few radii costs less than solving each wire by itself."""
        further = len(self.grounds) * len(self.frequency_hz) - 1
        return len(self.nodes_m) * (1.0 + _FURTHER * further) < self.radius_m.size

    def impedances(self, length_m_hz: FloatArray) -> ComplexArray:
        """Impedances (k, f, n) from solutions at few radii."""
        typical = self.series_ohm_per_m.mean(axis=0)
        conditions: list[tuple[ReflectedPotentials | None, complex]] = [
            (self._below(ground, index), complex(typical[index]))
            for ground in self.grounds
            for index in range(len(self.frequency_hz))
        ]
        found = feed_impedance_under(
            length_m_hz / self.frequency_hz[0],
            self.nodes_m[:, None],
            float(self.frequency_hz[0]),
            conditions=conditions,
            feed_fraction=self.wires[0].feed_fraction,
            gap_m=self.nodes_m[:, None],
            survey=True,
        )
        impedance = np.empty((*self.radius_m.shape, len(length_m_hz)), dtype=np.complex128)
        places = {id(ground): place for place, ground in enumerate(self.grounds)}
        for row, wire in enumerate(self.wires):
            first = places[id(wire.grounds)] * len(self.frequency_hz)
            for index, radius_m in enumerate(self.radius_m[row]):
                solved = found[first + index]
                weight = _lagrange_weights(np.log(self.nodes_m), float(np.log(radius_m)))
                departure = self.series_ohm_per_m[row, index] - typical[index]
                slope = weight @ solved.wire_impedance_slope_m
                impedance[row, index] = weight @ solved.impedance_ohm + departure * slope
        return impedance

    def _below(self, ground: GroundTables | None, index: int) -> ReflectedPotentials | None:
        if ground is None:
            return None
        return Rescaled(ground.at(float(self.frequency_hz[index])), float(self.metres[index]))


def _each_by_itself(
    wires: list[HungWire], length_m_hz: FloatArray, frequency_hz: FloatArray, *, survey: bool
) -> FeedImpedance:
    """Any wires of one hanging, each with its own radius, gap and series impedance; (k, f, n)."""
    radii, series = zip(*(wire.electrical(frequency_hz) for wire in wires), strict=True)
    first = wires[0]
    return feed_impedance(
        length_m_hz / frequency_hz[:, None],
        np.array(radii)[:, :, None],
        frequency_hz[:, None],
        feed_fraction=first.feed_fraction,
        gap_m=np.array([wire.radius_m for wire in wires])[:, None, None],
        wire_impedance_ohm_per_m=np.array(series)[:, :, None],
        reflected=None if first.grounds is None else first.grounds.at_each(frequency_hz),
        survey=survey,
    )


def _lagrange_weights(nodes: FloatArray, at: float) -> FloatArray:
    """Weights (k,) that interpolate from k nodes to a place; all alike where nodes are one."""
    if np.ptp(nodes) == 0.0:
        return np.full(len(nodes), 1.0 / len(nodes))
    return np.array(
        [
            np.prod([(at - other) / (node - other) for other in nodes if other != node])
            for node in nodes
        ]
    )
