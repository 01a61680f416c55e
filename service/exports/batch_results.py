"""The results of a batch as it goes: lines of JSON, or one table with a row a candidate."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Iterator, Sequence
from typing import Final

from service.contracts.candidate import BandOutcome, Candidate
from service.contracts.formats import share
from service.exports import digits
from service.store.batches import ItemResult

LINES_MEDIA_TYPE: Final = "application/x-ndjson"

RESULT_COLUMNS: Final = (
    "line",
    "design_id",
    "name",
    "state",
    "failure",
    "rank",
    "length_m",
    "conductor",
    "item_code",
    "diameter_mm",
    "height_m",
    "feed_fraction",
    "transformer_ratio",
    "required_served",
    "required_total",
    "weighted_served",
    "swr_worst",
    "loss_db",
    "cost",
    "bands",
    "why",
)
#: A part of a stream is about so long.
_PART_CHARACTERS: Final = 64 * 1024
_OF_DESIGN: Final = RESULT_COLUMNS.index("rank")
_NO_CANDIDATE: Final = ("",) * (len(RESULT_COLUMNS) - _OF_DESIGN)


def result_lines(results: Iterable[ItemResult]) -> Iterator[str]:
    """Results as NDJSON: one design a line with its state and, once done, its result.

    Yields many lines at a time.
    """
    return _in_parts(_lines(results))


def result_table(results: Iterable[ItemResult]) -> Iterator[str]:
    """Results as comma-separated values (RFC 4180): one candidate a row, best first.

    A design without a candidate has one row that tells its state and the reason of a failure,
    so that every line of the batch is there. Yields many rows at a time.
    """
    return _in_parts(_rows(results))


def _lines(results: Iterable[ItemResult]) -> Iterator[str]:
    for each in results:
        # The stored text as it is: 5,000 results need not be read only to be written again.
        fields = each.item.model_dump_json().removesuffix("}")
        yield f'{fields},"result":{each.result_json or "null"}}}\n'


def _rows(results: Iterable[ItemResult]) -> Iterator[str]:
    yield _row(RESULT_COLUMNS)
    for each in results:
        result = each.read()
        candidates = () if result is None else result.candidates
        design = _design_cells(each)
        if not candidates:
            yield _row((*design, *_NO_CANDIDATE))
        for candidate in candidates:
            yield _row((*design, *_candidate_cells(candidate)))


def _design_cells(each: ItemResult) -> tuple[str, ...]:
    item = each.item
    name, failure = digits.text_cell(item.name), digits.text_cell(item.failure or "")
    return (str(item.line), item.id, name, item.state, failure)


def _candidate_cells(each: Candidate) -> tuple[str, ...]:
    return (
        str(each.rank),
        f"{each.length_m:.4f}",
        digits.text_cell(each.conductor),
        digits.text_cell(each.item_code),
        f"{each.diameter_mm:.4f}",
        "" if each.height_m is None else f"{each.height_m:.3f}",
        f"{each.feed_fraction:.4f}",
        f"{each.transformer_ratio:.4g}",
        str(each.required_served),
        str(each.required_total),
        f"{each.weighted_served:.4f}",
        digits.swr(each.swr_worst),
        "" if each.loss_db is None else f"{each.loss_db:.3f}",
        "" if each.cost is None else f"{each.cost:.4f}",
        digits.text_cell("; ".join(map(_band, each.bands))),
        digits.text_cell(each.why),
    )


def _band(outcome: BandOutcome) -> str:
    part = f" {share(outcome.served_fraction)}" if outcome.service == "partly served" else ""
    return f"{outcome.name} {outcome.service}{part}"


def _in_parts(texts: Iterable[str]) -> Iterator[str]:
    """Texts joined to parts: each part sent costs about as much however long it is."""
    part, length = [], 0
    for text in texts:
        part.append(text)
        length += len(text)
        if length >= _PART_CHARACTERS:
            yield "".join(part)
            part, length = [], 0
    if part:
        yield "".join(part)


def _row(cells: Sequence[str]) -> str:
    sheet = io.StringIO(newline="")
    csv.writer(sheet, dialect="excel").writerow(cells)
    return sheet.getvalue()
