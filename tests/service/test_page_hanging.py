"""Sag, tension, voltage and exposure: on the page as the API has them."""

from __future__ import annotations

import re
from typing import Any

import httpx
import pytest

from service.contracts.candidate import PlannedDesign
from service.settings import Settings
from service.store.session import Store
from tests.service.pages import Page, finished, read, same, table_headed
from tests.service.sample_hanging import OF_WEATHER
from tests.service.samples import sample_planned, sample_request


@pytest.fixture(scope="module")
def page(wire: httpx.Client, hung_candidate: str) -> Page:
    return read(wire, hung_candidate)


def words_of(page: Page) -> str:
    return " ".join(page.words.replace("\u00a0", " ").split())


def test_the_facts_of_hanging_are_those_of_the_api(page: Page, hung_report: dict[str, Any]) -> None:
    words, hung = words_of(page), hung_report["hanging"]
    _, _, section = words.partition("Hanging it ")
    lowest = min(each["lowest_m"] for each in hung["states"])
    for pattern, value in (
        (r"Tension\s*([\d.]+) N", hung["states"][0]["wire_tension_n"]),
        (r"Sag\s*([\d.]+) m as strung", hung["states"][0]["sag_m"]),
        (r"Safety factor\s*([\d.]+) \(wire, ice and wind\)", hung["safety_factor"]),
        (r"([\d.]+) asked for: not met", hung["safety_factor_wanted"]),
        (r"Lowest height\s*([−\d.]+) m over ground \(ice and wind\)", lowest),
        (r"wire ([\d.]+) N, rope", hung["wire_breaking_n"]),
        (r"rope ([\d.]+) N", hung["rope_breaking_n"]),
        (r"Rope\s*([\d.]+) m from each end", hung["tail_m"]),
    ):
        found = re.search(pattern, section)
        assert found, pattern
        same(found[1], value)
    assert hung["strength_source"] in section
    assert hung["cautions"][0] in section


def test_every_weather_has_a_row_with_the_figures_of_the_api(
    page: Page, hung_report: dict[str, Any]
) -> None:
    rows = table_headed(page, "Weather", "°C")[2:]
    assert len(hung_report["hanging"]["states"]) == 5
    for row, state in zip(rows, hung_report["hanging"]["states"], strict=True):
        assert row[0] == state["weather"]
        for shown, field in zip(row[1:], OF_WEATHER, strict=True):
            same(shown, state[field])


def test_the_cutting_list_is_that_of_the_api(page: Page, hung_report: dict[str, Any]) -> None:
    *rows, both = table_headed(page, "Leg")[1:]
    for row, leg in zip(rows, hung_report["hanging"]["cutting"], strict=True):
        assert row[0] == leg["leg"]
        same(row[1], leg["electrical_m"])
        same(row[2], leg["cut_m"])
    same(both[2], hung_report["hanging"]["wire_total_m"])


def test_voltages_at_the_ends_are_those_of_the_api(page: Page, hung_report: dict[str, Any]) -> None:
    rows = table_headed(page, "Band", "near end")[1:]
    for row, band in zip(rows, hung_report["bands"], strict=True):
        near_v, far_v = band["stress"]["ends_peak_v"]
        assert row[0] == band["name"]
        for shown, value in zip(
            row[1:], (near_v, band["stress"]["voltage_peak_v"], far_v), strict=True
        ):
            same(shown, value)


def test_distances_are_those_of_the_api_and_their_flags_are_told_in_words(
    page: Page, hung_report: dict[str, Any]
) -> None:
    head, *rows = table_headed(page, "Band", "47 CFR 1.1310,general public")
    assert head[2:] == [
        "47 CFR 1.1310,occupational",
        "ICNIRP 2020,general public",
        "ICNIRP 2020,occupational",
    ]
    near, peak = set(), set()
    for row, band in zip(rows, hung_report["bands"], strict=True):
        assert row[0] == band["name"]
        for shown, each in zip(row[1:], band["exposure"]["distances"], strict=True):
            number, _, said = shown.partition(" ")
            same(number, each["distance_m"])
            assert ("near field" in said) is each["in_near_field"]
            assert ("peak counts" in said) is each["not_averaged"]
            near.add(each["in_near_field"])
            peak.add(each["not_averaged"])
    assert near == peak == {True, False}


