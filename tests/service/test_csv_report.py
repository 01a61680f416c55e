"""The feed-impedance report as CSV, read back with the reader of the standard library."""

from __future__ import annotations

import csv
import io

import pytest

from service.contracts import formats
from service.contracts.report import FeedReport
from service.exports import digits
from service.exports.csv_table import FEED_COLUMNS, feed_report_csv
from tests.service.samples import FULL, sample_planned, sample_request


@pytest.fixture(scope="module")
def report() -> FeedReport:
    return sample_planned(sample_request()).reports[0]


def rows(report: FeedReport) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(feed_report_csv(report), newline="")))


def renamed(report: FeedReport, name: str) -> FeedReport:
    first = report.bands[0].model_copy(update={"name": name})
    # Lines of hanging belong to no band.
    return report.model_copy(update={"bands": (first,), "hanging": None})


def test_the_first_line_names_the_columns(report: FeedReport) -> None:
    assert feed_report_csv(report).partition("\r\n")[0] == ",".join(FEED_COLUMNS)


def test_every_line_ends_with_carriage_return_and_line_feed(report: FeedReport) -> None:
    sheet = feed_report_csv(report)
    assert sheet.endswith("\r\n")
    assert sheet.count("\n") == sheet.count("\r\n")


def test_each_stored_point_of_each_band_has_one_line(report: FeedReport) -> None:
    lines = rows(report)
    for band in report.bands:
        points = {p.frequency_mhz for p in (band.low, band.centre, band.high, *band.grid)}
        of_band = [line for line in lines if line["band"] == band.name and not line["figure"]]
        found = [float(line["frequency_mhz"]) for line in of_band]
        assert found == sorted(points)


def test_edges_and_centre_carry_the_stored_figures_to_the_digits_shown(
    report: FeedReport,
) -> None:
    lines = {(line["band"], line["place"]): line for line in rows(report)}
    for band in report.bands:
        for place, point in (
            ("low edge", band.low),
            ("centre", band.centre),
            ("high edge", band.high),
        ):
            line = lines[band.name, place]
            assert float(line["frequency_mhz"]) == point.frequency_mhz
            assert float(line["resistance_ohm"]) == pytest.approx(point.resistance_ohm, abs=0.00501)
            assert float(line["reactance_ohm"]) == pytest.approx(point.reactance_ohm, abs=0.00501)
            assert float(line["reflection"]) == pytest.approx(point.reflection, abs=0.0000501)
            assert float(line["swr"]) == pytest.approx(point.swr, abs=0.000501)


def test_the_far_end_of_the_line_is_given_to_the_digits_shown() -> None:
    with_line = sample_planned(sample_request(**FULL)).reports[0]
    lines = {(line["band"], line["place"]): line for line in rows(with_line)}
    for band in with_line.bands:
        line = lines[band.name, "centre"]
        assert float(line["transmitter_swr"]) == pytest.approx(
            band.centre.transmitter_swr, abs=0.000501
        )
        assert float(line["line_loss_db"]) == band.centre.line_loss_db


def test_without_a_line_its_columns_are_there_and_empty(report: FeedReport) -> None:
    assert {(line["transmitter_swr"], line["line_loss_db"]) for line in rows(report)} == {("", "")}


def test_figures_beside_the_points_are_named_with_value_and_unit_and_come_last(
    report: FeedReport,
) -> None:
    lines = rows(report)
    points = [line for line in lines if line["frequency_mhz"]]
    rest = lines[len(points) :]
    assert lines[: len(points)] == points
    assert {(line["figure"], line["value"], line["unit"]) for line in points} == {("", "", "")}
    assert len(rest) > 40
    assert {line["resistance_ohm"] for line in rest} == {""}
    assert all(line["figure"] and line["value"] for line in rest)
    named = [(line["band"], line["place"], line["figure"]) for line in rest]
    assert len(named) == len(set(named))


def test_a_report_of_before_has_points_alone(report: FeedReport) -> None:
    bands = [
        band.model_copy(
            update={
                "exposure": None,
                "stress": band.stress and band.stress.model_copy(update={"ends_peak_v": None}),
            }
        )
        for band in report.bands
    ]
    older = report.model_copy(update={"hanging": None, "bands": tuple(bands)})
    assert {line["figure"] for line in rows(older)} == {""}


@pytest.mark.parametrize(
    "name", ["=1+1", "+40m", "-40m", "@SUM(A1)", "\t=1", " =HYPERLINK(1)", "＝1"]
)
def test_a_name_that_looks_like_a_formula_is_defused(report: FeedReport, name: str) -> None:
    assert {line["band"] for line in rows(renamed(report, name))} == {"'" + name}


@pytest.mark.parametrize("name", ["40m", 'CW "low" end', "a, b", "two\r\nlines", "Ω 40"])
def test_any_other_name_comes_back_as_it_was(report: FeedReport, name: str) -> None:
    assert {line["band"] for line in rows(renamed(report, name))} == {name}


@pytest.mark.parametrize(
    ("value", "text"),
    [(7.0, "7.000"), (5.3515, "5.3515"), (14.175, "14.175"), (1000.0, "1000.000"), (0.1, "0.100")],
)
def test_frequencies_have_kilohertz_digits_and_more_only_where_needed(
    value: float, text: str
) -> None:
    assert formats.edge_mhz(value) == text


def test_a_reactance_that_rounds_to_zero_has_no_sign() -> None:
    assert digits.resistance_ohm(-0.004) == "0.00"
    assert digits.resistance_ohm(-0.006) == "-0.01"


def test_even_a_very_high_swr_stays_a_number() -> None:
    assert digits.swr(123456.789) == "123456.789"
