"""From the form over live progress to the design's page; the test plays the worker."""

from __future__ import annotations

import re

import pytest
from playwright.sync_api import Page, expect

from service.contracts.batch import BatchRequest
from service.contracts.progress import Progress
from service.doorbell import Doorbell
from service.intake import submit_batch
from service.settings import Settings
from service.store import designs, jobs
from service.store.jobs import ClaimedJob
from service.store.session import Store
from tests.browser.conftest import NewPage
from tests.service.samples import sample_planned, sample_request

LEASE_S = 600.0


@pytest.fixture(autouse=True)
def nothing_waits(wire_store: Store) -> None:
    """Make room, so that what a test submits is the next to be claimed."""
    for job in iter(lambda: jobs.claim(wire_store, "tests", LEASE_S), None):
        jobs.fail(wire_store, job, "makes room")


def fill_in(page: Page, name: str) -> None:
    page.get_by_label("Name of the design").fill(name)
    page.get_by_role("checkbox", name=re.compile("^40m")).check()
    page.get_by_role("checkbox", name=re.compile("^15m")).check()
    page.get_by_label("feet", exact=True).check()
    page.get_by_label("Span between the supports").fill("80")
    page.get_by_label("Height over ground").fill("33")
    page.get_by_role("group", name="Conductor 1").get_by_label("Size").fill("12")


def claimed(store: Store) -> ClaimedJob:
    job = jobs.claim(store, "worker of the tests", LEASE_S)
    assert job is not None
    return job


def come_to(store: Store, job: ClaimedJob, fraction: float, step: str) -> None:
    beat = jobs.heartbeat(store, job, Progress(fraction=fraction, step=step), LEASE_S)
    assert beat is jobs.Beat.RENEWED


def planned(store: Store, job: ClaimedJob) -> None:
    request = designs.get(store, job.design_id).request
    assert jobs.finish(store, job, sample_planned(request))


def test_from_the_form_over_live_progress_to_the_design(page: Page, wire_store: Store) -> None:
    page.goto("/")
    page.get_by_role("link", name="New design").first.click()
    fill_in(page, "Boat shed")
    expect(page.locator("#span\\.shown")).to_have_text("= 24.384 m")
    expect(page.get_by_role("status")).to_contain_text("combinations")
    page.get_by_role("button", name="Submit for planning").click()
    expect(page.get_by_role("heading", name="Boat shed", level=1)).to_be_visible()
    expect(page.locator(".state")).to_have_text("queued")

    job = claimed(wire_store)
    assert page.url.endswith(job.design_id)
    expect(page.locator(".state")).to_have_text("running")
    page.evaluate("document.body.dataset.kept = 'yes'")
    come_to(wire_store, job, 0.42, "maps of impedance")
    expect(page.locator(".step")).to_have_text("42\u00a0%, maps of impedance")
    expect(page.locator("progress")).to_have_js_property("value", 0.42)
    # The bar moved on the page that stood there, which was not loaded anew for it.
    assert page.evaluate("document.body.dataset.kept") == "yes"

    planned(wire_store, job)
    expect(page.locator(".state")).to_have_text("done")
    expect(page.get_by_role("heading", name="Candidates, best first")).to_be_visible()
    page.get_by_role("link", name="Start another design from this request").click()
    expect(page.get_by_label("Name of the design")).to_have_value("Boat shed")
    expect(page.get_by_label("Span between the supports")).to_have_value("24.384")


def test_a_failure_is_told_as_it_happens(page: Page, wire_store: Store) -> None:
    page.goto("/new")
    fill_in(page, "To fail")
    page.get_by_role("button", name="Submit for planning").click()
    expect(page.locator(".state")).to_have_text("queued")
    job = claimed(wire_store)
    expect(page.locator(".state")).to_have_text("running")
    assert jobs.fail(wire_store, job, "an invented failure")
    expect(page.locator(".failure")).to_contain_text("an invented failure")


def test_where_no_events_come_the_page_asks_again_by_itself(page: Page, wire_store: Store) -> None:
    page.route("**/events", lambda route: route.fulfill(status=503))
    page.goto("/new")
    fill_in(page, "Without events")
    page.get_by_role("button", name="Submit for planning").click()
    expect(page.locator(".state")).to_have_text("queued")
    planned(wire_store, claimed(wire_store))
    expect(page.locator(".state")).to_have_text("done")


def test_faults_are_told_of_fields_that_were_left_while_the_form_is_filled_in(page: Page) -> None:
    page.goto("/new")
    span, fault = page.get_by_label("Span between the supports"), page.locator("#span\\.fault")
    span.press_sequentially("wide")
    expect(page.get_by_role("status")).to_contain_text("missing or wrong")
    expect(fault).to_be_empty()
    span.blur()
    expect(fault).to_contain_text("Give a number")
    expect(span).to_have_attribute("aria-invalid", "true")
    span.fill("24")
    expect(fault).to_be_empty()
    expect(span).not_to_have_attribute("aria-invalid", "true")


