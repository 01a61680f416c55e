"""The contract of a design request: what it takes, what it refuses, and in which words."""

from __future__ import annotations

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.contracts.band_lists import BAND_LISTS
from service.contracts.feed import ANYWHERE, LINE_NAMES
from service.contracts.request import (
    LARGEST_REQUEST_BYTES,
    MOST_CANDIDATES,
    MOST_WAYS,
    DesignRequest,
    parse_request,
)
from service.contracts.stock import Conductor, DiameterRange
from service.errors import Fault, RequestRefused
from tests.service.samples import request_fields, request_json, sample_request


def only_fault(text: str | bytes) -> Fault:
    with pytest.raises(RequestRefused) as refused:
        parse_request(text)
    assert len(refused.value.faults) == 1, refused.value.faults
    return refused.value.faults[0]


def band(**changes: object) -> dict[str, Any]:
    return {"name": "40m", "low_mhz": 7.0, "high_mhz": 7.2} | changes


def test_swapped_edges_are_refused_with_the_remedy() -> None:
    fault = only_fault(request_json(bands=[band(low_mhz=7.2, high_mhz=7.0)]))
    assert (fault.field, fault.value, fault.code) == ("bands[0].low_mhz", "7.2", "edges-swapped")
    assert "7.2 MHz is not below the high edge 7 MHz" in fault.reason
    assert fault.remedy == "Swap the edges so that low_mhz is the smaller."


@pytest.mark.parametrize(
    ("low_mhz", "high_mhz", "field", "value", "bound"),
    [
        (0.09, 0.11, "bands[0].low_mhz", "0.09", "at least 0.1"),
        (950.0, 1000.5, "bands[0].high_mhz", "1000.5", "at most 1000"),
    ],
)
def test_a_band_outside_the_range_served_is_refused(
    low_mhz: float, high_mhz: float, field: str, value: str, bound: str
) -> None:
    fault = only_fault(request_json(bands=[band(low_mhz=low_mhz, high_mhz=high_mhz)]))
    assert (fault.field, fault.value) == (field, value)
    assert bound in fault.remedy


def test_two_bands_of_one_name_are_refused() -> None:
    twice = [band(), band(name="40 M", low_mhz=7.05)]
    fault = only_fault(request_json(bands=twice))
    assert (fault.field, fault.value, fault.code) == (
        "bands[1].name",
        "40 M",
        "band-names-overlap",
    )
    assert "a name of its own" in fault.remedy


def test_a_span_too_short_for_any_resonance_is_refused_with_the_span_needed() -> None:
    short = {"span_m": 9.0, "end_allowance_m": 0.5, "height_m": 10.0}
    fault = only_fault(request_json(bands=[band()], site=short))
    assert (fault.field, fault.value, fault.code) == ("site.span_m", "9.0", "span-too-short")
    # 0.40 wavelengths at 7.2 MHz (c = 299 792 458 m/s) is 16.66 m, and the allowances add 1 m.
    assert "17.66 m" in fault.remedy


def test_a_span_as_long_as_the_remedy_says_is_taken() -> None:
    enough = {"span_m": 17.66, "end_allowance_m": 0.5, "height_m": 10.0}
    assert sample_request(bands=[band()], site=enough).site.span_m == 17.66


def test_a_diameter_too_thick_for_a_thin_wire_is_refused_with_the_largest() -> None:
    thick = {"conductors": [{"diameter_mm": 2.0}, {"diameter_mm": 90.0}]}
    high = [band(name="70cm", low_mhz=430.0, high_mhz=440.0)]
    fault = only_fault(request_json(bands=high, stock=thick))
    assert (fault.field, fault.code) == ("stock.conductors[1]", "diameter-breaks-thin-wire")
    assert fault.value == "90.00 mm"
    # A radius of 0.005 wavelengths at 440 MHz: a diameter of 6.81 mm.
    assert "6.81 mm" in fault.remedy


def test_insulation_counts_towards_the_diameter() -> None:
    sleeved = {"conductors": [{"diameter_mm": 6.0, "insulation": {"thickness_mm": 1.0}}]}
    high = [band(name="70cm", low_mhz=430.0, high_mhz=440.0)]
    assert only_fault(request_json(bands=high, stock=sleeved)).value == "8.00 mm"


