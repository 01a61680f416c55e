"""What if: a candidate moved by hand, judged at once, and stored as a design where it is liked."""

from __future__ import annotations

from dataclasses import dataclass
from http import HTTPStatus
from typing import Annotated, Any, Final

from fastapi import APIRouter, Depends, Request, Response
from fastapi.responses import HTMLResponse, RedirectResponse
from pydantic import ValidationError

from service.bench import Bench
from service.contracts.candidate import BandOutcome, Candidate
from service.contracts.progress import Design
from service.contracts.refusals import refusal_of
from service.contracts.report import BandReport, FeedReport
from service.contracts.request import DesignRequest
from service.contracts.station_site import GROUND_CLASSES
from service.contracts.stock import Conductor
from service.contracts.what_if import WhatIf, WhatIfBand, WhatIfRequest
from service.doorbell import Doorbell
from service.errors import BenchBusy, BenchMissing, BenchTooSlow, RequestRefused, SpanwrightError
from service.intake import submit
from service.pages.posted import Posted
from service.pages.stored import StoreHere
from service.pages.templating import render
from service.plots.overlay import Trace, trace_of
from service.store import designs

#: The value of the ground's field that stands for constants of the request's own.
OWN_GROUND: Final = "as-asked"
_FREE_SPACE: Final = "free-space"

router = APIRouter(
    prefix="/designs/{design_id}/candidates/{rank}/what-if",
    default_response_class=HTMLResponse,
    include_in_schema=False,
)


def doorbell_of(request: Request) -> Doorbell:
    """The bell that tells the workers of new work."""
    doorbell: Doorbell = request.app.state.doorbell
    return doorbell


DoorbellHere = Annotated[Doorbell, Depends(doorbell_of)]


@dataclass(frozen=True, slots=True)
class Moved:
    """What the form says, as text: it is judged by the contract."""

    length_m: str
    height_m: str
    ground: str
    conductor: str
    transformer_ratio: str

    @classmethod
    def of(cls, entries: dict[str, str], start: Moved) -> Moved:
        """The entries of a form, and where one is missing the value to start from."""
        return cls(
            **{
                name: entries.get(name, getattr(start, name)).strip()
                for name in cls.__dataclass_fields__
            }
        )


@dataclass(frozen=True, slots=True)
class Answered:
    """One band of the answer beside the same as planned, and both drawn over each other."""

    planned: BandOutcome
    planned_report: BandReport
    found: WhatIfBand
    traces: tuple[Trace, Trace]


@router.get("")
def what_if_page(request: Request, store: StoreHere, design_id: str, rank: int) -> HTMLResponse:
    """Show a candidate with the values of the query, and what would come of them."""
    design = designs.get(store, design_id)
    candidate = designs.candidate(store, design_id, rank)
    report = designs.report(store, design_id, rank)
    moved = Moved.of(dict(request.query_params), as_planned(design, candidate))
    return _page(request.app.state.bench, design, candidate, report, moved)


@router.post("")
def store_moved(
    request: Request,
    store: StoreHere,
    doorbell: DoorbellHere,
    entries: Posted,
    design_id: str,
    rank: int,
) -> Response:
    """Submit a design of that wire alone, and lead to it."""
    design = designs.get(store, design_id)
    candidate = designs.candidate(store, design_id, rank)
    moved = Moved.of(entries, as_planned(design, candidate))
    try:
        pinned = pinned_request(design, candidate, moved)
    except RequestRefused as refused:
        report = designs.report(store, design_id, rank)
        return _page(request.app.state.bench, design, candidate, report, moved, refused)
    # The content is the key: a button pressed twice stores one design.
    key = f"what-if-{design_id}-{pinned.content_hash()}"
    submitted = submit(store, doorbell, pinned, key)
    return RedirectResponse(f"/designs/{submitted.design_id}", HTTPStatus.SEE_OTHER)


def as_planned(design: Design, candidate: Candidate) -> Moved:
    """The form as it starts: the candidate's own values."""
    ground = design.request.site.ground
    labels = [(each.label, each.item_code) for each in design.request.stock.choices()]
    wire = (candidate.conductor, candidate.item_code)
    return Moved(
        length_m=f"{candidate.length_m:.3f}",
        height_m="" if candidate.height_m is None else f"{candidate.height_m:g}",
        ground=ground if isinstance(ground, str) else OWN_GROUND,
        conductor=str(labels.index(wire) if wire in labels else 0),
        transformer_ratio=f"{candidate.transformer_ratio:g}",
    )


