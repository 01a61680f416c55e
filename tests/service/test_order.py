"""The order of work: urgent first, turns shared by owners and batches, nothing waits for ever."""

from __future__ import annotations

import threading
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from datetime import UTC, datetime

import pytest
from sqlalchemy import delete, select
from sqlalchemy.orm import Session

from service.store import jobs, order
from service.store.session import Store
from service.store.tables import JobRow, ShareRow
from tests.service.queueing import (
    LEASE_S,
    batch,
    numbered,
    served,
    single,
    take,
    taken,
    waited_longer,
)


def always(answer: bool) -> Callable[[], bool]:
    return lambda: answer


@pytest.fixture(autouse=True)
def _no_turns_for_the_aged(monkeypatch: pytest.MonkeyPatch) -> None:
    # One claim in eight is drawn by lot; tests of it decide for themselves.
    monkeypatch.setattr(order, "_is_for_the_aged", always(False))


# ------------------------------------------------------------------------ priorities
def test_urgent_comes_before_ordinary_and_when_idle_after_all(store: Store) -> None:
    single(store, "idle", priority="when-idle")
    single(store, "ordinary")
    single(store, "urgent", priority="urgent")
    assert taken(store, 3) == ["urgent", "ordinary", "idle"]


def test_an_urgent_design_of_an_owner_served_often_comes_before_ordinary_ones_of_another(
    store: Store,
) -> None:
    for name in numbered("early", 3):
        single(store, name, owner="ann", priority="urgent")
    taken(store, 3)
    single(store, "ordinary", owner="bob")
    single(store, "urgent", owner="ann", priority="urgent")
    assert taken(store, 2) == ["urgent", "ordinary"]


# ------------------------------------------------------------------ between the owners
def test_owners_take_turns_however_much_one_of_them_has(store: Store) -> None:
    batch(store, *numbered("ann", 6), owner="ann")
    batch(store, *numbered("bob", 2), owner="bob")
    assert taken(store, 6) == ["ann 1", "bob 1", "ann 2", "bob 2", "ann 3", "ann 4"]


def test_an_owner_saves_up_no_turns_while_nothing_of_his_waits(store: Store) -> None:
    single(store, "bob 0", owner="bob")
    batch(store, *numbered("ann", 9), owner="ann")
    taken(store, 5)
    batch(store, *numbered("bob", 4), owner="bob")
    assert sorted(name[:3] for name in taken(store, 4)) == ["ann", "ann", "bob", "bob"]


def test_an_owner_who_comes_new_saves_up_no_turns_either(store: Store) -> None:
    batch(store, *numbered("ann", 9), owner="ann")
    taken(store, 5)
    batch(store, *numbered("bob", 4), owner="bob")
    assert sorted(name[:3] for name in taken(store, 4)) == ["ann", "ann", "bob", "bob"]


def test_an_owner_does_not_pay_for_turns_nobody_else_wanted(store: Store) -> None:
    batch(store, *numbered("ann", 5), owner="ann")
    taken(store, 5)
    batch(store, *numbered("bob", 4), owner="bob")
    batch(store, *numbered("more", 4), owner="ann")
    assert sorted(name[:3] for name in taken(store, 4)) == ["bob", "bob", "mor", "mor"]


def test_an_owner_gains_nothing_by_sending_one_design_at_a_time(store: Store) -> None:
    batch(store, *numbered("zoe", 9), owner="zoe")
    got = []
    for number in range(6):
        single(store, f"ann {number}", owner="ann")
        got += taken(store, 1)
    assert sum(name.startswith("zoe") for name in got) == 3


def test_turns_at_one_priority_cost_nothing_at_another(store: Store) -> None:
    batch(store, *numbered("urgent", 5), owner="ann", priority="urgent")
    taken(store, 5)
    single(store, "ordinary", owner="ann")
    assert (served(store, "ann", 0), served(store, "ann", 100)) == (5, 0)


# ----------------------------------------------------------------- between the batches
def test_batches_of_one_owner_take_turns(store: Store) -> None:
    batch(store, *numbered("first", 6))
    got = taken(store, 2)
    batch(store, *numbered("second", 3))
    got += taken(store, 4)
    assert got[:2] == ["first 1", "first 2"]
    assert sorted(got[2:]) == ["first 3", "first 4", "second 1", "second 2"]


def test_designs_of_a_batch_come_in_the_order_of_its_lines(store: Store) -> None:
    names = numbered("line", 12)
    batch(store, *names)
    assert taken(store, 12) == names


def test_a_single_design_goes_about_next_however_large_the_batch_before_it(store: Store) -> None:
    batch(store, *numbered("batch", 40))
    taken(store, 10)
    single(store, "single")
    assert "single" in taken(store, 2)


