"""What a page's form posts, read whole and within bounds."""

from __future__ import annotations

from typing import Annotated, Final

from fastapi import Depends, Request

from service.contracts.request import LARGEST_REQUEST_BYTES
from service.errors import Fault, RequestRefused
from service.pages.form.entries import read_entries

_FORM: Final = "application/x-www-form-urlencoded"


async def posted(request: Request) -> dict[str, str]:
    """The entries of the form in the body.

    Raises
    ------
    RequestRefused
        If the body is no form, or too large.
    """
    media_type = request.headers.get("content-type", "").partition(";")[0].strip().lower()
    body = bytearray()
    async for part in request.stream():
        body += part
        if len(body) > LARGEST_REQUEST_BYTES:
            break  # what has come so far is refused already
    if media_type != _FORM:
        raise _unreadable(f"forms are sent as {_FORM}")
    try:
        return read_entries(bytes(body))
    except ValueError as error:
        raise _unreadable(str(error)) from error


Posted = Annotated[dict[str, str], Depends(posted)]


def _unreadable(why: str) -> RequestRefused:
    fault = Fault(
        "form",
        "",
        f"what was sent cannot be read as a page's form: {why}.",
        "Fill in the form on its page, or send the request as JSON to /v1/designs.",
        "form-unreadable",
    )
    return RequestRefused([fault])
