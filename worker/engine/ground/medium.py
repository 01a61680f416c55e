"""Ground as a radio wave meets it: permittivity, conductivity and the classes of the trade."""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite, pi
from types import MappingProxyType
from typing import Final

from worker.engine.constants import VACUUM_PERMITTIVITY_F_PER_M
from worker.engine.errors import OutOfRange
from worker.engine.limits import require_within

LARGEST_RELATIVE_PERMITTIVITY: Final[float] = 1e3
"""Far above water (88 at freezing point), below anything that overflows."""


@dataclass(frozen=True, slots=True)
class Ground:
    """A homogeneous, flat, non-magnetic half space.

    Parameters
    ----------
    relative_permittivity
        Real part of the relative permittivity, 1 to 1000.
    conductivity_s_per_m
        Conductivity in S/m, zero or more; ``inf`` is a perfect ground.
    name
        What to call it in a report.
    source
        Where the two figures come from.

    Raises
    ------
    OutOfRange
        A figure lies outside its range or is not a number.
    """

    relative_permittivity: float
    conductivity_s_per_m: float
    name: str = "as given"
    source: str = "given by the user"

    def __post_init__(self) -> None:
        require_within(
            "relative_permittivity", self.relative_permittivity, 1.0, LARGEST_RELATIVE_PERMITTIVITY
        )
        require_within("conductivity_s_per_m", self.conductivity_s_per_m, 0.0, float("inf"), "S/m")

    @property
    def is_perfect(self) -> bool:
        """Whether the ground is a perfect conductor."""
        return not isfinite(self.conductivity_s_per_m)

    def complex_permittivity(self, frequency_hz: float) -> complex:
        """Complex relative permittivity at one frequency.

        Parameters
        ----------
        frequency_hz
            Frequency in Hz, positive.

        Returns
        -------
        complex
            ``eps_r - j sigma / (omega eps0)``; the imaginary part is ``-inf`` for perfect ground.

        Raises
        ------
        OutOfRange
            The frequency is not a positive finite number.

        References
        ----------
        ITU-R Recommendation P.527-3, "Electrical characteristics of the surface of the Earth",
        1992, section 2.
        """
        if not 0.0 < frequency_hz < float("inf"):
            raise OutOfRange("frequency_hz", frequency_hz, 0.0, float("inf"), "Hz")
        omega = 2.0 * pi * frequency_hz
        loss = self.conductivity_s_per_m / (omega * VACUUM_PERMITTIVITY_F_PER_M)
        return complex(self.relative_permittivity, -loss)


PERFECT_GROUND: Final[Ground] = Ground(
    1.0, float("inf"), "perfect ground", "limit of infinite conductivity (image theory)"
)

_TRADE: Final[str] = "common practice (ground classes of the trade)"
_P527: Final[str] = "ITU-R P.527-3 (1992), Fig. 1, level part below 30 MHz; figures from memory"

GROUND_CLASSES: Final[MappingProxyType[str, Ground]] = MappingProxyType(
    {
        key: Ground(permittivity, conductivity, name, source)
        for key, permittivity, conductivity, name, source in (
            ("very-good", 20.0, 0.0303, "very good (pastoral, rich soil)", _TRADE),
            ("good", 14.0, 0.01, "good (pastoral, low hills)", _TRADE),
            ("pastoral-hills", 13.0, 0.006, "pastoral, medium hills", _TRADE),
            ("marshy-wooded", 12.0, 0.0075, "marshy, wooded", _TRADE),
            ("average", 13.0, 0.005, "average (heavy clay)", _TRADE),
            ("rocky", 13.0, 0.002, "poor (rocky, mountainous)", _TRADE),
            ("sandy", 10.0, 0.002, "sandy, dry, coastal", _TRADE),
            ("city", 5.0, 0.001, "very poor (cities)", _TRADE),
            ("industrial", 3.0, 0.001, "extremely poor (heavy industrial)", _TRADE),
            ("fresh-water", 80.0, 0.001, "fresh water", _TRADE),
            ("salt-water", 81.0, 5.0, "salt water", _TRADE),
            ("itu-sea-water", 70.0, 5.0, "sea water, average salinity, 20 C", _P527),
            ("itu-wet-ground", 30.0, 0.01, "wet ground", _P527),
            ("itu-fresh-water", 80.0, 0.003, "fresh water, 20 C", _P527),
            ("itu-medium-dry-ground", 15.0, 0.001, "medium dry ground", _P527),
            ("itu-very-dry-ground", 3.0, 0.0001, "very dry ground", _P527),
        )
    }
    | {"perfect": PERFECT_GROUND}
)
"""Named grounds: the trade's classes, the Recommendation's curves at HF, and perfect ground.

The Recommendation draws both constants of soil as level up to about 30 MHz (permittivity up to
about 1 GHz), so one pair serves all of HF; for water by temperature and salinity see
:func:`worker.engine.ground.water`. The trade gives 12 to 14 for the permittivity of rocky
ground; the middle is used.
"""
