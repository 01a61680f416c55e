"""What a planner is told to relax: each advice in words, and that it holds when followed."""

from __future__ import annotations

import json
from typing import Any

import pytest

from service.contracts.candidate import Candidate, DesignResult
from service.contracts.request import DesignRequest, parse_request
from tests.service.samples import sample_planned, sample_request
from tests.unit.search.open_line import space_of
from worker.planning import plan
from worker.search.ranking import Contender, Pick
from worker.search.scan import Closest, Scan
from worker.translation.relaxing import relaxations, set_in_words


def found_with(*closest: tuple[float, Pick], contenders: tuple[Contender, ...] = ()) -> Scan:
    swr, picks = zip(*closest, strict=True)
    return Scan(
        space=space_of(),
        contenders=contenders,
        closest=Closest(swr, picks),
        maps=(),
        combinations=0,
        solves=0,
        largest_miss=0.0,
    )


def candidate_that_serves(request: DesignRequest, *services: str) -> Candidate:
    candidate = sample_planned(request).result.candidates[0]
    bands = tuple(
        outcome.model_copy(update={"service": service, "required": band.required})
        for outcome, service, band in zip(candidate.bands, services, request.bands, strict=True)
    )
    return candidate.model_copy(update={"bands": bands})


def one_band(**changes: object) -> DesignRequest:
    wanted = {"name": "40m", "low_mhz": 7.0, "high_mhz": 7.2, "swr_limit": 1.5}
    return sample_request(bands=[wanted], **changes)


def contender(required_served: int) -> Contender:
    return Contender((0.0,), ((1, 2),), Pick(0, 1.0, 20.0), required_served=required_served)


# -------------------------------------------------------------------- what is said, and when
def test_nothing_is_to_be_relaxed_where_all_required_bands_are_served() -> None:
    request = sample_request()
    best = candidate_that_serves(request, "served", "served", "unserved")
    assert relaxations(request, found_with(*[(9.0, Pick(0, 1.0, 20.0))] * 3), best) == ()


def test_a_band_that_no_wire_keeps_within_its_limit_is_told_a_limit_that_holds() -> None:
    request = one_band()
    best = candidate_that_serves(request, "partly served")
    (text,) = relaxations(request, found_with((1.73, Pick(0, 2.0, 20.31))), best)
    assert text == (
        "40m reaches from 7.000 to 7.200 MHz and no wire here keeps its SWR below 1.73 over all of "
        "it (20.31 m through 2:1): an SWR limit of 1.8 can be met; or split the band, permit "
        "other transformer ratios, or a matching network for the band."
    )


def test_a_limit_is_rounded_up_far_enough_for_cutting_too() -> None:
    request = one_band()
    best = candidate_that_serves(request, "partly served")
    (text,) = relaxations(request, found_with((1.795, Pick(0, 2.0, 20.31))), best)
    assert "an SWR limit of 1.9 can be met" in text


@pytest.mark.parametrize(("lowest", "said"), [(9.95, "below 9.95"), (340.0, "below 100")])
def test_no_limit_is_advised_that_a_request_may_not_ask_for(lowest: float, said: str) -> None:
    request = one_band()
    best = candidate_that_serves(request, "unserved")
    (text,) = relaxations(request, found_with((lowest, Pick(0, 2.0, 20.31))), best)
    assert "can be met" not in text
    assert f"its SWR {said} over all of it" in text
    assert "split the band" in text


def test_a_network_is_not_advised_where_there_is_one() -> None:
    request = one_band(feed={"matching": "per-band"})
    best = candidate_that_serves(request, "partly served")
    (text,) = relaxations(request, found_with((1.73, Pick(0, 2.0, 20.31))), best)
    assert "network" not in text
    assert text.endswith("permit other transformer ratios.")


def test_a_site_too_short_for_a_half_wave_is_told_the_span_it_needs() -> None:
    request = one_band(site={"span_m": 19.0, "end_allowance_m": 0.5, "height_m": 9.0})
    best = candidate_that_serves(request, "unserved")
    (text,) = relaxations(request, found_with((40.0, Pick(0, 1.0, 18.0))), best)
    # 0.475 wavelengths at 7.1 MHz are 20.06 m, and the allowances add 1 m.
    assert text == (
        "40m needs about 20.06 m of wire for a half wave and 18.00 m fit: a span of 21.06 m or "
        "more would do, or a matching network for the band."
    )


