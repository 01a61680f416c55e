"""Metals that antenna wire is drawn from: conductivity, permeability and cladding.

Conductivities are given at 20 °C. Where a source states per cent IACS, 100 % is 58.0 MS/m by
definition. For one metal in several tempers or alloys, conductivity and temperature coefficient
change together (Matthiessen's rule): the coefficient at 20 °C is that of the pure metal times
the ratio of the conductivities, which is how the coefficients marked "scaled" were found.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import sqrt
from types import MappingProxyType
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.limits import require_within

REFERENCE_TEMPERATURE_C: Final[float] = 20.0
LOWEST_TEMPERATURE_C: Final[float] = -100.0
HIGHEST_TEMPERATURE_C: Final[float] = 200.0

_ANNEALED_COPPER_S_PER_M: Final[float] = 58.0e6
_COPPER_COEFFICIENT_PER_K: Final[float] = 3.93e-3
_ALUMINIUM_1350_IACS: Final[float] = 0.61
_ALUMINIUM_1350_COEFFICIENT_PER_K: Final[float] = 4.03e-3


@dataclass(frozen=True, slots=True)
class Metal:
    """One homogeneous metal.

    Parameters
    ----------
    conductivity_s_per_m
        Conductivity at 20 °C.
    temperature_coefficient_per_k
        Relative rise of resistivity per kelvin, referred to 20 °C.
    relative_permeability
        Real relative permeability, 1 for a metal that is not magnetic.

    Raises
    ------
    OutOfRange
        A conductivity outside 1e3 to 1e9 S/m, a coefficient outside 0 to 7e-3 per kelvin or a
        permeability outside 0.9 to 1e5.
    """

    conductivity_s_per_m: float
    temperature_coefficient_per_k: float
    relative_permeability: float = 1.0

    def __post_init__(self) -> None:
        """Refuse what is no metal."""
        require_within("conductivity_s_per_m", self.conductivity_s_per_m, 1e3, 1e9, "S/m")
        # The coldest permitted temperature must leave a positive resistivity.
        require_within(
            "temperature_coefficient_per_k", self.temperature_coefficient_per_k, 0.0, 7e-3, "1/K"
        )
        require_within("relative_permeability", self.relative_permeability, 0.9, 1e5)

    def conductivity_at(self, temperature_c: ArrayLike) -> NDArray[np.float64]:
        """Conductivity at a temperature.

        Parameters
        ----------
        temperature_c
            Temperature in °C, any shape, from -100 to 200.

        Returns
        -------
        numpy.ndarray
            Conductivity in S/m, same shape.

        Raises
        ------
        OutOfRange
            A temperature outside the range in which resistivity is taken as linear.

        Notes
        -----
        ``sigma(T) = sigma20 / (1 + alpha20 (T - 20))``.

        References
        ----------
        IEC 60028, "International standard of resistance for copper", 1925.
        """
        temperature = require_within(
            "temperature_c", temperature_c, LOWEST_TEMPERATURE_C, HIGHEST_TEMPERATURE_C, "°C"
        )
        rise = temperature - REFERENCE_TEMPERATURE_C
        return np.asarray(
            self.conductivity_s_per_m / (1.0 + self.temperature_coefficient_per_k * rise)
        )


@dataclass(frozen=True, slots=True)
class Material:
    """What a wire is made of: one metal, or a core under a cladding.

    Parameters
    ----------
    name
        Plain name, as in `MATERIALS`.
    surface
        The metal of a solid wire; of a clad wire, its cladding.
    source
        Where the figures come from.
    core
        Metal under the cladding; ``None`` for a solid wire.
    cladding_per_diameter
        Thickness of the cladding over the wire's outer diameter; used only with a core.

    Raises
    ------
    OutOfRange
        With a core, a cladding outside 1e-6 to 0.499 of the diameter.
    """

    name: str
    surface: Metal
    source: str
    core: Metal | None = None
    cladding_per_diameter: float = 0.0

    def __post_init__(self) -> None:
        """Refuse a cladding that leaves no room for the core."""
        if self.core is not None:
            require_within("cladding_per_diameter", self.cladding_per_diameter, 1e-6, 0.499)


# Fully cold-worked copper, as in wire drawn with its core (Copper Development Association).
_DRAWN_CLADDING: Final[Metal] = Metal(56.3e6, _COPPER_COEFFICIENT_PER_K * 56.3 / 58.0)

# Carbon steel of 9 % IACS. Its coefficient is iron's, scaled as above (9.71e-8 ohm m and
# 6.5e-3/K for iron, from memory). The permeability is a typical initial one, from memory: under
# a cladding several skin depths thick it does not matter.
CORE_STEEL: Final[Metal] = Metal(
    conductivity_s_per_m=0.09 * _ANNEALED_COPPER_S_PER_M,
    temperature_coefficient_per_k=3.3e-3,
    relative_permeability=100.0,
)


def copper_clad_steel(name: str, cladding_per_diameter: float) -> Material:
    """Copper-clad steel with a stated thickness of copper.

    Parameters
    ----------
    name
        Name for the material.
    cladding_per_diameter
        Copper thickness over outer diameter, 1e-6 to 0.499.

    Returns
    -------
    Material
        Drawn copper over `CORE_STEEL`.

    Raises
    ------
    OutOfRange
        A thickness outside its range.
    """
    return Material(
        name=name,
        surface=_DRAWN_CLADDING,
        core=CORE_STEEL,
        cladding_per_diameter=cladding_per_diameter,
        source="cold-worked copper: Copper Development Association; core of 9 % IACS: common "
        "practice; permeability: from memory",
    )


def cladding_for_nominal_conductivity(iacs_fraction: float) -> float:
    """Copper thickness that gives copper-clad steel its nominal direct-current conductivity.

    Parameters
    ----------
    iacs_fraction
        Nominal conductivity over that of annealed copper, 0.1 to 0.9 (0.4 for the "40 %" grade).

    Returns
    -------
    float
        Copper thickness over outer diameter.

    Raises
    ------
    OutOfRange
        A fraction outside its range.

    Notes
    -----
    With f the copper's share of the section and a core of 9 % IACS,
    ``f + 0.09 (1 - f) = iacs_fraction`` and ``t / D = (1 - sqrt(1 - f)) / 2``. The grade is
    named with the copper at 100 %; drawn hard, it conducts about 2 % less.

    References
    ----------
    ASTM B227, "Hard-drawn copper-clad steel wire" (grades by nominal conductivity).
    """
    require_within("iacs_fraction", iacs_fraction, 0.1, 0.9)
    copper_share = (iacs_fraction - 0.09) / (1.0 - 0.09)
    return 0.5 * (1.0 - sqrt(1.0 - copper_share))


def _copper(name: str, iacs_fraction: float, source: str) -> Material:
    metal = Metal(
        iacs_fraction * _ANNEALED_COPPER_S_PER_M, iacs_fraction * _COPPER_COEFFICIENT_PER_K
    )
    return Material(name=name, surface=metal, source=f"{source}; coefficient scaled")


def _aluminium(name: str, iacs_fraction: float, source: str) -> Material:
    scale = iacs_fraction / _ALUMINIUM_1350_IACS
    metal = Metal(
        iacs_fraction * _ANNEALED_COPPER_S_PER_M, scale * _ALUMINIUM_1350_COEFFICIENT_PER_K
    )
    return Material(name=name, surface=metal, source=f"{source}; coefficient scaled")


def _catalogue(*materials: Material) -> Mapping[str, Material]:
    return MappingProxyType({material.name: material for material in materials})


MATERIALS: Final[Mapping[str, Material]] = _catalogue(
    _copper("annealed-copper", 1.0, "IEC 60028: 58.0 MS/m, 3.93e-3/K at 20 °C"),
    _copper("hard-drawn-copper", 0.9616, "ASTM B1, sizes up to 8.25 mm: 96.16 % IACS, from memory"),
    copper_clad_steel("copper-clad-steel-30", cladding_for_nominal_conductivity(0.30)),
    copper_clad_steel("copper-clad-steel-40", cladding_for_nominal_conductivity(0.40)),
    _aluminium("aluminium-1350-h19", 0.61, "ASTM B230: 61.0 % IACS, from memory"),
    _aluminium("aluminium-6061-t6", 0.43, "ASM handbook: 43 % IACS, from memory"),
    _aluminium("aluminium-6063-t5", 0.55, "ASM handbook: 55 % IACS, from memory"),
    _aluminium("aluminium-6063-t6", 0.53, "ASM handbook: 53 % IACS, from memory"),
    _copper(
        "phosphor-bronze-c51000", 0.15, "Copper Development Association: 15 % IACS, from memory"
    ),
    _copper(
        "phosphor-bronze-c50500", 0.48, "Copper Development Association: 48 % IACS, from memory"
    ),
    Material(
        name="stainless-steel-304",
        surface=Metal(1.0 / 7.2e-7, 9.4e-4, 1.02),
        source="handbook values for austenitic stainless steel, from memory",
    ),
)
"""Materials by plain name; read-only."""
