"""Figures of the queue and of one process, read as Prometheus reads them.

Read by the parsers of prometheus_client, for the text format 0.0.4 and for OpenMetrics 1.0.
"""

from __future__ import annotations

from collections.abc import Iterator
from datetime import UTC, datetime

import httpx
import pytest
from fastapi import FastAPI
from prometheus_client.openmetrics.parser import text_string_to_metric_families as open_families
from prometheus_client.parser import text_string_to_metric_families as plain_families
from sqlalchemy import update

from service.api import ended_totals
from service.api.app import create_app
from service.api.ended_totals import EndedTotals, Spread
from service.errors import StoreUnavailable
from service.settings import Settings
from service.store import jobs
from service.store.session import Store
from service.store.tables import JobRow
from tests.service.listening import Listener, served
from tests.service.queueing import at_work, batch, plan_next, single, take, waited_longer

Figures = dict[tuple[str, frozenset[tuple[str, str]]], float]


@pytest.fixture
def app(settings: Settings, store: Store) -> FastAPI:
    return create_app(settings, store)


@pytest.fixture
def here(app: FastAPI) -> Iterator[str]:
    with served(app) as address:
        yield address


def figures_at(address: str) -> Figures:
    answer = httpx.get(f"{address}/metrics")
    assert answer.status_code == 200
    assert answer.headers["content-type"].startswith("text/plain")
    return {
        (sample.name, frozenset(sample.labels.items())): sample.value
        for family in plain_families(answer.text)
        for sample in family.samples
    }


def of(figures: Figures, name: str, **labels: str) -> float:
    return figures[f"spanwright_{name}", frozenset(labels.items())]


def settle(store: Store) -> None:
    """Let what ended have ended a while ago."""
    earlier = update(JobRow).values(changed_at=JobRow.changed_at - 60_000_000)
    store.write(lambda session: session.execute(earlier))


def let_leases_run_out(store: Store) -> None:
    long_ago = datetime(2020, 1, 1, tzinfo=UTC)
    running = update(JobRow).where(JobRow.state == "running")
    store.write(lambda session: session.execute(running.values(lease_until=long_ago)))


def test_the_depth_tells_what_waits_and_runs_by_priority(store: Store, here: str) -> None:
    single(store, "urgent", priority="urgent")
    waited_longer(store, single(store, "ordinary"), 30.0)
    single(store, "other")
    take(store)
    figures = figures_at(here)
    assert of(figures, "jobs", state="running", priority="urgent") == 1
    assert of(figures, "jobs", state="queued", priority="ordinary") == 2
    assert of(figures, "jobs", state="running", priority="when-idle") == 0
    assert of(figures, "jobs_claimable") == 2
    assert 30.0 <= of(figures, "oldest_wait_seconds") < 60.0
    assert of(figures, "store_up") == 1


def test_what_ended_is_told_with_its_waits_runs_attempts_and_map_error(
    store: Store, here: str
) -> None:
    at_work(store)
    waited_longer(store, single(store, "waited"), 30.0)
    plan_next(store)
    single(store, "waited")  # answered by what is stored
    jobs.cancel(store, single(store, "cancelled"))
    settle(store)
    figures = figures_at(here)
    ordinary = {"priority": "ordinary"}
    assert of(figures, "jobs_ended_total", state="done", **ordinary) == 2
    assert of(figures, "jobs_ended_total", state="cancelled", **ordinary) == 1
    assert of(figures, "jobs_answered_total") == 1
    assert of(figures, "job_wait_seconds_count", **ordinary) == 1
    assert of(figures, "job_wait_seconds_bucket", le="15.0", **ordinary) == 0
    assert of(figures, "job_wait_seconds_bucket", le="60.0", **ordinary) == 1
    assert 30.0 <= of(figures, "job_wait_seconds_sum", **ordinary) < 60.0
    assert of(figures, "job_run_seconds_count", **ordinary) == 1
    assert of(figures, "job_attempts_bucket", le="1.0") == 1
    assert of(figures, "job_attempts_count") == 1
    assert of(figures, "map_error_percent_count") == 1


def test_leases_that_ran_out_and_jobs_set_aside_are_counted(store: Store, here: str) -> None:
    single(store, "lost")
    for _ in range(2):
        take(store)
        let_leases_run_out(store)
        jobs.sweep(store, max_attempts=2)
    settle(store)
    figures = figures_at(here)
    assert of(figures, "lease_expiries_total") == 2
    assert of(figures, "jobs_set_aside_total") == 1
    assert of(figures, "job_attempts_sum") == 2


