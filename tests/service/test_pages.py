"""The pages: what they show, that it is what the API gives, and that they keep to themselves."""

from __future__ import annotations

import re

import httpx
import pytest

from service.contracts.request import MOST_CANDIDATES
from service.doorbell import Doorbell
from service.intake import submit
from service.settings import Settings
from service.store import jobs
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.pages import finished, point_matches, read, same
from tests.service.samples import FULL, sample_planned, sample_request

#: What a page may weigh without images, by our own aim.
LARGEST_PAGE_BYTES = 150_000


def addresses(stored: Stored) -> list[str]:
    return [
        "/",
        "/new",
        f"/designs/{stored.done}",
        f"/designs/{stored.running}",
        f"/designs/{stored.cancelled}",
        f"/designs/{stored.done}/candidates/1",
        f"/designs/{stored.done}/candidates/2",
    ]


def test_the_list_shows_each_design_with_its_state_and_leads_to_it(
    wire: httpx.Client, stored: Stored
) -> None:
    page = read(wire, "/")
    links = set(page.attributes("href"))
    for state in ("done", "running", "queued", "cancelled"):
        assert f"/designs/{getattr(stored, state)}" in links
        assert state in page.words


def test_the_list_tells_the_best_candidate_of_a_done_design(
    wire: httpx.Client, stored: Stored
) -> None:
    best = wire.get(f"/v1/designs/{stored.done}/candidates/1").json()
    words = read(wire, "/").words
    assert f"{best['length_m']:.2f} m of {best['conductor']}" in words
    assert f"{best['required_served']} of {best['required_total']} required bands served" in words


