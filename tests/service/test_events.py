"""Live progress as server-sent events (WHATWG HTML, section 9.2), behind one process or two."""

from __future__ import annotations

import asyncio
import threading
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager

import httpx
import pytest
from fastapi import FastAPI
from sqlalchemy import create_engine, text
from sqlalchemy.orm import Session
from starlette.types import Message

from service.api import change_feed, event_start, events
from service.api.app import create_app
from service.api.change_feed import ChangeFeed, Stream
from service.api.event_wire import Event, Topic
from service.contracts.progress import Progress
from service.errors import StoreUnavailable
from service.settings import Settings
from service.store import batches, changes, jobs
from service.store.changes import Change
from service.store.session import Store
from service.store.tables import JobRow
from tests.service.databases import short_lived
from tests.service.listening import Listener, served
from tests.service.queueing import batch, batch_request, plan_next, single, take


@pytest.fixture(autouse=True)
def _impatient(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(change_feed, "POLL_S", 0.02)


@pytest.fixture
def app(settings: Settings, store: Store) -> FastAPI:
    return create_app(settings, store)


@pytest.fixture
def here(app: FastAPI) -> Iterator[str]:
    with served(app) as address:
        yield address


def feed_of(app: FastAPI) -> ChangeFeed:
    feed: ChangeFeed = app.state.change_feed
    return feed


def told(store: Store, job: jobs.ClaimedJob, fraction: float) -> None:
    jobs.heartbeat(store, job, Progress(fraction=fraction, step="at it"), 600.0)


# ------------------------------------------------------------------- what is told
def test_a_design_is_followed_from_where_it_stands_to_its_end(store: Store, here: str) -> None:
    design_id = single(store, "followed")
    with Listener(f"{here}/v1/designs/{design_id}/events") as listener:
        listener.until(lambda it: it.states(design_id) == ["queued"])
        assert listener.headers["content-type"].startswith("text/event-stream")
        assert listener.retry_ms is not None
        assert listener.names() == ["snapshot", "state"]
        assert listener.heard[0].data == {"states": 1, "complete": True}
        job = take(store)
        told(store, job, 0.5)
        listener.until(lambda it: it.heard[-1].data["progress"]["fraction"] == 0.5)
        jobs.fail(store, job, "invented")
        listener.until(lambda it: it.ended)
        assert listener.states(design_id) == ["queued", "running", "failed"]
        assert listener.heard[-1].data["failure"] == "invented"


def test_the_id_of_an_event_is_the_moment_of_its_change(store: Store, here: str) -> None:
    design_id = single(store, "done")
    plan_next(store)
    with Listener(f"{here}/v1/designs/{design_id}/events") as listener:
        listener.until(lambda it: it.ended)
        assert listener.heard[-1].id == changes.newest(store)
        assert listener.heard[-1].data["changed_us"] == listener.heard[-1].id


def test_a_batch_is_followed_to_its_end_with_each_of_its_designs(store: Store, here: str) -> None:
    other = single(store, "other")
    batch_id = batch(store, "one", "two")
    with Listener(f"{here}/v1/batches/{batch_id}/events") as listener:
        listener.until(lambda it: it.names() == ["snapshot", "state", "state", "batch"])
        assert listener.heard[-1].data["counts"]["queued"] == 2
        ended = {plan_next(store) for _ in range(3)}
        listener.until(lambda it: it.ended)
        assert listener.heard[-1].name == "batch"
        assert listener.heard[-1].data["counts"]["done"] == 2
        assert listener.heard[-1].data["finished_at"] is not None
        for design_id in ended - {other}:
            assert listener.states(design_id)[-1] == "done"
        assert listener.states(other) == []


def test_everything_of_an_owner_is_followed_and_nothing_of_others(store: Store, here: str) -> None:
    before = single(store, "before")
    foreign = single(store, "foreign", owner="someone")
    with Listener(f"{here}/v1/events") as listener:
        listener.until(lambda it: it.states(before) == ["queued"])
        later_foreign = single(store, "later", owner="someone")
        later = single(store, "later")
        listener.until(lambda it: it.states(later) == ["queued"])
        assert listener.states(foreign) == listener.states(later_foreign) == []
        assert not listener.ended


def test_a_design_or_batch_of_another_owner_is_unknown(store: Store, here: str) -> None:
    design_id = single(store, "foreign", owner="someone")
    batch_id = batch(store, "foreign", owner="someone")
    for path, code in (
        (f"designs/{design_id}", "design-not-found"),
        (f"designs/{design_id.upper()}", "design-not-found"),
        (f"batches/{batch_id}", "batch-not-found"),
    ):
        answer = httpx.get(f"{here}/v1/{path}/events")
        assert answer.status_code == 404
        assert answer.json()["type"] == f"/problems/{code}"


def test_a_quiet_stream_shows_that_it_is_still_there(
    here: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(events, "QUIET_S", 0.02)
    with Listener(f"{here}/v1/events") as listener:
        listener.until(lambda it: it.comments >= 2)


def test_head_tells_of_a_stream_without_opening_it(app: FastAPI, here: str) -> None:
    answer = httpx.head(f"{here}/v1/events")
    assert answer.status_code == 200
    assert answer.headers["content-type"].startswith("text/event-stream")
    assert feed_of(app).open_streams == 0


# -------------------------------------------------------------- coming back, two processes
@contextmanager
def two_processes(settings: Settings) -> Iterator[tuple[str, str]]:
    with ExitStack() as stack:
        first, second = (stack.enter_context(served(create_app(settings))) for _ in range(2))
        yield first, second


def test_both_processes_tell_what_a_third_has_changed(settings: Settings, store: Store) -> None:
    design_id = single(store, "followed")
    with two_processes(settings) as (first, second):
        path = f"/v1/designs/{design_id}/events"
        with Listener(first + path) as one, Listener(second + path) as other:
            plan_next(store)
            for listener in (one, other):
                listener.until(lambda it: it.ended)
                assert listener.states(design_id)[-1] == "done"


def test_who_comes_back_to_another_process_gets_what_changed_since(
    settings: Settings, store: Store
) -> None:
    quiet, busy = single(store, "quiet"), single(store, "busy")
    changed_long_ago(store, quiet)
    with two_processes(settings) as (first, second):
        with Listener(f"{first}/v1/events") as listener:
            listener.until(lambda it: it.states(busy) == ["queued"])
        jobs.cancel(store, busy)
        with Listener(f"{second}/v1/events", listener.heard[-1].id) as again:
            again.until(lambda it: it.states(busy) == ["cancelled"])
            assert "snapshot" not in again.names()
            assert again.states(quiet) == []


def changed_long_ago(store: Store, design_id: str) -> None:
    def work(session: Session) -> None:
        job = session.get_one(JobRow, design_id)
        job.changed_at -= 3_600_000_000

    store.write(work)


def test_who_comes_back_and_knows_the_end_is_told_not_to_come_again(
    store: Store, here: str
) -> None:
    batch_id = batch(store, "one")
    design_id = plan_next(store)
    newest = changes.newest(store)
    for path, last in ((f"designs/{design_id}", "state"), (f"batches/{batch_id}", "batch")):
        heard = {"Last-Event-ID": str(newest)}
        assert httpx.get(f"{here}/v1/{path}/events", headers=heard).status_code == 204
        with Listener(f"{here}/v1/{path}/events", newest - 1) as listener:
            listener.until(lambda it: it.ended)
            assert listener.states(design_id) == ["done"]
            assert listener.names()[-1] == last


def test_an_id_from_a_later_time_than_any_change_begins_anew(store: Store, here: str) -> None:
    single(store, "one")
    with Listener(f"{here}/v1/events", changes.newest(store) + 3_600_000_000) as listener:
        listener.until(lambda it: it.names() == ["snapshot", "state"])


def test_an_id_that_is_no_number_is_refused_by_name(here: str) -> None:
    answer = httpx.get(f"{here}/v1/events", headers={"Last-Event-ID": "yesterday"})
    assert answer.status_code == 422
    assert answer.json()["faults"][0]["field"] == "Last-Event-ID"


def test_who_missed_too_much_begins_anew(
    store: Store, here: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(event_start, "_MOST_MISSED", 2)
    monkeypatch.setattr(event_start, "MOST_AT_START", 2)
    before = changes.newest(store)
    batch(store, "one", "two", "three")
    with Listener(f"{here}/v1/events", before) as listener:
        listener.until(lambda it: it.names() == ["snapshot", "state", "state"])
        assert listener.heard[0].data == {"states": 2, "complete": False}


def test_a_change_that_takes_effect_after_a_later_one_is_told(
    shared_postgres_settings: Settings,
) -> None:
    app = create_app(shared_postgres_settings)
    engine = create_engine(shared_postgres_settings.database_url)
    with served(app) as here:
        store: Store = app.state.store
        slow, quick = single(store, "slow"), single(store, "quick")
        with (
            Listener(f"{here}/v1/events") as listener,
            engine.begin() as transaction,
        ):
            stamp = "CAST(EXTRACT(EPOCH FROM clock_timestamp()) * 1000000 AS BIGINT)"
            transaction.execute(
                text(
                    f"UPDATE jobs SET state = 'cancelled', changed_at = {stamp} "  # noqa: S608  # no input
                    f"WHERE design_id = '{slow}'"
                )
            )
            jobs.cancel(store, quick)
            listener.until(lambda it: it.states(quick) == ["queued", "cancelled"])
            transaction.commit()
            listener.until(lambda it: it.states(slow) == ["queued", "cancelled"])
            moments = {each.data["id"]: each.id for each in listener.heard[1:]}
            assert moments[slow] < moments[quick]
    engine.dispose()


@pytest.fixture
def shared_postgres_settings(request: pytest.FixtureRequest) -> Settings:
    return short_lived(request.getfixturevalue("shared_database"))


def test_of_two_changes_within_one_tick_of_the_clock_the_second_is_told_too(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    single(store, "one")
    [change] = changes.since(store, owner=None, after_us=0, limit=10)
    seen = change_feed._Seen(0)
    for state in ("running", "running", "done"):
        now = change.model_copy(update={"state": state})
        monkeypatch.setattr(changes, "since", lambda *_, found=(now,), **__: list(found))
        fresh = seen.look(store)
        assert [each.state for each in fresh] == ([] if state == change.state else [state])
        change = now


def test_all_pages_of_what_changed_are_told_once(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(change_feed, "_PAGE", 2)
    seen = change_feed._Seen(changes.newest(store))
    batch(store, *"abcde")
    assert len({each.id for each in seen.look(store)}) == 5
    assert seen.look(store) == []


def test_after_a_while_of_quiet_nothing_is_looked_at_again(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    single(store, "one")
    seen = change_feed._Seen(0)
    assert len(seen.look(store)) == 1
    asked: list[int] = []

    def since(_store: Store, *, overlap_us: int, **_: object) -> list[Change]:
        asked.append(overlap_us)
        return []

    monkeypatch.setattr(changes, "since", since)
    seen.look(store)
    seen._at_s -= 3.0
    seen.look(store)
    seen._at_s -= 10.0
    seen.look(store)
    assert 4e6 < asked[0] <= 5e6
    assert 1e6 < asked[1] <= 2e6
    assert asked[2] == 0


# ------------------------------------------------------------------------- bounds
def test_the_store_is_read_while_a_stream_is_open_and_not_otherwise(
    app: FastAPI, here: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    looked = threading.Semaphore(0)
    look = change_feed._Seen.look

    def counted(seen: change_feed._Seen, store: Store) -> list[Change]:
        looked.release()
        return look(seen, store)

    monkeypatch.setattr(change_feed._Seen, "look", counted)
    assert not looked.acquire(timeout=0.2)
    with Listener(f"{here}/v1/events") as one, Listener(f"{here}/v1/events"):
        assert looked.acquire(timeout=10.0)
        one.until(lambda _: feed_of(app).open_streams == 2)
    one.until(lambda _: feed_of(app).open_streams == 0)
    reader = feed_of(app)._reader
    one.until(lambda _: reader is None or reader.done())
    while looked.acquire(blocking=False):
        pass
    assert not looked.acquire(timeout=0.2)


def test_no_more_streams_are_open_than_may_be(settings: Settings, store: Store) -> None:
    app = create_app(settings.model_copy(update={"most_streams": 1}), store)
    with served(app) as here:
        with Listener(f"{here}/v1/events") as listener:
            refused = httpx.get(f"{here}/v1/events")
            assert refused.status_code == 503
            assert refused.json()["type"] == "/problems/too-many-streams"
            assert "Retry-After" in refused.headers
            assert httpx.get(f"{here}{refused.json()['type']}").status_code == 200
        listener.until(lambda _: feed_of(app).open_streams == 0)
        with Listener(f"{here}/v1/events") as listener:
            assert listener.status == 200


def test_a_refused_stream_leaves_room_for_another(app: FastAPI, here: str) -> None:
    assert httpx.get(f"{here}/v1/designs/unknown/events").status_code == 404
    assert feed_of(app).open_streams == 0


def state(about: str, step: int) -> Event:
    return Event("state", about, step, f'{{"step": {step}}}')


def test_a_slow_listener_gets_the_newest_of_each_design() -> None:
    async def follow() -> list[Event]:
        stream = Stream(Topic("owner", "local"))
        for step in range(5):
            stream.put(state("one", step))
            stream.put(state("two", step))
        return await stream.take(1.0)

    assert asyncio.run(follow()) == [state("one", 4), state("two", 4)]


def test_a_listener_that_fell_too_far_behind_begins_anew(
    app: FastAPI, store: Store, here: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(change_feed, "MOST_PENDING", 2)
    with Listener(f"{here}/v1/events") as listener:
        listener.until(lambda it: it.names() == ["snapshot"])
        batch(store, "one", "two", "three")
        listener.until(lambda it: it.names()[1:] == ["snapshot", "state", "state", "state"])
        later = single(store, "later")
        listener.until(lambda it: it.states(later) == ["queued"])
    assert all(len(each._pending) <= 2 for each in set().union(*feed_of(app)._streams.values()))


def test_a_listener_that_takes_nothing_for_long_is_given_up(
    app: FastAPI, here: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    del here  # it has the application running, with its feed
    monkeypatch.setattr(events, "STALLED_S", 0.05)

    async def listen() -> None:
        opened = asyncio.Event()

        async def receive() -> Message:
            await asyncio.Event().wait()
            raise AssertionError

        async def send(message: Message) -> None:
            if message["type"] == "http.response.body":
                opened.set()
                await asyncio.Event().wait()

        feed = ChangeFeed(app.state.store, 1)
        app.state.change_feed, kept = feed, app.state.change_feed
        scope = {
            "type": "http",
            "method": "GET",
            "path": "/v1/events",
            "query_string": b"",
            "headers": [],
        }
        try:
            await asyncio.wait_for(app(scope, receive, send), 10.0)
        finally:
            app.state.change_feed = kept
        assert opened.is_set()
        assert feed.open_streams == 0
        feed.close()

    asyncio.run(listen())


# --------------------------------------------------------------- outages and the end
def test_streams_outlive_a_store_that_is_away(
    store: Store,
    here: str,
    monkeypatch: pytest.MonkeyPatch,
    caplog: pytest.LogCaptureFixture,
) -> None:
    since, away, failed = changes.since, threading.Event(), [0]

    def failing(*given: object, **named: object) -> list[Change]:
        if failed[0] < 3:
            failed[0] += 1
            raise StoreUnavailable("invented")
        away.set()
        return since(*given, **named)  # type: ignore[arg-type]  # passed on as it came

    design_id = single(store, "one")
    with Listener(f"{here}/v1/designs/{design_id}/events") as listener:
        monkeypatch.setattr(changes, "since", failing)
        assert away.wait(10.0)
        jobs.cancel(store, design_id)
        listener.until(lambda it: it.ended)
        assert listener.states(design_id) == ["queued", "cancelled"]
    told = [each for each in caplog.records if "no events" in each.getMessage()]
    assert [each.levelname for each in told] == ["WARNING"]


def test_a_server_that_stops_ends_its_streams(app: FastAPI) -> None:
    with served(app) as here:
        listener = Listener(f"{here}/v1/events").__enter__()
    # `served` has seen the server stop; a listener is free to come back elsewhere.
    listener.until(lambda it: it.ended)


def test_the_description_tells_of_streams_and_what_they_carry(settings: Settings) -> None:
    description = create_app(settings).openapi()
    assert {"Change", "Snapshot", "Batch"} <= set(description["components"]["schemas"])
    for path in ("/v1/designs/{design_id}/events", "/v1/batches/{batch_id}/events", "/v1/events"):
        answer = description["paths"][path]["get"]["responses"]["200"]
        assert list(answer["content"]) == ["text/event-stream"]
        assert "`state` (Change)" in answer["description"]


def test_a_batch_put_in_at_once_is_told_without_its_requests(store: Store) -> None:
    request = batch_request(*(str(number) for number in range(20)))
    batches.submit(store, request, idempotency_key=None)
    told = changes.since(store, owner="local", after_us=0, limit=100)
    assert len(told) == 20
    assert all("bands" not in each.model_dump() for each in told)
