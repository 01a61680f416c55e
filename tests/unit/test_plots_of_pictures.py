"""Wire, Smith chart, current and pattern: that ink goes where the stored figures say."""

from __future__ import annotations

import cmath
import itertools
import math
import re
import xml.etree.ElementTree as ET
from collections.abc import Callable

import pytest

from service.contracts.candidate import Candidate
from service.contracts.report import FeedReport
from service.plots import current_plot, pattern_plot, smith_plot, wire_plot
from service.plots.drawing import Drawing
from service.plots.labels import place_labels
from service.plots.looks import LOOKS, band_look
from service.plots.pattern import part_of_radius
from service.plots.smith_chart import REACTANCES, RESISTANCES
from tests.service.samples import FULL, sample_planned, sample_request

SVG = "{http://www.w3.org/2000/svg}"
REQUEST = sample_request(**FULL)
PLANNED = sample_planned(REQUEST)
REPORT: FeedReport = PLANNED.reports[0]
CANDIDATE: Candidate = PLANNED.result.candidates[0]

#: Centre and radius of the Smith chart as noted in the drawing for scripts.
CENTRE, RADIUS = 200.0 + 200.0j, 170.0


def parsed(svg: str | None) -> ET.Element:
    assert svg is not None
    # What stands in a page is of its name space by standing there.
    plain = str(svg)
    namespaced = (
        plain if "xmlns=" in plain else plain.replace("<svg", f'<svg xmlns="{SVG[1:-1]}"', 1)
    )
    return ET.fromstring(namespaced)  # noqa: S314  # our own drawing


def of_class(root: ET.Element, name: str) -> list[ET.Element]:
    return [each for each in root.iter() if name in (each.get("class") or "").split()]


def numbers(text: str | None) -> list[float]:
    return [float(each) for each in re.findall(r"-?\d+\.?\d*", text or "")]


def corners(path: ET.Element) -> list[complex]:
    values = numbers(path.get("d"))
    return [complex(x, y) for x, y in zip(values[::2], values[1::2], strict=True)]


def on_chart(gamma: complex) -> complex:
    return CENTRE + RADIUS * gamma.conjugate()


def smith() -> ET.Element:
    return parsed(smith_plot(REPORT, CANDIDATE.bands))


def test_circles_of_resistance_are_those_of_the_published_construction() -> None:
    # P. H. Smith, Electronics 12(1), 1939: radius 1/(r + 1) about r/(r + 1).
    drawn = {
        (float(each.get("cx") or 0), float(each.get("cy") or 0), float(each.get("r") or 0))
        for each in of_class(smith(), "grid")
        if each.tag == f"{SVG}circle"
    }
    expected = {
        (round(200.0 + RADIUS * r / (r + 1.0), 1), 200.0, round(RADIUS / (r + 1.0), 1))
        for r in RESISTANCES
    }
    assert drawn == expected


def test_arcs_of_reactance_are_those_of_the_published_construction() -> None:
    # The same: radius 1/|x| about 1 + j/x, from the rim to the open circuit.
    found = set()
    for path in (each for each in of_class(smith(), "grid") if each.tag == f"{SVG}path"):
        x1, y1, rx, ry, _, large, sweep, x2, y2 = numbers(path.get("d"))
        assert rx == ry
        assert large == 0
        start, end = complex(x1, y1), complex(x2, y2)
        # The centre lies to one side of the chord, which one the sweep says (SVG 2, B.2.4).
        half = (end - start) / 2.0
        off = math.sqrt(max(rx * rx - abs(half) ** 2, 0.0)) * half / abs(half)
        centre = start + half + (1j if sweep else -1j) * off
        gamma = ((centre - CENTRE) / RADIUS).conjugate()
        assert end == pytest.approx(on_chart(1.0 + 0.0j))
        found.add((round(gamma.real, 1), round(1.0 / gamma.imag, 1)))
    assert found == {(1.0, sign * x) for x in REACTANCES for sign in (1.0, -1.0)}


