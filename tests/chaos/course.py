"""One run: work that keeps coming, faults at random in its midst, and a report of both."""

from __future__ import annotations

import random
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import ExitStack, closing, contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Final

from service.doorbell import Doorbell
from service.settings import Settings
from service.store import jobs
from service.store.session import Store, open_store
from tests.chaos.faults import (
    FAULTS_OF_ALL,
    FAULTS_OF_SERVERS,
    Fault,
    Scene,
    Struck,
)
from tests.chaos.record import VARIABLE, Record, Step
from tests.chaos.submitting import Submitter
from tests.chaos.verdict import Verdict, judge
from tests.chaos.workers import Form, Workers
from tests.service.servers import (
    PostgresServer,
    RedisServer,
    fresh_database,
    private_postgres,
    private_redis,
)

#: After a fault the queue moves again within a lease and so long.
MARGIN_S: Final = 5.0
#: Faults begin after this part of the jobs and end before that, so that work is left for each.
_FIRST, _LAST = 0.05, 0.8
#: A queue that has not moved for so long will not move any more.
_STANDSTILL_S: Final = 60.0
_LOOK_S: Final = 0.02


@dataclass(frozen=True, slots=True)
class Course:
    """What is to be run: so many jobs at least and so many faults of each kind, and the leases."""

    form: Form
    jobs: int
    seed: int
    faults_of_each: int
    lease_s: float = 5.0
    sweep_s: float = 1.0
    #: Longer than a worker drains for one ring, and than a store is patient.
    longest_outage_s: float = 35.0
    most_waiting: int = 60
    #: What a job takes of a core, in the mean.
    job_s: float = 0.2
    workers: int = 3
    processes: int = 2


@dataclass(frozen=True, slots=True)
class Told:
    """A fault and what followed: seconds to the next stored result, and until its jobs were free.

    ``freed_s`` is of the jobs whose workers could do nothing for them any more, if there were any.
    """

    what: str
    at_job: int
    stored_s: float
    freed_s: float | None


@dataclass(frozen=True, slots=True)
class Report:
    """What came of a run."""

    course: Course
    took_s: float
    told: tuple[Told, ...]
    store_away: int
    verdict: Verdict

    @property
    def violations(self) -> tuple[str, ...]:
        """Every promise that was broken: of the verdict, and of moving again in time."""
        bound_s = self.course.lease_s + MARGIN_S
        late = [
            f"{each.what}: moved again after {longest_s:.1f} s, and not within {bound_s:.1f} s"
            for each in self.told
            if (longest_s := max(each.stored_s, each.freed_s or 0.0)) > bound_s
        ]
        return (*late, *self.verdict.violations)


def run(course: Course, folder: Path) -> Report:
    """Run it, on servers of its own, and judge what came of it.

    Raises
    ------
    ServerMissing
        If the programs of a server are missing.
    """
    with _servers(course, folder) as (settings, postgres, redis):
        record = Record(folder / "record")
        workers = Workers(
            course.form,
            settings,
            course.workers,
            folder / "workers.log",
            {VARIABLE: str(folder / "record")},
        )
        with ExitStack() as stack:
            store = stack.enter_context(closing(open_store(settings)))
            doorbell = stack.enter_context(closing(Doorbell(settings)))
            submitter = Submitter(
                store,
                doorbell,
                record,
                course.jobs,
                course.most_waiting,
                course.seed,
                course.job_s,
            )
            with workers:
                started_s = time.monotonic()
                submitter.start()
                chance = random.Random(course.seed)  # noqa: S311  # no secret
                scene = Scene(
                    workers,
                    store,
                    record,
                    chance,
                    course.longest_outage_s,
                    submitter.server_away,
                    postgres,
                    redis,
                )
                try:
                    told = tuple(_strike(scene, course))
                finally:
                    submitter.faults_over.set()
                _await_the_end(submitter, record, store)
                took_s = time.monotonic() - started_s
            # After the workers have ended, so that nothing comes later still.
            verdict = judge(store, record, submitter.accepted, submitter.designs, submitter.batches)
    return Report(course, took_s, told, submitter.refusals, verdict)


