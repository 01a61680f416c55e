"""Applications on free ports of the loopback, and listeners to their events."""

from __future__ import annotations

import json
import socket
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass, field
from typing import Any, Self

import httpx
import uvicorn
from fastapi import FastAPI

from service.api.server import Server
from tests.service.waiting import until

#: Patience of a listener, far beyond what anything tested takes.
_PATIENCE_S = 30.0


@contextmanager
def served(app: FastAPI) -> Iterator[str]:
    """The address of an application, as long as the context lasts; it must stop in time."""
    with socket.create_server(("127.0.0.1", 0)) as listener:
        server = Server(uvicorn.Config(app, log_config=None, access_log=False, ws="none"))
        thread = threading.Thread(target=server.run, kwargs={"sockets": [listener]}, daemon=True)
        thread.start()
        until(lambda: server.started or not thread.is_alive())
        assert server.started, "the server did not start"
        yield f"http://127.0.0.1:{listener.getsockname()[1]}"
        server.should_exit = True
        thread.join(10.0)
        assert not thread.is_alive(), "the server did not stop"


@dataclass(frozen=True, slots=True)
class Heard:
    """One event as it was heard."""

    name: str
    id: int
    data: Any


@dataclass(slots=True)
class Listener:
    """Listens to a stream of events in a thread of its own, by the rules of section 9.2.6."""

    url: str
    last_event_id: int | None = None
    status: int = 0
    headers: httpx.Headers = field(default_factory=httpx.Headers)
    retry_ms: int | None = None
    comments: int = 0
    heard: list[Heard] = field(default_factory=list)
    ended: bool = False
    _socket: socket.socket | None = None
    _thread: threading.Thread | None = None

    def __enter__(self) -> Self:
        self._thread = threading.Thread(target=self._listen, daemon=True)
        self._thread.start()
        until(lambda: self.status)
        return self

    def __exit__(self, *_: object) -> None:
        # Closing alone would not wake the thread that reads.
        if self._socket is not None:
            with suppress(OSError):
                self._socket.shutdown(socket.SHUT_RDWR)

    def until(self, found: Callable[[Self], object]) -> None:
        until(lambda: found(self), _PATIENCE_S)

    def states(self, design_id: str) -> list[str]:
        """States of a design as they were told, without repetition."""
        told = [each.data["state"] for each in self.heard if each.data.get("id") == design_id]
        return [state for index, state in enumerate(told) if told[index - 1 : index] != [state]]

    def names(self) -> list[str]:
        return [each.name for each in self.heard]

    def _listen(self) -> None:
        given = {} if self.last_event_id is None else {"Last-Event-ID": str(self.last_event_id)}
        try:
            with httpx.stream("GET", self.url, headers=given, timeout=_PATIENCE_S) as answer:
                self._socket = answer.extensions["network_stream"].get_extra_info("socket")
                self.headers = answer.headers
                self.status = answer.status_code
                self._read(answer.iter_lines())
        except (httpx.HTTPError, OSError):
            # The test has closed the connection, or the server has.
            time.sleep(0)
        self.ended = True

    def _read(self, lines: Iterator[str]) -> None:
        fields: dict[str, str] = {}
        for line in lines:
            name, _, value = line.partition(":")
            value = value.removeprefix(" ")
            if line.startswith(":"):
                self.comments += 1
            elif name == "retry":
                self.retry_ms = int(value)
            elif line:
                fields[name] = value
            elif fields:
                data = json.loads(fields["data"])
                self.heard.append(Heard(fields["event"], int(fields["id"]), data))
                fields = {}
