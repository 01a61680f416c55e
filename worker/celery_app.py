"""The scaled form: Celery workers that hear the doorbell and drain the store.

Celery carries no work, only the ring: whoever hears it claims jobs from the store until none
waits. Each idle pool process also sweeps, and rings again where work waits, so that a lost ring
or a broker that came back empty costs seconds and nothing else.

Run as ``celery --app worker.celery_app worker --pool prefork --without-gossip --without-mingle``.
"""

from __future__ import annotations

import logging
import mmap
import os
import random
import socket
import threading
import time
import uuid
from contextlib import suppress
from typing import Final

from celery import Celery
from celery.signals import (
    celeryd_init,
    setup_logging,
    worker_init,
    worker_process_init,
    worker_process_shutdown,
    worker_shutting_down,
)

from service import journal
from service.doorbell import TASK, TRANSPORT, Doorbell
from service.errors import StoreUnavailable
from service.settings import settings_or_exit
from service.store import jobs, workers
from service.store.session import Store, open_store
from worker.running import PlanFunction, announce, drain, sweep
from worker.steady_broker import SteadyBroker
from worker.watchdog import EXIT_DEAF, Watchdog, broker_answers

_log = logging.getLogger(__name__)

#: One ring is answered for at most so long, or so many jobs, so that processes are recycled.
_DRAIN_S: Final = 20.0
_DRAIN_JOBS: Final = 50

# Celery asks for the application by name, so this module is an entry point of its own.
settings = settings_or_exit()

app = Celery("spanwright", broker=settings.redis_url, amqp=SteadyBroker)
app.conf.update(
    task_ignore_result=True,
    result_backend=None,
    # The lease recovers what a dead worker held; a ring is worth nothing by itself.
    task_acks_late=False,
    task_reject_on_worker_lost=False,
    task_publish_retry=False,
    # Only a backstop: the heartbeat ends overdue jobs long before.
    task_time_limit=int(_DRAIN_S + settings.job_deadline_s + 60.0),
    worker_prefetch_multiplier=1,
    worker_disable_prefetch=True,
    worker_max_tasks_per_child=500,
    # In KiB; a process starts at about 150,000 and one design takes a few ten thousand.
    worker_max_memory_per_child=1_000_000,
    worker_send_task_events=False,
    worker_soft_shutdown_timeout=70,
    worker_hijack_root_logger=False,
    broker_connection_retry_on_startup=True,
    broker_connection_max_retries=None,
    broker_transport_options=dict(TRANSPORT),
)


#: The planning that pool processes run; the real one, unless another was put here before.
plan: PlanFunction | None = None


class _SharedFlag:
    """A flag that the main process sets and every pool process sees.

    One byte of memory shared over the fork: it has no lock that a killed process could keep.
    """

    def __init__(self) -> None:
        self._page = mmap.mmap(-1, 1)

    def set(self) -> None:
        self._page[0] = 1

    def is_set(self) -> bool:
        return self._page[0] != 0


_stopping: Final = _SharedFlag()
_watchdog: Final = Watchdog(settings.deaf_s)


