"""Checked input of the thin-wire solution, flattened to one row a wire."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import inf, pi
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.engine.thin_wire.reflection import GroundBelow, ReflectedPotentials

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

LENGTH_RANGE_WAVELENGTHS: Final = (0.005, 10.0)
RADIUS_RANGE_WAVELENGTHS: Final = (1e-7, 5e-3)
GAP_RANGE_RADII: Final = (1e-2, inf)
# A port stays this many radii away from the ends and from other ports, and clear of them by as
# much as its gap is wide.
PORT_CLEARANCE_RADII: Final = 5.0
SHORTEST_LENGTH_RADII: Final = 2.0 * PORT_CLEARANCE_RADII

# Below this the current would no longer be even around the wire.
LOWEST_HEIGHT_RADII: Final = 2.0

_LARGEST_IMPEDANCE = 1e12
# Loads closer than this fraction of the length to the feed or to each other are in one place.
_SAME_PLACE = 1e-9
# Width of the smooth source: in radians of phase, and as a fraction of the distance to the
# nearest end, to the nearest other port and to the image in the ground.
_SIGMA_PHASE = 0.3
_SIGMA_CLEARANCE = 1.0 / 6.0
# Ranges are inclusive in spite of rounding in ratios of two lengths.
_SLACK = 1e-9


@dataclass(frozen=True, slots=True)
class WireBatch:
    """B wires with P ports each: the feed first, then the loads elsewhere.

    Attributes
    ----------
    shape
        Shape of the caller's batch, of B elements.
    length_m, radius_m, wavenumber_per_m, gap_m, wire_impedance_ohm_per_m
        One of each a wire, (B,).
    port_position_m, sigma_m, port_impedance_ohm
        Signed positions from the centre, smooth source widths and series impedances, (B, P).
    ground
        Under each wire, or None in free space.
    """

    shape: tuple[int, ...]
    length_m: FloatArray
    radius_m: FloatArray
    wavenumber_per_m: FloatArray
    gap_m: FloatArray
    wire_impedance_ohm_per_m: ComplexArray
    port_position_m: FloatArray
    sigma_m: FloatArray
    port_impedance_ohm: ComplexArray
    ground: GroundBelow | None

    @property
    def height_m(self) -> float:
        """Height above ground, inf in free space."""
        return inf if self.ground is None else self.ground.height_m

    def __getitem__(self, rows: NDArray[np.intp]) -> WireBatch:
        """Those rows as a batch of their own."""
        return WireBatch(
            shape=(rows.size,),
            length_m=self.length_m[rows],
            radius_m=self.radius_m[rows],
            wavenumber_per_m=self.wavenumber_per_m[rows],
            gap_m=self.gap_m[rows],
            wire_impedance_ohm_per_m=self.wire_impedance_ohm_per_m[rows],
            port_position_m=self.port_position_m[rows],
            sigma_m=self.sigma_m[rows],
            port_impedance_ohm=self.port_impedance_ohm[rows],
            ground=None if self.ground is None else self.ground[rows],
        )


def checked_batch(
    length_m: ArrayLike,
    radius_m: ArrayLike,
    frequency_hz: ArrayLike,
    *,
    feed_fraction: ArrayLike,
    gap_m: ArrayLike | None,
    wire_impedance_ohm_per_m: ArrayLike,
    loads: Sequence[tuple[float, ArrayLike]],
    reflected: ReflectedPotentials | Sequence[ReflectedPotentials] | None,
) -> WireBatch:
    """Broadcast and check the arguments of `wire.feed_impedance`; raises OutOfRange."""
    length, radius, frequency, feed, gap = np.broadcast_arrays(
        *(
            np.asarray(array, dtype=float)
            for array in (
                length_m,
                radius_m,
                frequency_hz,
                feed_fraction,
                radius_m if gap_m is None else gap_m,
            )
        )
    )
    series = np.asarray(wire_impedance_ohm_per_m, dtype=complex)
    shape = np.broadcast_shapes(
        length.shape, series.shape, *(np.shape(impedance) for _, impedance in loads)
    )
    length, radius, frequency, feed, gap = (
        np.broadcast_to(array, shape).ravel() for array in (length, radius, frequency, feed, gap)
    )
    series = np.broadcast_to(series, shape).ravel()
    _require("frequency_hz", frequency, 1.0, 1e12, "Hz")
    wavelength = SPEED_OF_LIGHT_M_PER_S / frequency
    _require("length in wavelengths", length / wavelength, *LENGTH_RANGE_WAVELENGTHS)
    _require("radius in wavelengths", radius / wavelength, *RADIUS_RANGE_WAVELENGTHS)
    _require("length in radii", length / radius, SHORTEST_LENGTH_RADII, inf)
    _require("gap in radii", gap / radius, *GAP_RANGE_RADII)
    _require("resistance of the wire per metre", series.real, 0.0, _LARGEST_IMPEDANCE, "ohm/m")
    _require("impedance of the wire per metre", np.abs(series), 0.0, _LARGEST_IMPEDANCE, "ohm/m")
    ground = None if reflected is None else _ground_below(reflected, frequency)
    height = inf if ground is None else ground.height_m
    _require("height in radii", height / radius, LOWEST_HEIGHT_RADII, inf)
    ports, port_impedance = _ports(length, feed, loads, shape)
    clearance = _clearance(ports, length)
    needed = np.maximum(PORT_CLEARANCE_RADII * radius, gap)
    _require(
        "distance of a feed or load from ends and other loads, over the least permitted",
        (clearance / needed[:, None]).ravel(),
        1.0,
        inf,
    )
    phase_limit = _SIGMA_PHASE / (2.0 * pi) * wavelength
    image_limit = _SIGMA_CLEARANCE * 2.0 * height
    return WireBatch(
        shape=shape,
        length_m=length,
        radius_m=radius,
        wavenumber_per_m=2.0 * pi / wavelength,
        gap_m=gap,
        wire_impedance_ohm_per_m=series,
        port_position_m=ports,
        sigma_m=np.minimum(
            np.minimum(phase_limit, image_limit)[:, None], _SIGMA_CLEARANCE * clearance
        ),
        port_impedance_ohm=port_impedance,
        ground=ground,
    )


def _ground_below(
    reflected: ReflectedPotentials | Sequence[ReflectedPotentials], frequency: FloatArray
) -> GroundBelow:
    """The potentials that hold for each wire's frequency, of which there must be some."""
    potentials = reflected if isinstance(reflected, Sequence) else (reflected,)
    known = np.array([each.frequency_hz for each in potentials])
    order = np.argsort(known)
    after = np.minimum(np.searchsorted(known[order], frequency * (1.0 - _SLACK)), len(known) - 1)
    which = order[after]
    nearest = known[which]
    wrong = np.abs(frequency - nearest) > _SLACK * nearest
    if np.any(wrong):
        first = int(np.argmax(wrong))
        held = float(nearest[first])
        raise OutOfRange("frequency_hz", float(frequency[first]), held, held, "Hz")
    height = potentials[0].height_m
    for each in potentials:
        if each.height_m != height:
            raise OutOfRange("height_m", each.height_m, height, height, "m")
    return GroundBelow(potentials, which)


