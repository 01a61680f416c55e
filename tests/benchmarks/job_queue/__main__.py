"""The queue on either database and carrier, beside bare computation; about two minutes.

Run as ``python -m tests.benchmarks.job_queue``. Each ratio has both sides measured in this one run:
the bare computation before and after the queue's, by as many processes, on the same cores. All
results are one real planned design, so that storing costs what it costs.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import closing, contextmanager
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Final

from sqlalchemy import select

from service.contracts.batch import BatchRequest, parse_batch_json
from service.contracts.request import DesignRequest
from service.doorbell import Doorbell
from service.intake import submit, submit_batch
from service.settings import Settings
from service.store import batches, jobs
from service.store.session import Store, open_store
from service.store.tables import JobRow
from tests.benchmarks.job_queue.planning import PLANNED, ROUNDS, keep_busy
from tests.chaos.workers import CHECKOUT, Form, Workers
from tests.service.servers import fresh_database, private_postgres, private_redis
from tests.service.waiting import until
from worker.cli.standing import demo_request
from worker.planning import plan

_FORMS: Final[dict[Form, str]] = {"embedded": "SQLite, embedded", "celery": "PostgreSQL, Celery"}
_PACKAGE: Final = "tests.benchmarks.job_queue"
_JOB_S: Final = 0.06
_JOBS: Final = 160
_BATCH: Final = 1000
_CROWD: Final = 5000
_URGENT: Final = 12
_PATIENCE_S: Final = 120.0


@dataclass(frozen=True, slots=True)
class Ran:
    """How jobs ran: seconds of one worker a job, and jobs a second of all workers."""

    job_s: float
    rate_per_s: float


@dataclass(frozen=True, slots=True)
class Bench:
    """One database and carrier, and what its workers must know."""

    form: Form
    settings: Settings
    folder: Path
    variables: dict[str, str]
    request: DesignRequest

    def requests(self, what: str, number: int) -> tuple[DesignRequest, ...]:
        """Requests that differ in their names, so that none answers another."""
        names = (f"{what} {index}" for index in range(number))
        return tuple(self.request.model_copy(update={"name": name}) for name in names)

    @contextmanager
    def workers(self, number: int) -> Iterator[None]:
        """So many worker processes, warm."""
        settings = self.settings.model_copy(update={"workers": number})
        log = self.folder / "log"
        with (
            Workers(self.form, settings, 1, log, self.variables, _PACKAGE),
            closing(open_store(self.settings)) as store,
            closing(Doorbell(self.settings)) as doorbell,
        ):
            warm = BatchRequest(designs=self.requests(f"warm {number} {time.time()}", 4 * number))
            submit_batch(store, doorbell, warm, None)
            until(lambda: _idle(store), _PATIENCE_S)
            yield


def main() -> None:
    """Measure and print."""
    rounds = _rounds()
    with tempfile.TemporaryDirectory(prefix="spanwright-queue-") as name:
        folder = Path(name)
        request = demo_request()
        text = plan(request, lambda _part, _step: None).model_dump_json()
        (folder / "planned.json").write_text(text)
        variables = {ROUNDS: str(rounds), PLANNED: str(folder / "planned.json")}
        print(f"a job is {rounds} rounds of work; its result has {len(text) / 1e3:.0f} kB as JSON")
        one, two = _bare(variables, 1), _bare(variables, 2)
        print(f"bare: two processes do {two.rate_per_s / one.rate_per_s:.2f} times as much as one")
        for form in _FORMS:
            with _settings(form, folder) as settings:
                _measure(Bench(form, settings, folder, variables, request))


def _measure(bench: Bench) -> None:
    print(f"\n{_FORMS[bench.form]}")
    with (
        closing(open_store(bench.settings)) as store,
        closing(Doorbell(bench.settings)) as doorbell,
    ):
        _tell_of_batches(bench, store)
        before = _bare(bench.variables, 2)
        with bench.workers(2):
            two = _run(bench, store, doorbell, "two", _JOBS)
            _tell_of_urgent(bench, store, doorbell)
        after = _bare(bench.variables, 2)
        with bench.workers(1):
            one = _run(bench, store, doorbell, "one", _JOBS // 2)
    bare_s = 0.5 * (before.job_s + after.job_s)
    print(
        f"  overhead: {1e3 * (two.job_s - bare_s):.1f} ms a job (asked 10 ms): "
        f"{1e3 * two.job_s:.1f} ms against {1e3 * bare_s:.1f} ms bare "
        f"({1e3 * before.job_s:.1f} before, {1e3 * after.job_s:.1f} after), "
        f"ratio {two.job_s / bare_s:.3f}"
    )
    print(f"  two workers do {two.rate_per_s / one.rate_per_s:.2f} times as much (asked 1.8)")


@contextmanager
def _settings(form: Form, folder: Path) -> Iterator[Settings]:
    if form == "embedded":
        yield Settings(database_url=f"sqlite:///{folder / 'spanwright.db'}", redis_url=None)
        return
    with private_postgres() as server, private_redis() as redis, fresh_database(server) as url:
        yield Settings(database_url=url, redis_url=redis.url)


# ------------------------------------------------------------------ what is measured
def _rounds() -> int:
    """Rounds of work that take a job's time where nothing else runs."""
    trial, took_s = 1000, []
    for _ in range(5):
        started_s = time.process_time()
        keep_busy(trial)
        took_s.append(time.process_time() - started_s)
    return round(trial * _JOB_S / min(took_s))


