"""The bill as CSV and as a workbook, read back by the csv module and by openpyxl."""

from __future__ import annotations

import csv
import io

import httpx
import pytest
from openpyxl import Workbook, load_workbook

from service.contracts.bill import BillOfMaterials
from service.exports.bill_sheets import (
    BILL_COLUMNS,
    LINE_HEADS,
    RATING_HEADS,
    bill_csv,
    bill_workbook,
    rating_in_words,
)
from tests.service.bills import MOMENT, sample_bill
from tests.service.conftest import Stored
from tests.service.samples import FULL

FORMULAS = ["=1+1", "+40m", "-40m", "@SUM(A1)", "＝1", '=HYPERLINK("x")']


@pytest.fixture(scope="module")
def bill() -> BillOfMaterials:
    return sample_bill(**FULL, purchase_reference="PO 2026/17")


def rows(bill: BillOfMaterials) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(bill_csv(bill), newline="")))


def opened(bill: BillOfMaterials) -> Workbook:
    return load_workbook(io.BytesIO(bill_workbook(bill)))


def table(book: Workbook, sheet: str, heads: tuple[str, ...]) -> list[tuple[object, ...]]:
    """Rows below the heads, down to the first without a number."""
    found = [tuple(cells) for cells in book[sheet].iter_rows(values_only=True)]
    below = found[found.index(heads) + 1 :]
    return [cells for cells in below if isinstance(cells[0], int)]


# ------------------------------------------------------------------------------------ CSV
def test_the_first_line_names_the_columns(bill: BillOfMaterials) -> None:
    assert bill_csv(bill).partition("\r\n")[0] == ",".join(BILL_COLUMNS)


def test_every_part_has_a_row_with_its_quantity_code_and_price(bill: BillOfMaterials) -> None:
    for row, line in zip(rows(bill), bill.lines, strict=False):
        assert (row["part"], row["description"]) == (line.part, line.description)
        assert (float(row["quantity"]), row["unit"]) == (line.quantity, line.unit)
        assert row["ratings"] == "; ".join(map(rating_in_words, line.ratings))
        assert row["item_code"] == line.item_code
        assert row["unit_price"] == ("" if line.unit_price is None else str(line.unit_price))
        assert row["amount"] == ("" if line.amount is None else str(line.amount))


def test_notes_and_cautions_follow_the_parts(bill: BillOfMaterials) -> None:
    after = [(row["part"], row["description"]) for row in rows(bill)[len(bill.lines) :]]
    expected = [("note", each) for each in bill.notes]
    expected += [("caution", each) for each in bill.cautions]
    assert after == expected


def test_every_row_tells_design_candidate_and_purchase_reference(bill: BillOfMaterials) -> None:
    told = {(row["design_id"], row["candidate"], row["purchase_reference"]) for row in rows(bill)}
    assert told == {(bill.design_id, "1", "PO 2026/17")}


@pytest.mark.parametrize("text", FORMULAS)
def test_texts_of_the_request_that_look_like_formulas_are_defused(text: str) -> None:
    stock = {"conductors": [{"awg": 12, "item_code": text}]}
    found = rows(sample_bill(stock=stock, purchase_reference=text))
    assert found[0]["item_code"] == "'" + text
    assert {row["purchase_reference"] for row in found} == {"'" + text}


@pytest.mark.parametrize("field", ["description", "quantity_source"])
def test_any_text_of_a_line_is_defused(bill: BillOfMaterials, field: str) -> None:
    first = bill.lines[0].model_copy(update={field: "=1"})
    assert rows(bill.model_copy(update={"lines": (first,)}))[0][field] == "'=1"


def test_notes_and_cautions_are_defused_too(bill: BillOfMaterials) -> None:
    told = rows(bill.model_copy(update={"lines": (), "notes": ("=1",), "cautions": ("@2",)}))
    assert [row["description"] for row in told] == ["'=1", "'@2"]


# ------------------------------------------------------------------------------- workbook
def test_the_workbook_holds_every_line_with_numbers_as_numbers(bill: BillOfMaterials) -> None:
    found = table(opened(bill), "Bill of materials", LINE_HEADS)
    assert len(found) == len(bill.lines)
    for number, (cells, line) in enumerate(zip(found, bill.lines, strict=True), 1):
        words = "\n".join(map(rating_in_words, line.ratings))
        assert cells == (
            number,
            line.part,
            line.description,
            line.quantity,
            line.unit,
            words or None,
            line.item_code or None,
            line.unit_price,
            line.amount,
            line.quantity_source,
        )


