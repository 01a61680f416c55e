"""A wire as hung: metal, insulation and ground put together into one impedance.

The thin-wire solution takes a radius, a series impedance per metre and reflected potentials;
this module finds them from what a buyer and a surveyor would say.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.conductor import internal_impedance_ohm_per_m
from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.ground import Ground, GroundTable, tabulate
from worker.engine.ground.table import LONGEST_REACH_WAVELENGTHS
from worker.engine.insulation import Sleeve, coated_wire
from worker.engine.material import REFERENCE_TEMPERATURE_C, Material
from worker.engine.thin_wire import FeedImpedance, feed_impedance

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


@dataclass(slots=True)
class GroundTables:
    """Tables of one ground at one height, made when first asked for and kept.

    Parameters
    ----------
    ground : Ground
    height_m : float
        Height of the wire in m.
    reach_m : float
        Length of the longest wire the tables must serve, in m.
    """

    ground: Ground
    height_m: float
    reach_m: float
    _tables: dict[float, GroundTable] = field(default_factory=dict, repr=False)

    def at(self, frequency_hz: float) -> GroundTable:
        """The table at one frequency in Hz."""
        table = self._tables.get(frequency_hz)
        if table is None:
            # No wire solved is longer than the tables can be.
            most_m = LONGEST_REACH_WAVELENGTHS * SPEED_OF_LIGHT_M_PER_S / frequency_hz
            reach_m = min(self.reach_m, most_m)
            table = tabulate(self.ground, frequency_hz, self.height_m, reach_m)
            self._tables[frequency_hz] = table
        return table

    def at_each(self, frequency_hz: FloatArray) -> tuple[GroundTable, ...]:
        """The tables of the distinct frequencies (Hz) of an array, rising."""
        return tuple(self.at(each_hz) for each_hz in np.unique(frequency_hz).tolist())


@dataclass(frozen=True, slots=True)
class HungWire:
    """One conductor, straight and level, over its ground or in free space.

    Attributes
    ----------
    radius_m : float
        Radius of the metal in m.
    material : Material or None
        None is a perfect conductor.
    sleeve : Sleeve or None
        Insulation, if any.
    grounds : GroundTables or None
        None is free space.
    temperature_c : float
        Of the metal, in °C.
    feed_fraction : float
        Place of the feed along the wire, 0.5 at the centre.
    """

    radius_m: float
    material: Material | None = None
    sleeve: Sleeve | None = None
    grounds: GroundTables | None = None
    temperature_c: float = REFERENCE_TEMPERATURE_C
    feed_fraction: float = 0.5

    def feed_impedance(
        self, length_m: ArrayLike, frequency_hz: ArrayLike, *, survey: bool = False
    ) -> FeedImpedance:
        """Impedance at the feed point for every pair of length and frequency.

        Parameters
        ----------
        length_m : array_like
            Lengths in m.
        frequency_hz : array_like
            Frequencies in Hz; broadcast with the lengths.
        survey : bool
            As for `thin_wire.feed_impedance`.

        Returns
        -------
        FeedImpedance
            As the thin-wire solution gives it, in the broadcast shape.

        Raises
        ------
        OutOfRange
            If a length, radius, height or frequency lies outside what the parts cover.
        """
        length, frequency = np.broadcast_arrays(
            np.asarray(length_m, dtype=np.float64), np.asarray(frequency_hz, dtype=np.float64)
        )
        radius_m, series_ohm_per_m = self.electrical(frequency)
        return feed_impedance(
            length,
            radius_m,
            frequency,
            feed_fraction=self.feed_fraction,
            gap_m=self.radius_m,
            wire_impedance_ohm_per_m=series_ohm_per_m,
            reflected=None if self.grounds is None else self.grounds.at_each(frequency),
            survey=survey,
        )

    def electrical(self, frequency_hz: ArrayLike) -> tuple[FloatArray, ComplexArray]:
        """Radius in m and series impedance in Ω/m that stand for metal and insulation.

        Parameters
        ----------
        frequency_hz : array_like

        Returns
        -------
        radius_m, series_ohm_per_m : ndarray
            Of the frequency's shape.
        """
        frequency = np.asarray(frequency_hz, dtype=np.float64)
        radius_m = np.full(frequency.shape, self.radius_m)
        series_ohm_per_m = np.zeros(frequency.shape, dtype=np.complex128)
        if self.material is not None:
            series_ohm_per_m += internal_impedance_ohm_per_m(
                self.radius_m, frequency, self.material, self.temperature_c
            )
        if self.sleeve is not None:
            coated = coated_wire(self.radius_m, self.sleeve, frequency)
            radius_m = np.broadcast_to(coated.equivalent_radius_m, frequency.shape)
            series_ohm_per_m += coated.series_impedance_ohm_per_m
        return radius_m, series_ohm_per_m


def solve_together(
    wires: Sequence[HungWire],
    length_m: ArrayLike,
    frequency_hz: ArrayLike,
    *,
    survey: bool = False,
) -> tuple[ComplexArray, FloatArray]:
    """Impedances of several wires, each of its own length at its own frequency.

    Parameters
    ----------
    wires : sequence of HungWire
        n wires, the same as often as wanted; those that share their ground tables and the place
        of the feed are one batch.
    length_m, frequency_hz : array_like, shape (n,)
        Or one value for all.
    survey : bool
        As for `thin_wire.feed_impedance`.

    Returns
    -------
    impedance_ohm, estimated_error_ohm : ndarray, shape (n,)

    Raises
    ------
    OutOfRange
        As for `HungWire.feed_impedance`.
    """
    length = np.broadcast_to(np.asarray(length_m, dtype=np.float64), len(wires))
    frequency = np.broadcast_to(np.asarray(frequency_hz, dtype=np.float64), len(wires))
    impedance = np.empty(len(wires), dtype=np.complex128)
    error = np.empty(len(wires))
    radius_m, series = _electrical_of_each(wires, frequency)
    batches: dict[tuple[int, float], list[int]] = {}
    for index, wire in enumerate(wires):
        batches.setdefault((id(wire.grounds), wire.feed_fraction), []).append(index)
    for members in batches.values():
        first = wires[members[0]]
        found = feed_impedance(
            length[members],
            radius_m[members],
            frequency[members],
            feed_fraction=first.feed_fraction,
            gap_m=np.array([wires[index].radius_m for index in members]),
            wire_impedance_ohm_per_m=series[members],
            reflected=None if first.grounds is None else first.grounds.at_each(frequency[members]),
            survey=survey,
        )
        impedance[members], error[members] = found.impedance_ohm, found.estimated_error_ohm
    return impedance, error


def _electrical_of_each(
    wires: Sequence[HungWire], frequency_hz: FloatArray
) -> tuple[FloatArray, ComplexArray]:
    """What stands for metal and insulation of each wire at its frequency, (n,) each."""
    radius_m, series = np.empty(len(wires)), np.empty(len(wires), dtype=np.complex128)
    places: dict[int, list[int]] = {}
    for index, wire in enumerate(wires):
        places.setdefault(id(wire), []).append(index)
    for place in places.values():
        radius_m[place], series[place] = wires[place[0]].electrical(frequency_hz[place])
    return radius_m, series
