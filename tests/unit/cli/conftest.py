"""How tests type commands."""

import sys
from collections.abc import Callable
from dataclasses import dataclass

import pytest

from worker.cli import main


@dataclass(frozen=True)
class Ended:
    """What a command printed, and the status it ended with."""

    status: int
    out: str
    err: str


Type = Callable[..., Ended]


@pytest.fixture
def typed(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Type:
    """Type a command and see what it prints; long lines are joined again."""

    def run(*words: str) -> Ended:
        monkeypatch.setattr(sys, "argv", ["spanwright", *words])
        monkeypatch.setenv("COLUMNS", "100")
        try:
            main()
        except SystemExit as end:
            status = int(end.code or 0)
        else:
            status = 0
        captured = capsys.readouterr()
        return Ended(status, captured.out, captured.err)

    return run
