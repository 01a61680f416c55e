"""What routes are given: the store, the doorbell, a request read from the body."""

from __future__ import annotations

from typing import Annotated, Final

from fastapi import Depends, Header, Path, Request

from service.api.problems import MediaTypeRefused
from service.contracts.progress import LOCAL_OWNER
from service.contracts.request import (
    LARGEST_REQUEST_BYTES,
    MOST_CANDIDATES,
    DesignRequest,
    parse_request,
    refuse_too_long,
)
from service.contracts.what_if import WhatIfRequest, parse_what_if
from service.doorbell import Doorbell
from service.store.session import Store

_JSON: Final = "application/json"
LONGEST_KEY: Final = 200


def store_of(request: Request) -> Store:
    """The store that the application opened."""
    store: Store = request.app.state.store
    return store


def doorbell_of(request: Request) -> Doorbell:
    """The bell that tells the workers of new work."""
    doorbell: Doorbell = request.app.state.doorbell
    return doorbell


async def design_request(request: Request) -> DesignRequest:
    """Read a design request from the body, by the contract that every way in shares.

    Raises
    ------
    MediaTypeRefused
        If the body is not plain JSON.
    RequestRefused
        If it is too large, malformed, or breaks the contract.
    """
    return parse_request(await _json_body(request))


async def what_if_request(request: Request) -> WhatIfRequest:
    """Read a what-if from the body; it raises as `design_request` does."""
    body = await _json_body(request)
    refuse_too_long(body)
    return parse_what_if(body)


async def _json_body(request: Request) -> bytes:
    """The body, told to be plain JSON, as far as it may be long and a little further."""
    media_type = request.headers.get("content-type", "").partition(";")[0].strip().lower()
    if media_type != _JSON:
        raise MediaTypeRefused("Content-Type", media_type, f"Send the request as {_JSON}.")
    refuse_coded_body(request)
    body = bytearray()
    async for part in request.stream():
        body += part
        if len(body) > LARGEST_REQUEST_BYTES:
            break  # the contract refuses it by what has come so far
    return bytes(body)


def refuse_coded_body(request: Request) -> None:
    """Refuse a body that is compressed.

    Raises
    ------
    MediaTypeRefused
    """
    coding = request.headers.get("content-encoding", "identity")
    if coding != "identity":
        raise MediaTypeRefused("Content-Encoding", coding, "Send the request uncompressed.")


def owner_of() -> str:
    """Whose work it is: this release knows only one owner."""
    return LOCAL_OWNER


StoreHere = Annotated[Store, Depends(store_of)]
DoorbellHere = Annotated[Doorbell, Depends(doorbell_of)]
OwnerHere = Annotated[str, Depends(owner_of)]
RequestedDesign = Annotated[DesignRequest, Depends(design_request)]
RequestedWhatIf = Annotated[WhatIfRequest, Depends(what_if_request)]
DesignId = Annotated[str, Path(description="Identifier of the design")]
BatchId = Annotated[str, Path(description="Identifier of the batch")]
Rank = Annotated[
    int, Path(ge=1, le=MOST_CANDIDATES, description="Rank of the candidate, 1 is the best")
]
IdempotencyKey = Annotated[
    str | None,
    Header(
        alias="Idempotency-Key",
        min_length=1,
        max_length=LONGEST_KEY,
        description="A name of the sender's own for what is sent: sent again, it is accepted once.",
    ),
]
