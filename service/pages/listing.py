"""The list of designs: found by name, state and label, and filed away."""

from __future__ import annotations

from http import HTTPStatus
from typing import Annotated, Final, get_args
from urllib.parse import urlencode

from fastapi import APIRouter, Depends, Query, Request
from fastapi.responses import HTMLResponse, RedirectResponse
from pydantic import ValidationError

from service.contracts.candidate import Candidate
from service.contracts.filing import ListWish, parse_labels
from service.contracts.progress import DesignSummary, State
from service.contracts.refusals import refusal_of
from service.pages.form.entries import written
from service.pages.posted import Posted
from service.pages.stored import StoreHere
from service.pages.templating import render
from service.store import designs, filing, jobs
from service.store.session import Store

PER_PAGE: Final = 20
_MOST_LABELS_OFFERED: Final = 200

router = APIRouter(default_response_class=HTMLResponse, include_in_schema=False)


def wish_of(request: Request) -> ListWish:
    """What the address asks the list to show; what is left empty asks for nothing.

    Raises
    ------
    RequestRefused
        If it asks for a state or an order that there is not.
    """
    given = {
        name: value
        for name, value in request.query_params.items()
        if value and name in ListWish.model_fields
    }
    try:
        return ListWish.model_validate(given)
    except ValidationError as error:
        raise refusal_of(error) from error


WishHere = Annotated[ListWish, Depends(wish_of)]


@router.get("/")
def list_page(
    request: Request, store: StoreHere, wish: WishHere, after: Annotated[str | None, Query()] = None
) -> HTMLResponse:
    """Show the stored designs as wished, with the best candidate of each."""
    page = filing.list_page(store, wish, limit=PER_PAGE, after=after)
    asked = {
        name: "yes" if value is True else value
        for name, value in wish.model_dump(exclude_defaults=True).items()
    }
    return HTMLResponse(
        render(
            "designs.html",
            lines=[(each, _best_of(store, each.summary)) for each in page.designs],
            wish=wish,
            states=get_args(State),
            labels=filing.labels_in_use(store, limit=_MOST_LABELS_OFFERED),
            narrowed=any(name != "sort" for name in asked),
            first="/" + ("?" + urlencode(asked) if asked else ""),
            following=urlencode({**asked, "after": page.next_after}) if page.next_after else "",
            is_first=after is None,
            address=str(request.base_url).rstrip("/"),
            refresh_s=None,
        )
    )


@router.post("/designs/{design_id}/labels")
def label_design(store: StoreHere, design_id: str, entries: Posted) -> RedirectResponse:
    """Put the labels written on a design."""
    filing.put_labels(store, design_id, parse_labels(written(entries, "labels")))
    return RedirectResponse(f"/designs/{design_id}#filing", HTTPStatus.SEE_OTHER)


@router.post("/designs/{design_id}/archive")
def archive_design(store: StoreHere, design_id: str, entries: Posted) -> RedirectResponse:
    """Put a design away, or bring it back."""
    filing.archive(store, design_id, away=written(entries, "away") == "yes")
    return RedirectResponse(f"/designs/{design_id}#filing", HTTPStatus.SEE_OTHER)


@router.post("/designs/{design_id}/cancel")
def cancel_design(store: StoreHere, design_id: str, _entries: Posted) -> RedirectResponse:
    """Cancel a design that is not done."""
    jobs.cancel(store, design_id)
    return RedirectResponse(f"/designs/{design_id}", HTTPStatus.SEE_OTHER)


def _best_of(store: Store, summary: DesignSummary) -> Candidate | None:
    """The first candidate of a design that is done and found any."""
    return designs.candidate(store, summary.id, 1) if summary.state == "done" else None
