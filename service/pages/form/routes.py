"""The request form: shown, checked, and submitted by the one intake."""

from __future__ import annotations

import secrets
from http import HTTPStatus
from typing import Annotated, Any, Final

from fastapi import APIRouter, Depends, Query, Request, Response
from fastapi.responses import HTMLResponse, JSONResponse, RedirectResponse

from service.contracts.band_lists import BAND_LISTS
from service.doorbell import Doorbell
from service.intake import submit
from service.pages.form import view
from service.pages.form.entries import with_another_row, written
from service.pages.form.filling import BLANK, filled, with_list_shown
from service.pages.form.judging import Judged, judge
from service.pages.form.view import FormView
from service.pages.posted import Posted
from service.pages.stored import StoreHere
from service.pages.templating import render
from service.store import designs

_KEY_BYTES: Final = 16
#: Buttons that only add an empty row, and to what.
_ROW_ADDED: Final = {"add-band": "own", "add-conductor": "wire"}

router = APIRouter(default_response_class=HTMLResponse, include_in_schema=False)


def doorbell_of(request: Request) -> Doorbell:
    """The bell that tells the workers of new work."""
    doorbell: Doorbell = request.app.state.doorbell
    return doorbell


DoorbellHere = Annotated[Doorbell, Depends(doorbell_of)]


@router.get("/new")
def empty_form(
    store: StoreHere, start: Annotated[str | None, Query(alias="from", max_length=200)] = None
) -> HTMLResponse:
    """Show the form: empty, or filled with a stored design's request."""
    entries = dict(BLANK) if start is None else filled(designs.get(store, start).request)
    return _page({**entries, "key": secrets.token_hex(_KEY_BYTES)}, None)


@router.post("/new")
def posted_form(store: StoreHere, doorbell: DoorbellHere, entries: Posted) -> Response:
    """Do what the button asks: change the form, check it, or submit it."""
    asked = written(entries, "do")
    if asked == "show-list":
        return _page(with_list_shown(entries), None)
    entries = _as_shown(entries)
    if asked in _ROW_ADDED:
        return _page(with_another_row(entries, _ROW_ADDED[asked]), None)
    judged = judge(entries)
    if judged.request is None or asked != "submit":
        return _page(entries, judged)
    # The content is part of the key: the same form sent twice is one design, and a form that
    # was gone back to and changed is another.
    key = f"form-{written(entries, 'key')[:64]}-{judged.request.content_hash()}"
    submitted = submit(store, doorbell, judged.request, key)
    return RedirectResponse(f"/designs/{submitted.design_id}", HTTPStatus.SEE_OTHER)


@router.post("/new/check", response_class=JSONResponse)
def checked_form(entries: Posted) -> dict[str, Any]:
    """Judge a form as it is being filled in: what its page would say, by field."""
    form = FormView.of(_as_shown(entries), judge(_as_shown(entries)))
    faults = [{"field": field, "said": form.said(fault)} for field, fault in form.faults]
    return {"faults": faults, "shown": form.shown, "standing": _standing(form.judged)}


def _as_shown(entries: dict[str, str]) -> dict[str, str]:
    """The form with the list whose bands it shows, whatever list is chosen for the next time."""
    shown = written(entries, "shown-list")
    return {**entries, "list": shown} if shown in BAND_LISTS else entries


def _standing(judged: Judged | None) -> str:
    if judged is None:
        return ""
    if judged.estimate is not None:
        return view.estimate_in_words(judged.estimate)
    count = len(judged.faults)
    return (
        "One thing is missing or wrong." if count == 1 else f"{count} things are missing or wrong."
    )


def _page(entries: dict[str, str], judged: Judged | None) -> HTMLResponse:
    refused = judged is not None and judged.request is None
    page = render(
        "new.html",
        form=FormView.of(entries, judged),
        standing=_standing(judged),
        refused=refused,
        choices=view,
        refresh_s=None,
    )
    return HTMLResponse(page, HTTPStatus.UNPROCESSABLE_ENTITY if refused else HTTPStatus.OK)
