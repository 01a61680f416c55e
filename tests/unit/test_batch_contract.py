"""Batches as they are sent: taken whole or refused with every fault named by its place."""

from __future__ import annotations

import json
from collections.abc import Iterator

import pytest

from service.contracts import batch
from service.contracts.batch import (
    MOST_FAULTS,
    BatchHeading,
    BatchRequest,
    batch_hash,
    parse_batch_json,
    parse_batch_lines,
)
from service.errors import Fault, RequestRefused
from tests.service.samples import request_fields, sample_request


def line(**changes: object) -> bytes:
    return json.dumps(request_fields(**changes)).encode() + b"\n"


def document(*designs: dict[str, object], **changes: object) -> bytes:
    return json.dumps({"designs": list(designs)} | changes).encode()


def faults_of_lines(*lines: bytes, **heading: object) -> tuple[Fault, ...]:
    with pytest.raises(RequestRefused) as refused:
        parse_batch_lines(lines, **heading)  # type: ignore[arg-type]  # parameters by name
    return refused.value.faults


def faults_of_document(body: bytes) -> tuple[Fault, ...]:
    with pytest.raises(RequestRefused) as refused:
        parse_batch_json(body)
    return refused.value.faults


def test_lines_and_a_document_of_the_same_designs_are_the_same_batch() -> None:
    heading = {"name": "Sites", "priority": "when-idle", "recompute": True}
    designs = [request_fields(name=name) for name in ("one", "two")]
    by_lines = parse_batch_lines(
        [line(name="one"), line(name="two")],
        name="Sites",
        priority="when-idle",
        recompute=True,
    )
    by_document = parse_batch_json(document(*designs, **heading))
    assert by_lines == by_document
    assert by_lines.designs == (sample_request(name="one"), sample_request(name="two"))


def test_a_batch_without_a_heading_is_ordinary() -> None:
    found = parse_batch_lines([line()])
    assert (found.name, found.priority, found.recompute) == ("Unnamed batch", "ordinary", False)


def test_every_fault_of_every_line_is_named_by_its_line() -> None:
    faults = faults_of_lines(
        line(power_w=-1.0), line(), b"{not json}\n", line(power_w="much", candidates=99)
    )
    assert [fault.field for fault in faults] == [
        "line 1: power_w",
        "line 3: request",
        "line 4: power_w",
        "line 4: candidates",
    ]
    assert all(fault.remedy for fault in faults)


def test_every_fault_of_a_document_is_named_by_its_design() -> None:
    wrong = request_fields(bands=[{"name": "40m", "low_mhz": "low", "high_mhz": 7.2}])
    faults = faults_of_document(document(request_fields(), wrong, request_fields(power_w=0.0)))
    assert [fault.field for fault in faults] == [
        "designs[1].bands[0].low_mhz",
        "designs[2].power_w",
    ]


def test_a_fault_of_the_heading_is_told_with_those_of_the_lines() -> None:
    faults = faults_of_lines(line(power_w=-1.0), priority="at once")
    assert [fault.field for fault in faults] == ["priority", "line 1: power_w"]


def test_of_very_many_faults_the_first_are_told_and_the_others_counted() -> None:
    lines = [line(power_w=-1.0)] * (MOST_FAULTS + 20)
    with pytest.raises(RequestRefused, match="20 more") as refused:
        parse_batch_lines(lines)
    assert len(refused.value.faults) == MOST_FAULTS
    assert refused.value.untold == 20
    designs = [request_fields(power_w=-1.0)] * (MOST_FAULTS + 20)
    with pytest.raises(RequestRefused, match="20 more"):
        parse_batch_json(document(*designs))


@pytest.mark.parametrize("lines", [[], [b""], [b"\n", b"  \n"]], ids=["none", "empty", "blank"])
def test_a_batch_without_designs_is_refused(lines: list[bytes]) -> None:
    (fault,) = faults_of_lines(*lines)
    assert "no design" in fault.reason


def test_empty_lines_at_the_end_are_passed_over_and_between_designs_refused() -> None:
    assert len(parse_batch_lines([line(), line(), b"\n", b""]).designs) == 2
    (fault,) = faults_of_lines(line(), b"\n", line())
    assert (fault.field, fault.code) == ("line 2: request", "empty-line")


def test_more_designs_than_a_batch_holds_are_refused_without_reading_on(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(batch, "MOST_IN_BATCH", 3)
    read: list[int] = []

    def endless() -> Iterator[bytes]:
        while True:
            read.append(1)
            yield line()

    with pytest.raises(RequestRefused) as refused:
        parse_batch_lines(endless())
    assert [fault.code for fault in refused.value.faults] == ["too-long"]
    assert len(read) == 4


def test_a_batch_that_is_too_large_is_refused_without_reading_on(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(batch, "LARGEST_BATCH_BYTES", 3 * len(line()))
    (fault,) = faults_of_lines(*[line()] * 9)
    assert fault.code == "request-too-large"
    (fault,) = faults_of_document(document(*[request_fields()] * 9))
    assert fault.code == "request-too-large"


def test_a_line_longer_than_a_request_may_be_is_refused_by_its_line() -> None:
    (fault,) = faults_of_lines(line(), line(name="n" * 70_000))
    assert (fault.field, fault.code) == ("line 2: request", "request-too-large")


def test_a_document_of_too_many_designs_is_refused() -> None:
    few = {"designs": [request_fields()] * 5001}
    (fault,) = faults_of_document(json.dumps(few).encode())
    assert (fault.field, fault.code) == ("designs", "too-long")


def test_the_hash_of_a_batch_tells_apart_what_asks_for_something_else() -> None:
    plain = BatchHeading()
    hashes = {
        batch_hash(plain, ["a", "b"]),
        batch_hash(plain, ["b", "a"]),
        batch_hash(plain, ["a"]),
        batch_hash(BatchHeading(name="Named"), ["a", "b"]),
        batch_hash(BatchHeading(priority="urgent"), ["a", "b"]),
        batch_hash(BatchHeading(recompute=True), ["a", "b"]),
    }
    assert len(hashes) == 6
    whole = BatchRequest(designs=(sample_request(),))
    assert batch_hash(whole, ["a"]) == batch_hash(plain, ["a"])
