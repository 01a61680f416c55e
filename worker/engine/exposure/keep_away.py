"""How far people must stay from a wire for published limits to be met."""

from __future__ import annotations

from dataclasses import dataclass
from math import log, pi, sqrt
from typing import Final

import numpy as np
from numpy.typing import NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.exposure.near_field import NearField, largest_fields
from worker.engine.exposure.published_limits import Limit, Population, Standard, limits_at
from worker.engine.limits import require_within

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

#: The ground may add this much to the field: 1.6, in power 2.56 (FCC OET Bulletin 65, sec. 2).
GROUND_FIELD_FACTOR: Final = 1.6
#: A half-wave dipole in its strongest direction.
HALF_WAVE_DBI: Final = 2.15
#: No distance is told below this: so near, the wire's bends and supports decide.
NEAREST_M: Final = 0.1
_LOOKS: Final = 20
#: Fields are looked at out to this many times the distance of the far-field formula.
_BEYOND_FAR: Final = 4.0


@dataclass(frozen=True, slots=True)
class Source:
    """A wire that radiates.

    Attributes
    ----------
    position_m, current_a : numpy.ndarray, shape (n,)
        As for `near_field.fields_of`, the current at the power below.
    frequency_hz : float
        At which it flows.
    peak_power_w : float
        Power accepted while transmitting.
    duty_fraction : float
        Average power over peak power, above 0 to 1.
    gain_over_ground_dbi : float or None
        Largest gain with the ground in it, where it was computed.
    """

    position_m: FloatArray
    current_a: ComplexArray
    frequency_hz: float
    peak_power_w: float
    duty_fraction: float = 1.0
    gain_over_ground_dbi: float | None = None

    def __post_init__(self) -> None:
        """Refuse what is no source."""
        require_within("peak_power_w", self.peak_power_w, 1e-6, 1e9, "W")
        require_within("duty_fraction", self.duty_fraction, 1e-6, 1.0)


@dataclass(frozen=True, slots=True)
class KeepAway:
    """The distance at which the limits of one standard are met.

    Attributes
    ----------
    standard, population
    limits : tuple of Limit
        The strictest within the band.
    far_field_m : float
        Distance by the far-field formula.
    near_field_m : float
        Distance by the fields of the current itself.
    """

    standard: Standard
    population: Population
    limits: tuple[Limit, ...]
    far_field_m: float
    near_field_m: float

    @property
    def distance_m(self) -> float:
        """The larger of both, from the nearest part of the wire."""
        return max(self.far_field_m, self.near_field_m, NEAREST_M)


def equivalent_isotropic_factor(gain_over_ground_dbi: float | None) -> float:
    """Power density over that of an isotropic radiator in free space, ground and gain counted.

    A half wave's gain with the ground's common factor of 2.56, or the gain over this ground where
    it is larger: that has the ground in it already.
    """
    usual: float = GROUND_FIELD_FACTOR**2 * 10.0 ** (0.1 * HALF_WAVE_DBI)
    if gain_over_ground_dbi is None:
        return usual
    return max(usual, float(10.0 ** (0.1 * gain_over_ground_dbi)))


def far_field_distance_m(limit: Limit, power_w: float, factor: float) -> float:
    """Distance at which a limit is met by the far-field formula.

    Parameters
    ----------
    limit
    power_w
        Power radiated, above zero, in W: the average, unless the limit is not averaged.
    factor
        As `equivalent_isotropic_factor` gives it.

    Notes
    -----
    ``S = factor P / (4 pi R^2)``, ``E = sqrt(30 factor P) / R``, ``H = E / (120 pi)``.

    References
    ----------
    FCC OET Bulletin 65, ed. 97-01, eq. 3 to 6.
    """
    field_v = sqrt(30.0 * factor * power_w)
    distances = [
        field_v / limit.electric_v_per_m,
        field_v / (120.0 * pi) / limit.magnetic_a_per_m,
    ]
    if limit.power_density_w_per_m2 is not None:
        distances.append(sqrt(factor * power_w / (4.0 * pi * limit.power_density_w_per_m2)))
    return max(distances)


def keep_away(
    source: Source,
    low_hz: float,
    high_hz: float,
    standards: tuple[Standard, ...] = tuple(Standard),
) -> tuple[KeepAway, ...]:
    """Distances at which published limits are met, for the public and at work.

    Parameters
    ----------
    source
    low_hz, high_hz
        Edges of the band: the strictest limit within it counts.
    standards

    Returns
    -------
    tuple of KeepAway
        One a standard and population; none where the standard publishes no limit.

    Raises
    ------
    OutOfRange
        A frequency outside that of the limits or the fields.

    Notes
    -----
    The far-field formula tells too little close to a wire, and the fields of the current alone know
    no ground: both are taken, the latter times the common factor of the ground, and the larger
    distance is told. Limits fall with frequency up to 30 MHz and rise from 300 MHz on, so within a
    band the strictest is that of an edge.
    """
    factor = equivalent_isotropic_factor(source.gain_over_ground_dbi)
    found = []
    for standard in standards:
        for population in Population:
            limits = tuple(
                dict.fromkeys(
                    limit
                    for edge_hz in (low_hz, high_hz)
                    for limit in limits_at(standard, population, edge_hz)
                )
            )
            if limits:
                found.append((standard, population, limits))
    if not found:
        return ()
    far = [
        max(far_field_distance_m(each, _counted_w(source, each), factor) for each in limits)
        for _, _, limits in found
    ]
    looked = _looked_at(source, max(far))
    return tuple(
        KeepAway(
            standard,
            population,
            limits,
            far_m,
            max(_near_field_distance_m(source, looked, each) for each in limits),
        )
        for (standard, population, limits), far_m in zip(found, far, strict=True)
    )


def _counted_w(source: Source, limit: Limit) -> float:
    averaged = limit.averaging_min is not None
    return source.peak_power_w * (source.duty_fraction if averaged else 1.0)


def _looked_at(source: Source, far_m: float) -> NearField:
    """Largest fields from close by to where nothing can exceed a limit."""
    wave_m = SPEED_OF_LIGHT_M_PER_S / source.frequency_hz
    outmost_m = max(_BEYOND_FAR * far_m, 0.5 * wave_m)
    distance = np.geomspace(NEAREST_M, max(outmost_m, 2.0 * NEAREST_M), _LOOKS)
    return largest_fields(source.position_m, source.current_a, source.frequency_hz, distance)


def _near_field_distance_m(source: Source, field: NearField, limit: Limit) -> float:
    """Farthest distance at which a limit is exceeded, read between looks as a power law."""
    averaged = 1.0 if limit.averaging_min is None else sqrt(source.duty_fraction)
    over = (
        GROUND_FIELD_FACTOR
        * averaged
        * np.maximum(
            field.electric_v_per_m / limit.electric_v_per_m,
            field.magnetic_a_per_m / limit.magnetic_a_per_m,
        )
    )
    exceeded = np.flatnonzero(over > 1.0)
    if exceeded.size == 0:
        return NEAREST_M
    last = int(exceeded[-1])
    if last + 1 == over.size:
        return float(field.distance_m[-1])
    part = log(over[last]) / log(over[last] / over[last + 1])
    step = field.distance_m[last + 1] / field.distance_m[last]
    return float(field.distance_m[last] * step**part)
