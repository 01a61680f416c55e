"""The embedded form: a supervisor and its worker processes, with no broker at all.

Each worker polls the store, runs what it claims, and sweeps up after lost ones. The supervisor
starts them, gives back at once what a dead one held, starts it again, and stops all gracefully.
Between them runs a lifeline, a pipe: a worker gives signs of life on it, and is ended when they
fail; it closes with the supervisor, and the worker then stops by itself.

Run beside the API by ``serve``, or alone as ``python -m worker.dispatcher``, which needs nothing
but the database.
"""

from __future__ import annotations

import logging
import multiprocessing
import random
import signal
import socket
import threading
import time
import uuid
from contextlib import ExitStack, closing, suppress
from dataclasses import dataclass
from multiprocessing.connection import Connection
from multiprocessing.context import SpawnContext, SpawnProcess
from typing import Final

from service import journal
from service.errors import SpanwrightError, StoreUnavailable
from service.settings import Settings, settings_or_exit
from service.store import jobs, workers
from service.store.session import Store, open_store
from worker.running import PlanFunction, announced, drain, sweep

_log = logging.getLogger(__name__)

#: An idle worker looks for work this often at first, and ever more seldom up to the second.
SHORTEST_POLL_S: Final = 0.01
LONGEST_POLL_S: Final = 0.25

#: A worker is replaced after so many jobs, so that memory cannot creep. A new one takes about two
#: seconds to load what it needs, which must not weigh on each job.
MOST_JOBS: Final = 1000

#: A worker that died sooner than this after its start is started again after a pause.
_TOO_SOON_S: Final = 5.0
_LONGEST_PAUSE_S: Final = 10.0
_SUPERVISE_S: Final = 0.1
#: How often a worker gives a sign of life, whatever it plans.
_SIGN_S: Final = 1.0
#: A worker that is silent for so long is stuck where not even its deadline reaches it.
_SILENCE_S: Final = 60.0
_STOP_PATIENCE_S: Final = 30.0
#: The supervisor has others to look after, and leases heal what it cannot give back.
_BURIAL_PATIENCE_S: Final = 1.0


def serve(
    settings: Settings, plan: PlanFunction | None = None, stop: threading.Event | None = None
) -> None:
    """Keep the workers of the settings running until told to stop.

    Parameters
    ----------
    settings : Settings
    plan : callable, optional
        The planning each worker runs; must be importable by name, for workers are processes
        of their own. The real one by default, loaded by the workers only.
    stop : Event, optional
        Ends the supervisor and its workers; without it they run until the process ends.
    """
    stop = stop or threading.Event()
    context = multiprocessing.get_context("spawn")
    slots = [_Slot(context, settings, plan, index + 1) for index in range(settings.workers)]
    try:
        while not stop.wait(_SUPERVISE_S):
            for slot in slots:
                slot.keep_running()
    finally:
        for slot in slots:
            slot.ask_to_stop()
        until_s = time.monotonic() + _STOP_PATIENCE_S
        for slot in slots:
            slot.await_stop(until_s)


def main(plan: PlanFunction | None = None) -> None:
    """Run workers alone, until SIGTERM or SIGINT; `plan` is that of `serve`."""
    settings = settings_or_exit()
    journal.set_up(settings)
    asked, stop = StopFlag(), threading.Event()
    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, lambda _number, _frame: asked.set())
    supervisor = threading.Thread(target=serve, args=(settings, plan), kwargs={"stop": stop})
    supervisor.start()
    while supervisor.is_alive() and not asked.is_set():
        time.sleep(_SUPERVISE_S)
    stop.set()
    supervisor.join()
    if not asked.is_set():
        raise SystemExit("The supervisor of the workers broke down; the log above says why.")


class StopFlag:
    """A flag that a signal handler may set; an Event's lock may be held by what it interrupts."""

    def __init__(self) -> None:
        self._set = False

    def set(self) -> None:
        """Set it, for good."""
        self._set = True

    def is_set(self) -> bool:
        """Whether it is set."""
        return self._set