def test_power_duty_and_averaging_are_told(page: Page) -> None:
    words = words_of(page)
    assert "At 400 W, on for 35 % of the time: 140 W on average." in words
    for said in (
        "30 min (47 CFR 1.1310, general public)",
        "6 min (47 CFR 1.1310, occupational)",
        "30 min (ICNIRP 2020, occupational)",
    ):
        assert said in words


def test_one_standard_asked_for_is_the_only_one_shown(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    request = sample_request(name="One standard", exposure={"standard": "icnirp-2020"})
    design_id = finished(wire_store, wire_settings, request, sample_planned(request))
    page = read(wire, f"/designs/{design_id}/candidates/1")
    assert len(table_headed(page, "Band", "ICNIRP 2020,general public")[0]) == 3
    assert "47 CFR" not in page.words


def test_the_dangers_are_named_beside_the_figures(page: Page) -> None:
    words = words_of(page)
    _, _, hanging = words.partition("Hanging it ")
    _, _, exposure = words.partition("Voltage and exposure ")
    for said in ("power lines", "Masts", "licensed practice"):
        assert said in hanging.partition("Feed-impedance report")[0]
    for said in (
        "high voltage",
        "power lines",
        "against lightning",
        "masts",
        "local codes",
        "licensed",
    ):
        assert said in exposure.partition("How it was found")[0]


def test_every_table_of_these_sections_has_a_caption_and_heads(
    wire: httpx.Client, hung_candidate: str
) -> None:
    text = wire.get(hung_candidate).text
    for section in ("hanging", "exposure"):
        part = text.partition(f'aria-labelledby="{section}"')[2].partition("</section>")[0]
        tables_of = re.findall(r"<table.*?</table>", part, re.DOTALL)
        assert len(tables_of) == 2
        for table in tables_of:
            assert "<caption>" in table
            heads = re.findall(r"<th[ >][^>]*", table)
            assert heads
            assert all('scope="' in head for head in heads)


def test_the_sag_is_said_to_be_drawn_only_where_it_is(
    page: Page, wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    assert "sag is drawn as strung" in page.words
    older = read(wire, older_design(wire_store, wire_settings))
    assert "sag is not drawn" in older.words


def older_design(store: Store, settings: Settings) -> str:
    """A candidate whose report was stored before hanging and exposure were found."""
    request = sample_request(name="Before hanging was found")
    planned = sample_planned(request)
    old = [
        each.model_dump(mode="json", exclude={"hanging", "bands"})
        | {
            "bands": [
                band.model_dump(mode="json", exclude={"exposure": True, "stress": {"ends_peak_v"}})
                for band in each.bands
            ]
        }
        for each in planned.reports
    ]
    raw = {"result": planned.result.model_dump(mode="json"), "reports": old}
    return (
        f"/designs/{finished(store, settings, request, PlannedDesign.model_validate(raw))}"
        "/candidates/1"
    )


def test_an_older_report_is_shown_without_these_sections(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    older = read(wire, older_design(wire_store, wire_settings))
    ids = set(older.attributes("id"))
    assert {"hung", "stress", "cautions"} <= ids
    assert not {"hanging", "exposure"} & ids


def test_a_wire_in_free_space_has_no_heights(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    request = sample_request(name="Free", site={"span_m": 24.0, "ground": "free-space"})
    design_id = finished(wire_store, wire_settings, request, sample_planned(request))
    page = read(wire, f"/designs/{design_id}/candidates/1")
    assert "Lowest height" not in page.words
    assert len(table_headed(page, "Weather", "°C")[2]) == 8
