"""Running one job: claim, plan under a heartbeat, finish. What both carriers of work share."""

from __future__ import annotations

import logging
import math
import os
import socket
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from contextvars import copy_context
from enum import Enum
from functools import partial
from typing import Final, Protocol

from service.contracts.candidate import PlannedDesign
from service.contracts.progress import Progress
from service.contracts.request import DesignRequest
from service.errors import SpanwrightError, StoreUnavailable
from service.journal import bound
from service.settings import Settings
from service.store import jobs, workers
from service.store.jobs import Beat, ClaimedJob
from service.store.session import Store
from service.store.workers import Carrier
from worker.engine import ENGINE_VERSION
from worker.engine.errors import EngineError

ProgressCallback = Callable[[float, str], None]
PlanFunction = Callable[[DesignRequest, ProgressCallback], PlannedDesign]

_log = logging.getLogger(__name__)

#: A result is offered for so long to a store that is away, before it is given up.
_OFFER_S: Final = 600.0

#: Status of a process that ended itself because planning would not stop.
EXIT_WOULD_NOT_STOP: Final = 75


class Flag(Protocol):
    """Something that is set once, as an Event is."""

    def is_set(self) -> bool:
        """Whether it is set."""


class Outcome(Enum):
    """What came of running one job."""

    DONE = "done"
    FAILED = "failed"
    CANCELLED = "cancelled"
    OVERDUE = "overdue"
    LOST = "lost"
    RETURNED = "returned"


class _StopPlanning(BaseException):
    """Raised inside planning by its progress callback; no ``except Exception`` may eat it."""


@contextmanager
def announced(store: Store, worker: str, carrier: Carrier) -> Iterator[None]:
    """Tell the store of this worker while it works, and that it went when it goes.

    Raises
    ------
    StoreUnavailable
        If the store stayed away before the worker began; it may go in silence.
    """
    announce(store, worker, carrier)
    try:
        yield
    finally:
        with suppress(StoreUnavailable):
            workers.goodbye(store, worker)


def announce(store: Store, worker: str, carrier: Carrier) -> None:
    """Tell the store of this worker: where it runs, and with which engine."""
    workers.announce(
        store,
        worker,
        host=socket.gethostname(),
        pid=os.getpid(),
        carrier=carrier,
        engine_version=ENGINE_VERSION,
    )


def sweep(store: Store, settings: Settings, worker: str) -> None:
    """Put right what lost workers left, and tell that this one is still there."""
    workers.touch(store, worker)
    jobs.sweep(store, settings.max_attempts)


def drain(
    store: Store,
    settings: Settings,
    plan: PlanFunction,
    worker: str,
    stopping: Flag,
    *,
    most_jobs: int,
    longest_s: float = math.inf,
) -> int:
    """Run jobs one after the other until none waits, and say how many were run.

    Parameters
    ----------
    store : Store
    settings : Settings
    plan : callable
        The planning itself: request and progress callback in, planned design out.
    worker : str
        Name of this worker, for the record.
    stopping : Flag
        Set when this process was asked to stop: the job under way is given back.
    most_jobs, longest_s
        No job is begun after so many, or after so long.
    """
    ran, until_s = 0, time.monotonic() + longest_s
    # A look first, which does not hold up writers; where one job was another is likely.
    if not jobs.any_queued(store):
        return 0
    while ran < most_jobs and time.monotonic() < until_s and not stopping.is_set():
        if run_next(store, settings, plan, worker, stopping) is None:
            break
        ran += 1
    return ran


def run_next(
    store: Store, settings: Settings, plan: PlanFunction, worker: str, stopping: Flag
) -> Outcome | None:
    """Claim the next job and run it to its end; None if none waits.

    Parameters are those of `drain`.

    Raises
    ------
    StoreUnavailable
        If the store stayed away before a job was claimed.
    """
    job = jobs.claim(store, worker, settings.lease_s, ENGINE_VERSION)
    if job is None:
        return None
    with bound(design=job.design_id, batch=job.batch_id, worker=worker, attempt=job.attempt):
        return _run_watched(store, settings, job, plan, stopping)


def _run_watched(
    store: Store, settings: Settings, job: ClaimedJob, plan: PlanFunction, stopping: Flag
) -> Outcome:
    _log.info("design %s: attempt %d begins", job.design_id, job.attempt)
    began_s = time.monotonic()
    heart = _Heart(store, settings, job, stopping)
    heart.start()
    try:
        outcome = _run(store, job, plan, heart, stopping)
    except StoreUnavailable:
        # The lease runs out and the job is planned again: late, but not lost.
        _log.exception("design %s: its end could not be stored", job.design_id)
        outcome = Outcome.LOST
    finally:
        heart.stop()
    ran_s = round(time.monotonic() - began_s, 3)
    _log.info("design %s: %s", job.design_id, outcome.value, extra={"run_s": ran_s})
    return outcome


