"""A process that submits many requests under keys, to be killed at any moment and run again.

    python -m tests.chaos.sender NUMBER FIRST FILE

What was accepted is told in FILE, a line each: number of the request, identifier of the design.
"""

from __future__ import annotations

import os
import sys
from contextlib import closing

from service.doorbell import Doorbell
from service.intake import submit
from service.settings import Settings
from service.store.session import open_store
from tests.service.samples import sample_request


def key_of(index: int) -> str:
    """The idempotency key of a request by its number."""
    return f"sent {index}"


def main(number: int, first: int, file: str) -> None:
    """Submit the requests from the first on, each accepted before the next is sent."""
    settings = Settings()
    told = os.open(file, os.O_WRONLY | os.O_APPEND | os.O_CREAT)
    with closing(open_store(settings)) as store, closing(Doorbell(settings)) as doorbell:
        for index in range(first, number):
            key = key_of(index)
            accepted = submit(store, doorbell, sample_request(name=key), key)
            os.write(told, f"{index} {accepted.design_id}\n".encode())


if __name__ == "__main__":
    main(int(sys.argv[1]), int(sys.argv[2]), sys.argv[3])