def test_the_workbook_holds_every_rating(bill: BillOfMaterials) -> None:
    expected = [
        (number, line.part, each.name, each.bound, each.value, each.unit or None, each.source)
        for number, line in enumerate(bill.lines, 1)
        for each in line.ratings
    ]
    assert table(opened(bill), "Ratings", RATING_HEADS) == expected


def test_the_workbook_tells_design_reference_notes_and_cautions(bill: BillOfMaterials) -> None:
    texts = {cell.value for row in opened(bill)["Bill of materials"].iter_rows() for cell in row}
    said = {bill.design_name, bill.design_id, bill.purchase_reference, bill.wire}
    assert said | set(bill.notes) | set(bill.cautions) <= texts


@pytest.mark.parametrize("text", FORMULAS)
def test_no_cell_of_the_workbook_runs(text: str) -> None:
    stock = {"conductors": [{"awg": 12, "item_code": text}]}
    book = opened(sample_bill(stock=stock, purchase_reference=text, name=text))
    cells = [cell for sheet in book.worksheets for row in sheet.iter_rows() for cell in row]
    assert {cell.data_type for cell in cells} <= {"s", "n"}
    assert sum(cell.value == text for cell in cells) == 3


def test_the_same_bill_gives_the_same_workbook(bill: BillOfMaterials) -> None:
    assert bill_workbook(bill) == bill_workbook(bill)
    # Its date is that of the result, so that tomorrow's is the same too.
    assert opened(bill).properties.created == MOMENT.replace(tzinfo=None)


# ---------------------------------------------------------------------------- on the wire
def test_the_bill_is_served_as_json(wire: httpx.Client, stored: Stored) -> None:
    answer = wire.get(f"/v1/designs/{stored.done}/candidates/2/bill")
    bill = BillOfMaterials.model_validate_json(answer.content)
    assert (bill.design_id, bill.rank) == (stored.done, 2)
    assert bill.lines[0].item_code == "W-12"


def test_the_files_are_of_the_same_bill(wire: httpx.Client, stored: Stored) -> None:
    address = f"/v1/designs/{stored.done}/candidates/2/bill"
    bill = BillOfMaterials.model_validate_json(wire.get(address).content)
    sheet, book = wire.get(f"{address}.csv"), wire.get(f"{address}.xlsx")
    assert sheet.text == bill_csv(bill)
    assert sheet.headers["content-type"].startswith("text/csv")
    assert book.content == bill_workbook(bill)
    assert book.headers["content-type"].endswith("spreadsheetml.sheet")
    for answer, ending in ((sheet, "csv"), (book, "xlsx")):
        assert f"bill-{stored.done}-2.{ending}" in answer.headers["content-disposition"]


@pytest.mark.parametrize("ending", ["", ".csv", ".xlsx"])
def test_a_reader_that_has_the_bill_is_told_so(
    wire: httpx.Client, stored: Stored, ending: str
) -> None:
    address = f"/v1/designs/{stored.done}/candidates/1/bill{ending}"
    tag = wire.get(address).headers["etag"]
    assert wire.get(address, headers={"If-None-Match": tag}).status_code == 304


@pytest.mark.parametrize("ending", ["", ".csv", ".xlsx"])
@pytest.mark.parametrize(("state", "status"), [("queued", 409), ("done", 404)])
def test_what_is_not_there_is_refused(
    wire: httpx.Client, stored: Stored, ending: str, state: str, status: int
) -> None:
    address = f"/v1/designs/{getattr(stored, state)}/candidates/9/bill{ending}"
    assert wire.get(address).status_code == status


def test_the_page_of_the_candidate_links_the_bill(wire: httpx.Client, stored: Stored) -> None:
    page = wire.get(f"/designs/{stored.done}/candidates/1").text
    for ending in ("", ".csv", ".xlsx"):
        assert f'href="/v1/designs/{stored.done}/candidates/1/bill{ending}"' in page
