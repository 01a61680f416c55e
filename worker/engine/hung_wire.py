"""A wire as hung: metal, insulation and ground put together into one impedance.

The thin-wire solution takes a radius, a series impedance per metre and reflected potentials;
this module finds them from what a buyer and a surveyor would say.
"""

from __future__ import annotations

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

    def _solve(
        self, length_m: FloatArray, frequency_hz: FloatArray, table: GroundTable | None
    ) -> FeedImpedance:
        radius_m: float | FloatArray = self.radius_m
        series_ohm_per_m = np.zeros(frequency_hz.shape, dtype=np.complex128)
        if self.material is not None:
            series_ohm_per_m += internal_impedance_ohm_per_m(
                self.radius_m, frequency_hz, self.material, self.temperature_c
            )
        if self.sleeve is not None:
            coated = coated_wire(self.radius_m, self.sleeve, frequency_hz)
            radius_m = coated.equivalent_radius_m
            series_ohm_per_m += coated.series_impedance_ohm_per_m
        return feed_impedance(
            length_m,
            radius_m,
            frequency_hz,
            feed_fraction=self.feed_fraction,
            gap_m=self.radius_m,
            wire_impedance_ohm_per_m=series_ohm_per_m,
            reflected=table,
        )
