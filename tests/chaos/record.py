"""What every execution of a job does, step by step, in a file that is only ever added to.

Workers under test write it: claiming and finishing are wrapped, and the planning tells when it
is through. A line goes out in one write before the next thing happens, so that whoever is killed
has told all but the last.
"""

from __future__ import annotations

import json
import os
import time
from dataclasses import asdict, dataclass
from functools import wraps
from pathlib import Path
from typing import Any, Final, Literal

from service.contracts.candidate import PlannedDesign
from service.store import jobs
from service.store.jobs import ClaimedJob
from service.store.session import Store

#: Environment variable with the name of the file.
VARIABLE: Final = "SPANWRIGHT_CHAOS_RECORD"

What = Literal["claimed", "planned", "stored", "refused"]


@dataclass(frozen=True, slots=True)
class Step:
    """One step of one execution; the fence tells executions of a design apart.

    ``at_s`` is read from the machine's monotonic clock, which all its processes share.
    """

    what: What
    design_id: str
    fence: int
    pid: int
    at_s: float


class Record:
    """Reads the file as it grows."""

    def __init__(self, file: Path) -> None:
        self._file, self._read_bytes = file, 0
        self._steps: list[Step] = []
        self._stored: set[str] = set()
        file.touch()

    def look(self) -> list[Step]:
        """All steps so far."""
        with self._file.open("rb") as file:
            file.seek(self._read_bytes)
            whole, _, _ = file.read().rpartition(b"\n")
        if whole:
            self._read_bytes += len(whole) + 1
            fresh = [Step(**json.loads(line)) for line in whole.splitlines()]
            self._steps += fresh
            self._stored.update(step.design_id for step in fresh if step.what == "stored")
        return self._steps

    def under_way(self) -> dict[int, Step]:
        """Claims that were not heard of again, by the process that claimed last."""
        last = {step.pid: step for step in self.look()}
        return {pid: step for pid, step in last.items() if step.what == "claimed"}

    def stored(self) -> int:
        """How many designs have a result, as the workers tell it."""
        self.look()
        return self.told_stored()

    def told_stored(self) -> int:
        """The same as far as was read, for another thread than the one that reads."""
        return len(self._stored)


class _Execution:
    """What this process is at: it plans one job at a time."""

    def __init__(self) -> None:
        self.job: ClaimedJob | None = None

    def tell(self, what: What) -> None:
        if self.job is None:
            raise RuntimeError("a step was told before any job was claimed")
        step = Step(what, self.job.design_id, self.job.fence, os.getpid(), time.monotonic())
        line = json.dumps(asdict(step)).encode() + b"\n"
        file = os.open(os.environ[VARIABLE], os.O_WRONLY | os.O_APPEND)
        try:
            os.write(file, line)
        finally:
            os.close(file)


execution: Final = _Execution()


def note() -> str:
    """How a result tells which execution it came from."""
    job = execution.job
    return "" if job is None else note_of(job.design_id, job.fence)


def note_of(design_id: str, fence: int) -> str:
    """The note of the execution that held this fence."""
    return f"execution {design_id} {fence}"


def install() -> None:
    """Have this process tell what it claims and what comes of what it hands in."""
    claim, finish = jobs.claim, jobs.finish

    @wraps(claim)
    def telling_claim(*args: Any, **kwargs: Any) -> ClaimedJob | None:  # noqa: ANN401  # passed on as they are
        job = claim(*args, **kwargs)
        if job is not None:
            execution.job = job
            execution.tell("claimed")
        return job

    @wraps(finish)
    def telling_finish(store: Store, job: ClaimedJob, planned: PlannedDesign) -> bool:
        stored = finish(store, job, planned)
        execution.tell("stored" if stored else "refused")
        return stored

    jobs.claim, jobs.finish = telling_claim, telling_finish
