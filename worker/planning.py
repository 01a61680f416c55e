"""The whole job: a design request in, ranked candidates with their reports out.

A pure function of the request, but for the time it takes, which it reports. Its steps: hang
the wires the request allows, scan them, look closely at those that lead, see how they hold up,
complete them to sets where one wire is not enough, find what they carry and radiate, and put it
all in words.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cached_property, partial
from time import perf_counter
from typing import Final

import numpy as np

from service.contracts.candidate import (
    Candidate,
    DesignResult,
    DipoleSet,
    PlannedDesign,
    TradeOff,
)
from service.contracts.report import FeedReport
from service.contracts.request import LARGEST_SET, MOST_CANDIDATES, DesignRequest
from worker.engine import ENGINE_VERSION
from worker.search.appraisal import Appraisal, appraise
from worker.search.ranking import Contender, Pick, distinct_leaders, rank_keys
from worker.search.scan import Scan, scan
from worker.search.scoring import Merit
from worker.search.sets import ChosenSet, best_sets
from worker.search.steadiness import hold
from worker.search.trade_off import front_of, gains_of
from worker.translation.departures import departures_of
from worker.translation.outcome import Look, candidate_of, feed_report_of
from worker.translation.pictures import BandPicture, pictures_of
from worker.translation.provenance import ground_in_words, notes_on
from worker.translation.relaxing import relaxations, set_in_words
from worker.translation.wires import Hanging

#: Called with the part done, from 0 to 1, and the step in words.
ProgressCallback = Callable[[float, str], None]

#: The scan takes about this part of the time, looking at the leaders and the sets the rest.
_SCAN_PART: Final = 0.6
_LOOK_PART: Final = 0.9
_DRAW_PART: Final = 0.97
_REPORT_PART: Final = 0.98
#: Wires drawn between two words of progress.
_DRAWN_AT_A_TIME: Final = 4

#: Sets proposed unasked, where no single wire serves all required bands, are of up to so many.
_USUAL_SET: Final = 3
_MOST_IN_POOL: Final = 150
_MOST_ON_FRONT: Final = 40
_MOST_FOR_FRONT: Final = 2000


def plan(request: DesignRequest, progress: ProgressCallback) -> PlannedDesign:
    """Plan the dipoles that serve a request best.

    Parameters
    ----------
    request : DesignRequest
    progress : callable
        Called with the part done, from 0 to 1, and the step in words; whatever it raises
        ends the planning.

    Raises
    ------
    EngineError
        If a wire of the request lies outside what the models cover.
    """
    started_s = perf_counter()
    job = _Job(request, progress)
    looks = job.leaders()
    candidates = [candidate_of(request, look, rank) for rank, look in enumerate(looks, 1)]
    chosen = job.sets(candidates[0])
    looks = job.with_members(looks, chosen)
    candidates = [candidate_of(request, look, rank) for rank, look in enumerate(looks, 1)]
    pictures = job.pictures(looks)
    reports: list[FeedReport] = []
    for rank, (look, drawn) in enumerate(zip(looks, pictures, strict=True), 1):
        progress(_REPORT_PART, f"writing report {rank} of {len(looks)}")
        reports.append(feed_report_of(request, look, rank, drawn))
    result = DesignResult(
        engine_version=ENGINE_VERSION,
        ground=ground_in_words(request),
        combinations=job.found.combinations,
        solves=job.solves,
        search_s=round(perf_counter() - started_s, 3),
        notes=notes_on(request, job.found.space),
        candidates=tuple(candidates),
        map_error_percent=round(100.0 * job.found.largest_miss, 5),
        trade_off=job.trade_off(looks),
        sets=tuple(job.told(each, looks, candidates) for each in chosen),
        relax=relaxations(request, job.found, candidates[0]),
    )
    progress(1.0, "done")
    return PlannedDesign(result=result, reports=tuple(reports))


class _Job:
    """What the steps of one planning share: the wires hung, the scan, and the cost so far."""

    def __init__(self, request: DesignRequest, progress: ProgressCallback) -> None:
        self._request, self._progress = request, progress
        self._hanging = Hanging(request)
        self.found: Scan = scan(
            self._hanging.space(), lambda part, step: progress(_SCAN_PART * part, step)
        )
        self.solves = self.found.solves
        self._pool = _best_of_each_kind(self.found.contenders)
        self._appraised: dict[Pick, Appraisal] = {}

    def leaders(self) -> list[Look]:
        """The distinct leaders, looked at closely, in the order the request asks for."""
        most = self._request.candidates
        by_worst_case = self._request.rank_by == "worst-case"
        # The best in the worst case may lead only the second row as planned.
        wanted = min(2 * most, MOST_CANDIDATES) if by_worst_case else most
        picks = [each.pick for each in distinct_leaders(list(self.found.contenders), wanted)]
        # Neighbours of two kinds may be cut to one length.
        refined = dict.fromkeys(self.found.refined(pick) for pick in picks)
        best = self.found.contenders[0]
        likely = self._sets_are_wanted(best.required_served)
        # Looked at together they cost less than the members of sets by themselves later.
        self._appraise((*refined, *(self._members(self._best_sets) if likely else ())))
        looks = self._look_at(tuple(refined), (_SCAN_PART, _LOOK_PART), "candidate")
        # Cut, and looked at closely, they may not come in the order of the scan.
        looks.sort(key=self._key)
        if by_worst_case:
            looks.sort(key=lambda look: look.held.worst.key() if look.held else (0, 0.0, 0.0))
        return looks[:most]

    def _key(self, look: Look) -> tuple[float, ...]:
        """Sorts wires looked at closely as the scan sorts all."""
        each = candidate_of(self._request, look, 0)
        alone = Merit(
            np.array([each.required_served]),
            np.array([each.weighted_served]),
            np.array([each.swr_worst]),
            np.array([each.loss_db or 0.0]),
        )
        keys = rank_keys(alone, np.array([each.length_m]), np.array([each.cost or 0.0]))
        return tuple(keys[0].tolist())

    def sets(self, best: Candidate) -> tuple[ChosenSet, ...]:
        """The best sets of two or more, where asked for or where one wire is not enough."""
        return self._best_sets if self._sets_are_wanted(best.required_served) else ()

    def _sets_are_wanted(self, required_served: int) -> bool:
        required = sum(band.required for band in self._request.bands)
        return self._request.largest_set is not None or required_served < required

    @cached_property
    def _best_sets(self) -> tuple[ChosenSet, ...]:
        bands = self._request.bands
        chosen = best_sets(
            np.array([each.served for each in self._pool]),
            np.array([band.required for band in bands]),
            np.array([band.weight for band in bands]),
            min(self._request.largest_set or _USUAL_SET, LARGEST_SET),
        )
        return tuple(each for each in chosen if len(each.members) > 1)

    def _members(self, chosen: tuple[ChosenSet, ...]) -> tuple[Pick, ...]:
        """The members of some sets, cut to length."""
        members = dict.fromkeys(member for each in chosen for member in each.members)
        picks = (self.found.refined(self._pool[member].pick) for member in members)
        return tuple(dict.fromkeys(picks))

    def with_members(self, looks: list[Look], chosen: tuple[ChosenSet, ...]) -> list[Look]:
        """The leaders and, after them, the members of sets that are not among them."""
        picks = self._members(chosen)
        missing = [pick for pick in picks if _rank_of(looks, pick) is None]
        # A set is told by the ranks of its members, so they go before the last leaders.
        spare = [look for look in looks if look.appraisal.pick not in picks]
        too_many = max(len(looks) + len(missing) - MOST_CANDIDATES, 0)
        left_out = {id(look) for look in spare[len(spare) - too_many :]}
        kept = [look for look in looks if id(look) not in left_out]
        return kept + self._look_at(tuple(missing), (_LOOK_PART, _DRAW_PART), "member of a set")

    def told(self, chosen: ChosenSet, looks: list[Look], candidates: list[Candidate]) -> DipoleSet:
        """A set by the ranks of its members, with what each serves as looked at closely."""
        ranks = {
            _rank_of(looks, self.found.refined(self._pool[member].pick))
            for member in chosen.members
        }
        members = [each for each in candidates if each.rank in ranks]
        serves: list[tuple[str, int]] = []
        unserved: list[str] = []
        required_served, width = 0, 0.0
        for index, band in enumerate(self._request.bands):
            best = max(members, key=lambda each: each.bands[index].served_fraction)
            outcome = best.bands[index]
            width += band.weight * outcome.served_fraction
            required_served += band.required and outcome.service == "served"
            if outcome.service != "unserved":
                serves.append((band.name, best.rank))
            if outcome.service != "served":
                unserved.append(band.name)
        return DipoleSet(
            ranks=tuple(each.rank for each in members),
            required_served=required_served,
            required_total=sum(band.required for band in self._request.bands),
            weighted_served=round(width / sum(band.weight for band in self._request.bands), 4),
            serves=tuple(serves),
            unserved=tuple(unserved),
            why=set_in_words(serves, unserved),
        )

    def pictures(self, looks: list[Look]) -> list[list[BandPicture]]:
        """Current and pattern of every wire looked at, at the centre of each band."""
        pictures: list[list[BandPicture]] = []
        for start in range(0, len(looks), _DRAWN_AT_A_TIME):
            self._progress(_DRAW_PART, f"drawing {len(looks)} currents and patterns")
            some = looks[start : start + _DRAWN_AT_A_TIME]
            pictures += pictures_of(
                [self._hanging.wire(look.way).hung for look in some],
                [look.appraisal.pick.length_m for look in some],
                [1e6 * band.centre_mhz for band in self._request.bands],
            )
        return pictures

    def trade_off(self, looks: list[Look]) -> tuple[TradeOff, ...]:
        """The front of all criteria, in the order of the ranking."""
        front = front_of(self.found.contenders[:_MOST_FOR_FRONT], _MOST_ON_FRONT)
        return tuple(self._on_front(each, looks) for each in front)

    def _on_front(self, contender: Contender, looks: list[Look]) -> TradeOff:
        way = self._hanging.ways[contender.pick.wire]
        conductor = way.conductor
        has_line = self._request.feed.feed_line is not None
        return TradeOff(
            length_m=round(contender.pick.length_m, 3),
            conductor=conductor.label,
            height_m=way.height_m,
            feed_fraction=way.feed_fraction,
            transformer_ratio=contender.pick.ratio,
            required_served=contender.required_served,
            weighted_served=round(contender.weighted_served, 4),
            swr_worst=round(contender.swr_worst, 3),
            loss_db=round(contender.loss_db, 2) if has_line else None,
            cost=None if conductor.price_per_m is None else round(contender.cost, 2),
            rank=_rank_of(looks, self.found.refined(contender.pick)),
        )

    def _appraise(self, picks: tuple[Pick, ...]) -> None:
        """Appraise wires that have not been yet, together."""
        picks = tuple(pick for pick in dict.fromkeys(picks) if pick not in self._appraised)
        if not picks:
            return
        tell = partial(self._progress, _SCAN_PART, f"looking at {len(picks)} wires")
        maps = tuple(self.found.maps[pick.wire].maps for pick in picks)
        appraisals = appraise(self.found.space, picks, maps, tell)
        self._appraised.update(zip(picks, appraisals, strict=True))
        self.solves += sum(each.solves for each in appraisals)

    def _look_at(
        self, picks: tuple[Pick, ...], parts: tuple[float, float], what: str
    ) -> list[Look]:
        """Look closely at wires: what they do, how they hold up, what would gain."""
        self._appraise(picks)
        looks: list[Look] = []
        for index, pick in enumerate(picks):
            part = parts[0] + (parts[1] - parts[0]) * index / len(picks)
            step = f"judging {what} {index + 1} of {len(picks)}"
            tell = partial(self._progress, part, step)
            looks.append(self._judged(self._appraised[pick], tell))
        return looks

    def _judged(self, appraisal: Appraisal, tell: Callable[[], None]) -> Look:
        tell()
        pick = appraisal.pick
        way = self._hanging.ways[pick.wire]
        departures = departures_of(self._hanging, way)
        held = None
        if departures:
            planned = np.array([band.served_fraction for band in appraisal.bands])
            held = hold(self.found.space, pick, departures, planned, tell)
        self.solves += held.solves if held else 0
        return Look(way, appraisal, gains_of(self.found, pick), held)


def _best_of_each_kind(contenders: tuple[Contender, ...]) -> list[Contender]:
    """The first contender of every kind: all that a set could need."""
    first: dict[object, Contender] = {}
    for each in contenders:
        if each.weighted_served > 0.0:
            first.setdefault(each.kind, each)
    pool = list(first.values()) or list(contenders[:1])
    return pool[:_MOST_IN_POOL]


def _rank_of(looks: list[Look], pick: Pick) -> int | None:
    for rank, look in enumerate(looks, 1):
        if look.appraisal.pick == pick:
            return rank
    return None
