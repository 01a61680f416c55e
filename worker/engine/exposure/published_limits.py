"""Published limits on people's exposure to radio-frequency fields, by frequency.

References
----------
47 CFR 1.1310, table 1 to paragraph (e)(1), maximum permissible exposure (United States).
ICNIRP, "Guidelines for limiting exposure to electromagnetic fields (100 kHz to 300 GHz)", Health
Physics 118(5), 2020, table 5 (whole body, averaged over 30 minutes); and its limits against
stimulation of nerves from 100 kHz to 10 MHz, which are not averaged, as in ICNIRP 2010 ("1 Hz to
100 kHz", Health Physics 99(6), tables 3 and 4: 27 and 100 µT, here as A/m). From memory; the
American power densities and the limits for nerves were compared with copies of the tables.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from math import pi
from typing import Final

from worker.engine.limits import require_within

LOWEST_HZ: Final = 1e5
HIGHEST_HZ: Final = 1.5e9
#: 1 mW/cm² in W/m².
_MW_PER_CM2: Final = 10.0
_MICROTESLA_A_PER_M: Final = 1e-6 / (4e-7 * pi)


class Standard(Enum):
    """Who publishes the limits."""

    FCC = "fcc-1.1310"
    ICNIRP = "icnirp-2020"


class Population(Enum):
    """Whom they protect."""

    PUBLIC = "general-public"
    OCCUPATIONAL = "occupational"


@dataclass(frozen=True, slots=True)
class Limit:
    """One limit: none of the fields given may be exceeded.

    Attributes
    ----------
    electric_v_per_m, magnetic_a_per_m : float
        Root mean square field strengths.
    power_density_w_per_m2 : float or None
        Where one is published; below 30 MHz it is the plane wave's equivalent.
    averaging_min : float or None
        Over how many minutes squared fields are averaged; None: not at all.
    """

    electric_v_per_m: float
    magnetic_a_per_m: float
    power_density_w_per_m2: float | None
    averaging_min: float | None


def limits_at(standard: Standard, population: Population, frequency_hz: float) -> tuple[Limit, ...]:
    """The limits of one standard for one population.

    Parameters
    ----------
    standard, population
    frequency_hz
        1e5 to 1.5e9 Hz.

    Returns
    -------
    tuple of Limit
        All to be kept; empty where the standard publishes none.

    Raises
    ------
    OutOfRange
        A frequency outside its range.
    """
    require_within("frequency_hz", frequency_hz, LOWEST_HZ, HIGHEST_HZ, "Hz")
    mhz = 1e-6 * frequency_hz
    public = population is Population.PUBLIC
    if standard is Standard.FCC:
        return _fcc_public(mhz) if public else _fcc_occupational(mhz)
    nerves = (_nerves(public=public),) if mhz <= 10.0 else ()
    return (_icnirp(mhz, public=public), *nerves)


def _fcc_public(mhz: float) -> tuple[Limit, ...]:
    if mhz < 0.3:
        return ()
    if mhz <= 1.34:
        return (Limit(614.0, 1.63, 100.0 * _MW_PER_CM2, 30.0),)
    if mhz <= 30.0:
        return (Limit(824.0 / mhz, 2.19 / mhz, 180.0 / mhz**2 * _MW_PER_CM2, 30.0),)
    if mhz <= 300.0:
        return (Limit(27.5, 0.073, 0.2 * _MW_PER_CM2, 30.0),)
    return (_plane_wave(mhz / 1500.0 * _MW_PER_CM2, 30.0),)


def _fcc_occupational(mhz: float) -> tuple[Limit, ...]:
    if mhz < 0.3:
        return ()
    if mhz <= 3.0:
        return (Limit(614.0, 1.63, 100.0 * _MW_PER_CM2, 6.0),)
    if mhz <= 30.0:
        return (Limit(1842.0 / mhz, 4.89 / mhz, 900.0 / mhz**2 * _MW_PER_CM2, 6.0),)
    if mhz <= 300.0:
        return (Limit(61.4, 0.163, 1.0 * _MW_PER_CM2, 6.0),)
    return (_plane_wave(mhz / 300.0 * _MW_PER_CM2, 6.0),)


def _plane_wave(power_density_w_per_m2: float, averaging_min: float) -> Limit:
    """A limit given as power density only, with the fields of a plane wave of 377 Ω that has it."""
    return Limit(
        (377.0 * power_density_w_per_m2) ** 0.5,
        (power_density_w_per_m2 / 377.0) ** 0.5,
        power_density_w_per_m2,
        averaging_min,
    )


def _icnirp(mhz: float, *, public: bool) -> Limit:
    if mhz <= 30.0:
        electric, magnetic = (300.0, 2.2) if public else (660.0, 4.9)
        return Limit(electric / mhz**0.7, magnetic / mhz, None, 30.0)
    if mhz <= 400.0:
        return Limit(27.7, 0.073, 2.0, 30.0) if public else Limit(61.0, 0.16, 10.0, 30.0)
    electric, magnetic, divisor = (1.375, 0.0037, 200.0) if public else (3.0, 0.008, 40.0)
    root = mhz**0.5
    return Limit(electric * root, magnetic * root, mhz / divisor, 30.0)


def _nerves(*, public: bool) -> Limit:
    electric, microtesla = (83.0, 27.0) if public else (170.0, 100.0)
    return Limit(electric, microtesla * _MICROTESLA_A_PER_M, None, None)
