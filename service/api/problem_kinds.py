"""Pages that explain each kind of problem, at the address its ``type`` gives."""

from __future__ import annotations

import inspect
from typing import Final

from fastapi import APIRouter, Request
from fastapi.responses import HTMLResponse

from service.api.problems import STATUSES, PathUnknown
from service.errors import SpanwrightError
from service.pages.templating import render

router = APIRouter(prefix="/problems", include_in_schema=False)

_KINDS: Final[dict[str, type[SpanwrightError]]] = {kind.code: kind for kind in STATUSES}


@router.get("/{code}", response_class=HTMLResponse)
def explain(request: Request, code: str) -> HTMLResponse:
    """Explain one kind of problem."""
    kind = _KINDS.get(code)
    if kind is None:
        raise PathUnknown(request.url.path)
    meaning = inspect.cleandoc(kind.__doc__ or "").splitlines()[0]
    page = render(
        "problem_kind.html",
        title=kind.title,
        meaning=meaning,
        status=STATUSES[kind].value,
        phrase=STATUSES[kind].phrase,
        refresh_s=None,
    )
    return HTMLResponse(page)
