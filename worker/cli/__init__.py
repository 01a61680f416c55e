"""The `spanwright` command: the one place where everything is put together."""

from worker.cli.commands import main

__all__ = ["main"]
