"""The feed: reference impedance, the transformers allowed, and the line to the transmitter."""

from __future__ import annotations

from typing import Annotated, Final, Literal, get_args

from pydantic import Field, field_validator

from service.contracts.quantities import Contract, ImpedanceOhm, TransformerRatio
from service.contracts.refusals import rule_broken

MOST_RATIOS: Final = 12

#: Feed lines by standard designation or construction; the engine holds their constants.
LineName = Literal[
    "rg-58",
    "rg-213",
    "rg-8x",
    "rg-174",
    "rg-59",
    "rg-11",
    "twin-lead-300",
    "window-line-450",
    "open-wire-600",
]
LINE_NAMES: Final[tuple[str, ...]] = get_args(LineName)


class FeedLine(Contract):
    """The line from the feed point (or its transformer) to the transmitter."""

    line: LineName
    length_m: Annotated[float, Field(gt=0.0, le=1000.0, description="m")]


class Feed(Contract):
    """How power reaches the wire.

    ``transformer_ratios`` are impedance ratios, antenna side to line side; 1 means no
    transformer or a 1:1 balun.
    """

    reference_ohm: ImpedanceOhm = 50.0
    transformer_ratios: Annotated[
        tuple[TransformerRatio, ...], Field(min_length=1, max_length=MOST_RATIOS)
    ] = (1.0,)
    feed_line: FeedLine | None = None

    @field_validator("transformer_ratios")
    @classmethod
    def _ratios_differ(cls, ratios: tuple[float, ...]) -> tuple[float, ...]:
        if len(set(ratios)) != len(ratios):
            raise rule_broken(
                "ratios-repeated",
                "a transformer ratio is given twice.",
                "Name each ratio once.",
            )
        return tuple(sorted(ratios))
