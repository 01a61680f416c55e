"""The Touchstone file, read back by scikit-rf and held to the stored figures."""

from __future__ import annotations

import io

import httpx
import numpy as np
import pytest
import skrf

from service.contracts.report import FeedReport, ReportPoint
from service.exports.touchstone import touchstone
from tests.service.conftest import Stored
from tests.service.samples import FULL, sample_planned, sample_request

NAME = "Invented station"


@pytest.fixture(scope="module")
def report() -> FeedReport:
    asked = sample_request(feed={"reference_ohm": 75.5, "transformer_ratios": [4.0]})
    return sample_planned(asked).reports[0]


def read(report: FeedReport, name: str = NAME) -> skrf.Network:
    file = io.StringIO(touchstone(report, name))
    file.name = "report.s1p"  # scikit-rf tells the number of ports by the name
    return skrf.Network(file)


def stored_points(report: FeedReport) -> dict[float, ReportPoint]:
    points = [*report.sweep]
    for band in report.bands:
        points += [*band.grid, band.low, band.centre, band.high]
    return {round(1e6 * point.frequency_mhz): point for point in points}


def test_every_stored_frequency_is_there_once_and_they_rise(report: FeedReport) -> None:
    found = np.rint(read(report).f)
    assert found.tolist() == sorted(stored_points(report))


def test_the_reference_is_that_of_the_report(report: FeedReport) -> None:
    assert np.all(read(report).z0 == report.reference_ohm)


def test_r_and_x_come_back_from_s11_through_the_transformer(report: FeedReport) -> None:
    network = read(report)
    points = stored_points(report)
    for hertz, seen_ohm in zip(np.rint(network.f), network.z[:, 0, 0], strict=True):
        point, at_feed_ohm = points[hertz], report.transformer_ratio * seen_ohm
        assert at_feed_ohm.real == pytest.approx(point.resistance_ohm, abs=1e-3)
        assert at_feed_ohm.imag == pytest.approx(point.reactance_ohm, abs=1e-3)


def test_s11_is_the_stored_reflection_to_its_digits(report: FeedReport) -> None:
    network = read(report)
    points = stored_points(report)
    for hertz, s11, swr in zip(
        np.rint(network.f), network.s[:, 0, 0], network.s_vswr[:, 0, 0], strict=True
    ):
        point = points[hertz]
        assert point.reflection_deg is not None
        stored = point.reflection * np.exp(1j * np.radians(point.reflection_deg))
        # Stored to 5 decimals and a hundredth of a degree; R and X to a thousandth of an ohm.
        assert abs(s11 - stored) < 1.2e-4
        assert swr == pytest.approx(point.swr, rel=1e-4, abs=1e-4)


def test_one_plane_holds_for_a_design_with_networks_too() -> None:
    matched = sample_planned(sample_request(**FULL)).reports[0]
    centre = matched.bands[0].centre
    network = read(matched)
    index = int(np.argmin(abs(network.f - 1e6 * centre.frequency_mhz)))
    at_feed_ohm = matched.transformer_ratio * network.z[index, 0, 0]
    assert at_feed_ohm == pytest.approx(
        complex(centre.resistance_ohm, centre.reactance_ohm), abs=2e-3
    )
    assert "L-networks" in touchstone(matched, NAME)


def test_the_comments_tell_design_candidate_and_plane(report: FeedReport) -> None:
    comments = [each for each in touchstone(report, NAME).splitlines() if each.startswith("!")]
    assert comments[0] == f"! Design: {NAME}"
    assert comments[1].startswith("! Candidate: 1, 20.31 m of AWG 12 hard-drawn copper")
    assert "line side of its 4:1 transformer" in comments[2]
    assert comments[3] == "! Reference resistance: 75.5 ohm"


@pytest.mark.parametrize("name", ["Küste Ω", "a\n7.0 1 1", "a\r# Hz S RI R 50", "a\u20287 1 1"])
def test_no_name_leaves_its_comment_or_ascii(report: FeedReport, name: str) -> None:
    text = touchstone(report, name)
    assert text.isascii()
    assert [each for each in text.splitlines() if each.startswith("#")] == ["# MHz S RI R 75.5"]
    assert len(read(report, name)) == len(read(report))


def test_it_is_served_as_a_file_with_a_tag(wire: httpx.Client, stored: Stored) -> None:
    address = f"/v1/designs/{stored.done}/candidates/2/report"
    answer = wire.get(f"{address}.s1p")
    assert answer.status_code == 200
    assert answer.headers["content-type"] == "text/plain; charset=us-ascii"
    assert f"feed-impedance-{stored.done}-2.s1p" in answer.headers["content-disposition"]
    report = FeedReport.model_validate_json(wire.get(address).content)
    assert answer.text == touchstone(report, NAME)
    again = wire.get(f"{address}.s1p", headers={"If-None-Match": answer.headers["etag"]})
    assert again.status_code == 304


def test_the_page_of_the_candidate_links_it(wire: httpx.Client, stored: Stored) -> None:
    page = wire.get(f"/designs/{stored.done}/candidates/1").text
    assert f'href="/v1/designs/{stored.done}/candidates/1/report.s1p"' in page


def test_a_design_under_way_has_none_yet(wire: httpx.Client, stored: Stored) -> None:
    answer = wire.get(f"/v1/designs/{stored.queued}/candidates/1/report.s1p")
    assert answer.status_code == 409
