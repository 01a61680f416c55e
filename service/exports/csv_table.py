"""The feed-impedance report as comma-separated values (RFC 4180)."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator
from typing import Final

from service.contracts import formats
from service.contracts.report import BandReport, FeedReport, ReportPoint
from service.exports import digits
from service.exports.report_figures import figures_of

#: Media type of RFC 4180, section 3; the first line names the columns.
MEDIA_TYPE: Final = "text/csv; charset=utf-8; header=present"

_POINT_COLUMNS: Final = (
    "frequency_mhz",
    "resistance_ohm",
    "reactance_ohm",
    "reflection",
    "swr",
    "transmitter_swr",
    "line_loss_db",
)
FEED_COLUMNS: Final = ("band", "place", *_POINT_COLUMNS, "figure", "value", "unit")


def feed_report_csv(report: FeedReport) -> str:
    """The report as one table: a line a point, bands in the order of the request, then figures.

    Voltages, exposure and hanging belong to no one frequency: they follow the points, a line a
    figure, with its name, value and unit in the last three columns, which are empty for points.

    Parameters
    ----------
    report : FeedReport
        As stored. Resistance and reactance are those at the feed point; reflection and SWR
        those on the line side of the transformer and the matching network. The last two of
        the columns of a point belong to the other end of the feed line and are empty without one.

    Returns
    -------
    str
        Lines ended by CR LF, the first of them the names of the columns.
    """
    sheet = io.StringIO(newline="")
    writer = csv.writer(sheet, dialect="excel")
    writer.writerow(FEED_COLUMNS)
    for band in report.bands:
        name = digits.text_cell(band.name)
        writer.writerows(
            (name, place, *_figures(point), "", "", "") for place, point in _places(band)
        )
    no_point = [""] * len(_POINT_COLUMNS)
    for each in figures_of(report):
        where = (digits.text_cell(each.band), digits.text_cell(each.place))
        writer.writerow((*where, *no_point, each.figure, each.value, each.unit))
    return sheet.getvalue()


def _places(band: BandReport) -> Iterator[tuple[str, ReportPoint]]:
    """Every point of a band by rising frequency; a grid point on a mark is left to the mark."""
    marks = {"low edge": band.low, "centre": band.centre, "high edge": band.high}
    marked_mhz = {point.frequency_mhz for point in marks.values()}
    points = [*marks.items()]
    points += [("grid", point) for point in band.grid if point.frequency_mhz not in marked_mhz]
    yield from sorted(points, key=lambda each: each[1].frequency_mhz)


def _figures(point: ReportPoint) -> tuple[str, ...]:
    return (
        formats.edge_mhz(point.frequency_mhz),
        digits.resistance_ohm(point.resistance_ohm),
        digits.resistance_ohm(point.reactance_ohm),
        digits.reflection(point.reflection),
        digits.swr(point.swr),
        "" if point.transmitter_swr is None else digits.swr(point.transmitter_swr),
        "" if point.line_loss_db is None else f"{point.line_loss_db:.3f}",
    )
