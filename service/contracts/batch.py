"""Batches: many design requests accepted together, and where they stand.

A batch comes as one JSON document or as lines of JSON, one request a line (NDJSON). It is
accepted whole or refused whole, with every fault named by the line it is in.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Iterator
from datetime import datetime
from typing import Annotated, Final

from pydantic import Field, StringConstraints, ValidationError

from service.contracts.progress import DesignSummary, Priority
from service.contracts.quantities import Contract
from service.contracts.refusals import faults_of
from service.contracts.request import LARGEST_REQUEST_BYTES, DesignRequest
from service.errors import Fault, RequestRefused

MOST_IN_BATCH: Final = 5000
LARGEST_BATCH_BYTES: Final = 64 * 1024 * 1024
#: Faults told of one batch; of the others only the number is told.
MOST_FAULTS: Final = 100

_NAME: Final = "Unnamed batch"
_DIGEST_SEPARATOR: Final = b"\n"


class BatchRequest(Contract):
    """Many design requests under one name, in the order given.

    ``recompute`` asks for a new planning where a stored result would answer.
    """

    name: Annotated[str, StringConstraints(strip_whitespace=True, max_length=120)] = _NAME
    priority: Priority = "ordinary"
    recompute: bool = False
    designs: Annotated[tuple[DesignRequest, ...], Field(min_length=1, max_length=MOST_IN_BATCH)]


class BatchHeading(Contract):
    """What is said of a batch beside its designs, where these come as lines."""

    name: Annotated[str, StringConstraints(strip_whitespace=True, max_length=120)] = _NAME
    priority: Priority = "ordinary"
    recompute: bool = False


class BatchCounts(Contract):
    """How many designs of a batch are in each state."""

    queued: int = 0
    running: int = 0
    done: int = 0
    failed: int = 0
    cancelled: int = 0


class Batch(Contract):
    """Where a batch stands; ``progress`` is the fraction of its work that has ended, 0 to 1.

    ``finished_at`` is given once no design of it waits or runs.
    """

    id: str
    name: str
    owner: str
    priority: Priority
    recompute: bool
    size: int
    created_at: datetime
    finished_at: datetime | None
    counts: BatchCounts
    progress: Annotated[float, Field(ge=0.0, le=1.0)]


class BatchItem(DesignSummary):
    """One design of a batch; ``line`` is its place in it, from 1."""

    line: int


def batch_hash(heading: BatchRequest | BatchHeading, designs: Iterable[str]) -> str:
    """SHA-256 over what a batch asks for, from the content hashes of its designs in order."""
    digest = hashlib.sha256()
    for part in (heading.name, heading.priority, str(heading.recompute), *designs):
        digest.update(part.encode() + _DIGEST_SEPARATOR)
    return digest.hexdigest()


def parse_batch_json(
    body: bytes,
    *,
    name: str | None = None,
    priority: str | None = None,
    recompute: bool | None = None,
) -> BatchRequest:
    """Read a batch from one JSON document.

    Parameters
    ----------
    body : bytes
    name, priority, recompute
        What is said beside the document goes over what stands in it.

    Raises
    ------
    RequestRefused
        With every fault, named as ``designs[16].bands[0].low_mhz``; of more than
        `MOST_FAULTS` only the number.
    """
    if len(body) > LARGEST_BATCH_BYTES:
        raise RequestRefused([_too_large(len(body))])
    heading, faults = _heading(name, priority, recompute)
    try:
        batch = BatchRequest.model_validate_json(body)
    except ValidationError as error:
        faults.extend(faults_of(error))
    if faults:
        raise RequestRefused(faults[:MOST_FAULTS], untold=len(faults[MOST_FAULTS:]))
    said = {field: getattr(heading, field) for field in heading.model_fields_set}
    return batch.model_copy(update=said)


def parse_batch_lines(
    lines: Iterable[bytes],
    *,
    name: str | None = None,
    priority: str | None = None,
    recompute: bool | None = None,
) -> BatchRequest:
    """Read a batch from lines of JSON, one design request a line.

    Parameters
    ----------
    lines : iterable of bytes
        Without or with their line ends; empty lines at the end are passed over. Reading stops
        where the batch is too large already.
    name, priority, recompute
        What is said of the batch as a whole.

    Raises
    ------
    RequestRefused
        With every fault, named as ``line 17: bands[0].low_mhz``; of more than `MOST_FAULTS`
        only the number.
    """
    heading, faults = _heading(name, priority, recompute)
    designs: list[DesignRequest] = []
    for found in _designs_of(lines):
        if isinstance(found, DesignRequest):
            designs.append(found)
        else:
            faults.append(found)
    if not designs and not faults:
        faults.append(_empty())
    if faults:
        raise RequestRefused(faults[:MOST_FAULTS], untold=len(faults[MOST_FAULTS:]))
    # Every part was validated; the whole adds nothing but the length, which was watched.
    return BatchRequest.model_construct(
        name=heading.name,
        priority=heading.priority,
        recompute=heading.recompute,
        designs=tuple(designs),
    )


def _heading(
    name: str | None, priority: str | None, recompute: bool | None
) -> tuple[BatchHeading, list[Fault]]:
    """What is said of a batch beside its designs, and what is wrong with that."""
    given = {"name": name, "priority": priority, "recompute": recompute}
    try:
        return BatchHeading.model_validate({k: v for k, v in given.items() if v is not None}), []
    except ValidationError as error:
        return BatchHeading(), list(faults_of(error))


def _designs_of(lines: Iterable[bytes]) -> Iterator[DesignRequest | Fault]:
    size_bytes = 0
    empty: list[int] = []
    for number, line in enumerate(lines, 1):
        size_bytes += len(line)
        if size_bytes > LARGEST_BATCH_BYTES:
            yield _too_large(size_bytes)
            return
        text = line.strip()
        if not text:
            empty.append(number)
            # Nothing but line ends would otherwise be counted without end.
            if len(empty) > MOST_IN_BATCH:
                return
            continue
        for each in empty:
            yield _at_line(each, _EMPTY_LINE)
        empty.clear()
        if number > MOST_IN_BATCH:
            yield _too_many(number)
            return
        yield from _design_of(number, text)


def _design_of(number: int, text: bytes) -> Iterator[DesignRequest | Fault]:
    if len(text) > LARGEST_REQUEST_BYTES:
        yield _at_line(number, _long_line(len(text)))
        return
    try:
        yield DesignRequest.model_validate_json(text)
    except ValidationError as error:
        for fault in faults_of(error):
            yield _at_line(number, fault)


def _at_line(number: int, fault: Fault) -> Fault:
    return Fault(
        f"line {number}: {fault.field}", fault.value, fault.reason, fault.remedy, fault.code
    )


_EMPTY_LINE: Final = Fault(
    "request",
    "",
    "the line is empty.",
    "Remove it, so that lines and designs are counted alike.",
    "empty-line",
)


def _long_line(size_bytes: int) -> Fault:
    return Fault(
        "request",
        f"{size_bytes} bytes",
        f"the request is longer than {LARGEST_REQUEST_BYTES // 1024} KiB.",
        "Split it into several requests.",
        "request-too-large",
    )


def _empty() -> Fault:
    return Fault(
        "designs",
        "",
        "the batch holds no design.",
        "Send at least one design request, one a line.",
        "too-short",
    )


def _too_many(number: int) -> Fault:
    return Fault(
        f"line {number}",
        "",
        f"a batch holds at most {MOST_IN_BATCH} designs.",
        "Split it into several batches.",
        "too-long",
    )


def _too_large(size_bytes: int) -> Fault:
    return Fault(
        "request",
        f"{size_bytes} bytes or more",
        f"the batch is longer than {LARGEST_BATCH_BYTES // (1024 * 1024)} MiB.",
        "Split it into several batches.",
        "request-too-large",
    )
