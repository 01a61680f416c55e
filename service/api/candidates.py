"""Candidates of a design, and the feed-impedance report of each."""

from __future__ import annotations

from http import HTTPStatus

from fastapi import APIRouter, Request, Response

from service.api.dependencies import DesignId, Rank, StoreHere
from service.api.problems import responses
from service.api.stored import answer_stored, answer_tagged
from service.contracts.candidate import Candidate
from service.contracts.quantities import Contract
from service.contracts.report import FeedReport
from service.errors import ResultNotReady
from service.exports import csv_table, touchstone
from service.store import designs

router = APIRouter(prefix="/v1/designs/{design_id}/candidates", tags=["candidates"])

_OF_DESIGN = responses(HTTPStatus.NOT_FOUND, HTTPStatus.CONFLICT)
_OF_RANK = responses(HTTPStatus.NOT_FOUND, HTTPStatus.CONFLICT, HTTPStatus.UNPROCESSABLE_ENTITY)


class CandidateList(Contract):
    """All candidates of a design, best first."""

    candidates: tuple[Candidate, ...]


@router.get("", response_model=CandidateList, responses=_OF_DESIGN)
def list_candidates(request: Request, store: StoreHere, design_id: DesignId) -> Response:
    """List the candidates of a design that is done, best first."""
    design = designs.get(store, design_id)
    if design.result is None:
        raise ResultNotReady(design_id, design.state)
    return answer_stored(request, CandidateList(candidates=design.result.candidates))


@router.get("/{rank}", response_model=Candidate, responses=_OF_RANK)
def read_candidate(request: Request, store: StoreHere, design_id: DesignId, rank: Rank) -> Response:
    """Give one candidate: the wire, how it serves every band, and why it ranks where it does."""
    return answer_stored(request, designs.candidate(store, design_id, rank))


@router.get("/{rank}/report", response_model=FeedReport, responses=_OF_RANK)
def read_report(request: Request, store: StoreHere, design_id: DesignId, rank: Rank) -> Response:
    """Give the feed-impedance report of one candidate."""
    return answer_stored(request, designs.report(store, design_id, rank))


@router.get(
    "/{rank}/report.csv",
    response_class=Response,
    responses=_OF_RANK
    | {
        200: {
            "description": "One line a point, then one a figure of voltages, exposure and "
            "hanging: " + ", ".join(csv_table.FEED_COLUMNS),
            "content": {"text/csv": {"schema": {"type": "string"}}},
        }
    },
)
def read_report_as_csv(
    request: Request, store: StoreHere, design_id: DesignId, rank: Rank
) -> Response:
    """Give the same report as comma-separated values (RFC 4180)."""
    sheet = csv_table.feed_report_csv(designs.report(store, design_id, rank))
    name = f"feed-impedance-{design_id}-{rank}.csv"
    return answer_tagged(
        request,
        sheet,
        csv_table.MEDIA_TYPE,
        {"Content-Disposition": f'attachment; filename="{name}"'},
    )


@router.get(
    "/{rank}/report.s1p",
    response_class=Response,
    responses=_OF_RANK
    | {
        200: {
            "description": "S11 over frequency on the line side of the transformer: MHz, real "
            "and imaginary part",
            "content": {"text/plain": {"schema": {"type": "string"}}},
        }
    },
)
def read_report_as_touchstone(
    request: Request, store: StoreHere, design_id: DesignId, rank: Rank
) -> Response:
    """Give the sweep and the bands of the same report as a one-port Touchstone 1.1 file."""
    report = designs.report(store, design_id, rank)
    text = touchstone.touchstone(report, designs.get(store, design_id).name)
    name = f"feed-impedance-{design_id}-{rank}.s1p"
    return answer_tagged(
        request,
        text,
        touchstone.MEDIA_TYPE,
        {"Content-Disposition": f'attachment; filename="{name}"'},
    )
