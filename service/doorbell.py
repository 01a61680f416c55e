"""The doorbell: tells workers that work has come, and may be lost without harm.

A ring carries nothing; whoever hears it looks into the store. It is sent after the commit, in
bounded time, and a broker that is away is not the submitter's trouble.
"""

from __future__ import annotations

import logging
from typing import Final

from celery import Celery

from service.settings import Settings

_log = logging.getLogger(__name__)

TASK: Final = "spanwright.doorbell"

#: A broker that does not answer may hold a ring up for so long.
_PATIENCE_S: Final = 2.0

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
            self._app = Celery("doorbell", broker=settings.redis_url)
            self._app.conf.update(
                task_ignore_result=True,
                task_publish_retry=False,
                broker_transport_options=dict(TRANSPORT),
            )

    def ring(self) -> None:
        """Ring once; failures are logged and swallowed."""
        if self._app is None:
            return
        try:
            self._app.send_task(TASK, retry=False)
        except Exception as error:  # noqa: BLE001  # whatever the broker does, the job is stored and the sweep finds it
            _log.warning(
                "the doorbell did not ring, workers will find the job by sweeping: %s", error
            )

    def close(self) -> None:
        """Give back the connection to the broker."""
        if self._app is not None:
            self._app.close()
