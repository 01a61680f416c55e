"""The scaled form: Celery workers that hear the doorbell and drain the store.

Celery carries no work, only the ring: whoever hears it claims jobs from the store until none
waits. Each worker process also sweeps, and rings again where work waits, so that a lost ring
or a broker that came back empty costs seconds and nothing else.

Run as ``celery --app worker.celery_app worker --pool prefork --without-gossip --without-mingle``.
"""

from __future__ import annotations

import logging
import os
import random
import socket
import threading
import time
from typing import Final

from celery import Celery
from celery.signals import worker_process_init, worker_process_shutdown

from service.doorbell import TASK, TRANSPORT, Doorbell
from service.errors import StoreUnavailable
from service.settings import Settings
from service.store import jobs
from service.store.session import Store, open_store
from worker.planning import plan
from worker.running import run_next

_log = logging.getLogger(__name__)

#: One ring is answered for at most so long, or so many jobs, so that processes are recycled.
_DRAIN_S: Final = 20.0
_DRAIN_JOBS: Final = 50

# Celery asks for the application by name, so this module is an entry point of its own.
settings = Settings()

app = Celery("spanwright", broker=settings.redis_url)
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
    worker_send_task_events=False,
    worker_soft_shutdown_timeout=70,
    worker_hijack_root_logger=False,
    broker_connection_retry_on_startup=True,
    broker_connection_max_retries=None,
    broker_transport_options=dict(TRANSPORT),
)


class _Process:
    """What one pool process keeps open: its store and its sweeper."""

    def __init__(self) -> None:
        self.store: Store = open_store(settings)
        self.name = f"{socket.gethostname()} ({os.getpid()})"
        self.stopping = threading.Event()
        self._doorbell = Doorbell(settings)
        self._sweeper = threading.Thread(target=self._sweep, name="sweeper", daemon=True)
        self._sweeper.start()

    def close(self) -> None:
        self.stopping.set()
        self._sweeper.join(settings.sweep_s + 1.0)
        self._doorbell.close()
        self.store.close()

    def _sweep(self) -> None:
        # Jittered, so that processes do not sweep in step.
        while not self.stopping.wait(settings.sweep_s * random.uniform(0.7, 1.3)):  # noqa: S311  # no secret
            try:
                jobs.sweep(self.store, settings.max_attempts)
                if jobs.any_queued(self.store):
                    self._doorbell.ring()
            except StoreUnavailable:
                _log.warning("no sweep, the store is away")


_process: _Process | None = None


@worker_process_init.connect
def _open(**_: object) -> None:
    # After the fork: neither connections nor threads survive one.
    global _process  # noqa: PLW0603  # Celery offers no other place for what a pool process keeps
    _process = _Process()


@worker_process_shutdown.connect
def _close(**_: object) -> None:
    if _process is not None:
        _process.close()


@app.task(name=TASK)
def answer() -> int:
    """Claim and run jobs until none waits; returns how many were run."""
    if _process is None:
        raise RuntimeError("a doorbell was heard outside a pool process")
    ran, until = 0, time.monotonic() + _DRAIN_S
    while ran < _DRAIN_JOBS and time.monotonic() < until:
        outcome = run_next(_process.store, settings, plan, _process.name, _process.stopping)
        if outcome is None:
            break
        ran += 1
    return ran
