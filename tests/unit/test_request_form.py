"""The request form: what is written into it, as the contract reads it, and back."""

from __future__ import annotations

import json
from typing import Any

import pytest

from service.contracts.request import parse_request
from service.pages.form.entries import read_entries, rows, with_another_row
from service.pages.form.filling import BLANK, filled, with_list_shown
from service.pages.form.judging import judge
from service.pages.form.labels import place
from service.pages.form.reading import read_form
from service.pages.form.shown_back import shown_back
from tests.service.samples import FULL, sample_request

#: A form a planner might send: two bands of a list, a span, a height and one wire.
WRITTEN = {
    **BLANK,
    "list": "amateur-region-2",
    "band-40m-take": "yes",
    "band-15m-take": "yes",
    "span": "24",
    "height": "10",
    "wire-0-size": "12",
}

SPELT: list[dict[str, Any]] = [
    {},
    FULL,
    {"site": {"span_m": 24.125, "height_m": {"low_m": 8.0, "high_m": 14.5}}},
    {"site": {"span_m": 24.0, "ground": "free-space"}},
    {
        "site": {
            "span_m": 24.0,
            "height_m": 10.0,
            "ground": {"relative_permittivity": 13.0, "conductivity_s_per_m": 1e-05},
        }
    },
    {"stock": {"diameter_range": {"low_mm": 1.0, "high_mm": 3.0, "material": "annealed-copper"}}},
    {"feed": {"positions": "anywhere", "transformer_ratios": [1.0, 1.5, 4.0]}},
    {"feed": {"positions": [0.5, 1.0 / 3.0]}},
    {"lengths": {"low_m": 19.5, "high_m": 20.25}},
    {"hanging": {"rise_m": 0.5}},
    {"tolerances": None, "largest_set": 1, "candidates": 15},
    {"tolerances": {"cutting_percent": 2.0, "height_m": 1.5, "ground_factor": 3.0}},
    {"bands": ["broadcast-region-3: 75m, 41m", {"name": "net", "low_mhz": 5.1, "high_mhz": 5.2}]},
    {"bands": ["amateur-region-1: 40m, 60m"], "name": "Ω <station> & mast"},
]


@pytest.mark.parametrize("changes", SPELT)
def test_a_request_written_into_the_form_reads_back_the_same(changes: dict[str, Any]) -> None:
    request = sample_request(**changes)
    again = parse_request(read_form(filled(request)).json())
    assert {band.name: band for band in again.bands} == {b.name: b for b in request.bands}
    assert again.model_copy(update={"bands": request.bands}) == request


def test_parts_without_a_field_travel_along_and_others_do_not() -> None:
    kept = {"hanging": {"rise_m": 0.5}}
    assert read_form({**WRITTEN, "kept": json.dumps(kept)}).fields["hanging"] == {"rise_m": 0.5}
    for odd in ("[", "[1]", '{"site": {}}'):
        judged = judge({**WRITTEN, "kept": odd})
        assert [fault.field for _, fault in judged.faults] == ["kept"]


def test_bands_of_a_ready_made_list_are_ticked_and_others_are_the_planners_own() -> None:
    bands = ["amateur-region-3: 80m, 20m", {"name": "40m", "low_mhz": 7.0, "high_mhz": 7.1}]
    entries = filled(sample_request(bands=bands))
    assert entries["list"] == "amateur-region-3"
    assert {name for name in entries if name.endswith("-take")} == {
        "band-80m-take",
        "band-20m-take",
    }
    assert (entries["own-0-name"], entries["own-0-high"]) == ("40m", "7.1")


