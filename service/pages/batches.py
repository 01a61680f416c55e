"""Batches on pages: the list of them, and one with every design in it."""

from __future__ import annotations

from http import HTTPStatus
from typing import Annotated, Final, get_args
from urllib.parse import urlencode

from fastapi import APIRouter, Query
from fastapi.responses import HTMLResponse, RedirectResponse

from service.contracts.progress import LOCAL_OWNER, State
from service.pages.posted import Posted
from service.pages.stored import StoreHere
from service.pages.templating import render
from service.store import batches

PER_PAGE: Final = 20
ITEMS_PER_PAGE: Final = 100
#: Seconds after which the page of a batch that is not done asks again, without scripts.
REFRESH_S: Final = 5

router = APIRouter(prefix="/batches", default_response_class=HTMLResponse, include_in_schema=False)


@router.get("")
def batches_page(store: StoreHere, before: Annotated[str | None, Query()] = None) -> HTMLResponse:
    """Show the batches, newest first, with how far each has come."""
    page = batches.page(store, owner=LOCAL_OWNER, limit=PER_PAGE, before=before)
    return HTMLResponse(render("batches.html", page=page, is_first=before is None, refresh_s=None))


@router.get("/{batch_id}")
def batch_page(
    store: StoreHere,
    batch_id: str,
    state: Annotated[State | None, Query()] = None,
    after_line: Annotated[int, Query(ge=0, le=1_000_000)] = 0,
) -> HTMLResponse:
    """Show one batch: how far it has come, and its designs by line."""
    batch = batches.get(store, batch_id, LOCAL_OWNER)
    page = batches.items(store, batch_id, state=state, limit=ITEMS_PER_PAGE, after_line=after_line)
    kept = {} if state is None else {"state": state}
    following = ""
    if page.next_after_line is not None:
        following = urlencode({**kept, "after_line": page.next_after_line})
    return HTMLResponse(
        render(
            "batch.html",
            batch=batch,
            items=page.items,
            shown_state=state,
            states=get_args(State),
            first=f"/batches/{batch_id}" + ("?" + urlencode(kept) if kept else ""),
            is_first=after_line == 0,
            following=following,
            refresh_s=REFRESH_S if batch.finished_at is None else None,
        )
    )


@router.post("/{batch_id}/cancel")
def cancel_batch(store: StoreHere, batch_id: str, _entries: Posted) -> RedirectResponse:
    """Cancel what has not ended of a batch."""
    batches.cancel(store, batch_id)
    return RedirectResponse(f"/batches/{batch_id}", HTTPStatus.SEE_OTHER)
