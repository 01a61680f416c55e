"""Problems as RFC 9457 has them: the one place that knows status numbers.

A problem is answered as ``application/problem+json``, or as a page of the same words where
a browser asked for a page.
"""

from __future__ import annotations

import logging
import secrets
from collections.abc import Mapping
from dataclasses import asdict
from http import HTTPStatus
from typing import Any, Final

from fastapi import FastAPI, Request, Response
from fastapi.exceptions import RequestValidationError
from fastapi.responses import HTMLResponse
from pydantic import BaseModel, ConfigDict, Field, ValidationError
from pydantic_core import InitErrorDetails
from starlette.exceptions import HTTPException
from starlette.routing import Match
from starlette.types import Scope

from service.contracts.refusals import refusal_of
from service.errors import (
    BatchNotFound,
    BenchBusy,
    BenchMissing,
    BenchTooSlow,
    CandidateNotFound,
    DesignNotFound,
    Fault,
    KeyReused,
    RequestRefused,
    ResultNotReady,
    SchemaMismatch,
    SpanwrightError,
    StoreUnavailable,
)
from service.pages.templating import render

log = logging.getLogger(__name__)

MEDIA_TYPE: Final = "application/problem+json"
RETRY_AFTER_S: Final = 5
#: Addresses for programs; everything else may be asked for by a browser.
_PROGRAM_PATHS: Final = ("/v1/", "/health/", "/openapi.json")
_METHODS: Final = ("GET", "POST", "PUT", "PATCH", "DELETE", "OPTIONS")


class MediaTypeRefused(SpanwrightError):
    """The body is not of a kind that this address takes."""

    code = "media-type-refused"
    title = "This kind of body is not taken here"

    def __init__(self, field: str, given: str, remedy: str) -> None:
        fault = Fault(field, given[:80], "this kind of body is not taken here.", remedy, self.code)
        super().__init__(f"The body's {field} {given[:80]!r} is not taken here.", (fault,))


class PathUnknown(SpanwrightError):
    """Nothing is served at this address."""

    code = "path-unknown"
    title = "Nothing is served here"

    def __init__(self, path: str) -> None:
        fault = Fault(
            "path",
            path[:80],
            "nothing is served at this address.",
            "Check its spelling; /openapi.json describes every address for programs.",
            self.code,
        )
        super().__init__(f"Nothing is served at {path[:80]}.", (fault,))


class MethodRefused(SpanwrightError):
    """The address is served, but not for this method."""

    code = "method-refused"
    title = "This address does not take that method"

    def __init__(self, method: str, allowed: tuple[str, ...]) -> None:
        remedy = f"Use {' or '.join(allowed)}."
        fault = Fault(
            "method", method[:20], "this address does not take this method.", remedy, self.code
        )
        super().__init__(f"This address does not take {method[:20]}. {remedy}", (fault,))


class OriginRefused(SpanwrightError):
    """A page of another site had the browser send this; only pages of this service may."""

    code = "origin-refused"
    title = "Pages of other sites may change nothing here"

    def __init__(self, origin: str) -> None:
        fault = Fault(
            "Origin",
            origin[:80],
            "what changes anything here is taken from this service's own pages only.",
            "Use the form at /new, or send the request by a program, without an Origin.",
            self.code,
        )
        super().__init__("A page of another site had the browser send this.", (fault,))


class TooManyStreams(SpanwrightError):
    """As many streams of events are open as this process may serve."""

    code = "too-many-streams"
    title = "Too many streams are open"

    def __init__(self, most: int) -> None:
        fault = Fault(
            "streams",
            str(most),
            "as many streams of events are open here as may be.",
            "Close one that is not needed, or come back later.",
            self.code,
        )
        super().__init__(f"No more than {most} streams of events may be open here.", (fault,))


class Unexpected(SpanwrightError):
    """The service met a fault of its own; the log has it under the reference given."""

    code = "unexpected"
    title = "The service met a fault of its own"

    def __init__(self, reference: str) -> None:
        super().__init__(f"The fault is in the service's log under the reference {reference}.")


#: The status of each kind of problem, most special first.
STATUSES: Final[Mapping[type[SpanwrightError], HTTPStatus]] = {
    RequestRefused: HTTPStatus.UNPROCESSABLE_ENTITY,
    DesignNotFound: HTTPStatus.NOT_FOUND,
    BatchNotFound: HTTPStatus.NOT_FOUND,
    CandidateNotFound: HTTPStatus.NOT_FOUND,
    PathUnknown: HTTPStatus.NOT_FOUND,
    MethodRefused: HTTPStatus.METHOD_NOT_ALLOWED,
    ResultNotReady: HTTPStatus.CONFLICT,
    MediaTypeRefused: HTTPStatus.UNSUPPORTED_MEDIA_TYPE,
    OriginRefused: HTTPStatus.FORBIDDEN,
    KeyReused: HTTPStatus.UNPROCESSABLE_ENTITY,
    StoreUnavailable: HTTPStatus.SERVICE_UNAVAILABLE,
    SchemaMismatch: HTTPStatus.SERVICE_UNAVAILABLE,
    TooManyStreams: HTTPStatus.SERVICE_UNAVAILABLE,
    BenchBusy: HTTPStatus.SERVICE_UNAVAILABLE,
    BenchTooSlow: HTTPStatus.GATEWAY_TIMEOUT,
    BenchMissing: HTTPStatus.NOT_IMPLEMENTED,
    Unexpected: HTTPStatus.INTERNAL_SERVER_ERROR,
}

