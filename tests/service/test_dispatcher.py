"""The embedded form: whatever is killed or frozen, each design is finished, and once."""

from __future__ import annotations

import multiprocessing
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

import pytest
from sqlalchemy import func, select, update
from sqlalchemy.exc import OperationalError
from sqlalchemy.orm import Session

from service.contracts.progress import Design
from service.errors import StoreUnavailable
from service.settings import Settings
from service.store import designs, jobs, workers
from service.store.session import Store, open_store
from service.store.tables import JobRow, ResultRow
from tests.service.databases import KINDS, database, environment, short_lived
from tests.service.plans import as_named
from tests.service.samples import sample_request
from tests.service.waiting import in_state, process_at, until
from worker import dispatcher

CHECKOUT = Path(__file__).parents[2]
ALONE = (
    "from tests.service.plans import as_named; from worker.dispatcher import main; main(as_named)"
)


def submitted(store: Store, name: str) -> str:
    return designs.submit(store, sample_request(name=name), idempotency_key=None).design_id


def results_of(store: Store, design_id: str) -> int:
    query = select(func.count()).where(ResultRow.design_id == design_id)
    return store.read(lambda session: session.scalar(query) or 0)


def planned_by(design: Design) -> int:
    assert design.result is not None
    return int(design.result.notes[0].removeprefix("process "))


def is_gone(process: int) -> bool:
    """Whether a process has ended, be it that no one has taken note of it yet."""
    try:
        status = Path(f"/proc/{process}/stat").read_text()
    except (FileNotFoundError, ProcessLookupError):
        return True
    return status.rpartition(")")[2].split()[0] == "Z"


# -------------------------------------------------- beside the API, in a thread of it
@dataclass(frozen=True, slots=True)
class Standing:
    store: Store
    workers: int


@pytest.fixture(scope="module", params=KINDS)
def standing(
    request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory
) -> Iterator[Standing]:
    """Two workers under a supervisor, with a lease far longer than any test waits."""
    with database(request.param, request, tmp_path_factory.mktemp("standing")) as url:
        settings = short_lived(url, lease_s=600.0)
        stop = threading.Event()
        supervisor = threading.Thread(target=dispatcher.serve, args=(settings, as_named, stop))
        supervisor.start()
        store = open_store(settings, patience_s=5.0)
        try:
            yield Standing(store, settings.workers)
        finally:
            stop.set()
            supervisor.join()
            store.close()


def test_a_submitted_design_is_planned(standing: Standing) -> None:
    design = in_state(standing.store, submitted(standing.store, "quick"), "done")
    assert design.attempts == 1


def test_workers_announce_themselves_and_a_killed_one_is_known_to_be_gone(
    standing: Standing,
) -> None:
    store = standing.store

    def all_there() -> set[int] | None:
        found = workers.alive(store)
        assert {worker.carrier for worker in found} <= {"embedded"}
        pids = {worker.pid for worker in found}
        return pids if len(pids) == standing.workers else None

    victim = min(until(all_there, within_s=30.0))
    os.kill(victim, signal.SIGKILL)
    until(lambda: victim not in {worker.pid for worker in workers.alive(store)})
    assert len(until(all_there, within_s=30.0)) == standing.workers


def test_a_design_whose_worker_is_killed_in_the_middle_is_finished_once(
    standing: Standing,
) -> None:
    store = standing.store
    design_id = submitted(store, "slow 0.5")
    victim = process_at(store, design_id)
    os.kill(victim, signal.SIGKILL)
    design = in_state(store, design_id, "done")
    assert design.attempts == 2
    assert planned_by(design) != victim
    assert results_of(store, design_id) == 1


def test_a_design_that_kills_its_workers_is_set_aside_with_its_cause(standing: Standing) -> None:
    store = standing.store
    deadly, harmless = submitted(store, "kill"), submitted(store, "quick")
    design = in_state(store, deadly, "failed", within_s=20.0)
    assert design.attempts == 3
    assert design.failure is not None
    assert "lost 3 times" in design.failure
    in_state(store, harmless, "done")


def test_a_cancelled_design_that_does_not_listen_ends_with_its_process(
    standing: Standing,
) -> None:
    store = standing.store
    design_id = submitted(store, "deaf 60")
    deaf = process_at(store, design_id)
    jobs.cancel(store, design_id)
    in_state(store, design_id, "cancelled")
    until(lambda: is_gone(deaf))
    in_state(store, submitted(store, "quick"), "done")


