"""One job under its heartbeat: how it ends, whatever planning, planner and database do."""

from __future__ import annotations

import logging
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import closing, contextmanager
from pathlib import Path

import pytest
from sqlalchemy.exc import IntegrityError

from service.contracts.candidate import PlannedDesign
from service.contracts.request import DesignRequest
from service.errors import StoreUnavailable
from service.settings import Settings
from service.store import designs, jobs, workers
from service.store.session import Store, open_store
from tests.service.databases import environment, short_lived
from tests.service.plans import as_named
from tests.service.samples import sample_request
from tests.service.servers import PostgresServer
from tests.service.waiting import in_state, process_at, until
from worker.engine import ENGINE_VERSION
from worker.running import (
    EXIT_WOULD_NOT_STOP,
    Outcome,
    PlanFunction,
    ProgressCallback,
    announced,
    drain,
    run_next,
    sweep,
)

CHECKOUT = Path(__file__).parents[2]
ALONE = """
from threading import Event
from service.settings import Settings
from service.store.session import open_store
from tests.service.plans import as_named
from worker.running import run_next
settings = Settings()
run_next(open_store(settings), settings, as_named, "alone", Event())
"""


def submitted(store: Store, name: str) -> str:
    return designs.submit(store, sample_request(name=name), idempotency_key=None).design_id


def run(
    store: Store,
    settings: Settings,
    plan: PlanFunction = as_named,
    stopping: threading.Event | None = None,
) -> Outcome | None:
    return run_next(store, settings, plan, "the test", stopping or threading.Event())


def run_meanwhile(
    store: Store, settings: Settings, design_id: str, meanwhile: Callable[[], object]
) -> Outcome | None:
    """Run the job and do something once it is under way."""
    with ThreadPoolExecutor(1) as pool:
        ran = pool.submit(run, store, settings)
        until(lambda: designs.get(store, design_id).progress.step.startswith("process"))
        meanwhile()
        return ran.result(10.0)


@contextmanager
def alone(settings: Settings) -> Iterator[subprocess.Popen[bytes]]:
    """One job run in a process of its own, with no one to sweep or bury after it."""
    with subprocess.Popen(
        [sys.executable, "-c", ALONE],
        cwd=CHECKOUT,
        env=os.environ | environment(settings),
        stderr=subprocess.DEVNULL,
    ) as process:
        try:
            yield process
        finally:
            process.kill()


# --------------------------------------------------------------------------- ending
def test_a_planned_design_is_stored(store: Store, settings: Settings) -> None:
    design_id = submitted(store, "quick")
    assert run(store, settings) is Outcome.DONE
    design = designs.get(store, design_id)
    assert design.state == "done"
    assert design.result is not None
    assert designs.report(store, design_id, 1).rank == 1


def test_a_worker_answers_identical_requests_by_results_of_its_own_engine(
    store: Store, settings: Settings
) -> None:
    def of_today(request: DesignRequest, progress: ProgressCallback) -> PlannedDesign:
        planned = as_named(request, progress)
        result = planned.result.model_copy(update={"engine_version": ENGINE_VERSION})
        return planned.model_copy(update={"result": result})

    first, second, other = (submitted(store, name) for name in ("same", "same", "other"))
    assert run(store, settings, of_today) is Outcome.DONE
    assert run(store, settings, of_today) is Outcome.DONE
    assert designs.get(store, second).answered_by == first
    assert designs.get(store, other).answered_by is None
    assert run(store, settings, of_today) is None


def test_a_worker_does_not_answer_by_results_of_another_engine(
    store: Store, settings: Settings
) -> None:
    submitted(store, "same")
    second = submitted(store, "same")
    for _ in range(2):
        assert run(store, settings) is Outcome.DONE
    assert designs.get(store, second).answered_by is None


def test_a_worker_is_announced_while_it_works_and_no_longer(
    store: Store, settings: Settings
) -> None:
    with announced(store, "anna", "drain"):
        (worker,) = workers.alive(store)
        assert (worker.name, worker.carrier) == ("anna", "drain")
        assert (worker.engine_version, worker.pid) == (ENGINE_VERSION, os.getpid())
        sweep(store, settings, "anna")
        assert workers.alive(store)[0].seen_at > worker.seen_at
    assert workers.alive(store) == []


