"""The form as its template sees it: values, faults and figures by the name of the field."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from service.contracts.band_lists import BAND_LISTS, BandList
from service.contracts.bands import MOST_BANDS
from service.contracts.estimate import SearchEstimate
from service.contracts.feed import LINE_NAMES, line_in_words
from service.contracts.request import LARGEST_SET
from service.contracts.station_site import GROUND_CLASSES
from service.contracts.stock import (
    MATERIAL_NAMES,
    MOST_CONDUCTORS,
    Conductor,
    material_in_words,
)
from service.errors import Fault
from service.pages import formats, wording
from service.pages.form.entries import Entries, rows, written
from service.pages.form.judging import Judged
from service.pages.form.labels import label, place, row_label
from service.pages.form.reading import band_list_of, kept_parts, unit_of
from service.pages.form.shown_back import shown_back

Choices = tuple[tuple[str, str], ...]

MATERIALS: Choices = tuple((name, material_in_words(name)) for name in MATERIAL_NAMES)
GROUNDS: Choices = (
    *((name, wording.ground_class_in_words(name)) for name in GROUND_CLASSES),
    ("constants", "by its constants"),
)
LINES: Choices = (("", "none"), *((name, line_in_words(name)) for name in LINE_NAMES))
LISTS: Choices = tuple((each.name, each.title) for each in BAND_LISTS.values())
SETS: Choices = (
    ("", "only where no single wire serves all required bands"),
    ("1", "never"),
    *((str(most), f"of up to {most} dipoles") for most in range(2, LARGEST_SET + 1)),
)
#: What selections hold that nobody touched.
_FIRST_CHOICES: Final = frozenset(
    ("", "none", "feed-point", "nominal", Conductor.model_fields["material"].default)
)


@dataclass(frozen=True)
class FormView:
    """What the page shows of a form."""

    entries: Entries
    judged: Judged | None
    shown: dict[str, str]

    @classmethod
    def of(cls, entries: Entries, judged: Judged | None) -> FormView:
        """The view of entries, and of what the contract said where it was asked."""
        return cls(entries, judged, shown_back(entries))

    label = staticmethod(label)
    place = staticmethod(place)
    row_label = staticmethod(row_label)

    def value(self, name: str) -> str:
        """What stands in a field."""
        return self.entries.get(name, "")

    def faults_at(self, name: str) -> list[Fault]:
        """What is wrong with a field."""
        return [fault for field, fault in self.faults if field == name]

    @staticmethod
    def said(fault: Fault) -> str:
        """A fault beside its field, where the field's name need not be said."""
        return f"{fault.reason[:1].upper()}{fault.reason[1:]} {fault.remedy}"

    @property
    def faults(self) -> tuple[tuple[str | None, Fault], ...]:
        """Everything that is wrong, in the contract's order."""
        return self.judged.faults if self.judged else ()

    @property
    def kept(self) -> list[str]:
        """Names of the parts that travel along without a field."""
        return [name.replace("_", " ") for name in kept_parts(self.entries)]

    @property
    def band_list(self) -> BandList:
        """The list whose bands are shown."""
        return band_list_of(self.entries)

    @property
    def unit(self) -> str:
        """The unit of lengths, in words."""
        return {"m": "metre", "ft": "foot"}[unit_of(self.entries)]

    @property
    def own_bands(self) -> list[int]:
        """Rows of the planner's own bands."""
        return rows(self.entries, "own")

    @property
    def conductors(self) -> list[int]:
        """Rows of conductors."""
        return rows(self.entries, "wire")

    @property
    def room_for_band(self) -> bool:
        """Whether another band of the planner's own may be asked for."""
        return len(self.own_bands) < MOST_BANDS

    @property
    def room_for_conductor(self) -> bool:
        """Whether another conductor may be asked for."""
        return len(self.conductors) < MOST_CONDUCTORS

    def opened(self, *names: str) -> bool:
        """Whether a folded part is to be open: something was written there, or is wrong."""
        return any(
            written(self.entries, name) not in _FIRST_CHOICES or self.faults_at(name)
            for name in names
        )


def estimate_in_words(estimate: SearchEstimate) -> str:
    """The size of a search in one sentence or two."""
    return (
        f"About {formats.count(estimate.combinations)} combinations: "
        f"{_counted(estimate.ways, 'way')} to hang the wire, "
        f"{_counted(estimate.transformers, 'transformer')}, {formats.count(estimate.lengths)} "
        f"lengths up to {formats.metres(estimate.longest_wire_m)} m, judged on "
        f"{_counted(estimate.bands, 'band')}. Roughly {estimate.roughly_s:g} s once a worker is "
        "at it: a rule of thumb, good to a factor of three."
    )


def _counted(number: int, thing: str) -> str:
    return f"{number} {thing}" if number == 1 else f"{number} {thing}s"