def test_a_form_sent_by_a_double_click_is_one_design(page: Page, wire_store: Store) -> None:
    before = designs.count(wire_store)
    page.goto("/new")
    fill_in(page, "Clicked twice")
    page.get_by_role("button", name="Submit for planning").dblclick()
    expect(page.get_by_role("heading", name="Clicked twice", level=1)).to_be_visible()
    assert designs.count(wire_store) == before + 1


def test_a_form_gone_back_to_can_be_changed_and_sent_again(page: Page, wire_store: Store) -> None:
    before = designs.count(wire_store)
    page.goto("/new")
    fill_in(page, "First thought")
    page.get_by_role("button", name="Submit for planning").click()
    expect(page.get_by_role("heading", name="First thought", level=1)).to_be_visible()
    page.go_back()
    page.get_by_label("Name of the design").fill("Second thought")
    page.get_by_role("button", name="Submit for planning").click()
    expect(page.get_by_role("heading", name="Second thought", level=1)).to_be_visible()
    assert designs.count(wire_store) == before + 2


def test_enter_in_a_field_checks_the_form_and_sends_nothing(page: Page, wire_store: Store) -> None:
    before = designs.count(wire_store)
    page.goto("/new")
    fill_in(page, "By the Enter key")
    page.get_by_label("Height over ground").press("Enter")
    expect(page.get_by_role("heading", name="Nothing is wrong with this request")).to_be_visible()
    assert page.evaluate("document.activeElement.id") == "summary"
    assert designs.count(wire_store) == before


def test_without_scripts_the_form_grows_is_checked_and_is_sent(
    new_page: NewPage, wire_store: Store
) -> None:
    page = new_page(java_script_enabled=False)
    page.goto("/new")
    fill_in(page, "Without scripts")
    page.get_by_role("button", name="Add a conductor").click()
    page.get_by_role("group", name="Conductor 2").get_by_label("Size").fill("14")
    page.get_by_role("button", name="Check", exact=True).click()
    expect(page.get_by_role("status").first).to_contain_text("2 ways to hang the wire")
    page.get_by_role("button", name="Submit for planning").click()
    expect(page.get_by_role("heading", name="Without scripts", level=1)).to_be_visible()
    job = claimed(wire_store)
    planned(wire_store, job)
    # The page asks again by itself after a few seconds.
    expect(page.locator(".state")).to_have_text("done", timeout=15_000)


def test_a_batch_is_followed_line_by_line(
    page: Page, wire_store: Store, wire_settings: Settings
) -> None:
    request = BatchRequest(
        name="Three sheds",
        designs=tuple(sample_request(name=f"Shed {number}") for number in (1, 2, 3)),
    )
    batch_id = submit_batch(wire_store, Doorbell(wire_settings), request, None).batch_id
    page.goto("/batches")
    page.get_by_role("link", name="Three sheds").click()
    assert page.url.endswith(batch_id)
    page.evaluate("document.body.dataset.kept = 'yes'")
    first = page.locator(".lines li", has_text="Shed 1")
    job = claimed(wire_store)
    expect(first.locator(".state")).to_have_text("running")
    come_to(wire_store, job, 0.5, "half way")
    expect(first.locator(".step")).to_have_text("50\u00a0%, half way")
    jobs.fail(wire_store, job, "an invented failure")
    expect(first).to_contain_text("an invented failure")
    expect(page.locator(".title-block .step")).to_contain_text("1 failed")
    assert page.evaluate("document.body.dataset.kept") == "yes"
    for _ in range(2):
        jobs.fail(wire_store, claimed(wire_store), "an invented failure")
    expect(page.locator(".title-block")).to_contain_text("Finished")


def test_designs_are_labelled_found_and_put_away(page: Page) -> None:
    page.goto("/new")
    fill_in(page, "To be filed")
    page.get_by_role("button", name="Submit for planning").click()
    page.get_by_label("Labels").fill("winter, club")
    page.get_by_role("button", name="Put these labels on").click()
    expect(page.get_by_label("Labels")).to_have_value("club, winter")
    page.goto("/")
    page.get_by_label("Label").select_option("winter")
    page.get_by_role("button", name="Show").click()
    expect(page.locator(".designs > li")).to_have_count(1)
    page.get_by_role("link", name="To be filed").click()
    page.get_by_role("button", name="Put into the archive").click()
    expect(page.get_by_role("button", name="Bring back from the archive")).to_be_visible()
    page.goto("/?label=winter")
    expect(page.get_by_text("No design is so.")).to_be_visible()