def test_single_designs_and_a_batch_take_turns(store: Store) -> None:
    batch(store, *numbered("batch", 16))
    taken(store, 8)
    for name in numbered("single", 6):
        single(store, name)
    got = taken(store, 6)
    assert sum(name.startswith("single") for name in got) == 3
    assert [name for name in got if name.startswith("single")] == numbered("single", 3)


# ---------------------------------------------------------------------------- ageing
def test_what_has_waited_longest_of_all_comes_out_of_turn(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    forgotten = single(store, "forgotten", owner="ann", priority="when-idle")
    single(store, "urgent", owner="bob", priority="urgent")
    waited_longer(store, forgotten, order.AGED_S + 5.0)
    monkeypatch.setattr(order, "_is_for_the_aged", always(True))
    assert taken(store, 2) == ["forgotten", "urgent"]
    assert served(store, "ann", 200) == 1


def test_nothing_comes_out_of_turn_that_has_not_waited_long(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    lately = single(store, "lately", priority="when-idle")
    single(store, "urgent", priority="urgent")
    waited_longer(store, lately, order.AGED_S - 20.0)
    monkeypatch.setattr(order, "_is_for_the_aged", always(True))
    assert taken(store, 2) == ["urgent", "lately"]


def test_what_comes_out_of_turn_does_not_move_the_place_where_new_batches_start(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    names = numbered("first", 9)
    batch(store, *names)
    far = store.read(
        lambda session: session.scalars(
            select(JobRow.design_id).order_by(JobRow.position.desc()).limit(1)
        ).one()
    )
    waited_longer(store, far, order.AGED_S + 5.0)
    monkeypatch.setattr(order, "_is_for_the_aged", always(True))
    assert taken(store, 1) == ["first 9"]
    monkeypatch.setattr(order, "_is_for_the_aged", always(False))
    batch(store, *numbered("second", 3))
    assert sorted(taken(store, 2)) == ["first 1", "second 1"]


def test_about_one_claim_in_eight_is_for_the_aged(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.undo()
    drawn = sum(order._is_for_the_aged() for _ in range(4000))
    # Binomial with p = 1/8: mean 500, standard deviation 21; six of them on either side.
    assert 374 < drawn < 626


# ------------------------------------------------------------- beside other claimers
@pytest.mark.parametrize("database_url", ["postgresql"], indirect=True)
def test_a_claimer_goes_on_to_the_next_share_where_all_of_the_first_is_being_claimed(
    store: Store,
) -> None:
    for owner in ("ann", "bob", "cora"):
        waits = single(store, owner, owner=owner)
    # Not simply on to whoever has waited longest.
    waited_longer(store, waits, 30.0)
    holding, done = threading.Event(), threading.Event()

    def hold_first(session: Session) -> bool:
        found = order.next_job(session, datetime.now(UTC))
        assert found is not None
        assert found.owner == "ann"
        holding.set()
        return done.wait(5.0)

    with ThreadPoolExecutor(1) as pool:
        slow = pool.submit(store.write, hold_first)
        assert holding.wait(5.0)
        assert taken(store, 2) == ["bob", "cora"]
        assert jobs.claim(store, "third", LEASE_S) is None
        done.set()
        assert slow.result()


@pytest.mark.parametrize("database_url", ["postgresql"], indirect=True)
@pytest.mark.parametrize("what", ["claim", "submit"])
def test_a_share_that_a_frozen_process_keeps_locked_holds_up_nobody(
    store: Store, what: str
) -> None:
    batch(store, *numbered("ann", 3), owner="ann")
    holding, done = threading.Event(), threading.Event()

    def hold_share(session: Session) -> bool:
        session.scalars(select(ShareRow).with_for_update()).all()
        holding.set()
        return done.wait(5.0)

    with ThreadPoolExecutor(1) as pool:
        slow = pool.submit(store.write, hold_share)
        assert holding.wait(5.0)
        if what == "claim":
            assert taken(store, 2) == ["ann 1", "ann 2"]
        else:
            single(store, "single", owner="ann")
            batch(store, "batch", owner="ann")
        assert not slow.done()
        done.set()
        assert slow.result()


def test_claimers_at_once_charge_every_turn(store: Store) -> None:
    batch(store, *numbered("ann", 20), owner="ann")

    def take_five(_: int) -> None:
        for _ in range(5):
            take(store)

    with ThreadPoolExecutor(4) as pool:
        list(pool.map(take_five, range(4)))
    assert served(store, "ann") == 20


def test_a_job_whose_share_is_missing_is_claimed_all_the_same(store: Store) -> None:
    single(store, "orphan")
    store.write(lambda session: session.execute(delete(ShareRow)))
    assert taken(store, 1) == ["orphan"]


def test_a_job_given_back_comes_next_among_those_of_its_owner(store: Store) -> None:
    batch(store, *numbered("line", 4))
    first = take(store)
    taken(store, 1)
    jobs.release(store, first)
    assert taken(store, 2) == ["line 1", "line 3"]
