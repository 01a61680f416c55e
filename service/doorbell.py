"""The doorbell: tells workers that work has come, and may be lost without harm.

A ring carries nothing; whoever hears it looks into the store. It is sent after the commit, from
a thread of its own, so that a broker that is away or silent is not the submitter's trouble.
"""

from __future__ import annotations

import logging
import threading
from typing import Final

from celery import Celery

from service.settings import Settings

_log = logging.getLogger(__name__)

TASK: Final = "spanwright.doorbell"

#: A broker that cannot be reached, or is silent, holds up the ringing thread for so long.
_PATIENCE_S: Final = 2.0
#: Closing waits for rings under way for so long.
_CLOSE_S: Final = 3.0
#: More rings than this need not wait at once: there are not that many workers to wake.
_MOST_WAITING: Final = 64

#: Broker settings for both sides of the bell; Redis by redis-py.
TRANSPORT: Final = {
    "visibility_timeout": 3600,
    "socket_timeout": 5,
    "socket_connect_timeout": _PATIENCE_S,
    "socket_keepalive": True,
    "health_check_interval": 10,
    "max_retries": 0,
}


class Doorbell:
    """Rings the broker of the settings; silent where there is none."""

    def __init__(self, settings: Settings) -> None:
        self._app: Celery | None = None
        if settings.redis_url is not None:
            self._app = Celery("doorbell", broker=settings.redis_url, set_as_current=False)
            self._app.conf.update(
                task_ignore_result=True,
                task_publish_retry=False,
                broker_transport_options=TRANSPORT | {"socket_timeout": _PATIENCE_S},
            )
        self._changed = threading.Condition()
        self._waiting = 0
        self._closed = False
        # Made at the first ring, for a thread would not survive the fork of a worker.
        self._thread: threading.Thread | None = None

    def ring(self) -> None:
        """Ring once; returns at once, and failures are logged and swallowed."""
        if self._app is None:
            return
        with self._changed:
            if self._closed:
                return
            self._waiting = min(self._waiting + 1, _MOST_WAITING)
            self._changed.notify()
            if self._thread is None:
                self._begin(self._app)

    def close(self) -> None:
        """Send what waits to be rung, for a short time, and give back the connection."""
        with self._changed:
            self._closed = True
            self._changed.notify()
        if self._thread is not None:
            self._thread.join(_CLOSE_S)
        if self._app is not None:
            self._app.close()

    def _begin(self, app: Celery) -> None:
        thread = threading.Thread(target=self._send, args=(app,), name="doorbell", daemon=True)
        try:
            thread.start()
        except RuntimeError as error:
            # The machine has no thread to spare just now, perhaps for the next ring.
            _log.warning("the doorbell did not ring: %s", error)
        else:
            self._thread = thread

    def _send(self, app: Celery) -> None:
        silent = False
        while self._take_one():
            try:
                app.send_task(TASK, retry=False)
            except Exception as error:  # noqa: BLE001  # whatever the broker does, the job is stored and a sweep finds it
                with self._changed:
                    # The broker is away: the other rings would only find out the same.
                    self._waiting = 0
                # Told once an outage, for it is rung again and again while work waits.
                _log.log(
                    logging.DEBUG if silent else logging.WARNING,
                    "the doorbell did not ring, workers will find the job by sweeping: %s",
                    error,
                )
                silent = True
            else:
                if silent:
                    _log.warning("the doorbell rings again")
                silent = False

    def _take_one(self) -> bool:
        with self._changed:
            self._changed.wait_for(lambda: self._waiting > 0 or self._closed)
            if self._waiting == 0:
                return False
            self._waiting -= 1
            return True