def test_lengths_in_feet_are_converted_exactly() -> None:
    entries = {
        **WRITTEN,
        "unit": "ft",
        "span": "80",
        "allowance": "1.5",
        "height": "30, 40",
        "length-low": "50",
        "length-high": "70",
        "line": "rg-58",
        "line-length": "100",
        "tol-height": "2",
        "wire-0-price": "0.3048",
    }
    fields = read_form(entries).fields
    assert fields["site"]["span_m"] == 24.384
    assert fields["site"]["end_allowance_m"] == 0.4572
    assert fields["site"]["height_m"] == [9.144, 12.192]
    assert fields["lengths"] == {"low_m": 15.24, "high_m": 21.336}
    assert fields["feed"]["feed_line"]["length_m"] == 30.48
    assert fields["tolerances"]["height_m"] == 0.6096
    assert fields["stock"]["conductors"][0]["price_per_m"] == 1.0


@pytest.mark.parametrize(
    ("height", "read"),
    [
        ("10", 10.0),
        ("10, 12", [10.0, 12.0]),
        ("10 to 14", {"low_m": 10.0, "high_m": 14.0}),
        ("10–14", {"low_m": 10.0, "high_m": 14.0}),
        ("high", "high"),
    ],
)
def test_heights_are_one_or_several_or_a_range(height: str, read: object) -> None:
    assert read_form({**WRITTEN, "height": height}).fields["site"]["height_m"] == read


def test_a_size_is_a_gauge_or_a_diameter() -> None:
    by_gauge = read_form(WRITTEN).fields["stock"]["conductors"]
    by_diameter = read_form({**WRITTEN, "wire-0-unit": "mm"}).fields["stock"]["conductors"]
    assert (by_gauge, by_diameter) == ([{"awg": 12}], [{"diameter_mm": 12.0}])


def test_rows_left_empty_are_passed_over() -> None:
    entries = {
        **WRITTEN,
        "wire-1-material": "annealed-copper",
        "wire-3-size": "14",
        "own-0-low": "",
    }
    fields = read_form(entries).fields
    assert [each["awg"] for each in fields["stock"]["conductors"]] == [12, 14]
    assert len(fields["bands"]) == 2


@pytest.mark.parametrize(
    ("changes", "field"),
    [
        ({"span": ""}, "span"),
        ({"span": "wide"}, "span"),
        ({"span": "3"}, "span"),
        ({"height": ""}, "height"),
        ({"height": "10, high"}, "height"),
        ({"height": "14 to 10"}, "height"),
        ({"allowance": "15"}, "allowance"),
        ({"length-low": "20"}, "length-high"),
        ({"length-low": "20", "length-high": "19"}, "length-low"),
        ({"length-low": "20", "length-high": "long"}, "length-high"),
        ({"length-low": "60", "length-high": "61"}, "length-low"),
        ({"ground": "swamp"}, "ground"),
        ({"ground": "constants", "ground-er": "0.5", "ground-sigma": "1"}, "ground-er"),
        ({"band-40m-take": "", "band-15m-take": ""}, "list"),
        ({"band-15m-limit": "1"}, "band-15m-limit"),
        ({"own-2-name": "net", "own-2-low": "9", "own-2-high": "8"}, "own-2-low"),
        ({"own-2-name": "net", "own-2-low": "8"}, "own-2-high"),
        ({"own-1-name": "40 M", "own-1-low": "8", "own-1-high": "9"}, "own-1-name"),
        ({"wire-0-size": "12.5"}, "wire-0-size"),
        ({"wire-0-size": "300", "wire-0-unit": "mm"}, "wire-0-size"),
        ({"wire-4-size": "41"}, "wire-4-size"),
        ({"wire-4-size": "14", "wire-4-material": "gold"}, "wire-4-material"),
        ({"wire-4-size": "14", "wire-4-thick": "1", "wire-4-er": "99"}, "wire-4-er"),
        ({"wire-0-price": "cheap"}, "wire-0-price"),
        ({"wire-0-size": ""}, "wire-0-size"),
        ({"range-low": "1", "range-high": "2"}, "wire-0-size"),
        ({"wire-0-size": "", "range-low": "3", "range-high": "2"}, "range-low"),
        ({"ratios": "1, 1"}, "ratios"),
        ({"ratios": "1, x"}, "ratios"),
        ({"positions": "0.9"}, "positions"),
        ({"line": "rg-58"}, "line-length"),
        ({"point": "transmitter"}, "line"),
        ({"power": "0"}, "power"),
        ({"candidates": "99"}, "candidates"),
        ({"largest-set": "9"}, "largest-set"),
        ({"tol-ground": "0.5"}, "tol-ground"),
        ({"tol-height": "low"}, "tol-height"),
        ({"steady": "", "rank-by": "worst-case"}, "steady"),
        ({"name": "n" * 121}, "name"),
    ],
)
def test_a_fault_is_led_back_to_the_field_it_was_written_in(
    changes: dict[str, str], field: str
) -> None:
    judged = judge({**WRITTEN, **changes})
    assert [where for where, _ in judged.faults] == [field]


