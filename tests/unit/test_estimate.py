"""The size of a search as told beforehand, against the search itself."""

from __future__ import annotations

from typing import Any

import pytest

from service.contracts.estimate import estimate_search
from service.contracts.request import DesignRequest
from tests.service.samples import FULL, sample_request
from worker.translation.wires import Hanging

TOLD: list[dict[str, Any]] = [
    {},
    FULL,
    {"bands": [{"name": "40m", "low_mhz": 7.0, "high_mhz": 7.2}]},
    {"site": {"span_m": 400.0, "height_m": 12.0}},
    {"site": {"span_m": 24.0, "height_m": {"low_m": 8.0, "high_m": 14.0}}},
    {"bands": [{"name": "wide", "low_mhz": 10.0, "high_mhz": 14.5}]},
    {"lengths": {"low_m": 18.0, "high_m": 21.0}},
    {"lengths": {"low_m": 20.0, "high_m": 20.0}},
    {"lengths": {"low_m": 20.0, "high_m": 90.0}},
    {"stock": {"diameter_range": {"low_mm": 1.0, "high_mm": 3.0}}},
    {"feed": {"transformer_ratios": [1.0, 2.0, 4.0, 6.0, 9.0, 12.0], "positions": "anywhere"}},
]


def compared_by_the_search(request: DesignRequest) -> int:
    space = Hanging(request).space()
    return len(space.lengths_m()) * len(space.wires) * len(space.ratios)


@pytest.mark.parametrize("changes", TOLD)
def test_as_many_combinations_are_told_as_the_search_compares(changes: dict[str, Any]) -> None:
    request = sample_request(**changes)
    exactly = compared_by_the_search(request)
    assert estimate_search(request).combinations == float(f"{exactly:.1e}")


def test_ways_are_conductors_times_heights_times_places() -> None:
    request = sample_request(
        site={"span_m": 24.0, "height_m": [8.0, 10.0]},
        feed={"positions": [0.5, 0.36, 0.28], "transformer_ratios": [1.0, 4.0]},
    )
    estimate = estimate_search(request)
    assert (estimate.ways, estimate.transformers, estimate.bands) == (2 * 2 * 3, 2, 3)


@pytest.mark.parametrize(
    "more",
    [
        {"stock": {"conductors": [{"awg": n} for n in range(8, 18)]}},
        {"feed": {"transformer_ratios": [1.0, 2.0], "positions": [0.5, 0.36]}},
        {"bands": "amateur-region-1: 40m, 20m, 15m, 10m, 6m"},
    ],
)
def test_more_to_search_is_told_to_take_longer(more: dict[str, Any]) -> None:
    plain = estimate_search(sample_request())
    assert estimate_search(sample_request(**more)).roughly_s > plain.roughly_s
