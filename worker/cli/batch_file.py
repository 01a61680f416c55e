"""A batch as a file: one JSON document, or one request a line."""

from __future__ import annotations

import io
import json
import sys
from pathlib import Path
from typing import Final

from service.contracts.batch import BatchRequest, parse_batch_json, parse_batch_lines
from service.errors import Fault, RequestRefused

_LINES_SUFFIXES: Final = (".ndjson", ".jsonl")


def read_batch(
    file: str, *, name: str | None, priority: str | None, recompute: bool | None
) -> BatchRequest:
    """Read a batch from a file, or from standard input for ``-``.

    A file whose name ends in ``.ndjson`` or ``.jsonl``, or whose first line is a request by
    itself, holds one request a line. What is said beside the file goes over what stands in it.

    Raises
    ------
    RequestRefused
        If it cannot be read, or with every fault in it.
    """
    try:
        body = sys.stdin.buffer.read() if file == "-" else Path(file).read_bytes()
    except OSError as error:
        fault = Fault(
            "FILE",
            file,
            f"it cannot be read: {error.strerror or error}.",
            "Name a batch as a JSON file, or as a file with one design request a line.",
            "file-unreadable",
        )
        raise RequestRefused([fault]) from error
    if Path(file).suffix in _LINES_SUFFIXES or _begins_with_a_request(body):
        lines = io.BytesIO(body)
        return parse_batch_lines(lines, name=name, priority=priority, recompute=recompute)
    return parse_batch_json(body, name=name, priority=priority, recompute=recompute)


def _begins_with_a_request(body: bytes) -> bool:
    first = body.lstrip().partition(b"\n")[0]
    try:
        found = json.loads(first)
    except ValueError:
        return False
    return isinstance(found, dict) and "designs" not in found