@pytest.mark.parametrize(
    ("changes", "field", "code"),
    [
        ({"bands": []}, "bands", "too-short"),
        ({"bands": [band(low_mhz=4.0)]}, "bands[0].high_mhz", "band-too-wide"),
        ({"bands": [band(low_mhz="NaN")]}, "bands[0].low_mhz", "finite-number"),
        ({"bands": [band(colour="red")]}, "bands[0].colour", "extra-forbidden"),
        ({"bands": ["amateur-region-2"]}, "bands[0]", "band-text-unreadable"),
        ({"bands": ["amateur-region-9: 40m"]}, "bands[0].band_list", "band-list-unknown"),
        ({"bands": ["amateur-region-2: 41m"]}, "bands[0].names", "band-name-unknown"),
        ({"site": {"span_m": 24.0}}, "site.height_m", "height-missing"),
        (
            {"site": {"span_m": 24.0, "end_allowance_m": 12.0, "height_m": 9.0}},
            "site.end_allowance_m",
            "allowances-exceed-span",
        ),
        ({"stock": {}}, "stock.conductors", "stock-ambiguous"),
        ({"stock": {"conductors": [{}]}}, "stock.conductors[0].awg", "size-ambiguous"),
        (
            {"stock": {"diameter_range": {"low_mm": 3.0, "high_mm": 2.0}}},
            "stock.diameter_range.low_mm",
            "diameters-swapped",
        ),
        (
            {"site": {"span_m": 24.0, "height_m": {"low_m": 9.0, "high_m": 9.0}}},
            "site.height_m.low_m",
            "heights-swapped",
        ),
        ({"site": {"span_m": 24.0, "height_m": []}}, "site.height_m", "too-short"),
        ({"site": {"span_m": 24.0, "height_m": [5, 6, 7, 8, 9, 10]}}, "site.height_m", "too-long"),
        ({"site": {"span_m": 24.0, "height_m": [9.0, 0.0]}}, "site.height_m[1]", "greater-than"),
        ({"site": {"span_m": 24.0, "height_m": [0.4, 9.0]}}, "site.height_m", "height-too-low"),
        ({"feed": {"transformer_ratios": [4, 4]}}, "feed.transformer_ratios", "ratios-repeated"),
        ({"feed": {"positions": []}}, "feed.positions", "too-short"),
        ({"feed": {"positions": [0.36, 0.6]}}, "feed.positions[1]", "less-than-equal"),
        ({"feed": {"positions": [0.05]}}, "feed.positions[0]", "greater-than-equal"),
        ({"feed": {"positions": "nowhere"}}, "feed.positions", "literal-error"),
        ({"feed": {"matching": "always"}}, "feed.matching", "literal-error"),
        ({"feed": {"reference_point": "shack"}}, "feed.reference_point", "literal-error"),
        ({"feed": {"reference_point": "transmitter"}}, "feed.feed_line", "feed-line-missing"),
        ({"largest_set": 5}, "largest_set", "less-than-equal"),
        ({"rank_by": "price"}, "rank_by", "literal-error"),
        ({"rank_by": "worst-case", "tolerances": None}, "tolerances", "tolerances-missing"),
        (
            {"tolerances": {"cutting_percent": 6.0}},
            "tolerances.cutting_percent",
            "less-than-equal",
        ),
        (
            {"tolerances": {"ground_factor": 0.5}},
            "tolerances.ground_factor",
            "greater-than-equal",
        ),
        ({"candidates": MOST_CANDIDATES + 1}, "candidates", "less-than-equal"),
        ({"power_w": 0}, "power_w", "greater-than"),
    ],
)
def test_each_refusal_names_its_field_and_rule(
    changes: dict[str, Any], field: str, code: str
) -> None:
    fault = only_fault(request_json(**changes))
    assert (fault.field, fault.code) == (field, code)
    assert fault.reason.endswith(".")
    assert fault.remedy.endswith(".")


def test_every_fault_of_a_request_is_told_at_once() -> None:
    with pytest.raises(RequestRefused) as refused:
        parse_request(request_json(bands=[band(low_mhz=7.3)], power_w=-5, site={"span_m": 24.0}))
    assert {fault.field for fault in refused.value.faults} == {
        "bands[0].low_mhz",
        "power_w",
        "site.height_m",
    }


def test_malformed_json_is_refused_as_such() -> None:
    assert only_fault(b'{"bands": [').code == "json-invalid"


def test_bytes_that_are_no_text_are_refused_as_malformed() -> None:
    assert only_fault(b"\xff\xfe{}").code == "json-invalid"


def test_a_request_beyond_the_size_limit_is_refused_unread() -> None:
    fault = only_fault(b"[" * (LARGEST_REQUEST_BYTES + 1))
    assert fault.code == "request-too-large"
    assert "64 KiB" in fault.reason


