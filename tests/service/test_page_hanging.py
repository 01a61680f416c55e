"""Sag, tension, voltage and exposure: on the page, in the CSV and in print as the API has them."""

from __future__ import annotations

import csv
import io
import re
from typing import Any

import httpx
import pytest
from rich.console import Console

from service.contracts.candidate import PlannedDesign
from service.contracts.report import FeedReport
from service.settings import Settings
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.pages import Page, finished, read, same, table_headed
from tests.service.samples import FULL, sample_planned, sample_request
from worker.cli import tables

#: Figures of a weather in the order of the columns of page and print.
OF_WEATHER = (
    "temperature_c",
    "wind_pa",
    "ice_mm",
    "wire_tension_n",
    "rope_tension_n",
    "sag_m",
    "swing_m",
    "lowest_m",
    "mean_height_m",
)
#: What the CSV calls them.
WEATHER_IN_CSV = (
    "temperature",
    "wind pressure",
    "thickness of ice",
    "tension of the wire",
    "tension of the rope",
    "sag",
    "swing",
    "lowest height",
    "mean height",
)


@pytest.fixture(scope="module")
def full(wire_store: Store, wire_settings: Settings, stored: Stored) -> str:
    """The address of a candidate of a design whose request says everything."""
    del stored
    request = sample_request(**FULL)
    design_id = finished(wire_store, wire_settings, request, sample_planned(request))
    return f"/designs/{design_id}/candidates/1"


@pytest.fixture(scope="module")
def given(wire: httpx.Client, full: str) -> dict[str, Any]:
    """Its report as the API gives it."""
    found: dict[str, Any] = wire.get(f"/v1{full}/report").json()
    return found


@pytest.fixture(scope="module")
def page(wire: httpx.Client, full: str) -> Page:
    return read(wire, full)


def words_of(page: Page) -> str:
    return " ".join(page.words.replace("\u00a0", " ").split())


def test_the_facts_of_hanging_are_those_of_the_api(page: Page, given: dict[str, Any]) -> None:
    words, hung = words_of(page), given["hanging"]
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
    page: Page, given: dict[str, Any]
) -> None:
    rows = table_headed(page, "Weather", "°C")[2:]
    assert len(given["hanging"]["states"]) == 5
    for row, state in zip(rows, given["hanging"]["states"], strict=True):
        assert row[0] == state["weather"]
        for shown, field in zip(row[1:], OF_WEATHER, strict=True):
            same(shown, state[field])


def test_the_cutting_list_is_that_of_the_api(page: Page, given: dict[str, Any]) -> None:
    *rows, both = table_headed(page, "Leg")[1:]
    for row, leg in zip(rows, given["hanging"]["cutting"], strict=True):
        assert row[0] == leg["leg"]
        same(row[1], leg["electrical_m"])
        same(row[2], leg["cut_m"])
    same(both[2], given["hanging"]["wire_total_m"])


def test_voltages_at_the_ends_are_those_of_the_api(page: Page, given: dict[str, Any]) -> None:
    rows = table_headed(page, "Band", "near end")[1:]
    for row, band in zip(rows, given["bands"], strict=True):
        near_v, far_v = band["stress"]["ends_peak_v"]
        assert row[0] == band["name"]
        for shown, value in zip(
            row[1:], (near_v, band["stress"]["voltage_peak_v"], far_v), strict=True
        ):
            same(shown, value)


def test_distances_are_those_of_the_api_and_their_flags_are_told_in_words(
    page: Page, given: dict[str, Any]
) -> None:
    head, *rows = table_headed(page, "Band", "47 CFR 1.1310,general public")
    assert head[2:] == [
        "47 CFR 1.1310,occupational",
        "ICNIRP 2020,general public",
        "ICNIRP 2020,occupational",
    ]
    near, peak = set(), set()
    for row, band in zip(rows, given["bands"], strict=True):
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
    for said in ("high voltage", "power lines", "lightning", "masts", "local codes", "licensed"):
        assert said in exposure.partition("How it was found")[0]


def test_every_table_of_these_sections_has_a_caption_and_heads(
    wire: httpx.Client, full: str
) -> None:
    text = wire.get(full).text
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


