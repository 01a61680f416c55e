"""The queue as those see it who keep it moving: what waits, what runs, and who works."""

from __future__ import annotations

from datetime import datetime

from service.contracts.progress import Priority, Progress
from service.contracts.quantities import Contract


class QueueShare(Contract):
    """What one owner has in the queue at one priority.

    ``oldest_wait_s`` is how long the one that has waited longest has waited, in s.
    """

    owner: str
    priority: Priority
    waiting: int
    running: int
    oldest_wait_s: float | None


class RunningDesign(Contract):
    """A design that is being planned; ``running_s`` counts from the first attempt, in s."""

    id: str
    name: str
    owner: str
    priority: Priority
    batch_id: str | None
    batch_line: int | None
    worker: str | None
    attempts: int
    running_s: float
    progress: Progress


class QueueWorker(Contract):
    """A process that claims jobs, and what it is at; ``seen_s`` ago it was last heard of."""

    name: str
    host: str
    pid: int
    carrier: str
    engine_version: str
    started_at: datetime
    seen_s: float
    works_on: tuple[RunningDesign, ...]


class QueueView(Contract):
    """The queue at one moment, in the order in which priorities come.

    ``left`` are designs whose worker is not there: their lease runs out and they wait again.
    """

    at: datetime
    waiting: int
    running: int
    oldest_wait_s: float | None
    shares: tuple[QueueShare, ...]
    workers: tuple[QueueWorker, ...]
    left: tuple[RunningDesign, ...]