def test_the_list_leads_on_to_older_designs_until_there_are_none(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    for number in range(25):
        request = sample_request(name=f"Design of many {number}")
        submit(wire_store, Doorbell(wire_settings), request, None)
    seen: list[str] = []
    address = "/"
    while address:
        page = read(wire, address)
        seen += re.findall(r"Design of many \d+", page.words)
        following = [a["href"] for tag, a in page.tags if tag == "a" and a.get("rel") == "next"]
        address = following[0] or "" if following else ""
    assert seen == [f"Design of many {number}" for number in reversed(range(25))]


@pytest.mark.parametrize(("state", "asks_again"), [("running", True), ("done", False)])
def test_only_the_page_of_a_design_that_is_not_done_asks_again(
    wire: httpx.Client, stored: Stored, state: str, asks_again: bool
) -> None:
    page = read(wire, f"/designs/{getattr(stored, state)}")
    refreshes = [a for tag, a in page.tags if tag == "meta" and a.get("http-equiv") == "refresh"]
    assert bool(refreshes) is asks_again
    assert bool(list(page.attributes("data-events"))) is asks_again


def test_the_page_of_a_running_design_shows_its_progress(
    wire: httpx.Client, stored: Stored
) -> None:
    given = wire.get(f"/v1/designs/{stored.running}").json()["progress"]
    page = read(wire, f"/designs/{stored.running}")
    bars = [attributes for tag, attributes in page.tags if tag == "progress"]
    assert [float(bar["value"] or "nan") for bar in bars] == [given["fraction"]]
    assert given["step"] in page.words


def test_a_failed_design_tells_why(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    for job in iter(lambda: jobs.claim(wire_store, "tests", lease_s=600.0), None):
        jobs.fail(wire_store, job, "makes room for the design that is looked at")
    request = sample_request(name="To fail")
    design_id = submit(wire_store, Doorbell(wire_settings), request, None).design_id
    claimed = jobs.claim(wire_store, "tests", lease_s=600.0)
    assert claimed is not None
    assert jobs.fail(wire_store, claimed, "the height is out of range")
    assert "the height is out of range" in read(wire, f"/designs/{design_id}").words


def test_the_request_is_told_in_words(wire: httpx.Client, stored: Stored) -> None:
    words = read(wire, f"/designs/{stored.done}").words
    assert "at most 23.00 m of wire, 10.00 m over average ground" in words
    conductor = sample_request().stock.conductors[0].label
    assert f"{conductor} (2.05 mm), item W-12" in words
    assert "Fed at the centre, transformer 1:1 or 2:1, 50.0 Ω reference, 100 W." in words
    assert "Length ±1 %, height ±0.5 m, ground 2 times wetter and drier" in words


def test_every_candidate_is_ranked_with_why_and_compromise(
    wire: httpx.Client, stored: Stored
) -> None:
    words = read(wire, f"/designs/{stored.done}").words
    places = []
    for each in wire.get(f"/v1/designs/{stored.done}/candidates").json()["candidates"]:
        places += [words.index(each["why"]), words.index(each["compromise"])]
    assert places == sorted(places)


@pytest.mark.parametrize("rank", [1, 2])
def test_the_band_table_shows_the_figures_of_the_api(
    wire: httpx.Client, stored: Stored, rank: int
) -> None:
    page = read(wire, f"/designs/{stored.done}/candidates/{rank}")
    given = wire.get(f"/v1/designs/{stored.done}/candidates/{rank}").json()["bands"]
    rows = next(t for t in page.tables if t[0][0] == "Band" and "Nearest resonance" in t[0])[2:]
    for row, band in zip(rows, given, strict=True):
        name, _, order, *figures, limit, result = row
        assert name.startswith(band["name"])
        assert ("wished for" in name) is not band["required"]
        assert order == {None: "none", 1: "1st", 3: "3rd"}[band["order"]]
        for shown, field in zip(
            figures,
            ("resonance_mhz", "offset_khz", "offset_percent", "swr_low", "swr_centre", "swr_high"),
            strict=True,
        ):
            same(shown, band[field])
        same(limit, band["swr_limit"])
        assert result.strip().startswith(band["service"])
        assert band["reason"] in page.words


def test_the_report_table_shows_the_figures_of_the_api(wire: httpx.Client, stored: Stored) -> None:
    page = read(wire, f"/designs/{stored.done}/candidates/1")
    given = wire.get(f"/v1/designs/{stored.done}/candidates/1/report").json()
    rows = next(t for t in page.tables if t[0][:2] == ["Band", "At"])[1:]
    points = [band[place] for band in given["bands"] for place in ("low", "centre", "high")]
    for row, point in zip(rows, points, strict=True):
        point_matches(row[-5:], point)


def test_behind_each_plot_is_a_table_of_the_points_drawn(
    wire: httpx.Client, stored: Stored
) -> None:
    page = read(wire, f"/designs/{stored.done}/candidates/1")
    given = wire.get(f"/v1/designs/{stored.done}/candidates/1/report").json()
    sweep, bands = page.tables[0], page.tables[1]
    assert len(sweep) > 50
    for row, point in zip(sweep[1:], given["sweep"][::6], strict=True):
        point_matches(row, point)
    figures = [row for row in bands if len(row) == 5 and row[0] != "MHz"]
    grid = [point for band in given["bands"] for point in band["grid"][::2]]
    for row, point in zip(figures, grid, strict=True):
        point_matches(row, point)


def test_plots_come_before_tables(wire: httpx.Client, stored: Stored) -> None:
    tags = [tag for tag, _ in read(wire, f"/designs/{stored.done}/candidates/1").tags]
    page = wire.get(f"/designs/{stored.done}/candidates/1").text
    assert page.index('class="plot rx wide"') < page.index("<table")
    assert tags.count("details") == 2 + 3  # impedance, SWR; reflection, current, pattern
    assert page.rindex('class="plot swr"') < page.index("bands-table")


def test_every_plot_is_named_and_described_for_those_who_listen(
    wire: httpx.Client, stored: Stored
) -> None:
    page = read(wire, f"/designs/{stored.done}/candidates/1")
    ids = list(page.attributes("id"))
    assert len(ids) == len(set(ids))
    plots = [a for tag, a in page.tags if tag == "svg" and a.get("role") == "img"]
    # Wire and impedance on either paper, SWR on three bands, steadiness.
    assert len(plots) == 2 + 2 + 3 + 1
    for attributes in plots:
        title, description = (attributes["aria-labelledby"] or "").split()
        assert {title, description} <= set(ids)


def test_every_section_is_named_by_its_heading(wire: httpx.Client, stored: Stored) -> None:
    for address in addresses(stored):
        page = read(wire, address)
        ids = set(page.attributes("id"))
        for tag, attributes in page.tags:
            if tag == "section":
                assert attributes["aria-labelledby"] in ids, address


def test_pages_ask_nothing_of_another_host_and_carry_no_script_or_style_in_themselves(
    wire: httpx.Client, stored: Stored
) -> None:
    for address in addresses(stored):
        page = read(wire, address)
        for name in ("href", "src", "action"):
            assert all(value.startswith(("/", "#")) for value in page.attributes(name)), address
        assert not {"style", "iframe", "object"} & {tag for tag, _ in page.tags}, address
        for tag, attributes in page.tags:
            if tag == "script":
                assert attributes["type"] == "module", address
                assert (attributes["src"] or "").startswith("/static/"), address
            assert not [name for name in attributes if name == "style" or name.startswith("on")]


def test_every_link_of_a_candidate_page_leads_somewhere(wire: httpx.Client, stored: Stored) -> None:
    page = read(wire, f"/designs/{stored.done}/candidates/1")
    links = {value for value in page.attributes("href") if value.startswith("/")}
    report = f"/v1/designs/{stored.done}/candidates/1/report"
    assert {report, f"{report}.csv", f"/designs/{stored.done}/candidates/2"} <= links
    for link in links:
        assert wire.get(link).status_code == 200, link


def test_cautions_and_what_is_not_modelled_are_on_the_sheet(
    wire: httpx.Client, stored: Stored
) -> None:
    words = read(wire, f"/designs/{stored.done}/candidates/1").words
    report = wire.get(f"/v1/designs/{stored.done}/candidates/1/report").json()
    for each in (*report["cautions"], *report["provenance"]["not_modelled"]):
        assert each in words


def test_a_name_is_shown_as_it_is_and_never_runs(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    request = sample_request(name="<script>alert(1)</script>")
    design_id = submit(wire_store, Doorbell(wire_settings), request, None).design_id
    for address in ("/", f"/designs/{design_id}"):
        page = read(wire, address)
        assert "<script>alert(1)</script>" in page.words
        assert all(attributes.get("src") for tag, attributes in page.tags if tag == "script")


def test_the_largest_page_keeps_within_its_weight(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    names = ["160m", "80m", "60m", "40m", "30m", "20m", "17m", "15m", "12m", "10m", "6m"]
    largest = {
        "bands": [
            {"band_list": "amateur-region-2", "names": names},
            {"name": "4m", "low_mhz": 70.0, "high_mhz": 70.5},
        ],
        "site": {"span_m": 90.0, "height_m": 12.0},
        "candidates": MOST_CANDIDATES,
        "largest_set": 4,
    }
    request = sample_request(**(FULL | largest))
    design_id = finished(
        wire_store, wire_settings, request, sample_planned(request, MOST_CANDIDATES)
    )
    for address in (f"/designs/{design_id}", f"/designs/{design_id}/candidates/1"):
        page = wire.get(address)
        assert 100_000 < len(page.content) < LARGEST_PAGE_BYTES, address


def test_files_of_ours_are_kept_by_the_browser_under_their_content(wire: httpx.Client) -> None:
    sheet = next(a["href"] for tag, a in read(wire, "/").tags if a.get("rel") == "stylesheet")
    assert sheet is not None
    answer = wire.get(sheet)
    assert answer.headers["content-type"].startswith("text/css")
    assert "immutable" in answer.headers["cache-control"]
    assert wire.get("/").headers["cache-control"] == "no-cache"
