"""What wire and rope weigh, stretch and bear.

Handbook figures; strengths are the least that a standard or the trade promises, of the usual
temper. All are from memory of the sources named, but for the strengths of copper-clad steel, which
were read. Those rise and fall with the size, so the least of all sizes stands for each.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import pi
from types import MappingProxyType
from typing import Final

import numpy as np

from worker.engine.limits import require_within

STANDARD_GRAVITY_M_PER_S2: Final = 9.80665
#: Soft PVC, the heaviest of the usual sleeves (common practice).
INSULATION_KG_PER_M3: Final = 1400.0

_PSI: Final = 6894.757
_INCH_M: Final = 0.0254


@dataclass(frozen=True, slots=True)
class Strength:
    """Mechanics of one material of wire.

    Attributes
    ----------
    density_kg_per_m3, modulus_pa, expansion_per_k : float
        Density, Young's modulus and linear expansion per kelvin.
    diameter_m, breaking_pa : tuple of float
        Tensile strength at some diameters, rising; between them it is read along a straight line,
        beyond them it stays.
    source : str
        Where the figures come from.
    """

    density_kg_per_m3: float
    modulus_pa: float
    expansion_per_k: float
    diameter_m: tuple[float, ...]
    breaking_pa: tuple[float, ...]
    source: str

    def breaking_stress_pa(self, diameter_m: float) -> float:
        """Tensile strength of wire of a diameter, in Pa."""
        return float(np.interp(diameter_m, self.diameter_m, self.breaking_pa))


@dataclass(frozen=True, slots=True)
class Line:
    """Wire or rope as a string: load, stretch and strength per metre.

    Attributes
    ----------
    diameter_m : float
        Over all, with insulation, for wind and ice.
    mass_kg_per_m, stiffness_n, expansion_per_k, breaking_n : float
    """

    diameter_m: float
    mass_kg_per_m: float
    stiffness_n: float
    expansion_per_k: float
    breaking_n: float


def _one(
    density: float,
    modulus_gpa: float,
    expansion_millionths: float,
    breaking_mpa: float,
    source: str,
) -> Strength:
    return Strength(
        density,
        1e9 * modulus_gpa,
        1e-6 * expansion_millionths,
        (1e-3,),
        (1e6 * breaking_mpa,),
        source,
    )


# ASTM B1, table 1: diameters in inch (AWG 18, 16, 14 ... 4/0) and least strengths in psi.
_B1_INCH: Final = (
    0.0403,
    0.0508,
    0.0641,
    0.0808,
    0.1019,
    0.1285,
    0.1620,
    0.2043,
    0.2576,
    0.3249,
    0.4096,
    0.4600,
)
_B1_PSI: Final = (
    67_000,
    66_600,
    66_200,
    65_700,
    64_900,
    63_700,
    62_100,
    60_100,
    57_600,
    54_500,
    51_000,
    49_000,
)

STRENGTHS: Final[Mapping[str, Strength]] = MappingProxyType(
    {
        "annealed-copper": _one(
            8890.0, 110.0, 17.0, 220.0, "ASTM B3 and handbooks; soft copper creeps far below this"
        ),
        "hard-drawn-copper": Strength(
            8890.0,
            117e9,
            17.0e-6,
            tuple(_INCH_M * inch for inch in _B1_INCH),
            tuple(_PSI * psi for psi in _B1_PSI),
            "ASTM B1, least tensile strengths; modulus 17 Mpsi and expansion from handbooks",
        ),
        "copper-clad-steel-30": _one(
            8150.0, 165.0, 13.0, 827.0, "ASTM B227, table 1, grade 30 HS: 120 000 psi, least of all"
        ),
        "copper-clad-steel-40": _one(
            8240.0, 165.0, 13.0, 744.0, "ASTM B227, table 1, grade 40 HS: 108 000 psi, least of all"
        ),
        "aluminium-1350-h19": _one(
            2705.0, 69.0, 23.0, 160.0, "ASTM B230, the least of all sizes, rounded down"
        ),
        "aluminium-6061-t6": _one(2700.0, 68.9, 23.6, 290.0, "ASTM B221 and handbooks"),
        "aluminium-6063-t5": _one(2690.0, 68.9, 23.4, 150.0, "ASTM B221 and handbooks"),
        "aluminium-6063-t6": _one(2690.0, 68.9, 23.4, 205.0, "ASTM B221 and handbooks"),
        "phosphor-bronze-c51000": _one(
            8860.0, 110.0, 17.8, 560.0, "Copper Development Association, hard temper"
        ),
        "phosphor-bronze-c50500": _one(
            8890.0, 117.0, 17.8, 450.0, "Copper Development Association, hard temper"
        ),
        "stainless-steel-304": _one(
            8000.0, 193.0, 17.2, 515.0, "ASTM A580, annealed wire, the least"
        ),
    }
)
"""Mechanics by the names of `material.MATERIALS`; read-only."""


def wire_line(material: str, diameter_m: float, sleeve_m: float = 0.0) -> Line:
    """A solid wire as a string; insulation weighs and catches wind, but bears nothing.

    Parameters
    ----------
    material
        A name of `STRENGTHS`.
    diameter_m
        Of the metal, 1e-5 to 0.2 m.
    sleeve_m
        Thickness of the insulation, 0 to 0.1 m.

    Raises
    ------
    OutOfRange
        A diameter or thickness outside its range.
    """
    require_within("diameter_m", diameter_m, 1e-5, 0.2, "m")
    require_within("sleeve_m", sleeve_m, 0.0, 0.1, "m")
    strength = STRENGTHS[material]
    area_m2 = 0.25 * pi * diameter_m**2
    sleeve_m2 = pi * sleeve_m * (diameter_m + sleeve_m)
    return Line(
        diameter_m=diameter_m + 2.0 * sleeve_m,
        mass_kg_per_m=strength.density_kg_per_m3 * area_m2 + INSULATION_KG_PER_M3 * sleeve_m2,
        stiffness_n=strength.modulus_pa * area_m2,
        expansion_per_k=strength.expansion_per_k,
        breaking_n=strength.breaking_stress_pa(diameter_m) * area_m2,
    )


def rope_line(diameter_m: float, breaking_n: float | None = None) -> Line:
    """Braided polyester rope, as halyards are of.

    Parameters
    ----------
    diameter_m
        1e-3 to 0.1 m.
    breaking_n
        Its breaking load in N, 1 to 1e7; None: the least of the trade for the diameter.

    Raises
    ------
    OutOfRange
        A diameter or breaking load outside its range.

    Notes
    -----
    Common practice, from memory: 120 N per square of the diameter in mm; 0.8 g/m per square of it;
    2 % stretch at a tenth of the breaking load. Warmth is left out.
    """
    require_within("diameter_m", diameter_m, 1e-3, 0.1, "m")
    squared_mm2 = (1e3 * diameter_m) ** 2
    least_n = 120.0 * squared_mm2
    if breaking_n is not None:
        require_within("breaking_n", breaking_n, 1.0, 1e7, "N")
    return Line(
        diameter_m=diameter_m,
        mass_kg_per_m=0.8e-3 * squared_mm2,
        stiffness_n=5.0 * least_n,
        expansion_per_k=0.0,
        breaking_n=least_n if breaking_n is None else breaking_n,
    )
