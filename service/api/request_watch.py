"""What is noted of every request: its id, a line in the journal, and its time.

The id comes from the sender's ``X-Request-ID`` or is drawn here, goes back with the answer, and
is carried by every line that is logged meanwhile.
"""

from __future__ import annotations

import logging
import re
import time
import uuid
from http import HTTPStatus
from typing import Final

from starlette.datastructures import Headers, MutableHeaders
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.api.metrics import RequestFigures
from service.journal import bound

_log = logging.getLogger(__name__)

HEADER: Final = "X-Request-ID"
#: An id that may go into logs and headers as it came.
_WELL_FORMED: Final = re.compile(r"[A-Za-z0-9._:-]{1,64}")
#: Asked for by machines, again and again.
_OFTEN: Final = ("/health/", "/metrics", "/static/")
#: Methods told by their name; anybody may send any word.
_METHODS: Final = frozenset({"GET", "HEAD", "POST", "PUT", "PATCH", "DELETE", "OPTIONS"})


class RequestWatch:
    """Notes every request; stands around everything else.

    Parameters
    ----------
    app : ASGIApp
        What answers.
    figures : RequestFigures
        Where it is counted.
    """

    def __init__(self, app: ASGIApp, figures: RequestFigures) -> None:
        self._app = app
        self._figures = figures

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one request."""
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        given = Headers(scope=scope).get(HEADER, "")
        request_id = given if _WELL_FORMED.fullmatch(given) else uuid.uuid4().hex
        began_s = time.perf_counter()
        status, answered_s = HTTPStatus.INTERNAL_SERVER_ERROR.value, 0.0
        # What is inside may take HEAD for GET, and then tells of it only here.
        inner: Scope = {**scope, "asked_method": scope["method"]}

        async def noting_send(message: Message) -> None:
            nonlocal status, answered_s
            if message["type"] == "http.response.start":
                status, answered_s = message["status"], time.perf_counter() - began_s
                MutableHeaders(scope=message)[HEADER] = request_id
            await send(message)

        with bound(request=request_id):
            try:
                await self._app(inner, receive, noting_send)
            finally:
                self._note(inner, status, answered_s or time.perf_counter() - began_s)

    def _note(self, scope: Scope, status: int, answered_s: float) -> None:
        method = scope["asked_method"] if scope["asked_method"] in _METHODS else "other"
        # The route and not the path, of which there are as many as designs.
        route = getattr(scope.get("route"), "path", "other")
        self._figures.answered.labels(method, route, str(status)).inc()
        self._figures.began_s.labels(method, route).observe(answered_s)
        path = scope["path"]
        level = logging.DEBUG if path.startswith(_OFTEN) else logging.INFO
        if status >= HTTPStatus.INTERNAL_SERVER_ERROR:
            level = logging.WARNING
        ids = scope.get("path_params", {})
        named = {"design": ids.get("design_id"), "batch": ids.get("batch_id")}
        _log.log(
            level,
            "%s %s: %d",
            method,
            path,
            status,
            extra={
                "status": status,
                "answered_ms": round(1000.0 * answered_s, 1),
                **{name: str(value) for name, value in named.items() if value is not None},
            },
        )
