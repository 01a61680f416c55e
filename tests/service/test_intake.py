"""Intake: what was accepted is stored, whatever becomes of the bell."""

from __future__ import annotations

import signal
import threading
import time
from contextlib import closing

import pytest

from service.doorbell import Doorbell
from service.errors import KeyReused, StoreUnavailable
from service.intake import submit
from service.settings import Settings
from service.store import designs
from service.store.session import Store
from tests.service.samples import sample_request
from tests.service.servers import RedisServer

#: Nothing listens there.
CLOSED = "redis://127.0.0.1:1/0"


class Bell(Doorbell):
    """Counts its rings."""

    def __init__(self) -> None:
        super().__init__(Settings(redis_url=None))
        self.rings = 0

    def ring(self) -> None:
        """Count."""
        self.rings += 1


def test_a_new_design_rings_once_and_the_same_sent_again_does_not(store: Store) -> None:
    bell = Bell()
    first = submit(store, bell, sample_request(), "key")
    again = submit(store, bell, sample_request(), "key")
    assert (first.created, again.created) == (True, False)
    assert first.design_id == again.design_id
    assert bell.rings == 1


def test_what_is_refused_does_not_ring(store: Store, monkeypatch: pytest.MonkeyPatch) -> None:
    bell = Bell()
    submit(store, bell, sample_request(name="One"), "key")
    with pytest.raises(KeyReused):
        submit(store, bell, sample_request(name="Another"), "key")

    def away(*_: object, **__: object) -> None:
        raise StoreUnavailable("away")

    monkeypatch.setattr(designs, "submit", away)
    with pytest.raises(StoreUnavailable):
        submit(store, bell, sample_request(), None)
    assert bell.rings == 1


def assert_accepted_at_once(store: Store, broker: str) -> None:
    with closing(Doorbell(Settings(redis_url=broker))) as bell:
        started = time.monotonic()
        sent = [submit(store, bell, sample_request(), None).design_id for _ in range(5)]
        assert time.monotonic() - started < 1.0
    assert {designs.get(store, design_id).state for design_id in sent} == {"queued"}
    assert designs.count(store) == len(sent)


def test_a_design_is_accepted_at_once_while_the_broker_is_away(store: Store) -> None:
    assert_accepted_at_once(store, CLOSED)


def test_a_design_is_accepted_at_once_while_the_broker_is_frozen(
    store: Store, own_redis: RedisServer
) -> None:
    own_redis.send(signal.SIGSTOP)
    assert_accepted_at_once(store, own_redis.url)


def test_a_design_is_accepted_where_no_thread_can_be_started_for_the_bell(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    def no_thread(_: threading.Thread) -> None:
        raise RuntimeError("can't start new thread")

    with closing(Doorbell(Settings(redis_url=CLOSED))) as bell:
        monkeypatch.setattr(threading.Thread, "start", no_thread)
        submitted = submit(store, bell, sample_request(), None)
        monkeypatch.undo()
    assert designs.get(store, submitted.design_id).state == "queued"
