"""Stranded wire: the smooth wire it stands for, and what its grooves cost."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi, sqrt

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.conductor import internal_impedance_ohm_per_m
from worker.engine.limits import require_within
from worker.engine.material import Material


@dataclass(frozen=True, slots=True)
class StrandedWire:
    """A concentric-lay stranded wire seen from outside.

    Parameters
    ----------
    strand_count, strand_diameter_m
        As built.
    outer_radius_m
        Radius of the circle around the strands.
    equivalent_radius_m
        Radius of the smooth wire with the same capacitance and external inductance: the radius
        for an antenna solution.
    metal_area_m2
        Sum of the strands' sections, without the lay.
    resistance_factor
        High-frequency resistance over that of a smooth wire of the equivalent radius.
    """

    strand_count: int
    strand_diameter_m: float
    outer_radius_m: float
    equivalent_radius_m: float
    metal_area_m2: float
    resistance_factor: float


def stranded_wire(strand_count: int, strand_diameter_m: float) -> StrandedWire:
    """Equivalent radius and resistance factor of a concentric-lay stranded wire.

    Parameters
    ----------
    strand_count
        Number of equal strands, 7 to 5000. 7, 19, 37, 61 ... fill their layers; other counts
        are read as a bundle equally dense.
    strand_diameter_m
        Diameter of one strand, 1e-5 to 0.02 m.

    Returns
    -------
    StrandedWire
        Radii in metres, area in square metres.

    Raises
    ------
    OutOfRange
        A count or diameter outside its range.

    Notes
    -----
    The N = 1 + 3k(k + 1) strands of k layers lie within ``D = d sqrt((4 N - 1) / 3)``, with
    m = 6k strands in the outer layer. The equivalent radius is the logarithmic capacity of that
    layer's outline: charge, and with it high-frequency current, leaves the grooves, so the
    field outside is that of a slightly thinner smooth wire, and the crests carry more than the
    mean current, so the resistance is higher. Both were solved for by a multipole expansion of
    the plane potential about the strands (two touching wires come out as the closed form
    pi d / 4) and fitted in 1 / m, within 1e-4 for 6 to 24 outer strands. The lay's extra length
    is left out.

    References
    ----------
    G. Pólya, G. Szegő, "Isoperimetric Inequalities in Mathematical Physics", 1951 (logarithmic
    capacity as outer radius).
    """
    require_within("strand_count", strand_count, 7, 5000)
    require_within("strand_diameter_m", strand_diameter_m, 1e-5, 0.02, "m")
    diameters = sqrt((4 * strand_count - 1) / 3)
    outer_strands = 3.0 * (diameters - 1.0)
    outer_radius = 0.5 * strand_diameter_m * diameters
    groove = 0.3823 / outer_strands * (1.0 - 0.23 / outer_strands)
    return StrandedWire(
        strand_count=strand_count,
        strand_diameter_m=strand_diameter_m,
        outer_radius_m=outer_radius,
        equivalent_radius_m=outer_radius * (1.0 - groove),
        metal_area_m2=strand_count * pi * strand_diameter_m**2 / 4.0,
        resistance_factor=1.0917 - 0.144 / outer_strands,
    )


def stranded_impedance_ohm_per_m(
    wire: StrandedWire,
    frequency_hz: ArrayLike,
    material: Material,
    temperature_c: ArrayLike = 20.0,
) -> NDArray[np.complex128]:
    """Internal impedance per metre of a stranded wire whose strands are thick to the wave.

    Parameters
    ----------
    wire
        From :func:`stranded_wire`.
    frequency_hz
        Frequency, 0 to 3e9 Hz, any shape.
    material
        What the strands are made of; a clad one means that every strand is clad.
    temperature_c
        Temperature of the metal, -100 to 200 °C, any shape that broadcasts.

    Returns
    -------
    numpy.ndarray
        Complex impedance in ohm per metre, of the broadcast shape.

    Raises
    ------
    OutOfRange
        A frequency or temperature outside its range.

    Notes
    -----
    Resistance factor times the impedance of a smooth wire of the equivalent radius: right where
    a strand is several skin depths thick (0.3 mm copper from about 3.5 MHz). For clad strands
    the smooth wire has the surface impedance of one strand. Strands are taken to touch with good
    contact; corroded strands may lose more, which no formula tells.

    References
    ----------
    S. Ramo, J. R. Whinnery, T. Van Duzer, "Fields and Waves in Communication Electronics",
    3rd ed., 1994, sec. 3.17 (surface impedance and loss from the field of a perfect conductor).
    """
    if material.core is None:
        smooth = internal_impedance_ohm_per_m(
            wire.equivalent_radius_m, frequency_hz, material, temperature_c
        )
        return np.asarray(wire.resistance_factor * smooth)
    strand_radius = 0.5 * wire.strand_diameter_m
    strand = internal_impedance_ohm_per_m(strand_radius, frequency_hz, material, temperature_c)
    return np.asarray(wire.resistance_factor * strand_radius / wire.equivalent_radius_m * strand)
