"""What was written into the form: text by the name of its field, as browsers post it.

Rows of bands and conductors carry their number in the names of their fields, ``own-2-low``.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Final
from urllib.parse import parse_qsl

from service.contracts.bands import MOST_BANDS
from service.contracts.request import LARGEST_REQUEST_BYTES
from service.contracts.stock import MOST_CONDUCTORS

Entries = Mapping[str, str]

#: What is wished of a band, of the planner's own or of a list.
WISHES: Final = ("wanted", "weight", "limit")
#: A row counts as written once one of these holds something.
_WRITTEN: Final = {"own": ("name", "low", "high"), "wire": ("size", "code", "price", "thick")}
_MOST_ROWS: Final = {"own": MOST_BANDS, "wire": MOST_CONDUCTORS}

#: A request of the most bands and conductors needs about 250.
_MOST_FIELDS: Final = 1000


def read_entries(body: bytes) -> dict[str, str]:
    """The entries of a posted form; of a name given twice the last counts.

    Raises
    ------
    ValueError
        If it is too large, or no such form.
    """
    if len(body) > LARGEST_REQUEST_BYTES:
        raise ValueError(f"a form may be at most {LARGEST_REQUEST_BYTES // 1024} KiB long")
    pairs = parse_qsl(
        body.decode("utf-8"),
        keep_blank_values=True,
        strict_parsing=bool(body),
        max_num_fields=_MOST_FIELDS,
    )
    return dict(pairs)


def written(entries: Entries, name: str) -> str:
    """What was written into a field, without spaces around it."""
    return entries.get(name, "").strip()


def rows(entries: Entries, kind: str) -> list[int]:
    """Numbers of the rows of a kind that are on the page, ``own`` or ``wire``; one at least."""
    numbers: set[int] = {0}
    for name in entries:
        first, _, rest = name.partition("-")
        number = rest.partition("-")[0]
        if first == kind and number.isascii() and number.isdigit() and len(number) <= 2:
            numbers.add(int(number))
    return sorted(numbers)


def written_rows(entries: Entries, kind: str) -> list[int]:
    """Numbers of the rows that hold anything; the others are passed over."""
    return [
        row
        for row in rows(entries, kind)
        if any(written(entries, f"{kind}-{row}-{field}") for field in _WRITTEN[kind])
    ]


def with_another_row(entries: Entries, kind: str) -> dict[str, str]:
    """The same form with an empty row more, up to what a request may hold."""
    there = rows(entries, kind)
    if len(there) >= _MOST_ROWS[kind]:
        return dict(entries)
    return {**entries, f"{kind}-{there[-1] + 1}-{_WRITTEN[kind][0]}": ""}


def with_band_moved(entries: Entries, band: Iterable[tuple[str, str]]) -> dict[str, str]:
    """The same form with a band among the planner's own, in the first row that is empty."""
    taken = set(written_rows(entries, "own"))
    row = next(number for number in range(len(taken) + 1) if number not in taken)
    return {**entries, **{f"own-{row}-{field}": value for field, value in band}}
