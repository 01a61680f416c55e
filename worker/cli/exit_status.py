"""What a command tells the shell."""

from __future__ import annotations

from enum import IntEnum


class ExitStatus(IntEnum):
    """Exit statuses of every command; 1 is left to unexpected faults."""

    DONE = 0
    REFUSED = 2
    FAILED = 3
    UNREACHABLE = 4
    TOO_LONG = 5
    STOPPED = 6
