"""Bands: what a planner names, and the ready-made lists they may name it by."""

from __future__ import annotations

from typing import Annotated, Any, Final, Self

from pydantic import Field, StringConstraints, ValidationError, model_validator

from service.contracts.band_lists import BAND_LISTS
from service.contracts.quantities import Contract, FrequencyMHz, Name, SwrLimit, Weight
from service.contracts.refusals import faults_of, rule_broken

MOST_BANDS: Final = 12
#: Above this ratio of edges one resonance cannot be judged over the band as a whole.
WIDEST_BAND_RATIO: Final = 1.5


class Band(Contract):
    """One band to be served.

    ``low_mhz`` and ``high_mhz`` are its edges; ``required`` bands rank before wished-for
    ones; ``weight`` orders bands among their equals; ``swr_limit`` is the standing wave
    ratio the planner accepts anywhere in the band.
    """

    name: Name
    low_mhz: FrequencyMHz
    high_mhz: FrequencyMHz
    required: bool = True
    weight: Weight = 1.0
    swr_limit: SwrLimit = 2.0

    @model_validator(mode="after")
    def _edges_make_a_band(self) -> Self:
        if self.low_mhz >= self.high_mhz:
            raise rule_broken(
                "edges-swapped",
                f"the low edge {self.low_mhz:g} MHz is not below the high edge "
                f"{self.high_mhz:g} MHz.",
                "Swap the edges so that low_mhz is the smaller.",
                field="low_mhz",
                value=self.low_mhz,
            )
        if self.high_mhz > WIDEST_BAND_RATIO * self.low_mhz:
            raise rule_broken(
                "band-too-wide",
                f"the edges are in a ratio of {self.high_mhz / self.low_mhz:.2f}.",
                f"Split it into bands whose edges are within a ratio of {WIDEST_BAND_RATIO:g}.",
                field="high_mhz",
                value=self.high_mhz,
            )
        return self

    @property
    def centre_mhz(self) -> float:
        """Middle of the band in MHz."""
        return 0.5 * (self.low_mhz + self.high_mhz)

    @property
    def width_mhz(self) -> float:
        """Width of the band in MHz."""
        return self.high_mhz - self.low_mhz


class BandChoice(Contract):
    """Bands taken from a ready-made list, sharing one set of wishes."""

    band_list: Name
    names: Annotated[
        tuple[Annotated[str, StringConstraints(max_length=20)], ...],
        Field(min_length=1, max_length=MOST_BANDS),
    ]
    required: bool = True
    weight: Weight = 1.0
    swr_limit: SwrLimit = 2.0


def expand_bands(given: object) -> object:
    """Replace every choice from a ready-made list by the bands it names.

    Texts such as ``amateur-region-2: 40m, 15m`` and objects with a ``band_list`` become
    plain bands; anything else is left for the contract to judge.
    """
    entries = [given] if isinstance(given, str | dict) else given
    if not isinstance(entries, list | tuple):
        return given
    expanded: list[object] = []
    for index, entry in enumerate(entries):
        if isinstance(entry, str):
            expanded.extend(_chosen(_read_text(entry, index), index))
        elif isinstance(entry, dict) and "band_list" in entry:
            expanded.extend(_chosen(entry, index))
        else:
            expanded.append(entry)
    return expanded


def check_names_differ(bands: tuple[Band, ...]) -> None:
    """Refuse two bands that a reader of the report could not tell apart."""
    seen: dict[str, int] = {}
    for index, band in enumerate(bands):
        plain = "".join(band.name.casefold().split())
        if plain in seen:
            raise rule_broken(
                "band-names-overlap",
                f"bands {seen[plain] + 1} and {index + 1} carry the same name.",
                "Give each band a name of its own, for example '40m CW' and '40m phone'.",
                field=f"bands[{index}].name",
                value=band.name,
            )
        seen[plain] = index


def _read_text(text: str, index: int) -> dict[str, Any]:
    band_list, colon, names = text.partition(":")
    if not colon or not names.strip():
        raise rule_broken(
            "band-text-unreadable",
            "bands given as text are a list's name, a colon and the bands' names.",
            "Write 'amateur-region-2: 40m, 15m', or an object with name, low_mhz and high_mhz.",
            field=f"[{index}]",
            value=text,
        )
    return {"band_list": band_list.strip(), "names": [name.strip() for name in names.split(",")]}


def _chosen(entry: dict[str, Any], index: int) -> list[dict[str, Any]]:
    try:
        choice = BandChoice.model_validate(entry)
    except ValidationError as error:
        fault = faults_of(error)[0]
        raise rule_broken(
            fault.code,
            fault.reason,
            fault.remedy,
            field=f"[{index}].{fault.field}",
            value=fault.value,
        ) from error
    known = BAND_LISTS.get(choice.band_list)
    if known is None:
        raise rule_broken(
            "band-list-unknown",
            "there is no band list of this name.",
            "Choose one of " + ", ".join(BAND_LISTS) + ".",
            field=f"[{index}].band_list",
            value=choice.band_list,
        )
    wishes = choice.model_dump(include={"required", "weight", "swr_limit"})
    chosen: list[dict[str, Any]] = []
    for name in choice.names:
        found = known.find(name)
        if found is None:
            raise rule_broken(
                "band-name-unknown",
                f"the list {choice.band_list} has no band of this name.",
                "Choose from " + ", ".join(edges.name for edges in known.bands) + ".",
                field=f"[{index}].names",
                value=name,
            )
        plain = {"name": found.name, "low_mhz": found.low_mhz, "high_mhz": found.high_mhz}
        chosen.append(plain | wishes)
    return chosen
