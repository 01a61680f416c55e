"""The request for quotation against the schema of OASIS UBL 2.1, read back by the standard library.

The sequences below are those of UBL-RequestForQuotation-2.1 and the common library of UBL 2.1, as
far as the document uses them; those marked mandatory there have a cardinality of 1 or 1..n.
"""

from __future__ import annotations

import xml.etree.ElementTree as ET
from datetime import datetime

import httpx
import pytest

from service.contracts.bill import BillOfMaterials
from service.exports.quotation_request import quotation_request
from tests.service.bills import MOMENT, sample_bill
from tests.service.conftest import Stored
from tests.service.samples import FULL

XSD = "urn:oasis:names:specification:ubl:schema:xsd:"
NAMES = {"cac": f"{XSD}CommonAggregateComponents-2", "cbc": f"{XSD}CommonBasicComponents-2"}

SEQUENCES = {
    "RequestForQuotation": (
        "cbc:UBLVersionID cbc:CustomizationID cbc:ProfileID cbc:ProfileExecutionID cbc:ID "
        "cbc:CopyIndicator cbc:UUID cbc:IssueDate cbc:IssueTime cbc:SubmissionDueDate cbc:Note "
        "cbc:PricingCurrencyCode cbc:LineCountNumeric cac:RequestedValidityPeriod "
        "cac:CatalogueDocumentReference cac:AdditionalDocumentReference cac:Signature "
        "cac:OriginatorCustomerParty cac:SellerSupplierParty cac:BuyerCustomerParty cac:Delivery "
        "cac:DeliveryTerms cac:DestinationCountry cac:Contract cac:RequestForQuotationLine"
    ),
    "RequestForQuotationLine": (
        "cbc:ID cbc:UUID cbc:Note cbc:OptionalLineItemIndicator cbc:PrivacyCode "
        "cbc:SecurityClassificationCode cac:DocumentReference cac:LineItem"
    ),
    "LineItem": (
        "cbc:ID cbc:SalesOrderID cbc:UUID cbc:Note cbc:LineStatusCode cbc:Quantity "
        "cbc:LineExtensionAmount cac:Price cac:Item"
    ),
    "Item": (
        "cbc:Description cbc:PackQuantity cbc:PackSizeNumeric cbc:CatalogueIndicator cbc:Name "
        "cbc:HazardousRiskIndicator cbc:AdditionalInformation cbc:Keyword cbc:BrandName "
        "cbc:ModelName cac:BuyersItemIdentification cac:SellersItemIdentification "
        "cac:AdditionalItemProperty"
    ),
    "AdditionalItemProperty": (
        "cbc:ID cbc:Name cbc:NameCode cbc:TestMethod cbc:Value cbc:ValueQuantity cbc:ValueQualifier"
    ),
}
MANDATORY = {
    "RequestForQuotation": {
        "cbc:IssueDate",
        "cbc:IssueTime",
        "cac:SellerSupplierParty",
        "cac:RequestForQuotationLine",
    },
    "RequestForQuotationLine": {"cac:LineItem"},
    "LineItem": {"cbc:ID", "cac:Item"},
    "AdditionalItemProperty": {"cbc:Name"},
    "AdditionalDocumentReference": {"cbc:ID"},
    "PartyName": {"cbc:Name"},
}
MANY = {
    "cbc:Note",
    "cbc:Description",
    "cac:RequestForQuotationLine",
    "cac:AdditionalItemProperty",
    "cac:AdditionalDocumentReference",
}


@pytest.fixture(scope="module")
def bill() -> BillOfMaterials:
    return sample_bill(**FULL, purchase_reference="PO 2026/17 <&>")


def read(bill: BillOfMaterials) -> ET.Element:
    return ET.fromstring(quotation_request(bill))  # noqa: S314  # our own document


def prefixed(element: ET.Element) -> str:
    space, _, name = element.tag.removeprefix("{").partition("}")
    prefix = {value: key for key, value in NAMES.items()}.get(space)
    return name if prefix is None else f"{prefix}:{name}"


def local(element: ET.Element) -> str:
    return prefixed(element).rpartition(":")[2]


def test_the_root_is_that_of_the_standard(bill: BillOfMaterials) -> None:
    assert read(bill).tag == f"{{{XSD}RequestForQuotation-2}}RequestForQuotation"


