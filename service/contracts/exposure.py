"""Exposure of people to the wire's fields: which limits to tell of, and the distance they ask."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Annotated, Final, Literal, get_args

from pydantic import Field

from service.contracts.quantities import Contract

#: 47 CFR 1.1310 (United States), and the guidelines of ICNIRP of 2020.
StandardName = Literal["fcc-1.1310", "icnirp-2020"]
STANDARD_NAMES: Final[tuple[StandardName, ...]] = get_args(StandardName)
Population = Literal["general-public", "occupational"]

_STANDARDS_IN_WORDS: Final[dict[StandardName, str]] = {
    "fcc-1.1310": "47 CFR 1.1310",
    "icnirp-2020": "ICNIRP 2020",
}


class ExposureTerms(Contract):
    """Which limits a planner asks about, and how much of the time the transmitter is on.

    ``duty_percent`` is the average power over the power of the request, over the time that a limit
    is averaged: 100 unless you know better.
    """

    duty_percent: Annotated[float, Field(ge=0.1, le=100.0)] = 100.0
    standard: Literal["fcc-1.1310", "icnirp-2020", "both"] = "both"

    def standards(self) -> tuple[StandardName, ...]:
        """The standards to tell of."""
        return STANDARD_NAMES if self.standard == "both" else (self.standard,)


class ExposureDistance(Contract):
    """How far people must stay from every part of the wire for one standard's limits to be met.

    ``distance_m`` is the larger of ``far_field_m``, by the far-field formula, and
    ``near_field_m``, by the fields of the wire's own current. The limits are the strictest within
    the band; ``not_averaged`` says that one of them allows no pauses. ``in_near_field`` says that
    the distance lies where a formula is no more than a guide: measure, or stay further away.
    """

    standard: StandardName
    population: Population
    averaging_min: float
    electric_v_per_m: float
    magnetic_a_per_m: float
    power_density_w_per_m2: float | None
    not_averaged: bool
    far_field_m: float
    near_field_m: float
    distance_m: float
    in_near_field: bool


class BandExposure(Contract):
    """Exposure on one band: at what average power, and the distances."""

    peak_power_w: float
    average_power_w: float
    distances: tuple[ExposureDistance, ...]

    @property
    def duty_percent(self) -> float:
        """The average power as per cent of the power while transmitting."""
        return 100.0 * self.average_power_w / self.peak_power_w

    def distance(self, limits: LimitsTold) -> ExposureDistance | None:
        """What is told of one standard and population."""
        for each in self.distances:
            if limits.names(each):
                return each
        return None


@dataclass(frozen=True, slots=True)
class LimitsTold:
    """One standard's limits for one population, averaged over so many minutes."""

    standard: StandardName
    population: Population
    averaging_min: float

    def names(self, distance: ExposureDistance) -> bool:
        """Whether a distance was found for these limits."""
        found = (distance.standard, distance.population, distance.averaging_min)
        return found == (self.standard, self.population, self.averaging_min)


def limits_told(bands: Iterable[BandExposure | None]) -> tuple[LimitsTold, ...]:
    """Every standard and population that any of these bands tells of, in their order."""
    return tuple(
        dict.fromkeys(
            LimitsTold(each.standard, each.population, each.averaging_min)
            for band in bands
            if band is not None
            for each in band.distances
        )
    )


def standard_in_words(name: StandardName) -> str:
    """A standard as it is cited."""
    return _STANDARDS_IN_WORDS[name]


def population_in_words(name: Population) -> str:
    """Whom limits protect."""
    return name.replace("-", " ")
