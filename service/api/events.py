"""Live progress as server-sent events (WHATWG HTML, section 9.2).

Every event tells a whole state, so that one told twice, or passed over for a newer one, does no
harm. Its id is the moment of the change; who comes back with it in ``Last-Event-ID`` gets what
changed since, whichever process answers.
"""

from __future__ import annotations

from collections.abc import AsyncIterator, Iterable
from contextlib import AsyncExitStack, suppress
from http import HTTPStatus
from typing import Annotated, Any, Final

from anyio import fail_after, to_thread
from fastapi import APIRouter, Header, Request, Response
from starlette.responses import StreamingResponse
from starlette.types import Message, Receive, Scope, Send

from service.api.change_feed import ChangeFeed, Stream
from service.api.dependencies import BatchId, DesignId, OwnerHere, StoreHere
from service.api.event_start import Start
from service.api.event_wire import MEDIA_TYPE, RETRY, STILL_HERE, Event, Topic
from service.api.problems import responses

#: A stream with nothing to tell says so this often, lest something on the way closes it.
QUIET_S: Final = 15.0
#: A listener that takes nothing for so long is given up.
STALLED_S: Final = 60.0

_HEADERS: Final = {
    "Cache-Control": "no-store",
    # A proxy of the kind that gathers answers must let each event through (nginx reads this).
    "X-Accel-Buffering": "no",
}

router = APIRouter(prefix="/v1", tags=["events"])

LastEventId = Annotated[
    int | None,
    Header(
        alias="Last-Event-ID",
        ge=0,
        le=2**53,
        description="The id of the last event heard: what changed since is told, and no snapshot",
    ),
]


def _described(what: str, end: str) -> dict[int | str, dict[str, Any]]:
    description = (
        f"{what} Each event's id is the moment of the change in µs since 1970, its data JSON: "
        "`snapshot` (Snapshot) begins the telling of what is stored, at the start and where too "
        "much changed at once; `state` (Change) tells where one design stands"
        f"{end} A comment comes every {QUIET_S:.0f} s."
    )
    stream = {"schema": {"type": "string", "description": "Events of WHATWG HTML, section 9.2"}}
    return {HTTPStatus.OK.value: {"description": description, "content": {MEDIA_TYPE: stream}}}


_ENDED: Final[dict[int | str, dict[str, Any]]] = {
    HTTPStatus.NO_CONTENT.value: {"description": "It has ended, and Last-Event-ID knows it"}
}
_PROBLEMS: Final = (HTTPStatus.UNPROCESSABLE_ENTITY, HTTPStatus.SERVICE_UNAVAILABLE)


@router.get(
    "/designs/{design_id}/events",
    response_class=Response,
    responses=_described("Where one design stands.", "; the last is its final one.")
    | _ENDED
    | responses(HTTPStatus.NOT_FOUND, *_PROBLEMS),
)
async def follow_design(
    request: Request,
    store: StoreHere,
    owner: OwnerHere,
    design_id: DesignId,
    last_event_id: LastEventId = None,
) -> Response:
    """Follow one design until it has ended."""
    return await _answer(request, Start(store, owner, Topic("design", design_id)), last_event_id)


@router.get(
    "/batches/{batch_id}/events",
    response_class=Response,
    responses=_described(
        "Where a batch and its designs stand.",
        "; `batch` (Batch) where the whole stands, and the last is its final one.",
    )
    | _ENDED
    | responses(HTTPStatus.NOT_FOUND, *_PROBLEMS),
)
async def follow_batch(
    request: Request,
    store: StoreHere,
    owner: OwnerHere,
    batch_id: BatchId,
    last_event_id: LastEventId = None,
) -> Response:
    """Follow a batch and its designs until the whole has ended."""
    return await _answer(request, Start(store, owner, Topic("batch", batch_id)), last_event_id)


@router.get(
    "/events",
    response_class=Response,
    responses=_described("Where all your designs stand.", "; it does not end by itself.")
    | responses(*_PROBLEMS),
)
async def follow_all(
    request: Request, store: StoreHere, owner: OwnerHere, last_event_id: LastEventId = None
) -> Response:
    """Follow all your designs."""
    return await _answer(request, Start(store, owner, Topic("owner", owner)), last_event_id)


async def _answer(request: Request, start: Start, last_event_id: int | None) -> Response:
    feed: ChangeFeed = request.app.state.change_feed
    async with AsyncExitStack() as opened:
        # Followed before the store is read, so that nothing falls between.
        stream = await opened.enter_async_context(feed.follow(start.topic))
        if last_event_id is None:
            first: list[Event] | None = await to_thread.run_sync(start.standing)
        else:
            first = await to_thread.run_sync(start.since, last_event_id)
        if first is None:
            # The one answer after which a browser does not come back (section 9.2.3).
            return Response(status_code=HTTPStatus.NO_CONTENT)
        if request.scope.get("asked_method") == "HEAD":
            return Response(headers=_HEADERS, media_type=MEDIA_TYPE)
        return _EventStream(start, stream, first, opened.pop_all())


class _EventStream(StreamingResponse):
    """An answer that goes on until what it follows has ended, or its listener has."""

    media_type = MEDIA_TYPE

    def __init__(
        self, start: Start, stream: Stream, first: list[Event], opened: AsyncExitStack
    ) -> None:
        super().__init__(self._pieces(), headers=_HEADERS)
        self._start, self._stream, self._first, self._opened = start, stream, first, opened

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Tell, and leave the feed at the end, however it comes."""
        async with self._opened:
            await super().__call__(scope, receive, send)

    async def stream_response(self, send: Send) -> None:
        """Send piece by piece, as long as somebody takes them."""

        async def patient_send(message: Message) -> None:
            with fail_after(STALLED_S):
                await send(message)

        # The server closes what is left open; a listener who still lives comes back.
        with suppress(TimeoutError):
            await super().stream_response(patient_send)

    async def _pieces(self) -> AsyncIterator[bytes]:
        events = self._first
        self._stream.has_told(events)
        yield RETRY + _encoded(events)
        while not any(event.ends(self._start.topic) for event in events):
            events = await self._stream.take(QUIET_S)
            if self._stream.closed:
                return
            if self._stream.overrun:
                self._stream.begin_again()
                events = await to_thread.run_sync(self._start.standing)
                self._stream.has_told(events)
            yield _encoded(events) or STILL_HERE


def _encoded(events: Iterable[Event]) -> bytes:
    return b"".join(event.encoded() for event in events)
