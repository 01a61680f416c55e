"""A sweep as comma-separated values (RFC 4180)."""

from __future__ import annotations

import csv
import io
from typing import Final

from service.contracts import formats
from service.contracts.sweep import Sweep, SweepPoint
from service.exports import digits

SWEEP_COLUMNS: Final = (
    "frequency_mhz",
    "length_m",
    "resistance_ohm",
    "reactance_ohm",
    "error_ohm",
    "reflection",
    "swr",
    "transmitter_swr",
    "line_loss_db",
)


def sweep_csv(sweep: Sweep) -> str:
    """A sweep as one table, a line a point; the last two columns are empty without a feed line."""
    sheet = io.StringIO(newline="")
    writer = csv.writer(sheet, dialect="excel")
    writer.writerow(SWEEP_COLUMNS)
    writer.writerows(_figures(point) for point in sweep.points)
    return sheet.getvalue()


def _figures(point: SweepPoint) -> tuple[str, ...]:
    return (
        formats.edge_mhz(point.frequency_mhz),
        f"{point.length_m:.4f}",
        digits.resistance_ohm(point.resistance_ohm),
        digits.resistance_ohm(point.reactance_ohm),
        digits.resistance_ohm(point.error_ohm),
        digits.reflection(point.reflection),
        digits.swr(point.swr),
        "" if point.transmitter_swr is None else digits.swr(point.transmitter_swr),
        "" if point.line_loss_db is None else f"{point.line_loss_db:.3f}",
    )
