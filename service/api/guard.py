"""What stands around every answer: its headers, HEAD, and the last resort."""

from __future__ import annotations

from typing import Final
from urllib.parse import urlsplit

from starlette.datastructures import MutableHeaders
from starlette.requests import Request
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.api.problems import OriginRefused, answer_problem, answer_unexpected

#: Own files only: no script or style in the page itself, no frame, no other host.
_CONTENT_SECURITY_POLICY: Final = "; ".join(
    (
        "default-src 'none'",
        "base-uri 'none'",
        "connect-src 'self'",
        "font-src 'self'",
        "form-action 'self'",
        "frame-ancestors 'none'",
        "img-src 'self'",
        "script-src 'self'",
        "style-src 'self'",
    )
)

_ALWAYS: Final = {
    "Content-Security-Policy": _CONTENT_SECURITY_POLICY,
    "X-Content-Type-Options": "nosniff",
    "X-Frame-Options": "DENY",
    # Nothing is told to other hosts; our own forms must say where they come from.
    "Referrer-Policy": "same-origin",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
    "Permissions-Policy": "camera=(), geolocation=(), microphone=()",
}

#: Files of ours are named with their content's hash, so that they never change.
_KEEP: Final = "public, max-age=31536000, immutable"
_ASK_AGAIN: Final = "no-cache"


_CHANGES_NOTHING: Final = frozenset({"GET", "HEAD", "OPTIONS"})


class Guard:
    """Adds headers to every answer, answers HEAD as GET, and never leaks a trace.

    Refuses what a page of another site has a browser send, so that nobody's browser submits or
    cancels anything unasked.

    Parameters
    ----------
    app : ASGIApp
        What is guarded.
    """

    def __init__(self, app: ASGIApp) -> None:
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one request."""
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        # The server leaves the body out of an answer to HEAD; the routes need not know of it.
        inner: Scope = {**scope, "method": "GET"} if scope["method"] == "HEAD" else scope
        started = False

        async def guarded_send(message: Message) -> None:
            nonlocal started
            if message["type"] == "http.response.start":
                started = True
                _add_headers(message, scope)
            await send(message)

        try:
            if _comes_from_elsewhere(Request(scope)):
                refused = OriginRefused(Request(scope).headers.get("origin", ""))
                await answer_problem(refused, Request(scope))(inner, receive, guarded_send)
                return
            await self._app(inner, receive, guarded_send)
        except Exception as error:
            if started:
                raise
            answer = answer_unexpected(error, Request(inner))
            await answer(inner, receive, guarded_send)


def _comes_from_elsewhere(request: Request) -> bool:
    """Whether a browser says that a page of another origin sent what may change something."""
    if request.method in _CHANGES_NOTHING:
        return False
    site = request.headers.get("sec-fetch-site")
    if site is not None:
        return site not in {"same-origin", "none"}
    # Browsers tell the site only over trusted connections, programs neither.
    origin = request.headers.get("origin")
    return origin is not None and urlsplit(origin).netloc != request.headers.get("host")


def _add_headers(message: Message, scope: Scope) -> None:
    headers = MutableHeaders(scope=message)
    for name, value in _ALWAYS.items():
        headers.setdefault(name, value)
    named_by_content = scope["path"].startswith("/static/") and scope["query_string"]
    headers.setdefault("Cache-Control", _KEEP if named_by_content else _ASK_AGAIN)
