"""What if: one wire moved by hand, and how it would serve the bands."""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import Field, ValidationError, field_validator, model_validator

from service.contracts.bands import MOST_BANDS, Band, check_names_differ, expand_bands
from service.contracts.candidate import Service
from service.contracts.feed import FeedLine
from service.contracts.quantities import Contract, ImpedanceOhm, LengthM, TransformerRatio
from service.contracts.refusals import refusal_of, rule_broken
from service.contracts.report import ReportPoint
from service.contracts.station_site import Ground, HeightM
from service.contracts.stock import Conductor


class WhatIfRequest(Contract):
    """One wire as it might hang, and the bands it is asked about.

    The fields are those of a design request and of its site and feed, for one wire.
    """

    bands: Annotated[tuple[Band, ...], Field(min_length=1, max_length=MOST_BANDS)]
    length_m: LengthM
    conductor: Conductor
    height_m: HeightM | None = None
    ground: Ground = "average"
    feed_fraction: Annotated[float, Field(ge=0.1, le=0.5)] = 0.5
    transformer_ratio: TransformerRatio = 1.0
    reference_ohm: ImpedanceOhm = 50.0
    feed_line: FeedLine | None = None
    matching: Literal["none", "per-band"] = "none"
    reference_point: Literal["feed-point", "transmitter"] = "feed-point"

    @field_validator("bands", mode="before")
    @classmethod
    def _bands_from_lists(cls, given: object) -> object:
        return expand_bands(given)

    @model_validator(mode="after")
    def _hangs_together(self) -> Self:
        check_names_differ(self.bands)
        if (self.ground == "free-space") != (self.height_m is None):
            raise rule_broken(
                "height-and-ground",
                "a height and a ground go together.",
                "Give both height_m and ground, or free-space as the ground and no height.",
                field="height_m",
                value="" if self.height_m is None else self.height_m,
            )
        if self.reference_point == "transmitter" and self.feed_line is None:
            raise rule_broken(
                "feed-line-missing",
                "limits at the transmitter need the feed line.",
                "Add feed_line with its name and length_m, or let the limits apply at the "
                "feed point.",
                field="feed_line",
                value="",
            )
        return self


class WhatIfBand(Contract):
    """How the wire would serve one band.

    ``resonance_mhz`` is a series resonance within the band, where there is one. Gain, take-off
    angle and the part radiated hold at the centre, as in a report; they are left out where the
    wire hangs too many wavelengths high.
    """

    name: str
    service: Service
    served_fraction: float
    swr_limit: float
    swr_worst: float
    resonance_mhz: float | None
    low: ReportPoint
    centre: ReportPoint
    high: ReportPoint
    grid: tuple[ReportPoint, ...]
    gain_dbi: float | None
    take_off_deg: float | None
    radiated_fraction: float | None


class WhatIf(Contract):
    """The answer: the wire asked about and how it would serve each band."""

    engine_version: str
    request: WhatIfRequest
    bands: tuple[WhatIfBand, ...]


def parse_what_if(text: str | bytes) -> WhatIfRequest:
    """Read a what-if from JSON.

    Raises
    ------
    RequestRefused
        With one fault for each thing wrong: field, value, reason and remedy.
    """
    try:
        return WhatIfRequest.model_validate_json(text)
    except ValidationError as error:
        raise refusal_of(error) from error
