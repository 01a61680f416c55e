"""The pages: the same contract objects as the API, set for reading; nothing is computed."""

from __future__ import annotations

from typing import Final

from fastapi import APIRouter
from fastapi.responses import HTMLResponse
from starlette.staticfiles import StaticFiles

from service.contracts.candidate import Candidate
from service.contracts.progress import Design
from service.contracts.report import FeedReport
from service.pages import batches, comparison, listing, what_if
from service.pages.arrangement import (
    exposure_table,
    has_line,
    pictures_of,
    sets_table,
    steadiness_table,
)
from service.pages.form import routes as form
from service.pages.stored import StoreHere
from service.pages.templating import STATIC, render
from service.store import designs, filing

#: Seconds after which a page of a design that is not done asks again, without scripts.
REFRESH_S: Final = 3
#: Every this many points of the sweep make a line in the table behind its plot.
SWEEP_STRIDE: Final = 6
#: Every this many points of a band make a line in the table behind its SWR.
GRID_STRIDE: Final = 2
#: Every this many points of a band make a line in the table behind the Smith chart.
REFLECTION_STRIDE: Final = 5

router = APIRouter(default_response_class=HTMLResponse, include_in_schema=False)
for _each in (listing, batches, form, comparison, what_if):
    router.include_router(_each.router)
static_files = StaticFiles(directory=STATIC)


@router.get("/designs/{design_id}")
def design_page(store: StoreHere, design_id: str) -> HTMLResponse:
    """Show one design: request, progress, and once done its ranking and best candidate."""
    design = designs.get(store, design_id)
    best = design.result.candidates[0] if design.result and design.result.candidates else None
    report = designs.report(store, design_id, best.rank) if best else None
    waiting = design.state in {"queued", "running"}
    return HTMLResponse(
        render(
            "design.html",
            design=design,
            refresh_s=REFRESH_S if waiting else None,
            own_page=False,
            filed=filing.filed(store, design_id),
            **_beyond(design),
            **_sheet(design, best, report),
        )
    )


@router.get("/designs/{design_id}/candidates/{rank}")
def candidate_page(store: StoreHere, design_id: str, rank: int) -> HTMLResponse:
    """Show one candidate's feed-impedance report."""
    design = designs.get(store, design_id)
    candidate = designs.candidate(store, design_id, rank)
    report = designs.report(store, design_id, rank)
    return HTMLResponse(
        render(
            "candidate.html",
            design=design,
            refresh_s=None,
            own_page=True,
            **_sheet(design, candidate, report),
        )
    )


def _beyond(design: Design) -> dict[str, object]:
    """What the page of a design shows beside its candidates: sets and the trade-off."""
    result = design.result
    if result is None or not result.candidates:
        return {}
    on_front = {each.rank for each in result.trade_off}
    return {
        "sets": sets_table(result),
        "off_front": [str(each.rank) for each in result.candidates if each.rank not in on_front],
        "with_loss": any(each.loss_db is not None for each in result.trade_off),
        "with_cost": any(each.cost is not None for each in result.trade_off),
    }


def _sheet(
    design: Design, candidate: Candidate | None, report: FeedReport | None
) -> dict[str, object]:
    """What the sheet of one candidate shows: its bands beside their edges and their report."""
    if candidate is None or report is None:
        return {"candidate": None}
    held = candidate.steadiness
    return {
        "candidate": candidate,
        "report": report,
        "asked": design.request,
        "at_transmitter": design.request.feed.reference_point == "transmitter",
        "has_line": has_line(report),
        "matched": any(band.matching for band in report.bands),
        "stressed": any(band.stress for band in report.bands),
        "with_ends": any(band.stress and band.stress.ends_peak_v for band in report.bands),
        "exposures": exposure_table(report),
        "steadiness": None if held is None else steadiness_table(candidate, held),
        "bands": tuple(zip(candidate.bands, design.request.bands, report.bands, strict=True)),
        "sweep": report.sweep[::SWEEP_STRIDE],
        "sweep_stride": SWEEP_STRIDE,
        "pictures": pictures_of(report),
        "grid_stride": GRID_STRIDE,
        "reflection_stride": REFLECTION_STRIDE,
        "target_ohm": report.reference_ohm * report.transformer_ratio,
    }
