"""The sweep as a planner types it: table, CSV and drawing say the same."""

import csv
import json
from pathlib import Path
from typing import Any
from xml.etree import ElementTree as ET

import numpy as np
import pytest

from tests.unit.cli.conftest import Type
from worker.engine.conductor import MATERIALS, internal_impedance_ohm_per_m
from worker.engine.thin_wire import feed_impedance

FORTY = ("sweep", "--from", "6.8", "--to", "7.4", "--points", "7", "--length-m", "20.4")
OVER_GROUND = ("--height-m", "10", "--ground", "average")


def swept(typed: Type, *words: str) -> dict[str, Any]:
    end = typed(*words, "--json")
    assert end.status == 0, end.err
    found: dict[str, Any] = json.loads(end.out)
    return found


def test_a_sweep_gives_the_solver_s_own_impedances(typed: Type) -> None:
    found = swept(typed, *FORTY, "--diameter-mm", "2", "--material", "annealed-copper")
    frequency_hz = 1e6 * np.linspace(6.8, 7.4, 7)
    copper = internal_impedance_ohm_per_m(1e-3, frequency_hz, MATERIALS["annealed-copper"])
    solved = feed_impedance(20.4, 1e-3, frequency_hz, wire_impedance_ohm_per_m=copper)
    for point, expected in zip(found["points"], solved.impedance_ohm, strict=True):
        assert point["resistance_ohm"] == pytest.approx(expected.real, rel=1e-9)
        assert point["reactance_ohm"] == pytest.approx(expected.imag, rel=1e-9)


def test_the_resonance_lies_where_the_reactance_changes_sign(typed: Type) -> None:
    found = swept(typed, *FORTY, "--awg", "14", *OVER_GROUND)
    (crossing,) = found["crossings"]
    below = [p for p in found["points"] if p["frequency_mhz"] < crossing["at"]]
    above = [p for p in found["points"] if p["frequency_mhz"] > crossing["at"]]
    assert crossing["kind"] == "series"
    assert below[-1]["reactance_ohm"] < 0.0 < above[0]["reactance_ohm"]


def test_sweeping_length_finds_the_length_that_sweeping_frequency_would(typed: Type) -> None:
    words = ("sweep", "--along", "length", "--from", "18", "--to", "22", "--points", "3")
    (crossing,) = swept(typed, *words, "--frequency-mhz", "7.1", "--awg", "14")["crossings"]
    length = str(crossing["at"])
    there = swept(
        typed, "sweep", "--from", "7", "--to", "7.2", "--points", "3", "--length-m", length,
        "--awg", "14",
    )  # fmt: skip
    assert there["crossings"][0]["at"] == pytest.approx(7.1, rel=1e-5)


def test_insulation_lowers_the_resonance_by_a_few_per_cent(typed: Type) -> None:
    # Common practice: plastic insulation shortens a dipole by one to five per cent.
    bare = swept(typed, *FORTY, "--diameter-mm", "2")["crossings"][0]["at"]
    coated = swept(typed, *FORTY, "--diameter-mm", "2", "--sleeve-mm", "0.8")["crossings"][0]["at"]
    assert 0.95 < coated / bare < 0.99


def test_a_feed_line_shows_its_loss_and_a_lower_swr_at_the_transmitter(typed: Type) -> None:
    found = swept(typed, *FORTY, "--awg", "14", "--line", "rg-58", "--line-m", "30")
    point = found["points"][0]
    assert 1.0 < point["transmitter_swr"] < point["swr"]
    assert point["line_loss_db"] > 1.0


def test_table_and_csv_say_the_same(typed: Type, tmp_path: Path) -> None:
    file = tmp_path / "sweep.csv"
    end = typed(*FORTY, "--awg", "14", "--csv", str(file))
    rows = list(csv.DictReader(file.read_text().splitlines()))
    assert [row["frequency_mhz"] for row in rows][:2] == ["6.800", "6.900"]
    for row in rows:
        resistance, reactance = float(row["resistance_ohm"]), float(row["reactance_ohm"])
        assert f"{row['frequency_mhz']}" in end.out
        assert f"{resistance:.1f}" in end.out
        assert f"{reactance:.1f}" in end.out


def test_the_drawing_is_a_standalone_svg_with_words_for_those_who_listen(
    typed: Type, tmp_path: Path
) -> None:
    file = tmp_path / "sweep.svg"
    typed(*FORTY, "--awg", "14", *OVER_GROUND, "--plot", str(file))
    root = ET.fromstring(file.read_text())  # noqa: S314  # our own file
    space = {"svg": "http://www.w3.org/2000/svg"}
    assert root.find("svg:style", space) is not None
    described = root.findtext("svg:desc", namespaces=space)
    assert described is not None
    assert described.startswith("resonance at 7.07")
    assert len(root.findall("svg:circle", space)) == 1


@pytest.mark.parametrize(
    ("words", "remedy"),
    [
        (("sweep", "--from", "8", "--to", "7", "--length-m", "20", "--awg", "14"), "smaller"),
        (("sweep", "--from", "7", "--to", "8", "--awg", "14"), "Add length_m"),
        ((*FORTY, "--awg", "14", "--diameter-mm", "2"), "only one of them"),
        ((*FORTY, "--awg", "14", "--ground", "average"), "both height_m and ground"),
        ((*FORTY, "--awg", "14", "--height-m", "10", "--ground", "marble"), "Choose one of"),
        ((*FORTY, "--awg", "14", "--points", "1"), "at least 2"),
    ],
)
def test_a_sweep_that_makes_no_sense_is_refused_with_the_remedy(
    typed: Type, words: tuple[str, ...], remedy: str
) -> None:
    end = typed(*words)
    assert end.status == 2
    assert remedy in " ".join(end.err.split())


def test_a_wire_outside_the_model_ends_with_status_3_and_its_limits(typed: Type) -> None:
    end = typed("sweep", "--from", "290", "--to", "300", "--length-m", "20.4", "--awg", "14")
    assert end.status == 3
    assert "outside the range" in " ".join(end.err.split())