def asked_of(design: Design, candidate: Candidate, moved: Moved) -> WhatIfRequest:
    """The what-if of a moved candidate.

    Raises
    ------
    RequestRefused
        If a value breaks the contract.
    """
    feed = design.request.feed
    said: dict[str, Any] = {
        "bands": design.request.bands,
        "length_m": moved.length_m,
        "conductor": _conductor(design, moved),
        "height_m": _height(moved),
        "ground": _ground(design, moved),
        "feed_fraction": candidate.feed_fraction,
        "transformer_ratio": moved.transformer_ratio,
        "reference_ohm": feed.reference_ohm,
        "feed_line": feed.feed_line,
        "matching": feed.matching,
        "reference_point": feed.reference_point,
    }
    try:
        return WhatIfRequest.model_validate(said)
    except ValidationError as error:
        raise refusal_of(error) from error


def pinned_request(design: Design, candidate: Candidate, moved: Moved) -> DesignRequest:
    """The design's request with nothing left to choose but that wire.

    Raises
    ------
    RequestRefused
        If a value breaks the contract.
    """
    asked = asked_of(design, candidate, moved)
    whole = design.request
    name = f"{whole.name[:80]}, candidate {candidate.rank} moved by hand"
    said = whole.model_dump() | {
        "name": name,
        "site": whole.site.model_dump() | {"height_m": asked.height_m, "ground": asked.ground},
        "stock": {"conductors": [asked.conductor]},
        "feed": whole.feed.model_dump()
        | {"transformer_ratios": [asked.transformer_ratio], "positions": [asked.feed_fraction]},
        "candidates": 1,
        "largest_set": 1,
        "lengths": {"low_m": asked.length_m, "high_m": asked.length_m},
    }
    try:
        return DesignRequest.model_validate(said)
    except ValidationError as error:
        raise refusal_of(error) from error


def _conductor(design: Design, moved: Moved) -> Conductor | str:
    choices = design.request.stock.choices()
    if moved.conductor.isdecimal() and int(moved.conductor) < len(choices):
        return choices[int(moved.conductor)]
    return moved.conductor


def _ground(design: Design, moved: Moved) -> object:
    return design.request.site.ground if moved.ground == OWN_GROUND else moved.ground


def _height(moved: Moved) -> str | None:
    return None if moved.ground == _FREE_SPACE or not moved.height_m else moved.height_m


def _page(
    bench: Bench | None,
    design: Design,
    candidate: Candidate,
    report: FeedReport,
    moved: Moved,
    refused: SpanwrightError | None = None,
) -> HTMLResponse:
    answer: WhatIf | None = None
    status = HTTPStatus.UNPROCESSABLE_ENTITY if refused else HTTPStatus.OK
    if refused is None:
        try:
            answer = _tried(bench, asked_of(design, candidate, moved))
        except RequestRefused as error:
            refused, status = error, HTTPStatus.UNPROCESSABLE_ENTITY
        except (BenchBusy, BenchTooSlow) as error:
            refused, status = error, HTTPStatus.SERVICE_UNAVAILABLE
        except BenchMissing as error:
            # The page itself is there, and what was moved can still be stored.
            refused = error
    page = render(
        "what_if.html",
        design=design,
        candidate=candidate,
        moved=moved,
        refused=refused,
        answer=answer,
        bands=() if answer is None else _beside(design, candidate, report, answer),
        grounds=GROUND_CLASSES,
        own_ground=OWN_GROUND,
        at_transmitter=design.request.feed.reference_point == "transmitter",
        conductors=[each.label for each in design.request.stock.choices()],
        refresh_s=None,
    )
    return HTMLResponse(page, status)


def _tried(bench: Bench | None, asked: WhatIfRequest) -> WhatIf:
    if bench is None:
        raise BenchMissing
    return bench.try_wire(asked)


def _beside(
    design: Design, candidate: Candidate, report: FeedReport, answer: WhatIf
) -> list[Answered]:
    at_transmitter = design.request.feed.reference_point == "transmitter"
    return [
        Answered(
            outcome,
            planned,
            found,
            (
                trace_of(
                    0, "planned", planned.grid, outcome.swr_limit, at_transmitter=at_transmitter
                ),
                trace_of(1, "moved", found.grid, found.swr_limit, at_transmitter=at_transmitter),
            ),
        )
        for outcome, planned, found in zip(candidate.bands, report.bands, answer.bands, strict=True)
    ]