def _run(
    store: Store, job: ClaimedJob, plan: PlanFunction, heart: _Heart, stopping: Flag
) -> Outcome:
    try:
        planned = plan(job.request, heart.tell)
    except _StopPlanning:
        heart.stop()
        return heart.settle()
    except Exception as error:  # noqa: BLE001  # whatever broke, the job must end with a reason and not loop
        heart.stop()
        return _failed(store, job, _reason(job, error))
    heart.stop()
    try:
        return Outcome.DONE if _hand_in(store, job, planned, stopping) else Outcome.LOST
    except StoreUnavailable:
        raise
    except Exception as error:  # noqa: BLE001  # as above: tried again it would break again
        _log.exception("design %s: the result cannot be stored", job.design_id)
        kind = type(error).__name__
        return _failed(
            store, job, f"The result could not be stored ({kind}). This is our fault, not yours."
        )


def _hand_in(store: Store, job: ClaimedJob, planned: PlannedDesign, stopping: Flag) -> bool:
    """Store a result, which cost more than waiting for a store that is away."""
    until_s = time.monotonic() + _OFFER_S
    while True:
        try:
            return jobs.finish(store, job, planned)
        except StoreUnavailable:
            if stopping.is_set() or time.monotonic() > until_s:
                raise
            _log.warning("design %s: the store is away, keeping the result", job.design_id)


def _reason(job: ClaimedJob, error: Exception) -> str:
    """Why a planning failed, as a planner may read it; the log gets the rest."""
    if isinstance(error, EngineError):
        _log.info("design %s: refused by the engine: %s", job.design_id, error)
        return f"The request lies outside what can be planned: {_first_line(error)}."
    if isinstance(error, SpanwrightError):
        return error.detail
    _log.error("design %s: planning broke down", job.design_id, exc_info=error)
    kind = type(error).__name__
    return f"Planning broke down ({kind}). This is our fault; the log tells more."


def _first_line(error: Exception) -> str:
    return str(error).partition("\n")[0].rstrip(". ")


def _failed(store: Store, job: ClaimedJob, reason: str) -> Outcome:
    return Outcome.FAILED if jobs.fail(store, job, reason) else Outcome.LOST


class _Heart:
    """Renews the lease of one job from a thread of its own, and learns whether to go on.

    Planning is asked to stop at its next word of progress; if none comes within the grace,
    the job is settled from here and the process ends, for a thread cannot be stopped.
    """

    def __init__(self, store: Store, settings: Settings, job: ClaimedJob, stopping: Flag) -> None:
        self._store, self._settings, self._job = store, settings, job
        self._stopping = stopping
        self._progress = Progress(fraction=0.0, step="taken up by a worker")
        self._verdict: Outcome | None = None
        self._ended = threading.Event()
        self._overdue_at = time.monotonic() + settings.job_deadline_s
        # In a copy of the context, so that what it logs names the job too.
        beat = partial(copy_context().run, self._beat)
        self._thread = threading.Thread(target=beat, name="heartbeat", daemon=True)

    def start(self) -> None:
        """Begin to beat."""
        self._thread.start()

    def stop(self) -> None:
        """End the beat; the job is left as it is."""
        self._ended.set()
        if self._thread.is_alive():
            self._thread.join()

    def tell(self, fraction: float, step: str) -> None:
        """Take a word of progress from planning; ends planning where it must not go on."""
        self._progress = Progress(fraction=min(1.0, max(0.0, fraction)), step=step[:200])
        if self._verdict is not None or self._stopping.is_set():
            raise _StopPlanning

    def settle(self) -> Outcome:
        """Store how a job ended that was stopped, and say it."""
        verdict = self._verdict or Outcome.RETURNED
        if verdict is Outcome.CANCELLED:
            jobs.stop_cancelled(self._store, self._job)
        elif verdict is Outcome.OVERDUE:
            jobs.fail(
                self._store,
                self._job,
                f"It ran longer than the {self._settings.job_deadline_s:.0f} s a design may "
                "take. Ask for fewer bands, conductors or a shorter span.",
            )
        elif verdict is Outcome.RETURNED:
            jobs.release(self._store, self._job)
        return verdict

    def _beat(self) -> None:
        while self._verdict is None and not self._stopping.is_set():
            if self._ended.wait(self._settings.heartbeat_s):
                return
            self._verdict = self._learn()
        if not self._ended.wait(self._settings.cancel_grace_s):
            self._end_process()

    def _learn(self) -> Outcome | None:
        if time.monotonic() > self._overdue_at:
            return Outcome.OVERDUE
        try:
            beat = jobs.heartbeat(self._store, self._job, self._progress, self._settings.lease_s)
        except StoreUnavailable:
            # Away for long: go on, and find out at the end whether the job is still ours.
            _log.warning("design %s: no heartbeat, the store is away", self._job.design_id)
            return None
        except Exception:  # noqa: BLE001  # a heart that stopped in silence would leave the planning unwatched
            _log.exception("design %s: no heartbeat", self._job.design_id)
            return None
        return {Beat.CANCELLED: Outcome.CANCELLED, Beat.LOST: Outcome.LOST}.get(beat)

    def _end_process(self) -> None:
        _log.error("design %s: planning would not stop, ending", self._job.design_id)
        try:
            self.settle()
        except Exception:  # noqa: BLE001  # whatever broke, the process must end
            _log.exception("design %s: left to its lease", self._job.design_id)
        finally:
            os._exit(EXIT_WOULD_NOT_STOP)
