"""Lengths that a request bounds: what the contract refuses, and that the search keeps to them."""

from __future__ import annotations

import numpy as np
import pytest

from service.contracts.request import DesignRequest, parse_request
from service.errors import RequestRefused
from service.pages.wording import lengths_in_words
from tests.service.samples import request_json, sample_request
from worker.engine.errors import OutOfRange
from worker.planning import plan
from worker.search.space import SearchSpace
from worker.translation.wires import Hanging

ONE_BAND = {
    "bands": [{"name": "40m", "low_mhz": 7.0, "high_mhz": 7.2}],
    "stock": {"conductors": [{"awg": 12}]},
    "tolerances": None,
    "largest_set": 1,
}


def bounded(low_m: float, high_m: float) -> DesignRequest:
    return sample_request(lengths={"low_m": low_m, "high_m": high_m}, **ONE_BAND)


def space(low_m: float, high_m: float) -> SearchSpace:
    return Hanging(bounded(low_m, high_m)).space()


@pytest.mark.parametrize(
    ("low_m", "high_m", "code", "field"),
    [
        (21.0, 20.0, "lengths-swapped", "lengths.low_m"),
        (23.5, 30.0, "lengths-beyond-span", "lengths.low_m"),
        (2.0, 5.0, "lengths-too-short", "lengths.high_m"),
    ],
)
def test_lengths_that_no_wire_can_have_are_refused_by_their_field(
    low_m: float, high_m: float, code: str, field: str
) -> None:
    with pytest.raises(RequestRefused) as refused:
        parse_request(request_json(lengths={"low_m": low_m, "high_m": high_m}))
    (fault,) = refused.value.faults
    assert (fault.code, fault.field) == (code, field)


def test_without_bounds_the_site_alone_bounds_the_search() -> None:
    asked = sample_request()
    assert asked.lengths is None
    assert Hanging(asked).space().longest_m == asked.site.longest_wire_m


def test_the_search_keeps_to_the_lengths_asked_for() -> None:
    lengths_m = space(19.0, 20.0).lengths_m()
    assert lengths_m[0] == pytest.approx(19.0, rel=2e-6)
    assert lengths_m[-1] == pytest.approx(20.0)
    assert np.all(np.diff(lengths_m) > 0.0)


def test_bounds_wider_than_the_site_leave_the_search_to_the_site() -> None:
    wide = space(1.0, 400.0)
    assert wide.longest_m == wide.site_longest_m
    assert wide.shortest_m == Hanging(sample_request(**ONE_BAND)).space().shortest_m


def test_lengths_beyond_the_models_are_refused_by_the_search() -> None:
    asked = sample_request(
        bands=[{"name": "6m", "low_mhz": 50.0, "high_mhz": 54.0}],
        site={"span_m": 90.0, "height_m": 10.0},
        lengths={"low_m": 80.0, "high_m": 85.0},
    )
    with pytest.raises(OutOfRange, match="length_m"):
        Hanging(asked).space()


def test_one_length_alone_is_planned_as_it_is_asked_for() -> None:
    result = plan(bounded(20.31, 20.31), lambda _part, _step: None).result
    (candidate,) = result.candidates
    assert candidate.length_m == pytest.approx(20.31, rel=2e-6)
    assert result.notes == ("Only wires of 20.31 m were searched, as asked.",)


def test_between_bounds_the_best_length_is_that_of_the_whole_search() -> None:
    free = plan(sample_request(**ONE_BAND), lambda _part, _step: None).result.candidates[0]
    near = bounded(free.length_m - 0.5, free.length_m + 0.5)
    best = plan(near, lambda _part, _step: None).result.candidates[0]
    assert best.swr_worst == pytest.approx(free.swr_worst, rel=0.01)
    away = bounded(free.length_m + 0.4, free.length_m + 0.8)
    at_edge = plan(away, lambda _part, _step: None).result.candidates[0]
    assert at_edge.length_m == pytest.approx(free.length_m + 0.4, rel=1e-4)


def test_lengths_are_told_in_words() -> None:
    for low_m, high_m, words in (
        (19.0, 20.5, "19.00 to 20.50 m"),
        (20.0, 20.0, "20.00 m and no other"),
    ):
        lengths = bounded(low_m, high_m).lengths
        assert lengths is not None
        assert lengths_in_words(lengths) == words
