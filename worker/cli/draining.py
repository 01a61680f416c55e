"""Emptying the queue from one process that ends when nothing waits."""

from __future__ import annotations

import os
import signal
import socket
import time
import uuid
from collections import Counter
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Final

from service.contracts.candidate import PlannedDesign
from service.contracts.request import DesignRequest
from service.settings import Settings
from service.store import figures
from service.store.session import Store
from worker.dispatcher import StopFlag
from worker.planning import plan as plan_request
from worker.running import Outcome, PlanFunction, ProgressCallback, announced, run_next, sweep

#: The queue is counted for the bar no more often than this.
_COUNT_S: Final = 1.0


@dataclass(frozen=True, slots=True)
class Drained:
    """What came of draining: how many designs ended how, and whether it was told to stop."""

    outcomes: Counter[Outcome]
    stopped: bool

    @property
    def failed(self) -> int:
        """How many of the designs run here ended without a result by their own fault."""
        return self.outcomes[Outcome.FAILED] + self.outcomes[Outcome.OVERDUE]

    def in_words(self) -> str:
        """One line on how it went."""
        told = ", ".join(f"{number:,} {each.value}" for each, number in self.outcomes.items())
        end = "Stopped before the queue was empty" if self.stopped else "Nothing waits"
        return f"{end}; run here: {told or 'none'}."


def drain_here(
    store: Store,
    settings: Settings,
    show: Callable[[float, str], None],
    plan: PlanFunction = plan_request,
) -> Drained:
    """Run jobs one after the other until none waits, or a signal asks to stop.

    Parameters
    ----------
    store : Store
    settings : Settings
    show : callable
        Told the part of the queue that is behind, from 0 to 1, and what is under way.
    plan : callable
        The planning itself.

    Raises
    ------
    StoreUnavailable
        If the database stays away.
    """
    worker = f"{socket.gethostname()}-drain-{os.getpid()}-{uuid.uuid4().hex[:8]}"
    outcomes: Counter[Outcome] = Counter()
    bar = _Bar(store, show)

    def watched(request: DesignRequest, tell: ProgressCallback) -> PlannedDesign:
        def both(fraction: float, step: str) -> None:
            bar.move(outcomes.total(), fraction, request.name)
            tell(fraction, step)

        return plan(request, both)

    sweep_at = 0.0
    with _stopped_by_signals() as stopping, announced(store, worker, "drain"):
        while not stopping.is_set():
            if time.monotonic() >= sweep_at:
                sweep(store, settings, worker)
                sweep_at = time.monotonic() + settings.sweep_s
            outcome = run_next(store, settings, watched, worker, stopping)
            if outcome is None:
                break
            outcomes[outcome] += 1
        return Drained(outcomes, stopped=stopping.is_set())


class _Bar:
    """How far the queue is emptied: what ran here against that and what still waits."""

    def __init__(self, store: Store, show: Callable[[float, str], None]) -> None:
        self._store, self._show = store, show
        self._waiting, self._counted_at = 0, -_COUNT_S

    def move(self, ran: int, fraction: float, name: str) -> None:
        if time.monotonic() - self._counted_at >= _COUNT_S:
            self._waiting = figures.depth(self._store).claimable
            self._counted_at = time.monotonic()
        total = ran + 1 + self._waiting
        self._show((ran + fraction) / total, f"{ran + 1:,} of {total:,}: {name}")


@contextmanager
def _stopped_by_signals() -> Iterator[StopFlag]:
    """A flag that SIGTERM and SIGINT set while the context lasts."""
    flag = StopFlag()
    earlier = {
        number: signal.signal(number, lambda _number, _frame: flag.set())
        for number in (signal.SIGTERM, signal.SIGINT)
    }
    try:
        yield flag
    finally:
        for number, handler in earlier.items():
            signal.signal(number, handler)
