"""Plots of one candidate as files of their own, for pages to hold and for taking away."""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

from fastapi import APIRouter, Request, Response

from service.api.dependencies import StoreHere
from service.api.problems import PathUnknown
from service.api.stored import answer_tagged
from service.contracts.candidate import Candidate
from service.contracts.report import FeedReport
from service.plots import current_plot, pattern_plot, smith_plot
from service.store import designs

MEDIA_TYPE: Final = "image/svg+xml"

router = APIRouter(
    prefix="/designs/{design_id}/candidates/{rank}/plots",
    default_response_class=Response,
    include_in_schema=False,
)


@router.get("/smith.svg")
def smith(request: Request, store: StoreHere, design_id: str, rank: int) -> Response:
    """Draw the reflection coefficient over every band."""
    report = designs.report(store, design_id, rank)
    candidate: Candidate = designs.candidate(store, design_id, rank)
    if any(band.centre.reflection_deg is None for band in report.bands):
        raise PathUnknown(request.url.path)
    return answer_tagged(request, smith_plot(report, candidate.bands), MEDIA_TYPE)


@router.get("/current-{band}.svg")
def current(request: Request, store: StoreHere, design_id: str, rank: int, band: int) -> Response:
    """Draw the current along the wire on one band, counted from 1."""
    return _of_band(request, designs.report(store, design_id, rank), band, current_plot)


@router.get("/pattern-{band}.svg")
def pattern(request: Request, store: StoreHere, design_id: str, rank: int, band: int) -> Response:
    """Draw the pattern on one band, counted from 1."""
    return _of_band(request, designs.report(store, design_id, rank), band, pattern_plot)


def _of_band(
    request: Request, report: FeedReport, band: int, draw: Callable[[FeedReport, int], str | None]
) -> Response:
    drawn = draw(report, band - 1) if 1 <= band <= len(report.bands) else None
    if drawn is None:
        raise PathUnknown(request.url.path)
    return answer_tagged(request, drawn, MEDIA_TYPE)