def test_children_stand_in_the_order_of_the_schema_and_no_more_often(
    bill: BillOfMaterials,
) -> None:
    met = set()
    for element in read(bill).iter():
        sequence = SEQUENCES.get(local(element), "").split()
        if sequence:
            met.add(local(element))
            found = [prefixed(child) for child in element]
            assert set(found) <= set(sequence)
            assert found == sorted(found, key=sequence.index)
            once = [each for each in found if each not in MANY]
            assert len(set(once)) == len(once)
    assert met == set(SEQUENCES)


def test_what_must_be_there_is_there(bill: BillOfMaterials) -> None:
    met = set()
    for element in read(bill).iter():
        needed = MANDATORY.get(local(element))
        if needed is not None:
            met.add(local(element))
            assert needed <= {prefixed(child) for child in element}
    assert met == set(MANDATORY)


def test_no_element_is_empty(bill: BillOfMaterials) -> None:
    for element in read(bill).iter():
        assert len(element) or (element.text or "").strip(), element.tag


def test_every_line_of_the_bill_is_asked_for(bill: BillOfMaterials) -> None:
    root = read(bill)
    asked = root.findall("cac:RequestForQuotationLine/cac:LineItem", NAMES)
    assert root.findtext("cbc:LineCountNumeric", None, NAMES) == str(len(bill.lines))
    assert len(asked) == len(bill.lines)
    for number, (item, line) in enumerate(zip(asked, bill.lines, strict=True), 1):
        quantity = item.find("cbc:Quantity", NAMES)
        assert quantity is not None
        assert quantity.text is not None
        # Metre and piece by UN/ECE Recommendation 20.
        assert quantity.get("unitCode") == {"m": "MTR", "piece": "H87"}[line.unit]
        assert float(quantity.text) == line.quantity
        assert item.findtext("cbc:ID", None, NAMES) == str(number)
        assert item.findtext("cac:Item/cbc:Description", None, NAMES) == line.description
        code = item.findtext("cac:Item/cac:BuyersItemIdentification/cbc:ID", "", NAMES)
        assert code == line.item_code
        ratings = item.findall("cac:Item/cac:AdditionalItemProperty", NAMES)
        assert [
            (
                each.findtext("cbc:Name", None, NAMES),
                each.findtext("cbc:ValueQualifier", None, NAMES),
            )
            for each in ratings
        ] == [(each.name, each.source) for each in line.ratings]


def test_a_rating_tells_bound_value_and_unit() -> None:
    values = [each.text for each in read(sample_bill()).iter(f"{{{NAMES['cbc']}}}Value")]
    assert "at least 906 N" in values
    assert "2:1" in values


def test_notes_and_cautions_go_with_it(bill: BillOfMaterials) -> None:
    notes = {each.text for each in read(bill).findall("cbc:Note", NAMES)}
    assert {*bill.notes, *bill.cautions} <= notes


def test_the_purchase_reference_comes_back_whatever_it_holds(bill: BillOfMaterials) -> None:
    path = "cac:AdditionalDocumentReference/cbc:ID"
    assert read(bill).findtext(path, None, NAMES) == bill.purchase_reference
    assert read(sample_bill()).find(path, NAMES) is None


def test_it_is_dated_by_the_result(bill: BillOfMaterials) -> None:
    root = read(bill)
    date, time = (root.findtext(f"cbc:Issue{each}", None, NAMES) for each in ("Date", "Time"))
    assert datetime.fromisoformat(f"{date}T{time}") == MOMENT


@pytest.mark.parametrize("sign", ["\uffff", "\ufffe"])
def test_what_xml_cannot_hold_is_replaced(sign: str) -> None:
    path = "cac:AdditionalDocumentReference/cbc:ID"
    found = read(sample_bill(purchase_reference=f"a{sign}b")).findtext(path, None, NAMES)
    assert found == "a\ufffdb"


def test_it_is_served_as_a_file(wire: httpx.Client, stored: Stored) -> None:
    address = f"/v1/designs/{stored.done}/candidates/1"
    bill = BillOfMaterials.model_validate_json(wire.get(f"{address}/bill").content)
    answer = wire.get(f"{address}/request-for-quotation.xml")
    assert answer.headers["content-type"] == "application/xml"
    assert answer.content == quotation_request(bill)
    assert f"bill-{stored.done}-1.xml" in answer.headers["content-disposition"]


def test_the_page_of_the_candidate_links_it(wire: httpx.Client, stored: Stored) -> None:
    page = wire.get(f"/designs/{stored.done}/candidates/1").text
    assert f"/v1/designs/{stored.done}/candidates/1/request-for-quotation.xml" in page
