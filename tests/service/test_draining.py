"""A process that empties the queue and ends, and the commands around the queue."""

from __future__ import annotations

import json
import os
import signal
from collections.abc import Callable
from contextlib import closing
from pathlib import Path

import pytest

from service.contracts.candidate import PlannedDesign
from service.contracts.queue_view import QueueView
from service.contracts.request import DesignRequest
from service.errors import StoreUnavailable
from service.settings import Settings
from service.store import designs, jobs, queue_view, workers
from service.store.session import Store, open_store
from tests.service.databases import database, environment, short_lived
from tests.service.plans import as_named
from tests.service.queueing import batch, single
from tests.unit.cli import conftest as cli
from worker.cli import draining, queue_commands
from worker.cli.draining import drain_here
from worker.running import Outcome, ProgressCallback

typed = cli.typed


def unseen(_fraction: float, _word: str) -> None:
    """Show nothing."""


@pytest.fixture
def on_sqlite(request: pytest.FixtureRequest, tmp_path: Path) -> Settings:
    """Settings for tests to which the kind of the database is all the same."""
    with database("sqlite", request, tmp_path) as url:
        return short_lived(url)


@pytest.fixture
def own(on_sqlite: Settings, monkeypatch: pytest.MonkeyPatch) -> Settings:
    """Settings that commands find in their environment, and the invented plannings."""
    for name, value in environment(on_sqlite).items():
        monkeypatch.setenv(name, value)

    def drain(
        store: Store, settings: Settings, show: Callable[[float, str], None]
    ) -> draining.Drained:
        return drain_here(store, settings, show, as_named)

    monkeypatch.setattr(queue_commands, "drain_here", drain)
    return on_sqlite


def states(store: Store) -> dict[str, str]:
    page = designs.page(store, limit=100, before=None)
    return {each.name: each.state for each in page.designs}


def test_everything_that_waits_is_run_and_the_worker_says_goodbye(
    store: Store, settings: Settings
) -> None:
    batch(store, "one", "two", "two")
    single(store, "three")
    drained = drain_here(store, settings, unseen, as_named)
    assert states(store) == {"one": "done", "two": "done", "three": "done"}
    assert drained.outcomes == {Outcome.DONE: 3}
    assert not drained.stopped
    assert workers.alive(store) == []


def test_a_failure_does_not_end_the_draining(store: Store, settings: Settings) -> None:
    single(store, "break")
    single(store, "well")
    drained = drain_here(store, settings, unseen, as_named)
    assert states(store) == {"break": "failed", "well": "done"}
    assert (drained.failed, drained.outcomes[Outcome.DONE]) == (1, 1)


def test_what_a_lost_worker_left_is_run_too(store: Store, settings: Settings) -> None:
    single(store, "left behind")
    jobs.claim(store, "lost", lease_s=-1.0)
    drain_here(store, settings, unseen, as_named)
    assert states(store) == {"left behind": "done"}


def test_the_bar_rises_to_the_end_of_the_queue_and_names_what_is_under_way(
    store: Store, settings: Settings
) -> None:
    batch(store, *(f"design {number}" for number in range(1, 5)))
    told: list[tuple[float, str]] = []
    drain_here(
        store,
        settings,
        lambda fraction, word: told.append((fraction, word)),
        as_named,
    )
    fractions = [fraction for fraction, _ in told]
    assert fractions == sorted(fractions)
    assert 0.0 < fractions[0] < 0.25
    assert told[0][1] == "1 of 4: design 1"


def test_while_it_drains_it_is_shown_as_a_worker(store: Store, settings: Settings) -> None:
    single(store, "looked at")
    seen: list[QueueView] = []

    def look(_fraction: float, _word: str) -> None:
        seen.append(queue_view.view(store))

    drain_here(store, settings, look, as_named)
    (worker,) = seen[0].workers
    assert (worker.carrier, worker.pid) == ("drain", os.getpid())
    assert [design.name for design in worker.works_on] == ["looked at"]


def test_handlers_of_signals_are_put_back(store: Store, settings: Settings) -> None:
    before = signal.getsignal(signal.SIGTERM)
    drain_here(store, settings, unseen, as_named)
    assert signal.getsignal(signal.SIGTERM) is before


def test_a_command_that_drained_ends_with_status_0(own: Settings, typed: cli.Type) -> None:
    with closing(open_store(own)) as store:
        single(store, "one")
        end = typed("drain")
        assert states(store) == {"one": "done"}
    assert (end.status, end.out) == (0, "")
    assert "Nothing waits; run here: 1 done." in end.err


def test_a_command_that_met_failures_ends_with_status_3(own: Settings, typed: cli.Type) -> None:
    with closing(open_store(own)) as store:
        single(store, "refuse")
    assert typed("drain").status == 3


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_a_command_told_to_stop_gives_back_its_job_and_ends_with_status_6(
    own: Settings, typed: cli.Type, monkeypatch: pytest.MonkeyPatch, number: signal.Signals
) -> None:
    def told_to_stop(request: DesignRequest, progress: ProgressCallback) -> PlannedDesign:
        signal.raise_signal(number)
        return as_named(request, progress)

    def drain(
        store: Store, settings: Settings, show: Callable[[float, str], None]
    ) -> draining.Drained:
        return drain_here(store, settings, show, told_to_stop)

    monkeypatch.setattr(queue_commands, "drain_here", drain)
    with closing(open_store(own)) as store:
        design_id = single(store, "slow 60")
        end = typed("drain")
        assert end.status == 6
        assert "Stopped before the queue was empty" in end.err
        design = designs.get(store, design_id)
    assert (design.state, design.attempts) == ("queued", 0)


def test_a_database_that_stays_away_ends_with_status_4(
    own: Settings, typed: cli.Type, monkeypatch: pytest.MonkeyPatch
) -> None:
    def away(*_: object) -> None:
        raise StoreUnavailable("The database did not answer within 30 s.")

    monkeypatch.setattr(queue_commands, "open_store", away)
    for command in ("queue", "drain"):
        end = typed(command)
        assert (end.status, "did not answer" in end.err) == (4, True), own


def test_the_queue_is_shown_as_tables_and_as_json(own: Settings, typed: cli.Type) -> None:
    with closing(open_store(own)) as store:
        batch(store, "one", "two", owner="anna", priority="urgent")
        workers.announce(
            store, "bert", host="here", pid=1, carrier="embedded", engine_version="0.7"
        )
    out = typed("queue").out
    assert "2 waiting, the longest for" in out
    assert any(line.split()[:4] == ["urgent", "anna", "2", "0"] for line in out.splitlines())
    assert "bert (embedded)" in out
    seen = QueueView.model_validate(json.loads(typed("queue", "--json").out))
    assert [(each.owner, each.waiting) for each in seen.shares] == [("anna", 2)]
    assert [each.name for each in seen.workers] == ["bert"]


def test_a_queue_without_workers_says_how_to_have_one(own: Settings, typed: cli.Type) -> None:
    assert "spanwright drain" in typed("queue").out, own
