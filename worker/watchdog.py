"""The watchdog of a Celery worker: notices that it has stopped listening, and ends it.

After a broker has come back a worker may go on living without hearing anything, and answer
whoever asks how it is. What tells is that work waits, that the broker answers and that an idle
process of this very worker rings, yet no process of it hears a ring. Processes note this in
memory that they share; the main process looks there, and ends for its supervisor to start it
again.
"""

from __future__ import annotations

import logging
import mmap
import threading
import time
from collections.abc import Callable
from typing import Final

import redis

_log = logging.getLogger(__name__)

#: Status of a worker that ended itself because it had stopped listening.
EXIT_DEAF: Final = 76

_LOOK_S: Final = 0.5
_PATIENCE_S: Final = 2.0
#: Places in the shared memory: since when rings go unheard, when this was last seen, the verdict.
_SINCE, _SEEN, _DEAF = range(3)


class Watchdog:
    """What the processes of one worker know together of its hearing.

    Made before the fork. Its numbers have no lock that a killed process could keep; each is
    written whole, and whoever comes second only says the same again.

    Parameters
    ----------
    deaf_s : float
        Rings that go unheard for so long mean that the worker has stopped listening.
    """

    def __init__(self, deaf_s: float) -> None:
        self._deaf_s = deaf_s
        self._shared = memoryview(mmap.mmap(-1, 3 * 8)).cast("d")

    def heard(self) -> None:
        """Note that a ring was heard, or that there is nothing to be heard."""
        self._shared[_SINCE] = 0.0

    def unheard(self) -> None:
        """Note that an idle process has rung, by a broker that answers, while work waits."""
        moment_s = time.monotonic()
        # Seen last too long ago to know what was between: the process was frozen, say.
        lapsed = moment_s - self._shared[_SEEN] > self._deaf_s / 2.0
        if lapsed or not self._shared[_SINCE]:
            self._shared[_SINCE] = moment_s
        self._shared[_SEEN] = moment_s
        if moment_s - self._shared[_SINCE] >= self._deaf_s:
            self._shared[_DEAF] = 1.0

    @property
    def is_deaf(self) -> bool:
        """Whether the worker has stopped listening; once so, it stays so."""
        return self._shared[_DEAF] != 0.0

    def watch(self, end: Callable[[], None]) -> None:
        """Look in the main process, from a thread that holds nothing a fork could copy.

        Parameters
        ----------
        end : callable
            Ends the process.
        """

        def look() -> None:
            while not self.is_deaf:
                time.sleep(_LOOK_S)
            _log.error(
                "no ring was heard for %.0f s although work waits and the broker answers: ending, "
                "to be started again",
                self._deaf_s,
            )
            end()

        threading.Thread(target=look, name="watchdog", daemon=True).start()


def broker_answers(redis_url: str) -> bool:
    """Whether the broker answers at all; if not, nobody can hear a ring."""
    client = redis.Redis.from_url(
        redis_url, socket_timeout=_PATIENCE_S, socket_connect_timeout=_PATIENCE_S
    )
    try:
        client.ping()
    except (redis.RedisError, OSError):
        return False
    finally:
        client.close()
    return True
