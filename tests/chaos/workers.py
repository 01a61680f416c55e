"""The workers under test: processes that are killed, frozen and started again."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from dataclasses import dataclass, field
from pathlib import Path
from types import TracebackType
from typing import Final, Literal, Self

from service.settings import Settings
from tests.service.databases import environment
from tests.service.servers import ended_with_us

Form = Literal["embedded", "celery"]

CHECKOUT: Final = Path(__file__).parents[2]
_EMBEDDED: Final = "-m {package}.embedded"
_CELERY: Final = (
    "-m celery --app {package}.celery_app worker --pool prefork --concurrency {children} "
    "--hostname worker-{index}@%h --without-gossip --without-mingle --loglevel warning"
)
_STOP_PATIENCE_S: Final = 40.0


@dataclass(slots=True)
class Workers:
    """Main processes of one form, each with as many processes below it as the settings say.

    A main process leads a process group of its own, with all that is below it. The package
    holds what they start with, ``embedded`` and ``celery_app``, which know the planning; it
    finds what it must know in the variables.
    """

    form: Form
    settings: Settings
    number: int
    log: Path
    variables: dict[str, str]
    package: str = "tests.chaos"
    mains: list[subprocess.Popen[bytes]] = field(default_factory=list)

    def start(self, index: int) -> None:
        """Start a worker in the place of one that has ended, or a new one."""
        template = _EMBEDDED if self.form == "embedded" else _CELERY
        command = template.format(package=self.package, index=index, children=self.settings.workers)
        with self.log.open("ab") as log:
            main = subprocess.Popen(
                ended_with_us([sys.executable, *command.split()]),
                cwd=CHECKOUT,
                env=os.environ | self._environment(),
                stdout=log,
                stderr=log,
                start_new_session=True,
            )
        self.mains[index : index + 1] = [main]

    def below(self, index: int) -> list[int]:
        """Processes of a worker's group that its main process started."""
        return [pid for pid, parent in _parents().items() if parent == self.mains[index].pid]

    def send(self, index: int, how: signal.Signals) -> None:
        """Send a signal to a worker with all that is below it."""
        os.killpg(self.mains[index].pid, how)

    def kill(self, index: int) -> None:
        """Kill a worker with all that is below it, at once."""
        self.send(index, signal.SIGKILL)
        self.mains[index].wait(_STOP_PATIENCE_S)

    def kill_main(self, index: int) -> None:
        """Kill the main process only; what is below it must find out by itself."""
        self.mains[index].kill()
        self.mains[index].wait(_STOP_PATIENCE_S)

    def __enter__(self) -> Self:
        """Start them all."""
        for index in range(self.number):
            self.start(index)
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        """Ask them to stop, and see that they do."""
        for main in self.mains:
            main.terminate()
        for main in self.mains:
            try:
                main.wait(_STOP_PATIENCE_S)
            except subprocess.TimeoutExpired:
                os.killpg(main.pid, signal.SIGKILL)
                main.wait()
                raise

    def _environment(self) -> dict[str, str]:
        # Celery refuses to be root, as whom a container of a test may run, unless told.
        return environment(self.settings) | self.variables | {"C_FORCE_ROOT": "1"}


def runs(pid: int) -> bool:
    """Whether a process lives; one that has ended may still wait to be taken note of."""
    return _status(pid) not in (None, "Z")


def _parents() -> dict[int, int]:
    """The parent of every process of this machine."""
    pids = (int(entry.name) for entry in Path("/proc").iterdir() if entry.name.isdigit())
    found = {pid: _fields(pid) for pid in pids}
    return {pid: int(fields[1]) for pid, fields in found.items() if fields}


def _status(pid: int) -> str | None:
    fields = _fields(pid)
    return fields[0] if fields else None


def _fields(pid: int) -> list[str]:
    """What the kernel tells of a process from its status on; nothing if it is gone."""
    try:
        told = Path(f"/proc/{pid}/stat").read_text()
    except (FileNotFoundError, ProcessLookupError):
        return []
    return told.rpartition(")")[2].split()
