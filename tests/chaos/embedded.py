"""The embedded carrier with the planning of the chaos test, as a process of its own."""

from __future__ import annotations

from tests.chaos.planning import work
from worker.dispatcher import main

if __name__ == "__main__":
    main(work)
