"""Invented plannings that are told by the request's name what to do, for tests of the queue.

They are found by name from worker processes, as the real planning is. Each tells its process id
as its step and as the note of its result, so that a test can find the process that is at it.
"""

from __future__ import annotations

import os
import signal
import time

from service.contracts.candidate import PlannedDesign
from service.contracts.request import DesignRequest
from tests.service.samples import sample_planned
from worker.engine.errors import OutOfRange
from worker.running import ProgressCallback

_STEP_S = 0.02


def as_named(request: DesignRequest, progress: ProgressCallback) -> PlannedDesign:
    """Do what the request is called: ``slow 2``, ``deaf 2``, ``kill``, ``break``, ``refuse``."""
    what, _, seconds = request.name.partition(" ")
    progress(0.1, f"process {os.getpid()}")
    match what:
        case "slow":
            _wait(float(seconds), progress)
        case "deaf":
            time.sleep(float(seconds))
        case "kill":
            os.kill(os.getpid(), signal.SIGKILL)
        case "break":
            raise KeyError("a bug\nwith a second line")
        case "refuse":
            raise OutOfRange("radius_m", 1.0, 1e-5, 0.1, "m")
    planned = sample_planned(request, 1)
    result = planned.result.model_copy(update={"notes": (f"process {os.getpid()}",)})
    return planned.model_copy(update={"result": result})


def _wait(seconds: float, progress: ProgressCallback) -> None:
    until = time.monotonic() + seconds
    while time.monotonic() < until:
        progress(0.5, f"process {os.getpid()}")
        time.sleep(_STEP_S)
