"""The pages: what they show, that it is what the API gives, and that they keep to themselves."""

from __future__ import annotations

import re
from collections.abc import Iterator
from html.parser import HTMLParser
from typing import Any

import httpx
import pytest

from service.contracts.candidate import PlannedDesign
from service.contracts.request import MOST_CANDIDATES, DesignRequest
from service.doorbell import Doorbell
from service.intake import submit
from service.settings import Settings
from service.store import jobs
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.samples import FULL, sample_planned, sample_request

#: What a page may weigh without images, by our own aim.
LARGEST_PAGE_BYTES = 150_000


class Page(HTMLParser):
    """The parts of a page that the tests look at."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.tables: list[list[list[str]]] = []
        self.words = ""
        self._cell = False
        self.feed(html)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag == "table":
            self.tables.append([])
        elif tag == "tr":
            self.tables[-1].append([])
        elif tag in {"td", "th"}:
            self.tables[-1][-1].append("")
            self._cell = True

    def handle_endtag(self, tag: str) -> None:
        if tag in {"td", "th", "tr", "table"}:
            self._cell = False

    def handle_data(self, data: str) -> None:
        self.words += data
        if self._cell:
            self.tables[-1][-1][-1] += data

    def attributes(self, name: str) -> Iterator[str]:
        for _, attributes in self.tags:
            value = attributes.get(name)
            if value is not None:
                yield value


def finished(
    store: Store, settings: Settings, request: DesignRequest, planned: PlannedDesign
) -> str:
    """Store a design that is done; whatever waits before it makes room."""
    for job in iter(lambda: jobs.claim(store, "tests", lease_s=600.0), None):
        jobs.fail(store, job, "makes room for the design that is looked at")
    design_id = submit(store, Doorbell(settings), request, None).design_id
    claimed = jobs.claim(store, "tests", lease_s=600.0)
    assert claimed is not None
    assert jobs.finish(store, claimed, planned)
    return design_id


@pytest.fixture(scope="module")
def full(wire_store: Store, wire_settings: Settings, stored: Stored) -> str:
    """A done design whose request says everything a request may say."""
    del stored
    request = sample_request(**FULL)
    return finished(wire_store, wire_settings, request, sample_planned(request, 3))


def read(wire: httpx.Client, address: str) -> Page:
    answer = wire.get(address, headers={"Accept": "text/html"})
    assert answer.status_code == 200, answer.text
    assert answer.headers["content-type"] == "text/html; charset=utf-8"
    return Page(answer.text)


def same(shown: str, given: float | None) -> None:
    """The number shown is the number given, to the digits shown."""
    text = shown.strip().replace("−", "-").replace("\u00a0", " ")
    if given is None:
        assert text == "–"
    elif text == "> 100":
        assert given >= 100.0
    else:
        digits = len(text.partition(".")[2])
        assert float(text) == pytest.approx(given, abs=0.5000001 * 10.0**-digits)


def addresses(stored: Stored) -> list[str]:
    return [
        "/",
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
    grid = [point for band in given["bands"] for point in band["grid"]]
    for row, point in zip(figures, grid, strict=True):
        point_matches(row, point)


def point_matches(row: list[str], point: dict[str, Any]) -> None:
    for shown, field in zip(
        row,
        ("frequency_mhz", "resistance_ohm", "reactance_ohm", "reflection", "swr"),
        strict=True,
    ):
        same(shown, point[field])


def test_plots_come_before_tables(wire: httpx.Client, stored: Stored) -> None:
    tags = [tag for tag, _ in read(wire, f"/designs/{stored.done}/candidates/1").tags]
    page = wire.get(f"/designs/{stored.done}/candidates/1").text
    assert page.index('class="plot rx wide"') < page.index("<table")
    assert tags.count("details") == 2
    assert page.rindex('class="plot swr"') < page.index("bands-table")


def test_every_plot_is_named_and_described_for_those_who_listen(
    wire: httpx.Client, stored: Stored
) -> None:
    page = read(wire, f"/designs/{stored.done}/candidates/1")
    ids = list(page.attributes("id"))
    assert len(ids) == len(set(ids))
    plots = [a for tag, a in page.tags if tag == "svg" and a.get("role") == "img"]
    assert len(plots) == 2 + 3 + 1  # impedance on either paper, SWR on three bands, steadiness
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


def test_pages_ask_nothing_of_another_host_and_carry_no_script_or_style(
    wire: httpx.Client, stored: Stored
) -> None:
    for address in addresses(stored):
        page = read(wire, address)
        for name in ("href", "src", "action"):
            assert all(value.startswith(("/", "#")) for value in page.attributes(name)), address
        assert not {"script", "style", "iframe", "object"} & {tag for tag, _ in page.tags}, address
        for _, attributes in page.tags:
            assert not [name for name in attributes if name == "style" or name.startswith("on")]


def test_every_link_of_a_candidate_page_leads_somewhere(wire: httpx.Client, stored: Stored) -> None:
    page = read(wire, f"/designs/{stored.done}/candidates/1")
    links = {value for value in page.attributes("href") if value.startswith("/")}
    report = f"/v1/designs/{stored.done}/candidates/1/report"
    assert {report, f"{report}.csv", f"/designs/{stored.done}/candidates/2"} <= links
    for link in links:
        assert wire.get(link).status_code == 200, link


@pytest.mark.parametrize("rank", [1, 3])
def test_a_candidate_tells_how_it_hangs_and_what_it_costs(
    wire: httpx.Client, full: str, rank: int
) -> None:
    given = wire.get(f"/v1/designs/{full}/candidates/{rank}").json()
    words = read(wire, f"/designs/{full}/candidates/{rank}").words.replace("\u00a0", " ")
    assert (given["height_m"], given["feed_fraction"]) == (12.0, 0.36)
    assert "Height12.00 m" in words
    assert f"Fed{0.36 * given['length_m']:.2f} m from one end (36 %)" in words
    same(re.search(r"Cost of the wire([\d.]+)", words)[1], given["cost"])  # type: ignore[index]  # a miss fails too
    same(re.search(r"Line loss([\d.]+) dB", words)[1], given["loss_db"])  # type: ignore[index]  # as above
    for improvement in given["improvements"]:
        assert improvement in words


def test_a_plain_candidate_tells_no_cost_or_loss(wire: httpx.Client, stored: Stored) -> None:
    words = read(wire, f"/designs/{stored.done}/candidates/1").words
    assert "Fedat the centre" in words
    assert "Cost of the wire" not in words
    assert "Line loss" not in words


def table_headed(page: Page, *first: str) -> list[list[str]]:
    """The table whose first cells read so."""
    found = [each for each in page.tables if each and each[0][: len(first)] == list(first)]
    assert len(found) == 1, [each[0] for each in page.tables]
    return found[0]


def test_trimming_shows_the_figures_of_the_api(wire: httpx.Client, full: str) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    given = wire.get(f"/v1/designs/{full}/candidates/1").json()["trims"]
    assert given
    for row, trim in zip(table_headed(page, "Band", "resonance")[1:], given, strict=True):
        band, order, moved = row
        assert (band, order) == (trim["band"], {1: "1st", 3: "3rd"}[trim["order"]])
        same(moved.removeprefix("+"), trim["khz_per_cm"])


def test_steadiness_shows_every_departure_of_the_api(wire: httpx.Client, full: str) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    given = wire.get(f"/v1/designs/{full}/candidates/1").json()["steadiness"]
    head, *rows = table_headed(page, "Band", "limit", "as planned")
    shown = {
        (row[0], what): cell for row in rows for what, cell in zip(head[3:], row[3:], strict=True)
    }
    assert set(shown) == {(each["band"], each["what"]) for each in given["departures"]}
    assert len(head) == 3 + 8
    for each in given["departures"]:
        swr, _, left = shown[each["band"], each["what"]].partition(" ")
        same(swr, each["swr_worst"])
        # A part is shown in whole per cent, never rounded up to the whole.
        percent = 100 if not left else int(left.removesuffix("\u00a0%"))
        assert percent == int(100.0 * each["served_fraction"] + 1e-9)


def test_the_worst_departure_is_told_in_words(wire: httpx.Client, full: str) -> None:
    words = read(wire, f"/designs/{full}/candidates/1").words.replace("\u00a0", " ")
    assert (
        "It fares worst with lighter insulation: 0 of 2 required bands then served, "
        "76 % of the weighted width."
    ) in words


def test_the_far_end_of_the_line_is_in_the_report_table(wire: httpx.Client, full: str) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    given = wire.get(f"/v1/designs/{full}/candidates/1/report").json()
    head, *rows = table_headed(page, "Band", "At")
    assert head[-2:] == ["SWR at transmitter", "line loss, dB"]
    points = [band[place] for band in given["bands"] for place in ("low", "centre", "high")]
    for row, point in zip(rows, points, strict=True):
        point_matches(row[-7:-2], point)
        same(row[-2], point["transmitter_swr"])
        same(row[-1], point["line_loss_db"])


def test_a_limit_at_the_transmitter_is_said_to_apply_there(
    wire: httpx.Client, full: str, stored: Stored
) -> None:
    at_transmitter = read(wire, f"/designs/{full}/candidates/1")
    assert "The limits apply at the transmitter" in at_transmitter.words
    assert any("SWR at the transmitter" in table[0] for table in at_transmitter.tables)
    at_feed = read(wire, f"/designs/{stored.done}/candidates/1")
    assert "at the transmitter" not in at_feed.words


def test_voltages_currents_and_network_parts_are_those_of_the_api(
    wire: httpx.Client, full: str
) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    given = wire.get(f"/v1/designs/{full}/candidates/1/report").json()["bands"]
    rows = table_headed(page, "Band", "Feed point")[2:]
    assert [band["name"] for band in given if band["matching"] is None] == ["10m"]
    for row, band in zip(rows, given, strict=True):
        assert row[0].startswith(band["name"])
        same(row[1], band["stress"]["voltage_peak_v"])
        same(row[2], band["stress"]["current_rms_a"])
        if band["matching"] is None:
            assert row[3:] == ["no network"]
            continue
        parts = {part["place"]: part for part in band["matching"]["parts"]}
        part_matches(row[3:6], parts["series"])
        if "shunt" in parts:
            assert row[6] == band["matching"]["shunt_at"]
            part_matches(row[7:10], parts["shunt"])
        else:
            assert row[6:10] == ["–", "none", "–", "–"]
        same(row[10], band["matching"]["loss_db"])


def part_matches(cells: list[str], part: dict[str, Any]) -> None:
    value, unit = cells[0].split()
    same(value, part["value"])
    assert unit == part["unit"]
    same(cells[1], part["voltage_peak_v"])
    same(cells[2], part["current_rms_a"])


def test_a_design_without_networks_shows_voltage_and_current_alone(
    wire: httpx.Client, stored: Stored
) -> None:
    page = read(wire, f"/designs/{stored.done}/candidates/1")
    given = wire.get(f"/v1/designs/{stored.done}/candidates/1/report").json()["bands"]
    head, *rows = table_headed(page, "Band", "Feed point, V peak")
    assert len(head) == 3
    for row, band in zip(rows, given, strict=True):
        same(row[1], band["stress"]["voltage_peak_v"])
    assert "Series part" not in page.words


def test_sets_show_who_serves_which_band(wire: httpx.Client, full: str) -> None:
    page = read(wire, f"/designs/{full}")
    result = wire.get(f"/v1/designs/{full}").json()["result"]
    table = table_headed(page, "Band", "2 dipoles1 and 2")
    assert [len(each["ranks"]) for each in result["sets"]] == [2, 3]
    rows = {row[0].removesuffix("wished for"): row[1:] for row in table[1:]}
    for column, chosen in enumerate(result["sets"]):
        serves = dict(chosen["serves"])
        for index, band in enumerate(result["candidates"][0]["bands"]):
            cell = rows[band["name"]][column]
            rank = serves.get(band["name"])
            if rank is None:
                assert cell == "none"
                continue
            outcome = result["candidates"][rank - 1]["bands"][index]
            name, _, left = cell.partition(", ")
            assert name == f"candidate {rank}"
            assert bool(left) is (outcome["service"] != "served")
        served, total = chosen["required_served"], chosen["required_total"]
        assert rows["Required"][column] == f"{served} of {total} served"
        assert rows["Width"][column] == "88\u00a0% by weight"
        assert chosen["why"] in page.words


def test_what_to_relax_is_told_and_led_to_where_not_all_is_served(
    wire: httpx.Client, stored: Stored
) -> None:
    page = read(wire, f"/designs/{stored.done}")
    result = wire.get(f"/v1/designs/{stored.done}").json()["result"]
    assert result["relax"]
    for sentence in result["relax"]:
        assert sentence in page.words
    assert "No single wire of this stock serves every required band whole." in page.words
    assert "#relax" in set(page.attributes("href"))
    assert "relax" in set(page.attributes("id"))


def test_where_one_wire_serves_all_only_the_sets_asked_for_are_led_to(
    wire: httpx.Client, full: str
) -> None:
    page = read(wire, f"/designs/{full}")
    assert "One wire serves every required band" in page.words
    assert "#sets" in set(page.attributes("href"))
    assert not {"relax"} & set(page.attributes("id"))


def test_behind_the_trade_off_is_a_table_of_all_its_wires(wire: httpx.Client, full: str) -> None:
    page = read(wire, f"/designs/{full}")
    given = wire.get(f"/v1/designs/{full}").json()["result"]["trade_off"]
    rows = table_headed(page, "length, m")[1:]
    assert len(given) == 40
    for row, wire_of_front in zip(rows, given, strict=True):
        for shown, field in (
            (row[0], "length_m"),
            (row[3], "required_served"),
            (row[5], "swr_worst"),
            (row[6], "loss_db"),
            (row[7], "cost"),
        ):
            same(shown, wire_of_front[field])
        assert row[1] == wire_of_front["conductor"]
        rank = wire_of_front["rank"]
        assert row[8].strip() == ("" if rank is None else str(rank))


def test_the_trade_off_names_the_candidates_that_are_not_on_it(
    wire: httpx.Client, full: str
) -> None:
    page = read(wire, f"/designs/{full}")
    assert "Candidate 3 is not among them." in page.words
    plots = [a["class"] for tag, a in page.tags if tag == "svg" and a.get("role") == "img"]
    assert plots.count("plot trade") == 3


def test_a_ranking_by_the_worst_case_shows_the_worst_case(wire: httpx.Client, full: str) -> None:
    words = read(wire, f"/designs/{full}").words.replace("\u00a0", " ")
    worst = "In its worst case, with lighter insulation: 0 of 2 required, 76 % of the weighted"
    assert words.count(worst) == 3


def test_a_request_that_says_everything_is_told_in_words(wire: httpx.Client, full: str) -> None:
    words = read(wire, f"/designs/{full}").words.replace("\u00a0", " ")
    for said in (
        "10.00 or 12.00 m over average ground",
        "0.425 a metre",
        "Fed at the centre or 36 % of the length",
        "an L-network for each band, 20.00 m of RG-213",
        "SWR limits apply at the transmitter.",
        "By how each wire holds up where it departs most from the plan.",
        "Sets of up to 3 dipoles asked for.",
        "permittivity of insulation ±10 %",
    ):
        assert said in words


def test_a_result_stored_before_these_figures_is_still_shown(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    request = sample_request(name="Of last year")
    planned = sample_planned(request)
    bare = {"trade_off", "sets", "relax", "map_error_percent"}
    newer = {"loss_db", "cost", "height_m", "feed_fraction", "improvements", "trims", "steadiness"}
    old_candidates = [
        each.model_dump(exclude=newer, mode="json") for each in planned.result.candidates
    ]
    old_reports = [
        each.model_dump(exclude={"height_m", "feed_fraction", "bands"}, mode="json")
        | {"bands": [b.model_dump(exclude={"stress", "matching"}) for b in each.bands]}
        for each in planned.reports
    ]
    result = planned.result.model_dump(exclude=bare, mode="json") | {"candidates": old_candidates}
    old = PlannedDesign.model_validate({"result": result, "reports": old_reports})
    design_id = finished(wire_store, wire_settings, request, old)
    for address in (f"/designs/{design_id}", f"/designs/{design_id}/candidates/2"):
        page = read(wire, address)
        ids = set(page.attributes("id"))
        assert "impedance" in ids
        assert not {"sets", "relax", "trade", "steady", "trim", "stress"} & ids


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
        assert "script" not in {tag for tag, _ in page.tags}


def test_the_largest_page_keeps_within_its_weight(
    wire: httpx.Client, wire_store: Store, wire_settings: Settings
) -> None:
    names = ["160m", "80m", "60m", "40m", "30m", "20m", "17m", "15m", "12m", "10m", "6m"]
    largest = {
        "bands": [
            {"band_list": "amateur-region-2", "names": names},
            {"name": "2m", "low_mhz": 144.0, "high_mhz": 148.0},
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
