"""The scaled form: Redis rings, PostgreSQL knows; nothing hangs on a ring that is lost."""

from __future__ import annotations

import logging
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import closing, contextmanager
from dataclasses import dataclass
from pathlib import Path

import pytest
import redis
from celery import Celery
from kombu.exceptions import OperationalError

from service.doorbell import Doorbell
from service.intake import submit
from service.settings import Settings
from service.store import designs, jobs, workers
from service.store.session import Store, open_store
from tests.service.databases import database, environment, short_lived
from tests.service.samples import sample_request
from tests.service.servers import RedisServer
from tests.service.waiting import in_state, process_at, until
from worker.steady_broker import SteadyBroker

CHECKOUT = Path(__file__).parents[2]
COMMAND = "-m celery --app tests.service.celery_as_named worker --pool prefork --concurrency 2"
QUIETLY = "--without-gossip --without-mingle --loglevel warning"


@contextmanager
def celery_workers(settings: Settings, log: Path) -> Iterator[subprocess.Popen[bytes]]:
    with log.open("ab") as output:
        main = subprocess.Popen(
            [sys.executable, *COMMAND.split(), *QUIETLY.split()],
            cwd=CHECKOUT,
            env=os.environ | environment(settings) | {"C_FORCE_ROOT": "1"},
            stdout=output,
            stderr=output,
            start_new_session=True,
        )
    try:
        yield main
    finally:
        main.terminate()
        try:
            main.wait(30.0)
        except subprocess.TimeoutExpired:
            main.kill()
            main.wait()
            raise


@dataclass(frozen=True, slots=True)
class Scaled:
    """Workers and what they share with whoever submits."""

    settings: Settings
    store: Store
    doorbell: Doorbell

    def submitted(self, name: str) -> str:
        """Submit as the API does, with a ring."""
        return submit(self.store, self.doorbell, sample_request(name=name), None).design_id

    def submitted_unheard(self, name: str) -> str:
        """Submit with a ring that is lost."""
        request = sample_request(name=name)
        return designs.submit(self.store, request, idempotency_key=None).design_id


def first_sign(main: subprocess.Popen[bytes], log: Path, found: Callable[[], bool]) -> None:
    """Wait until workers that were just started show that they work."""

    def look() -> bool:
        assert main.poll() is None, log.read_text()
        return found()

    until(look, within_s=30.0)


@contextmanager
def scaled(settings: Settings) -> Iterator[Scaled]:
    with (
        closing(open_store(settings, patience_s=5.0)) as store,
        closing(Doorbell(settings)) as doorbell,
    ):
        yield Scaled(settings, store, doorbell)


@pytest.fixture(scope="module")
def postgres_url(
    request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory
) -> Iterator[str]:
    with database("postgresql", request, tmp_path_factory.mktemp("scaled")) as url:
        yield url


@pytest.fixture(scope="module")
def hearing(
    postgres_url: str, redis_url: str, tmp_path_factory: pytest.TempPathFactory
) -> Iterator[Scaled]:
    """Two pool processes that hear rings and, sweeping hardly ever, nothing else."""
    settings = short_lived(postgres_url, redis_url=redis_url, sweep_s=600.0)
    log = tmp_path_factory.mktemp("hearing") / "log"
    with scaled(settings) as hearing, celery_workers(settings, log) as main:
        hearing.submitted("quick")
        first_sign(main, log, lambda: jobs.depth(hearing.store) == {"done": 1})
        yield hearing


# ---------------------------------------------------------------------- the workers
def test_a_ring_is_enough_to_have_a_design_planned(hearing: Scaled) -> None:
    in_state(hearing.store, hearing.submitted("quick"), "done")


def test_pool_processes_announce_themselves(hearing: Scaled) -> None:
    in_state(hearing.store, hearing.submitted("quick"), "done")
    found = workers.alive(hearing.store)
    assert {worker.carrier for worker in found} == {"celery"}
    assert 1 <= len({worker.pid for worker in found}) <= 2


def test_one_ring_has_all_planned_that_waits(hearing: Scaled) -> None:
    unheard = [hearing.submitted_unheard("quick") for _ in range(3)]
    hearing.doorbell.ring()
    for design_id in unheard:
        in_state(hearing.store, design_id, "done")


def test_two_pool_processes_plan_two_designs_side_by_side(hearing: Scaled) -> None:
    store = hearing.store
    first, second = hearing.submitted("slow 60"), hearing.submitted("slow 60")
    assert process_at(store, first) != process_at(store, second)
    for design_id in (first, second):
        jobs.cancel(store, design_id)
        in_state(store, design_id, "cancelled")


def test_workers_that_are_asked_to_stop_give_their_jobs_back(
    postgres_url: str, own_redis: RedisServer, tmp_path: Path
) -> None:
    settings, log = short_lived(postgres_url, redis_url=own_redis.url), tmp_path / "log"
    with scaled(settings) as house, celery_workers(settings, log) as main:
        design_id = house.submitted("slow 60")
        first_sign(main, log, lambda: designs.get(house.store, design_id).state == "running")
        main.send_signal(signal.SIGTERM)
        assert main.wait(20.0) == 0
        design = designs.get(house.store, design_id)
        assert (design.state, design.attempts) == ("queued", 0)
        jobs.cancel(house.store, design_id)


