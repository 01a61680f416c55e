"""Where ink goes: scales, round marks and clipping."""

from __future__ import annotations

import itertools
import math
import xml.etree.ElementTree as ET

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.contracts.report import FeedReport
from service.plots import impedance_plot, swr_plot
from service.plots.scales import (
    CompressedScale,
    LinearScale,
    LogScale,
    clipped_runs,
    compressed_ticks,
    linear_ticks,
    log_ticks,
    next_round,
)
from tests.service.samples import FULL, sample_planned, sample_request

SVG = "{http://www.w3.org/2000/svg}"


@pytest.mark.parametrize(
    "scale",
    [
        LinearScale(2.0, 30.0, 40.0, 740.0),
        LogScale(2.0, 30.0, 40.0, 740.0),
        CompressedScale(100.0, 2.0, 30.0, 40.0, 740.0),
    ],
)
def test_a_scale_puts_its_limits_at_its_ends(
    scale: LinearScale | LogScale | CompressedScale,
) -> None:
    assert scale(2.0) == pytest.approx(40.0)
    assert scale(30.0) == pytest.approx(740.0)


def test_even_ratios_are_even_steps_on_a_logarithmic_scale() -> None:
    scale = LogScale(1.0, 16.0, 0.0, 400.0)
    assert [round(scale(v), 9) for v in (1.0, 2.0, 4.0, 8.0, 16.0)] == [0, 100, 200, 300, 400]


def test_the_compressed_scale_treats_both_signs_alike() -> None:
    scale = CompressedScale(100.0, -5000.0, 5000.0, 300.0, 0.0)
    assert scale(0.0) == pytest.approx(150.0)
    assert scale(700.0) + scale(-700.0) == pytest.approx(300.0)


@given(low=st.floats(-1e4, 1e4), width=st.floats(0.01, 1e4), most=st.integers(2, 12))
def test_even_marks_are_few_enough_and_within_the_limits(
    low: float, width: float, most: int
) -> None:
    ticks = linear_ticks(low, low + width, most)
    assert len(ticks) <= most
    slack = 1e-6 * width
    assert all(low - slack <= each <= low + width + slack for each in ticks)


@given(low=st.floats(0.1, 900.0), ratio=st.floats(1.05, 500.0), most=st.integers(3, 14))
def test_marks_of_frequency_are_few_enough_and_within_the_limits(
    low: float, ratio: float, most: int
) -> None:
    ticks = log_ticks(low, low * ratio, most)
    assert len(ticks) <= most
    assert all(low * (1 - 1e-6) <= each <= low * ratio * (1 + 1e-6) for each in ticks)


def test_marks_of_frequency_from_160_m_to_10_m() -> None:
    assert log_ticks(1.7, 31.0, 6) == (2.0, 5.0, 10.0, 20.0)


def test_marks_of_impedance_double_from_the_smallest_on_either_side_of_zero() -> None:
    assert compressed_ticks(-200.0, 1000.0, 50.0) == (
        *(-200.0, -100.0, -50.0, 0.0),
        *(50.0, 100.0, 200.0, 500.0, 1000.0),
    )


@pytest.mark.parametrize(("value", "round_value"), [(1.0, 1.0), (1.1, 2.0), (230.0, 500.0)])
def test_next_round_value(value: float, round_value: float) -> None:
    assert next_round(value) == pytest.approx(round_value)


def test_a_line_is_cut_where_it_crosses_the_limit() -> None:
    assert clipped_runs([(0.0, 1.0), (1.0, 5.0), (2.0, 1.0)], 1.0, 3.0) == [
        [(0.0, 1.0), (0.5, 3.0)],
        [(1.5, 3.0), (2.0, 1.0)],
    ]


def test_a_line_within_the_limits_is_left_whole() -> None:
    line = [(0.0, 1.0), (1.0, 2.0), (2.0, 2.0), (3.0, 1.5)]
    assert clipped_runs(line, 1.0, 3.0) == [line]


def test_a_line_beyond_the_limits_leaves_nothing() -> None:
    assert clipped_runs([(0.0, 8.0), (1.0, 9.0)], 1.0, 3.0) == []


@given(st.lists(st.floats(-1e3, 1e3), min_size=2, max_size=30))
def test_no_cut_line_leaves_its_limits(heights: list[float]) -> None:
    line = [(float(index), height) for index, height in enumerate(heights)]
    for run in clipped_runs(line, -50.0, 50.0):
        assert all(-50.0 - 1e-9 <= y <= 50.0 + 1e-9 for _, y in run)
        assert all(a[0] <= b[0] for a, b in itertools.pairwise(run))


