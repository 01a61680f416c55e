"""What helps to choose, build and trim: shown on the pages with the figures of the API."""

from __future__ import annotations

import re
from typing import Any

import httpx
import pytest

from service.contracts.candidate import PlannedDesign
from service.settings import Settings
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.pages import finished, point_matches, read, same, table_headed
from tests.service.samples import FULL, sample_planned, sample_request


@pytest.fixture(scope="module")
def full(wire_store: Store, wire_settings: Settings, stored: Stored) -> str:
    """A done design whose request says everything a request may say."""
    del stored
    request = sample_request(**FULL)
    return finished(wire_store, wire_settings, request, sample_planned(request, 3))


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


def test_the_list_of_candidates_tells_the_same_of_each(wire: httpx.Client, full: str) -> None:
    words = read(wire, f"/designs/{full}").words.replace("\u00a0", " ")
    for each in wire.get(f"/v1/designs/{full}/candidates").json()["candidates"]:
        told = (
            f"12.00 m high, fed {0.36 * each['length_m']:.2f} m from one end (36 %), "
            f"line loss {each['loss_db']:.2f} dB at most, wire for {each['cost']:.2f}"
        )
        assert told in words


def test_a_candidate_beyond_those_asked_for_is_said_to_be_a_member_of_a_set(
    wire: httpx.Client, full: str
) -> None:
    assert sample_request(**FULL).candidates == 2
    words = read(wire, f"/designs/{full}").words
    assert words.count("shown as a member of a set") == 1
    assert words.index("Invented reason for rank 2.") < words.index("shown as a member of a set")


def test_a_plain_candidate_tells_no_cost_or_loss(wire: httpx.Client, stored: Stored) -> None:
    words = read(wire, f"/designs/{stored.done}/candidates/1").words
    assert "Fedat the centre" in words
    assert "Cost of the wire" not in words
    assert "Line loss" not in words


def test_trimming_shows_the_figures_of_the_api(wire: httpx.Client, full: str) -> None:
    page = read(wire, f"/designs/{full}/candidates/1")
    given = wire.get(f"/v1/designs/{full}/candidates/1").json()["trims"]
    assert given
    for row, trim in zip(table_headed(page, "Band", "resonance")[1:], given, strict=True):
        band, order, moved = row
        assert (band, order) == (trim["band"], {1: "1st", 3: "3rd"}[trim["order"]])
        same(moved.removeprefix("+"), trim["khz_per_cm"])


def test_a_centimetre_is_shared_so_that_the_feed_keeps_its_place(
    wire: httpx.Client, full: str, stored: Stored
) -> None:
    off_centre = read(wire, f"/designs/{full}/candidates/1").words
    assert "shared between the two sides as they are long" in off_centre
    at_centre = read(wire, f"/designs/{stored.done}/candidates/1").words
    assert "half of it at each end" in at_centre


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
    assert {rank for each in result["sets"] for _, rank in each["serves"]} == {1, 2, 3}
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
            if left:
                assert left == f"{int(100.0 * outcome['served_fraction'])}\u00a0%"
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