@dataclass(slots=True)
class _Slot:
    """One place for a worker process, filled again whenever it falls empty."""

    context: SpawnContext
    settings: Settings
    plan: PlanFunction | None
    index: int
    name: str = ""
    process: SpawnProcess | None = None
    lifeline: Connection | None = None
    started_at: float = 0.0
    heard_at: float = 0.0
    pause_s: float = 0.0
    not_before: float = 0.0

    def keep_running(self) -> None:
        if self.process is not None:
            if self._lives(self.process):
                return
            self._bury(self.process)
        if time.monotonic() >= self.not_before:
            self._start()

    def ask_to_stop(self) -> None:
        if self.process is not None and self.process.is_alive():
            self.process.terminate()

    def await_stop(self, until_s: float) -> None:
        if self.process is None:
            return
        self.process.join(max(0.0, until_s - time.monotonic()))
        if self.process.is_alive():
            _log.error("worker %s did not stop, killing it", self.name)
            self.process.kill()
            self.process.join()
        self._bury(self.process)

    def _start(self) -> None:
        # A name is never used twice, so that what a dead worker held is known by it.
        self.name = f"{socket.gethostname()}-{self.index}-{uuid.uuid4().hex[:8]}"
        self.started_at = self.heard_at = time.monotonic()
        try:
            theirs, self.lifeline = self.context.Pipe()
            # The worker gets an end of its own; this one would only be left over.
            with theirs:
                process = self.context.Process(
                    target=_work, args=(self.settings, self.plan, self.name, theirs), name=self.name
                )
                process.start()
        except OSError:
            _log.exception("no worker could be started, trying again")
            self._pause()
            self._cut_lifeline()
        else:
            self.process = process

    def _lives(self, process: SpawnProcess) -> bool:
        if not process.is_alive():
            return False
        self._listen()
        if time.monotonic() - self.heard_at < _SILENCE_S:
            return True
        _log.error("worker %s gave no sign of life for %.0f s, killing it", self.name, _SILENCE_S)
        process.kill()
        process.join()
        return False

    def _listen(self) -> None:
        # A lifeline that has closed ends the listening; that the process ended is seen next time.
        with suppress(EOFError, OSError):
            while self.lifeline is not None and self.lifeline.poll():
                self.lifeline.recv_bytes()
                self.heard_at = time.monotonic()

    def _bury(self, process: SpawnProcess) -> None:
        status = process.exitcode
        if status == 0:
            self.pause_s = 0.0
        else:
            _log.warning("worker %s ended with status %s", self.name, status)
            _give_back(self.settings, self.name)
            self._pause()
        process.close()
        self.process = None
        self._cut_lifeline()

    def _cut_lifeline(self) -> None:
        if self.lifeline is not None:
            self.lifeline.close()
            self.lifeline = None

    def _pause(self) -> None:
        """Wait a little, and ever longer, before the next start where workers die young."""
        died_young = time.monotonic() - self.started_at < _TOO_SOON_S
        self.pause_s = min(2.0 * self.pause_s + 0.1, _LONGEST_PAUSE_S) if died_young else 0.0
        self.not_before = time.monotonic() + self.pause_s


def _give_back(settings: Settings, worker: str) -> None:
    """Give back at once what a dead worker held, rather than when its lease runs out."""
    try:
        with closing(open_store(settings, patience_s=_BURIAL_PATIENCE_S)) as store:
            jobs.bury(store, worker, settings.max_attempts)
            workers.goodbye(store, worker)
    except SpanwrightError as error:
        _log.warning("what worker %s held waits for its lease: %s", worker, error)
    except Exception:  # noqa: BLE001  # without its supervisor no worker would be started again
        _log.exception("what worker %s held waits for its lease", worker)


def _work(settings: Settings, plan: PlanFunction | None, name: str, lifeline: Connection) -> None:
    """A worker process: poll, run, sweep, until asked to stop or the supervisor is gone."""
    journal.set_up(settings)
    stopping = StopFlag()
    # A Ctrl-C reaches the whole process group; only the supervisor decides what it means.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    signal.signal(signal.SIGTERM, lambda _number, _frame: stopping.set())
    threading.Thread(target=_watch, args=(lifeline, stopping), daemon=True).start()
    with ExitStack() as at_the_end:
        try:
            store = at_the_end.enter_context(closing(open_store(settings)))
            at_the_end.enter_context(announced(store, name, "embedded"))
        except SpanwrightError as error:
            _log.error("worker %s cannot begin: %s", name, error)
            raise SystemExit(1) from error
        _poll(store, settings, plan or _real_plan(), name, stopping)


def _real_plan() -> PlanFunction:
    from worker.planning import plan  # noqa: PLC0415  # the supervisor must not load numerics

    return plan


def _watch(lifeline: Connection, stopping: StopFlag) -> None:
    """Give signs of life until the supervisor, which sends nothing, closes the lifeline."""
    with suppress(OSError):
        while not lifeline.poll(_SIGN_S):
            lifeline.send_bytes(b"alive")
    stopping.set()


def _poll(
    store: Store, settings: Settings, plan: PlanFunction, worker: str, stopping: StopFlag
) -> None:
    pause_s, ran, sweep_at = SHORTEST_POLL_S, 0, 0.0
    while not stopping.is_set() and ran < MOST_JOBS:
        now_ran = 0
        try:
            if time.monotonic() >= sweep_at:
                sweep(store, settings, worker)
                # Jittered, so that workers do not sweep in step.
                sweep_at = time.monotonic() + settings.sweep_s * random.uniform(0.7, 1.3)  # noqa: S311  # no secret
            now_ran = drain(
                store,
                settings,
                plan,
                worker,
                stopping,
                most_jobs=MOST_JOBS - ran,
                longest_s=sweep_at - time.monotonic(),
            )
        except StoreUnavailable:
            _log.warning("the store is away, waiting for it")
        if now_ran:
            ran, pause_s = ran + now_ran, SHORTEST_POLL_S
            continue
        time.sleep(pause_s)
        pause_s = min(2.0 * pause_s, LONGEST_POLL_S)


if __name__ == "__main__":
    main()
