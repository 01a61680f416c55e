"""The embedded form: a supervisor and its worker processes, with no broker at all.

Each worker polls the store, runs what it claims, and sweeps up after dead ones. The supervisor
starts them, starts them again when they die, and stops them gracefully. A worker whose
supervisor is gone notices by its lifeline, a pipe that closes, and stops by itself.
"""

from __future__ import annotations

import logging
import multiprocessing
import os
import random
import signal
import socket
import threading
import time
from dataclasses import dataclass, field
from multiprocessing.connection import Connection
from multiprocessing.context import SpawnContext, SpawnProcess
from typing import Final

from service.errors import StoreUnavailable
from service.settings import Settings
from service.store import jobs
from service.store.session import Store, open_store
from worker import planning
from worker.running import PlanFunction, run_next

_log = logging.getLogger(__name__)

#: An idle worker looks for work this often at first, and ever more seldom up to the second.
SHORTEST_POLL_S: Final = 0.01
LONGEST_POLL_S: Final = 0.25

#: A worker is replaced after so many jobs, so that memory cannot creep.
MOST_JOBS: Final = 200

#: A worker that died sooner than this after its start is started again after a pause.
_TOO_SOON_S: Final = 5.0
_LONGEST_PAUSE_S: Final = 10.0
_SUPERVISE_S: Final = 0.1
_STOP_PATIENCE_S: Final = 30.0


def serve(
    settings: Settings, plan: PlanFunction | None = None, stop: threading.Event | None = None
) -> None:
    """Keep the workers of the settings running until told to stop.

    Parameters
    ----------
    settings : Settings
    plan : callable, optional
        The planning each worker runs; must be importable by name, for workers are processes
        of their own. The real one by default.
    stop : Event, optional
        Ends the supervisor and its workers; without it they run until the process ends.
    """
    stop = stop or threading.Event()
    context = multiprocessing.get_context("spawn")
    slots = [
        _Slot(context, settings, plan or planning.plan, f"{socket.gethostname()}-{index + 1}")
        for index in range(settings.workers)
    ]
    try:
        while not stop.wait(_SUPERVISE_S):
            for slot in slots:
                slot.keep_running()
    finally:
        for slot in slots:
            slot.ask_to_stop()
        for slot in slots:
            slot.await_stop()


@dataclass(slots=True)
class _Slot:
    """One place for a worker process, filled again whenever it falls empty."""

    context: SpawnContext
    settings: Settings
    plan: PlanFunction
    name: str
    process: SpawnProcess | None = None
    lifeline: Connection | None = None
    started_at: float = 0.0
    pause_s: float = 0.0
    not_before: float = field(default_factory=time.monotonic)

    def keep_running(self) -> None:
        if self.process is not None and self.process.is_alive():
            return
        if self.process is not None:
            self._bury(self.process)
        if time.monotonic() >= self.not_before:
            self._start()

    def ask_to_stop(self) -> None:
        if self.process is not None and self.process.is_alive():
            self.process.terminate()

    def await_stop(self) -> None:
        if self.process is None:
            return
        self.process.join(_STOP_PATIENCE_S)
        if self.process.is_alive():
            _log.error("worker %s did not stop, killing it", self.name)
            self.process.kill()
            self.process.join()
        self._close()

    def _start(self) -> None:
        theirs, self.lifeline = self.context.Pipe(duplex=False)
        self.process = self.context.Process(
            target=_work, args=(self.settings, self.plan, self.name, theirs), name=self.name
        )
        self.process.start()
        # Only the worker may hold its end, or the pipe would not close with the supervisor.
        theirs.close()
        self.started_at = time.monotonic()

    def _bury(self, process: SpawnProcess) -> None:
        lived_s = time.monotonic() - self.started_at
        if process.exitcode != 0:
            _log.warning("worker %s ended with status %s", self.name, process.exitcode)
        died_young = process.exitcode != 0 and lived_s < _TOO_SOON_S
        self.pause_s = min(2.0 * self.pause_s + 0.1, _LONGEST_PAUSE_S) if died_young else 0.0
        self.not_before = time.monotonic() + self.pause_s
        self._close()

    def _close(self) -> None:
        if self.lifeline is not None:
            self.lifeline.close()
        if self.process is not None:
            self.process.close()
        self.process = self.lifeline = None


def _work(settings: Settings, plan: PlanFunction, name: str, lifeline: Connection) -> None:
    """A worker process: poll, run, sweep, until asked to stop or the supervisor is gone."""
    logging.basicConfig(level=logging.WARNING, format="%(asctime)s %(processName)s %(message)s")
    stopping = threading.Event()
    # A Ctrl-C reaches the whole process group; only the supervisor decides what it means.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    signal.signal(signal.SIGTERM, lambda _number, _frame: stopping.set())
    threading.Thread(target=_watch, args=(lifeline, stopping), daemon=True).start()
    worker = f"{name} ({os.getpid()})"
    store = open_store(settings)
    try:
        _poll(store, settings, plan, worker, stopping)
    finally:
        store.close()


def _watch(lifeline: Connection, stopping: threading.Event) -> None:
    try:
        lifeline.recv()
    except (EOFError, OSError):
        stopping.set()


def _poll(
    store: Store, settings: Settings, plan: PlanFunction, worker: str, stopping: threading.Event
) -> None:
    pause_s, ran, sweep_at = SHORTEST_POLL_S, 0, 0.0
    while not stopping.is_set() and ran < MOST_JOBS:
        try:
            if time.monotonic() >= sweep_at:
                jobs.sweep(store, settings.max_attempts)
                # Jittered, so that workers do not sweep in step.
                sweep_at = time.monotonic() + settings.sweep_s * random.uniform(0.7, 1.3)  # noqa: S311  # no secret
            outcome = run_next(store, settings, plan, worker, stopping)
        except StoreUnavailable:
            _log.warning("the store is away, waiting for it")
            outcome = None
        if outcome is not None:
            ran, pause_s = ran + 1, SHORTEST_POLL_S
            continue
        stopping.wait(pause_s)
        pause_s = min(2.0 * pause_s, LONGEST_POLL_S)
