"""An invented planning that keeps a core busy for as long as the request's name says.

``work 0.2 #17`` takes 0.2 s of a core. It gives a word of progress at its start only, so that a
worker that was frozen in the middle comes to its end and hands in what no one wants any more.
"""

from __future__ import annotations

import hashlib
import time
from functools import cache

from service.contracts.candidate import PlannedDesign
from service.contracts.request import DesignRequest
from tests.chaos import record
from tests.service.samples import sample_planned
from worker.running import ProgressCallback

# At import, for a worker process finds the planning by its name and imports nothing else of ours.
record.install()


def work(request: DesignRequest, progress: ProgressCallback) -> PlannedDesign:
    """Keep a core busy, then hand in a sample that tells which execution it is of."""
    progress(0.1, "at work")
    _keep_busy(float(request.name.split()[1]))
    planned = _sample(request.model_copy(update={"name": "any"}))
    record.execution.tell("planned")
    result = planned.result.model_copy(update={"notes": (record.note(),)})
    return planned.model_copy(update={"result": result})


def _keep_busy(core_s: float) -> None:
    until_s, digest = time.thread_time() + core_s, b"chaos"
    while time.thread_time() < until_s:
        digest = hashlib.sha256(digest * 50).digest()


@cache
def _sample(request: DesignRequest) -> PlannedDesign:
    return sample_planned(request, 1)
