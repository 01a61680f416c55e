"""What helps to choose: the trade-off of the front, and how a candidate holds up."""

from __future__ import annotations

import itertools
import math
import xml.etree.ElementTree as ET
from typing import Final

import pytest

from service.contracts.candidate import Candidate, PlannedDesign, Steadiness, TradeOff
from service.plots import steadiness_plot, trade_off_plot
from service.plots.trade_off import Against
from tests.service.samples import FULL, sample_planned, sample_request

SVG: Final = "{http://www.w3.org/2000/svg}"
FIELDS: Final[dict[Against, str]] = {
    "length": "length_m",
    "swr": "swr_worst",
    "cost": "cost",
    "loss": "loss_db",
}


FRAME: Final = ("x", "y", "width", "height")


@pytest.fixture(scope="module")
def full() -> PlannedDesign:
    return sample_planned(sample_request(**FULL), 3)


@pytest.fixture(scope="module")
def held(full: PlannedDesign) -> Steadiness:
    steadiness = full.result.candidates[0].steadiness
    assert steadiness is not None
    return steadiness


def drawn(svg: str) -> ET.Element:
    alone = str(svg).replace("<svg ", '<svg xmlns="http://www.w3.org/2000/svg" ', 1)
    return ET.fromstring(alone)  # noqa: S314  # our own drawing


def of_class(root: ET.Element, tag: str, name: str) -> list[ET.Element]:
    return [each for each in root.iter(f"{SVG}{tag}") if each.attrib.get("class") == name]


def centres(root: ET.Element, name: str) -> list[tuple[float, float]]:
    dots = of_class(root, "circle", name)
    return [(float(each.attrib["cx"]), float(each.attrib["cy"])) for each in dots]


def kind_of(each: TradeOff, front: tuple[TradeOff, ...]) -> str:
    if each.rank is not None:
        return "shown"
    most = max(other.required_served for other in front)
    return "other" if each.required_served == most else "fewer"


def test_candidates_are_marked_apart_from_other_wires_and_these_by_what_they_serve(
    full: PlannedDesign,
) -> None:
    front = full.result.trade_off
    root = drawn(trade_off_plot(front, "length"))
    kinds = [kind_of(each, front) for each in front]
    for kind in ("shown", "other", "fewer"):
        assert len(of_class(root, "circle", kind)) == kinds.count(kind) > 0


@pytest.mark.parametrize("against", ["length", "swr", "cost"])
def test_even_steps_of_what_is_paid_and_served_are_even_steps_on_paper(
    full: PlannedDesign, against: Against
) -> None:
    front = full.result.trade_off
    root = drawn(trade_off_plot(front, against))
    places = {kind: iter(centres(root, kind)) for kind in ("shown", "other", "fewer")}
    points = [
        (getattr(each, FIELDS[against]), each.weighted_served, next(places[kind_of(each, front)]))
        for each in front
    ]
    low, high = min(points), max(points)
    for paid, served, (x, y) in points:
        part = (paid - low[0]) / (high[0] - low[0])
        assert x == pytest.approx(low[2][0] + part * (high[2][0] - low[2][0]), abs=0.11)
        part = (served - low[1]) / (high[1] - low[1])
        assert y == pytest.approx(low[2][1] + part * (high[2][1] - low[2][1]), abs=0.11)


@pytest.mark.parametrize("count", [2, 12])
def test_ranks_at_crowded_marks_overlap_neither_each_other_nor_a_mark(count: int) -> None:
    crowded = sample_planned(sample_request(candidates=count), count + 1).result.trade_off
    root = drawn(trade_off_plot(crowded, "length"))
    ranks = of_class(root, "text", "order series")
    assert [each.text for each in ranks] == [str(rank) for rank in range(1, count + 1)]
    spots = [
        (float(each.attrib["x"]), float(each.attrib["y"]), 7.0 * len(each.text or ""))
        for each in ranks
    ]
    for (x1, y1, w1), (x2, y2, w2) in itertools.combinations(spots, 2):
        assert abs(y1 - y2) >= 10.0 or abs(x1 - x2) >= 0.5 * (w1 + w2)
    for (x, y, width), (mark_x, mark_y) in itertools.product(spots, centres(root, "shown")):
        assert abs(x - mark_x) > 0.5 * width + 4.0 or abs(y - 4.0 - mark_y) > 9.0


