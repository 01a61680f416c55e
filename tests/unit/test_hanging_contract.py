"""What a request may say of hanging and exposure, and that older requests and reports stay read."""

from __future__ import annotations

import pytest

from service.contracts.exposure import STANDARD_NAMES, ExposureTerms
from service.contracts.hanging import Hanging
from service.contracts.report import FeedReport
from service.contracts.request import parse_request
from service.errors import Fault, RequestRefused
from tests.service.samples import request_json, sample_planned, sample_request
from worker.engine.exposure import Standard


def only_fault(**fields: object) -> Fault:
    with pytest.raises(RequestRefused) as refused:
        parse_request(request_json(**fields))
    assert len(refused.value.faults) == 1, refused.value.faults
    return refused.value.faults[0]


def test_a_request_that_says_nothing_of_them_has_the_usual() -> None:
    request = sample_request()
    assert request.hanging == Hanging()
    assert (request.hanging.tension_n, request.hanging.sag_m) == (None, None)
    assert request.exposure == ExposureTerms(duty_percent=100.0, standard="both")
    assert request.exposure.standards() == STANDARD_NAMES


def test_one_standard_may_be_asked_for_alone() -> None:
    assert ExposureTerms(standard="fcc-1.1310").standards() == ("fcc-1.1310",)


def test_contract_and_engine_name_the_same_standards() -> None:
    assert set(STANDARD_NAMES) == {each.value for each in Standard}


def test_tension_and_sag_together_are_refused() -> None:
    fault = only_fault(hanging={"tension_n": 100.0, "sag_m": 1.0})
    assert (fault.field, fault.value, fault.code) == ("hanging.sag_m", "1.0", "hanging-aims-two")
    assert "only one" in fault.remedy


@pytest.mark.parametrize("strung_c", [-30.0, 50.0])
def test_stringing_outside_the_range_of_temperatures_is_refused(strung_c: float) -> None:
    fault = only_fault(hanging={"strung_c": strung_c})
    assert (fault.field, fault.code) == ("hanging.strung_c", "temperatures-out-of-order")
    assert fault.value == str(strung_c)


def test_supports_too_unlike_for_the_span_are_refused_with_the_most() -> None:
    site = {"span_m": 30.0, "height_m": 6.0}
    fault = only_fault(site=site, hanging={"rise_m": -13.0})
    assert (fault.field, fault.value, fault.code) == ("hanging.rise_m", "-13.0", "rise-too-steep")
    # Twice the height of 6 m: a support on the ground.
    assert "at most 12 m" in fault.remedy
    taken = parse_request(request_json(site=site, hanging={"rise_m": -12.0}))
    assert taken.hanging.rise_m == -12.0


@pytest.mark.parametrize(
    ("section", "field", "value"),
    [
        ("hanging", "wind_pa", -1.0),
        ("hanging", "ice_mm", 101.0),
        ("hanging", "safety_factor", 0.5),
        ("exposure", "duty_percent", 0.0),
        ("exposure", "duty_percent", 101.0),
        ("exposure", "standard", "none-such"),
    ],
)
def test_what_lies_outside_its_range_is_refused_by_its_field(
    section: str, field: str, value: object
) -> None:
    assert only_fault(**{section: {field: value}}).field == f"{section}.{field}"


def test_a_report_stored_before_any_of_this_is_still_read() -> None:
    fields = sample_planned(sample_request()).reports[0].model_dump(mode="json")
    fields.pop("hanging")
    for band in fields["bands"]:
        band.pop("exposure")
        if band["stress"] is not None:
            band["stress"].pop("ends_peak_v")
    report = FeedReport.model_validate(fields)
    assert report.hanging is None
    assert all(band.exposure is None for band in report.bands)