class _PoolProcess:
    """What one pool process keeps: its store, its name, its sweeper."""

    def __init__(self) -> None:
        self._name = f"{socket.gethostname()} ({os.getpid()}) {uuid.uuid4().hex[:8]}"
        self._doorbell = Doorbell(settings)
        self._opening = threading.Lock()
        self._store: Store | None = None
        self._draining = threading.Event()
        self._closing = threading.Event()
        self._sweeper = threading.Thread(target=self._sweep, name="sweeper", daemon=True)
        self._sweeper.start()

    def answer(self, plan: PlanFunction) -> int:
        """Run jobs until none waits, or enough has been done for one ring."""
        self._draining.set()
        _watchdog.heard()
        try:
            store = self._open()
            ran = drain(
                store,
                settings,
                plan,
                self._name,
                _stopping,
                most_jobs=_DRAIN_JOBS,
                longest_s=_DRAIN_S,
            )
            if jobs.any_queued(store):
                self._doorbell.ring()
        except StoreUnavailable:
            _log.warning("the store is away; when it is back a sweep finds what waits")
            return 0
        finally:
            self._draining.clear()
        return ran

    def close(self) -> None:
        self._closing.set()
        self._sweeper.join(settings.sweep_s)
        self._doorbell.close()
        if self._store is not None:
            with suppress(StoreUnavailable):
                workers.goodbye(self._store, self._name)
            self._store.close()

    def _open(self) -> Store:
        # Not at the start of the process: the database may be away just then.
        with self._opening:
            if self._store is None:
                store = open_store(settings)
                announce(store, self._name, "celery")
                self._store = store
            return self._store

    def _sweep(self) -> None:
        # Jittered, so that processes do not sweep in step.
        while not self._closing.wait(settings.sweep_s * random.uniform(0.7, 1.3)):  # noqa: S311  # no secret
            try:
                store = self._open()
                sweep(store, settings, self._name)
                # A process that drains looks for more by itself, and rings when it stops.
                idle = not self._draining.is_set() and not _stopping.is_set()
                if idle:
                    self._ring_if_any_waits(store)
            except StoreUnavailable:
                _log.warning("no sweep, the store is away")
            except Exception:  # noqa: BLE001  # a sweeper that stopped in silence would leave lost jobs lying
                _log.exception("no sweep")

    def _ring_if_any_waits(self, store: Store) -> None:
        if not jobs.any_queued(store):
            _watchdog.heard()
            return
        self._doorbell.ring()
        if broker_answers(str(settings.redis_url)):
            _watchdog.unheard()
        else:
            _watchdog.heard()


_pool_process: _PoolProcess | None = None


@celeryd_init.connect
def _refuse_without_broker(**_: object) -> None:
    if settings.redis_url is None:
        raise SystemExit(
            "SPANWRIGHT_REDIS_URL is not set: name the broker, redis://host:6379/0, "
            "or run workers without one by python -m worker.dispatcher."
        )


@setup_logging.connect
def _log_as_the_others(**_: object) -> None:
    # A receiver of this signal keeps Celery from setting up logging of its own.
    journal.set_up(settings)


@worker_init.connect
def _load_planning(**_: object) -> None:
    # Before the fork, so that pool processes share what it takes in memory.
    global plan  # noqa: PLW0603  # Celery offers no other place for what its processes share
    if plan is None:
        try:
            from worker.planning import plan  # noqa: PLC0415  # whoever only looks at the settings needs no numerics
        except ImportError as error:
            # Celery only logs what a signal's receiver raises, and would go on without planning.
            raise SystemExit(f"The planning cannot be loaded: {error}") from error


@worker_init.connect
def _watch(**_: object) -> None:
    _watchdog.watch(_end_deaf)


def _end_deaf() -> None:
    # What is being planned is given back first; pool processes end with this one.
    _stopping.set()
    time.sleep(settings.heartbeat_s + settings.cancel_grace_s + 1.0)
    os._exit(EXIT_DEAF)


@worker_process_init.connect
def _open(**_: object) -> None:
    # After the fork: neither connections nor threads survive one.
    global _pool_process  # noqa: PLW0603  # Celery offers no other place for what a pool process keeps
    _pool_process = _PoolProcess()


@worker_shutting_down.connect
def _stop(**_: object) -> None:
    # In the main process; Celery itself would only wait until every pool process is idle.
    _stopping.set()


@worker_process_shutdown.connect
def _close(**_: object) -> None:
    if _pool_process is not None:
        _pool_process.close()


@app.task(name=TASK)
def answer() -> int:
    """Claim and run jobs until none waits; returns how many were run."""
    if _pool_process is None or plan is None:
        raise RuntimeError("a doorbell was heard outside a pool process")
    return _pool_process.answer(plan)
