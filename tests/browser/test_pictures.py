"""The value under the pointer, and a wire moved by hand, with scripts and without."""

from __future__ import annotations

import re
from collections.abc import Iterator
from typing import Any

import httpx
import pytest
from playwright.sync_api import Page, expect

from service.api.app import create_app
from service.settings import Settings
from service.store.session import Store
from tests.browser.conftest import NewPage
from tests.service.conftest import Stored
from tests.service.pages import same
from tests.service.serving import served
from tests.service.test_what_if import InventedBench


@pytest.fixture(scope="module")
def bench() -> InventedBench:
    return InventedBench()


@pytest.fixture(scope="module")
def tried(
    wire: httpx.Client, wire_settings: Settings, wire_store: Store, bench: InventedBench
) -> Iterator[httpx.Client]:
    del wire  # designs are stored by then
    with served(create_app(wire_settings, wire_store, bench)) as client:
        yield client


def told(page: Page, drawing: str, across: float, up: float) -> str:
    """What is told with the pointer at a part of a drawing's width and height."""
    svg = page.locator(drawing).first
    svg.scroll_into_view_if_needed()
    box = svg.bounding_box()
    assert box is not None
    page.mouse.move(box["x"] + across * box["width"], box["y"] + up * box["height"])
    output = page.locator(f"{drawing} + output").first
    expect(output).not_to_be_empty()
    return output.text_content() or ""


def candidate(page: Page, stored: Stored) -> dict[str, Any]:
    """Open the page of a candidate, with all its drawings taken in; give its report."""
    address = f"/designs/{stored.done}/candidates/1"
    page.goto(address)
    for heading in ("reflection", "current", "pattern"):
        page.locator(f"#{heading}").scroll_into_view_if_needed()
        page.mouse.wheel(0, 600)
    expect(page.locator("svg.pattern").first).to_be_attached()
    expect(page.locator("svg.current").first).to_be_attached()
    found: dict[str, Any] = page.request.get(f"/v1{address}/report").json()
    return found


def test_the_pointer_tells_stored_values(page: Page, stored: Stored) -> None:
    report = candidate(page, stored)
    words = told(page, "svg.swr", 0.5, 0.5)
    frequency, swr = re.fullmatch(r"([\d.]+) MHz: SWR ([\d.]+)", words).groups()  # type: ignore[union-attr]  # it fails where it does not match
    grid = report["bands"][0]["grid"]
    (point,) = [each for each in grid if f"{each['frequency_mhz']:.4f}" == frequency]
    same(swr, point["swr"])
    assert grid.index(point) in range(15, 26)

    words = told(page, "svg.rx.wide", 0.3, 0.5)
    frequency, resistance, reactance = re.match(  # type: ignore[union-attr]  # as above
        r"([\d.]+) MHz: R ([\d.]+) Ω, X ([−\d.]+) Ω", words
    ).groups()
    points = [p for p in report["sweep"] if f"{p['frequency_mhz']:.3f}" == frequency]
    assert points
    same(resistance, points[0]["resistance_ohm"])
    same(reactance, points[0]["reactance_ohm"])


def test_the_pointer_tells_current_reflection_and_gain(page: Page, stored: Stored) -> None:
    report = candidate(page, stored)
    first = report["bands"][0]
    words = told(page, "svg.current", 0.55, 0.5)
    place, size = re.match(r"([\d.]+) m: \|I\| ([\d.]+)", words).groups()  # type: ignore[union-attr]  # it fails where it does not match
    index = round(float(place) / report["length_m"] * 40)
    same(size, first["current"]["size"][index])

    words = told(page, "svg.smith", 0.5, 0.5)
    name, frequency, reflection = re.match(  # type: ignore[union-attr]  # as above
        r"(\w+), ([\d.]+) MHz: \|Γ\| ([\d.]+)", words
    ).groups()
    points = [(band["name"], point) for band in report["bands"] for point in band["grid"]]
    nearest = min(points, key=lambda each: each[1]["reflection"])
    # The middle of the chart is the match, so the nearest point is the one best matched.
    assert name == nearest[0]
    assert f"{nearest[1]['frequency_mhz']:.4f}" == frequency
    same(reflection, nearest[1]["reflection"])

    radiation = first["radiation"]
    words = told(page, "svg.pattern", 0.5, 0.15)
    side, across = re.match(r"elevation ([\d.]+)°: ([−\d.]+) dBi across", words).groups()  # type: ignore[union-attr]  # as above
    assert float(side) == 90.0
    same(across, radiation["broadside_dbi"][-1])
    words = told(page, "svg.pattern", 0.5, 0.55)
    turned, around = re.match(r"azimuth ±([\d.]+)°: ([−\d.]+) dBi", words).groups()  # type: ignore[union-attr]  # as above
    same(around, radiation["around_dbi"][round(float(turned) / radiation["step_deg"])])
    assert float(turned) == 90.0


def test_without_scripts_the_pictures_are_images(new_page: NewPage, stored: Stored) -> None:
    page = new_page(java_script_enabled=False)
    page.goto(f"/designs/{stored.done}/candidates/1")
    image = page.locator("img.drawn").first
    image.scroll_into_view_if_needed()
    expect(image).to_be_visible()
    page.wait_for_load_state("networkidle")
    natural = image.bounding_box()
    assert natural is not None
    assert natural["width"] > 200.0


def test_a_slider_moves_the_wire_and_the_answer_follows(
    new_page: NewPage, tried: httpx.Client, stored: Stored, bench: InventedBench
) -> None:
    page = new_page(base_url=str(tried.base_url))
    page.goto(f"/designs/{stored.done}/candidates/1/what-if")
    expect(page.locator("input[type=range]")).to_have_count(2)
    page.locator("#length_m").fill("19.25")
    expect(page.locator("form.keep input[name=length_m]")).to_have_value("19.25")
    assert bench.asked[-1].length_m == 19.25
    assert "length_m=19.25" in page.url
    slider = page.get_by_role("slider").nth(1)
    slider.focus()
    slider.press("ArrowRight")
    expect(page.locator("form.keep input[name=height_m]")).to_have_value("10.1")
    assert bench.asked[-1].height_m == 10.1


def test_what_was_moved_is_stored_by_its_button(
    new_page: NewPage, tried: httpx.Client, stored: Stored
) -> None:
    page = new_page(base_url=str(tried.base_url), java_script_enabled=False)
    page.goto(f"/designs/{stored.done}/candidates/1/what-if")
    page.locator("#length_m").fill("18.5")
    page.get_by_role("button", name="Try it").click()
    expect(page.locator("form.keep input[name=length_m]")).to_have_value("18.5")
    page.get_by_role("button", name="Store as a design").click()
    expect(page.locator("h1")).to_contain_text("moved by hand")
    expect(page.locator("main")).to_contain_text("18.50 m and no other")


def test_candidates_are_chosen_for_comparison_by_their_boxes(page: Page, stored: Stored) -> None:
    page.goto(f"/designs/{stored.done}")
    page.get_by_label("compare candidate 1").check()
    page.get_by_label("compare candidate 2").check()
    page.get_by_role("button", name="Compare those chosen").click()
    expect(page.locator("h1")).to_have_text("Candidates side by side")
    expect(page.locator("table.differing")).to_be_visible()
