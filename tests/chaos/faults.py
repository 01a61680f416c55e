"""The faults: what is done to workers and servers, and what must be seen afterwards."""

from __future__ import annotations

import os
import random
import signal
import sqlite3
import threading
import time
from collections.abc import Callable
from contextlib import closing
from dataclasses import dataclass
from typing import Final

import psycopg
from sqlalchemy import make_url, select

from service.store.session import Store
from service.store.tables import JobRow
from tests.chaos.record import Record, Step
from tests.chaos.workers import Workers, runs
from tests.service.servers import PostgresServer, RedisServer
from tests.service.waiting import until

#: Whatever is awaited here comes much sooner or never.
_PATIENCE_S: Final = 60.0


@dataclass(frozen=True, slots=True)
class Struck:
    """A fault that was done.

    Both moments are by the clock of the record. From the first work must go on; by the second
    the jobs were free again whose workers could do nothing for them any more, if there were any.
    """

    what: str
    over_at_s: float
    freed_at_s: float | None = None


@dataclass(frozen=True, slots=True)
class Scene:
    """What faults are done to."""

    workers: Workers
    store: Store
    record: Record
    chance: random.Random
    longest_outage_s: float
    server_away: threading.Event
    postgres: PostgresServer | None
    redis: RedisServer | None

    def stay_away(self) -> None:
        """Let a server that was stopped be away for a while, long or short by chance."""
        self.server_away.set()
        time.sleep(self.longest_outage_s * self.chance.uniform(0.3, 1.0))
        self.server_away.clear()

    def any_worker(self) -> int:
        """Index of a worker, by chance."""
        return self.chance.randrange(self.workers.number)

    def busy_below(self, index: int) -> dict[int, Step]:
        """Processes of a worker that are in the middle of a job, with what they claimed."""
        below = set(self.workers.below(index))
        return {pid: step for pid, step in self.record.under_way().items() if pid in below}

    def freed(self, claims: tuple[Step, ...]) -> float:
        """Wait until jobs are with the claims no longer that a fault made worthless."""
        fences = {claim.design_id: claim.fence for claim in claims}
        query = select(JobRow.design_id, JobRow.fence, JobRow.state).where(
            JobRow.design_id.in_(fences)
        )

        def all_free() -> bool:
            rows = self.store.read(lambda session: session.execute(query).all())
            return all(row[1] > fences[row[0]] or row[2] == "done" for row in rows)

        until(all_free, _PATIENCE_S)
        return time.monotonic()


Fault = Callable[[Scene], Struck]


def kill_a_process(scene: Scene) -> Struck:
    """Kill one process that is in the middle of a job."""
    pid, claim = _busy_process(scene)
    os.kill(pid, signal.SIGKILL)
    over_at_s = time.monotonic()
    return Struck("process killed", over_at_s, scene.freed((claim,)))


def kill_a_worker(scene: Scene) -> Struck:
    """Kill a whole worker in the middle of jobs, and start another."""
    index, claims = _busy_worker(scene)
    scene.workers.kill(index)
    over_at_s = time.monotonic()
    scene.workers.start(index)
    return Struck("worker killed", over_at_s, scene.freed(claims))


def kill_a_main_process(scene: Scene) -> Struck:
    """Kill the main process of a worker only; those below it must not live on for ever."""
    index = scene.any_worker()
    below = scene.workers.below(index)
    scene.workers.kill_main(index)
    over_at_s = time.monotonic()
    until(lambda: not any(runs(pid) for pid in below), _PATIENCE_S)
    scene.workers.start(index)
    return Struck("main process killed", over_at_s)


def freeze_a_worker(scene: Scene) -> Struck:
    """Freeze a whole worker in the middle of jobs until others are at them, then wake it."""
    index, claims = _frozen_worker(scene)
    frozen_at_s = time.monotonic()
    try:
        freed_at_s = scene.freed(claims)
        # What comes late while another is at the job only its fence can tell from the other's.
        until(lambda: all(_claimed_again(scene.record, claim) for claim in claims), _PATIENCE_S)
    finally:
        scene.workers.send(index, signal.SIGCONT)
    # It hands in what it has, under a fence that is past.
    until(lambda: all(_came_late(scene.record, claim) for claim in claims), _PATIENCE_S)
    return Struck("worker frozen", frozen_at_s, freed_at_s)