def _bare(variables: dict[str, str], processes: int) -> Ran:
    """The computation alone, by so many processes at once."""
    each = _JOBS // 2
    running = [
        subprocess.Popen(
            [sys.executable, "-m", f"{_PACKAGE}.planning", str(each)],
            cwd=CHECKOUT,
            env=os.environ | variables,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            text=True,
        )
        for _ in range(processes)
    ]
    for process in running:
        if process.stdout is None or process.stdout.readline() != "ready\n":
            raise RuntimeError("a process of bare computation did not start")
    for process in running:
        if process.stdin is not None:
            process.stdin.write("go\n")
            process.stdin.flush()
    took_s = [float(process.communicate()[0]) for process in running]
    return Ran(statistics.mean(took_s) / each, processes * each / max(took_s))


def _run(bench: Bench, store: Store, doorbell: Doorbell, what: str, number: int) -> Ran:
    """Jobs through the queue, from each worker's first claim to its last result."""
    batch = BatchRequest(name=what, designs=bench.requests(what, number))
    batch_id = submit_batch(store, doorbell, batch, None).batch_id
    until(lambda: _idle(store), _PATIENCE_S)
    query = select(JobRow.worker, JobRow.started_at, JobRow.finished_at).where(
        JobRow.batch_id == batch_id
    )
    spans: dict[str, tuple[datetime, datetime]] = {}
    for worker, started, finished in store.read(lambda session: session.execute(query).all()):
        if worker is None or started is None or finished is None:
            raise RuntimeError("a job has ended without a worker")
        first, last = spans.get(worker, (started, finished))
        spans[worker] = min(first, started), max(last, finished)
    busy_s = sum((last - first).total_seconds() for first, last in spans.values())
    whole = max(last for _, last in spans.values()) - min(first for first, _ in spans.values())
    return Ran(busy_s / number, number / whole.total_seconds())


def _tell_of_batches(bench: Bench, store: Store) -> None:
    """How long a batch takes to be read and accepted, beside single designs."""
    with closing(Doorbell(bench.settings)) as doorbell:
        took_s = []
        for turn in range(3):
            batch = BatchRequest(designs=bench.requests(f"batch {turn}", _BATCH))
            body = batch.model_dump_json().encode()
            started_s = time.perf_counter()
            parsed = parse_batch_json(body)
            read_s = time.perf_counter()
            submitted = submit_batch(store, doorbell, parsed, f"batch {turn}")
            took_s.append((read_s - started_s, time.perf_counter() - read_s))
            batches.cancel(store, submitted.batch_id)
        singles = bench.requests("single", 100)
        started_s = time.perf_counter()
        ids = [submit(store, doorbell, each, each.name).design_id for each in singles]
        single_s = (time.perf_counter() - started_s) / len(singles)
        for design_id in ids:
            jobs.cancel(store, design_id)
    read_s = statistics.median(each for each, _ in took_s)
    store_s = statistics.median(each for _, each in took_s)
    print(
        f"  a batch of {_BATCH}: {store_s:.2f} s to accept (asked 1 s) and {read_s:.2f} s to read; "
        f"as single designs {single_s * _BATCH / store_s:.1f} times as long"
    )


def _tell_of_urgent(bench: Bench, store: Store, doorbell: Doorbell) -> None:
    """How soon urgent designs are taken up while a crowd of ordinary ones waits."""
    crowd = BatchRequest(name="crowd", designs=bench.requests("crowd", _CROWD))
    batch_id = submit_batch(store, doorbell, crowd, None).batch_id
    until(lambda: jobs.depth(store).get("running", 0) > 0, _PATIENCE_S)
    ids = []
    for request in bench.requests("urgent", _URGENT):
        time.sleep(0.25)
        ids.append(submit(store, doorbell, request, None, priority="urgent").design_id)
    waits_s = [until(lambda each=each: _wait_s(store, each), _PATIENCE_S) for each in ids]  # type: ignore[misc]  # mypy does not infer a lambda's default
    waiting = jobs.depth(store)["queued"]
    batches.cancel(store, batch_id)
    until(lambda: _idle(store), _PATIENCE_S)
    print(
        f"  urgent while {waiting} wait: taken up after {statistics.median(waits_s):.3f} s in the "
        f"median, {max(waits_s):.3f} s at the longest of {_URGENT} (asked 0.5 s; a job under way "
        f"takes {_JOB_S:.2f} s)"
    )


def _wait_s(store: Store, design_id: str) -> float | None:
    query = select(JobRow.queued_at, JobRow.started_at).where(JobRow.design_id == design_id)
    queued, started = store.read(lambda session: session.execute(query).one())
    return None if started is None else max(1e-6, (started - queued).total_seconds())


def _idle(store: Store) -> bool:
    return not jobs.depth(store).keys() & {"queued", "running"}


if __name__ == "__main__":
    main()
