"""Candidates side by side: what differs first, what is equal below, SWR over each other."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Annotated, Final

from fastapi import APIRouter, Query
from fastapi.responses import HTMLResponse

from service.contracts.candidate import BandOutcome, Candidate
from service.contracts.progress import Design
from service.contracts.report import BandReport, FeedReport
from service.errors import Fault, RequestRefused
from service.pages import formats
from service.pages.stored import StoreHere
from service.pages.templating import render
from service.plots.overlay import Trace, trace_of
from service.store import designs
from service.store.session import Store

FEWEST: Final = 2
MOST: Final = 4

router = APIRouter(default_response_class=HTMLResponse, include_in_schema=False)


@dataclass(frozen=True, slots=True)
class Compared:
    """One candidate with its design, its report and the letter it is told by."""

    letter: str
    design: Design
    candidate: Candidate
    report: FeedReport

    @property
    def named(self) -> str:
        """What the query calls it."""
        return f"{self.design.id}:{self.candidate.rank}"

    def band(self, name: str) -> tuple[BandOutcome, BandReport] | None:
        """Outcome and report of a band by its name."""
        for outcome, report in zip(self.candidate.bands, self.report.bands, strict=True):
            if outcome.name == name:
                return outcome, report
        return None


@dataclass(frozen=True, slots=True)
class Row:
    """One quantity and how each candidate has it, as shown."""

    what: str
    cells: tuple[str, ...]

    @property
    def differs(self) -> bool:
        """Whether a reader sees a difference."""
        return len(set(self.cells)) > 1


@dataclass(frozen=True, slots=True)
class BandOverlay:
    """One band and the SWR of each candidate that was planned for it."""

    name: str
    traces: tuple[Trace, ...]


@router.get("/compare")
def compare_page(
    store: StoreHere, chosen: Annotated[list[str] | None, Query(alias="with")] = None
) -> HTMLResponse:
    """Show two to four candidates side by side, or what one may be compared with."""
    named = [each.strip() for each in chosen or () if each.strip()]
    compared = _found(store, list(dict.fromkeys(named)))
    rows = rows_of(compared) if len(compared) >= FEWEST else []
    return HTMLResponse(
        render(
            "compare.html",
            compared=compared,
            differing=[row for row in rows if row.differs],
            equal=[row for row in rows if not row.differs],
            overlays=overlays_of(compared) if rows else [],
            choices=_choices(compared),
            fewest=FEWEST,
            most=MOST,
            refresh_s=None,
        )
    )


def rows_of(compared: Sequence[Compared]) -> list[Row]:
    """Every quantity of the candidates, as their own pages show it."""
    rows = [Row(what, tuple(tell(each) for each in compared)) for what, tell in _WHOLE.items()]
    for name in _band_names(compared):
        found = [each.band(name) for each in compared]
        asked = [each for each in found if each is not None]
        if len(asked) < len(found):
            # Nothing to be held side by side but what the others do on it.
            rows.append(Row(name, tuple(_beside_none(each) for each in found)))
            continue
        for what, tell_band in _OF_BAND.items():
            rows.append(Row(f"{name}, {what}", tuple(tell_band(*each) for each in asked)))
    return [row for row in rows if set(row.cells) != {"–"}]


def overlays_of(compared: Sequence[Compared]) -> list[BandOverlay]:
    """The SWR of the candidates over each band, where its limit applies."""
    overlays = []
    for name in _band_names(compared):
        traces = []
        for look, each in enumerate(compared):
            found = each.band(name)
            if found is not None:
                outcome, report = found
                at_transmitter = each.design.request.feed.reference_point == "transmitter"
                traces.append(
                    trace_of(
                        look,
                        each.letter,
                        report.grid,
                        outcome.swr_limit,
                        at_transmitter=at_transmitter,
                    )
                )
        overlays.append(BandOverlay(name, tuple(traces)))
    return overlays


def _found(store: Store, named: list[str]) -> list[Compared]:
    if len(named) > MOST:
        raise _refused(f"{len(named)} candidates", f"at most {MOST} go side by side.")
    compared = []
    for letter, each in zip("ABCD", named, strict=False):
        design_id, colon, rank = each.partition(":")
        if not colon or not (rank.isascii() and rank.isdecimal()):
            raise _refused(each[:80], "a candidate is named by its design, a colon and its rank.")
        # Digits without end are no rank, and no integer of a database either.
        number = int(rank[:4])
        compared.append(
            Compared(
                letter,
                designs.get(store, design_id),
                designs.candidate(store, design_id, number),
                designs.report(store, design_id, number),
            )
        )
    return compared


def _refused(value: str, reason: str) -> RequestRefused:
    remedy = "Choose two to four candidates on the page of a design."
    return RequestRefused([Fault("with", value, reason, remedy, "comparison-refused")])


def _choices(compared: Sequence[Compared]) -> list[tuple[str, Design, Candidate, bool]]:
    """Every candidate of the designs compared: its name, and whether it is compared already."""
    chosen = {each.named for each in compared}
    by_design = {each.design.id: each.design for each in compared}
    return [
        (f"{design.id}:{each.rank}", design, each, f"{design.id}:{each.rank}" in chosen)
        for design in by_design.values()
        if design.result is not None
        for each in design.result.candidates
    ]


def _band_names(compared: Sequence[Compared]) -> list[str]:
    return list(dict.fromkeys(band.name for each in compared for band in each.candidate.bands))


def _beside_none(found: tuple[BandOutcome, BandReport] | None) -> str:
    if found is None:
        return "not asked for"
    return f"{_served(found[0])}, worst SWR {formats.swr(found[0].swr_worst)}"


def _served(outcome: BandOutcome) -> str:
    if outcome.service != "partly served":
        return outcome.service
    return f"partly served, {formats.share(outcome.served_fraction)}"


def _optional(value: float | None, tell: Callable[[float], str]) -> str:
    return "–" if value is None else tell(value)


_WHOLE: Final[dict[str, Callable[[Compared], str]]] = {
    "design": lambda each: each.design.name,
    "candidate": lambda each: str(each.candidate.rank),
    "length, m": lambda each: formats.metres(each.candidate.length_m),
    "conductor": lambda each: each.candidate.conductor,
    "diameter, mm": lambda each: formats.millimetres(each.candidate.diameter_mm),
    "item": lambda each: each.candidate.item_code or "–",
    "height, m": lambda each: _optional(each.candidate.height_m, formats.metres),
    "ground": lambda each: each.report.provenance.ground,
    "fed": lambda each: formats.feed_place(each.candidate.feed_fraction, each.candidate.length_m),
    "transformer": lambda each: formats.ratio(each.candidate.transformer_ratio),
    "reference, Ω": lambda each: formats.ohms(each.report.reference_ohm),
    "limits apply": lambda each: (
        "at the transmitter"
        if each.design.request.feed.reference_point == "transmitter"
        else "at the feed point"
    ),
    "required bands served": lambda each: (
        f"{each.candidate.required_served} of {each.candidate.required_total}"
    ),
    "width served, by weight": lambda each: formats.share(each.candidate.weighted_served),
    "worst SWR where served": lambda each: (
        formats.swr(each.candidate.swr_worst)
        if any(band.service == "served" for band in each.candidate.bands)
        else "no band served whole"
    ),
    "line loss, dB at most": lambda each: _optional(each.candidate.loss_db, formats.decibels),
    "cost of the wire": lambda each: _optional(each.candidate.cost, formats.money),
    "required bands served in the worst case": lambda each: (
        "–"
        if each.candidate.steadiness is None
        else f"{each.candidate.steadiness.required_served} of {each.candidate.required_total}"
    ),
    "engine": lambda each: each.report.provenance.engine_version,
}

_OF_BAND: Final[dict[str, Callable[[BandOutcome, BandReport], str]]] = {
    "served": lambda outcome, _report: _served(outcome),
    "worst SWR": lambda outcome, _report: formats.swr(outcome.swr_worst),
    "SWR limit": lambda outcome, _report: formats.swr(outcome.swr_limit),
    "order used": lambda outcome, _report: (
        "–" if outcome.order is None else formats.ordinal(outcome.order)
    ),
    "resonance, MHz": lambda outcome, _report: _optional(outcome.resonance_mhz, formats.mhz),
    "R at the centre, Ω": lambda _outcome, report: formats.ohms(report.centre.resistance_ohm),
    "X at the centre, Ω": lambda _outcome, report: formats.minus(
        formats.ohms(report.centre.reactance_ohm)
    ),
    "gain, dBi": lambda _outcome, report: (
        "–"
        if report.radiation is None
        else formats.minus(formats.decibels(report.radiation.gain_dbi))
    ),
    "take-off angle, °": lambda _outcome, report: (
        "–" if report.radiation is None else formats.degrees(report.radiation.take_off_deg)
    ),
    "radiated": lambda _outcome, report: (
        "–" if report.radiation is None else formats.part(report.radiation.radiated_fraction)
    ),
}
