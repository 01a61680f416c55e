"""What-ifs: that they tell what direct solutions and the planning itself tell."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pytest

from service.contracts.report import FeedReport
from service.contracts.what_if import WhatIf, WhatIfRequest, parse_what_if
from service.errors import RequestRefused
from tests.service.samples import sample_request
from worker.engine.errors import EngineError
from worker.planning import plan
from worker.search.impedance_map import TOLERANCE_OHM, TOLERANCE_RELATIVE
from worker.translation.wires import Hanging
from worker.trying import GRID_POINTS, Trials

BANDS = [
    {"name": "80m", "low_mhz": 3.5, "high_mhz": 4.0, "swr_limit": 3.0},
    {"name": "40m", "low_mhz": 7.0, "high_mhz": 7.2, "swr_limit": 2.0},
    {"name": "17m", "low_mhz": 18.068, "high_mhz": 18.168, "swr_limit": 2.0},
    {"name": "6m", "low_mhz": 50.0, "high_mhz": 54.0, "swr_limit": 2.5},
]
SLEEVE = {"thickness_mm": 0.8, "relative_permittivity": 2.3}


def asked(**changes: object) -> WhatIfRequest:
    fields: dict[str, Any] = {
        "bands": BANDS,
        "length_m": 20.4,
        "conductor": {"awg": 12},
        "height_m": 11.0,
        "ground": "average",
    }
    return parse_what_if(json.dumps(fields | changes))


def direct_ohm(request: WhatIfRequest, index: int) -> np.ndarray[Any, np.dtype[np.complex128]]:
    """The same wire, solved by itself at every point of a band."""
    site: dict[str, Any] = {"span_m": 60.0, "ground": request.ground}
    if request.height_m is not None:
        site["height_m"] = request.height_m
    design = sample_request(
        bands=BANDS,
        site=site,
        stock={"conductors": [request.conductor.model_dump()]},
        feed={"positions": [request.feed_fraction]},
    )
    hanging = Hanging(design)
    band = request.bands[index]
    at_hz = 1e6 * np.linspace(band.low_mhz, band.high_mhz, GRID_POINTS)
    wire = hanging.wire(hanging.ways[0]).hung
    return wire.feed_impedance(np.full(GRID_POINTS, request.length_m), at_hz).impedance_ohm


@pytest.mark.parametrize(
    "changes",
    [
        {},
        {"length_m": 41.7, "feed_fraction": 0.36},
        {"conductor": {"diameter_mm": 2.0, "insulation": SLEEVE}, "height_m": 4.0},
        {"ground": "free-space", "height_m": None, "length_m": 10.3},
        {"ground": "salt-water", "height_m": 25.0},
    ],
)
def test_a_what_if_tells_what_direct_solutions_tell(changes: dict[str, Any]) -> None:
    request = asked(**changes)
    answer = Trials().answer(request)
    for index, band in enumerate(answer.bands):
        told = np.array([complex(p.resistance_ohm, p.reactance_ohm) for p in band.grid])
        solved = direct_ohm(request, index)
        allowed = np.maximum(TOLERANCE_OHM, TOLERANCE_RELATIVE * np.abs(solved))
        assert np.all(np.abs(told - solved) <= allowed), band.name


def planned(**changes: object) -> tuple[FeedReport, WhatIf]:
    """A planned candidate, and the what-if of that very wire."""
    design = sample_request(
        bands=BANDS[:3], candidates=1, largest_set=1, tolerances=None, **changes
    )
    result = plan(design, lambda _part, _step: None)
    best, feed = result.result.candidates[0], design.feed
    conductor = next(each for each in design.stock.choices() if each.label == best.conductor)
    same = WhatIfRequest(
        bands=design.bands,
        length_m=best.length_m,
        conductor=conductor,
        height_m=best.height_m,
        ground=design.site.ground,
        feed_fraction=best.feed_fraction,
        transformer_ratio=best.transformer_ratio,
        reference_ohm=feed.reference_ohm,
        feed_line=feed.feed_line,
        matching=feed.matching,
        reference_point=feed.reference_point,
    )
    answer = Trials().answer(same)
    for band, outcome in zip(answer.bands, best.bands, strict=True):
        assert band.service == outcome.service
        # Of a bad mismatch only that it is one.
        now, was = (min(each.swr_worst, 100.0) for each in (band, outcome))
        assert now == pytest.approx(was, rel=5e-3)
        assert band.served_fraction == pytest.approx(outcome.served_fraction, abs=5e-3)
    return result.reports[0], answer


@pytest.mark.parametrize(
    "feed",
    [
        {"transformer_ratios": [1.0, 2.0]},
        {"matching": "per-band"},
        {
            "feed_line": {"line": "rg-213", "length_m": 25.0},
            "reference_point": "transmitter",
            "positions": [0.36],
        },
    ],
)
def test_a_wire_that_is_not_moved_is_told_as_it_was_planned(feed: dict[str, Any]) -> None:
    report, answer = planned(feed=feed)
    for band, moved in zip(report.bands, answer.bands, strict=True):
        for place in ("low", "centre", "high"):
            was, now = getattr(band, place), getattr(moved, place)
            assert now.frequency_mhz == was.frequency_mhz
            assert now.resistance_ohm == pytest.approx(was.resistance_ohm, rel=2e-3, abs=0.1)
            assert now.reflection == pytest.approx(was.reflection, abs=2e-3)
        assert band.radiation is not None
        assert moved.gain_dbi == pytest.approx(band.radiation.gain_dbi, abs=0.02)
        assert moved.take_off_deg == pytest.approx(band.radiation.take_off_deg, abs=0.2)


def test_a_resonance_is_told_where_the_reactance_rises_through_zero_within_the_band() -> None:
    bands = Trials().answer(asked(length_m=20.4)).bands
    (forty,) = [band for band in bands if band.name == "40m"]
    assert forty.resonance_mhz is not None
    nearest = min(forty.grid, key=lambda p: abs(p.frequency_mhz - (forty.resonance_mhz or 0.0)))
    assert abs(nearest.reactance_ohm) < 10.0
    assert [band.resonance_mhz for band in bands if band.name == "80m"] == [None]


def test_tables_of_the_ground_are_kept_for_the_next_question_and_no_more_than_a_few() -> None:
    trials = Trials()
    trials.answer(asked())
    kept = next(iter(trials._grounds.values()))
    made = len(kept._tables)
    trials.answer(asked(length_m=20.9, transformer_ratio=2.0))
    assert len(kept._tables) == made
    for height_m in (12.0, 13.0, 14.0, 15.0, 16.0):
        trials.answer(asked(height_m=height_m, bands=BANDS[1:2]))
    assert len(trials._grounds) == 4
    assert all(each is not kept for each in trials._grounds.values())


def test_a_longer_wire_than_the_tables_reach_has_them_made_again() -> None:
    trials = Trials()
    trials.answer(asked(bands=BANDS[1:2]))
    longer = trials.answer(asked(bands=BANDS[1:2], length_m=40.0))
    alone = Trials().answer(asked(bands=BANDS[1:2], length_m=40.0))
    assert longer.bands[0].centre == alone.bands[0].centre


def test_a_wire_that_the_models_do_not_cover_is_refused() -> None:
    with pytest.raises(EngineError):
        Trials().answer(asked(length_m=900.0))


@pytest.mark.parametrize(
    ("changes", "field"),
    [
        ({"height_m": None}, "height_m"),
        ({"ground": "free-space"}, "height_m"),
        ({"reference_point": "transmitter"}, "feed_line"),
        ({"length_m": -1.0}, "length_m"),
        ({"bands": [*BANDS[:1], *BANDS[:1]]}, "bands[1].name"),
    ],
)
def test_a_what_if_that_does_not_hang_together_is_refused_by_its_field(
    changes: dict[str, Any], field: str
) -> None:
    with pytest.raises(RequestRefused) as refused:
        asked(**changes)
    assert [fault.field for fault in refused.value.faults] == [field]
