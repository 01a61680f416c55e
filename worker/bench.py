"""The bench as a process of its own: what-ifs keep no request of the API waiting for numerics.

One process answers one what-if after the other and keeps the last tables of the ground warm.
Few may wait for it, none for long; a process that takes too long is ended and started again.
"""

from __future__ import annotations

import logging
import multiprocessing
import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from multiprocessing.connection import Connection
from multiprocessing.process import BaseProcess
from typing import TYPE_CHECKING, Final, Protocol

from service.contracts.what_if import WhatIf, WhatIfRequest
from service.errors import BenchBusy, BenchTooSlow, Fault, RequestRefused

if TYPE_CHECKING:
    from worker.engine.errors import EngineError

_log = logging.getLogger(__name__)

#: So many what-ifs may wait for the one that is answered, and each for so long.
MOST_WAITING: Final = 3
PATIENCE_S: Final = 2.0
#: The largest what-if takes well below a second; a process just started loads for some more.
LIMIT_S: Final = 8.0
_STOP_PATIENCE_S: Final = 2.0


class Answering(Protocol):
    """What answers within the process; must be importable by name."""

    def answer(self, asked: WhatIfRequest) -> WhatIf:
        """Answer one what-if."""
        ...


class ProcessBench:
    """A bench with its process.

    Parameters
    ----------
    make : callable, optional
        Makes what answers, within the process; the numerics by default, loaded only there.
    limit_s, patience_s : float
        How long an answer may take, and how long one may wait for its turn.
    """

    def __init__(
        self,
        make: type[Answering] | None = None,
        *,
        limit_s: float = LIMIT_S,
        patience_s: float = PATIENCE_S,
    ) -> None:
        self._make, self._limit_s, self._patience_s = make, limit_s, patience_s
        self._room = threading.BoundedSemaphore(1 + MOST_WAITING)
        self._turn = threading.Lock()
        self._process: BaseProcess | None = None
        self._ours: Connection | None = None

    def start(self) -> None:
        """Have the process load what it needs before the first question."""
        with self._turn:
            self._running()

    def try_wire(self, asked: WhatIfRequest) -> WhatIf:
        """Ask the process; see `service.bench.Bench`."""
        with self._own_turn():
            return self._ask(self._running(), asked)

    def close(self) -> None:
        """End the process."""
        with self._turn:
            self._end()

    @contextmanager
    def _own_turn(self) -> Iterator[None]:
        if not self._room.acquire(blocking=False):
            raise BenchBusy("Others wait for an answer already.")
        try:
            if not self._turn.acquire(timeout=self._patience_s):
                raise BenchBusy("The wires before took too long.")
            try:
                yield
            finally:
                self._turn.release()
        finally:
            self._room.release()

    def _ask(self, ours: Connection, asked: WhatIfRequest) -> WhatIf:
        try:
            ours.send(asked)
            if not ours.poll(self._limit_s):
                self._end()
                raise BenchTooSlow(self._limit_s)
            kind, found = ours.recv()
        except (EOFError, OSError) as error:
            self._end()
            _log.warning("the process of the bench ended: %s", error)
            raise BenchBusy("The process that answers has ended and is started again.") from error
        if kind == "answer" and isinstance(found, WhatIf):
            return found
        if kind == "refused":
            raise RequestRefused(found)
        raise RuntimeError(f"the bench met a fault: {found}")

    def _running(self) -> Connection:
        if self._ours is not None and self._process is not None and self._process.is_alive():
            return self._ours
        self._end()
        context = multiprocessing.get_context("spawn")
        self._ours, theirs = context.Pipe()
        with theirs:
            # It must not outlive its owner, whatever happens to it.
            self._process = context.Process(
                target=_answer, args=(self._make, theirs), name="bench", daemon=True
            )
            self._process.start()
        return self._ours

    def _end(self) -> None:
        if self._ours is not None:
            self._ours.close()
        if self._process is not None:
            self._process.terminate()
            self._process.join(_STOP_PATIENCE_S)
            if self._process.is_alive():
                self._process.kill()
                self._process.join()
            self._process.close()
        self._ours = self._process = None


def _answer(make: type[Answering] | None, theirs: Connection) -> None:
    """The process: answer until the other end closes."""
    # A Ctrl-C reaches the whole process group; the owner closes the pipe.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    from worker.engine.errors import EngineError  # noqa: PLC0415  # numerics are loaded only here

    answering = _trials() if make is None else make()
    with suppress(EOFError, OSError):
        while True:
            asked: WhatIfRequest = theirs.recv()
            try:
                theirs.send(("answer", answering.answer(asked)))
            except EngineError as error:
                theirs.send(("refused", [_fault(error)]))
            except (ArithmeticError, LookupError, TypeError, ValueError) as error:
                _log.exception("a what-if met a fault")
                theirs.send(("fault", f"{type(error).__name__}: {error}"))


def _trials() -> Answering:
    from worker.trying import Trials  # noqa: PLC0415  # as above

    return Trials()


def _fault(error: EngineError) -> Fault:
    """What the engine refuses, as a fault of the field that is moved."""
    quantity = str(getattr(error, "quantity", ""))
    field = "length_m"
    if "height" in quantity:
        field = "height_m"
    elif "radius" in quantity or "radii" in quantity or "diameter" in quantity:
        field = "conductor"
    return Fault(
        field,
        f"{getattr(error, 'value', '')}"[:40],
        f"the models do not cover this wire: {error}.",
        "Move it back into that range.",
        "wire-not-covered",
    )