def _ports(
    length: FloatArray,
    feed: FloatArray,
    loads: Sequence[tuple[float, ArrayLike]],
    shape: tuple[int, ...],
) -> tuple[FloatArray, ComplexArray]:
    """Positions and series impedances (B, P) of the feed and of the loads not at its place."""
    fractions = [feed]
    impedances = [np.zeros(length.size, dtype=complex)]
    for fraction, value in loads:
        _require("position of a load as a fraction of the length", np.array([fraction]), 0.0, 1.0)
        impedance = np.broadcast_to(np.asarray(value, dtype=complex), shape).ravel()
        _require("load impedance", np.abs(impedance), 0.0, _LARGEST_IMPEDANCE, "ohm")
        for place, other in enumerate(fractions):
            if np.all(np.abs(other - fraction) < _SAME_PLACE):
                impedances[place] = impedances[place] + impedance
                break
        else:
            fractions.append(np.full(length.size, float(fraction)))
            impedances.append(impedance.astype(complex))
    positions = (np.stack(fractions, axis=1) - 0.5) * length[:, None]
    return positions, np.stack(impedances, axis=1)


def _clearance(ports: FloatArray, length: FloatArray) -> FloatArray:
    """Distance from each port to the nearest end or other port, (B, P)."""
    nearest = length[:, None] / 2.0 - np.abs(ports)
    apart = np.abs(ports[:, :, None] - ports[:, None, :])
    apart[:, np.arange(ports.shape[1]), np.arange(ports.shape[1])] = inf
    clearance: FloatArray = np.minimum(nearest, np.min(apart, axis=2))
    return clearance


def _require(quantity: str, values: FloatArray, low: float, high: float, unit: str = "") -> None:
    """Raise OutOfRange, with the first offending value, unless all lie within the range."""
    outside = ~((values >= low * (1.0 - _SLACK)) & (values <= high * (1.0 + _SLACK)))
    if np.any(outside):
        raise OutOfRange(quantity, float(values[outside][0]), low, high, unit)
