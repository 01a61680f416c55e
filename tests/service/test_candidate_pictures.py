"""The pictures on a candidate's page: that their figures are the API's, and where they stand."""

from __future__ import annotations

import httpx
import pytest

from service.contracts.candidate import PlannedDesign
from service.settings import Settings
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.pages import Page, finished, read, same
from tests.service.samples import FULL, sample_planned, sample_request


@pytest.fixture(scope="module")
def full(wire: httpx.Client, wire_store: Store, wire_settings: Settings) -> str:
    del wire
    request = sample_request(name="With pictures", **FULL)
    return finished(wire_store, wire_settings, request, sample_planned(request))


def tables(page: Page, first: str) -> list[list[list[str]]]:
    return [table for table in page.tables if table[0] and table[0][0].strip() == first]


def test_the_table_of_gain_shows_the_figures_of_the_api(wire: httpx.Client, full: str) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    bands = wire.get(f"/v1/designs/{full}/candidates/1/report").json()["bands"]
    (table,) = [each for each in page.tables if "gain, dBi" in each[0]]
    for row, band in zip(table[1:], bands, strict=True):
        assert row[0] == band["name"]
        given = band["radiation"]
        if given is None:
            assert row[1:] == ["not drawn"]
            continue
        for cell, field in zip(row[1:4], ("gain_dbi", "take_off_deg", "azimuth_deg"), strict=True):
            same(cell, given[field])
        fractions = ("radiated_fraction", "wire_loss_fraction", "ground_loss_fraction")
        for cell, field in zip(row[4:], fractions, strict=True):
            same(cell.removesuffix("\u00a0%"), 100.0 * given[field])


def test_behind_the_smith_chart_are_the_reflections_of_the_api(
    wire: httpx.Client, full: str
) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    bands = wire.get(f"/v1/designs/{full}/candidates/1/report").json()["bands"]
    (table,) = [each for each in page.tables if ["MHz", "|Γ|", "angle, °"] in each]
    rows = [row for row in table if len(row) == 3 and row[0] != "MHz"]
    points = [point for band in bands for point in band["grid"][::5]]
    for row, point in zip(rows, points, strict=True):
        for cell, field in zip(row, ("frequency_mhz", "reflection", "reflection_deg"), strict=True):
            same(cell, point[field])


def test_behind_the_currents_are_sizes_and_phases_of_the_api(wire: httpx.Client, full: str) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    report = wire.get(f"/v1/designs/{full}/candidates/1/report").json()
    (table,) = tables(page, "m")
    assert len(table[2:]) == 21
    for line, row in enumerate(table[2:]):
        same(row[0], report["length_m"] * 2 * line / 40)
        for index, band in enumerate(report["bands"]):
            same(row[1 + 2 * index], band["current"]["size"][2 * line])
            same(row[2 + 2 * index], band["current"]["phase_deg"][2 * line])


def test_behind_the_patterns_are_gains_of_the_api_every_ten_degrees(
    wire: httpx.Client, full: str
) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    bands = wire.get(f"/v1/designs/{full}/candidates/1/report").json()["bands"]
    (table,) = [each for each in page.tables if ["°", "across", "along", "around"] in each]
    rows = [row for row in table if len(row) == 4 and row[0] != "°"]
    expected = []
    for given in (band["radiation"] for band in bands if band["radiation"]):
        for angle in range(0, 181, 10):
            at = round(angle / given["step_deg"])
            side = round(min(angle, 180 - angle) / given["step_deg"])
            expected.append(
                (
                    angle,
                    given["broadside_dbi"][side],
                    given["end_on_dbi"][at],
                    given["around_dbi"][at],
                )
            )
    for row, figures in zip(rows, expected, strict=True):
        for cell, figure in zip(row, figures, strict=True):
            same(cell, figure)


def test_every_picture_of_the_page_is_served_as_an_image_that_may_be_kept(
    wire: httpx.Client, full: str
) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    images = [attributes for tag, attributes in page.tags if tag == "img"]
    # One Smith chart, a current for each band, a pattern for each but the one that has none.
    assert len(images) == 1 + 4 + 3
    for attributes in images:
        assert attributes["alt"]
        answer = wire.get(attributes["src"] or "")
        assert answer.status_code == 200
        assert answer.headers["content-type"].startswith("image/svg+xml")
        again = wire.get(attributes["src"] or "", headers={"If-None-Match": answer.headers["etag"]})
        assert again.status_code == 304
        _, _, width, height = answer.text.partition('viewBox="')[2].partition('"')[0].split()
        assert (attributes["width"], attributes["height"]) == (width, height)


@pytest.mark.parametrize(
    "plot",
    [
        "pattern-4.svg",
        "pattern-0.svg",
        "current-0.svg",
        "pattern-5.svg",
        "current-5.svg",
        "current-x.svg",
    ],
)
def test_a_picture_that_there_is_not_is_refused(wire: httpx.Client, full: str, plot: str) -> None:
    status = wire.get(f"/designs/{full}/candidates/1/plots/{plot}").status_code
    assert status == (422 if "x" in plot.partition("-")[2][0] else 404)


def test_a_picture_of_no_candidate_is_refused(wire: httpx.Client, stored: Stored) -> None:
    for design, rank, status in ((stored.done, 9, 404), (stored.running, 1, 409)):
        answer = wire.get(f"/designs/{design}/candidates/{rank}/plots/smith.svg")
        assert answer.status_code == status


def test_a_page_names_the_figures_its_script_reads(wire: httpx.Client, full: str) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    (link,) = [a for tag, a in page.tags if tag == "link" and a.get("rel") == "alternate"]
    assert wire.get(link["href"] or "").json()["rank"] == 1
    kinds = [a["data-read"] for tag, a in page.tags if tag == "svg" and "data-read" in a]
    assert kinds == ["rx", "rx", "swr", "swr", "swr", "swr"]


def test_a_result_stored_before_there_were_pictures_is_shown_without_them(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    request = sample_request(name="Of a release without pictures")
    planned = sample_planned(request)
    reports = []
    for report in planned.reports:
        old = report.model_dump(mode="json")
        for band in old["bands"]:
            del band["current"], band["radiation"]
            for point in (band["low"], band["centre"], band["high"], *band["grid"]):
                del point["reflection_deg"]
        for point in old["sweep"]:
            del point["reflection_deg"]
        reports.append(old)
    stored = {"result": planned.result.model_dump(mode="json"), "reports": reports}
    design_id = finished(wire_store, wire_settings, request, PlannedDesign.model_validate(stored))
    page = read(wire, f"/designs/{design_id}/candidates/1")
    ids = set(page.attributes("id"))
    assert {"hung", "impedance", "waves"} <= ids
    assert not {"reflection", "current", "pattern"} & ids
    assert not [tag for tag, _ in page.tags if tag == "img"]
    for plot in ("smith", "current-1", "pattern-1"):
        answer = wire.get(f"/designs/{design_id}/candidates/1/plots/{plot}.svg")
        assert answer.status_code == 404
