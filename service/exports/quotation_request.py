"""A bill of materials as a request for quotation in UBL 2.1 (OASIS; ISO/IEC 19845).

Elements, their order and which of them must be there are those of the schema
UBL-RequestForQuotation-2.1; units are codes of UN/ECE Recommendation 20.
"""

from __future__ import annotations

import re
import xml.etree.ElementTree as ET
from datetime import UTC
from typing import Final

from service.contracts.bill import BillLine, BillOfMaterials
from service.exports import digits
from service.exports.bill_sheets import rating_in_words

MEDIA_TYPE: Final = "application/xml"

_XSD: Final = "urn:oasis:names:specification:ubl:schema:xsd:"
_ROOT: Final = f"{{{_XSD}RequestForQuotation-2}}"
_CAC: Final = f"{{{_XSD}CommonAggregateComponents-2}}"
_CBC: Final = f"{{{_XSD}CommonBasicComponents-2}}"
ET.register_namespace("cac", _CAC.strip("{}"))
ET.register_namespace("cbc", _CBC.strip("{}"))

#: Metre and piece (UN/ECE Recommendation 20).
_UNIT_CODES: Final = {"m": "MTR", "piece": "H87"}
#: The standard asks for a seller, and no element may be empty.
SELLER: Final = "To be named by the buyer"
#: What XML 1.0 can hold (section 2.2, production 2), and not.
_NOT_XML: Final = re.compile("[^\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def quotation_request(bill: BillOfMaterials) -> bytes:
    """The bill as a request for quotation: what is asked for, without prices.

    Parameters
    ----------
    bill : BillOfMaterials
        A price without its currency has no place in UBL, so the stock's are left out. The date
        of issue is that of the result; whoever sends the document names the seller and may date
        it anew.

    Returns
    -------
    bytes
        XML 1.0 in UTF-8.
    """
    root = ET.Element(f"{_ROOT}RequestForQuotation")
    issued = bill.planned_at.astimezone(UTC)
    _basic(root, "UBLVersionID", "2.1")
    _basic(root, "ID", f"{bill.design_id}-{bill.rank}")
    _basic(root, "IssueDate", f"{issued:%Y-%m-%d}")
    _basic(root, "IssueTime", f"{issued:%H:%M:%S}Z")
    for note in (f"{bill.design_name}: {bill.wire}", *bill.notes, *bill.cautions):
        _basic(root, "Note", note)
    _basic(root, "LineCountNumeric", str(len(bill.lines)))
    if bill.purchase_reference:
        reference = _part(root, "AdditionalDocumentReference")
        _basic(reference, "ID", bill.purchase_reference)
        _basic(reference, "DocumentType", "Purchase reference")
    party = _part(_part(root, "SellerSupplierParty"), "Party")
    _basic(_part(party, "PartyName"), "Name", SELLER)
    for number, line in enumerate(bill.lines, 1):
        _add_line(root, number, line)
    ET.indent(root)
    written: bytes = ET.tostring(root, encoding="utf-8", xml_declaration=True)
    return written


def _add_line(root: ET.Element, number: int, line: BillLine) -> None:
    asked = _part(root, "RequestForQuotationLine")
    _basic(asked, "ID", str(number))
    _basic(asked, "Note", f"Quantity: {line.quantity_source}")
    line_item = _part(asked, "LineItem")
    _basic(line_item, "ID", str(number))
    quantity = _basic(line_item, "Quantity", digits.exact(line.quantity))
    quantity.set("unitCode", _UNIT_CODES[line.unit])
    item = _part(line_item, "Item")
    _basic(item, "Description", line.description)
    _basic(item, "Name", line.part)
    if line.item_code:
        _basic(_part(item, "BuyersItemIdentification"), "ID", line.item_code)
    for each in line.ratings:
        rating = _part(item, "AdditionalItemProperty")
        _basic(rating, "Name", each.name)
        _basic(rating, "Value", rating_in_words(each).removeprefix(each.name).strip())
        _basic(rating, "ValueQualifier", each.source)


def _part(parent: ET.Element, name: str) -> ET.Element:
    return ET.SubElement(parent, _CAC + name)


def _basic(parent: ET.Element, name: str, text: str) -> ET.Element:
    element = ET.SubElement(parent, _CBC + name)
    element.text = _NOT_XML.sub("\ufffd", text)
    return element
