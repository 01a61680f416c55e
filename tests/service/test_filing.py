"""Designs found again: by part of the name, state and label, in either order, and put away."""

from __future__ import annotations

import pytest

from service.contracts.batch import BatchRequest
from service.contracts.filing import ListWish, parse_labels
from service.errors import DesignNotFound, RequestRefused
from service.store import batches, designs, filing, jobs
from service.store.session import Store
from tests.service.samples import sample_request

NAMES = ("Barn roof", "attic", "Boat shed", "attic")


@pytest.fixture
def stored(store: Store) -> list[str]:
    """Designs in the order they were submitted."""
    return [
        designs.submit(store, sample_request(name=name), idempotency_key=None).design_id
        for name in NAMES
    ]


def names(store: Store, limit: int = 20, **wish: object) -> list[str]:
    page = filing.list_page(store, ListWish.model_validate(wish), limit=limit, after=None)
    return [each.summary.name for each in page.designs]


def paged(store: Store, limit: int, **wish: object) -> list[str]:
    """The list as read page by page."""
    seen: list[str] = []
    after = None
    while True:
        page = filing.list_page(store, ListWish.model_validate(wish), limit=limit, after=after)
        seen += [each.summary.id for each in page.designs]
        after = page.next_after
        if after is None:
            return seen


def test_designs_are_listed_newest_first(store: Store, stored: list[str]) -> None:
    assert paged(store, 20) == stored[::-1]


@pytest.mark.parametrize("sort", ["newest", "name"])
def test_pages_follow_each_other_without_gap_or_repetition(
    store: Store, stored: list[str], sort: str
) -> None:
    whole = paged(store, 20, sort=sort)
    assert sorted(whole) == sorted(stored)
    assert paged(store, 1, sort=sort) == whole
    assert paged(store, 3, sort=sort) == whole


def test_names_are_in_order_whatever_their_capitals(store: Store, stored: list[str]) -> None:
    assert len(stored) == 4
    assert names(store, sort="name") == ["attic", "attic", "Barn roof", "Boat shed"]


def test_a_part_of_the_name_is_found_whatever_its_capitals(store: Store, stored: list[str]) -> None:
    assert len(stored) == 4
    assert names(store, name="bOA") == ["Boat shed"]
    assert names(store, name="%") == []
    assert names(store, name="_") == []


def test_designs_of_one_state_are_found(store: Store, stored: list[str]) -> None:
    jobs.cancel(store, stored[2])
    assert names(store, state="cancelled") == ["Boat shed"]
    assert len(names(store, state="queued")) == 3


def test_designs_with_a_label_are_found_and_tell_their_labels(
    store: Store, stored: list[str]
) -> None:
    filing.put_labels(store, stored[0], ("spring", "club"))
    filing.put_labels(store, stored[1], ("club",))
    assert names(store, label="club") == ["attic", "Barn roof"]
    assert names(store, label="clu") == []
    page = filing.list_page(store, ListWish(label="spring"), limit=5, after=None)
    assert page.designs[0].labels == ("club", "spring")
    assert filing.labels_in_use(store, limit=10) == ("club", "spring")


def test_labels_put_on_take_the_place_of_those_before(store: Store, stored: list[str]) -> None:
    filing.put_labels(store, stored[0], ("spring", "club"))
    filing.put_labels(store, stored[0], ("autumn", "club"))
    assert filing.filed(store, stored[0]).labels == ("autumn", "club")


def test_a_design_put_away_is_in_the_archive_only_until_it_is_brought_back(
    store: Store, stored: list[str]
) -> None:
    for _ in range(2):
        filing.archive(store, stored[2], away=True)
    assert "Boat shed" not in names(store)
    assert names(store, archived=True) == ["Boat shed"]
    assert filing.filed(store, stored[2]).archived
    assert designs.get(store, stored[2]).state == "queued"
    for _ in range(2):
        filing.archive(store, stored[2], away=False)
    assert names(store, archived=True) == []
    assert "Boat shed" in names(store)


def test_designs_of_batches_are_listed_only_where_asked_for(
    store: Store, stored: list[str]
) -> None:
    request = BatchRequest(designs=(sample_request(name="of a batch"),))
    batches.submit(store, request, idempotency_key=None, owner="local")
    assert len(paged(store, 20)) == len(stored)
    assert names(store, batches=True)[0] == "of a batch"


def test_what_is_not_there_is_not_filed(store: Store) -> None:
    for design_id in ("0" * 32, "none"):
        with pytest.raises(DesignNotFound):
            filing.put_labels(store, design_id, ())
        with pytest.raises(DesignNotFound):
            filing.archive(store, design_id, away=True)
        with pytest.raises(DesignNotFound):
            filing.list_page(store, ListWish(), limit=1, after=design_id)


def test_labels_are_read_with_commas_between_them() -> None:
    assert parse_labels(" spring,club , ,spring") == ("club", "spring")
    assert parse_labels("") == ()


@pytest.mark.parametrize("text", ["x" * 41, ",".join("abcdefghi"), "a\x07b"])
def test_labels_too_many_too_long_or_unprintable_are_refused(text: str) -> None:
    with pytest.raises(RequestRefused):
        parse_labels(text)
