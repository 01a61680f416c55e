"""The feed: reference impedance, the transformers allowed, and the line to the transmitter."""

from __future__ import annotations

from typing import Annotated, Final, Literal, Self, get_args

from pydantic import Discriminator, Field, Tag, field_validator, model_validator

from service.contracts.quantities import Contract, ImpedanceOhm, TransformerRatio
from service.contracts.refusals import rule_broken

MOST_RATIOS: Final = 12
MOST_POSITIONS: Final = 6

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


def is_coaxial(name: str) -> bool:
    """Whether a feed line is coaxial; the others are balanced."""
    return name.startswith("rg-")


def line_in_words(name: str) -> str:
    """A feed line by its designation, or by its construction and impedance."""
    if is_coaxial(name):
        return name.upper()
    construction, _, impedance_ohm = name.rpartition("-")
    return f"{impedance_ohm} Ω {construction.replace('-', ' ')}"


class FeedLine(Contract):
    """The line from the feed point (or its transformer) to the transmitter."""

    line: LineName
    length_m: Annotated[float, Field(gt=0.0, le=1000.0, description="m")]


#: Places of the feed searched when it may be anywhere along the wire: the usual off-centre
#: ones, about 0.36 and a third among them (common practice).
ANYWHERE: Final = (0.5, 0.42, 0.36, 1.0 / 3.0, 0.28, 0.2)


def _positions_form(given: object) -> str:
    return "~word" if isinstance(given, str) else "~list"


# Told apart by form, so that a fault names the one that was meant.
Positions = Annotated[
    Annotated[
        Annotated[
            tuple[Annotated[float, Field(ge=0.1, le=0.5)], ...],
            Field(min_length=1, max_length=MOST_POSITIONS),
        ],
        Tag("~list"),
    ]
    | Annotated[Literal["anywhere"], Tag("~word")],
    Discriminator(_positions_form),
]


class Feed(Contract):
    """How power reaches the wire.

    ``transformer_ratios`` are impedance ratios, antenna side to line side; 1 means no
    transformer or a 1:1 balun. ``positions`` are the permitted places of the feed as
    fractions of the length from the nearer end, or ``anywhere``. With ``matching`` of
    ``per-band`` an L-network at the feed point, switched with the band, matches each band at
    its centre. ``reference_point`` is where the SWR limits apply.
    """

    reference_ohm: ImpedanceOhm = 50.0
    transformer_ratios: Annotated[
        tuple[TransformerRatio, ...], Field(min_length=1, max_length=MOST_RATIOS)
    ] = (1.0,)
    feed_line: FeedLine | None = None
    positions: Positions = (0.5,)
    matching: Literal["none", "per-band"] = "none"
    reference_point: Literal["feed-point", "transmitter"] = "feed-point"

    def feed_fractions(self) -> tuple[float, ...]:
        """The places of the feed to be searched, as fractions of the length."""
        return ANYWHERE if self.positions == "anywhere" else tuple(dict.fromkeys(self.positions))

    @model_validator(mode="after")
    def _transmitter_has_its_line(self) -> Self:
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
