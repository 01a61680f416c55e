"""Feed line: attenuation, complex characteristic impedance, transformation and exact loss.

Per metre, alpha is the attenuation in nepers, beta the phase and ``gamma = alpha + j beta``;
Z0 is the characteristic impedance, rho the voltage reflection coefficient against it, l the
length. 1 neper is 20 / ln 10 = 8.686 dB.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import log, pi
from typing import Final, TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.attenuation import Attenuation, fit_attenuation, line_frequency_hz
from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.limits import require_magnitude_within, require_within
from worker.engine.reflection import reflection_coefficient, standing_wave_ratio

__all__ = ["Attenuation", "FeedLine", "LineState", "fit_attenuation", "terminate", "transform"]

LONGEST_LINE_M: Final[float] = 1e4
LARGEST_MATCHED_LOSS_DB: Final[float] = 300.0

_DB_PER_NEPER: Final[float] = 20.0 / log(10.0)

_Reals: TypeAlias = NDArray[np.float64]
_Complexes: TypeAlias = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class FeedLine:
    """A kind of line, by its published figures.

    Parameters
    ----------
    name
        Plain name, as in `worker.engine.line_catalogue.FEED_LINES`.
    nominal_impedance_ohm
        Characteristic impedance without loss, 1 to 2000 ohm.
    velocity_factor
        Velocity over that of light, 0.1 to 1.
    attenuation
        Matched attenuation.
    source
        Where the figures come from.

    Raises
    ------
    OutOfRange
        A figure outside its range.
    """

    name: str
    nominal_impedance_ohm: float
    velocity_factor: float
    attenuation: Attenuation
    source: str

    def __post_init__(self) -> None:
        """Refuse what is no line."""
        require_within("nominal_impedance_ohm", self.nominal_impedance_ohm, 1.0, 2000.0, "ohm")
        require_within("velocity_factor", self.velocity_factor, 0.1, 1.0)

    def propagation_per_m(self, frequency_hz: ArrayLike) -> _Complexes:
        """Propagation constant, attenuation in nepers and phase in radians.

        Parameters
        ----------
        frequency_hz
            Frequency, 1e4 to 3e9 Hz, any shape.

        Returns
        -------
        numpy.ndarray
            ``gamma`` per metre, shape of the frequency.

        Raises
        ------
        OutOfRange
            A frequency outside its range.
        """
        conductor, dielectric = self.attenuation.terms_db_per_m(frequency_hz)
        alpha = (conductor + dielectric) / _DB_PER_NEPER
        return np.asarray(alpha + 1j * self._phase_per_m(frequency_hz))

    def characteristic_impedance_ohm(self, frequency_hz: ArrayLike) -> _Complexes:
        """Complex characteristic impedance that belongs to the attenuation.

        Parameters
        ----------
        frequency_hz
            Frequency, 1e4 to 3e9 Hz, any shape.

        Returns
        -------
        numpy.ndarray
            Impedance in ohm, shape of the frequency.

        Raises
        ------
        OutOfRange
            A frequency outside its range.

        Notes
        -----
        With the shunt admittance ``Y = (beta / R0)(tan d + j)``, ``tan d = 2 alpha_d / beta``
        for the dielectric's share, ``Z0 = gamma / Y``; to first order
        ``R0 (1 - j (alpha_c - alpha_d) / beta)``. Series resistance and shunt conductance both
        stay positive, so the line is passive at every frequency, and its attenuation is exactly
        the published one.

        References
        ----------
        R. A. Chipman, "Theory and Problems of Transmission Lines", 1968, ch. 5.
        """
        _, dielectric = self.attenuation.terms_db_per_m(frequency_hz)
        beta = self._phase_per_m(frequency_hz)
        tangent = 2.0 * dielectric / _DB_PER_NEPER / beta
        admittance = beta / self.nominal_impedance_ohm * (tangent + 1j)
        return np.asarray(self.propagation_per_m(frequency_hz) / admittance)

    def _phase_per_m(self, frequency_hz: ArrayLike) -> _Reals:
        omega = 2.0 * pi * line_frequency_hz(frequency_hz)
        return np.asarray(omega / (SPEED_OF_LIGHT_M_PER_S * self.velocity_factor))


@dataclass(frozen=True, slots=True)
class LineState:
    """What a line does to a load; all arrays have one shape.

    Parameters
    ----------
    input_impedance_ohm
        Impedance seen at the transmitter's end.
    matched_loss_db
        Loss with a load equal to Z0.
    total_loss_db
        Power in over power out, with this load.
    load_standing_wave_ratio, input_standing_wave_ratio
        On the line, against its own Z0, at the load and at the input. For the ratio that a
        transmitter sees, compare `input_impedance_ohm` with the transmitter's reference.
    """

    input_impedance_ohm: _Complexes
    matched_loss_db: _Reals
    total_loss_db: _Reals
    load_standing_wave_ratio: _Reals
    input_standing_wave_ratio: _Reals

    @property
    def additional_loss_db(self) -> _Reals:
        """Loss on top of the matched loss; on a short line it may be negative."""
        return np.asarray(self.total_loss_db - self.matched_loss_db)


def terminate(
    line: FeedLine, length_m: ArrayLike, frequency_hz: ArrayLike, load_ohm: ArrayLike
) -> LineState:
    """Impedance, loss and standing waves on a line with a load at its end.

    Parameters
    ----------
    line
        The kind of line.
    length_m
        Length, 0 to 1e4 m, any shape.
    frequency_hz
        Frequency, 1e4 to 3e9 Hz, any shape that broadcasts.
    load_ohm
        Complex load impedance with a resistance above 0, any shape that broadcasts.

    Returns
    -------
    LineState
        Arrays of the broadcast shape.

    Raises
    ------
    OutOfRange
        An input outside its range, or a matched loss above 300 dB.

    Notes
    -----
    See :func:`transform`; Z0 is the line's complex one.
    """
    length = require_within("length_m", length_m, 0.0, LONGEST_LINE_M, "m")
    propagation = line.propagation_per_m(frequency_hz) * length
    return transform(load_ohm, line.characteristic_impedance_ohm(frequency_hz), propagation)


def transform(
    load_ohm: ArrayLike, characteristic_impedance_ohm: ArrayLike, propagation: ArrayLike
) -> LineState:
    """Transformation along a uniform line of any complex Z0, with the exact loss.

    Parameters
    ----------
    load_ohm
        Complex load impedance, resistance from 1e-12 ohm, at most 1e12 ohm, any shape.
    characteristic_impedance_ohm
        Z0, real or complex with a positive real part, any shape that broadcasts.
    propagation
        ``gamma l`` of the whole line, dimensionless: attenuation in nepers, 0 to 34.5 (300 dB),
        and phase in radians; any shape that broadcasts.

    Returns
    -------
    LineState
        Arrays of the broadcast shape.

    Raises
    ------
    OutOfRange
        An input outside its range.

    Notes
    -----
    With ``w = exp(-2 gamma l)``::

        Z_in = Z0 (1 + rho w) / (1 - rho w)
        P_in / P_load = exp(2 alpha l) |(1 - rho w) / (1 - rho)|^2 Re(Z_in) / Re(Z_load)

    that is, power by ``|I|^2 R`` at both ends. For real Z0 it is the long-line formula
    ``(a^2 - |rho|^2) / (a (1 - |rho|^2))``, a being the matched loss ratio; with the complex Z0
    of a lossy line that formula is wrong at high standing wave ratio, where what counts is
    whether current or voltage has its maxima on the line.

    References
    ----------
    R. A. Chipman, "Theory and Problems of Transmission Lines", 1968, ch. 7.
    W. W. Macalpine, "Computation of impedance and efficiency of transmission line with high
    standing-wave ratio", Trans. AIEE 72, 1953, pp. 334-339.
    """
    load, z0, phase = np.broadcast_arrays(
        require_magnitude_within("load_ohm", load_ohm, 0.0, 1e12, "ohm"),
        np.asarray(characteristic_impedance_ohm, dtype=np.complex128),
        np.asarray(propagation, dtype=np.complex128),
    )
    require_within("load_ohm (real part)", load.real, 1e-12, 1e12, "ohm")
    require_within("phase along the line", phase.imag, 0.0, 1e9, "rad")
    matched_loss_db = require_within(
        "matched loss", _DB_PER_NEPER * phase.real, 0.0, LARGEST_MATCHED_LOSS_DB, "dB"
    )
    rho = reflection_coefficient(load, z0)
    returned = rho * np.exp(-2.0 * phase)
    input_power = _input_power(load, z0, rho, returned, phase.real)
    current = z0 / (1.0 - returned)
    resistance = input_power * np.abs(current) ** 2
    reactance = (current * (1.0 + returned)).imag
    # Power in the load over |incident voltage|^2 there is 4 R / |Z + Z0|^2.
    mismatch = input_power * np.abs(load + z0) ** 2 / (4.0 * load.real)
    input_impedance = resistance + 1j * reactance
    return LineState(
        input_impedance_ohm=np.asarray(input_impedance),
        matched_loss_db=matched_loss_db.copy(),
        total_loss_db=np.asarray(matched_loss_db + 10.0 * np.log10(mismatch)),
        load_standing_wave_ratio=standing_wave_ratio(load, z0),
        input_standing_wave_ratio=standing_wave_ratio(input_impedance, z0),
    )


def _input_power(
    load: _Complexes, z0: _Complexes, rho: _Complexes, returned: _Complexes, nepers: _Reals
) -> _Reals:
    """Power into the line over |incident voltage|^2, with its digits kept as |rho| nears one.

    Re((1 + w rho)(1 - conj(w rho)) / conj(Z0)), where 1 - |w rho|^2 is written as the part that
    the load takes and the part that the line takes of the reflected wave, both positive.
    """
    taken_by_load = 4.0 * (load * np.conj(z0)).real / np.abs(load + z0) ** 2
    taken_by_line = -np.expm1(-4.0 * nepers) * np.abs(rho) ** 2
    admittance = 1.0 / z0
    power = admittance.real * (taken_by_load + taken_by_line) + (
        2.0 * admittance.imag * returned.imag
    )
    # A complex Z0 that does not belong to the propagation constant describes no passive line.
    smallest = float(np.finfo(np.float64).tiny)
    return require_within("power into the line", power, smallest, np.inf, "W/V²")
