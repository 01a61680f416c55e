"""Stored figures laid out as a page's tables want them: rows and columns, nothing computed."""

from __future__ import annotations

from dataclasses import dataclass

from service.contracts.candidate import (
    BandOutcome,
    Candidate,
    Departure,
    DesignResult,
    DipoleSet,
    Steadiness,
)
from service.contracts.report import FeedReport, Matching, MatchingPart


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
