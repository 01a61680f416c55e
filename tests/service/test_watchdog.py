"""A Celery worker that has stopped listening is ended, and only such a one."""

from __future__ import annotations

import os
import signal
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from celery import Celery

from service.settings import Settings
from service.store import designs
from tests.service.databases import database, short_lived
from tests.service.servers import RedisServer
from tests.service.test_celery_doorbell import celery_workers, first_sign, scaled
from tests.service.test_dispatcher import is_gone
from tests.service.waiting import in_state, process_at, until
from worker import watchdog
from worker.watchdog import EXIT_DEAF, Watchdog, broker_answers


class Clock:
    """A clock that goes on when told to."""

    def __init__(self) -> None:
        self.now_s = 1000.0

    def monotonic(self) -> float:
        return self.now_s


@pytest.fixture
def clock(monkeypatch: pytest.MonkeyPatch) -> Clock:
    clock = Clock()
    monkeypatch.setattr(watchdog, "time", clock)
    return clock


def unheard_for(dog: Watchdog, clock: Clock, seconds: int) -> None:
    """Rings that nobody hears, every ten seconds."""
    for _ in range(seconds // 10):
        clock.now_s += 10.0
        dog.unheard()


def test_a_worker_is_deaf_once_rings_have_gone_unheard_for_so_long(clock: Clock) -> None:
    dog = Watchdog(60.0)
    dog.unheard()
    unheard_for(dog, clock, 50)
    assert not dog.is_deaf
    unheard_for(dog, clock, 10)
    assert dog.is_deaf


def test_a_ring_that_is_heard_begins_the_count_anew(clock: Clock) -> None:
    dog = Watchdog(60.0)
    dog.unheard()
    unheard_for(dog, clock, 50)
    dog.heard()
    unheard_for(dog, clock, 60)
    assert not dog.is_deaf
    unheard_for(dog, clock, 10)
    assert dog.is_deaf


def test_a_worker_that_was_frozen_is_not_taken_for_deaf(clock: Clock) -> None:
    dog = Watchdog(60.0)
    dog.unheard()
    unheard_for(dog, clock, 20)
    clock.now_s += 3600.0
    unheard_for(dog, clock, 50)
    assert not dog.is_deaf


def test_what_one_process_notes_another_knows() -> None:
    dog = Watchdog(0.0)
    child = os.fork()
    if child == 0:
        dog.unheard()
        os._exit(0)
    os.waitpid(child, 0)
    assert dog.is_deaf


def test_a_broker_that_is_frozen_or_gone_does_not_answer(
    own_redis: RedisServer, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(watchdog, "_PATIENCE_S", 0.2)
    assert broker_answers(own_redis.url)
    own_redis.send(signal.SIGSTOP)
    assert not broker_answers(own_redis.url)
    own_redis.send(signal.SIGCONT)
    until(lambda: broker_answers(own_redis.url))
    own_redis.kill()
    assert not broker_answers(own_redis.url)


# ---------------------------------------------------------------------- a worker as it runs
@pytest.fixture
def settings_of_worker(
    request: pytest.FixtureRequest, own_redis: RedisServer, tmp_path: Path
) -> Iterator[Settings]:
    with database("postgresql", request, tmp_path) as url:
        yield short_lived(url, redis_url=own_redis.url, deaf_s=1.5)


def test_a_worker_that_stopped_listening_ends_and_its_successor_plans(
    settings_of_worker: Settings, tmp_path: Path
) -> None:
    settings, log = settings_of_worker, tmp_path / "log"
    with scaled(settings) as house:
        with celery_workers(settings, log) as main:
            heard = house.submitted("quick")
            first_sign(main, log, lambda: designs.get(house.store, heard).state == "done")
            under_way = house.submitted("slow 60")
            at_it = process_at(house.store, under_way)
            with Celery(broker=settings.redis_url, set_as_current=False) as away:
                replies = away.control.cancel_consumer("celery", reply=True, timeout=5.0)
            assert replies
            unheard = house.submitted("quick")
            assert main.wait(30.0) == EXIT_DEAF
            assert "no ring was heard" in log.read_text()
            until(lambda: is_gone(at_it))
            assert designs.get(house.store, unheard).state == "queued"
            given_back = designs.get(house.store, under_way)
            assert (given_back.state, given_back.attempts) == ("queued", 0)
        with celery_workers(settings, log):
            in_state(house.store, unheard, "done", within_s=30.0)


def test_a_worker_whose_broker_is_away_stays_and_hears_again(
    settings_of_worker: Settings, own_redis: RedisServer, tmp_path: Path
) -> None:
    settings, log = settings_of_worker, tmp_path / "log"
    with scaled(settings) as house, celery_workers(settings, log) as main:
        heard = house.submitted("quick")
        first_sign(main, log, lambda: designs.get(house.store, heard).state == "done")
        own_redis.kill()
        meanwhile = house.submitted("quick")
        time.sleep(3.0 * settings.deaf_s)
        assert main.poll() is None
        own_redis.start()
        in_state(house.store, meanwhile, "done", within_s=30.0)