def test_a_limit_is_the_circle_of_its_reflection() -> None:
    drawn = sorted(float(each.get("r") or 0) for each in of_class(smith(), "limit"))
    limits = sorted({each.swr_limit for each in CANDIDATE.bands})
    assert len(limits) > 1
    assert drawn == [pytest.approx(RADIUS * (s - 1.0) / (s + 1.0), abs=0.06) for s in limits]


def test_each_band_is_an_arc_from_its_low_to_its_high_edge() -> None:
    arcs = of_class(smith(), "curve")
    assert len(arcs) == len(REPORT.bands)
    for arc, band in zip(arcs, REPORT.bands, strict=True):
        first, *_, last = corners(arc)
        for place, point in ((first, band.low), (last, band.high)):
            assert point.reflection_deg is not None
            gamma = cmath.rect(point.reflection, math.radians(point.reflection_deg))
            assert abs(place - on_chart(gamma)) < 0.1


def test_as_many_bands_as_a_request_may_name_are_told_apart() -> None:
    assert len({band_look(index) for index in range(12)}) == 12


@pytest.mark.parametrize("paper", ["wide", "narrow"])
def test_a_wire_without_a_stored_shape_is_drawn_straight_and_to_scale(paper: str) -> None:
    straight = REPORT.model_copy(update={"hanging": None})
    root = parsed(wire_plot(straight, REQUEST.site, "wide" if paper == "wide" else "narrow"))
    left, right = (float(each.get("x1") or 0) for each in of_class(root, "support"))
    per_m = (right - left) / REQUEST.site.span_m
    (line,) = of_class(root, "wire-line")
    start, end = float(line.get("x1") or 0), float(line.get("x2") or 0)
    assert (end - start) / per_m == pytest.approx(REPORT.length_m, abs=0.02)
    assert start - left == pytest.approx(right - end, abs=0.2)
    (feed,) = of_class(root, "feed-mark")
    at = (float(feed.get("cx") or 0) - start) / (end - start)
    assert at == pytest.approx(REPORT.feed_fraction, abs=2e-3)
    (feeder,) = of_class(root, "feeder")
    drop = float(feeder.get("y2") or 0) - float(feeder.get("y1") or 0)
    assert REPORT.height_m is not None
    assert drop / per_m == pytest.approx(REPORT.height_m, abs=0.02)
    assert len(of_class(root, "insulator")) == 2


@pytest.mark.parametrize("paper", ["wide", "narrow"])
@pytest.mark.parametrize("rise_m", [0.0, 3.0, -3.0])
def test_the_sag_is_drawn_to_the_scale_of_the_span(paper: str, rise_m: float) -> None:
    assert REPORT.hanging is not None
    span_m = REQUEST.site.span_m
    shape = tuple((x, up + rise_m * x / span_m) for x, up in REPORT.hanging.shape_m)
    hanging = REPORT.hanging.model_copy(update={"shape_m": shape})
    report = REPORT.model_copy(update={"hanging": hanging})
    root = parsed(wire_plot(report, REQUEST.site, "wide" if paper == "wide" else "narrow"))
    left, right = of_class(root, "support")
    x0 = float(left.get("x1") or 0)
    per_m = (float(right.get("x1") or 0) - x0) / span_m
    chord = next(each for each in of_class(root, "measure") if each.find(f"{SVG}title") is not None)
    y0 = float(chord.get("y1") or 0)
    assert (y0 - float(chord.get("y2") or 0)) / per_m == pytest.approx(rise_m, abs=0.03)

    def height_m(x_m: float) -> float:
        (before, low), (after, high) = next(
            pair for pair in itertools.pairwise(shape) if pair[1][0] >= x_m
        )
        return low + (high - low) * (x_m - before) / (after - before)

    (wire,) = of_class(root, "wire-line")
    drawn = [((at.real - x0) / per_m, (y0 - at.imag) / per_m) for at in corners(wire)]
    assert [drawn[0][0], drawn[-1][0]] == pytest.approx([shape[1][0], shape[-2][0]], abs=0.02)
    assert len(drawn) > 4
    for x_m, up_m in drawn:
        assert up_m == pytest.approx(height_m(x_m), abs=0.03)
    (feed,) = of_class(root, "feed-mark")
    at_m = (float(feed.get("cx") or 0) - x0) / per_m
    assert at_m == pytest.approx(
        shape[1][0] + REPORT.feed_fraction * (shape[-2][0] - shape[1][0]), abs=0.03
    )
    assert (y0 - float(feed.get("cy") or 0)) / per_m == pytest.approx(height_m(at_m), abs=0.03)
    # The height planned is that of the middle between the supports.
    ground_m = (float(left.get("y2") or 0) - y0) / per_m
    assert REPORT.height_m is not None
    assert ground_m + 0.5 * rise_m == pytest.approx(REPORT.height_m, abs=0.03)
    words = " ".join(root.itertext())
    assert "wire 20.31 m, sag 0.637 m" in words
    assert "m high, sag 0.637 m." in words
    assert ("24.00 m apart, span 24.00 m" in words) is bool(rise_m)