def test_two_workers_plan_two_designs_side_by_side(standing: Standing) -> None:
    store = standing.store
    first, second = submitted(store, "slow 60"), submitted(store, "slow 60")
    assert process_at(store, first) != process_at(store, second)
    for design_id in (first, second):
        jobs.cancel(store, design_id)
        in_state(store, design_id, "cancelled")


# ------------------------------------------------------ alone, in a process of its own
@contextmanager
def workers_alone(settings: Settings) -> Iterator[subprocess.Popen[bytes]]:
    supervisor = subprocess.Popen(
        [sys.executable, "-c", ALONE],
        cwd=CHECKOUT,
        env=os.environ | environment(settings),
        stderr=subprocess.DEVNULL,
    )
    try:
        yield supervisor
    finally:
        supervisor.terminate()
        supervisor.wait(30.0)


def freeze_outside_a_transaction(store: Store, design_id: str, process: int) -> None:
    """Stop a process where it holds no lock: one that does holds up SQLite for as long."""

    def write(session: Session) -> None:
        session.execute(update(JobRow).where(JobRow.design_id == design_id).values(step="frozen"))

    def frozen() -> bool:
        os.kill(process, signal.SIGSTOP)
        try:
            store._once(write, writes=True)
        except OperationalError:
            os.kill(process, signal.SIGCONT)
            return False
        return True

    until(frozen, within_s=30.0)


def test_a_frozen_worker_loses_its_job_and_its_late_result_is_refused(
    store: Store, settings: Settings
) -> None:
    with workers_alone(settings.model_copy(update={"lease_s": 1.0})):
        design_id = submitted(store, "deaf 0.8")
        frozen = process_at(store, design_id)
        freeze_outside_a_transaction(store, design_id, frozen)
        second = process_at(store, design_id, other_than=frozen)
        os.kill(frozen, signal.SIGCONT)
        design = in_state(store, design_id, "done")
    assert (planned_by(design), design.attempts) == (second, 2)
    assert results_of(store, design_id) == 1


def test_workers_that_are_asked_to_stop_give_their_jobs_back(
    store: Store, settings: Settings
) -> None:
    with workers_alone(settings.model_copy(update={"workers": 1})) as supervisor:
        design_id = submitted(store, "slow 60")
        worker = process_at(store, design_id)
        supervisor.send_signal(signal.SIGTERM)
        assert supervisor.wait(20.0) == 0
    assert is_gone(worker)
    design = designs.get(store, design_id)
    assert (design.state, design.attempts) == ("queued", 0)


def test_workers_do_not_outlive_a_killed_supervisor_and_give_their_jobs_back(
    store: Store, settings: Settings
) -> None:
    with workers_alone(settings.model_copy(update={"workers": 1})) as supervisor:
        design_id = submitted(store, "slow 60")
        worker = process_at(store, design_id)
        supervisor.kill()
        until(lambda: is_gone(worker))
    design = designs.get(store, design_id)
    assert (design.state, design.attempts) == ("queued", 0)


# ---------------------------------------------------------------------- supervision
# A frozen process may hold SQLite's lock, which would hold up this test.
@pytest.mark.parametrize("database_url", ["postgresql"], indirect=True)
def test_a_worker_that_is_frozen_for_good_is_killed_and_replaced(
    store: Store, settings: Settings
) -> None:
    one = settings.model_copy(update={"lease_s": 600.0})
    slot = dispatcher._Slot(multiprocessing.get_context("spawn"), one, as_named, 1)
    slot.keep_running()
    try:
        design_id = submitted(store, "slow 0.5")
        frozen = process_at(store, design_id)
        os.kill(frozen, signal.SIGSTOP)

        def found_dead() -> bool:
            slot.heard_at -= dispatcher._SILENCE_S
            slot.keep_running()
            return is_gone(frozen)

        def planned_again() -> bool:
            slot.keep_running()
            return designs.get(store, design_id).state == "done"

        until(found_dead)
        until(planned_again, within_s=20.0)
        assert designs.get(store, design_id).attempts == 2
    finally:
        slot.ask_to_stop()
        slot.await_stop(time.monotonic() + 20.0)


