"""The bill of materials of a candidate, in the forms that buyers take."""

from __future__ import annotations

from http import HTTPStatus
from typing import Any, Final

from fastapi import APIRouter, Request, Response

from service.api.dependencies import DesignId, Rank, StoreHere
from service.api.problems import responses
from service.api.stored import answer_stored, answer_tagged
from service.contracts.bill import BillOfMaterials
from service.exports import bill_sheets, csv_table, quotation_request
from service.exports.bill_of_materials import bill_of_materials
from service.store import designs
from service.store.session import Store

router = APIRouter(prefix="/v1/designs/{design_id}/candidates/{rank}", tags=["candidates"])

_OF_RANK: Final = responses(
    HTTPStatus.NOT_FOUND, HTTPStatus.CONFLICT, HTTPStatus.UNPROCESSABLE_ENTITY
)


def _file(media_type: str, description: str) -> dict[int | str, dict[str, Any]]:
    content = {media_type: {"schema": {"type": "string"}}}
    return _OF_RANK | {200: {"description": description, "content": content}}


@router.get("/bill", response_model=BillOfMaterials, responses=_OF_RANK)
def read_bill(request: Request, store: StoreHere, design_id: DesignId, rank: Rank) -> Response:
    """Give the bill of materials: parts, quantities, and what each part must bear."""
    return answer_stored(request, _bill(store, design_id, rank))


@router.get(
    "/bill.csv",
    response_class=Response,
    responses=_file("text/csv", "One row a part: " + ", ".join(bill_sheets.BILL_COLUMNS)),
)
def read_bill_as_csv(
    request: Request, store: StoreHere, design_id: DesignId, rank: Rank
) -> Response:
    """Give the same bill as comma-separated values (RFC 4180)."""
    sheet = bill_sheets.bill_csv(_bill(store, design_id, rank))
    return answer_tagged(request, sheet, csv_table.MEDIA_TYPE, _named(design_id, rank, "csv"))


@router.get(
    "/bill.xlsx",
    response_class=Response,
    responses=_file(bill_sheets.WORKBOOK_MEDIA_TYPE, "A workbook: the bill, and all its ratings"),
)
def read_bill_as_workbook(
    request: Request, store: StoreHere, design_id: DesignId, rank: Rank
) -> Response:
    """Give the same bill as a workbook (ISO/IEC 29500)."""
    workbook = bill_sheets.bill_workbook(_bill(store, design_id, rank))
    return answer_tagged(
        request, workbook, bill_sheets.WORKBOOK_MEDIA_TYPE, _named(design_id, rank, "xlsx")
    )


@router.get(
    "/request-for-quotation.xml",
    response_class=Response,
    responses=_file(quotation_request.MEDIA_TYPE, "A RequestForQuotation of UBL 2.1, unpriced"),
)
def read_quotation_request(
    request: Request, store: StoreHere, design_id: DesignId, rank: Rank
) -> Response:
    """Give the same bill as a request for quotation (OASIS UBL 2.1), for purchasing systems."""
    document = quotation_request.quotation_request(_bill(store, design_id, rank))
    name = _named(design_id, rank, "xml")
    return answer_tagged(request, document, quotation_request.MEDIA_TYPE, name)


def _bill(store: Store, design_id: str, rank: int) -> BillOfMaterials:
    candidate = designs.candidate(store, design_id, rank)
    report = designs.report(store, design_id, rank)
    return bill_of_materials(designs.get(store, design_id), candidate, report)


def _named(design_id: str, rank: int, ending: str) -> dict[str, str]:
    return {"Content-Disposition": f'attachment; filename="bill-{design_id}-{rank}.{ending}"'}
