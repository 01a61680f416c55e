"""The body of a batch: one JSON document, or lines of JSON; read to its limit, parsed aside."""

from __future__ import annotations

import io
from typing import Annotated, Final, TypedDict, get_args

from anyio import CapacityLimiter, to_thread
from anyio.lowlevel import RunVar
from fastapi import Depends, Query, Request

from service.api.dependencies import refuse_coded_body
from service.api.problems import MediaTypeRefused
from service.contracts.batch import (
    LARGEST_BATCH_BYTES,
    BatchRequest,
    parse_batch_json,
    parse_batch_lines,
)
from service.contracts.progress import Priority

JSON: Final = "application/json"
LINES: Final = "application/x-ndjson"

#: Batches parsed at a time: they share one core, and the others' answers need it too.
_AT_ONCE: Final = 2
_parsing: Final[RunVar[CapacityLimiter]] = RunVar("batches being parsed")

Name = Annotated[str | None, Query(description="Name of the batch; over one in the body")]
# As text, so that a wrong one is named together with every other fault.
Urgency = Annotated[
    str | None,
    Query(
        description="How soon it is wanted; over what the body says",
        json_schema_extra={"enum": list(get_args(Priority))},
    ),
]
Recompute = Annotated[
    bool | None, Query(description="Plan anew where a stored result would answer")
]


class _Said(TypedDict):
    name: str | None
    priority: str | None
    recompute: bool | None


async def batch_request(
    request: Request, name: Name = None, priority: Urgency = None, recompute: Recompute = None
) -> BatchRequest:
    """Read a batch from the body, by the contract that every way in shares.

    Raises
    ------
    MediaTypeRefused
        If the body is neither JSON nor lines of JSON.
    RequestRefused
        With every fault of every line, or that it is too large.
    """
    media_type = request.headers.get("content-type", "").partition(";")[0].strip().lower()
    if media_type not in (JSON, LINES):
        remedy = f"Send the batch as {JSON} or, one request a line, as {LINES}."
        raise MediaTypeRefused("Content-Type", media_type, remedy)
    refuse_coded_body(request)
    body = await _read(request)

    def parse() -> BatchRequest:
        said: _Said = {"name": name, "priority": priority, "recompute": recompute}
        if media_type == LINES:
            return parse_batch_lines(io.BytesIO(body), **said)
        return parse_batch_json(body, **said)

    # In a thread: parsing thousands of requests takes longer than others should wait.
    return await to_thread.run_sync(parse, limiter=_limiter())


async def _read(request: Request) -> bytes:
    """The body as far as the contract needs it to refuse one that is too large."""
    parts: list[bytes] = []
    size_bytes = 0
    async for part in request.stream():
        size_bytes += len(part)
        # What comes after is let go by: a sender hears no refusal before it has sent all.
        if size_bytes - len(part) <= LARGEST_BATCH_BYTES:
            parts.append(part)
        elif size_bytes > 2 * LARGEST_BATCH_BYTES:
            break
    return b"".join(parts)


def _limiter() -> CapacityLimiter:
    try:
        return _parsing.get()
    except LookupError:
        limiter = CapacityLimiter(_AT_ONCE)
        _parsing.set(limiter)
        return limiter


RequestedBatch = Annotated[BatchRequest, Depends(batch_request)]