def test_a_band_that_only_another_wire_serves_is_told_of_sets() -> None:
    request = sample_request()
    best = candidate_that_serves(request, "unserved", "served", "unserved")
    picks = [(1.4, Pick(0, 2.0, 20.31)), (1.3, Pick(0, 1.0, 7.0)), (9.0, Pick(0, 1.0, 9.0))]
    (text,) = relaxations(request, found_with(*picks, contenders=(contender(1),)), best)
    assert text == (
        "40m can be served whole by 20.31 m through 2:1, but not by one wire together with all "
        "the others: take a set of dipoles, or let one of the bands be wished for."
    )


def test_where_one_wire_serves_all_as_planned_the_worst_case_is_named() -> None:
    request = sample_request(rank_by="worst-case")
    best = candidate_that_serves(request, "unserved", "served", "unserved")
    picks = [(1.4, Pick(0, 2.0, 20.31)), (1.3, Pick(0, 1.0, 7.0)), (9.0, Pick(0, 1.0, 9.0))]
    (text,) = relaxations(request, found_with(*picks, contenders=(contender(2),)), best)
    assert "not by one wire" not in text
    assert "rank by the nominal wire" in text


def test_a_wished_band_is_not_mourned() -> None:
    request = sample_request()
    best = candidate_that_serves(request, "served", "unserved", "unserved")
    found = found_with(*[(5.0, Pick(0, 1.0, 20.0))] * 3)
    (text,) = relaxations(request, found, best)
    assert text.startswith("15m ")


# ---------------------------------------------------------------------- that the advice holds
def planned(fields: dict[str, Any]) -> DesignResult:
    return plan(parse_request(json.dumps(fields)), lambda _part, _step: None).result


BASE: dict[str, Any] = {
    "bands": [{"name": "80m", "low_mhz": 3.5, "high_mhz": 3.8, "swr_limit": 1.6}],
    "site": {"span_m": 44.0, "end_allowance_m": 1.0, "ground": "free-space"},
    "stock": {"conductors": [{"diameter_mm": 2.0}]},
    "feed": {"transformer_ratios": [1.0, 1.5]},
    "candidates": 1,
    "tolerances": None,
}


def test_the_limit_that_can_be_met_is_met_when_asked_for() -> None:
    (advice,) = planned(BASE).relax
    limit = float(advice.partition("an SWR limit of ")[2].partition(" ")[0])
    band = BASE["bands"][0]
    relaxed = planned(BASE | {"bands": [band | {"swr_limit": limit}]})
    assert (relaxed.candidates[0].required_served, relaxed.relax) == (1, ())
    # And it is the lowest such limit to a tenth.
    closer = planned(BASE | {"bands": [band | {"swr_limit": round(limit - 0.2, 1)}]})
    assert closer.candidates[0].required_served == 0


def test_the_span_that_would_do_does() -> None:
    short = BASE | {
        "bands": [
            {"name": "40m", "low_mhz": 7.0, "high_mhz": 7.1},
            {"name": "30m", "low_mhz": 10.1, "high_mhz": 10.15, "required": False},
        ],
        "site": BASE["site"] | {"span_m": 19.0},
    }
    (advice,) = planned(short).relax
    span_m = float(advice.partition("a span of ")[2].partition(" ")[0])
    longer = planned(short | {"site": BASE["site"] | {"span_m": span_m}})
    assert (longer.candidates[0].required_served, longer.relax) == (1, ())


def test_bands_that_no_wire_serves_together_come_with_a_set_that_does() -> None:
    both = BASE | {
        "bands": [
            {"name": "40m", "low_mhz": 7.0, "high_mhz": 7.1},
            {"name": "30m", "low_mhz": 10.1, "high_mhz": 10.15},
        ],
        "site": BASE["site"] | {"span_m": 24.0},
    }
    result = planned(both)
    assert len(result.relax) == 1
    assert "take a set of dipoles" in result.relax[0]
    assert result.sets[0].required_served == 2
    assert result.sets[0].unserved == ()


# ----------------------------------------------------------------------------------- sets
def test_a_set_in_words() -> None:
    text = set_in_words([("40m", 2), ("15m", 2), ("30m", 1)], ["20m"])
    assert text == (
        "Candidate 1 serves 30m and candidate 2 serves 40m and 15m. None of them serves 20m whole. "
        "Each has its own feed; they are not to be tied together."
    )


def test_a_set_that_serves_all_leaves_none_out() -> None:
    assert "None of them" not in set_in_words([("40m", 1), ("15m", 3)], [])
