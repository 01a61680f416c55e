"""The embedded carrier with the planning of the benchmark, as a process of its own."""

from __future__ import annotations

from tests.benchmarks.job_queue.planning import work
from worker.dispatcher import main

if __name__ == "__main__":
    main(work)