@pytest.fixture(scope="module")
def figures(wire: httpx.Client, full: str) -> dict[tuple[str, str, str], tuple[str, str]]:
    """Value and unit of each figure of the CSV, by band, place and name."""
    lines = csv.DictReader(io.StringIO(wire.get(f"/v1{full}/report.csv").text, newline=""))
    return {
        (line["band"], line["place"], line["figure"]): (line["value"], line["unit"])
        for line in lines
        if line["figure"]
    }


def test_the_csv_has_voltages_and_exposure_as_the_api(
    figures: dict[tuple[str, str, str], tuple[str, str]], given: dict[str, Any]
) -> None:
    for band in given["bands"]:
        name, found = band["name"], band["exposure"]
        near_v, far_v = band["stress"]["ends_peak_v"]
        feed_v = band["stress"]["voltage_peak_v"]
        for place, volts in (("near end", near_v), ("feed point", feed_v), ("far end", far_v)):
            same_with_unit(figures[name, place, "peak voltage"], volts, "V")
        peak_w, average_w = found["peak_power_w"], found["average_power_w"]
        same_with_unit(figures[name, "", "power while transmitting"], peak_w, "W")
        same_with_unit(figures[name, "", "average power"], average_w, "W")
        same_with_unit(figures[name, "", "duty"], 35.0, "%")
        for each in found["distances"]:
            place = f"{each['standard']} {each['population']}"
            for figure, field, unit in (
                ("exposure distance", "distance_m", "m"),
                ("distance by the far-field formula", "far_field_m", "m"),
                ("distance by the field of the current", "near_field_m", "m"),
                ("averaging time", "averaging_min", "min"),
                ("limit of electric field", "electric_v_per_m", "V/m"),
                ("limit of magnetic field", "magnetic_a_per_m", "A/m"),
            ):
                same_with_unit(figures[name, place, figure], each[field], unit)
            density = each["power_density_w_per_m2"]
            assert ((name, place, "limit of power density") in figures) is (density is not None)
            if density is not None:
                same_with_unit(figures[name, place, "limit of power density"], density, "W/m²")
            for figure, field in (
                ("in the near field", "in_near_field"),
                ("a limit allows no pauses", "not_averaged"),
            ):
                assert figures[name, place, figure] == ("yes" if each[field] else "no", "")


def test_the_csv_has_the_figures_of_hanging_as_the_api(
    figures: dict[tuple[str, str, str], tuple[str, str]], given: dict[str, Any]
) -> None:
    hung = given["hanging"]
    assert figures["", "", "tension or sag as asked for"] == ("yes", "")
    for place, figure, field, unit in (
        (hung["weakest"], "safety factor", "safety_factor", ""),
        ("", "safety factor asked for", "safety_factor_wanted", ""),
        ("wire", "breaking load", "wire_breaking_n", "N"),
        ("rope", "breaking load", "rope_breaking_n", "N"),
        ("each end", "rope to the support", "tail_m", "m"),
        ("both legs", "length to cut", "wire_total_m", "m"),
    ):
        same_with_unit(figures["", place, figure], hung[field], unit)
    units = ("°C", "Pa", "mm", "N", "N", "m", "m", "m", "m")
    for state in hung["states"]:
        for figure, field, unit in zip(WEATHER_IN_CSV, OF_WEATHER, units, strict=True):
            same_with_unit(figures["", state["weather"], figure], state[field], unit)
    for leg in hung["cutting"]:
        place = f"{leg['leg']} leg"
        same_with_unit(figures["", place, "length as planned"], leg["electrical_m"], "m")
        same_with_unit(figures["", place, "length to cut"], leg["cut_m"], "m")


def same_with_unit(cell: tuple[str, str], given: float, unit: str) -> None:
    same(cell[0], given)
    assert cell[1] == unit


@pytest.fixture(scope="module")
def printed(given: dict[str, Any]) -> str:
    """The API's report as the command line prints it on 80 columns."""
    return as_printed(FeedReport.model_validate(given))


def as_printed(report: FeedReport) -> str:
    paper = io.StringIO()
    tables.show_report(Console(file=paper, width=80), report)
    return "\n".join(line.rstrip() for line in paper.getvalue().splitlines())


def rows_below(printed: str, title: str, count: int) -> list[list[str]]:
    """The cells of the rows below the rule of the table with this title."""
    lines = printed.partition(f"{title}\n")[2].splitlines()
    rule = next(index for index, line in enumerate(lines) if set(line.strip()) == {"─"})
    return [re.split(r" {2,}", line.strip()) for line in lines[rule + 1 : rule + 1 + count]]


