"""A planning that always takes the same amount of work, and hands in one real planned design."""

from __future__ import annotations

import hashlib
import os
import sys
import time
from functools import cache
from pathlib import Path
from typing import Final

from service.contracts.candidate import PlannedDesign
from service.contracts.request import DesignRequest
from worker.running import ProgressCallback

#: Environment variables: rounds of work a job, and the file with the planned design.
ROUNDS: Final = "SPANWRIGHT_BENCHMARK_ROUNDS"
PLANNED: Final = "SPANWRIGHT_BENCHMARK_PLANNED"


def work(_request: DesignRequest, progress: ProgressCallback) -> PlannedDesign:
    """Keep a core busy for so many rounds; the design is the same each time."""
    progress(0.1, "at work")
    keep_busy(int(os.environ[ROUNDS]))
    return _planned()


def keep_busy(rounds: int) -> None:
    """An amount of work, not of time, so that whoever shares the core makes it take longer."""
    digest = b"queue"
    for _ in range(rounds):
        digest = hashlib.sha256(digest * 50).digest()


@cache
def _planned() -> PlannedDesign:
    return PlannedDesign.model_validate_json(Path(os.environ[PLANNED]).read_bytes())


def bare(number: int) -> None:
    """The same work without a queue, begun at a line from standard input; prints the seconds."""
    keep_busy(100)
    sys.stdout.write("ready\n")
    sys.stdout.flush()
    sys.stdin.readline()
    started_s = time.perf_counter()
    for _ in range(number):
        keep_busy(int(os.environ[ROUNDS]))
    sys.stdout.write(f"{time.perf_counter() - started_s}\n")


if __name__ == "__main__":
    bare(int(sys.argv[1]))
