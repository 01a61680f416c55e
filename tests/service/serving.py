"""An application served by uvicorn on a free port of the loopback, for as long as a test lasts."""

from __future__ import annotations

import socket
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager

import httpx
import uvicorn
from fastapi import FastAPI


@contextmanager
def served(app: FastAPI) -> Iterator[httpx.Client]:
    """A client of the application while it is served."""
    with socket.create_server(("127.0.0.1", 0)) as listener:
        server = uvicorn.Server(uvicorn.Config(app, log_level="warning", ws="none"))
        thread = threading.Thread(target=server.run, kwargs={"sockets": [listener]})
        thread.start()
        while not server.started:
            assert thread.is_alive(), "the server did not start"
            time.sleep(0.005)
        with httpx.Client(base_url=f"http://127.0.0.1:{listener.getsockname()[1]}") as client:
            yield client
        server.should_exit = True
        thread.join()
