"""What to relax where not every required band can be had: the nearest achievable, in words."""

from __future__ import annotations

from math import ceil
from typing import Final

from service.contracts.bands import Band
from service.contracts.candidate import Candidate
from service.contracts.formats import listed, metres, mhz, ratio, swr
from service.contracts.quantities import HIGHEST_SWR_LIMIT, wavelength_m
from service.contracts.request import DesignRequest
from worker.search.scan import Scan

#: A half wave of wire over ground is about this many wavelengths (common practice: 0.47 to 0.48).
_HALF_WAVE_WAVELENGTHS: Final = 0.475

#: Cutting a wire to the centimetre may raise its SWR by this ratio.
_CUT: Final = 1.01
#: Ratios from here on are told as a bound.
_TOLD_AS_A_BOUND: Final = 100.0


def relaxations(request: DesignRequest, found: Scan, best: Candidate) -> tuple[str, ...]:
    """One sentence for each required band that the best wire does not serve whole."""
    missed = {each.name for each in best.bands if each.required and each.service != "served"}
    return tuple(
        _relaxed(request, band, found, index)
        for index, band in enumerate(request.bands)
        if band.name in missed
    )


def _relaxed(request: DesignRequest, band: Band, found: Scan, index: int) -> str:
    lowest, pick = found.closest.swr_worst[index], found.closest.picks[index]
    wire = f"{metres(pick.length_m)} m through {ratio(pick.ratio)}"
    half_wave_m = _HALF_WAVE_WAVELENGTHS * wavelength_m(band.centre_mhz)
    or_match = ", or a matching network for the band" if request.feed.matching == "none" else ""
    if lowest <= band.swr_limit:
        return _served_by_another(request, band, found, wire)
    if request.site.longest_wire_m < half_wave_m:
        needed_m = half_wave_m + 2.0 * request.site.end_allowance_m
        return (
            f"{band.name} needs about {metres(half_wave_m)} m of wire for a half wave and "
            f"{metres(request.site.longest_wire_m)} m fit: a span of {metres(needed_m)} m or "
            f"more would do{or_match}."
        )
    # Rounded up, and a little more for cutting, so that the limit named is one that holds.
    enough = ceil(10.0 * lowest * _CUT) / 10.0
    limit = f"an SWR limit of {enough:.1f} can be met; or " if enough <= HIGHEST_SWR_LIMIT else ""
    reach = "100" if lowest >= _TOLD_AS_A_BOUND else swr(lowest)
    return (
        f"{band.name} reaches from {mhz(band.low_mhz)} to {mhz(band.high_mhz)} MHz and no wire "
        f"here keeps its SWR below {reach} over all of it ({wire}): {limit}split the band, "
        f"permit other transformer ratios{or_match}."
    )


def _served_by_another(request: DesignRequest, band: Band, found: Scan, wire: str) -> str:
    """A band that some wire serves whole, but not the best one."""
    required = sum(each.required for each in request.bands)
    if any(each.required_served == required for each in found.contenders):
        return (
            f"{band.name} can be served whole by {wire}, but only just: other wires hold up better "
            "under the tolerances given. Narrow the tolerances, or rank by the nominal wire."
        )
    return (
        f"{band.name} can be served whole by {wire}, but not by one wire together with all the "
        "others: take a set of dipoles, or let one of the bands be wished for."
    )


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
