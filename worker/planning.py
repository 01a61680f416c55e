"""The whole job: a design request in, ranked candidates with their reports out.

A pure function of the request, but for the time it takes, which it reports.
"""

from __future__ import annotations

from collections.abc import Callable
from time import perf_counter

from service.contracts.candidate import DesignResult, PlannedDesign
from service.contracts.request import DesignRequest
from worker.engine import ENGINE_VERSION
from worker.search.appraisal import appraise
from worker.search.scan import scan
from worker.translation.outcome import candidate_of, feed_report_of
from worker.translation.provenance import ground_in_words, notes_on, provenance_of
from worker.translation.wires import search_space

#: Called with the part done, from 0 to 1, and the step in words.
ProgressCallback = Callable[[float, str], None]

#: The scan takes about this part of the time, the close look at the leaders the rest.
_SCAN_PART = 0.75


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
    space = search_space(request)
    found = scan(space, request.candidates, lambda part, step: progress(_SCAN_PART * part, step))
    candidates, reports = [], []
    solves = found.solves
    for index, pick in enumerate(found.picks):
        part = _SCAN_PART + (1.0 - _SCAN_PART) * index / len(found.picks)
        progress(part, f"appraising candidate {index + 1} of {len(found.picks)}")
        appraisal = appraise(space, pick)
        solves += appraisal.solves
        candidates.append(candidate_of(request, appraisal, index + 1))
        provenance = provenance_of(request, appraisal)
        reports.append(feed_report_of(request, appraisal, index + 1, provenance))
    progress(1.0, "done")
    result = DesignResult(
        engine_version=ENGINE_VERSION,
        ground=ground_in_words(request),
        combinations=found.combinations,
        solves=solves,
        search_s=round(perf_counter() - started_s, 3),
        notes=notes_on(request, space),
        candidates=tuple(candidates),
    )
    return PlannedDesign(result=result, reports=tuple(reports))
