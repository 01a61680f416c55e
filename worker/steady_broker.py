"""A connection to the broker that is tried again every two seconds, however long it was away.

Celery's own waits two seconds longer after each failure, up to 30, and takes no setting for it:
after an outage of half a minute workers would hear of nothing for another quarter.
"""

from __future__ import annotations

from typing import Any, Final

from celery.app.amqp import AMQP
from kombu import Connection

_PAUSE_S: Final = 2.0


class SteadyConnection(Connection):
    """A connection whose pauses between attempts do not grow."""

    def _ensure_connection(self, *args: Any, **kwargs: Any) -> Any:  # noqa: ANN401  # kombu's own signature, passed on
        steady = {"interval_start": _PAUSE_S, "interval_step": 0.0, "interval_max": _PAUSE_S}
        return super()._ensure_connection(*args, **steady | kwargs)


class SteadyBroker(AMQP):
    """What Celery makes its connections of."""

    Connection = SteadyConnection
