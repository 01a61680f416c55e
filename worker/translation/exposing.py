"""From a wire's current on a band to end voltages and to how far people must stay away."""

from __future__ import annotations

from math import ceil, pi
from typing import Final

import numpy as np

from service.contracts.exposure import BandExposure, ExposureDistance
from service.contracts.request import DesignRequest
from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.end_voltage import peak_feed_voltage_v
from worker.engine.exposure import KeepAway, Population, Source, Standard, keep_away
from worker.engine.hung_pattern import HungPattern

#: Less than this no transmitter has.
_LEAST_W: Final = 1e-6


def end_voltages_v(solved: HungPattern, power_w: float) -> tuple[float, float]:
    """Peak voltages against earth at both ends, in V, at a power accepted at the feed."""
    feed_v = peak_feed_voltage_v(solved.wave.impedance_ohm, power_w)
    near, far = solved.end_volts
    return round(feed_v * abs(near), 1), round(feed_v * abs(far), 1)


def exposure_of(
    request: DesignRequest, solved: HungPattern, low_hz: float, high_hz: float
) -> BandExposure:
    """Distances at which the limits asked about are met on one band.

    Parameters
    ----------
    request
    solved
        The wire's current and pattern at the band's centre.
    low_hz, high_hz
        Edges of the band.

    Raises
    ------
    EngineError
        If a value lies outside what the limits cover.
    """
    duty = 0.01 * request.exposure.duty_percent
    source = _source(request, solved, 0.5 * (low_hz + high_hz), duty)
    standards = tuple(Standard(name) for name in request.exposure.standards())
    found = keep_away(source, low_hz, high_hz, standards)
    length_m = float(source.position_m[-1] - source.position_m[0])
    wave_m = SPEED_OF_LIGHT_M_PER_S / source.frequency_hz
    # Where the reactive field ends, and where the phases from all parts have become alike
    # (C. A. Balanis, "Antenna Theory", 3rd ed., 2005, sec. 2.2.4).
    far_from_m = max(wave_m / (2.0 * pi), 2.0 * length_m**2 / wave_m)
    return BandExposure(
        peak_power_w=request.power_w,
        average_power_w=request.power_w * duty,
        distances=tuple(_distance(each, far_from_m) for each in found),
    )


def _source(
    request: DesignRequest, solved: HungPattern, centre_hz: float, duty_fraction: float
) -> Source:
    wave, power_w = solved.wave, max(request.power_w, _LEAST_W)
    feed_v = peak_feed_voltage_v(wave.impedance_ohm, power_w)
    # The nodes stop short of the ends by less than the wire's radius.
    end_m = float(wave.position_m[-1]) * (1.0 + 1e-9)
    gain_dbi = None if solved.pattern is None else solved.pattern.gain_dbi
    return Source(
        position_m=np.concatenate([[-end_m], wave.position_m, [end_m]]),
        current_a=np.concatenate([[0.0], feed_v * wave.current_a_per_v, [0.0]]),
        frequency_hz=centre_hz,
        peak_power_w=power_w,
        duty_fraction=duty_fraction,
        gain_over_ground_dbi=gain_dbi,
    )


def _distance(found: KeepAway, far_from_m: float) -> ExposureDistance:
    averaged = next(limit for limit in found.limits if limit.averaging_min is not None)
    densities = [
        limit.power_density_w_per_m2
        for limit in found.limits
        if limit.power_density_w_per_m2 is not None
    ]
    return ExposureDistance(
        standard="fcc-1.1310" if found.standard is Standard.FCC else "icnirp-2020",
        population="general-public" if found.population is Population.PUBLIC else "occupational",
        averaging_min=averaged.averaging_min or 0.0,
        electric_v_per_m=round(min(each.electric_v_per_m for each in found.limits), 3),
        magnetic_a_per_m=round(min(each.magnetic_a_per_m for each in found.limits), 5),
        power_density_w_per_m2=round(min(densities), 4) if densities else None,
        not_averaged=any(limit.averaging_min is None for limit in found.limits),
        far_field_m=_rounded_up(found.far_field_m),
        near_field_m=_rounded_up(found.near_field_m),
        distance_m=_rounded_up(found.distance_m),
        in_near_field=found.distance_m < far_from_m,
    )


def _rounded_up(distance_m: float) -> float:
    """Up to the next centimetre: rounded down it would be too close."""
    return ceil(100.0 * distance_m - 1e-9) / 100.0
