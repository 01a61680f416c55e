"""Batches: submit, list, look at as a whole and line by line, take away, cancel, run again."""

from __future__ import annotations

from http import HTTPStatus
from typing import Annotated, Any, Final, Literal
from urllib.parse import urlencode

from fastapi import APIRouter, Query, Request, Response
from fastapi.responses import StreamingResponse

from service.api.batch_body import RequestedBatch
from service.api.dependencies import BatchId, DoorbellHere, IdempotencyKey, OwnerHere, StoreHere
from service.api.openapi import BATCH_BODY
from service.api.problems import responses
from service.api.stored import answer_stored
from service.contracts.batch import Batch, BatchItem
from service.contracts.progress import State
from service.contracts.quantities import Contract
from service.exports import batch_results, csv_table
from service.intake import rerun_batch, submit_batch
from service.store import batches

MOST_PER_PAGE: Final = 100
PER_PAGE: Final = 20
MOST_ITEMS_PER_PAGE: Final = 500
ITEMS_PER_PAGE: Final = 100

router = APIRouter(prefix="/v1/batches", tags=["batches"])


class BatchList(Contract):
    """One page of the list of batches, newest first."""

    batches: tuple[Batch, ...]
    next_before: str | None


class BatchItemList(Contract):
    """One page of the designs of a batch, by line."""

    designs: tuple[BatchItem, ...]
    next_after_line: int | None


@router.post(
    "",
    status_code=HTTPStatus.ACCEPTED,
    response_model=Batch,
    response_description="Accepted and stored, all of it; its address is in Location",
    responses=responses(
        HTTPStatus.BAD_REQUEST,
        HTTPStatus.REQUEST_ENTITY_TOO_LARGE,
        HTTPStatus.UNSUPPORTED_MEDIA_TYPE,
        HTTPStatus.UNPROCESSABLE_ENTITY,
        HTTPStatus.SERVICE_UNAVAILABLE,
    ),
    openapi_extra={"requestBody": BATCH_BODY},
)
def submit_a_batch(
    store: StoreHere,
    doorbell: DoorbellHere,
    owner: OwnerHere,
    requested: RequestedBatch,
    idempotency_key: IdempotencyKey = None,
) -> Response:
    """Submit up to 5,000 design requests at once; they are accepted all or none."""
    submitted = submit_batch(store, doorbell, requested, idempotency_key, owner=owner)
    return _accepted(batches.get(store, submitted.batch_id, owner))


@router.get(
    "",
    response_model=BatchList,
    responses=responses(HTTPStatus.NOT_FOUND, HTTPStatus.UNPROCESSABLE_ENTITY),
)
def list_batches(
    request: Request,
    store: StoreHere,
    owner: OwnerHere,
    limit: Annotated[int, Query(ge=1, le=MOST_PER_PAGE, description="Most to list")] = PER_PAGE,
    before: Annotated[
        str | None, Query(max_length=200, description="next_before of the page before this")
    ] = None,
) -> Response:
    """List batches, newest first; Link tells the address of the next page (RFC 8288)."""
    page = batches.page(store, owner=owner, limit=limit, before=before)
    answer = answer_stored(request, BatchList(batches=page.batches, next_before=page.next_before))
    if page.next_before is not None:
        _link_next(answer, router.prefix, {"limit": limit, "before": page.next_before})
    return answer


@router.get("/{batch_id}", response_model=Batch, responses=responses(HTTPStatus.NOT_FOUND))
def read_batch(request: Request, store: StoreHere, owner: OwnerHere, batch_id: BatchId) -> Response:
    """Give one batch: how far it is, and how many of its designs are in each state."""
    return answer_stored(request, batches.get(store, batch_id, owner))


@router.get(
    "/{batch_id}/designs",
    response_model=BatchItemList,
    responses=responses(HTTPStatus.NOT_FOUND, HTTPStatus.UNPROCESSABLE_ENTITY),
)
def list_designs_of_batch(
    request: Request,
    store: StoreHere,
    owner: OwnerHere,
    batch_id: BatchId,
    state: Annotated[State | None, Query(description="Only those in this state")] = None,
    limit: Annotated[
        int, Query(ge=1, le=MOST_ITEMS_PER_PAGE, description="Most to list")
    ] = ITEMS_PER_PAGE,
    after_line: Annotated[
        int, Query(ge=0, le=2**31 - 1, description="next_after_line of the page before this")
    ] = 0,
) -> Response:
    """List the designs of a batch by line, all or those in one state, with where each stands."""
    batches.get(store, batch_id, owner)  # refuses what is not this owner's
    page = batches.items(store, batch_id, state=state, limit=limit, after_line=after_line)
    listed = BatchItemList(designs=page.items, next_after_line=page.next_after_line)
    answer = answer_stored(request, listed)
    if page.next_after_line is not None:
        following: dict[str, object] = {"limit": limit, "after_line": page.next_after_line}
        if state is not None:
            following["state"] = state
        _link_next(answer, f"{router.prefix}/{batch_id}/designs", following)
    return answer