def test_a_front_of_one_wire_is_drawn_within_its_frame(full: PlannedDesign) -> None:
    root = drawn(trade_off_plot(full.result.trade_off[:1], "length"))
    ((x, y),) = centres(root, "shown")
    frame = {name: float(of_class(root, "rect", "frame")[0].attrib[name]) for name in FRAME}
    assert frame["x"] < x < frame["x"] + frame["width"]
    assert frame["y"] < y < frame["y"] + frame["height"]


def test_a_wire_far_from_use_is_left_off_the_axis_of_swr_and_said_to_be(
    full: PlannedDesign,
) -> None:
    first, *rest = full.result.trade_off
    far = first.model_copy(update={"swr_worst": 5000.0})
    root = drawn(trade_off_plot((far, *rest), "swr"))
    assert len(list(root.iter(f"{SVG}circle"))) == len(rest)
    assert "1 of them beyond the axis" in "".join(root.itertext())


def served(candidate: Candidate) -> list[str]:
    return [each.name for each in candidate.bands if each.service != "unserved"]


def test_only_bands_served_as_planned_are_drawn_as_held(full: PlannedDesign) -> None:
    candidate = full.result.candidates[0]
    root = drawn(steadiness_plot(candidate))
    names = [each.text for each in of_class(root, "text", "band-name")]
    assert names == served(candidate)
    assert 0 < len(names) < len(candidate.bands)


def test_the_range_of_each_band_is_drawn_from_its_least_to_its_largest_swr(
    full: PlannedDesign, held: Steadiness
) -> None:
    candidate = full.result.candidates[0]
    root = drawn(steadiness_plot(candidate))
    outcomes = [each for each in candidate.bands if each.name in served(candidate)]
    lines = zip(of_class(root, "line", "reach"), of_class(root, "line", "limit"), strict=True)
    for outcome, (reach, limit) in zip(outcomes, lines, strict=True):
        swr = [each.swr_worst for each in held.departures if each.band == outcome.name]
        # One scale for all: its foot is an SWR of 1, at 8 px.
        per_neper = (float(limit.attrib["x1"]) - 8.0) / math.log(outcome.swr_limit)
        for end, value in (
            ("x1", min(*swr, outcome.swr_worst)),
            ("x2", max(*swr, outcome.swr_worst)),
        ):
            place = 8.0 + per_neper * math.log(value)
            assert float(reach.attrib[end]) == pytest.approx(place, abs=0.2)


def test_the_worst_departure_of_each_band_is_written_beside_it(full: PlannedDesign) -> None:
    root = drawn(steadiness_plot(full.result.candidates[0]))
    said = [each.text or "" for each in of_class(root, "text", "tick")]
    worst = [each for each in said if each.endswith(", lighter insulation")]
    assert len(worst) == len(served(full.result.candidates[0]))


def test_an_swr_beyond_the_axis_keeps_within_the_paper_and_is_told(
    full: PlannedDesign, held: Steadiness
) -> None:
    first, *rest = held.departures
    far = first.model_copy(update={"swr_worst": 900.0})
    beyond = held.model_copy(update={"departures": (far, *rest)})
    candidate = full.result.candidates[0].model_copy(update={"steadiness": beyond})
    root = drawn(steadiness_plot(candidate))
    width = float(root.attrib["viewBox"].split()[2])
    assert all(float(each.attrib["x2"]) <= width for each in of_class(root, "line", "reach"))
    assert f"> 100, {first.what}" in "".join(root.itertext())