def test_a_form_without_faults_is_a_request_with_its_size_told() -> None:
    judged = judge(WRITTEN)
    assert judged.request is not None
    assert [band.name for band in judged.request.bands] == ["40m", "15m"]
    assert judged.request.bands[0].high_mhz == 7.3
    assert judged.estimate is not None
    assert judged.estimate.ways == 1


def test_another_region_keeps_what_was_ticked_with_the_edges_of_that_region() -> None:
    entries = {**WRITTEN, "shown-list": "amateur-region-2", "list": "amateur-region-1"}
    bands = read_form(with_list_shown(entries)).fields["bands"]
    assert [(band["name"], band["high_mhz"]) for band in bands] == [("40m", 7.2), ("15m", 21.45)]


def test_another_service_keeps_what_was_ticked_among_the_planners_own() -> None:
    entries = {
        **WRITTEN,
        "band-40m-limit": "3",
        "own-0-name": "net",
        "own-0-low": "5",
        "own-0-high": "5.1",
        "shown-list": "amateur-region-2",
        "list": "broadcast-region-2",
    }
    changed = with_list_shown(entries)
    bands = read_form(changed).fields["bands"]
    assert [band["name"] for band in bands] == ["net", "40m", "15m"]
    assert (bands[1]["low_mhz"], bands[1]["high_mhz"], bands[1]["swr_limit"]) == (7.0, 7.3, 3.0)
    assert "band-15m-take" not in changed


def test_rows_are_added_up_to_what_a_request_may_hold() -> None:
    entries = dict(WRITTEN)
    for _ in range(20):
        entries = with_another_row(entries, "wire")
    assert rows(entries, "wire") == list(range(12))


def test_what_was_written_is_shown_back_in_the_other_unit() -> None:
    metric = shown_back({**WRITTEN, "height": "10 to 12", "wire-1-size": "2", "wire-1-unit": "mm"})
    assert metric["span"] == "= 78.74 ft"
    assert metric["height"] == "= 32.81 to 39.37 ft"
    # ASTM B258: AWG 12 is 0.0808 inch, 2.05 mm.
    assert metric["wire-0-size"] == "= 2.05 mm"
    assert metric["wire-1-size"] == "nearest to AWG 12"
    feet = shown_back({**WRITTEN, "unit": "ft", "span": "80.5", "wire-0-price": "0.5"})
    assert feet["span"] == "= 24.5364 m"
    assert feet["wire-0-price"] == "= 1.6404 a metre"


def test_nothing_is_shown_back_of_what_is_no_size() -> None:
    odd = {**WRITTEN, "span": "wide", "wire-0-size": "-1", "wire-1-size": "0", "wire-1-unit": "mm"}
    assert set(shown_back(odd)) == {"height"}


def test_a_field_is_spoken_of_by_its_row() -> None:
    assert place("span") == "Span between the supports"
    assert place("own-1-low") == "Own band 2, low edge, MHz"
    assert place("wire-0-size") == "Conductor 1, size"
    assert place("band-40m-limit") == "40m, SWR limit"
    assert place("range-low") == "Range of diameters, thinnest, mm"


@pytest.mark.parametrize("body", [b"\xff=1", b"&".join([b"a=1"] * 1001), b"x" * 70_000, b"no form"])
def test_what_is_no_form_is_refused(body: bytes) -> None:
    with pytest.raises(ValueError, match=r"."):
        read_entries(body)
