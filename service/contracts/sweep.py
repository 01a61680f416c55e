"""A sweep: one wire's impedance along frequency or along length."""

from __future__ import annotations

from typing import Annotated, Final, Literal, Self

from pydantic import Field, model_validator

from service.contracts.feed import FeedLine
from service.contracts.quantities import (
    Contract,
    FrequencyMHz,
    ImpedanceOhm,
    LengthM,
    TransformerRatio,
)
from service.contracts.refusals import rule_broken
from service.contracts.station_site import Ground
from service.contracts.stock import Conductor

MOST_POINTS: Final = 2001


class SweepRequest(Contract):
    """One wire, and what is swept: ``low`` to ``high`` in MHz along frequency, in m along length.

    What is not swept is given: ``length_m`` along frequency, ``frequency_mhz`` along length.
    """

    along: Literal["frequency", "length"] = "frequency"
    low: Annotated[float, Field(gt=0.0)]
    high: Annotated[float, Field(gt=0.0)]
    points: Annotated[int, Field(ge=2, le=MOST_POINTS)] = 41
    length_m: LengthM | None = None
    frequency_mhz: FrequencyMHz | None = None
    conductor: Conductor
    ground: Ground = "free-space"
    height_m: Annotated[float, Field(gt=0.0, le=300.0, description="m")] | None = None
    feed_fraction: Annotated[float, Field(gt=0.0, lt=1.0)] = 0.5
    temperature_c: Annotated[float, Field(ge=-100.0, le=200.0)] = 20.0
    reference_ohm: ImpedanceOhm = 50.0
    transformer_ratio: TransformerRatio = 1.0
    feed_line: FeedLine | None = None

    @model_validator(mode="after")
    def _limits_and_wire_fit(self) -> Self:
        if self.low >= self.high:
            raise rule_broken(
                "limits-swapped",
                f"the sweep starts at {self.low:g} and ends at {self.high:g}.",
                "Let it start at the smaller value.",
                field="low",
                value=self.low,
            )
        fixed = "length_m" if self.along == "frequency" else "frequency_mhz"
        other = "frequency_mhz" if self.along == "frequency" else "length_m"
        if getattr(self, fixed) is None:
            raise rule_broken(
                "fixed-value-missing",
                f"a sweep along {self.along} needs {fixed}.",
                f"Add {fixed}.",
                field=fixed,
                value="",
            )
        if getattr(self, other) is not None:
            raise rule_broken(
                "swept-value-given",
                f"a sweep along {self.along} varies {other} itself.",
                f"Leave out {other}.",
                field=other,
                value=getattr(self, other),
            )
        if (self.ground == "free-space") != (self.height_m is None):
            raise rule_broken(
                "height-and-ground",
                "a height and a ground go together.",
                "Give both height_m and ground, or neither for free space.",
                field="height_m",
                value=self.height_m,
            )
        return self


class SweepPoint(Contract):
    """One point of a sweep.

    R and X at the feed point; |Γ| and SWR behind the transformer, against the reference;
    ``transmitter_swr`` and ``line_loss_db`` where a feed line is given.
    """

    frequency_mhz: float
    length_m: float
    resistance_ohm: float
    reactance_ohm: float
    error_ohm: float
    reflection: float
    swr: float
    transmitter_swr: float | None
    line_loss_db: float | None


class SweepCrossing(Contract):
    """A zero of the reactance within the sweep, at ``at`` MHz or m."""

    kind: Literal["series", "parallel"]
    at: float
    resistance_ohm: float


class Sweep(Contract):
    """A finished sweep."""

    request: SweepRequest
    points: tuple[SweepPoint, ...]
    crossings: tuple[SweepCrossing, ...]
    model: str
    source_gap_mm: float
    ground: str
    not_modelled: tuple[str, ...]