def weathers_printed(printed: str, count: int) -> list[list[str]]:
    """The same of the weathers, whose columns stand one space apart."""
    lines = [" ".join(row) for row in rows_below(printed, "Weather", count)]
    return [line.rsplit(maxsplit=len(OF_WEATHER)) for line in lines]


def test_weathers_and_cutting_are_printed_as_the_api_has_them(
    printed: str, given: dict[str, Any]
) -> None:
    hung = given["hanging"]
    for row, state in zip(weathers_printed(printed, 5), hung["states"], strict=True):
        assert row[0] == state["weather"]
        for shown, field in zip(row[1:], OF_WEATHER, strict=True):
            same(shown, state[field])
    *legs, both = rows_below(printed, "Cutting list", 3)
    for row, leg in zip(legs, hung["cutting"], strict=True):
        assert row[0] == leg["leg"]
        same(row[1], leg["electrical_m"])
        same(row[2], leg["cut_m"])
    same(both[-1], hung["wire_total_m"])


def test_even_a_wide_number_is_printed_whole(given: dict[str, Any]) -> None:
    extreme = {"temperature_c": -59.5, "wind_pa": 5000.0, "wire_tension_n": 312345.6}
    states = [state | extreme for state in given["hanging"]["states"]]
    report = given | {"hanging": given["hanging"] | {"states": states}}
    printed = as_printed(FeedReport.model_validate(report))
    assert "…" not in printed
    (row,) = weathers_printed(printed, 1)
    assert row[1:5:3] == ["-59.5", "312346"]


def test_tension_sag_and_safety_factor_are_printed_as_the_api_has_them(
    printed: str, given: dict[str, Any]
) -> None:
    words, hung = " ".join(printed.split()), given["hanging"]
    lowest = min(each["lowest_m"] for each in hung["states"])
    for pattern, value in (
        (r"Strung with ([\d.]+) N at 15 °C", hung["states"][0]["wire_tension_n"]),
        (r"sag ([\d.]+) m\. Safety", hung["states"][0]["sag_m"]),
        (r"Safety factor ([\d.]+) \(wire, ice and wind\)", hung["safety_factor"]),
        (r"([\d.]+) asked for, not met", hung["safety_factor_wanted"]),
        (r"Lowest ([-\d.]+) m over ground \(ice and wind\)", lowest),
        (r"wire ([\d.]+) N, rope", hung["wire_breaking_n"]),
        (r"rope ([\d.]+) N\.", hung["rope_breaking_n"]),
        (r"Rope to each support: ([\d.]+) m", hung["tail_m"]),
    ):
        found = re.search(pattern, words)
        assert found, pattern
        same(found[1], value)
    assert f"Caution: {hung['cautions'][0]}" in words


def test_voltages_and_distances_are_printed_as_the_api_has_them(
    printed: str, given: dict[str, Any]
) -> None:
    bands = given["bands"]
    for row, band in zip(
        rows_below(printed, "Peak voltage, V, band centres", 4), bands, strict=True
    ):
        near_v, far_v = band["stress"]["ends_peak_v"]
        assert row[0] == band["name"]
        for shown, volts in zip(
            row[1:], (near_v, band["stress"]["voltage_peak_v"], far_v), strict=True
        ):
            same(shown, volts)
    title = "How far people must stay from every part of the wire, m"
    for row, band in zip(rows_below(printed, title, 4), bands, strict=True):
        for shown, each in zip(row[1:], band["exposure"]["distances"], strict=True):
            *said, number = shown.split()
            same(number, each["distance_m"])
            assert ("near" in said) is each["in_near_field"]
            assert ("peak" in said) is each["not_averaged"]
    words = " ".join(printed.split())
    assert "At 400 W, on for 35 % of the time: 140 W on average." in words
    assert "6 min (47 CFR 1.1310, occupational)" in words
    assert "near: it lies in the near field" in words


def test_an_older_report_prints_without_them(given: dict[str, Any]) -> None:
    older = FeedReport.model_validate(
        {
            **given,
            "hanging": None,
            "bands": [
                band | {"exposure": None, "stress": band["stress"] | {"ends_peak_v": None}}
                for band in given["bands"]
            ],
        }
    )
    printed = as_printed(older)
    assert "Feed-impedance report" in printed
    for absent in ("Hanging it", "Peak voltage", "How far people", "Cutting list"):
        assert absent not in printed
