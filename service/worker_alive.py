"""Whether a worker of this machine, or of this container, is alive in the store.

Run as ``python -m service.worker_alive``, by whoever watches over workers: exit status 0 if one
was seen lately or is in the middle of a job, 1 if none was or the store does not answer.
"""

from __future__ import annotations

import socket
import sys
from contextlib import closing
from typing import Final

from service.errors import SpanwrightError, StoreUnavailable
from service.settings import settings_here
from service.store import workers
from service.store.connection import make_engine
from service.store.session import Store

#: Whoever asks asks again, and must not be kept waiting.
_PATIENCE_S: Final = 2.0


def main() -> None:
    """Look, and say what was seen."""
    here = socket.gethostname()
    try:
        # Not opened as elsewhere: a look must not migrate.
        with closing(Store(make_engine(settings_here().database_url), _PATIENCE_S)) as store:
            alive = [each for each in workers.alive(store) if each.host == here]
    except StoreUnavailable as error:
        raise SystemExit(f"Nothing is known of workers: {error}") from error
    except SpanwrightError as error:
        raise SystemExit(str(error)) from error
    if not alive:
        raise SystemExit(f"No worker of {here} was seen within {workers.ALIVE_S:.0f} s.")
    sys.stdout.write(f"{len(alive)} alive on {here}: {', '.join(each.name for each in alive)}\n")


if __name__ == "__main__":
    main()