def test_text_and_object_choose_the_same_bands_from_a_list() -> None:
    text = sample_request(bands="amateur-region-2: 40m, 15 M")
    choice = sample_request(bands=[{"band_list": "amateur-region-2", "names": ["40m", "15m"]}])
    assert text.bands == choice.bands
    assert [(each.name, each.low_mhz, each.high_mhz) for each in text.bands] == [
        ("40m", 7.0, 7.3),
        ("15m", 21.0, 21.45),
    ]


def test_wishes_of_a_choice_go_to_each_of_its_bands() -> None:
    wishes = {"required": False, "weight": 0.5, "swr_limit": 3.0}
    chosen = sample_request(
        bands=[{"band_list": "broadcast-region-1", "names": ["49m", "31m"], **wishes}]
    ).bands
    assert [(b.required, b.weight, b.swr_limit) for b in chosen] == [(False, 0.5, 3.0)] * 2


@pytest.mark.parametrize("name", list(BAND_LISTS))
def test_every_band_of_every_list_makes_a_valid_request(name: str) -> None:
    every = [{"band_list": name, "names": [each.name for each in BAND_LISTS[name].bands]}]
    request = sample_request(bands=every, site={"span_m": 90.0, "height_m": 10.0})
    edges = [(each.low_mhz, each.high_mhz) for each in BAND_LISTS[name].bands]
    assert [(each.low_mhz, each.high_mhz) for each in request.bands] == edges


def test_bands_of_a_list_rise_in_frequency_and_do_not_overlap() -> None:
    for band_list in BAND_LISTS.values():
        edges = [edge for each in band_list.bands for edge in (each.low_mhz, each.high_mhz)]
        assert edges == sorted(edges), band_list.name


def test_a_stored_request_reads_back_as_itself() -> None:
    request = sample_request()
    assert parse_request(request.canonical_json()) == request


def test_a_stored_request_reads_back_with_ground_constants_and_a_range_of_diameters() -> None:
    request = sample_request(
        site={
            "span_m": 24.0,
            "height_m": 8.0,
            "ground": {"relative_permittivity": 13.0, "conductivity_s_per_m": 0.005},
        },
        stock={"diameter_range": {"low_mm": 1.0, "high_mm": 3.0}},
        feed={"feed_line": {"line": LINE_NAMES[0], "length_m": 12.5}},
    )
    assert parse_request(request.canonical_json()) == request


def test_spelling_out_the_defaults_does_not_change_the_hash() -> None:
    brief = request_fields()
    full = DesignRequest.model_validate(brief).model_dump(mode="json")
    assert full != brief
    assert sample_request(**full).content_hash() == sample_request().content_hash()


def test_order_of_transformer_ratios_does_not_change_the_hash() -> None:
    one, other = ({"transformer_ratios": ratios} for ratios in ([4, 1], [1, 4]))
    assert sample_request(feed=one).content_hash() == sample_request(feed=other).content_hash()


def test_another_edge_changes_the_hash() -> None:
    changed = sample_request(bands=[band(high_mhz=7.1)])
    assert changed.content_hash() != sample_request(bands=[band()]).content_hash()


# ASTM B258 makes 36 AWG exactly 0.0050 in and 4/0 AWG 0.4600 in, 39 steps of even ratio apart;
# its table rounds 12 AWG to 0.0808 in and 14 AWG to 0.0641 in (from memory).
@pytest.mark.parametrize(("awg", "inches"), [(36, 0.0050), (12, 0.0808), (14, 0.0641)])
def test_awg_sizes_are_those_of_the_standard(awg: int, inches: float) -> None:
    assert Conductor(awg=awg).bare_diameter_mm == pytest.approx(25.4 * inches, abs=0.0013)


@given(low=st.floats(0.05, 100.0), high=st.floats(0.05, 100.0))
def test_a_range_of_diameters_is_sampled_within_its_limits(low: float, high: float) -> None:
    low, high = sorted((low, high))
    sampled = [c.bare_diameter_mm for c in DiameterRange(low_mm=low, high_mm=high).sampled()]
    assert sampled[0] == low
    assert sampled[-1] == high
    assert all(low <= each <= high * (1 + 1e-12) for each in sampled)


@pytest.mark.parametrize("name", ["two\nlines", "a\u0000b", "\u001b[31mred"])
def test_control_characters_in_a_text_are_refused(name: str) -> None:
    fault = only_fault(request_json(name=name))
    assert (fault.field, fault.code) == ("name", "control-character")


