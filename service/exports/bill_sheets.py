"""A bill of materials as comma-separated values (RFC 4180) and as a workbook (ISO/IEC 29500)."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator
from datetime import UTC
from typing import Final

import xlsxwriter

from service.contracts.bill import BillLine, BillOfMaterials, Rating
from service.exports import digits

WORKBOOK_MEDIA_TYPE: Final = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"

BILL_COLUMNS: Final = (
    "design_id",
    "candidate",
    "purchase_reference",
    "part",
    "description",
    "quantity",
    "unit",
    "quantity_source",
    "ratings",
    "rating_sources",
    "item_code",
    "unit_price",
    "amount",
)
#: What the rows after the parts are called.
NOTE, CAUTION = "note", "caution"

LINE_HEADS: Final = (
    "Line",
    "Part",
    "Description",
    "Quantity",
    "Unit",
    "Ratings",
    "Item code",
    "Unit price",
    "Amount",
    "Quantity from",
)
_LINE_WIDTHS: Final = (6, 20, 44, 10, 8, 56, 16, 12, 12, 56)
RATING_HEADS: Final = ("Line", "Part", "Rating", "Bound", "Value", "Unit", "From")
_RATING_WIDTHS: Final = (6, 20, 34, 10, 12, 8, 90)

_Row = tuple[str | float | None, ...]


def bill_csv(bill: BillOfMaterials) -> str:
    """The bill as one table: a row a part, then one a note and a caution.

    Every row tells design, candidate and purchase reference, so that bills can be put together.
    A text that a spreadsheet may take for a formula has an apostrophe before it.
    """
    sheet = io.StringIO(newline="")
    writer = csv.writer(sheet, dialect="excel")
    writer.writerow(BILL_COLUMNS)
    of = (bill.design_id, str(bill.rank), digits.text_cell(bill.purchase_reference))
    blank = ("",) * (len(BILL_COLUMNS) - len(of) - 2)
    writer.writerows((*of, *_cells(line)) for line in bill.lines)
    writer.writerows((*of, NOTE, digits.text_cell(each), *blank) for each in bill.notes)
    writer.writerows((*of, CAUTION, digits.text_cell(each), *blank) for each in bill.cautions)
    return sheet.getvalue()


def bill_workbook(bill: BillOfMaterials) -> bytes:
    """The bill as a workbook: a sheet with the parts, notes and cautions, and one with ratings.

    Numbers are numbers; texts are stored as texts, so that none runs as a formula. The same bill
    gives the same bytes.
    """
    file = io.BytesIO()
    with xlsxwriter.Workbook(file, {"in_memory": True}) as workbook:
        created = bill.planned_at.astimezone(UTC).replace(tzinfo=None)
        workbook.set_properties({"title": "Bill of materials", "created": created})
        bold = workbook.add_format({"bold": True, "text_wrap": True, "valign": "top"})
        plain = workbook.add_format({"text_wrap": True, "valign": "top"})
        for name, rows, widths, head in (
            ("Bill of materials", _bill_rows(bill), _LINE_WIDTHS, LINE_HEADS),
            ("Ratings", _rating_rows(bill), _RATING_WIDTHS, RATING_HEADS),
        ):
            sheet = workbook.add_worksheet(name)
            sheet.set_landscape()
            sheet.fit_to_pages(1, 0)
            for column, width in enumerate(widths):
                sheet.set_column(column, column, width, plain)
            for row, cells in enumerate(rows):
                look = bold if cells == head else plain
                for column, cell in enumerate(cells):
                    if cell is None or cell == "":
                        continue
                    if isinstance(cell, str):
                        sheet.write_string(row, column, cell, look)
                    else:
                        sheet.write_number(row, column, cell, look)
    return file.getvalue()


def rating_in_words(rating: Rating) -> str:
    """A rating as an order says it: ``breaking load at least 1200 N``."""
    bound = "" if rating.bound == "nominal" else f"{rating.bound} "
    gap = "" if rating.unit.startswith(":") or not rating.unit else " "
    return f"{rating.name} {bound}{digits.exact(rating.value)}{gap}{rating.unit}"


def _cells(line: BillLine) -> tuple[str, ...]:
    texts = (
        line.quantity_source,
        "; ".join(map(rating_in_words, line.ratings)),
        "; ".join(f"{each.name}: {each.source}" for each in line.ratings),
        line.item_code,
    )
    return (
        line.part,
        digits.text_cell(line.description),
        digits.exact(line.quantity),
        line.unit,
        *map(digits.text_cell, texts),
        "" if line.unit_price is None else digits.exact(line.unit_price),
        "" if line.amount is None else digits.exact(line.amount),
    )


def _bill_rows(bill: BillOfMaterials) -> Iterator[_Row]:
    yield ("Bill of materials",)
    yield ("Design", None, bill.design_name)
    yield ("Design id", None, bill.design_id)
    yield ("Candidate", None, float(bill.rank))
    yield ("Wire", None, bill.wire)
    yield ("Purchase reference", None, bill.purchase_reference)
    yield ()
    yield LINE_HEADS
    for number, line in enumerate(bill.lines, 1):
        yield (
            float(number),
            line.part,
            line.description,
            line.quantity,
            line.unit,
            "\n".join(map(rating_in_words, line.ratings)),
            line.item_code,
            line.unit_price,
            line.amount,
            line.quantity_source,
        )
    yield ()
    for each in bill.notes:
        yield ("", NOTE, each)
    for each in bill.cautions:
        yield ("", CAUTION, each)


def _rating_rows(bill: BillOfMaterials) -> Iterator[_Row]:
    yield RATING_HEADS
    for number, line in enumerate(bill.lines, 1):
        for each in line.ratings:
            yield (
                float(number),
                line.part,
                each.name,
                each.bound,
                each.value,
                each.unit,
                each.source,
            )
