"""What changes something is taken from this service's own pages and from programs only."""

from __future__ import annotations

import httpx
import pytest

from service.store import designs
from service.store.session import Store
from tests.service.conftest import Stored
from tests.service.samples import request_json

JSON = {"Content-Type": "application/json"}


@pytest.mark.parametrize(
    "sent",
    [
        {"Sec-Fetch-Site": "cross-site"},
        {"Sec-Fetch-Site": "same-site", "Origin": "http://other.127.0.0.1"},
        {"Origin": "http://elsewhere.example"},
        {"Origin": "null"},
    ],
)
def test_nothing_is_submitted_or_cancelled_by_the_page_of_another_site(
    wire: httpx.Client, wire_store: Store, stored: Stored, sent: dict[str, str]
) -> None:
    before = designs.count(wire_store)
    for address in ("/v1/designs", f"/v1/designs/{stored.queued}/cancel", "/new"):
        answer = wire.post(address, content=request_json(), headers=JSON | sent)
        assert answer.status_code == 403
        assert answer.json()["faults"][0]["code"] == "origin-refused"
        assert answer.headers["x-content-type-options"] == "nosniff"
    assert designs.count(wire_store) == before
    assert designs.get(wire_store, stored.queued).state == "queued"


@pytest.mark.parametrize("sent", ["own site", "own origin", "typed in", "program"])
def test_own_pages_and_programs_are_served(wire: httpx.Client, sent: str) -> None:
    headers = {
        "own site": {"Sec-Fetch-Site": "same-origin"},
        "own origin": {"Origin": str(wire.base_url).rstrip("/")},
        "typed in": {"Sec-Fetch-Site": "none"},
        "program": {},
    }[sent]
    answer = wire.post("/v1/designs/check", content=request_json(), headers=JSON | headers)
    assert answer.status_code == 200


def test_a_link_from_another_site_is_followed(wire: httpx.Client) -> None:
    assert wire.get("/new", headers={"Sec-Fetch-Site": "cross-site"}).status_code == 200
