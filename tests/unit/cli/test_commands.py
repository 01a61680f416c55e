"""The command line as a stranger and a script meet it."""

import json
import sys
from io import StringIO
from pathlib import Path

import pytest

from service.contracts.candidate import PlannedDesign
from service.contracts.report import FeedReport
from tests.unit.cli.conftest import Type
from worker.cli import tables

SMALL = {
    "name": "a small one",
    "bands": "amateur-region-2: 12m",
    "site": {"span_m": 8.0, "ground": "free-space"},
    "stock": {"conductors": [{"awg": 12, "item_code": "W-12"}]},
}


def unwrapped(text: str) -> str:
    return " ".join(text.split())


def request_file(folder: Path, **changes: object) -> str:
    file = folder / "request.json"
    file.write_text(json.dumps(SMALL | changes))
    return str(file)


def test_a_planned_request_prints_its_wire_and_its_reasons(typed: Type, tmp_path: Path) -> None:
    end = typed("plan", request_file(tmp_path))
    assert end.status == 0
    assert "AWG 12 hard-drawn copper [W-12]" in end.out
    assert "on its 1st resonance" in unwrapped(end.out)


def test_progress_goes_to_standard_error_and_leaves_json_clean(typed: Type, tmp_path: Path) -> None:
    end = typed("plan", request_file(tmp_path), "--json")
    assert PlannedDesign.model_validate_json(end.out).result.candidates[0].rank == 1


def test_a_request_is_read_from_standard_input(
    typed: Type, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(sys, "stdin", StringIO(json.dumps(SMALL)))
    assert typed("plan", "-").status == 0


def test_a_report_shows_edges_centre_resonances_and_cautions(typed: Type, tmp_path: Path) -> None:
    end = typed("plan", request_file(tmp_path), "--report", "1")
    for word in ("24.890", "24.940", "24.990", "Resonances of the wire", "Not modelled", "Caution"):
        assert word in end.out


def test_a_refused_request_ends_with_status_2_and_names_the_remedy(
    typed: Type, tmp_path: Path
) -> None:
    end = typed("plan", request_file(tmp_path, site={"span_m": 2.0, "ground": "free-space"}))
    assert end.status == 2
    assert "site.span_m" in end.err
    assert "Give a span of at least" in unwrapped(end.err)
    assert end.out == ""


def test_a_missing_file_ends_with_status_2_and_says_so(typed: Type) -> None:
    end = typed("plan", "no-such-file.json")
    assert end.status == 2
    assert "no-such-file.json" in end.err


def test_a_rank_that_is_not_there_ends_with_status_2(typed: Type, tmp_path: Path) -> None:
    end = typed("plan", request_file(tmp_path), "--report", "9")
    assert end.status == 2
    assert "rank from 1 to" in end.err


def test_a_service_that_does_not_answer_ends_with_status_4(typed: Type) -> None:
    # Port 9 (discard) is closed on any machine this runs on.
    end = typed("list", "--service", "http://127.0.0.1:9")
    assert end.status == 4
    assert "spanwright serve" in unwrapped(end.err)


def test_band_lists_show_edges_to_the_khz(typed: Type) -> None:
    end = typed("bands", "amateur-region-1")
    assert end.status == 0
    assert "7.000" in end.out
    assert "7.200" in end.out
    assert "Radio Regulations" in end.out


def test_an_unknown_band_list_is_refused_with_the_known_ones(typed: Type) -> None:
    end = typed("bands", "amateur-region-9")
    assert end.status == 2
    assert "amateur-region-3" in end.err


def test_a_strip_rises_with_the_swr_and_is_full_at_twice_the_limit(
    typed: Type, tmp_path: Path
) -> None:
    end = typed("plan", request_file(tmp_path), "--json")
    report: FeedReport = PlannedDesign.model_validate_json(end.out).reports[0]
    band = report.bands[0]
    assert tables.swr_strip(band, limit=2.0)[0] > "▁"
    assert set(tables.swr_strip(band, limit=0.5001)) == {"█"}
    assert set(tables.swr_strip(band, limit=1e6)) == {"▁"}