def test_sweeps_heal_lost_rings_dead_processes_and_a_broker_that_comes_back_empty(
    postgres_url: str, own_redis: RedisServer, tmp_path: Path
) -> None:
    settings = short_lived(postgres_url, redis_url=own_redis.url, lease_s=1.0)
    log = tmp_path / "log"
    with scaled(settings) as house, celery_workers(settings, log) as main:
        store = house.store
        unheard = house.submitted_unheard("quick")
        first_sign(main, log, lambda: designs.get(store, unheard).state == "done")

        killed = house.submitted("slow 0.5")
        os.kill(process_at(store, killed), signal.SIGKILL)
        assert in_state(store, killed, "done").attempts == 2

        own_redis.kill()
        meanwhile = house.submitted("quick")
        own_redis.start()
        in_state(store, meanwhile, "done", within_s=20.0)
        in_state(store, house.submitted("quick"), "done", within_s=20.0)


def test_a_worker_without_a_broker_says_what_to_set(tmp_path: Path) -> None:
    settings = short_lived(f"sqlite:///{tmp_path / 'spanwright.db'}")
    with celery_workers(settings, tmp_path / "log") as main:
        assert main.wait(20.0) != 0
    assert "SPANWRIGHT_REDIS_URL" in (tmp_path / "log").read_text()


def test_a_broker_that_was_away_for_long_is_looked_for_as_often_as_at_first(
    own_redis: RedisServer, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("kombu.utils.functional.sleep", lambda _seconds: None)
    url = own_redis.url
    own_redis.kill()
    pauses_s: list[float] = []
    with (
        Celery(broker=url, amqp=SteadyBroker, set_as_current=False) as app,
        app.connection_for_read() as connection,
        pytest.raises(OperationalError),
    ):
        connection.clone().ensure_connection(
            lambda _error, pause_s: pauses_s.append(pause_s), max_retries=20
        )
    assert set(pauses_s) == {2.0}


# --------------------------------------------------------------------- the bell itself
def bell(url: str | None) -> Doorbell:
    return Doorbell(Settings(redis_url=url))


def rings_in(server: RedisServer) -> int:
    with closing(redis.Redis(port=server.port)) as client:
        return int(client.llen("celery"))


def test_without_a_broker_a_ring_does_nothing() -> None:
    with closing(bell(None)) as silent:
        silent.ring()
        assert silent._thread is None


def test_a_ring_is_one_message(own_redis: RedisServer) -> None:
    with closing(bell(own_redis.url)) as doorbell:
        doorbell.ring()
        until(lambda: rings_in(own_redis) == 1)


def test_rings_before_closing_are_sent(own_redis: RedisServer) -> None:
    doorbell = bell(own_redis.url)
    for _ in range(3):
        doorbell.ring()
    doorbell.close()
    assert rings_in(own_redis) == 3


def test_a_request_sent_again_does_not_ring(own_redis: RedisServer, store: Store) -> None:
    with closing(bell(own_redis.url)) as doorbell:
        for _ in range(2):
            submit(store, doorbell, sample_request(), "key")
    assert rings_in(own_redis) == 1


def test_an_outage_of_the_broker_is_told_once_and_so_is_its_end(
    own_redis: RedisServer, caplog: pytest.LogCaptureFixture
) -> None:
    def told(words: str) -> list[int]:
        return [each.levelno for each in caplog.records if words in each.getMessage()]

    own_redis.kill()
    with closing(bell(own_redis.url)) as doorbell, caplog.at_level(logging.DEBUG):
        for times in (1, 2, 3):
            doorbell.ring()
            until(lambda times=times: len(told("did not ring")) == times)  # type: ignore[misc]  # mypy does not infer a lambda's default
        own_redis.start()
        doorbell.ring()
        until(lambda: told("rings again"))
    assert told("did not ring") == [logging.WARNING, logging.DEBUG, logging.DEBUG]
    assert told("rings again") == [logging.WARNING]


@pytest.mark.parametrize("trouble", ["killed", "frozen"])
def test_a_broker_in_trouble_holds_no_one_up_and_rings_again_when_well(
    own_redis: RedisServer, trouble: str, caplog: pytest.LogCaptureFixture
) -> None:
    with closing(bell(own_redis.url)) as doorbell, caplog.at_level(logging.WARNING):
        doorbell.ring()
        until(lambda: rings_in(own_redis) == 1)
        if trouble == "killed":
            own_redis.kill()
        else:
            own_redis.send(signal.SIGSTOP)
        started = time.monotonic()
        for _ in range(100):
            doorbell.ring()
        assert time.monotonic() - started < 1.0
        until(lambda: "did not ring" in caplog.text, within_s=20.0)
        if trouble == "killed":
            own_redis.start()
        else:
            own_redis.send(signal.SIGCONT)
        before = rings_in(own_redis)
        doorbell.ring()
        until(lambda: rings_in(own_redis) > before, within_s=20.0)
