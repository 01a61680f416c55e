"""Designs: submit, list, look at, cancel."""

from __future__ import annotations

from http import HTTPStatus
from typing import Annotated, Final
from urllib.parse import urlencode

from fastapi import APIRouter, Query, Request, Response

from service.api.dependencies import (
    DesignId,
    DoorbellHere,
    IdempotencyKey,
    OwnerHere,
    RequestedDesign,
    StoreHere,
)
from service.api.openapi import REQUEST_BODY
from service.api.problems import responses
from service.api.stored import answer_stored
from service.contracts.progress import Design, DesignSummary, Priority
from service.contracts.quantities import Contract
from service.intake import submit
from service.store import designs, jobs

MOST_PER_PAGE: Final = 100
PER_PAGE: Final = 20

router = APIRouter(prefix="/v1/designs", tags=["designs"])


class DesignList(Contract):
    """One page of the list of designs, newest first."""

    designs: tuple[DesignSummary, ...]
    next_before: str | None


@router.post(
    "",
    status_code=HTTPStatus.ACCEPTED,
    response_model=Design,
    response_description="Accepted and stored; its address is in Location",
    responses=responses(
        HTTPStatus.BAD_REQUEST,
        HTTPStatus.REQUEST_ENTITY_TOO_LARGE,
        HTTPStatus.UNSUPPORTED_MEDIA_TYPE,
        HTTPStatus.UNPROCESSABLE_ENTITY,
        HTTPStatus.SERVICE_UNAVAILABLE,
    ),
    openapi_extra={"requestBody": REQUEST_BODY},
)
def submit_design(
    store: StoreHere,
    doorbell: DoorbellHere,
    owner: OwnerHere,
    design_request: RequestedDesign,
    priority: Annotated[Priority, Query(description="How soon it is wanted")] = "ordinary",
    recompute: Annotated[
        bool, Query(description="Plan anew where a stored result would answer")
    ] = False,
    idempotency_key: IdempotencyKey = None,
) -> Response:
    """Submit a design request; the answer comes before the search."""
    submitted = submit(
        store,
        doorbell,
        design_request,
        idempotency_key,
        owner=owner,
        priority=priority,
        recompute=recompute,
    )
    design = designs.get(store, submitted.design_id)
    return Response(
        design.model_dump_json(),
        HTTPStatus.ACCEPTED,
        {"Location": f"{router.prefix}/{submitted.design_id}"},
        "application/json",
    )


@router.get(
    "",
    response_model=DesignList,
    responses=responses(HTTPStatus.NOT_FOUND, HTTPStatus.UNPROCESSABLE_ENTITY),
)
def list_designs(
    request: Request,
    store: StoreHere,
    limit: Annotated[int, Query(ge=1, le=MOST_PER_PAGE, description="Most to list")] = PER_PAGE,
    before: Annotated[
        str | None, Query(max_length=200, description="next_before of the page before this")
    ] = None,
) -> Response:
    """List designs, newest first; Link tells the address of the next page (RFC 8288)."""
    page = designs.page(store, limit=limit, before=before)
    answer = answer_stored(request, DesignList(designs=page.designs, next_before=page.next_before))
    if page.next_before is not None:
        following = urlencode({"limit": limit, "before": page.next_before})
        answer.headers["Link"] = f'<{router.prefix}?{following}>; rel="next"'
    return answer


@router.get("/{design_id}", response_model=Design, responses=responses(HTTPStatus.NOT_FOUND))
def read_design(request: Request, store: StoreHere, design_id: DesignId) -> Response:
    """Give one design: its request, its progress and, once done, its result."""
    return answer_stored(request, designs.get(store, design_id))


@router.post(
    "/{design_id}/cancel",
    status_code=HTTPStatus.ACCEPTED,
    response_model=Design,
    response_description="Cancelled, or about to be where a worker is at it",
    responses=responses(HTTPStatus.NOT_FOUND),
)
def cancel_design(store: StoreHere, design_id: DesignId) -> Response:
    """Cancel a design that is not done; one that has ended stays as it is."""
    jobs.cancel(store, design_id)
    design = designs.get(store, design_id)
    return Response(design.model_dump_json(), HTTPStatus.ACCEPTED, media_type="application/json")
