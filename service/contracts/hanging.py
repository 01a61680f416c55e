"""How the wire is to hang, and how it would: sag, tension, weather, and what to cut."""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from service.contracts.quantities import Contract
from service.contracts.refusals import rule_broken

TensionN = Annotated[float, Field(ge=1.0, le=100_000.0, description="N")]
TemperatureC = Annotated[float, Field(ge=-60.0, le=80.0, description="°C")]


class Hanging(Contract):
    """How a planner wants the wire hung.

    Supports stand ``site.span_m`` apart; ropes run from them to the wire's ends. ``tension_n`` is
    the pull along the span when strung, at ``strung_c`` in still air; ``sag_m`` asks for a sag
    instead; with neither the pull is a tenth of what the weaker of wire and rope bears. ``rise_m``
    is how much higher the support is that ``feed_fraction`` does not count from; the height of the
    site is then that half way. Weather runs from ``low_c`` to ``high_c``; ``wind_pa`` is the
    pressure on the wire's outline, drag included, and ``ice_mm`` the thickness of ice around it,
    both taken at ``low_c``. ``feed_mass_kg`` is what hangs at the feed. The wraps and
    ``cutting_allowance_percent`` go into the cutting list.
    """

    tension_n: TensionN | None = None
    sag_m: Annotated[float, Field(ge=0.01, le=500.0, description="m")] | None = None
    rise_m: Annotated[float, Field(ge=-500.0, le=500.0, description="m")] = 0.0
    strung_c: TemperatureC = 15.0
    low_c: TemperatureC = -20.0
    high_c: TemperatureC = 40.0
    wind_pa: Annotated[float, Field(ge=0.0, le=5000.0, description="Pa")] = 430.0
    ice_mm: Annotated[float, Field(ge=0.0, le=100.0, description="mm")] = 0.0
    safety_factor: Annotated[float, Field(ge=1.0, le=20.0)] = 3.0
    rope_diameter_mm: Annotated[float, Field(ge=1.0, le=50.0, description="mm")] = 5.0
    rope_breaking_n: Annotated[float, Field(ge=10.0, le=1e6, description="N")] | None = None
    feed_mass_kg: Annotated[float, Field(ge=0.0, le=100.0, description="kg")] = 0.0
    end_wrap_m: Annotated[float, Field(ge=0.0, le=2.0, description="m")] = 0.15
    feed_wrap_m: Annotated[float, Field(ge=0.0, le=2.0, description="m")] = 0.1
    cutting_allowance_percent: Annotated[float, Field(ge=0.0, le=20.0)] = 1.0

    @model_validator(mode="after")
    def _one_aim_is_given(self) -> Self:
        if self.tension_n is not None and self.sag_m is not None:
            raise rule_broken(
                "hanging-aims-two",
                "a wire hangs with a given tension or with a given sag, not both.",
                "Give tension_n or sag_m, and only one of them.",
                field="sag_m",
                value=self.sag_m,
            )
        return self

    @model_validator(mode="after")
    def _temperatures_are_in_order(self) -> Self:
        if not self.low_c <= self.strung_c <= self.high_c:
            raise rule_broken(
                "temperatures-out-of-order",
                f"the wire is strung at {self.strung_c:g} °C, outside {self.low_c:g} to "
                f"{self.high_c:g} °C.",
                "Give a range low_c to high_c that holds strung_c.",
                field="strung_c",
                value=self.strung_c,
            )
        return self


class HungState(Contract):
    """The wire under one weather.

    ``wire_tension_n`` and ``rope_tension_n`` are the largest; the latter pulls at a support.
    ``sag_m`` is the largest depth below the straight line between the supports, and ``swing_m`` how
    far the wind pushes the wire aside. Heights are over ground; None in free space.
    """

    weather: str
    temperature_c: float
    wind_pa: float
    ice_mm: float
    wire_tension_n: float
    rope_tension_n: float
    sag_m: float
    swing_m: float
    lowest_m: float | None
    mean_height_m: float | None


class CutLeg(Contract):
    """Wire to cut for one leg: its electrical length, and with wraps and allowance."""

    leg: Literal["near", "far"]
    electrical_m: float
    cut_m: float


class HungSpan(Contract):
    """How one wire would hang: as strung, in the weather asked about, and what to cut for it.

    ``tail_m`` is the rope from each end of the wire to its support. ``safety_factor`` is breaking
    load over largest tension, the least of wire and rope in any weather, and ``weakest`` says
    where. ``shape_m`` is the wire as strung: pairs of distance from the near support and height
    above it; the first and the last are the supports.
    """

    as_wanted: bool
    tail_m: float
    wire_breaking_n: float
    rope_breaking_n: float
    safety_factor: float
    safety_factor_wanted: float
    weakest: str
    states: tuple[HungState, ...]
    cutting: tuple[CutLeg, ...]
    wire_total_m: float
    shape_m: tuple[tuple[float, float], ...]
    strength_source: str
    cautions: tuple[str, ...] = ()

    def as_strung(self) -> HungState:
        """The weather it is strung in."""
        return self.states[0]

    def lowest(self) -> HungState | None:
        """The weather in which it comes closest to the ground; None in free space."""
        over_ground = [each for each in self.states if each.lowest_m is not None]
        return min(over_ground, key=lambda each: each.lowest_m or 0.0, default=None)