def test_a_wire_higher_than_its_span_still_fits_the_drawing() -> None:
    high = REPORT.model_copy(update={"height_m": 300.0})
    root = parsed(wire_plot(high, REQUEST.site))
    _, _, width, height = numbers(root.get("viewBox"))
    assert height < width
    left, right = (float(each.get("x1") or 0) for each in of_class(root, "support"))
    (feeder,) = of_class(root, "feeder")
    drop = float(feeder.get("y2") or 0) - float(feeder.get("y1") or 0)
    assert drop / (right - left) == pytest.approx(300.0 / REQUEST.site.span_m, rel=0.01)


def test_a_wire_in_free_space_stands_on_nothing() -> None:
    free = REPORT.model_copy(update={"height_m": None})
    root = parsed(wire_plot(free, REQUEST.site))
    assert not of_class(root, "earth")
    assert not of_class(root, "support")
    assert len(of_class(root, "wire-line")) == 1


def test_the_current_is_drawn_where_it_is_stored() -> None:
    root = parsed(current_plot(REPORT, 1))
    current = REPORT.bands[1].current
    assert current is not None
    _, low, high, start, end = (root.get("data-x") or "").split()
    assert float(low) == 0.0
    assert float(high) == pytest.approx(REPORT.length_m)
    (curve,) = of_class(root, "standing")
    top, bottom = (
        float(next(line for line in of_class(root, "grid") if line.get("y1") == y).get("y1") or 0)
        for y in ("24", "110")
    )
    drawn = {round(place.real, 1): place.imag for place in corners(curve)}
    seen = 0
    for index, (size, phase) in enumerate(zip(current.size, current.phase_deg, strict=True)):
        x = round(float(start) + (float(end) - float(start)) * index / 40.0, 1)
        if x in drawn:
            seen += 1
            value = size * math.cos(math.radians(phase))
            middle = 0.5 * (top + bottom)
            assert drawn[x] == pytest.approx(middle - value * 0.5 * (bottom - top), abs=0.06)
    assert seen > 10


def test_the_largest_gain_reaches_the_outer_ring_and_thirty_decibels_less_the_centre() -> None:
    assert part_of_radius(6.25, 6.25) == 1.0
    assert part_of_radius(6.25 - 3.0, 6.25) == pytest.approx(0.9)
    assert part_of_radius(6.25 - 30.0, 6.25) == 0.0
    assert part_of_radius(-60.0, 6.25) == 0.0