@contextmanager
def _servers(
    course: Course, folder: Path
) -> Iterator[tuple[Settings, PostgresServer | None, RedisServer | None]]:
    common = {
        "workers": course.processes,
        "lease_s": course.lease_s,
        "sweep_s": course.sweep_s,
        "progress_s": 0.5,
        # Whoever is frozen again and again must not be set aside for it.
        "max_attempts": 20,
        # A frozen worker that wakes has this long to come to its end and hand in.
        "cancel_grace_s": 10.0,
    }
    if course.form == "embedded":
        file = folder / "spanwright.db"
        plain = common | {"database_url": f"sqlite:///{file}", "redis_url": None}
        yield Settings.model_validate(plain), None, None
        return
    with private_postgres() as postgres, private_redis() as redis, fresh_database(postgres) as url:
        yield (
            Settings.model_validate(common | {"database_url": url, "redis_url": redis.url}),
            postgres,
            redis,
        )


def _strike(scene: Scene, course: Course) -> Iterator[Told]:
    """Do every fault at its time, and tell what followed."""
    for at_job, fault in _schedule(scene.chance, course):
        _await_stored(scene.record, at_job)
        yield _follow(scene.record, at_job, fault(scene))


def _schedule(chance: random.Random, course: Course) -> list[tuple[int, Fault]]:
    """Faults in an order by chance, each after so many jobs."""
    kinds: Sequence[Fault] = FAULTS_OF_ALL
    if course.form == "celery":
        kinds = FAULTS_OF_ALL + FAULTS_OF_SERVERS
    faults = list(kinds) * course.faults_of_each
    chance.shuffle(faults)
    step = (_LAST - _FIRST) / len(faults)
    parts = [_FIRST + step * (index + chance.random()) for index in range(len(faults))]
    return [(int(part * course.jobs), fault) for part, fault in zip(parts, faults, strict=True)]


def _follow(record: Record, at_job: int, struck: Struck) -> Told:
    stored_s = _next_stored(record, struck.over_at_s).at_s - struck.over_at_s
    freed_s = None if struck.freed_at_s is None else struck.freed_at_s - struck.over_at_s
    return Told(struck.what, at_job, stored_s, freed_s)


def _next_stored(record: Record, after_s: float) -> Step:
    until_s = time.monotonic() + _STANDSTILL_S
    while time.monotonic() < until_s:
        for step in record.look():
            if step.what == "stored" and step.at_s > after_s:
                return step
        time.sleep(_LOOK_S)
    raise TimeoutError(f"nothing was stored for {_STANDSTILL_S:.0f} s after a fault")


def _await_stored(record: Record, number: int) -> None:
    """Wait until so many results were stored."""
    _keep_waiting(record, lambda: record.stored() >= number)


def _await_the_end(submitter: Submitter, record: Record, store: Store) -> None:
    """Wait until all was submitted and nothing waits or runs any more."""
    _keep_waiting(record, lambda: not submitter.is_alive())
    if submitter.broke is not None:
        raise RuntimeError("the submitter broke down") from submitter.broke
    # Not by the record: who is killed between the commit and the line leaves none.
    _keep_waiting(record, lambda: not jobs.depth(store).keys() & {"queued", "running"})


def _keep_waiting(record: Record, over: Callable[[], bool]) -> None:
    moved_s, before = time.monotonic(), -1
    while not over():
        if (stored := record.stored()) > before:
            moved_s, before = time.monotonic(), stored
        if time.monotonic() > moved_s + _STANDSTILL_S:
            raise TimeoutError(f"the queue has stood still for {_STANDSTILL_S:.0f} s")
        time.sleep(_LOOK_S)
