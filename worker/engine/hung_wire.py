"""A wire as hung: metal, insulation and ground put together into one impedance.

The thin-wire solution takes a radius, a series impedance per metre and reflected potentials;
this module finds them from what a buyer and a surveyor would say.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TypeVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.conductor import internal_impedance_ohm_per_m
from worker.engine.ground import Ground, GroundTable, tabulate
from worker.engine.insulation import Sleeve, coated_wire
from worker.engine.material import REFERENCE_TEMPERATURE_C, Material
from worker.engine.thin_wire import FeedImpedance, feed_impedance

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
_Scalar = TypeVar("_Scalar", bound=np.generic)


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
            table = tabulate(self.ground, frequency_hz, self.height_m, self.reach_m)
            self._tables[frequency_hz] = table
        return table


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

    def feed_impedance(self, length_m: ArrayLike, frequency_hz: ArrayLike) -> FeedImpedance:
        """Impedance at the feed point for every pair of length and frequency.

        Parameters
        ----------
        length_m : array_like
            Lengths in m.
        frequency_hz : array_like
            Frequencies in Hz; broadcast with the lengths.

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
        if self.grounds is None:
            return self._solve(length, frequency, None)
        return self._solve_over_ground(length, frequency, self.grounds)

    def _solve_over_ground(
        self, length_m: FloatArray, frequency_hz: FloatArray, grounds: GroundTables
    ) -> FeedImpedance:
        """One batch for each frequency, for a table of the ground holds for one."""
        parts: list[FeedImpedance] = []
        places: list[NDArray[np.intp]] = []
        flat_m, flat_hz = length_m.ravel(), frequency_hz.ravel()
        for each_hz in np.unique(flat_hz):
            place = np.flatnonzero(flat_hz == each_hz)
            parts.append(self._solve(flat_m[place], flat_hz[place], grounds.at(float(each_hz))))
            places.append(place)
        back = np.argsort(np.concatenate(places))

        def gathered(values: list[NDArray[_Scalar]]) -> NDArray[_Scalar]:
            return np.concatenate(values)[back].reshape(length_m.shape)

        return FeedImpedance(
            impedance_ohm=gathered([each.impedance_ohm for each in parts]),
            estimated_error_ohm=gathered([each.estimated_error_ohm for each in parts]),
            unknowns=gathered([each.unknowns for each in parts]),
            gap_m=gathered([each.gap_m for each in parts]),
            converged=gathered([each.converged for each in parts]),
            model=parts[0].model,
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

    def _solve(
        self, length_m: FloatArray, frequency_hz: FloatArray, table: GroundTable | None
    ) -> FeedImpedance:
        radius_m, series_ohm_per_m = self.electrical(frequency_hz)
        return feed_impedance(
            length_m,
            radius_m,
            frequency_hz,
            feed_fraction=self.feed_fraction,
            gap_m=self.radius_m,
            wire_impedance_ohm_per_m=series_ohm_per_m,
            reflected=table,
        )


def survey_impedances(
    wires: Sequence[HungWire], length_m: ArrayLike, frequency_hz: float
) -> ComplexArray:
    """Impedances of several wires at one frequency, solved together and no closer than a survey.

    Parameters
    ----------
    wires : sequence of HungWire
        k wires; those that share their ground tables and the place of the feed are one batch.
    length_m : array_like, shape (n,)
        Lengths in m, the same for all.
    frequency_hz : float

    Returns
    -------
    ndarray, shape (k, n)
        In Ω, with the error of `thin_wire.feed_impedance` at ``survey``.

    Raises
    ------
    OutOfRange
        As for `HungWire.feed_impedance`.
    """
    length = np.asarray(length_m, dtype=np.float64)
    impedance = np.empty((len(wires), length.size), dtype=np.complex128)
    batches: dict[tuple[int, float], list[int]] = {}
    for index, wire in enumerate(wires):
        batches.setdefault((id(wire.grounds), wire.feed_fraction), []).append(index)
    for members in batches.values():
        first = wires[members[0]]
        radii, series = zip(*(wires[i].electrical(frequency_hz) for i in members), strict=True)
        solved = feed_impedance(
            length[None, :],
            np.array(radii)[:, None],
            frequency_hz,
            feed_fraction=first.feed_fraction,
            gap_m=np.array([wires[i].radius_m for i in members])[:, None],
            wire_impedance_ohm_per_m=np.array(series)[:, None],
            reflected=None if first.grounds is None else first.grounds.at(frequency_hz),
            survey=True,
        )
        impedance[members] = solved.impedance_ohm
    return impedance
