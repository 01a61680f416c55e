"""Waiting for what another process or thread does."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import TypeVar

from service.contracts.progress import Design, State
from service.store import designs
from service.store.session import Store

T = TypeVar("T")


def until(found: Callable[[], T | None], within_s: float = 10.0) -> T:
    """What `found` gives as soon as it gives something that is true."""
    deadline = time.monotonic() + within_s
    while True:
        result = found()
        if result:
            return result
        assert time.monotonic() < deadline, f"waited {within_s} s in vain"
        time.sleep(0.02)


def in_state(store: Store, design_id: str, state: State, within_s: float = 10.0) -> Design:
    """The design once it is in that state."""

    def found() -> Design | None:
        design = designs.get(store, design_id)
        return design if design.state == state else None

    return until(found, within_s)


def process_at(store: Store, design_id: str, within_s: float = 10.0, other_than: int = 0) -> int:
    """Id of the process that is planning the design, as the invented plannings tell it."""

    def found() -> int | None:
        step = designs.get(store, design_id).progress.step
        word, _, process = step.partition(" ")
        return int(process) if word == "process" and int(process) != other_than else None

    return until(found, within_s)
