"""A service standing on this machine: API, pages and workers from one command."""

from __future__ import annotations

import socket
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import closing, contextmanager
from importlib.resources import files
from typing import Final

import uvicorn

from service import journal
from service.api.app import create_app
from service.api.server import Server
from service.contracts.request import DesignRequest, parse_request
from service.errors import SpanwrightError
from service.settings import Settings, settings_here
from service.store.session import open_store
from worker import dispatcher
from worker.bench import ProcessBench

_START_PATIENCE_S: Final = 30.0
_STOP_PATIENCE_S: Final = 90.0
#: Answers under way may take so long to come to their end.
_ANSWERS_S: Final = 30


def serve_until_stopped(announce: Callable[[str], None], *, workers: bool = True) -> None:
    """Run the API and, unless told otherwise, the workers until a signal stops them.

    Parameters
    ----------
    announce : callable
        Called with the address once the service is about to answer.
    workers : bool
        False where workers run elsewhere, as in the scaled form.
    """
    settings = settings_here()
    journal.set_up(settings)
    _open_once(settings)
    with (
        closing(ProcessBench()) as bench,
        _workers(settings) if workers else _no_workers(),
    ):
        server = _server(settings, settings.port, bench)
        bench.start()
        announce(f"http://{settings.host}:{settings.port}/")
        server.run()


@contextmanager
def standing_service() -> Iterator[str]:
    """A service with workers on a free loopback port, for as long as the context lasts."""
    settings = settings_here()
    journal.set_up(settings)
    _open_once(settings)
    port = _free_port()
    bench = ProcessBench()
    server = _server(settings, port, bench)
    thread = threading.Thread(target=server.run, name="api", daemon=True)
    with closing(bench), _workers(settings):
        thread.start()
        try:
            _await_start(server, thread)
            yield f"http://127.0.0.1:{port}"
        finally:
            server.should_exit = True
            thread.join(_STOP_PATIENCE_S)


def demo_request() -> DesignRequest:
    """The demonstration station: an invented harbour office with a believable band list."""
    return parse_request((files("worker.cli") / "demo_request.json").read_text(encoding="utf-8"))


def _open_once(settings: Settings) -> None:
    # What is wrong with the database is told before anything starts, not by each part of it.
    open_store(settings).close()


@contextmanager
def _workers(settings: Settings) -> Iterator[None]:
    stop = threading.Event()
    thread = threading.Thread(
        target=dispatcher.serve, args=(settings,), kwargs={"stop": stop}, name="dispatcher"
    )
    thread.start()
    try:
        yield
    finally:
        stop.set()
        thread.join(_STOP_PATIENCE_S)


@contextmanager
def _no_workers() -> Iterator[None]:
    yield


def _server(settings: Settings, port: int, bench: ProcessBench) -> uvicorn.Server:
    config = uvicorn.Config(
        create_app(settings, bench=bench),
        host=settings.host,
        port=port,
        log_level="warning",
        access_log=False,
        server_header=False,
        # What it tells goes the way of everything else.
        log_config=None,
        timeout_graceful_shutdown=_ANSWERS_S,
    )
    return Server(config)


def _await_start(server: uvicorn.Server, thread: threading.Thread) -> None:
    deadline_s = time.monotonic() + _START_PATIENCE_S
    while not server.started:
        if not thread.is_alive() or time.monotonic() > deadline_s:
            raise SpanwrightError("The service did not start; the log above says why.")
        time.sleep(0.02)


def _free_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])
