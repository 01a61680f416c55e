"""The stock: conductors that can be bought, as a list or as a range of diameters."""

from __future__ import annotations

import math
from typing import Annotated, Final, Literal, Self, get_args

from pydantic import Field, StringConstraints, model_validator

from service.contracts.quantities import Contract, DiameterMm
from service.contracts.refusals import rule_broken

MOST_CONDUCTORS: Final = 12
#: A range of diameters is searched at this many standard steps, spaced evenly in logarithm.
RANGE_STEPS: Final = 5

#: Conductor materials; the engine holds their conductivity and temperature coefficient.
MaterialName = Literal[
    "annealed-copper",
    "hard-drawn-copper",
    "copper-clad-steel-30",
    "copper-clad-steel-40",
    "aluminium-1350-h19",
    "aluminium-6061-t6",
    "aluminium-6063-t5",
    "aluminium-6063-t6",
    "phosphor-bronze-c51000",
    "phosphor-bronze-c50500",
    "stainless-steel-304",
]
MATERIAL_NAMES: Final[tuple[str, ...]] = get_args(MaterialName)

# Where a name in words says it better than its spelling.
_IN_WORDS: Final = {
    "hard-drawn-copper": "hard-drawn copper",
    "copper-clad-steel-30": "copper-clad steel, 30 %",
    "copper-clad-steel-40": "copper-clad steel, 40 %",
    "aluminium-1350-h19": "aluminium 1350-H19",
    "aluminium-6061-t6": "aluminium 6061-T6",
    "aluminium-6063-t5": "aluminium 6063-T5",
    "aluminium-6063-t6": "aluminium 6063-T6",
    "phosphor-bronze-c51000": "phosphor bronze C51000",
    "phosphor-bronze-c50500": "phosphor bronze C50500",
}


def material_in_words(material: str) -> str:
    """A material as a buyer would write it."""
    return _IN_WORDS.get(material, material.replace("-", " "))


class Insulation(Contract):
    """A dielectric sleeve on the wire."""

    thickness_mm: Annotated[float, Field(gt=0.0, le=20.0, description="mm")]
    relative_permittivity: Annotated[float, Field(ge=1.0, le=10.0)] = 2.3
    loss_tangent: Annotated[float, Field(ge=0.0, le=0.2)] = 0.0


class Conductor(Contract):
    """One conductor of the stock, by AWG (ASTM B258) or by metric diameter."""

    awg: Annotated[int, Field(ge=0, le=40)] | None = None
    diameter_mm: DiameterMm | None = None
    material: MaterialName = "hard-drawn-copper"
    insulation: Insulation | None = None
    item_code: Annotated[str, StringConstraints(max_length=64)] = ""
    price_per_m: Annotated[float, Field(ge=0.0, le=1e6)] | None = None

    @model_validator(mode="after")
    def _one_size_is_given(self) -> Self:
        if (self.awg is None) == (self.diameter_mm is None):
            raise rule_broken(
                "size-ambiguous",
                "a conductor has either an AWG size or a diameter.",
                "Give awg or diameter_mm, and only one of them.",
                field="awg",
                value="neither" if self.awg is None else f"{self.awg} and {self.diameter_mm:g} mm",
            )
        return self

    @property
    def bare_diameter_mm(self) -> float:
        """Diameter of the metal in mm; AWG n is 0.127 mm · 92^((36 − n)/39) (ASTM B258)."""
        if self.diameter_mm is not None:
            return self.diameter_mm
        gauge = 0 if self.awg is None else self.awg
        return 0.127 * math.pow(92.0, (36 - gauge) / 39)

    @property
    def label(self) -> str:
        """The conductor as a buyer would ask for it."""
        size = f"{self.bare_diameter_mm:.2f} mm" if self.awg is None else f"AWG {self.awg}"
        sleeve = "" if self.insulation is None else ", insulated"
        return f"{size} {material_in_words(self.material)}{sleeve}"


class DiameterRange(Contract):
    """Any diameter between two limits."""

    low_mm: DiameterMm
    high_mm: DiameterMm
    material: MaterialName = "hard-drawn-copper"
    insulation: Insulation | None = None

    @model_validator(mode="after")
    def _limits_are_in_order(self) -> Self:
        if self.low_mm > self.high_mm:
            raise rule_broken(
                "diameters-swapped",
                f"the low diameter {self.low_mm:g} mm is above the high one {self.high_mm:g} mm.",
                "Swap the diameters.",
                field="low_mm",
                value=self.low_mm,
            )
        return self

    def sampled(self) -> tuple[Conductor, ...]:
        """Conductors that stand for the range, from thin to thick."""
        if self.low_mm == self.high_mm:
            diameters = [self.low_mm]
        else:
            step = (self.high_mm / self.low_mm) ** (1.0 / (RANGE_STEPS - 1))
            diameters = [self.low_mm * step**index for index in range(RANGE_STEPS - 1)]
            diameters.append(self.high_mm)
        return tuple(
            Conductor(diameter_mm=diameter, material=self.material, insulation=self.insulation)
            for diameter in diameters
        )


class Stock(Contract):
    """What can be bought: a list of conductors, or a range of diameters."""

    conductors: Annotated[tuple[Conductor, ...], Field(max_length=MOST_CONDUCTORS)] = ()
    diameter_range: DiameterRange | None = None

    @model_validator(mode="after")
    def _one_form_is_given(self) -> Self:
        if bool(self.conductors) == (self.diameter_range is not None):
            raise rule_broken(
                "stock-ambiguous",
                "the stock is either a list of conductors or a range of diameters.",
                "Give conductors or diameter_range, and only one of them.",
                field="conductors",
                value="neither" if not self.conductors else "both",
            )
        return self

    def choices(self) -> tuple[Conductor, ...]:
        """The conductors to be searched."""
        if self.diameter_range is not None:
            return self.diameter_range.sampled()
        return self.conductors