@pytest.fixture(scope="module")
def report() -> FeedReport:
    return sample_planned(sample_request()).reports[0]


def drawn(svg: str) -> ET.Element:
    alone = str(svg).replace("<svg ", '<svg xmlns="http://www.w3.org/2000/svg" ', 1)
    return ET.fromstring(alone)  # noqa: S314  # our own drawing


@pytest.mark.parametrize("paper", ["wide", "narrow"])
def test_the_impedance_plot_is_well_formed_and_keeps_within_its_paper(
    report: FeedReport, paper: str
) -> None:
    root = drawn(impedance_plot(report, "wide" if paper == "wide" else "narrow"))
    _, _, width, height = map(float, root.attrib["viewBox"].split())
    for path in root.iter(f"{SVG}path"):
        numbers = [float(n) for n in path.attrib["d"].replace("M", " ").replace("L", " ").split()]
        assert all(0.0 <= x <= width for x in numbers[::2])
        assert all(0.0 <= y <= height for y in numbers[1::2])


def test_each_resonance_within_the_sweep_is_marked_by_its_order(report: FeedReport) -> None:
    root = drawn(impedance_plot(report))
    low, high = report.sweep[0].frequency_mhz, report.sweep[-1].frequency_mhz
    expected = [
        (f"order {each.kind}", str(each.order))
        for each in report.resonances
        if low <= each.frequency_mhz <= high
    ]
    marks = [
        (text.attrib["class"], text.text)
        for text in root.iter(f"{SVG}text")
        if text.attrib["class"].startswith("order")
    ]
    assert marks == expected
    assert len(marks) == 3  # the fourth lies above the sweep


def test_each_band_is_shaded_from_edge_to_edge(report: FeedReport) -> None:
    root = drawn(impedance_plot(report))
    low, high = report.sweep[0].frequency_mhz, report.sweep[-1].frequency_mhz
    frame = next(r for r in root.iter(f"{SVG}rect") if r.attrib["class"] == "frame")
    left, width = float(frame.attrib["x"]), float(frame.attrib["width"])
    shaded = [r for r in root.iter(f"{SVG}rect") if r.attrib["class"] == "band"]
    for rect, band in zip(shaded, report.bands, strict=True):
        for x, edge in (
            (float(rect.attrib["x"]), band.low),
            (float(rect.attrib["x"]) + float(rect.attrib["width"]), band.high),
        ):
            part = math.log(edge.frequency_mhz / low) / math.log(high / low)
            assert x == pytest.approx(left + part * width, abs=0.15)


def test_labels_of_crowded_bands_do_not_overlap() -> None:
    names = ["160m", "80m", "60m", "40m", "30m", "20m", "17m", "15m", "12m", "10m", "6m"]
    request = sample_request(
        bands=[{"band_list": "amateur-region-2", "names": names}],
        site={"span_m": 90.0, "height_m": 10.0},
    )
    root = drawn(impedance_plot(sample_planned(request).reports[0], "narrow"))
    spots = [
        (float(t.attrib["y"]), float(t.attrib["x"]), 6.0 * len(t.text or ""))
        for t in root.iter(f"{SVG}text")
        if t.attrib["class"] == "band-name"
    ]
    assert len(spots) == len(names)
    for (y1, x1, w1), (y2, x2, w2) in itertools.combinations(spots, 2):
        assert y1 != y2 or abs(x1 - x2) >= 0.5 * (w1 + w2)


def test_the_usable_part_of_a_band_is_drawn_as_long_as_it_is(report: FeedReport) -> None:
    candidate = sample_planned(sample_request()).result.candidates[0]
    outcome, band = candidate.bands[1], report.bands[1]
    assert outcome.service == "partly served"
    root = drawn(swr_plot("swr", band, outcome))
    frame = next(r for r in root.iter(f"{SVG}rect") if r.attrib["class"] == "frame")
    within = [r for r in root.iter(f"{SVG}rect") if r.attrib["class"] == "within"]
    part = sum(float(r.attrib["width"]) for r in within) / float(frame.attrib["width"])
    # The sample counts points of the grid, the drawing cuts between them.
    assert part == pytest.approx(outcome.served_fraction, abs=1.0 / len(band.grid))