def lose_the_broker(scene: Scene) -> Struck:
    """Kill Redis; it comes back empty."""
    if scene.redis is None:
        raise ValueError("there is no broker to be lost")
    scene.redis.kill()
    scene.stay_away()
    scene.redis.start()
    return Struck("broker lost", time.monotonic())


def crash_the_database(scene: Scene) -> Struck:
    """Stop PostgreSQL at once, in the middle of whatever it does; it recovers."""
    if scene.postgres is None:
        raise ValueError("there is no database server to crash")
    scene.postgres.stop(signal.SIGQUIT)
    scene.stay_away()
    scene.postgres.start()
    return Struck("database crashed", time.monotonic())


FAULTS_OF_ALL: Final = (kill_a_process, kill_a_worker, kill_a_main_process, freeze_a_worker)
FAULTS_OF_SERVERS: Final = (lose_the_broker, crash_the_database)


def _claimed_again(record: Record, claim: Step) -> bool:
    """Whether somebody has claimed a job after a claim of it."""
    return any(
        step.design_id == claim.design_id and step.fence > claim.fence for step in record.look()
    )


def _came_late(record: Record, claim: Step) -> bool:
    """Whether the execution of a claim has handed in its result, whatever came of it."""
    late = claim.design_id, claim.fence
    return any(
        step.what in ("stored", "refused") and (step.design_id, step.fence) == late
        for step in record.look()
    )


def _busy_process(scene: Scene) -> tuple[int, Step]:
    def found() -> tuple[int, Step] | None:
        busy = scene.busy_below(scene.any_worker())
        return scene.chance.choice(sorted(busy.items(), key=lambda each: each[0])) if busy else None

    return until(found, _PATIENCE_S)


def _busy_worker(scene: Scene) -> tuple[int, tuple[Step, ...]]:
    def found() -> tuple[int, tuple[Step, ...]] | None:
        index = scene.any_worker()
        busy = scene.busy_below(index)
        return (index, tuple(busy.values())) if busy else None

    return until(found, _PATIENCE_S)


def _frozen_worker(scene: Scene) -> tuple[int, tuple[Step, ...]]:
    """Freeze a worker with all that is below it, in the middle of jobs and of no transaction.

    One that is frozen in the middle of a transaction keeps its locks: on SQLite the one of
    all writers, until its supervisor takes it for dead, and on PostgreSQL that of its job,
    until the server ends the idle transaction. Both take longer than the leases here.
    """

    def found() -> tuple[int, tuple[Step, ...]] | None:
        index, _ = _busy_worker(scene)
        scene.workers.send(index, signal.SIGSTOP)
        claims = tuple(scene.busy_below(index).values())
        if claims and not _locks_something(scene, claims):
            return index, claims
        scene.workers.send(index, signal.SIGCONT)
        return None

    return until(found, _PATIENCE_S)


def _locks_something(scene: Scene, claims: tuple[Step, ...]) -> bool:
    url = make_url(scene.workers.settings.database_url)
    if url.drivername.startswith("sqlite"):
        with closing(sqlite3.connect(url.database or "", timeout=0.3, isolation_level=None)) as own:
            try:
                own.execute("BEGIN IMMEDIATE")
            except sqlite3.OperationalError:
                return True
            own.execute("ROLLBACK")
            return False
    plain = url.set(drivername="postgresql").render_as_string(hide_password=False)
    with psycopg.connect(plain) as connection:
        # Others may hold one of these for a moment only.
        connection.execute("SET lock_timeout = '300ms'")
        try:
            connection.execute(
                "SELECT 1 FROM jobs WHERE design_id = ANY(%s) FOR UPDATE",
                ([claim.design_id for claim in claims],),
            )
        except psycopg.errors.LockNotAvailable:
            return True
    return False
