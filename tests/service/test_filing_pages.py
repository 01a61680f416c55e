"""The list as one wishes to see it, labels and the archive, and batches, on pages."""

from __future__ import annotations

import httpx
import pytest

from service.contracts.batch import BatchRequest
from service.doorbell import Doorbell
from service.intake import submit, submit_batch
from service.settings import Settings
from service.store import designs, jobs
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.pages import Page, read
from tests.service.samples import sample_request


@pytest.fixture
def lone(wire_store: Store, wire_settings: Settings) -> str:
    request = sample_request(name="Lone design")
    return submit(wire_store, Doorbell(wire_settings), request, None).design_id


@pytest.fixture
def batch(wire_store: Store, wire_settings: Settings) -> str:
    """Three designs, of which the second was cancelled."""
    request = BatchRequest(
        name="Three sheds",
        designs=tuple(sample_request(name=f"Shed {number}") for number in (1, 2, 3)),
    )
    batch_id = submit_batch(wire_store, Doorbell(wire_settings), request, None).batch_id
    jobs.cancel(wire_store, named(wire_store, "Shed 2"))
    return batch_id


def named(store: Store, name: str) -> str:
    page = designs.page(store, limit=100, before=None)
    return next(each.id for each in page.designs if each.name == name)


def post(wire: httpx.Client, address: str, **entries: str) -> httpx.Response:
    return wire.post(address, data={"sent": "yes", **entries}, headers={"Accept": "text/html"})


def listed(page: Page) -> set[str]:
    return {href for href in page.attributes("href") if href.startswith("/designs/")}


def test_the_list_is_narrowed_by_name_and_state(wire: httpx.Client, stored: Stored) -> None:
    assert listed(read(wire, "/?name=QUEUED+des")) == {f"/designs/{stored.queued}"}
    found = listed(read(wire, "/?state=cancelled&name=&label="))
    assert f"/designs/{stored.cancelled}" in found
    assert f"/designs/{stored.queued}" not in found


def test_the_list_says_where_nothing_is_so(wire: httpx.Client, stored: Stored) -> None:
    assert stored.done
    assert "No design is so." in read(wire, "/?name=nothing+of+the+kind").words


def test_the_list_keeps_what_was_wished(wire: httpx.Client) -> None:
    page = read(wire, "/?name=shed&state=queued&sort=name&archived=yes")
    marked = [a for _, a in page.tags if "selected" in a or "checked" in a]
    assert len(marked) == 3
    assert "shed" in set(page.attributes("value"))


@pytest.mark.parametrize("wish", ["state=lost", "sort=price", "archived=perhaps"])
def test_a_list_that_cannot_be_shown_is_refused(wire: httpx.Client, wish: str) -> None:
    assert wire.get(f"/?{wish}", headers={"Accept": "text/html"}).status_code == 422


def test_labels_written_on_a_design_lead_to_the_others_that_carry_them(
    wire: httpx.Client, lone: str
) -> None:
    answer = post(wire, f"/designs/{lone}/labels", labels="spring, R&D")
    assert (answer.status_code, answer.headers["location"]) == (303, f"/designs/{lone}#filing")
    assert "R&D, spring" in set(read(wire, f"/designs/{lone}").attributes("value"))
    assert "/?label=R%26D" in set(read(wire, "/").attributes("href"))
    assert listed(read(wire, "/?label=R%26D")) == {f"/designs/{lone}"}


def test_labels_that_are_too_long_are_refused(wire: httpx.Client, lone: str) -> None:
    assert post(wire, f"/designs/{lone}/labels", labels="x" * 41).status_code == 422


def test_a_design_is_put_away_and_brought_back_on_its_page(wire: httpx.Client, lone: str) -> None:
    address = f"/designs/{lone}"
    assert post(wire, f"{address}/archive", away="yes").status_code == 303
    assert address not in listed(read(wire, "/"))
    assert address in listed(read(wire, "/?archived=yes"))
    assert "Bring back" in read(wire, address).words
    post(wire, f"{address}/archive", away="no")
    assert address in listed(read(wire, "/"))


def test_a_waiting_design_is_cancelled_on_its_page(
    wire: httpx.Client, wire_store: Store, lone: str
) -> None:
    actions = set(read(wire, f"/designs/{lone}").attributes("action"))
    assert f"/designs/{lone}/cancel" in actions
    assert post(wire, f"/designs/{lone}/cancel").status_code == 303
    assert designs.get(wire_store, lone).state == "cancelled"
    assert f"/designs/{lone}/cancel" not in set(read(wire, f"/designs/{lone}").attributes("action"))


def test_nothing_is_filed_that_is_not_there(wire: httpx.Client) -> None:
    for deed in ("labels", "archive", "cancel"):
        assert post(wire, f"/designs/{'0' * 32}/{deed}").status_code == 404


def test_batches_are_listed_with_how_far_they_have_come(wire: httpx.Client, batch: str) -> None:
    page = read(wire, "/batches")
    assert f"/batches/{batch}" in set(page.attributes("href"))
    assert "0 of 3 done, 2 queued, 1 cancelled" in " ".join(page.words.split())


def test_a_batch_shows_its_designs_by_line_with_their_states(
    wire: httpx.Client, wire_store: Store, batch: str
) -> None:
    page = read(wire, f"/batches/{batch}")
    words = " ".join(page.words.split())
    places = [words.index(f"{line} Shed {line}") for line in (1, 2, 3)]
    assert places == sorted(places)
    states = {a["data-design"]: a["data-state"] for _, a in page.tags if "data-design" in a}
    assert states[named(wire_store, "Shed 2")] == "cancelled"
    assert listed(page) == {f"/designs/{design_id}" for design_id in states}
    assert f"/v1/batches/{batch}/events" in set(page.attributes("data-events"))
    assert any(a.get("http-equiv") == "refresh" for _, a in page.tags)


def test_designs_of_a_batch_are_shown_by_state(wire: httpx.Client, batch: str) -> None:
    words = read(wire, f"/batches/{batch}?state=cancelled").words
    assert "Shed 2" in words
    assert "Shed 1" not in words


def test_a_cancelled_batch_has_ended_and_follows_nothing(wire: httpx.Client, batch: str) -> None:
    assert post(wire, f"/batches/{batch}/cancel").status_code == 303
    page = read(wire, f"/batches/{batch}")
    assert "0 of 3 done, 3 cancelled" in " ".join(page.words.split())
    assert not list(page.attributes("data-events"))
    assert not any(a.get("http-equiv") == "refresh" for _, a in page.tags)


def test_a_design_of_a_batch_leads_to_it(wire: httpx.Client, wire_store: Store, batch: str) -> None:
    page = read(wire, f"/designs/{named(wire_store, 'Shed 1')}")
    assert f"/batches/{batch}" in set(page.attributes("href"))


def test_a_batch_that_is_not_there_is_not_found(wire: httpx.Client) -> None:
    for address in (f"/batches/{'0' * 32}", "/batches/none", f"/batches?before={'0' * 32}"):
        assert wire.get(address, headers={"Accept": "text/html"}).status_code == 404