def test_cuts_are_drawn_where_they_are_stored_and_mirrored() -> None:
    root = parsed(pattern_plot(REPORT, 0))
    radiation = REPORT.bands[0].radiation
    assert radiation is not None
    ux, uy, radius = numbers(root.get("data-upper"))
    (across,) = of_class(root, "broadside")
    places = corners(across)
    # One lobe across: strongest at the zenith, mirrored left and right.
    top = min(places, key=lambda place: place.imag)
    assert abs(top - complex(ux, uy - radius)) < 1.5
    left, right = min(place.real for place in places), max(place.real for place in places)
    assert left + right == pytest.approx(2.0 * ux, abs=0.2)
    lx, ly, _ = numbers(root.get("data-lower"))
    (around,) = of_class(root, "around")
    upper, lower = (pick(place.imag for place in corners(around)) for pick in (min, max))
    assert upper + lower == pytest.approx(2.0 * ly, abs=0.2)
    marks = {(float(e.get("cx") or 0), float(e.get("cy") or 0)) for e in of_class(root, "shown")}
    assert marks == {(lx, ly - radius), (lx, ly + radius)}


def test_a_band_without_a_pattern_or_current_has_no_drawing() -> None:
    assert REPORT.bands[3].radiation is None
    assert pattern_plot(REPORT, 3) is None
    bare = REPORT.bands[0].model_copy(update={"current": None})
    assert current_plot(REPORT.model_copy(update={"bands": (bare,)}), 0) is None


IMAGES: list[Callable[[], str | None]] = [
    lambda: smith_plot(REPORT, CANDIDATE.bands),
    lambda: current_plot(REPORT, 0),
    lambda: pattern_plot(REPORT, 0),
]


@pytest.mark.parametrize("draw", IMAGES)
def test_an_image_carries_its_looks_as_attributes_and_no_style_or_script(
    draw: Callable[[], str | None],
) -> None:
    root = parsed(draw())
    assert root.tag == f"{SVG}svg"
    for each in root.iter():
        assert each.tag not in {f"{SVG}style", f"{SVG}script"}
        assert not [name for name in each.attrib if name == "style" or name.startswith("on")]
        # The image fills nothing by itself: a class without looks would not be seen at all.
        worn = set((each.get("class") or "").split()) - {"hollow"} if each is not root else set()
        assert worn <= set(LOOKS), each.attrib
        if each.tag == f"{SVG}text":
            assert each.get("fill") is not None


@pytest.mark.parametrize("draw", IMAGES)
def test_an_image_is_named_described_and_tells_values_where_a_pointer_rests(
    draw: Callable[[], str | None],
) -> None:
    root = parsed(draw())
    ids = {each.get("id") for each in root.iter()}
    assert set((root.get("aria-labelledby") or "").split()) <= ids
    tips = list(root.iter(f"{SVG}title"))[1:]
    assert tips
    assert all(each.text for each in tips)


def test_a_tip_is_escaped_and_only_shapes_take_one() -> None:
    drawing = Drawing("d", 10.0, 10.0, "x")
    drawing.dot((1.0, 1.0), 1.0, "shown")
    drawing.tip('<script>"&')
    (title,) = list(parsed(drawing.image("t", "d", LOOKS)).iter(f"{SVG}title"))[1:]
    assert title.text == '<script>"&'
    drawing.text((1.0, 1.0), "words", "words")
    with pytest.raises(ValueError, match="bare shape"):
        drawing.tip("more")


def test_labels_keep_clear_of_marks_and_of_each_other() -> None:
    marks = {str(number): (150.0, 100.0 + 0.1 * number) for number in range(1, 13)}
    placed = place_labels(marks, (0.0, 0.0), (300.0, 200.0))
    middles = [middle for middle, _ in placed.values()]
    for index, one in enumerate(middles):
        for other in middles[:index]:
            assert abs(one[0] - other[0]) > 7.0 or abs(one[1] - other[1]) > 10.0
    assert any(is_far for _, is_far in placed.values())
