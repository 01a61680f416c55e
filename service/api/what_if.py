"""What if: one wire moved by hand, answered at once and not stored."""

from __future__ import annotations

from http import HTTPStatus
from typing import Any, Final

from fastapi import APIRouter, Request

from service.api.dependencies import RequestedWhatIf
from service.api.problems import responses
from service.bench import Bench
from service.contracts.what_if import WhatIf
from service.errors import BenchMissing

_BODY: Final[dict[str, Any]] = {
    "required": True,
    "content": {
        "application/json": {"schema": {"$ref": "#/components/schemas/AskedWhatIfRequest"}}
    },
}

router = APIRouter(prefix="/v1/what-if", tags=["what-if"])


@router.post(
    "",
    response_description="How the wire would serve each band; nothing is stored",
    responses=responses(
        HTTPStatus.BAD_REQUEST,
        HTTPStatus.REQUEST_ENTITY_TOO_LARGE,
        HTTPStatus.UNSUPPORTED_MEDIA_TYPE,
        HTTPStatus.UNPROCESSABLE_ENTITY,
        HTTPStatus.NOT_IMPLEMENTED,
        HTTPStatus.SERVICE_UNAVAILABLE,
        HTTPStatus.GATEWAY_TIMEOUT,
    ),
    openapi_extra={"requestBody": _BODY},
)
def try_wire(request: Request, asked: RequestedWhatIf) -> WhatIf:
    """Tell how one wire would serve the bands, without a search."""
    bench: Bench | None = request.app.state.bench
    if bench is None:
        raise BenchMissing
    return bench.try_wire(asked)