def test_workers_that_are_there_are_counted_by_carrier(store: Store, here: str) -> None:
    at_work(store, name="one")
    at_work(store, name="two")
    figures = figures_at(here)
    assert of(figures, "workers", carrier="embedded") == 2
    assert of(figures, "workers", carrier="celery") == 0


def test_two_processes_tell_the_same_of_the_queue(settings: Settings, store: Store) -> None:
    at_work(store)
    batch(store, "one", "two", "three")
    plan_next(store)
    settle(store)
    with served(create_app(settings)) as first, served(create_app(settings)) as second:
        figures_at(first)
        plan_next(store)
        settle(store)
        one, other = figures_at(first), figures_at(second)
    own = ("spanwright_http", "spanwright_oldest", "process_")
    queue = [{key: one[key] for key in one if not key[0].startswith(own)} for one in (one, other)]
    assert queue[0] == queue[1]
    assert of(one, "jobs_ended_total", state="done", priority="ordinary") == 2


def test_counters_do_not_fall_when_a_failed_design_is_run_again(store: Store) -> None:
    totals = EndedTotals()
    single(store, "failed")
    job = take(store)
    jobs.fail(store, job, "invented")
    settle(store)
    totals.read_on(store)
    again = update(JobRow).values(state="queued", finished_at=None)
    store.write(lambda session: session.execute(again))
    settle(store)
    totals.read_on(store)
    assert totals.ended["failed", "ordinary"] == 1


def test_what_ended_is_added_once_however_it_is_paged(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(ended_totals, "_PAGE", 2)
    for name in "abcde":
        jobs.cancel(store, single(store, name))
    settle(store)
    totals = EndedTotals()
    for _ in range(2):
        totals.read_on(store)
        assert totals.ended["cancelled", "ordinary"] == 5


def test_a_large_store_is_added_up_over_several_askings(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(ended_totals, "_PAGE", 1)
    monkeypatch.setattr(ended_totals, "_MOST_PAGES", 2)
    for name in "abc":
        jobs.cancel(store, single(store, name))
    settle(store)
    totals = EndedTotals()
    counted = []
    for _ in range(3):
        totals.read_on(store)
        counted.append(totals.ended["cancelled", "ordinary"])
    assert counted == [2, 3, 3]


def test_a_value_on_a_bound_counts_below_it() -> None:
    spread = Spread((1.0, 2.0))
    for value in (0.5, 1.0, 1.5, 7.0, None):
        spread.add(value)
    assert spread.up_to() == [("1.0", 2.0), ("2.0", 3.0), ("+Inf", 4.0)]
    assert spread.total == 10.0


def test_requests_are_counted_by_route_and_not_by_address(store: Store, here: str) -> None:
    for design_id in (single(store, "one"), single(store, "two")):
        assert httpx.get(f"{here}/v1/designs/{design_id}").status_code == 200
    httpx.get(f"{here}/nowhere")
    figures = figures_at(here)
    route = "/v1/designs/{design_id}"
    assert of(figures, "http_requests_total", method="GET", route=route, status="200") == 2
    assert of(figures, "http_request_duration_seconds_count", method="GET", route=route) == 2
    assert of(figures, "http_requests_total", method="GET", route="other", status="404") == 1


def test_open_streams_are_counted(here: str) -> None:
    assert of(figures_at(here), "event_streams") == 0
    with Listener(f"{here}/v1/events"):
        assert of(figures_at(here), "event_streams") == 1


def test_the_format_is_that_which_the_reader_asks_for(here: str) -> None:
    accept = "application/openmetrics-text;version=1.0.0"
    answer = httpx.get(f"{here}/metrics", headers={"Accept": accept})
    assert answer.headers["content-type"].startswith("application/openmetrics-text")
    families = open_families(answer.text)  # type: ignore[no-untyped-call]  # the parser has no types
    names = {family.name for family in families}
    assert {"spanwright_jobs_ended", "spanwright_http_requests"} <= names


def test_figures_of_the_process_are_told_while_the_store_is_away(
    store: Store, here: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    def away() -> None:
        raise StoreUnavailable("invented")

    monkeypatch.setattr(store, "ping", away)
    figures = figures_at(here)
    assert of(figures, "store_up") == 0
    assert of(figures, "event_streams") == 0
    assert not [name for name, _ in figures if name == "spanwright_jobs_claimable"]


def test_readiness_asks_the_store_and_is_not_patient(
    store: Store, here: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    assert httpx.get(f"{here}/health/ready").status_code == 200

    def away() -> None:
        raise StoreUnavailable("invented")

    monkeypatch.setattr(store, "ping", away)
    assert httpx.get(f"{here}/health/ready").status_code == 503
    assert httpx.get(f"{here}/health/live").status_code == 200