#: Faults of a refused request that HTTP has a number of its own for.
_STATUS_OF_FAULT: Final[Mapping[str, HTTPStatus]] = {
    "request-too-large": HTTPStatus.REQUEST_ENTITY_TOO_LARGE,
    "json-invalid": HTTPStatus.BAD_REQUEST,
}


class FaultBody(BaseModel):
    """One thing wrong with one field."""

    model_config = ConfigDict(frozen=True)

    field: str
    value: str
    reason: str
    remedy: str
    code: str


class Problem(BaseModel):
    """A problem document (RFC 9457) with the faults that led to it."""

    model_config = ConfigDict(frozen=True)

    type: str = Field(description="where this kind of problem is explained")
    title: str
    status: int
    detail: str
    instance: str
    faults: tuple[FaultBody, ...]


def problem_of(error: SpanwrightError, path: str) -> Problem:
    """The problem document of an error met at a path."""
    return Problem(
        type=f"/problems/{error.code}",
        title=error.title,
        status=status_of(error),
        detail=error.detail,
        instance=path,
        faults=tuple(FaultBody(**asdict(fault)) for fault in error.faults),
    )


def status_of(error: SpanwrightError) -> HTTPStatus:
    """The status number of an error."""
    for fault in error.faults:
        if isinstance(error, RequestRefused) and fault.code in _STATUS_OF_FAULT:
            return _STATUS_OF_FAULT[fault.code]
    for kind, status in STATUSES.items():
        if isinstance(error, kind):
            return status
    return HTTPStatus.INTERNAL_SERVER_ERROR


def answer_problem(error: SpanwrightError, request: Request) -> Response:
    """The answer to a request that met an error, in the form its sender reads."""
    problem = problem_of(error, request.url.path)
    headers = {"Vary": "Accept"}
    if isinstance(error, MethodRefused):
        headers["Allow"] = ", ".join(allowed_methods(request.app, request.scope))
    if problem.status == HTTPStatus.SERVICE_UNAVAILABLE:
        headers["Retry-After"] = str(RETRY_AFTER_S)
    if _asks_for_page(request):
        page = render("problem.html", problem=problem, refresh_s=None)
        return HTMLResponse(page, problem.status, headers)
    return Response(problem.model_dump_json(), problem.status, headers, MEDIA_TYPE)


def answer_unexpected(error: Exception, request: Request) -> Response:
    """The answer where the service itself is at fault: a reference, and nothing of the inside."""
    reference = secrets.token_hex(4)
    log.error(
        "unexpected fault %s at %s %s",
        reference,
        request.method,
        request.url.path,
        exc_info=error,
    )
    return answer_problem(Unexpected(reference), request)


def allowed_methods(app: FastAPI, scope: Scope) -> tuple[str, ...]:
    """Every method taken at a request's path; whatever answers GET answers HEAD (see Guard)."""
    asked: Scope = {
        "type": "http",
        "path": scope["path"],
        "root_path": scope.get("root_path", ""),
        "headers": [],
    }
    taken = tuple(
        method
        for method in _METHODS
        if any(route.matches({**asked, "method": method})[0] is Match.FULL for route in app.routes)
    )
    return ("GET", "HEAD", *taken[1:]) if taken[:1] == ("GET",) else taken


def install(app: FastAPI) -> None:
    """Have the application answer every refusal as a problem."""

    async def of_ours(request: Request, error: Exception) -> Response:
        if not isinstance(error, SpanwrightError):
            raise error
        if status_of(error) == HTTPStatus.INTERNAL_SERVER_ERROR:
            return answer_unexpected(error, request)
        return answer_problem(error, request)

    async def of_the_framework(request: Request, error: Exception) -> Response:
        return await of_ours(request, _in_our_words(error, request))

    app.add_exception_handler(SpanwrightError, of_ours)
    app.add_exception_handler(RequestValidationError, of_the_framework)
    app.add_exception_handler(HTTPException, of_the_framework)


def responses(*statuses: HTTPStatus) -> dict[int | str, dict[str, Any]]:
    """What the description of an operation says of the problems it can meet."""
    content = {MEDIA_TYPE: {"schema": {"$ref": "#/components/schemas/Problem"}}}
    described: dict[int | str, dict[str, Any]] = {
        status.value: {"description": status.phrase, "content": content} for status in statuses
    }
    described["default"] = {"description": "Any other problem", "content": content}
    return described


def _in_our_words(error: Exception, request: Request) -> SpanwrightError | Exception:
    if isinstance(error, RequestValidationError):
        return _refusal(error)
    if not isinstance(error, HTTPException):
        return error
    if error.status_code == HTTPStatus.NOT_FOUND:
        return PathUnknown(request.url.path)
    if error.status_code == HTTPStatus.METHOD_NOT_ALLOWED:
        return MethodRefused(request.method, allowed_methods(request.app, request.scope))
    return error


def _refusal(error: RequestValidationError) -> RequestRefused:
    """A path, query or header refused by the framework, in the words of the contracts."""
    found = [
        InitErrorDetails(
            type=each["type"],
            loc=tuple(each["loc"][1:]),  # the first says path, query or header
            input=each["input"],
            ctx=each.get("ctx", {}),
        )
        for each in error.errors()
    ]
    return refusal_of(ValidationError.from_exception_data("request", found))


def _asks_for_page(request: Request) -> bool:
    for_programs = request.url.path.startswith(_PROGRAM_PATHS)
    return not for_programs and "text/html" in request.headers.get("accept", "")
