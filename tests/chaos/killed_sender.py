"""A sender that is killed at random and sends again: each of its designs exists once."""

from __future__ import annotations

import os
import random
import subprocess
import sys
import time
from collections import Counter
from dataclasses import dataclass
from pathlib import Path
from typing import Final

from sqlalchemy import select
from sqlalchemy.orm import Session

from service.settings import Settings
from service.store.session import Store
from service.store.tables import DesignRow, JobRow
from tests.chaos.sender import key_of
from tests.chaos.workers import CHECKOUT
from tests.service.databases import environment
from tests.service.servers import ended_with_us

#: A sender that was killed sends so many again that it had been told were accepted.
_AGAIN: Final = 20
_LONGEST_PAUSE_S: Final = 0.01
_LOOK_S: Final = 0.002
_PATIENCE_S: Final = 300.0


@dataclass(frozen=True, slots=True)
class Sent:
    """What came of it: how often something was accepted, and every promise that was broken."""

    acceptances: int
    stored: int
    violations: tuple[str, ...]


def send(
    store: Store, settings: Settings, number: int, kills: int, seed: int, folder: Path
) -> Sent:
    """Send so many requests through a sender that is killed so often, then all once more."""
    file = folder / "accepted"
    file.touch()
    chance = random.Random(seed)  # noqa: S311  # no secret
    for after in sorted(chance.sample(range(number), kills)):
        sender = _started(settings, number, max(0, _told_up_to(file) - _AGAIN), file)
        _await(sender, file, after)
        # A moment of no account, so that it is hit anywhere between two acceptances.
        time.sleep(chance.uniform(0.0, _LONGEST_PAUSE_S))
        sender.kill()
        sender.wait()
    last = _started(settings, number, 0, file)
    if last.wait(_PATIENCE_S) != 0:
        raise RuntimeError("the last sender failed")
    return _judge(store, number, file)


def _started(settings: Settings, number: int, first: int, file: Path) -> subprocess.Popen[bytes]:
    command = [sys.executable, "-m", "tests.chaos.sender", str(number), str(first), str(file)]
    return subprocess.Popen(
        ended_with_us(command), cwd=CHECKOUT, env=os.environ | environment(settings)
    )


def _await(sender: subprocess.Popen[bytes], file: Path, number: int) -> None:
    until_s = time.monotonic() + _PATIENCE_S
    while _told_up_to(file) < number and sender.poll() is None:
        if time.monotonic() > until_s:
            raise TimeoutError("the sender stands still")
        time.sleep(_LOOK_S)


def _told_up_to(file: Path) -> int:
    """The number of the request accepted last."""
    with file.open("rb") as lines:
        lines.seek(max(0, file.stat().st_size - 200))
        whole = lines.read().rpartition(b"\n")[0].splitlines()
    return int(whole[-1].split()[0]) if whole else 0


def _judge(store: Store, number: int, file: Path) -> Sent:
    told = [line.split() for line in file.read_text().splitlines()]
    ids: dict[str, set[str]] = {}
    for index, design_id in told:
        ids.setdefault(key_of(int(index)), set()).add(design_id)
    stored = store.read(_stored)
    times = Counter(key for key, _, _ in stored)
    violations = [
        *(f"{key}: accepted as {len(them)} designs" for key, them in ids.items() if len(them) > 1),
        *(f"{key}: stored {n} times" for key, n in times.items() if n > 1),
        *(f"{key}: has no job" for key, _, job in stored if job is None),
        *(
            f"{key_of(index)}: lost"
            for index in range(number)
            if key_of(index) not in times or key_of(index) not in ids
        ),
        *(
            f"{key}: stored as another design than was accepted"
            for key, design_id, _ in stored
            if key is not None and ids.get(key) != {design_id}
        ),
    ]
    return Sent(len(told), len(stored), tuple(violations))


def _stored(session: Session) -> list[tuple[str | None, str, str | None]]:
    query = select(DesignRow.idempotency_key, DesignRow.id, JobRow.design_id).outerjoin(
        JobRow, JobRow.design_id == DesignRow.id
    )
    return [(row[0], row[1], row[2]) for row in session.execute(query)]
