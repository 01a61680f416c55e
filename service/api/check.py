"""A design request checked without being submitted."""

from __future__ import annotations

from http import HTTPStatus

from fastapi import APIRouter

from service.api.dependencies import RequestedDesign
from service.api.openapi import REQUEST_BODY
from service.api.problems import responses
from service.contracts.estimate import SearchEstimate, estimate_search

router = APIRouter(prefix="/v1/designs/check", tags=["designs"])


@router.post(
    "",
    response_model=SearchEstimate,
    response_description="Nothing is wrong with the request; so large its search will be",
    responses=responses(
        HTTPStatus.BAD_REQUEST,
        HTTPStatus.REQUEST_ENTITY_TOO_LARGE,
        HTTPStatus.UNSUPPORTED_MEDIA_TYPE,
        HTTPStatus.UNPROCESSABLE_ENTITY,
    ),
    openapi_extra={"requestBody": REQUEST_BODY},
)
def check_design(design_request: RequestedDesign) -> SearchEstimate:
    """Check a design request by the contract, and tell how large its search would be."""
    return estimate_search(design_request)