def test_a_worker_gives_signs_of_life_and_stops_when_its_lifeline_closes(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(dispatcher, "_SIGN_S", 0.01)
    ours, theirs = multiprocessing.Pipe()
    stopping = dispatcher.StopFlag()
    with theirs, ThreadPoolExecutor(1) as pool:
        watching = pool.submit(dispatcher._watch, theirs, stopping)
        with ours:
            for _ in range(3):
                assert ours.poll(5.0)
                ours.recv_bytes()
            assert not stopping.is_set()
        watching.result(5.0)
    assert stopping.is_set()


def test_a_worker_that_is_heard_of_is_left_alone(settings: Settings) -> None:
    slot = dispatcher._Slot(multiprocessing.get_context("spawn"), settings, as_named, 1)
    slot.keep_running()
    try:
        process = slot.process
        assert process is not None
        assert slot.lifeline is not None
        assert slot.lifeline.poll(20.0)
        slot.heard_at -= dispatcher._SILENCE_S
        slot.keep_running()
        assert slot.process is process
        assert process.is_alive()
    finally:
        slot.ask_to_stop()
        slot.await_stop(time.monotonic() + 20.0)


def test_workers_that_die_young_are_started_ever_more_seldom() -> None:
    slot = dispatcher._Slot.__new__(dispatcher._Slot)
    slot.pause_s, slot.started_at = 0.0, 0.0
    pauses = []
    for _ in range(12):
        slot.started_at = time.monotonic()
        slot._pause()
        pauses.append(slot.pause_s)
    assert pauses == sorted(pauses)
    assert pauses[0] < 0.2
    assert pauses[-1] == dispatcher._LONGEST_PAUSE_S


def test_the_supervisor_outlives_a_burial_that_breaks(
    monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture, tmp_path: Path
) -> None:
    def breaks(*_: object, **__: object) -> None:
        raise ZeroDivisionError

    monkeypatch.setattr(jobs, "bury", breaks)
    settings = short_lived(f"sqlite:///{tmp_path / 'spanwright.db'}")
    dispatcher._give_back(settings, "the dead")
    assert "the dead" in caplog.text


def test_the_supervisor_does_not_wait_long_for_a_store_that_is_away(
    monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture, tmp_path: Path
) -> None:
    monkeypatch.setattr(dispatcher, "_BURIAL_PATIENCE_S", 0.1)
    away = short_lived(f"sqlite:///{tmp_path / 'no such folder' / 'spanwright.db'}")
    started = time.monotonic()
    dispatcher._give_back(away, "the dead")
    assert time.monotonic() - started < 2.0
    assert "waits for its lease" in caplog.text


def test_a_supervisor_that_breaks_down_ends_with_a_failure(settings: Settings) -> None:
    # A planning that no process of its own can find by name.
    program = "from worker.dispatcher import main; main(lambda request, progress: None)"
    run = subprocess.run(
        [sys.executable, "-c", program],
        cwd=CHECKOUT,
        env=os.environ | environment(settings),
        capture_output=True,
        text=True,
        check=False,
    )
    assert run.returncode == 1
    assert "broke down" in run.stderr


def test_the_supervisor_loads_no_numerics() -> None:
    program = "import sys, worker.dispatcher; sys.exit('numpy' in sys.modules)"
    run = subprocess.run([sys.executable, "-c", program], cwd=CHECKOUT, check=False)
    assert run.returncode == 0


# ------------------------------------------------------------------------- polling
@contextmanager
def polling(store: Store, settings: Settings) -> Iterator[Future[None]]:
    """What a worker does once it is open, in a thread of the test."""
    stopping = dispatcher.StopFlag()
    with ThreadPoolExecutor(1) as pool:
        try:
            yield pool.submit(dispatcher._poll, store, settings, as_named, "the test", stopping)
        finally:
            stopping.set()


def test_a_worker_ends_after_so_many_jobs_to_be_replaced(
    store: Store, settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(dispatcher, "MOST_JOBS", 2)
    for _ in range(3):
        submitted(store, "quick")
    with polling(store, settings) as worker:
        worker.result(10.0)
    assert jobs.depth(store) == {"done": 2, "queued": 1}


def test_a_worker_waits_for_a_store_that_is_away(
    store: Store, settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    sweep, left = jobs.sweep, [3]

    def away(store: Store, max_attempts: int) -> jobs.Swept:
        if left[0]:
            left[0] -= 1
            raise StoreUnavailable("away")
        return sweep(store, max_attempts)

    monkeypatch.setattr(jobs, "sweep", away)
    design_id = submitted(store, "quick")
    with polling(store, settings):
        in_state(store, design_id, "done")
    assert left == [0]