def test_a_worker_goes_although_it_cannot_say_so(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    def away(*_: object) -> None:
        raise StoreUnavailable("away")

    with announced(store, "anna", "drain"):
        monkeypatch.setattr(workers, "goodbye", away)


def test_nothing_runs_where_nothing_waits(store: Store, settings: Settings) -> None:
    assert run(store, settings) is None


def test_progress_is_seen_while_a_design_is_planned(store: Store, settings: Settings) -> None:
    design_id = submitted(store, "slow 0.5")
    seen: list[float] = []

    def look() -> None:
        until(lambda: designs.get(store, design_id).progress.fraction == 0.5)
        seen.append(designs.get(store, design_id).progress.fraction)

    assert run_meanwhile(store, settings, design_id, look) is Outcome.DONE
    assert seen == [0.5]


def test_a_job_longer_than_its_lease_keeps_it(store: Store, settings: Settings) -> None:
    short = settings.model_copy(update={"lease_s": 0.4})
    design_id = submitted(store, "slow 1.2")
    with ThreadPoolExecutor(1) as pool:
        ran = pool.submit(run, store, short)
        while not ran.done():
            assert jobs.sweep(store, settings.max_attempts).returned == 0
            time.sleep(0.05)
    assert ran.result() is Outcome.DONE
    assert designs.get(store, design_id).attempts == 1


def test_what_the_engine_refuses_fails_with_the_engines_words(
    store: Store, settings: Settings
) -> None:
    design_id = submitted(store, "refuse")
    assert run(store, settings) is Outcome.FAILED
    design = designs.get(store, design_id)
    assert design.state == "failed"
    assert design.failure == (
        "The request lies outside what can be planned: "
        "radius_m = 1 m is outside the range 1e-05 to 0.1 m."
    )


def test_a_bug_in_planning_fails_the_job_once_and_its_trace_goes_to_the_log_only(
    store: Store, settings: Settings, caplog: pytest.LogCaptureFixture
) -> None:
    design_id = submitted(store, "break")
    with caplog.at_level(logging.ERROR):
        assert run(store, settings) is Outcome.FAILED
    assert run(store, settings) is None
    failure = designs.get(store, design_id).failure
    assert failure is not None
    assert "KeyError" in failure
    assert "second line" not in failure
    assert "Traceback" not in failure
    assert "second line" in caplog.text


def test_a_result_that_cannot_be_stored_fails_the_job_and_does_not_loop(
    store: Store, settings: Settings
) -> None:
    def plan(request: DesignRequest, progress: ProgressCallback) -> PlannedDesign:
        planned = as_named(request, progress)
        return planned.model_copy(update={"reports": planned.reports * 2})

    design_id = submitted(store, "quick")
    assert run(store, settings, plan) is Outcome.FAILED
    failure = designs.get(store, design_id).failure
    assert failure is not None
    assert IntegrityError.__name__ in failure


# ------------------------------------------------------------------------- stopping
def test_a_cancelled_design_stops_being_planned(store: Store, settings: Settings) -> None:
    design_id = submitted(store, "slow 20")
    outcome = run_meanwhile(store, settings, design_id, lambda: jobs.cancel(store, design_id))
    assert outcome is Outcome.CANCELLED
    assert designs.get(store, design_id).state == "cancelled"


def test_a_worker_that_lost_its_job_stops_planning_and_stores_nothing(
    store: Store, settings: Settings
) -> None:
    design_id = submitted(store, "slow 20")

    def take_over() -> None:
        jobs.bury(store, "the test", settings.max_attempts)
        assert jobs.claim(store, "second", lease_s=60.0) is not None

    assert run_meanwhile(store, settings, design_id, take_over) is Outcome.LOST
    design = designs.get(store, design_id)
    assert (design.state, design.attempts) == ("running", 2)


def test_a_job_beyond_its_deadline_fails_in_words(store: Store, settings: Settings) -> None:
    design_id = submitted(store, "slow 20")
    hasty = settings.model_copy(update={"job_deadline_s": 0.2})
    assert run(store, hasty) is Outcome.OVERDUE
    failure = designs.get(store, design_id).failure
    assert failure is not None
    assert "longer than" in failure


def test_a_process_that_is_asked_to_stop_gives_its_job_back(
    store: Store, settings: Settings
) -> None:
    design_id, stopping = submitted(store, "slow 20"), threading.Event()
    with ThreadPoolExecutor(1) as pool:
        ran = pool.submit(run, store, settings, as_named, stopping)
        in_state(store, design_id, "running")
        stopping.set()
        assert ran.result(5.0) is Outcome.RETURNED
    design = designs.get(store, design_id)
    assert (design.state, design.attempts) == ("queued", 0)


def test_a_planning_that_ends_within_the_grace_is_stored_although_it_was_to_stop(
    store: Store, settings: Settings
) -> None:
    patient = settings.model_copy(update={"cancel_grace_s": 30.0})
    design_id, stopping = submitted(store, "deaf 1"), threading.Event()
    with ThreadPoolExecutor(1) as pool:
        ran = pool.submit(run, store, patient, as_named, stopping)
        until(lambda: designs.get(store, design_id).progress.step.startswith("process"))
        stopping.set()
        assert ran.result(10.0) is Outcome.DONE
    assert designs.get(store, design_id).state == "done"


def test_an_overdue_planning_that_does_not_listen_is_settled_and_its_process_ends(
    store: Store, settings: Settings
) -> None:
    design_id = submitted(store, "deaf 60")
    with alone(settings.model_copy(update={"job_deadline_s": 0.2})) as process:
        assert process.wait(20.0) == EXIT_WOULD_NOT_STOP
    design = designs.get(store, design_id)
    assert design.state == "failed"
    assert design.failure is not None
    assert "longer than" in design.failure


def test_a_cancelled_planning_that_does_not_listen_is_settled_and_its_process_ends(
    store: Store, settings: Settings
) -> None:
    design_id = submitted(store, "deaf 60")
    with alone(settings) as process:
        process_at(store, design_id)
        jobs.cancel(store, design_id)
        assert process.wait(20.0) == EXIT_WOULD_NOT_STOP
    assert designs.get(store, design_id).state == "cancelled"


# ----------------------------------------------------------------- a store that is away
class Away:
    """Makes functions of the queue find the store away so many times."""

    def __init__(self, monkeypatch: pytest.MonkeyPatch, name: str, times: int) -> None:
        self.left, real = times, getattr(jobs, name)

        def away(*arguments: object, **named: object) -> object:
            if self.left:
                self.left -= 1
                raise StoreUnavailable("away")
            return real(*arguments, **named)

        monkeypatch.setattr(jobs, name, away)


def test_a_result_is_kept_until_the_store_is_back(
    store: Store, settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    design_id = submitted(store, "quick")
    Away(monkeypatch, "finish", times=3)
    assert run(store, settings) is Outcome.DONE
    assert designs.get(store, design_id).state == "done"


def test_planning_goes_on_while_heartbeats_find_the_store_away(
    store: Store, settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    design_id = submitted(store, "slow 0.4")
    away = Away(monkeypatch, "heartbeat", times=3)
    assert run(store, settings) is Outcome.DONE
    assert away.left == 0
    assert designs.get(store, design_id).state == "done"


def test_a_failure_that_cannot_be_stored_is_left_to_the_lease(
    store: Store, settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    design_id = submitted(store, "break")
    Away(monkeypatch, "fail", times=1)
    assert run(store, settings) is Outcome.LOST
    assert designs.get(store, design_id).state == "running"
    assert jobs.bury(store, "the test", settings.max_attempts).returned == 1


def test_a_heartbeat_that_breaks_does_not_stop_the_heart(
    store: Store, settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    design_id, real, broken = submitted(store, "slow 20"), jobs.heartbeat, [True]

    def breaks(*arguments: object) -> object:
        if broken:
            broken.clear()
            raise ZeroDivisionError
        return real(*arguments)  # type: ignore[arg-type]  # handed through as they came

    monkeypatch.setattr(jobs, "heartbeat", breaks)
    outcome = run_meanwhile(store, settings, design_id, lambda: jobs.cancel(store, design_id))
    assert outcome is Outcome.CANCELLED


def test_a_database_that_crashes_and_comes_back_is_ridden_out(
    own_postgres: PostgresServer,
) -> None:
    url = own_postgres.url.render_as_string(hide_password=False)
    settings = short_lived(url, lease_s=30.0)
    with closing(open_store(settings)) as store:
        planned, waiting = submitted(store, "slow 0.5"), submitted(store, "quick")

        def crash() -> None:
            own_postgres.stop(signal.SIGQUIT)
            time.sleep(0.7)
            own_postgres.start()

        assert run_meanwhile(store, settings, planned, crash) is Outcome.DONE
        assert run(store, settings) is Outcome.DONE
        for design_id in (planned, waiting):
            design = designs.get(store, design_id)
            assert (design.state, design.attempts) == ("done", 1)


# ------------------------------------------------------------------------- draining
def test_a_drain_runs_what_waits_and_says_how_much(store: Store, settings: Settings) -> None:
    for _ in range(3):
        submitted(store, "quick")
    stopping = threading.Event()
    assert drain(store, settings, as_named, "the test", stopping, most_jobs=2) == 2
    assert drain(store, settings, as_named, "the test", stopping, most_jobs=2) == 1
    assert jobs.depth(store) == {"done": 3}


def test_a_drain_begins_nothing_after_its_time_or_when_stopping(
    store: Store, settings: Settings
) -> None:
    submitted(store, "quick")
    stopping = threading.Event()
    plan = as_named
    assert drain(store, settings, plan, "the test", stopping, most_jobs=9, longest_s=0.0) == 0
    stopping.set()
    assert drain(store, settings, plan, "the test", stopping, most_jobs=9) == 0
    assert jobs.depth(store) == {"queued": 1}