# ------------------------------------------------------------ heights, places and ways
@pytest.mark.parametrize(
    ("height_m", "searched"),
    [
        (9.0, (9.0,)),
        ([12.0, 6.0, 12.0], (12.0, 6.0)),
        ({"low_m": 6.0, "high_m": 12.0}, (6.0, 9.0, 12.0)),
    ],
)
def test_a_height_a_list_and_a_range_are_searched_where_they_say(
    height_m: object, searched: tuple[float, ...]
) -> None:
    request = sample_request(site={"span_m": 24.0, "height_m": height_m})
    assert request.site.heights_m() == searched
    assert parse_request(request.canonical_json()) == request


def test_in_free_space_no_height_is_searched() -> None:
    site = {"span_m": 24.0, "height_m": [0.1, 250.0], "ground": "free-space"}
    assert sample_request(site=site).site.heights_m() == ()


def test_a_height_too_low_for_the_ground_s_model_is_refused_with_the_lowest() -> None:
    fault = only_fault(request_json(bands=[band()], site={"span_m": 24.0, "height_m": [0.4, 9.0]}))
    assert (fault.field, fault.value) == ("site.height_m", "0.4")
    # A hundredth of a wavelength at 7.0 MHz is 0.428 m.
    assert "at least 0.43 m" in fault.remedy
    just = sample_request(bands=[band()], site={"span_m": 24.0, "height_m": 0.43})
    assert just.site.heights_m() == (0.43,)


def test_a_height_too_high_for_the_ground_s_model_is_refused_with_the_highest() -> None:
    high = {"bands": [band(name="70cm", low_mhz=430.0, high_mhz=440.0)]}
    fault = only_fault(request_json(**high, site={"span_m": 2.0, "height_m": 80.0}))
    assert (fault.field, fault.code, fault.value) == ("site.height_m", "height-too-high", "80.0")
    # Ninety wavelengths at 440 MHz are 61.32 m.
    assert "61.32 m" in fault.remedy


@pytest.mark.parametrize(
    ("positions", "searched"), [([0.36, 0.5, 0.36], (0.36, 0.5)), ("anywhere", ANYWHERE)]
)
def test_the_places_of_the_feed_are_searched_once_each(
    positions: object, searched: tuple[float, ...]
) -> None:
    request = sample_request(feed={"positions": positions})
    assert request.feed.feed_fractions() == searched
    assert parse_request(request.canonical_json()) == request


def test_without_a_word_the_feed_is_at_the_centre_without_a_network() -> None:
    feed = sample_request().feed
    assert (feed.feed_fractions(), feed.matching, feed.reference_point) == (
        (0.5,),
        "none",
        "feed-point",
    )


def test_limits_at_the_transmitter_are_taken_with_their_line() -> None:
    line = {"line": "rg-213", "length_m": 20.0}
    feed = sample_request(feed={"reference_point": "transmitter", "feed_line": line}).feed
    assert feed.reference_point == "transmitter"


def test_more_ways_to_hang_the_wire_than_can_be_searched_are_refused_with_their_count() -> None:
    conductors = [{"diameter_mm": 1.0 + 0.1 * index} for index in range(4)]
    many = {
        "stock": {"conductors": conductors},
        "site": {"span_m": 24.0, "height_m": [8.0, 10.0]},
        "feed": {"positions": [0.5, 0.36]},
    }
    fault = only_fault(request_json(**many))
    assert (fault.field, fault.code, fault.value) == ("stock", "too-many-ways", "16 ways")
    assert "4 conductors, 2 heights, 2 places of the feed make 16 ways" in fault.reason
    assert f"at most {MOST_WAYS} ways" in fault.remedy
    fewer = many | {"stock": {"conductors": conductors[:3]}}
    assert len(sample_request(**fewer).stock.choices()) == 3


def test_a_height_repeated_or_a_height_in_free_space_makes_no_more_ways() -> None:
    conductors = [{"diameter_mm": 1.0 + 0.1 * index} for index in range(9)]
    for site in (
        {"span_m": 24.0, "height_m": [8.0, 8.0]},
        {"span_m": 24.0, "height_m": [8.0, 9.0], "ground": "free-space"},
    ):
        taken = sample_request(stock={"conductors": conductors}, site=site)
        assert len(taken.site.heights_m()) <= 1


def test_the_worst_case_is_ranked_by_with_tolerances() -> None:
    assert sample_request(rank_by="worst-case").tolerances is not None
    assert sample_request(tolerances=None).tolerances is None


def test_bands_too_far_apart_for_one_wire_are_refused() -> None:
    far = [band(), band(name="high", low_mhz=430.0, high_mhz=440.0)]
    fault = only_fault(request_json(bands=far))
    assert (fault.field, fault.code) == ("bands", "bands-too-far-apart")
    assert "within a ratio of 60" in fault.remedy
