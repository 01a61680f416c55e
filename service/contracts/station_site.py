"""The site: what the wire may hang on, how high, and over what ground."""

from __future__ import annotations

from typing import Annotated, Final, Literal, Self, get_args

from pydantic import Discriminator, Field, Tag, model_validator

from service.contracts.quantities import Contract
from service.contracts.refusals import rule_broken

#: Ground classes common in the trade, the curves of ITU-R P.527 at HF (``itu-…``), and the
#: two limits; the engine holds their constants.
GroundClass = Literal[
    "very-good",
    "good",
    "pastoral-hills",
    "marshy-wooded",
    "average",
    "rocky",
    "sandy",
    "city",
    "industrial",
    "fresh-water",
    "salt-water",
    "itu-sea-water",
    "itu-wet-ground",
    "itu-fresh-water",
    "itu-medium-dry-ground",
    "itu-very-dry-ground",
    "perfect",
    "free-space",
]
GROUND_CLASSES: Final[tuple[str, ...]] = get_args(GroundClass)


class GroundConstants(Contract):
    """Electrical constants of the ground (ITU-R P.527 gives them by kind and frequency)."""

    relative_permittivity: Annotated[float, Field(ge=1.0, le=100.0)]
    conductivity_s_per_m: Annotated[float, Field(ge=0.0, le=100.0, description="S/m")]


def _ground_form(given: object) -> str:
    return "~constants" if isinstance(given, dict | GroundConstants) else "~class"


Ground = Annotated[
    Annotated[GroundClass, Tag("~class")] | Annotated[GroundConstants, Tag("~constants")],
    Discriminator(_ground_form),
]


MOST_HEIGHTS: Final = 5

HeightM = Annotated[float, Field(gt=0.0, le=300.0, description="m")]


class HeightRange(Contract):
    """Any height between two limits; searched at both and half way."""

    low_m: HeightM
    high_m: HeightM

    @model_validator(mode="after")
    def _limits_are_in_order(self) -> Self:
        if self.low_m >= self.high_m:
            raise rule_broken(
                "heights-swapped",
                f"the low height {self.low_m:g} m is not below the high one {self.high_m:g} m.",
                "Swap the heights, or give a single height as a number.",
                field="low_m",
                value=self.low_m,
            )
        return self

    def sampled(self) -> tuple[float, ...]:
        """Heights that stand for the range, from low to high."""
        return (self.low_m, 0.5 * (self.low_m + self.high_m), self.high_m)


def _heights_form(given: object) -> str:
    if isinstance(given, dict | HeightRange):
        return "~range"
    return "~list" if isinstance(given, list | tuple) else "~one"


Heights = Annotated[
    Annotated[HeightM, Tag("~one")]
    | Annotated[
        Annotated[tuple[HeightM, ...], Field(min_length=1, max_length=MOST_HEIGHTS)], Tag("~list")
    ]
    | Annotated[HeightRange, Tag("~range")],
    Discriminator(_heights_form),
]


class Site(Contract):
    """Two supports and the ground between them.

    ``span_m`` is the clear distance between the points the wire's ends are tied to;
    ``end_allowance_m`` is kept free at each end for insulator and rope; ``height_m`` is
    the height of the wire over ground, or a list or a range of heights to choose from.
    ``ground`` is a class of the trade, a pair of
    constants, or ``free-space``, which needs no height.
    """

    span_m: Annotated[float, Field(gt=0.0, le=2000.0, description="m")]
    end_allowance_m: Annotated[float, Field(ge=0.0, le=50.0, description="m")] = 0.5
    height_m: Heights | None = None
    ground: Ground = "average"

    @model_validator(mode="after")
    def _wire_fits_and_hangs(self) -> Self:
        if self.longest_wire_m <= 0.0:
            raise rule_broken(
                "allowances-exceed-span",
                f"two end allowances of {self.end_allowance_m:g} m leave nothing of a span "
                f"of {self.span_m:g} m.",
                "Lower end_allowance_m or give a longer span_m.",
                field="end_allowance_m",
                value=self.end_allowance_m,
            )
        if self.ground != "free-space" and self.height_m is None:
            raise rule_broken(
                "height-missing",
                "a wire over ground needs its height.",
                'Add height_m in metres, or set ground to "free-space".',
                field="height_m",
                value="",
            )
        return self

    def heights_m(self) -> tuple[float, ...]:
        """The heights to be searched; empty in free space."""
        if self.height_m is None or self.ground == "free-space":
            return ()
        if isinstance(self.height_m, HeightRange):
            return self.height_m.sampled()
        given = self.height_m if isinstance(self.height_m, tuple) else (self.height_m,)
        return tuple(dict.fromkeys(given))

    @property
    def longest_wire_m(self) -> float:
        """The longest wire the span can take, in m."""
        return self.span_m - 2.0 * self.end_allowance_m