@router.get(
    "/{batch_id}/results",
    response_class=Response,
    responses=responses(HTTPStatus.NOT_FOUND)
    | {
        200: {
            "description": "One design a line by its line in the batch: what the list of designs "
            "tells of it and its result, or null while there is none",
            "content": {batch_results.LINES_MEDIA_TYPE: {"schema": {"type": "string"}}},
        }
    },
)
def read_results(store: StoreHere, owner: OwnerHere, batch_id: BatchId) -> Response:
    """Give the results of a whole batch as lines of JSON, as they stand now."""
    batches.get(store, batch_id, owner)  # refuses before the answer has begun
    lines = batch_results.result_lines(batches.results(store, batch_id))
    return StreamingResponse(lines, media_type=batch_results.LINES_MEDIA_TYPE)


@router.get(
    "/{batch_id}/results.csv",
    response_class=Response,
    responses=responses(HTTPStatus.NOT_FOUND)
    | {
        200: {
            "description": "One candidate a row, and one row for each design that has none: "
            + ", ".join(batch_results.RESULT_COLUMNS),
            "content": {"text/csv": {"schema": {"type": "string"}}},
        }
    },
)
def read_results_as_csv(store: StoreHere, owner: OwnerHere, batch_id: BatchId) -> Response:
    """Give the candidates of a whole batch as comma-separated values (RFC 4180)."""
    batches.get(store, batch_id, owner)  # refuses before the answer has begun
    rows = batch_results.result_table(batches.results(store, batch_id))
    name = f"candidates-{batch_id}.csv"
    return StreamingResponse(
        rows,
        media_type=csv_table.MEDIA_TYPE,
        headers={"Content-Disposition": f'attachment; filename="{name}"'},
    )


@router.post(
    "/{batch_id}/cancel",
    status_code=HTTPStatus.ACCEPTED,
    response_model=Batch,
    response_description="What waited is cancelled; what runs is about to be",
    responses=responses(HTTPStatus.NOT_FOUND),
)
def cancel_batch(store: StoreHere, owner: OwnerHere, batch_id: BatchId) -> Response:
    """Cancel what has not ended of a batch; designs that have ended stay as they are."""
    batches.get(store, batch_id, owner)
    batches.cancel(store, batch_id)
    return _accepted(batches.get(store, batch_id, owner))


@router.post(
    "/{batch_id}/rerun",
    status_code=HTTPStatus.ACCEPTED,
    response_model=Batch,
    response_description="It waits again; the address of what runs is in Location",
    responses=responses(HTTPStatus.NOT_FOUND, HTTPStatus.UNPROCESSABLE_ENTITY),
)
def run_batch_again(
    store: StoreHere,
    doorbell: DoorbellHere,
    owner: OwnerHere,
    batch_id: BatchId,
    part: Annotated[
        Literal["failed", "all"],
        Query(
            description="failed: what failed or was cancelled, in the batch itself; "
            "all: everything planned anew, as a new batch"
        ),
    ] = "failed",
    idempotency_key: IdempotencyKey = None,
) -> Response:
    """Run a batch again, all of it or what failed or was cancelled."""
    batches.get(store, batch_id, owner)
    running = rerun_batch(
        store, doorbell, batch_id, everything=part == "all", idempotency_key=idempotency_key
    )
    return _accepted(batches.get(store, running, owner))


def _accepted(batch: Batch) -> Response:
    return Response(
        batch.model_dump_json(),
        HTTPStatus.ACCEPTED,
        {"Location": f"{router.prefix}/{batch.id}"},
        "application/json",
    )


def _link_next(answer: Response, path: str, query: dict[str, Any]) -> None:
    answer.headers["Link"] = f'<{path}?{urlencode(query)}>; rel="next"'
