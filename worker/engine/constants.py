"""Electromagnetic constants in SI units, as CODATA values carried by scipy.

`FREE_SPACE_IMPEDANCE_OHM` is derived from the other two, so that a formula written with
``eta``, with ``omega mu0`` or with ``1 / (omega eps0)`` gives the same digits.
"""

from __future__ import annotations

from math import sqrt
from typing import Final

from scipy import constants as codata

SPEED_OF_LIGHT_M_PER_S: Final[float] = float(codata.c)
VACUUM_PERMEABILITY_H_PER_M: Final[float] = float(codata.mu_0)
VACUUM_PERMITTIVITY_F_PER_M: Final[float] = float(codata.epsilon_0)
FREE_SPACE_IMPEDANCE_OHM: Final[float] = sqrt(
    VACUUM_PERMEABILITY_H_PER_M / VACUUM_PERMITTIVITY_F_PER_M
)