def test_names_are_escaped_in_a_drawing(report: FeedReport) -> None:
    wicked = report.bands[0].model_copy(update={"name": "<script>&"})
    svg = impedance_plot(report.model_copy(update={"bands": (wicked,)}))
    assert "<script>" not in svg
    assert "&lt;script&gt;&amp;" in svg


def test_a_drawn_curve_passes_within_a_hair_of_every_stored_point(report: FeedReport) -> None:
    root = drawn(impedance_plot(report))
    path = next(p for p in root.iter(f"{SVG}path") if p.attrib["class"] == "curve resistance")
    corners = [
        tuple(map(float, corner.split())) for corner in path.attrib["d"].lstrip("M").split("L")
    ]
    low, high = report.sweep[0].frequency_mhz, report.sweep[-1].frequency_mhz
    frequency = LogScale(low, high, corners[0][0], corners[-1][0])
    first, last = report.sweep[0].resistance_ohm, report.sweep[-1].resistance_ohm
    frame = next(r for r in root.iter(f"{SVG}rect") if r.attrib["class"] == "frame")
    bottom = float(frame.attrib["y"]) + float(frame.attrib["height"])
    impedance = CompressedScale(100.0, -5000.0, 10_000.0, bottom, float(frame.attrib["y"]))
    assert impedance(first) == pytest.approx(corners[0][1], abs=0.06)
    assert impedance(last) == pytest.approx(corners[-1][1], abs=0.06)
    for point in report.sweep:
        x, y = frequency(point.frequency_mhz), impedance(point.resistance_ohm)
        nearest = min(_distance((x, y), a, b) for a, b in itertools.pairwise(corners))
        assert nearest < 0.2  # a hair, and the rounding of the corners to a tenth


def _distance(
    point: tuple[float, float], start: tuple[float, ...], end: tuple[float, ...]
) -> float:
    """Distance of a point from a piece of a line, by projection."""
    dx, dy = end[0] - start[0], end[1] - start[1]
    along = ((point[0] - start[0]) * dx + (point[1] - start[1]) * dy) / (dx * dx + dy * dy)
    along = min(max(along, 0.0), 1.0)
    return math.hypot(point[0] - start[0] - along * dx, point[1] - start[1] - along * dy)


def test_a_band_far_from_use_is_said_to_be_so_where_its_curve_has_no_place(
    report: FeedReport,
) -> None:
    outcome = sample_planned(sample_request()).result.candidates[0].bands[0]
    band = report.bands[0]
    high = tuple(point.model_copy(update={"swr": 5000.0}) for point in band.grid)
    root = drawn(swr_plot("swr", band.model_copy(update={"grid": high}), outcome))
    assert "above 200 over the whole band" in {text.text for text in root.iter(f"{SVG}text")}
    assert not list(root.iter(f"{SVG}path"))


@pytest.mark.parametrize(("at_transmitter", "judged"), [(True, "transmitter_swr"), (False, "swr")])
def test_the_swr_that_the_limit_applies_to_is_the_one_drawn_strong(
    at_transmitter: bool, judged: str
) -> None:
    full = sample_planned(sample_request(**FULL))
    outcome, band = full.result.candidates[0].bands[1], full.reports[0].bands[1]
    root = drawn(swr_plot("swr", band, outcome, at_transmitter=at_transmitter))
    strong, beside = (
        [path for path in root.iter(f"{SVG}path") if path.attrib["class"] == name]
        for name in ("curve swr", "curve beside")
    )
    assert (len(strong), len(beside)) == (1, 1)
    frame = next(r for r in root.iter(f"{SVG}rect") if r.attrib["class"] == "frame").attrib
    bottom = float(frame["y"]) + float(frame["height"])
    scale = LinearScale(1.0, 3.0, bottom, float(frame["y"]))  # all SWR here is below 3
    first = float(strong[0].attrib["d"].lstrip("M").split("L")[0].split()[1])
    assert first == pytest.approx(scale(getattr(band.grid[0], judged)), abs=0.06)


def test_without_a_line_one_swr_is_drawn(report: FeedReport) -> None:
    outcome = sample_planned(sample_request()).result.candidates[0].bands[1]
    svg = swr_plot("swr", report.bands[1], outcome)
    assert svg.count("curve swr") == 1
    assert "curve beside" not in svg


def test_no_match_is_drawn_where_a_network_matches_each_band(report: FeedReport) -> None:
    matched = sample_planned(sample_request(**FULL)).reports[0]
    assert 'class="target"' in impedance_plot(report)
    assert 'class="target"' not in impedance_plot(matched)
