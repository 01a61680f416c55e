"""Stored figures laid out as a page's tables want them: rows and columns, nothing computed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from service.contracts.candidate import (
    BandOutcome,
    Candidate,
    Departure,
    DesignResult,
    DipoleSet,
    Steadiness,
)
from service.contracts.exposure import ExposureDistance, LimitsTold, limits_told
from service.contracts.radiation import Radiation
from service.contracts.report import FeedReport, Matching, MatchingPart

#: Every this many places of the current make a line in the table behind its plot.
PLACE_STRIDE: Final = 2


@dataclass(frozen=True, slots=True)
class SteadinessTable:
    """One row a band, one column a departure."""

    departures: tuple[str, ...]
    rows: tuple[tuple[BandOutcome, tuple[Departure | None, ...]], ...]


@dataclass(frozen=True, slots=True)
class SetsTable:
    """One row a band, one column a set: which candidate serves the band best, and how."""

    sets: tuple[DipoleSet, ...]
    rows: tuple[tuple[BandOutcome, tuple[tuple[int, BandOutcome] | None, ...]], ...]


@dataclass(frozen=True, slots=True)
class Pictures:
    """Which pictures a report tells enough for, and where along the wire a table tells its current.

    ``places_m`` pairs the index of a place with its distance from the end in m.
    """

    smith: bool
    current: bool
    radiation: bool
    places_m: tuple[tuple[int, float], ...]


@dataclass(frozen=True, slots=True)
class ExposureTable:
    """One row a band, one column a standard and population.

    ``powers`` has the powers that bands were looked at with, which are all alike: while
    transmitting and on average, in W, and the latter as per cent of the former.
    """

    limits: tuple[LimitsTold, ...]
    rows: tuple[tuple[str, tuple[ExposureDistance | None, ...]], ...]
    powers: tuple[tuple[float, float, str], ...]


def pictures_of(report: FeedReport) -> Pictures:
    """What of a report can be drawn; one stored by an earlier release tells less."""
    currents = [band.current for band in report.bands]
    steps = 0 if currents[0] is None else len(currents[0].size) - 1
    return Pictures(
        smith=all(band.centre.reflection_deg is not None for band in report.bands),
        current=None not in currents,
        radiation=any(band.radiation for band in report.bands),
        places_m=tuple(
            (index, report.length_m * index / steps) for index in range(0, steps + 1, PLACE_STRIDE)
        )
        if steps
        else (),
    )


def pattern_rows(found: Radiation) -> list[tuple[int, float, float, float]]:
    """Angle in degrees, gain across, along and around the wire in dBi, every ten degrees."""
    stride = round(10.0 / found.step_deg)
    quarter = len(found.broadside_dbi) - 1
    return [
        (
            round(index * found.step_deg),
            found.broadside_dbi[min(index, 2 * quarter - index)],
            found.end_on_dbi[index],
            found.around_dbi[index],
        )
        for index in range(0, 2 * quarter + 1, stride)
    ]


def steadiness_table(candidate: Candidate, held: Steadiness) -> SteadinessTable:
    """How each band that is served as planned fares in each departure."""
    whats = tuple(dict.fromkeys(each.what for each in held.departures))
    found = {(each.band, each.what): each for each in held.departures}
    rows = tuple(
        (outcome, tuple(found.get((outcome.name, what)) for what in whats))
        for outcome in candidate.bands
    )
    return SteadinessTable(whats, tuple(row for row in rows if any(row[1])))


def sets_table(result: DesignResult) -> SetsTable:
    """Who serves which band in each set of dipoles."""
    by_rank = {each.rank: each for each in result.candidates}
    rows = []
    for index, outcome in enumerate(result.candidates[0].bands):
        cells: list[tuple[int, BandOutcome] | None] = []
        for each in result.sets:
            rank = dict(each.serves).get(outcome.name)
            cells.append(None if rank is None else (rank, by_rank[rank].bands[index]))
        rows.append((outcome, tuple(cells)))
    return SetsTable(result.sets, tuple(rows))


def matching_parts(network: Matching) -> tuple[MatchingPart | None, MatchingPart | None]:
    """The series and the shunt part of a network, None where it has none."""
    by_place = {each.place: each for each in network.parts}
    return by_place.get("series"), by_place.get("shunt")


def has_line(report: FeedReport) -> bool:
    """Whether a feed line leads from the feed point to the transmitter."""
    return any(band.centre.transmitter_swr is not None for band in report.bands)


def exposure_table(report: FeedReport) -> ExposureTable | None:
    """How far to stay away on each band; None where no band of the report tells it."""
    told = [each.exposure for each in report.bands]
    limits = limits_told(told)
    if not limits:
        return None
    return ExposureTable(
        limits,
        tuple(
            (band.name, tuple(None if each is None else each.distance(limit) for limit in limits))
            for band, each in zip(report.bands, told, strict=True)
        ),
        tuple(
            dict.fromkeys(
                (each.peak_power_w, each.average_power_w, f"{each.duty_percent:g}")
                for each in told
                if each is not None
            )
        ),
    )
