"""What to relax where not every required band can be had: the nearest achievable, in words."""

from __future__ import annotations

from math import ceil

from service.contracts.candidate import Candidate
from service.contracts.formats import listed, metres, mhz, ratio, swr
from service.contracts.quantities import wavelength_m
from service.contracts.request import DesignRequest
from worker.search.scan import Scan

#: A half wave of wire over ground is about this many wavelengths (common practice: 0.47 to 0.48).
_HALF_WAVE_WAVELENGTHS = 0.475


def relaxations(request: DesignRequest, found: Scan, best: Candidate) -> tuple[str, ...]:
    """One sentence for each required band that the best wire does not serve whole."""
    missed = {each.name for each in best.bands if each.required and each.service != "served"}
    sentences: list[str] = []
    for index, band in enumerate(request.bands):
        if band.name not in missed:
            continue
        lowest, pick = found.closest.swr_worst[index], found.closest.picks[index]
        half_wave_m = _HALF_WAVE_WAVELENGTHS * wavelength_m(band.centre_mhz)
        wire = f"{metres(pick.length_m)} m through {ratio(pick.ratio)}"
        unmatched = request.feed.matching == "none"
        or_match = ", or a matching network for the band" if unmatched else ""
        if lowest <= band.swr_limit:
            sentences.append(
                f"{band.name} can be served whole by {wire}, but not by one wire together with "
                "all the others: take a set of dipoles, or let one of the bands be wished for."
            )
        elif request.site.longest_wire_m < half_wave_m:
            needed_m = half_wave_m + 2.0 * request.site.end_allowance_m
            sentences.append(
                f"{band.name} needs about {metres(half_wave_m)} m of wire for a half wave and "
                f"{metres(request.site.longest_wire_m)} m fit: a span of {metres(needed_m)} m or "
                f"more would do{or_match}."
            )
        else:
            # Rounded up, so that the limit named is one that holds.
            enough = ceil(10.0 * lowest + 1e-6) / 10.0
            sentences.append(
                f"{band.name} reaches from {mhz(band.low_mhz)} to {mhz(band.high_mhz)} MHz and no "
                f"wire here keeps its SWR below {swr(lowest)} over all of it ({wire}): an SWR "
                f"limit of {enough:.1f} can be met; or split the band, permit other transformer "
                f"ratios{or_match}."
            )
    return tuple(sentences)


def set_in_words(names: list[tuple[str, int]], unserved: list[str]) -> str:
    """What each dipole of a set serves, and what none does."""
    by_rank: dict[int, list[str]] = {}
    for band, rank in names:
        by_rank.setdefault(rank, []).append(band)
    clauses = [
        f"candidate {rank} serves {listed(bands)}" for rank, bands in sorted(by_rank.items())
    ]
    text = listed(clauses)
    text = text[:1].upper() + text[1:] + "."
    if unserved:
        text += f" None of them serves {listed(unserved)} whole."
    return text + " Each has its own feed; they are not to be tied together."
