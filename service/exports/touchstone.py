"""The feed-impedance report as a one-port Touchstone file, version 1.1, for network analysis.

Source of the form: "Touchstone File Format Specification", IBIS Open Forum, whose version 2.0
(2009) tells the rules of version 1.1 beside its own; written from memory.
"""

from __future__ import annotations

from typing import Final

from service.contracts import formats
from service.contracts.report import FeedReport, ReportPoint

#: No media type is registered for it; the form is ASCII text.
MEDIA_TYPE: Final = "text/plain; charset=us-ascii"


def touchstone(report: FeedReport, design_name: str) -> str:
    """The reflection of one candidate over frequency: MHz, real part, imaginary part.

    Parameters
    ----------
    report : FeedReport
        As stored. S11 is worked out from its R and X at the feed point and its transformer, so
        that the whole sweep is for one plane: the line side of the transformer, against the
        reference resistance. An L-network that is switched with the band is not in it.
    design_name : str
        For a comment; what is not ASCII is written by its code point.

    Returns
    -------
    str
        Frequencies rise and none comes twice.
    """
    lines = [f"! {each}" for each in _comments(report, design_name)]
    # repr gives the shortest decimals that read back as the same number.
    lines.append(f"# MHz S RI R {report.reference_ohm!r}")
    for point in _merged(report):
        s11 = _reflection(point, report)
        lines.append(f"{point.frequency_mhz:.6f} {s11.real:.12f} {s11.imag:.12f}")
    return "\n".join(lines) + "\n"


def _comments(report: FeedReport, design_name: str) -> list[str]:
    height = "" if report.height_m is None else f", {formats.metres(report.height_m)} m high"
    place = formats.feed_place(report.feed_fraction, report.length_m)
    limits = "transmitter" if report.reference_point == "transmitter" else "feed point"
    ratio = formats.ratio(report.transformer_ratio)
    wire = f"{formats.metres(report.length_m)} m of {report.conductor}{height}, fed {place}"
    said = [
        f"Design: {design_name}",
        f"Candidate: {report.rank}, {wire}",
        f"Reference plane: at the antenna, on the line side of its {ratio} transformer (ideal)",
        f"Reference resistance: {report.reference_ohm:g} ohm",
        f"Reference point of the SWR limits of this design: {limits}. No feed line is in S11",
    ]
    if any(band.matching is not None for band in report.bands):
        said.append("The L-networks that match single bands are not in S11: they follow this plane")
    said.append(f"Model: {report.provenance.model}; engine {report.provenance.engine_version}")
    return [_in_ascii(each) for each in said]


def _in_ascii(text: str) -> str:
    """On one line whatever the name holds: what follows a line break would be read as data."""
    return " ".join(text.split()).encode("ascii", "backslashreplace").decode("ascii")


def _merged(report: FeedReport) -> list[ReportPoint]:
    """All stored points by rising frequency; edges and centres, solved directly, come first."""
    marks = [point for band in report.bands for point in (band.low, band.centre, band.high)]
    grids = [point for band in report.bands for point in band.grid]
    found: dict[float, ReportPoint] = {}
    for point in (*marks, *grids, *report.sweep):
        found.setdefault(round(point.frequency_mhz, 6), point)
    return [found[frequency_mhz] for frequency_mhz in sorted(found)]


def _reflection(point: ReportPoint, report: FeedReport) -> complex:
    # (Z - Z0) / (Z + Z0): D. M. Pozar, "Microwave Engineering", 4th ed., 2012, eq. (2.35).
    seen_ohm = complex(point.resistance_ohm, point.reactance_ohm) / report.transformer_ratio
    return (seen_ohm - report.reference_ohm) / (seen_ohm + report.reference_ohm)
