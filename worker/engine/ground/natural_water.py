"""Fresh and sea water by temperature and salinity, after ITU-R P.527."""

from __future__ import annotations

from math import exp, pi
from typing import Final

from worker.engine.constants import VACUUM_PERMITTIVITY_F_PER_M
from worker.engine.ground.medium import Ground
from worker.engine.limits import require_within

COLDEST_CELSIUS: Final[float] = -4.0
WARMEST_CELSIUS: Final[float] = 40.0
SALTIEST_G_PER_KG: Final[float] = 40.0
HIGHEST_FREQUENCY_HZ: Final[float] = 1e12


def water(frequency_hz: float, temperature_c: float, salinity_g_per_kg: float) -> Ground:
    """Water under a wire: lake, estuary or sea.

    Parameters
    ----------
    frequency_hz
        Frequency in Hz, positive, up to 1 THz.
    temperature_c
        Water temperature in degrees Celsius, -4 to 40.
    salinity_g_per_kg
        Salinity in g/kg, 0 (pure) to 40; the open ocean has about 35.

    Returns
    -------
    Ground
        Relative permittivity, and a conductivity that includes the dielectric loss at the
        frequency given. Lake water conducts by what is dissolved in it, often far better than
        pure water: use a measured conductivity where there is one.

    Raises
    ------
    OutOfRange
        An input lies outside its range.

    Notes
    -----
    Double Debye relaxation with ionic conductivity,
    ``eps = (es - e1) / (1 + j f / f1) + (e1 - ei) / (1 + j f / f2) + ei - j sigma / (omega eps0)``.
    At HF it has settled at its static value; temperature and salinity are what matters there.

    References
    ----------
    ITU-R Recommendation P.527-4, "Electrical characteristics of the surface of the Earth", 2017,
    sections 5.1.1 and 5.1.2.
    T. Meissner and F. J. Wentz, "The complex dielectric constant of pure and sea water from
    microwave satellite observations", IEEE Trans. Geosci. Remote Sens. 42, 2004.
    """
    require_within("frequency_hz", frequency_hz, 1e-3, HIGHEST_FREQUENCY_HZ, "Hz")
    require_within("temperature_c", temperature_c, COLDEST_CELSIUS, WARMEST_CELSIUS, "degC")
    require_within("salinity_g_per_kg", salinity_g_per_kg, 0.0, SALTIEST_G_PER_KG, "g/kg")
    t, s = temperature_c, salinity_g_per_kg
    theta = 300.0 / (t + 273.15) - 1.0
    static, middle, infinite = _levels(theta, t, s)
    first, second = _relaxations_hz(theta, t, s)
    relaxing = (
        (static - middle) / (1.0 + 1j * frequency_hz / first)
        + (middle - infinite) / (1.0 + 1j * frequency_hz / second)
        + infinite
    )
    dielectric = -relaxing.imag * 2.0 * pi * frequency_hz * VACUUM_PERMITTIVITY_F_PER_M
    return Ground(
        relaxing.real,
        ionic_conductivity_s_per_m(t, s) + dielectric,
        f"water, {t:g} degC, {s:g} g/kg salt",
        "ITU-R P.527-4 (2017), sections 5.1.1 and 5.1.2",
    )


def ionic_conductivity_s_per_m(temperature_c: float, salinity_g_per_kg: float) -> float:
    """Direct-current conductivity of sea water.

    Parameters
    ----------
    temperature_c
        Temperature in degrees Celsius, -4 to 40.
    salinity_g_per_kg
        Salinity in g/kg, 0 to 40.

    Returns
    -------
    float
        Conductivity in S/m; zero for pure water.

    Raises
    ------
    OutOfRange
        An input lies outside its range.

    Notes
    -----
    ``sigma = sigma_35(T) R_15(S) R_T/R_15(T, S)``.

    References
    ----------
    ITU-R Recommendation P.527-4, 2017, section 5.1.2.
    A. Stogryn et al., "The microwave permittivity of sea and fresh water", GenCorp Aerojet, 1995.
    """
    require_within("temperature_c", temperature_c, COLDEST_CELSIUS, WARMEST_CELSIUS, "degC")
    require_within("salinity_g_per_kg", salinity_g_per_kg, 0.0, SALTIEST_G_PER_KG, "g/kg")
    t, s = temperature_c, salinity_g_per_kg
    standard = 2.903602 + t * (8.607e-2 + t * (4.738817e-4 + t * (-2.991e-6 + t * 4.3047e-9)))
    at_15 = s * (37.5109 + 5.45216 * s + 1.4409e-2 * s * s) / (1004.75 + 182.283 * s + s * s)
    alpha_0 = (6.9431 + 3.2841 * s - 9.9486e-2 * s * s) / (84.850 + 69.024 * s + s * s)
    alpha_1 = 49.843 - 0.2276 * s + 0.198e-2 * s * s
    return standard * at_15 * (1.0 + alpha_0 * (t - 15.0) / (alpha_1 + t))


def _levels(theta: float, t: float, s: float) -> tuple[float, float, float]:
    """Permittivity below, between and above the two relaxations."""
    static = 77.66 + 103.3 * theta
    middle = 0.0671 * static
    infinite = 3.52 - 7.52 * theta
    return (
        static * exp(-3.56417e-3 * s + 4.74868e-6 * s * s + 1.15574e-5 * t * s),
        middle * exp(-6.28908e-3 * s + 1.76032e-4 * s * s - 9.22144e-5 * t * s),
        infinite * (1.0 + s * (-2.04265e-3 + 1.57883e-4 * t)),
    )


def _relaxations_hz(theta: float, t: float, s: float) -> tuple[float, float]:
    """Both relaxation frequencies."""
    first_ghz = 20.20 - 146.4 * theta + 316.0 * theta * theta
    second_ghz = 39.8 * first_ghz
    return (
        1e9 * first_ghz * (1.0 + s * (2.39357e-3 - 3.13530e-5 * t + 2.52477e-7 * t * t)),
        1e9 * second_ghz * (1.0 + s * (-1.99723e-2 + 1.81176e-4 * t)),
    )
