"""Candidates side by side: differences first, equal below, and figures of the API throughout."""

from __future__ import annotations

import httpx
import pytest

from service.settings import Settings
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.pages import Page, finished, read, same
from tests.service.samples import FULL, sample_planned, sample_request


@pytest.fixture(scope="module")
def full(wire: httpx.Client, wire_store: Store, wire_settings: Settings) -> str:
    del wire
    request = sample_request(name="Another station", **FULL)
    return finished(wire_store, wire_settings, request, sample_planned(request))


def compared(wire: httpx.Client, *named: str) -> Page:
    return read(wire, "/compare?" + "&".join(f"with={each}" for each in named))


def test_rows_that_differ_come_first_and_equal_ones_below(
    wire: httpx.Client, stored: Stored
) -> None:
    page = compared(wire, f"{stored.done}:1", f"{stored.done}:2")
    differing, equal = page.tables
    assert page.words.index("What differs") < page.words.index("What is equal")
    assert all(len(set(row[1:])) > 1 for row in differing[1:])
    assert all(len(set(row[1:])) == 1 for row in equal[1:])
    assert {"candidate", "length, m"} <= {row[0] for row in differing}
    assert {"conductor", "item", "height, m", "transformer", "design"} <= {row[0] for row in equal}
    classes = [a.get("class") or "" for tag, a in page.tags if tag == "table"]
    assert ["differing" in each for each in classes] == [True, False]


def test_compared_figures_are_those_of_the_api(wire: httpx.Client, stored: Stored) -> None:
    page = compared(wire, f"{stored.done}:1", f"{stored.done}:2")
    rows = {row[0]: row[1:] for table in page.tables for row in table[1:]}
    for column in (0, 1):
        at = f"/v1/designs/{stored.done}/candidates/{column + 1}"
        candidate, report = wire.get(at).json(), wire.get(f"{at}/report").json()
        same(rows["length, m"][column], candidate["length_m"])
        same(rows["worst SWR where served"][column], candidate["swr_worst"])
        assert rows["conductor"][column] == candidate["conductor"]
        for outcome, band in zip(candidate["bands"], report["bands"], strict=True):
            name = outcome["name"]
            same(rows[f"{name}, worst SWR"][column], outcome["swr_worst"])
            same(rows[f"{name}, resonance, MHz"][column], outcome["resonance_mhz"])
            same(rows[f"{name}, R at the centre, Ω"][column], band["centre"]["resistance_ohm"])
            same(rows[f"{name}, X at the centre, Ω"][column], band["centre"]["reactance_ohm"])
            same(rows[f"{name}, gain, dBi"][column], band["radiation"]["gain_dbi"])
            same(rows[f"{name}, take-off angle, °"][column], band["radiation"]["take_off_deg"])
            assert rows[f"{name}, served"][column].startswith(outcome["service"])


def test_candidates_of_several_designs_go_side_by_side(
    wire: httpx.Client, stored: Stored, full: str
) -> None:
    page = compared(wire, f"{stored.done}:1", f"{full}:2", f"{full}:1")
    rows = {row[0]: row[1:] for table in page.tables for row in table[1:]}
    assert rows["design"] == ["Invented station", "Another station", "Another station"]
    # Only the second design asks for this band, so what it does there is one row.
    assert rows["10m"][0] == "not asked for"
    assert rows["10m"][1].endswith(tuple("0123456789"))
    assert not [what for what in rows if what.startswith("10m, ")]
    # One plot a band; a wire keeps its look where others are not drawn.
    plots = [a for tag, a in page.tags if tag == "svg" and "overlay" in (a.get("class") or "")]
    assert len(plots) == 4
    html = wire.get(f"/compare?with={stored.done}:1&with={full}:2&with={full}:1").text
    last = html[
        html.rindex('<svg class="plot swr overlay"') : html.index(
            "</svg>", html.rindex('<svg class="plot swr overlay"')
        )
    ]
    assert "curve trace-1" in last
    assert "curve trace-2" in last
    assert "curve trace-0" not in last


def test_one_candidate_or_none_leads_to_a_choice(wire: httpx.Client, stored: Stored) -> None:
    for named in ([], [f"{stored.done}:1"], [f"{stored.done}:1", f"{stored.done}:1"], [""]):
        page = compared(wire, *named)
        assert not page.tables
        assert "Choose two to four candidates" in page.words
    boxes = [a for tag, a in compared(wire, f"{stored.done}:1").tags if a.get("type") == "checkbox"]
    assert [(a["value"], "checked" in a) for a in boxes] == [
        (f"{stored.done}:1", True),
        (f"{stored.done}:2", False),
    ]


@pytest.mark.parametrize(
    "named", ["nonsense", "{done}:", "{done}:x", "{done}:²", ":1", "{done}:1:1"]
)
def test_what_names_no_candidate_is_refused(wire: httpx.Client, stored: Stored, named: str) -> None:
    answer = wire.get("/compare", params={"with": named.format(done=stored.done)})
    assert answer.status_code in {404, 422}
    assert answer.json()["faults"]


def test_more_than_four_are_refused_and_an_unknown_rank_is_not_found(
    wire: httpx.Client, stored: Stored
) -> None:
    many = wire.get("/compare", params={"with": [f"{stored.done}:{rank}" for rank in range(1, 6)]})
    assert many.status_code == 422
    assert many.json()["faults"][0]["field"] == "with"
    for rank in ("9", "0", "99999999999999999999999"):
        answer = wire.get("/compare", params={"with": f"{stored.done}:{rank}"})
        assert answer.status_code == 404


def test_the_page_of_a_design_offers_its_candidates_for_comparison(
    wire: httpx.Client, stored: Stored
) -> None:
    page = read(wire, f"/designs/{stored.done}")
    boxes = [a for tag, a in page.tags if tag == "input" and a.get("form") == "compare"]
    assert [a["value"] for a in boxes] == [f"{stored.done}:1", f"{stored.done}:2"]
    (form,) = [a for tag, a in page.tags if tag == "form" and a.get("id") == "compare"]
    assert (form["method"], form["action"]) == ("get", "/compare")
