"""How designs are found again: labels on them, what is put away, and what a list is asked for."""

from __future__ import annotations

from typing import Annotated, Final, Literal

from pydantic import Field, StringConstraints, ValidationError, field_validator

from service.contracts.progress import DesignSummary, State
from service.contracts.quantities import Contract
from service.contracts.refusals import refusal_of, rule_broken

MOST_LABELS: Final = 8
LONGEST_LABEL: Final = 40

Label = Annotated[
    str, StringConstraints(strip_whitespace=True, min_length=1, max_length=LONGEST_LABEL)
]


class Labels(Contract):
    """The labels of one design, in order and each once."""

    labels: Annotated[tuple[Label, ...], Field(max_length=MOST_LABELS)]

    @field_validator("labels")
    @classmethod
    def _each_once(cls, labels: tuple[str, ...]) -> tuple[str, ...]:
        for label in labels:
            if not label.isprintable() or "," in label:
                raise rule_broken(
                    "label-unreadable",
                    "a label holds a comma or a sign that cannot be printed.",
                    "Leave the sign out, or write two labels.",
                    value=ascii(label),
                )
        return tuple(sorted(set(labels)))


class FiledDesign(Contract):
    """One line of the list: where the design stands, its labels, and whether it is put away."""

    summary: DesignSummary
    labels: tuple[str, ...]
    archived: bool


class ListWish(Contract):
    """What the list is to show, and in which order.

    ``name`` is a part of the designs' names; ``batches`` says whether designs of batches are
    among those shown.
    """

    name: Annotated[str, StringConstraints(max_length=120)] = ""
    state: State | None = None
    label: Annotated[str, StringConstraints(max_length=LONGEST_LABEL)] = ""
    archived: bool = False
    batches: bool = False
    sort: Literal["newest", "name"] = "newest"


def parse_labels(text: str) -> tuple[str, ...]:
    """Labels written with commas between them.

    Raises
    ------
    RequestRefused
        If they are too many or too long.
    """
    labels = [label.strip() for label in text.split(",") if label.strip()]
    try:
        return Labels(labels=tuple(labels)).labels
    except ValidationError as error:
        raise refusal_of(error) from error
