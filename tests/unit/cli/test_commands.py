"""The command line as a stranger and a script meet it."""

import json
import sys
from io import StringIO
from pathlib import Path

import pytest
from rich.console import Console

from service.contracts import formats
from service.contracts.candidate import PlannedDesign
from service.contracts.report import FeedReport
from tests.service.samples import FULL, sample_planned, sample_request
from tests.unit.cli.conftest import Type
from worker.cli import tables
from worker.cli.candidate_lines import swr_strip

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
    assert swr_strip(band, limit=2.0)[0] > "▁"
    assert set(swr_strip(band, limit=0.5001)) == {"█"}
    assert set(swr_strip(band, limit=1e6)) == {"▁"}


#: A line, a network and a price on the small request: everything its report can show.
FED = {
    "feed": {
        "feed_line": {"line": "rg-213", "length_m": 20.0},
        "matching": "per-band",
        "reference_point": "transmitter",
    },
    "stock": {"conductors": [{"awg": 12, "price_per_m": 0.5}]},
    "power_w": 400.0,
}


def test_a_report_shows_stress_network_and_the_far_end_as_in_json(
    typed: Type, tmp_path: Path
) -> None:
    file = request_file(tmp_path, **FED)
    planned = PlannedDesign.model_validate_json(typed("plan", file, "--json").out)
    band, out = planned.reports[0].bands[0], typed("plan", file, "--report", "1").out
    assert band.stress is not None
    assert band.matching is not None
    assert band.centre.transmitter_swr is not None
    assert band.centre.line_loss_db is not None
    assert f"{band.stress.voltage_peak_v:.0f} V, {band.stress.current_rms_a:.2f} A" in out
    assert "at 400 W" in out
    for part in band.matching.parts:
        assert f" {part.unit}" in out
        assert f"{formats.volts(part.voltage_peak_v)} V, " in out
    centre = next(line for line in out.splitlines() if line.split()[:2] == ["centre", "24.940"])
    assert centre.split()[-2:] == [
        formats.swr(band.centre.transmitter_swr),
        formats.decibels(band.centre.line_loss_db),
    ]


def test_a_candidate_prints_feed_loss_cost_trimming_and_where_limits_apply(
    typed: Type, tmp_path: Path
) -> None:
    file = request_file(tmp_path, **FED)
    planned = PlannedDesign.model_validate_json(typed("plan", file, "--json").out)
    candidate, out = planned.result.candidates[0], unwrapped(typed("plan", file).out)
    assert candidate.loss_db is not None
    assert candidate.cost is not None
    assert (
        f"Fed at the centre, line loss {formats.decibels(candidate.loss_db)} dB at most, wire for "
        f"{formats.money(candidate.cost)}. SWR limits apply at the transmitter."
    ) in out
    (trim,) = candidate.trims
    assert f"12m {formats.khz_per_cm(trim.khz_per_cm)} (1st)" in out


@pytest.fixture
def printed() -> str:
    """An invented result that has everything, as printed on 80 columns."""
    planned = sample_planned(sample_request(**FULL), 3)
    paper = StringIO()
    console = Console(file=paper, width=80)
    tables.show_result(console, planned.result, planned.reports)
    tables.show_report(console, planned.reports[0])
    return paper.getvalue()


def test_all_that_is_printed_keeps_to_80_columns(printed: str) -> None:
    assert max(len(line) for line in printed.splitlines()) == 80


def test_sets_of_dipoles_and_what_they_leave_are_printed(printed: str) -> None:
    assert "A set of 2 dipoles 1 of 2 required bands served, 88 % of the width" in unwrapped(
        printed
    )
    assert "Invented reason for a set of 3." in unwrapped(printed)


def test_what_to_relax_is_printed() -> None:
    planned = sample_planned(sample_request())
    paper = StringIO()
    tables.show_result(Console(file=paper, width=80), planned.result, planned.reports)
    assert "What to relax\n- Invented advice on what to relax." in paper.getvalue()


def test_each_departure_is_a_column_and_a_band_no_longer_whole_is_starred(printed: str) -> None:
    lines = iter(printed.splitlines())
    assert any("Fares worst with lighter insulation: 0 of 2" in line for line in lines)
    head = next(line for line in lines if line.lstrip().startswith("band"))
    assert head.split()[1:] == [
        *("longer", "shorter", "higher", "lower", "ground", "ground", "insulation", "insulation")
    ]
    first = next(lines).split()
    planned = sample_planned(sample_request(**FULL), 3)
    held = planned.result.candidates[0].steadiness
    assert held is not None
    for shown, each in zip(
        first[1:], [d for d in held.departures if d.band == first[0]], strict=True
    ):
        assert shown.endswith("*") is (each.served_fraction < 1.0)
        assert shown.removesuffix("*") == formats.swr(each.swr_worst)


def test_the_trade_off_is_printed_in_short_and_says_where_the_rest_is(printed: str) -> None:
    _, _, table = printed.partition("What the best wires trade")
    assert table.partition("m: length;")[0].count(" 2:1 ") == 8
    assert "The first 8 of 40; --json has all of them." in unwrapped(printed)


def test_the_strip_across_a_band_shows_the_swr_the_limit_applies_to() -> None:
    planned = sample_planned(sample_request(**FULL))
    band = planned.reports[0].bands[1]
    flat = tuple(point.model_copy(update={"transmitter_swr": 1.0}) for point in band.grid)
    level = band.model_copy(update={"grid": flat})
    assert set(swr_strip(level, 1.2, at_transmitter=True)) == {"▁"}
    assert set(swr_strip(level, 1.2)) != {"▁"}
