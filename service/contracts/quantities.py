"""Annotated quantities with their units and bounds, used by every other contract."""

from __future__ import annotations

import unicodedata
from typing import Annotated, Final

from pydantic import BaseModel, ConfigDict, Field, StringConstraints, field_validator

from service.contracts.refusals import rule_broken

#: Speed of light in vacuum, exact by the definition of the metre (SI, 1983).
SPEED_OF_LIGHT_M_PER_S: Final = 299_792_458.0

LOWEST_FREQUENCY_MHZ: Final = 0.1
HIGHEST_FREQUENCY_MHZ: Final = 1000.0
HIGHEST_SWR_LIMIT: Final = 10.0

Name = Annotated[str, StringConstraints(strip_whitespace=True, min_length=1, max_length=80)]
FrequencyMHz = Annotated[
    float, Field(ge=LOWEST_FREQUENCY_MHZ, le=HIGHEST_FREQUENCY_MHZ, description="MHz")
]
LengthM = Annotated[float, Field(gt=0.0, le=10_000.0, description="m")]
DiameterMm = Annotated[float, Field(ge=0.05, le=100.0, description="mm")]
ImpedanceOhm = Annotated[float, Field(ge=5.0, le=2000.0, description="Ω")]
TransformerRatio = Annotated[
    float, Field(ge=0.1, le=16.0, description="impedance ratio, antenna side to line side")
]
SwrLimit = Annotated[float, Field(ge=1.05, le=HIGHEST_SWR_LIMIT, description="standing wave ratio")]
Weight = Annotated[float, Field(ge=0.01, le=100.0)]
PowerW = Annotated[float, Field(gt=0.0, le=2_000_000.0, description="W")]


class Contract(BaseModel):
    """Base of every contract: frozen, extra fields refused, no NaN or infinity."""

    model_config = ConfigDict(
        frozen=True, extra="forbid", allow_inf_nan=False, str_strip_whitespace=True
    )

    @field_validator("*", mode="after")
    @classmethod
    def _text_is_printable(cls, value: object) -> object:
        # PostgreSQL stores no NUL, and a terminal obeys the others.
        if isinstance(value, str) and any(unicodedata.category(sign) == "Cc" for sign in value):
            raise rule_broken(
                "control-character",
                "the text holds a control character.",
                "Leave out line breaks, tabs and other control characters.",
                value=ascii(value),
            )
        return value


def wavelength_m(frequency_mhz: float) -> float:
    """Free-space wavelength in m at a frequency in MHz."""
    return SPEED_OF_LIGHT_M_PER_S / (frequency_mhz * 1e6)
