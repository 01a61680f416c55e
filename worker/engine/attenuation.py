"""Matched attenuation of a line: one law through the points that tables publish."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import nnls

from worker.engine.limits import require_within

LOWEST_FREQUENCY_HZ: Final[float] = 1e4
HIGHEST_FREQUENCY_HZ: Final[float] = 3e9

_HZ_PER_MHZ: Final[float] = 1e6


@dataclass(frozen=True, slots=True)
class Attenuation:
    """Matched attenuation ``k1 sqrt(f) + k2 f``: loss in the conductors and in the dielectric.

    Parameters
    ----------
    conductor_db_per_m, dielectric_db_per_m
        The two terms at 1 MHz, 0 to 10 dB/m.
    largest_misfit
        Largest relative difference from the points it was fitted to, 0 if it was not fitted.

    Raises
    ------
    OutOfRange
        A term outside its range.
    """

    conductor_db_per_m: float
    dielectric_db_per_m: float
    largest_misfit: float = 0.0

    def __post_init__(self) -> None:
        """Refuse a line that amplifies."""
        require_within("conductor_db_per_m", self.conductor_db_per_m, 0.0, 10.0, "dB/m")
        require_within("dielectric_db_per_m", self.dielectric_db_per_m, 0.0, 10.0, "dB/m")

    def terms_db_per_m(
        self, frequency_hz: ArrayLike
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Conductor and dielectric attenuation.

        Parameters
        ----------
        frequency_hz
            Frequency, 1e4 to 3e9 Hz, any shape.

        Returns
        -------
        tuple of numpy.ndarray
            Both terms in dB/m, shape of the frequency.

        Raises
        ------
        OutOfRange
            A frequency outside its range.

        Notes
        -----
        Below about a megahertz the skin effect of thin conductors is not fully developed and
        real cable loses more than the root law says.
        """
        megahertz = line_frequency_hz(frequency_hz) / _HZ_PER_MHZ
        conductor = self.conductor_db_per_m * np.sqrt(megahertz)
        return np.asarray(conductor), np.asarray(self.dielectric_db_per_m * megahertz)


def fit_attenuation(
    frequencies_hz: Sequence[float], attenuations_db_per_m: Sequence[float]
) -> Attenuation:
    """Attenuation law through published points.

    Parameters
    ----------
    frequencies_hz
        At least two different frequencies, 1e4 to 3e9 Hz.
    attenuations_db_per_m
        Matched attenuation at each, 1e-6 to 100 dB/m.

    Returns
    -------
    Attenuation
        Terms of least relative squared error, neither of them negative.

    Raises
    ------
    OutOfRange
        A point outside its range, fewer than two points, or lists of unequal length.

    Notes
    -----
    ``a(f) = k1 sqrt(f) + k2 f``, non-negative least squares with each row divided by its
    attenuation, since tables are rounded to a number of digits.

    References
    ----------
    R. A. Chipman, "Theory and Problems of Transmission Lines", 1968, ch. 5 (the two terms).
    """
    megahertz = line_frequency_hz(frequencies_hz) / _HZ_PER_MHZ
    db_per_m = require_within("attenuations_db_per_m", attenuations_db_per_m, 1e-6, 100.0, "dB/m")
    require_within("number of different frequencies", len(set(megahertz.tolist())), 2, np.inf)
    require_within("number of attenuations", db_per_m.size, megahertz.size, megahertz.size)
    system = np.column_stack([np.sqrt(megahertz), megahertz]) / db_per_m[:, np.newaxis]
    terms, _ = nnls(system, np.ones_like(db_per_m))
    misfit = float(np.max(np.abs(system @ terms - 1.0)))
    return Attenuation(float(terms[0]), float(terms[1]), misfit)


def line_frequency_hz(frequency_hz: ArrayLike) -> NDArray[np.float64]:
    """Frequencies within the range of the law, 1e4 to 3e9 Hz.

    Parameters
    ----------
    frequency_hz
        Any shape.

    Returns
    -------
    numpy.ndarray
        The same as float64.

    Raises
    ------
    OutOfRange
        A frequency outside the range.
    """
    return require_within(
        "frequency_hz", frequency_hz, LOWEST_FREQUENCY_HZ, HIGHEST_FREQUENCY_HZ, "Hz"
    )
