"""Sag, tension, voltage and exposure: in the CSV and in print as the API has them."""

from __future__ import annotations

import csv
import io
import re
from typing import Any

import httpx
import pytest
from rich.console import Console

from service.contracts.report import FeedReport
from tests.service.pages import same
from tests.service.sample_hanging import OF_WEATHER
from worker.cli import tables

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
def figures(wire: httpx.Client, hung_candidate: str) -> dict[tuple[str, str, str], tuple[str, str]]:
    """Value and unit of each figure of the CSV, by band, place and name."""
    lines = csv.DictReader(
        io.StringIO(wire.get(f"/v1{hung_candidate}/report.csv").text, newline="")
    )
    return {
        (line["band"], line["place"], line["figure"]): (line["value"], line["unit"])
        for line in lines
        if line["figure"]
    }


def test_the_csv_has_voltages_and_exposure_as_the_api(
    figures: dict[tuple[str, str, str], tuple[str, str]], hung_report: dict[str, Any]
) -> None:
    for band in hung_report["bands"]:
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
    figures: dict[tuple[str, str, str], tuple[str, str]], hung_report: dict[str, Any]
) -> None:
    hung = hung_report["hanging"]
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
    # The CSV has all digits that are stored.
    assert (float(cell[0]), cell[1]) == (given, unit)


@pytest.fixture(scope="module")
def printed(hung_report: dict[str, Any]) -> str:
    """The API's report as the command line prints it on 80 columns."""
    return as_printed(FeedReport.model_validate(hung_report))


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
    printed: str, hung_report: dict[str, Any]
) -> None:
    hung = hung_report["hanging"]
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


def test_even_a_wide_number_is_printed_whole(hung_report: dict[str, Any]) -> None:
    extreme = {"temperature_c": -59.5, "wind_pa": 5000.0, "wire_tension_n": 312345.6}
    states = [state | extreme for state in hung_report["hanging"]["states"]]
    report = hung_report | {"hanging": hung_report["hanging"] | {"states": states}}
    printed = as_printed(FeedReport.model_validate(report))
    (row,) = weathers_printed(printed, 1)
    assert row[1:5:3] == ["-59.5", "312346"]


def test_numbers_too_wide_for_the_paper_are_folded_and_not_cut_short(
    hung_report: dict[str, Any],
) -> None:
    states = [
        state | dict.fromkeys(OF_WEATHER, 12345678.9) for state in hung_report["hanging"]["states"]
    ]
    printed = as_printed(
        FeedReport.model_validate(
            hung_report | {"hanging": hung_report["hanging"] | {"states": states}}
        )
    )
    assert "…" not in printed


def test_tension_sag_and_safety_factor_are_printed_as_the_api_has_them(
    printed: str, hung_report: dict[str, Any]
) -> None:
    words, hung = " ".join(printed.split()), hung_report["hanging"]
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
    printed: str, hung_report: dict[str, Any]
) -> None:
    bands = hung_report["bands"]
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


def test_an_older_report_prints_without_them(hung_report: dict[str, Any]) -> None:
    older = FeedReport.model_validate(
        {
            **hung_report,
            "hanging": None,
            "bands": [
                band | {"exposure": None, "stress": band["stress"] | {"ends_peak_v": None}}
                for band in hung_report["bands"]
            ],
        }
    )
    printed = as_printed(older)
    assert "Feed-impedance report" in printed
    for absent in ("Hanging it", "Peak voltage", "How far people", "Cutting list"):
        assert absent not in printed
